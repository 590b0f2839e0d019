"""What only all instances of an experiment have together: frame potentials, and fits of the front."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

import numpy as np

from rcbench.arrays import ComplexArray, FloatArray
from rcbench.engine import memory
from rcbench.errors import InputError
from rcbench.signatures import FRONT_KEYS, STATE_FRAME_KEYS, UNITARY_FRAME_KEYS
from rcbench.signatures import frame_potential as frames
from rcbench.signatures.evolution import check_operator_size
from rcbench.signatures.found import Found, Question, operator_label
from rcbench.signatures.spreading import LEAST_DEPTHS, LEAST_INSTANCES, fit_front

DESIGN_ERROR = 0.1  # relative excess over Haar of the k = 2 frame potential that still counts as a 2-design


class Gathering:
    """Takes up, instance by instance, the states, unitaries and growth that the ensemble quantities need.

    Args:
        question: what is asked. depths: of the circuits. instances: how many will come.
    Raises:
        InputError: too few instances or depths for what is asked, or vectors that do not fit the memory; before any
            work is done.
    """

    def __init__(self, question: Question, depths: Sequence[int], instances: int) -> None:
        self.question, self.depths, self.instances = question, list(depths), instances
        unitary = bool(question.asks((*UNITARY_FRAME_KEYS, "two_design_depth")))
        state = bool(question.asks(STATE_FRAME_KEYS))
        wants = [name for name, wanted in (("unitaries", unitary), ("states", state)) if wanted]
        self.wants = frozenset(wants)
        if wants and instances < frames.LEAST_INSTANCES:
            raise InputError(
                "instances", instances, f"{frames.LEAST_INSTANCES} or more for frame potentials; hundreds for k = 2"
            )
        if unitary:
            check_operator_size(question.n_qubits)
        if question.asks(FRONT_KEYS):
            self._check_front()
        self._states: dict[int, list[ComplexArray]] = {depth: [] for depth in self.depths}
        self._unitaries: dict[int, list[ComplexArray]] = {depth: [] for depth in self.depths}
        self._growth: dict[int, dict[int, list[FloatArray]]] = {}
        self._require_memory(unitary, state)

    def _check_front(self) -> None:
        deep = [depth for depth in self.depths if depth > 0]
        if len(deep) < LEAST_DEPTHS:
            raise InputError("depths", tuple(self.depths), f"{LEAST_DEPTHS} depths or more above 0 for a fitted front")
        if self.instances < LEAST_INSTANCES:
            raise InputError("instances", self.instances, f"{LEAST_INSTANCES} or more for a front with an error")

    def _require_memory(self, unitary: bool, state: bool) -> None:
        n, item = self.question.n_qubits, memory.state_dtype(self.question.dtype).itemsize
        each = item * (4**n * unitary + 2**n * state)
        needed = each * len(self.depths) * self.instances
        try:
            memory.require(
                needed, self.question.memory_limit, f"{self.instances} instances at {len(self.depths)} depths"
            )
        except InputError as error:
            limit = self.question.memory_limit or memory.available_memory()
            fits = limit // (each * len(self.depths))
            allowed = f"{error.allowed}: {fits} instances at these depths, or fewer depths or qubits"
            raise InputError("memory", error.found, allowed) from None

    def take_state(self, depth: int, state: ComplexArray) -> None:
        """A final state (D,), copied where it is wanted."""
        if "states" in self.wants:
            self._states[depth].append(state.copy())

    def take_unitary(self, depth: int, choi: ComplexArray) -> None:
        """A Choi state (D * D,), copied where it is wanted."""
        if "unitaries" in self.wants:
            self._unitaries[depth].append(choi.copy())

    def take_growth(self, probe: int, depth: int, growth: FloatArray) -> None:
        """1 - F at each qubit (n,), NaN where it was not worked out."""
        if self.question.asks(FRONT_KEYS):
            self._growth.setdefault(probe, {}).setdefault(depth, []).append(growth)

    def squares(self, which: str, depth: int) -> FloatArray:
        """|<i|j>|^2 of all pairs at a depth, with the trace product for unitaries."""
        members = (self._unitaries if which == "unitaries" else self._states)[depth]
        squares = frames.overlaps(members, memory_limit=self.question.memory_limit)
        # Choi states have the trace over D as their product
        return squares * 4.0**self.question.n_qubits if which == "unitaries" else squares

    def growth(self, probe: int) -> FloatArray:
        """(instances, depths, n) 1 - F of an operator that starts at the probe."""
        by_depth = self._growth.get(probe, {})
        return np.array([by_depth[depth] for depth in self.depths]).transpose(1, 0, 2)


def of_ensemble(gathering: Gathering) -> Iterator[Found]:
    """The values asked for that belong to the ensemble.

    Args:
        gathering: after every instance has gone through `of_instance` with it.
    Raises:
        InputError: a front that the depths and the register do not show.
    """
    question = gathering.question
    if question.asks(FRONT_KEYS):
        for probe in question.probes:
            yield from _front(gathering, probe)
    for which, keys in (("unitaries", UNITARY_FRAME_KEYS), ("states", STATE_FRAME_KEYS)):
        if which in gathering.wants:
            yield from _frames(gathering, which, keys)


def _front(gathering: Gathering, probe: int) -> Iterator[Found]:
    n = gathering.question.n_qubits
    growth = gathering.growth(probe)
    right = n - 1 - probe >= probe  # the side with more room
    side = growth[:, :, probe:] if right else growth[:, :, probe::-1]
    known = ~np.isnan(side).any(axis=(0, 1))
    fit = fit_front(side[:, :, known], gathering.depths, np.flatnonzero(known).tolist())
    method = (
        f"front fitted to {fit.points} points of {fit.instances} instances, height {fit.height:.3f}, "
        f"shift {fit.shift:.2f}, chi square a degree of freedom {fit.chi_square:.2f}"
    )
    label = operator_label(probe, end="right" if right else "left")
    for key, value, error in (
        ("butterfly_velocity", fit.velocity, fit.velocity_error),
        ("front_width", fit.width, fit.width_error),
        ("front_misfit", fit.misfit, 0.0),
    ):
        if key in gathering.question.keys:
            yield Found(key=key, region=label, depth=None, value=value, std_error=error, method=method)


def _frames(gathering: Gathering, which: str, keys: Sequence[str]) -> Iterator[Found]:
    dimension = 2**gathering.question.n_qubits
    design = which == "unitaries" and "two_design_depth" in gathering.question.keys
    second = []
    for depth in gathering.depths:
        squares = gathering.squares(which, depth)
        for k, key in enumerate(keys, start=1):
            if key not in gathering.question.keys and not (design and k == 2):
                continue
            of = frames.of_unitary_overlaps if which == "unitaries" else frames.of_state_overlaps
            potential = of(squares, dimension, k)
            if k == 2:
                second.append(potential)
            if key in gathering.question.keys:
                method = f"pairs of {potential.instances} instances"
                if potential.warning:
                    method += f"; {potential.warning}"
                yield Found(key=key, depth=depth, value=potential.value, std_error=potential.std_error, method=method)
    if design:
        reached = frames.design_depth(gathering.depths, second, dimension, DESIGN_ERROR)
        value = float("nan") if reached.depth is None else float(reached.depth)
        yield Found(key="two_design_depth", depth=None, value=value, method=reached.message)
