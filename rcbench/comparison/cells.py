"""Cells: everything known of one signature, region and depth of an experiment, as arrays by instance."""

from __future__ import annotations

import math
from collections import defaultdict
from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, NamedTuple

import numpy as np

from rcbench.arrays import FloatArray
from rcbench.estimators.pool import Table

if TYPE_CHECKING:
    import pandas as pd


class Key(NamedTuple):
    """What names a cell within its experiment."""

    signature: str
    region: str
    depth: int


@dataclass(frozen=True, slots=True, kw_only=True)
class Predicted:
    """values, errors: by instance. u_model: standard uncertainty from the stated rates, common to all instances."""

    values: dict[int, float]
    errors: dict[int, float]
    u_model: float = 0.0

    def table(self, instances: Sequence[int]) -> Table:
        """(K, 1, 1), NaN where an instance is not predicted."""
        values = [self.values.get(i, math.nan) for i in instances]
        errors = [self.errors.get(i, math.nan) for i in instances]
        return Table(values=np.array(values)[:, None, None], errors=np.array(errors)[:, None, None])


@dataclass(frozen=True, slots=True, kw_only=True)
class Cell:
    """used: instances with a value; refused: instances that came back and gave none; shots: of the used ones.

    table: (K, R, 1) by used instance and by the repeats listed.
    """

    key: Key
    used: list[int]
    refused: list[int]
    table: Table
    shots: int
    repeats: Sequence[int] = (0,)
    ideal: Predicted | None = None
    noise: Predicted | None = None


_Entry = tuple[float, float, int]


def read_cells(estimates: pd.DataFrame, predictions: pd.DataFrame) -> dict[str, dict[Key, Cell]]:
    """The cells by experiment; values of one instance and repeat from several circuits are averaged.

    Args:
        estimates: columns tables.ESTIMATES; an empty value is an instance that came back and gave none.
        predictions: columns tables.PREDICTIONS; rows without an instance give the mean's u_model.
    """
    measured = _read_estimates(estimates)
    models = _read_predictions(predictions)
    cells: dict[str, dict[Key, Cell]] = defaultdict(dict)
    for experiment, key in sorted(measured.keys() | models.keys()):
        found = models.get((experiment, key), {})
        cells[experiment][key] = _cell(
            key, measured.get((experiment, key), {}), found.get("ideal"), found.get("noise-model")
        )
    return dict(cells)


def returned_instances(estimates: pd.DataFrame) -> dict[tuple[str, int], set[int]]:
    """Instances that came back, with or without a value, by experiment and depth."""
    found: dict[tuple[str, int], set[int]] = defaultdict(set)
    for experiment, depth, instance in zip(
        estimates["experiment"], estimates["depth"], estimates["instance"], strict=True
    ):
        found[experiment, int(depth)].add(int(instance))
    return dict(found)


def _read_estimates(frame: pd.DataFrame) -> dict[tuple[str, Key], dict[int, dict[int, list[_Entry]]]]:
    out: dict[tuple[str, Key], dict[int, dict[int, list[_Entry]]]] = defaultdict(lambda: defaultdict(dict))
    columns = ("experiment", "signature", "region", "depth", "instance", "repeat", "value", "std_error", "shots")
    for row in zip(*(frame[column] for column in columns), strict=True):
        experiment, signature, region, depth, instance, repeat, value, error, shots = row
        place = out[experiment, Key(signature, _text(region), int(depth))][int(instance)]
        place.setdefault(int(repeat), []).append((_number(value), _number(error), int(shots)))
    return out


def _read_predictions(frame: pd.DataFrame) -> dict[tuple[str, Key], dict[str, Predicted]]:
    entries: dict[tuple[str, Key, str], dict[int, list[tuple[float, float, float]]]] = defaultdict(
        lambda: defaultdict(list)
    )
    whole: dict[tuple[str, Key, str], float] = {}
    columns = ("experiment", "signature", "region", "depth", "instance", "model", "value", "std_error", "u_model")
    for row in zip(*(frame[column] for column in columns), strict=True):
        experiment, signature, region, depth, instance, model, value, error, u_model = row
        if math.isnan(_number(depth)):
            continue
        place = (experiment, Key(signature, _text(region), int(depth)), model)
        if math.isnan(_number(instance)):
            whole[place] = _zero(u_model)
        elif not math.isnan(_number(value)):
            entries[place][int(instance)].append((_number(value), _zero(error), _zero(u_model)))
    out: dict[tuple[str, Key], dict[str, Predicted]] = defaultdict(dict)
    for (experiment, key, model), by_instance in entries.items():
        rows = {i: np.mean(found, axis=0) for i, found in by_instance.items()}
        errors = {i: math.hypot(*(error for _, error, _ in found)) / len(found) for i, found in by_instance.items()}
        # rates are common to all instances, so the mean keeps their uncertainty; without its row, an upper bound
        u_model = whole.get((experiment, key, model), float(np.mean([row[2] for row in rows.values()])))
        values = {i: float(row[0]) for i, row in rows.items()}
        out[experiment, key][model] = Predicted(values=values, errors=errors, u_model=u_model)
    return out


def _cell(
    key: Key, found: dict[int, dict[int, list[_Entry]]], ideal: Predicted | None, noise: Predicted | None
) -> Cell:
    repeats = sorted({repeat for by_repeat in found.values() for repeat in by_repeat})
    used, refused, values, errors, shots = [], [], [], [], 0
    for instance, by_repeat in sorted(found.items()):
        pairs = [_average(by_repeat.get(repeat, [])) for repeat in repeats]
        if all(math.isnan(value) for value, _ in pairs):
            refused.append(instance)
            continue
        used.append(instance)
        values.append([value for value, _ in pairs])
        errors.append([error for _, error in pairs])
        shots += sum(entry[2] for entries in by_repeat.values() for entry in entries if not math.isnan(entry[0]))
    shape = (len(used), max(len(repeats), 1), 1)
    table = Table(values=np.array(values).reshape(shape), errors=np.array(errors).reshape(shape))
    return Cell(
        key=key, used=used, refused=refused, table=table, shots=shots, repeats=repeats, ideal=ideal, noise=noise
    )


def _average(entries: list[_Entry]) -> tuple[float, float]:
    kept = [(value, error) for value, error, _ in entries if not math.isnan(value)]
    if not kept:
        return math.nan, math.nan
    count = len(kept)
    return math.fsum(value for value, _ in kept) / count, math.hypot(*(error for _, error in kept)) / count


def stack(cells: Sequence[Cell]) -> tuple[list[int], Table]:
    """The cells of several depths as one table (K, R, depths) over all instances that any of them used."""
    instances = sorted({instance for cell in cells for instance in cell.used})
    repeats = sorted({repeat for cell in cells for repeat in cell.repeats})
    values = np.full((len(instances), len(repeats), len(cells)), np.nan)
    errors = np.full_like(values, np.nan)
    for column, cell in enumerate(cells):
        rows, places = np.searchsorted(instances, cell.used), np.searchsorted(repeats, cell.repeats)
        values[rows[:, None], places, column] = cell.table.values[:, :, 0]
        errors[rows[:, None], places, column] = cell.table.errors[:, :, 0]
    return instances, Table(values=values, errors=errors)


def stack_predicted(found: Sequence[Predicted], instances: Sequence[int]) -> tuple[Table, FloatArray]:
    """The predictions of several depths as a table (K, 1, depths), and u_model of each depth."""
    tables = [one.table(instances) for one in found]
    values = np.concatenate([one.values for one in tables], axis=2)
    errors = np.concatenate([one.errors for one in tables], axis=2)
    return Table(values=values, errors=errors), np.array([one.u_model for one in found])


def _text(value: object) -> str:
    return value if isinstance(value, str) else ""


def _number(value: object) -> float:
    try:
        return float(value)  # type: ignore[arg-type]
    except (TypeError, ValueError):  # None, pandas.NA, an empty cell
        return math.nan


def _zero(value: object) -> float:
    number = _number(value)
    return number if math.isfinite(number) else 0.0
