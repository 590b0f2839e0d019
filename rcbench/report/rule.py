"""The rule of the bottom line, fixed here and printed in every report, and what a report does not show.

A report never calls a device scrambled because it agrees with a model of its noise, and never calls information kept
because an echo returned.
"""

from __future__ import annotations

KEPT_ABOVE = 0.5
RULE = (
    "Spread is complete at the first depth at which the mean over (butterfly, probe) pairs of |OTOC - scrambled "
    "value|, each pair averaged over instances first, lies within the OTOC margin and does not leave it again, while "
    "every probe's reference echo stands more than five of its standard errors above zero. The scrambled value is "
    "-1/(4^n - 1). Where a control that cannot spread falls as well, or the circuits without errors would not spread "
    "by that depth, spread is undecided.",
    "Without an OTOC, spread is read from the circuits: the first depth at which their ideal collision probability is "
    "within 10 % of the Porter-Thomas one, provided the cross-entropy fidelity shows that the device ran them. That "
    "is a weaker statement, about outcomes and not operators, and is marked as such.",
    "Kept ends where the collision-based self-fidelity first falls below the threshold p. Where collisions decide "
    "nothing, the cross-entropy fidelity bounds it from below. An echo alone never supports kept, and a self-fidelity "
    "beyond 1 by more than its margin decides nothing.",
    "Each interval holds the depths at which the confidence band of the curve meets the level, with straight lines "
    "between measured depths; ends are given as whole layers. What the data do not settle is called undecided.",
)
DISCLAIMER = (
    "Agreeing with the noise model means performing to budget. It is not evidence of scrambling: a device that only "
    "decoheres can agree with its noise model at every depth."
)
LIMITS = (
    "It shows what these circuits did on these qubits on these dates. It does not extend to other qubits, couplers, "
    "depths or days.",
    "A small OTOC or a uniform qubit is no evidence of spreading on its own: a decohered qubit looks the same. Only "
    "the spread and kept axes together say something.",
    "It tests the stated error budget, not causes. Where a row departs, the budget or the circuit is wrong; which "
    "one, and why, needs other measurements.",
    "Preparation and readout errors are in every number; readout correction is not applied unless a row says so.",
    "It is no acceptance decision. It defers to the laboratory's own acceptance procedure, its limits and its guard "
    "bands.",
)
