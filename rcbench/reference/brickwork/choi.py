"""The brickwork as an operator: averaged purity and annealed tripartite mutual information of its Choi state.

Source of all: the label sums of `labels`; the quantities as in Hosur, Qi, Roberts and Yoshida, JHEP 02 (2016) 004,
arXiv:1511.04021.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from rcbench.arrays import FloatArray
from rcbench.reference.brickwork.labels import MOST_SITES, same_on_all, totals
from rcbench.reference.brickwork.layers import all_layers
from rcbench.reference.sizes import qubits_of, whole


def operator_purity(
    n_qubits: int, region_in: Sequence[int], region_out: Sequence[int], depth: int, *, q: int = 2, ring: bool = False
) -> FloatArray:
    """(depth + 1,) averaged tr rho_AC^2 of the Choi state after 0 to `depth` layers.

    Cost: 2^(n/2) times n a layer (32 sites, 20 layers: about a second).

    Args:
        n_qubits: 2 to 32. region_in, region_out: sites of the inputs A and of the outputs C. depth: layers, 0 or more.
        q: local dimension. ring: closed line of even length.
    Raises:
        InputError: values outside these.

    Source: see the module.
    """
    q, layers = whole("q", q, 2), all_layers(n_qubits, depth, ring=ring, most=MOST_SITES)
    start = same_on_all(n_qubits, 1, 0)
    start[list(qubits_of("region_in", region_in, n_qubits))] = 0, 1
    end = same_on_all(n_qubits, 1, 1 / q)  # over q^2 a site, the norm of the Choi state
    end[list(qubits_of("region_out", region_out, n_qubits))] = 1 / q, 1
    return totals(start, end, layers, q)


def operator_tmi_renyi2(
    n_qubits: int, region_in: Sequence[int], region_out: Sequence[int], depth: int, *, ring: bool = False
) -> FloatArray:
    """(depth + 1,) annealed Renyi-2 I3(A:C:D) of the Choi state, in nats: n ln 2 + ln P_AC + ln P_AD.

    D are the outputs outside C. Starts at 0 where A and C are the same sites, or one holds the other; tends to
    `haar.operator_tmi_renyi2`. A cut may not change in every second layer.

    Args, errors, cost: as `operator_purity`, twice; qubits only.

    Source: see the module.
    """
    inside = qubits_of("region_out", region_out, whole("n_qubits", n_qubits, 2, MOST_SITES))
    rest = [site for site in range(n_qubits) if site not in inside]
    both = [operator_purity(n_qubits, region_in, part, depth, ring=ring) for part in (inside, rest)]
    return np.asarray(n_qubits * np.log(2) + np.log(both[0]) + np.log(both[1]))
