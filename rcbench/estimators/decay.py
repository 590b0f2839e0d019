"""Exponential fits A q^m against depth: the loss of a layer, apart from preparation and readout.

The means over instances are fitted, not logarithms of single circuits, so that values near 0 or below need no clipping.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from rcbench.arrays import FloatArray

# Layers that one step of depth runs through: an echo runs each layer there and back
LAYERS_PER_DEPTH = {"polarization": 2, "xeb_fidelity": 1}
SIGNATURES = ("layer_loss", "spam")
LEAST_DEPTHS = 3
DEPTHS_FOR_GOODNESS = 4
_COARSE, _FINE, _ZOOMS, _NEWTON = 65, 17, 6, 3


class Decay(NamedTuple):
    """Fitted A and q of A q^m; each (...,)."""

    amplitude: FloatArray
    rate: FloatArray

    def curve(self, layers: FloatArray) -> FloatArray:
        """(..., depths) the fitted values."""
        return self.amplitude[..., None] * self.rate[..., None] ** layers


def fit(values: FloatArray, layers: FloatArray, weights: FloatArray) -> Decay:
    """Weighted least squares of A q^m, many data sets at once.

    For given q the best A is linear, so that one parameter is searched: a grid over -log q, then finer grids round
    its best point. A q above 1 is allowed, else the loss of a good device would be biased upwards.

    Args:
        values: (..., depths). layers: (depths,) m, rising. weights: (depths,) inverse variances, up to a factor.
    Returns:
        A and q, each (...,). A is 0, and q means nothing, where no positive A fits.

    Source: Proctor et al., Phys. Rev. Lett. 129, 150502 (2022), for the model; separable least squares.
    """
    shape = values.shape[:-1]
    data = np.asarray(values, dtype=np.float64).reshape(-1, values.shape[-1])
    offset = np.asarray(layers, dtype=np.float64) - float(layers[0])
    x = offset / offset[-1]  # in units of the whole span
    steepest = 12.0 / float(np.diff(x).min())
    grid = np.concatenate([np.linspace(-2.0, 8.0, _COARSE), np.geomspace(8.0, steepest, 17)[1:]])
    grid = np.broadcast_to(grid, (len(data), len(grid)))
    for _ in range(_ZOOMS):
        best = np.argmax(_explained(grid, data, x, weights), axis=1)
        rows = np.arange(len(data))
        low = grid[rows, np.maximum(best - 1, 0)]
        high = grid[rows, np.minimum(best + 1, grid.shape[1] - 1)]
        grid = low[:, None] + (high - low)[:, None] * np.linspace(0.0, 1.0, _FINE)
    slope = grid[:, _FINE // 2]
    for _ in range(_NEWTON):
        slope = slope - _newton_step(slope, data, x, weights)
    model = np.exp(-slope[:, None] * x)
    first = np.maximum((data * model) @ weights, 0.0) / (model**2 @ weights)
    rate = np.exp(-slope / offset[-1])
    amplitude = first * np.exp(np.minimum(slope / offset[-1] * float(layers[0]), 700.0))  # exp(710) overflows
    return Decay(amplitude.reshape(shape), rate.reshape(shape))


def _explained(grid: FloatArray, data: FloatArray, x: FloatArray, weights: FloatArray) -> FloatArray:
    """Sum of squares that the best positive A explains, for each data set and each point of its grid."""
    model = np.exp(-grid[..., None] * x)
    overlap = np.maximum(np.einsum("bgd,bd,d->bg", model, data, weights), 0.0)
    explained: FloatArray = overlap**2 / ((model**2) @ weights)
    return explained


def _newton_step(slope: FloatArray, data: FloatArray, x: FloatArray, weights: FloatArray) -> FloatArray:
    """Newton's step towards the maximum of `_explained`, which a grid finds only to half the digits; 0 off a peak."""
    model = np.exp(-slope[:, None] * x)
    with np.errstate(divide="ignore", invalid="ignore"):
        n0, n1, n2 = ((data * model * x**k) @ weights for k in range(3))
        d0, d1, d2 = ((model**2 * x**k) @ weights for k in range(3))
        first = d1 / d0 - n1 / n0  # half the derivative of the logarithm
        second = n2 / n0 - (n1 / n0) ** 2 - 2 * (d2 / d0 - (d1 / d0) ** 2)
        step = first / second
    return np.where((n0 > 0) & (second < 0) & (np.abs(step) < 1e-3), step, 0.0)


def depth_weights(values: FloatArray, errors: FloatArray) -> FloatArray:
    """(depths,) inverse variances of a mean over instances, from shot noise and one scatter common to all depths.

    The scatter of each depth by itself is known too badly from a few instances to weight by.

    Args:
        values, errors: (K, depths), NaN where an instance lacks a depth.
    """
    noise = np.nanmean(np.where(np.isfinite(values) & np.isfinite(errors), errors**2, np.nan), axis=0)
    scatter = np.nanvar(values, axis=0, ddof=1).mean() - noise.mean() if len(values) > 1 else 0.0
    variance = noise + max(float(scatter), 0.0)
    if not np.all(variance > 0):
        return np.ones(values.shape[1])
    weights: FloatArray = variance.min() / variance
    return weights


def layer_loss(decay: Decay, n_qubits: int) -> FloatArray:
    """Process infidelity of a layer, (1 - 4^-n)(1 - q), with q taken as a depolarising survival."""
    return (1 - 4.0**-n_qubits) * (1 - decay.rate)
