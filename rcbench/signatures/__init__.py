"""Signatures: the registry that every other part asks, and ideal quantities from states, a file a family.

`registry` is the table of all signatures. `entropy` holds purities and entropies of regions, `output` the statistics of the
output distribution. `of_state` gives any of them by key; a new ideal quantity is one function there and one row here.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence

import numpy as np

from rcbench.arrays import ComplexArray
from rcbench.errors import InputError, suggest
from rcbench.regions import write_regions

Region = Sequence[int]


def _of_region(key: str) -> Callable[[ComplexArray, Region], float]:
    from rcbench.signatures import entropy

    functions: dict[str, Callable[[ComplexArray, Region], float]] = {
        "purity": lambda state, region: float(entropy.purity(state, region)[0]),
        "renyi2_entropy": lambda state, region: float(entropy.renyi2_entropy(state, region)[0]) / float(np.log(2)),
        "vonneumann_entropy": lambda s, region: float(entropy.vonneumann_entropy(s, region)[0]) / float(np.log(2)),
    }
    return functions[key]


_REGION_KEYS = ("purity", "renyi2_entropy", "vonneumann_entropy")
_OUTPUT_KEYS = ("collision_probability", "porter_thomas_ks")
STATE_KEYS = _REGION_KEYS + _OUTPUT_KEYS


def of_state(key: str, state: ComplexArray, regions: Sequence[Region]) -> Iterator[tuple[str, float]]:
    """(region label, value) of one signature of one pure state, in outside units (entropies in bits).

    Args:
        key: one of STATE_KEYS. state: (2**n,) amplitudes, qubit 0 the most significant bit.
        regions: for signatures of a region; the others have one value with an empty label.
    Raises:
        InputError: a key that needs a protocol.
    """
    if key in _REGION_KEYS:
        for region in regions:
            yield write_regions(region), _of_region(key)(state[None], region)
    elif key in _OUTPUT_KEYS:
        from rcbench.signatures.output import collision_probability, porter_thomas_distance

        probabilities = (np.abs(state) ** 2).astype(np.float64)
        function = collision_probability if key == "collision_probability" else porter_thomas_distance
        yield "", function(probabilities / probabilities.sum())
    else:
        raise InputError("signatures", key, suggest(key, STATE_KEYS) + "; the others need a protocol")
