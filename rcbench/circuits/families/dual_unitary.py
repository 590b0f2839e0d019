"""Dual-unitary brickwork: exp(-i (pi/4 XX + pi/4 YY + J ZZ)) on every pair, between random one-qubit layers.

The gate is unitary in space as in time, for any J and any one-qubit gates: correlations live on the light rays only,
and operators spread at the speed of the light cone. `coupling` is J in radians: 0 gives the class of iSWAP, pi/4
SWAP, which moves and does not scramble. Layers and depth are those of a brickwork. Between Haar layers (the default)
the gate is written without the one-qubit gates that its compilation ends in.

Source: Bertini, Kos and Prosen, Phys. Rev. Lett. 123, 210601 (2019), arXiv:1904.02140.
"""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from rcbench.arrays import ComplexArray
from rcbench.circuits.compile import Decomposition
from rcbench.circuits.ensembles import LAYERS
from rcbench.circuits.families.brickwork import interleaved, one_qubit_layers
from rcbench.circuits.families.family import Blocks, Family, Parameter, Task, compiled, everywhere

PARAMETERS = (Parameter(key="coupling", default=0.0, low=-np.pi, high=np.pi),)


def parameters(given: Mapping[str, object]) -> tuple[Parameter, ...]:
    """The same whatever is given."""
    return PARAMETERS


def gate(coupling: float) -> ComplexArray:
    """(4, 4) exp(-i (pi/4 XX + pi/4 YY + J ZZ)); coupling: J in radians."""
    same, moved = np.exp(-1j * coupling), -1j * np.exp(1j * coupling)
    return np.array([[same, 0, 0, 0], [0, 0, moved, 0], [0, moved, 0, 0], [0, 0, 0, same]])


def blocks(task: Task) -> Blocks:
    """One-qubit and two-qubit layers in turn."""
    circuits = task.experiment.circuits
    turns = one_qubit_layers(task, circuits.one_qubit)
    if not task.entangles:
        return interleaved(turns, None, task.depth)
    one = compiled(task, gate(float(circuits.parameters["coupling"]))[None])
    if circuits.one_qubit == "haar":
        one = without_outer_turns(one)
    return interleaved(turns, [everywhere(pairs, one) for pairs in task.schedule()], task.depth)


def without_outer_turns(one: Decomposition) -> Decomposition:
    """The same gates without the one-qubit gates at their ends: Haar layers around them make those superfluous.

    The ensemble stays the same, since a Haar-random gate times a fixed one is Haar-random; pulses are saved.
    """
    euler = one.euler.copy()
    rows = np.arange(len(one))
    euler[rows, 0] = euler[rows, one.count] = 0
    return Decomposition(one.native, one.count, euler, one.angles)


FAMILY = Family(
    about="dual-unitary gates between random one-qubit layers: everything moves at the speed of the light cone",
    one_qubit=LAYERS,
    plain="haar",
    blocks=blocks,
    parameters=parameters,
)
