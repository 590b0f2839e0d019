"""Self-dual kicked Ising chain: entanglement grows as fast as it can, exactly.

One step is exp(-i b sum X) exp(-i J sum ZZ - i sum h_j Z) with J = b = pi/4 and any fields h_j. Depth counts kicks:
one layer of ZZ on all bonds and one kick, two brickwork layers. The entanglement spectrum is flat, so all Renyi
orders agree.

Source: Bertini, Kos and Prosen, PRX 9, 021033 (2019), arXiv:1812.05090.
"""

from __future__ import annotations

from math import log

import numpy as np

from rcbench.arrays import FloatArray
from rcbench.errors import InputError
from rcbench.reference.sizes import one_of, whole


def region_entropy(
    n_qubits: int, n_region: int, steps: int, *, ring: bool = False, initial: str = "transverse"
) -> FloatArray:
    """(steps + 1,) entropy of a region after 0 to `steps` kicks, in nats; NaN after the window where the law is exact.

    Open line, the first n_region sites: min(t, n_region) ln 2 while t <= n - n_region. Ring, a block: min(2t,
    n_region) ln 2 while t <= (n - n_region)/2. Starting in the Z basis costs the first kick. Beyond the window the
    entropy falls back toward Page's value: "stays saturated" fails.

    Args:
        n_qubits: 2 or more. n_region: 1 to n_qubits/2. steps: kicks, 0 or more. ring: closed chain.
        initial: "transverse", every spin in the x-y plane, or "z", a bit string.
    Raises:
        InputError: values outside these.

    Source: see the module.
    """
    n = whole("n_qubits", n_qubits, 2)
    size = whole("n_region", n_region, 1, n // 2, ", at most half the chain")
    late = 0 if one_of("initial", initial, ("transverse", "z")) == "transverse" else 1
    time = np.maximum(np.arange(whole("steps", steps, 0) + 1) - late, 0)
    ends, window = (2, (n - size) // 2) if ring else (1, n - size)
    return np.where(time <= window, np.minimum(ends * time, size) * log(2), np.nan)


def entanglement_rate(*, ends: int = 1) -> float:
    """Growth of the entropy in nats a kick: ln 2 for each end of the region.

    Raises:
        InputError: ends other than 1 or 2.

    Source: see the module.
    """
    if ends not in (1, 2):
        raise InputError("ends", ends, "1 or 2")
    return ends * log(2)
