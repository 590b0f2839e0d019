"""Matchgate brickwork, free fermions: Haar-random SU(2) on |00>, |11> and another one on |01>, |10>.

Along a line, Jordan and Wigner's transformation turns each gate into a Haar-random rotation SO(4) of the four Majorana
operators of its two qubits; so operators spread, diffusively, and never scramble. That holds on lines only: a matchgate
across a ring's closing coupler or between the rows of a grid is an interaction, and such couplings are refused.
`one_qubit` is a layer at the start only: none and alternating begin with a Gaussian state.

Source: Valiant, SIAM J. Comput. 31, 1229 (2002) and Terhal and DiVincenzo, Phys. Rev. A 65, 032325 (2002) for
matchgates and free fermions; Dias, Haque, Ribeiro and McClarty, arXiv:2102.09846, for random ones.
"""

from __future__ import annotations

from collections import Counter
from typing import TYPE_CHECKING

import numpy as np

from rcbench.arrays import ComplexArray
from rcbench.circuits.ensembles import haar_unitaries
from rcbench.circuits.families.family import STARTS, Blocks, Family, Task, distances
from rcbench.circuits.families.symmetric import brickwork, two_blocks
from rcbench.circuits.schedule import couplers_among
from rcbench.device import Device
from rcbench.errors import InputError
from rcbench.randomness import Draw
from rcbench.regions import write_regions

if TYPE_CHECKING:
    from rcbench.campaign import Experiment


def gates(draw: Draw, count: int) -> ComplexArray:
    """(count, 4, 4) independent random gates."""
    unitaries = haar_unitaries(draw, 2 * count, 2)
    special = unitaries / np.sqrt(np.linalg.det(unitaries))[:, None, None]
    return two_blocks(special[:count], special[count:])


def blocks(task: Task) -> Blocks:
    """The start, then layers of fresh gates."""
    return brickwork(task, gates)


def check(experiment: Experiment, device: Device) -> None:
    """Refuse couplings other than lines; dimers are lines of two qubits."""
    if experiment.circuits.family == "dimers":
        return
    couplers = couplers_among(device, experiment.qubits)
    degrees = Counter(label for pair in couplers for label in pair)
    crossings = sorted(label for label, degree in degrees.items() if degree > 2)
    allowed = "qubits that are coupled along a line, since elsewhere matchgates are not free fermions"
    if crossings:
        named = write_regions(sorted(experiment.qubits[label] for label in crossings))
        raise InputError("qubits", f"qubits with more than two couplers ({named})", allowed)
    parts = sum(steps == 0 for steps in distances(couplers).values())
    if len(couplers) > len(degrees) - parts:
        raise InputError("qubits", f"a ring of {device.name}", allowed)


FAMILY = Family(
    about="random matchgates, free fermions: operators spread and do not scramble",
    one_qubit=STARTS,
    plain="none",
    blocks=blocks,
    check=check,
)
