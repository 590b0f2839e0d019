"""The rows of decay fits: the loss of a layer, and preparation and readout apart from it."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np
from scipy.special import chdtrc

from rcbench.arrays import FloatArray
from rcbench.comparison.cells import Cell, Predicted, stack, stack_predicted
from rcbench.comparison.finding import Finding, Guard
from rcbench.comparison.row import Row, Terms, write_row
from rcbench.estimators import decay
from rcbench.estimators.pool import MEAN, Pool, Table, decay_pool, interval, pool_for
from rcbench.signatures.registry import signature
from rcbench.statistics import quantile

# A depth carries a fit when it stands above 0 with this one-sided confidence, 2.6 standard errors for many instances
_STANDS = 0.995
# Below this probability of a larger chi-square the note says that one exponential is not the law
_DOUBT = 0.001


def fit_rows(
    terms: Terms, source: str, keys: Sequence[str], cells: Sequence[Cell], instances: tuple[set[int], set[int]]
) -> list[dict[str, Any]]:
    """`layer_loss` and `spam` of an experiment. No rows where fewer than decay.LEAST_DEPTHS depths were planned.

    All depths with data are fitted, also faint ones, since leaving out what came out low would bias the rate; but the
    row stays undecided unless LEAST_DEPTHS depths stand above 0. Predictions are fitted with the weights of the data,
    so that a law that is not quite exponential bends both fits alike.

    Args:
        terms: of the experiment. source: the signature that is fitted. keys: the rows wanted, of decay.SIGNATURES.
        cells: the source's cells by depth, rising. instances: those planned and those that came back, at any depth.
    """
    if len(terms.experiment.depths) < decay.LEAST_DEPTHS:
        return []
    cells = [cell for cell in cells if cell.used]
    if sum(_stands(cell) for cell in cells) < decay.LEAST_DEPTHS:
        return [write_row(terms, _no_fit(key, source, cells, instances)) for key in keys]
    layers = np.array([cell.key.depth for cell in cells], dtype=float) * decay.LAYERS_PER_DEPTH[source]
    used, table = stack(cells)
    weights = decay.depth_weights(*table.by_instance())
    ideal, _ = _predicted([cell.ideal for cell in cells], used)
    noise, u_depths = _predicted([cell.noise for cell in cells], used)
    notes = [f"fit to {source} over {len(cells)} depths", *_doubt(cells, table, layers, weights)]
    rows = []
    for key in keys:
        pool = decay_pool(key, layers, weights, terms.experiment.n_qubits)
        row = Row(
            entry=signature(key),
            region="",
            depth=None,
            pool=pool,
            used=used,
            planned=len(instances[0]),
            returned=len(instances[1]),
            table=table,
            shots=sum(cell.shots for cell in cells),
            ideal=ideal,
            noise=noise,
            u_model=0.0 if noise is None else _moved(pool, noise, u_depths),
            notes=notes,
            guard=Guard(),  # that enough depths stand above 0 has been seen
        )
        rows.append(write_row(terms, row))
    return rows


def _stands(cell: Cell) -> bool:
    found = interval(pool_for(cell.key.signature), cell.table, _STANDS)
    return found.value > quantile(_STANDS, found.dof) * found.std_error


def _no_fit(key: str, source: str, cells: Sequence[Cell], instances: tuple[set[int], set[int]]) -> Row:
    finding = Finding(finding="not-tested", note="no data returned")
    if cells:
        few = f"{source} stands above 0 at fewer than {decay.LEAST_DEPTHS} depths"
        finding = Finding(finding="undecided", note=f"no signal left: {few}")
    none = Table(values=np.zeros((0, 1, 1)), errors=np.zeros((0, 1, 1)))
    return Row(
        entry=signature(key),
        region="",
        depth=None,
        pool=MEAN,
        used=(),
        planned=len(instances[0]),
        returned=len(instances[1]),
        table=none,
        shots=0,
        empty=finding,
    )


def _predicted(found: Sequence[Predicted | None], instances: list[int]) -> tuple[Table | None, FloatArray]:
    present = [one for one in found if one is not None]
    if len(present) < len(found):
        return None, np.zeros(0)
    return stack_predicted(present, instances)


def _moved(pool: Pool, noise: Table, u_depths: FloatArray) -> float:
    """How far a fit moves when every depth's prediction moves by its own uncertainty, all together."""
    means = np.nanmean(noise.values[:, 0], axis=0)
    return float(abs(pool.combine(means - u_depths) - pool.combine(means)))


def _doubt(cells: Sequence[Cell], table: Table, layers: FloatArray, weights: FloatArray) -> list[str]:
    """A note where the means do not lie on one exponential, judged as if depths were independent."""
    if len(cells) < decay.DEPTHS_FOR_GOODNESS:
        return []
    means = np.nanmean(table.by_instance()[0], axis=0)
    found = decay.fit(means, layers, weights)
    errors = np.array([interval(pool_for(cell.key.signature), cell.table, _STANDS).std_error for cell in cells])
    if not np.all(errors > 0):
        return []
    chi2 = float((((means - found.curve(layers)) / errors) ** 2).sum())
    if chdtrc(len(cells) - 2, chi2) >= _DOUBT:
        return []
    return [f"one exponential fits poorly (chi-square {chi2:.3g} over {len(cells) - 2})"]
