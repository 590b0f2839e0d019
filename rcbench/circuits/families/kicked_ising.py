"""Self-dual kicked Ising: exp(-i b sum X) exp(-i J sum ZZ - i sum h_j Z), again and again, with J = b = pi/4.

One period is one layer of ZZ a pattern of the schedule (two on a line, four on a grid) and one layer of fields and
kick, so a kick takes that many layers of depth. Fields h_j are drawn once a circuit, uniform within `disorder` of
`field`. With any fields and without detuning, the entanglement of a line or ring grows as fast as it can. `one_qubit`
makes the state that is kicked: quarter-turns and azimuth lay every spin into the x-y plane, where the growth begins
with the first kick; none leaves |0...0>, which costs a kick.

Source: Bertini, Kos and Prosen, PRX 9, 021033 (2019), arXiv:1812.05090.
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import TYPE_CHECKING

import numpy as np

from rcbench.arrays import FloatArray
from rcbench.circuits import native
from rcbench.circuits.families.family import (
    STARTS,
    Blocks,
    Family,
    Parameter,
    Period,
    Task,
    Turns,
    everywhere,
    repeated,
    start,
    zz_gate,
)
from rcbench.circuits.gates import gate_matrices, gate_matrix
from rcbench.circuits.schedule import patterns
from rcbench.device import Device

if TYPE_CHECKING:
    from rcbench.campaign import Experiment

PARAMETERS = (
    Parameter(key="coupling_detuning", default=0.0, low=-np.pi, high=np.pi),  # J - pi/4, radians
    Parameter(key="kick_detuning", default=0.0, low=-np.pi, high=np.pi),  # b - pi/4, radians
    Parameter(key="field", default=0.0, low=-np.pi, high=np.pi),  # radians a period
    Parameter(key="disorder", default=np.pi / 2, low=0, high=np.pi),  # half width of the fields; pi/2: any phase
)


def parameters(given: Mapping[str, object]) -> tuple[Parameter, ...]:
    """The same whatever is given."""
    return PARAMETERS


def fields(task: Task) -> FloatArray:
    """(n,) the longitudinal fields h_j of a circuit, in radians a period."""
    model = task.experiment.circuits.parameters
    spread = 2 * task.draw("fields").uniform(task.n_qubits) - 1
    return np.asarray(float(model["field"]) + float(model["disorder"]) * spread)


def blocks(task: Task) -> Blocks:
    """The start, then whole periods."""
    model = task.experiment.circuits.parameters
    quarter = np.pi / 4
    kick = gate_matrix("r", 2 * (quarter + float(model["kick_detuning"])), 0.0)
    turns = Turns(native.euler_angles(kick @ gate_matrices("rz", 2 * fields(task)[:, None])))
    layers = task.patterns()
    gates = []
    if task.entangles and any(layers):
        bond = zz_gate(task, 2 * (quarter + float(model["coupling_detuning"])))
        gates = [everywhere(pairs, bond) for pairs in layers]
    return repeated(task, start(task), [*gates, turns], period_layers(task.experiment, task.device))


def period_layers(experiment: Experiment, device: Device) -> int:
    """Layers of ZZ that hold every coupler once; one where there is none."""
    return max(1, len(patterns(device, experiment.qubits)))


def period(experiment: Experiment, device: Device) -> Period:
    """One kick."""
    return Period("kick", period_layers(experiment, device), 1.0, "kicks")


FAMILY = Family(
    about="kicked Ising: ZZ on all couplers, then fields and a kick, the same in every period",
    one_qubit=STARTS,
    plain="quarter-turns",
    blocks=blocks,
    parameters=parameters,
    period=period,
)
