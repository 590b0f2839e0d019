"""Everything that an experiment without a protocol asks of the circuits of one instance, each walk made once."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import TYPE_CHECKING, Any

import numpy as np

from rcbench.arrays import FloatArray
from rcbench.circuits.circuit import Circuit
from rcbench.engine.tree import walk
from rcbench.regions import write_regions
from rcbench.signatures import (
    CHOI_KEYS,
    ECHO_KEYS,
    FRONT_KEYS,
    OPERATOR_KEYS,
    STATE_KEYS,
    TWIN_KEYS,
    entropy_order,
    of_state,
)
from rcbench.signatures import distinguishability as twin
from rcbench.signatures.evolution import MOST_OPERATOR_QUBITS, choi_states, operators, twins
from rcbench.signatures.found import LETTER_V, LETTER_W, Found, Question, operator_label, pair_label
from rcbench.signatures.otoc import light_cone_front, otocs_of_weights, pick_letter, state_otoc, typical_otoc
from rcbench.signatures.paulis import pauli_weights
from rcbench.signatures.spreading import end_density, operator_size, size_distribution, support
from rcbench.signatures.tmi import halves, operator_tmi

if TYPE_CHECKING:
    from rcbench.signatures.ensemble import Gathering

TYPICAL_STATES = 4


def of_instance(
    question: Question, circuits: Mapping[int, Circuit], *, instance: int = 0, gathering: Gathering | None = None
) -> list[Found]:
    """The values asked for, of the circuits of one instance by depth.

    Args:
        question: keys, regions and sites. circuits: by depth, of question.n_qubits qubits.
        instance: its number; random states of different instances differ.
        gathering: takes up what the whole ensemble needs of this instance.
    Returns:
        Values in the order of the depths.
    Raises:
        InputError: regions that do not fit, a register too large for what is asked, or too little memory.
    """
    depths, members = list(circuits), list(circuits.values())
    keep = gathering.wants if gathering is not None else frozenset()
    found: list[Found] = []
    if question.asks(STATE_KEYS) or "states" in keep:
        found += _states(question, depths, members, gathering)
    if question.asks(CHOI_KEYS) or "unitaries" in keep:
        found += _chois(question, depths, members, gathering)
    if question.asks(OPERATOR_KEYS) or question.asks(FRONT_KEYS):
        for probe in question.probes:
            if question.n_qubits <= MOST_OPERATOR_QUBITS:
                found += _operators(question, depths, members, probe, gathering)
            else:
                found += _typical(question, depths, members, probe, instance, gathering)
    if question.asks(ECHO_KEYS):
        for depth, circuit in circuits.items():
            found += _echoes(question, depth, circuit)
    if question.asks(TWIN_KEYS):
        found += _twins(question, depths, members)
    return sorted(found, key=lambda value: -1 if value.depth is None else value.depth)


def _resources(question: Question) -> dict[str, Any]:
    return dict(question.resources)


def _states(
    question: Question, depths: list[int], circuits: list[Circuit], gathering: Gathering | None
) -> Iterator[Found]:
    method = f"state vector, {question.dtype}"
    for place, state in walk(circuits, **_resources(question)):
        for key in question.asks(STATE_KEYS):
            for region, value in of_state(key, state, question.all_regions):
                yield Found(key=key, region=region, depth=depths[place], value=value, method=method)
        if gathering is not None:
            gathering.take_state(depths[place], state)


def _chois(
    question: Question, depths: list[int], circuits: list[Circuit], gathering: Gathering | None
) -> Iterator[Found]:
    regions = question.regions if question.regions else halves(question.n_qubits)[:1]
    a, c = regions[0], regions[1] if len(regions) > 1 else regions[0]
    for place, choi in choi_states(circuits, **_resources(question)):
        for key in question.asks(CHOI_KEYS):
            value = float(operator_tmi(choi, a, c, order=entropy_order(key))[0]) / float(np.log(2))
            yield Found(
                key=key,
                region=write_regions(a, c),
                depth=depths[place],
                value=value,
                method=f"Choi state, {question.dtype}; inputs|outputs",
            )
        if gathering is not None:
            gathering.take_unitary(depths[place], choi)


def _operators(
    question: Question, depths: list[int], circuits: list[Circuit], probe: int, gathering: Gathering | None
) -> Iterator[Found]:
    for place, operator in operators(circuits, probe, LETTER_V, **_resources(question)):
        weights = pauli_weights(operator, memory_limit=question.memory_limit)
        otocs = otocs_of_weights(weights)
        if gathering is not None:
            gathering.take_growth(probe, depths[place], 1 - otocs.mean(axis=1))
        for key in question.asks(OPERATOR_KEYS):
            for region, value in _of_operator(key, question, probe, weights, otocs):
                yield Found(key=key, region=region, depth=depths[place], value=value, method="evolved operator, exact")


def _of_operator(
    key: str, question: Question, probe: int, weights: FloatArray, otocs: FloatArray
) -> Iterator[tuple[str, float]]:
    if key == "otoc_infinite_temperature":
        chosen = pick_letter(otocs, LETTER_W)
        yield from ((pair_label(site, probe), float(chosen[site])) for site in question.butterflies)
    elif key == "operator_size":
        yield operator_label(probe), operator_size(weights)
    elif key == "operator_size_distribution":
        shares = size_distribution(weights)
        yield from ((operator_label(probe, size=size), float(share)) for size, share in enumerate(shares) if size)
    elif key in ("operator_support", "right_end_density"):
        shares = support(weights) if key == "operator_support" else end_density(weights)
        yield from ((operator_label(probe, site=site), float(share)) for site, share in enumerate(shares))
    else:
        # a site counts as reached by any letter, the largest response decides
        reach = light_cone_front((1 - otocs).max(axis=1)[None], probe)[0]
        yield from ((operator_label(probe, end=end), float(reach[side])) for side, end in enumerate(("left", "right")))


def _typical(
    question: Question,
    depths: list[int],
    circuits: list[Circuit],
    probe: int,
    instance: int,
    gathering: Gathering | None,
) -> Iterator[Found]:
    """Registers too large for an operator: random states, for the OTOC and its front only."""
    from rcbench.signatures.evolution import check_operator_size

    if [key for key in question.asks(OPERATOR_KEYS) if key != "otoc_infinite_temperature"]:
        check_operator_size(question.n_qubits)
    butterflies = [(LETTER_W, site) for site in question.butterflies]
    for depth, circuit in zip(depths, circuits, strict=True):
        mean, error = typical_otoc(
            circuit,
            butterflies,
            [(LETTER_V, probe)],
            states=TYPICAL_STATES,
            seed=question.seed + 7919 * instance,
            **_resources(question),
        )
        if gathering is not None:
            growth = np.full(question.n_qubits, np.nan)
            growth[list(question.butterflies)] = 1 - mean[:, 0]
            gathering.take_growth(probe, depth, growth)
        if question.asks(("otoc_infinite_temperature",)):
            for (_, site), value, std in zip(butterflies, mean[:, 0], error[:, 0], strict=True):
                yield Found(
                    key="otoc_infinite_temperature",
                    region=pair_label(site, probe),
                    depth=depth,
                    value=float(value),
                    std_error=float(std),
                    method=f"{TYPICAL_STATES} random states",
                )


def _echoes(question: Question, depth: int, circuit: Circuit) -> Iterator[Found]:
    table = state_otoc(
        circuit,
        [(LETTER_W, site) for site in question.butterflies],
        [(LETTER_V, site) for site in question.probes],
        **_resources(question),
    )
    for row, butterfly in enumerate(question.butterflies):
        for column, probe in enumerate(question.probes):
            yield Found(
                key="otoc",
                region=pair_label(butterfly, probe),
                depth=depth,
                value=float(table[row, column]),
                method=f"echo of the all-zero state, {question.dtype}",
            )


def _twins(question: Question, depths: list[int], circuits: list[Circuit]) -> Iterator[Found]:
    first, second = question.twin_inputs
    method = f"inputs {first} and {second}"
    for place, states in twins(circuits, first, second, **_resources(question)):
        if question.asks(("twin_overlap",)):
            value = twin.overlap(states)
            yield Found(key="twin_overlap", region="", depth=depths[place], value=value, method=method)
        for key, distance in (
            ("local_distinguishability", twin.total_variation),
            ("local_trace_distance", twin.trace_distance),
        ):
            if question.asks((key,)):
                for region in question.all_regions:
                    value = distance(states, region)
                    yield Found(key=key, region=write_regions(region), depth=depths[place], value=value, method=method)
