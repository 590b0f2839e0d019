"""Charge-conserving Haar brickwork, U(1): a phase on |00>, a Haar-random U(2) on |01>, |10>, a phase on |11>.

The number of ones is kept exactly. It cannot scramble: it diffuses, one site^2 a layer. `one_qubit` is a layer at the
start only: alternating gives a state of one charge, half filling on a line, in which any other number of ones is an
error; a random layer gives a mixture of all charges; none leaves |0...0>, to which nothing happens.

Source: Khemani, Vishwanath and Huse, PRX 8, 031057 (2018), arXiv:1710.09835; Rakovszky, Pollmann and von Keyserlingk,
PRX 8, 031058 (2018), arXiv:1710.09827.
"""

from __future__ import annotations

import numpy as np

from rcbench.arrays import ComplexArray
from rcbench.circuits.ensembles import haar_unitaries
from rcbench.circuits.families.family import STARTS, Blocks, Family, Task
from rcbench.circuits.families.symmetric import brickwork, two_blocks
from rcbench.randomness import Draw


def gates(draw: Draw, count: int) -> ComplexArray:
    """(count, 4, 4) independent random gates."""
    even = np.zeros((count, 2, 2), dtype=np.complex128)
    even[:, [0, 1], [0, 1]] = np.exp(2j * np.pi * draw.uniform(2 * count).reshape(count, 2))
    return two_blocks(even, haar_unitaries(draw, count, 2))


def blocks(task: Task) -> Blocks:
    """The start, then layers of fresh gates."""
    return brickwork(task, gates)


FAMILY = Family(
    about="random gates that keep the number of ones: charge diffuses",
    one_qubit=STARTS,
    plain="alternating",
    blocks=blocks,
)
