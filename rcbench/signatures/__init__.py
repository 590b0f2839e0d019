"""Signatures: the registry that every other part asks, and ideal quantities, a file a family.

    registry            the table of all signatures
    entropy             purities, entropies and mutual information of regions
    tmi                 tripartite mutual information of states and of unitaries
    output              statistics of the output distribution
    otoc, spreading     out-of-time-order correlators; operator sizes, ends, and the front
    frame_potential     how close an ensemble is to a k-design
    distinguishability  two orthogonal inputs through one circuit
    early_time, thermal local operators and local values under a Hamiltonian
    evolution, paulis   what these are made of: unitaries, operators, Pauli coefficients
    scrambled           the Haar value beside each

`of_state` gives a quantity of one state by its key, `of_instance` everything asked of the circuits of one instance, and
`of_ensemble` what only all instances together have. A new ideal quantity is a function in its family, a key in one of
these three, and a row of the registry.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from itertools import combinations
from typing import TYPE_CHECKING, Any

import numpy as np

from rcbench.arrays import ComplexArray, FloatArray
from rcbench.errors import InputError, suggest
from rcbench.regions import write_regions

if TYPE_CHECKING:
    from rcbench.signatures.ensemble import of_ensemble
    from rcbench.signatures.instance import of_instance

Region = Sequence[int]
Labelled = Iterator[tuple[str, float]]

_ENTROPY_KEYS = ("renyi2_entropy", "vonneumann_entropy")
_MUTUAL_KEYS = ("mutual_information_renyi2", "mutual_information_vonneumann")
_TMI_KEYS = ("tmi_renyi2", "tmi_vonneumann")
_OUTPUT_KEYS = (
    "collision_probability",
    "porter_thomas_ks",
    "xeb_linear",
    "output_entropy",
    "output_moment_k3",
    "output_moment_k4",
)
STATE_KEYS = ("purity", *_ENTROPY_KEYS, *_MUTUAL_KEYS, *_TMI_KEYS, *_OUTPUT_KEYS)
CHOI_KEYS = ("operator_tmi_renyi2", "operator_tmi_vonneumann")
OPERATOR_KEYS = (
    "otoc_infinite_temperature",
    "operator_size",
    "operator_size_distribution",
    "operator_support",
    "right_end_density",
    "light_cone_front",
)
ECHO_KEYS = ("otoc",)
TWIN_KEYS = ("local_distinguishability", "local_trace_distance", "twin_overlap")
FRONT_KEYS = ("butterfly_velocity", "front_width", "front_misfit")
UNITARY_FRAME_KEYS = tuple(f"frame_potential_k{k}" for k in (1, 2, 3, 4))
STATE_FRAME_KEYS = tuple(f"state_frame_potential_k{k}" for k in (1, 2, 3, 4))
ENSEMBLE_KEYS = (*FRONT_KEYS, *UNITARY_FRAME_KEYS, *STATE_FRAME_KEYS, "two_design_depth")
INSTANCE_KEYS = (*STATE_KEYS, *CHOI_KEYS, *OPERATOR_KEYS, *ECHO_KEYS, *TWIN_KEYS)


def __getattr__(name: str) -> Any:
    """The hooks that need the engine, fetched on first use."""
    if name == "of_instance":
        from rcbench.signatures.instance import of_instance as found

        return found
    if name == "of_ensemble":
        from rcbench.signatures.ensemble import of_ensemble as hook

        return hook
    raise AttributeError(f"module 'rcbench.signatures' has no attribute {name!r}")


def check_keys(keys: Sequence[str]) -> None:
    """Refuse keys that no state, operator or ensemble has on its own.

    Raises:
        InputError: a key that needs a protocol.
    """
    known = (*INSTANCE_KEYS, *ENSEMBLE_KEYS)
    for key in keys:
        if key not in known:
            raise InputError("signatures", key, suggest(key, known) + "; the others need a protocol")


def entropy_order(key: str) -> int:
    """Order of the entropies in a key's name: 2 for Renyi-2, 1 for von Neumann."""
    return 2 if "renyi2" in key else 1


def three_regions(regions: Sequence[Region], n_qubits: int) -> tuple[Region, Region, Region]:
    """A, B, C of a state's tripartite mutual information: the first three regions given, else quarters."""
    from rcbench.signatures.tmi import quarters

    a, b, c = (regions if len(regions) >= 3 else quarters(n_qubits))[:3]
    return a, b, c


def of_state(key: str, state: ComplexArray, regions: Sequence[Region]) -> Labelled:
    """(region label, value) of one signature of one pure state, in outside units (entropies in bits).

    Args:
        key: one of STATE_KEYS. state: (2**n,) amplitudes, qubit 0 the most significant bit.
        regions: entropies take each, mutual information each pair, tripartite mutual information the first three
            (quarters where there are fewer); the output distribution has one value with an empty label.
    Raises:
        InputError: a key that needs more than a state, or regions that do not fit.
    """
    from rcbench.signatures import entropy, tmi

    order = entropy_order(key)
    if key == "purity":
        for region in regions:
            yield write_regions(region), float(entropy.purity(state[None], region)[0])
    elif key in _ENTROPY_KEYS:
        for region in regions:
            yield write_regions(region), _bits(entropy.renyi_entropy(state[None], region, order))
    elif key in _MUTUAL_KEYS:
        if len(regions) < 2:
            raise InputError("regions", write_regions(*regions), "two regions or more, for a mutual information")
        for a, b in combinations(regions, 2):
            yield write_regions(a, b), _bits(entropy.mutual_information(state[None], a, b, order=order))
    elif key in _TMI_KEYS:
        chosen = three_regions(regions, len(state).bit_length() - 1)
        yield write_regions(*chosen), _bits(tmi.state_tmi(state[None], *chosen, order=order))
    elif key in _OUTPUT_KEYS:
        probabilities = (np.abs(state) ** 2).astype(np.float64)
        yield "", _of_output(key)(probabilities / probabilities.sum())
    else:
        raise InputError("signatures", key, suggest(key, STATE_KEYS) + "; the others need more than a state")


def _bits(nats: FloatArray) -> float:
    return float(nats[0]) / float(np.log(2))


def _of_output(key: str) -> Callable[[FloatArray], float]:
    from rcbench.signatures import output

    functions: dict[str, Callable[[FloatArray], float]] = {
        "collision_probability": output.collision_probability,
        "porter_thomas_ks": output.porter_thomas_distance,
        "xeb_linear": output.linear_xeb,
        "output_entropy": lambda p: output.entropy(p) / float(np.log(2)),
        "output_moment_k3": lambda p: output.moment(p, 3),
        "output_moment_k4": lambda p: output.moment(p, 4),
    }
    return functions[key]


__all__ = [
    "CHOI_KEYS",
    "ECHO_KEYS",
    "ENSEMBLE_KEYS",
    "FRONT_KEYS",
    "INSTANCE_KEYS",
    "OPERATOR_KEYS",
    "STATE_FRAME_KEYS",
    "STATE_KEYS",
    "TWIN_KEYS",
    "UNITARY_FRAME_KEYS",
    "check_keys",
    "entropy_order",
    "of_ensemble",
    "of_instance",
    "of_state",
    "three_regions",
]
