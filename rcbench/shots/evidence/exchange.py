"""Butterfly echoes and their reference exchanged: few probes leave no cross-entropy, but the reference gives the scale.

The reference returns its probes, the butterfly does not. With one fidelity for both, the echo that returns less
cannot be the reference of one that returns more; `identity.exchanged_with_reference` says by how many nats.
"""

from __future__ import annotations

import math
from collections import defaultdict
from collections.abc import Collection, Sequence

import numpy as np

from rcbench.arrays import FloatArray, IntArray
from rcbench.shots.evidence import identity, scores, wording
from rcbench.shots.evidence.cases import Case, Ideals
from rcbench.shots.evidence.finding import ALPHA, Finding
from rcbench.shots.shots import RunKey

_ONE = np.zeros(1, dtype=np.int64)


def with_reference(cases: Sequence[Case], ideals: Ideals, settled: Collection[RunKey] = ()) -> list[Finding]:
    """Pairs of reference and butterfly run that fit better the other way round; settled: runs told to be elsewhere."""
    groups: dict[tuple[str, int, int, int], list[Case]] = defaultdict(list)
    for case in (case for case in cases if case.key not in settled):
        groups[case.row.experiment, case.row.instance, case.row.depth, case.key[1]].append(case)
    pairs = []
    for members in groups.values():
        references = [case for case in members if case.target is not None and "butterfly" not in case.row.params]
        for butterfly in (case for case in members if "butterfly" in case.row.params):
            pairs += [
                (one, butterfly) for one in references if one.row.measured_qubits == butterfly.row.measured_qubits
            ]
    found = []
    limit = math.log(max(len(pairs), 1) / ALPHA)
    for reference, butterfly in pairs:
        p = ideals.get(butterfly.row)
        if p is None:
            continue
        gain = _gain(reference, butterfly, p)
        if gain > limit:
            found.append(wording.exchanged(reference, butterfly, gain, limit))
    return found


def _gain(reference: Case, butterfly: Case, p: FloatArray) -> float:
    n, target = reference.n_bits, reference.target
    assert target is not None
    returned = np.zeros(2**n)
    returned[target] = 2.0**n

    def likelihood(case: Case, ratio: FloatArray) -> FloatArray:
        return np.asarray(scores.log_likelihoods(ratio[case.index], case.counts, _ONE)[0])

    def with_flips(index: IntArray, counts: IntArray) -> FloatArray:
        distance = np.bitwise_count(index ^ target).astype(np.int64)
        return np.asarray(scores.returned_log_likelihoods(distance, counts, _ONE, n)[0])

    ratio = p.astype(np.float64) * 2.0**n
    as_filed = [with_flips(reference.index, reference.counts), likelihood(butterfly, ratio)]
    return identity.exchanged_with_reference(as_filed, [likelihood(reference, ratio), likelihood(butterfly, returned)])
