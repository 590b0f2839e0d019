"""What brickworks with a symmetry share: fresh gates after a start, and rotations about Z as their product control.

Their two-qubit gates act on |00>, |11> and on |01>, |10> apart. `one_qubit` is a single layer at the start, which
makes the state that spreads: one-qubit layers between the gates would break the symmetry, except rotations about Z,
which the gates hold already and the product control is made of.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from rcbench.arrays import ComplexArray
from rcbench.circuits import native
from rcbench.circuits.families.family import Block, Blocks, Task, Turns, compiled, layered, start
from rcbench.circuits.gates import gate_matrices
from rcbench.randomness import Draw

Gates = Callable[[Draw, int], ComplexArray]  # (draw, m) to (m, 4, 4)


def two_blocks(even: ComplexArray, odd: ComplexArray) -> ComplexArray:
    """(m, 4, 4) gates that act by `even` on |00>, |11> and by `odd` on |01>, |10>; both (m, 2, 2)."""
    out = np.zeros((len(even), 4, 4), dtype=np.complex128)
    out[:, 0:4:3, 0:4:3], out[:, 1:3, 1:3] = even, odd
    return out


def brickwork(task: Task, gates: Gates) -> Blocks:
    """The start, then layers of fresh gates."""
    first: list[Block] = [*start(task)]
    if not task.entangles:
        draw = task.draw("about z")
        angles = [2 * np.pi * draw.uniform(task.n_qubits) for _ in range(task.depth)]
        first += [Turns(native.euler_angles(gate_matrices("rz", each[:, None]))) for each in angles]
    else:
        draw, schedule = task.draw("two-qubit"), task.schedule()
        # one draw a layer: the words that a layer takes must not depend on how many layers follow
        unitaries = [gates(draw, len(pairs)) for pairs in schedule]
        if sum(map(len, schedule)):
            first += layered(schedule, compiled(task, np.concatenate(unitaries)))
    begin = len(first) - task.depth
    return Blocks(first, range(begin, len(first) + 1))
