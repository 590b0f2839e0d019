"""Spectra of repeated (Floquet) circuits: form factor and gap ratios of the circular ensembles.

Only for circuits that repeat one period: with fresh gates in every layer there is no spectrum in time.
"""

from __future__ import annotations

from math import log

import numpy as np

from rcbench.arrays import FloatArray, IntArray
from rcbench.errors import InputError
from rcbench.reference.sizes import whole

# Mean of min/max of neighbouring gaps. Poisson exact; the two others for large matrices.
# Source: Atas, Bogomolny, Giraud and Roux, Phys. Rev. Lett. 110, 084101 (2013), arXiv:1212.5611.
GAP_RATIO = {"poisson": 2 * log(2) - 1, "orthogonal": 0.5307, "unitary": 0.5996}


def form_factor(times: IntArray, dimension: int) -> FloatArray:
    """Mean of |tr U^t|^2 over the circular unitary ensemble: min(t, d).

    Args:
        times: whole numbers of periods, 1 or more, any shape. dimension: d, 1 or more.
    Returns:
        An array of the shape of `times`.
    Raises:
        InputError: values outside these.

    Source: Haake, Kus, Sommers, Schomerus and Zyczkowski, J. Phys. A 29, 3641 (1996) (from memory).
    """
    times = np.asarray(times)
    if times.size and (times.dtype.kind not in "iu" or times.min() < 1):
        raise InputError("times", times.ravel()[:5].tolist(), "whole numbers of periods, 1 or more")
    return np.minimum(times, whole("dimension", dimension, 1)).astype(np.float64)


def gap_ratio(phases: FloatArray) -> float:
    """Mean of min/max over neighbouring gaps of eigenphases on the circle.

    Args:
        phases: (..., d) in radians, d = 3 or more, in any order; further axes are matrices of the same ensemble.
    Raises:
        InputError: fewer than three phases.

    Source: Atas, Bogomolny, Giraud and Roux, Phys. Rev. Lett. 110, 084101 (2013), arXiv:1212.5611.
    """
    if np.ndim(phases) < 1 or np.shape(phases)[-1] < 3:
        raise InputError("phases", np.shape(phases), "three phases or more on the last axis")
    ordered = np.sort(np.mod(phases, 2 * np.pi), axis=-1)
    gaps = np.diff(ordered, axis=-1, append=ordered[..., :1] + 2 * np.pi)
    after = np.roll(gaps, -1, axis=-1)
    return float(np.mean(np.minimum(gaps, after) / np.maximum(gaps, after)))
