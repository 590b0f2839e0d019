"""The columns of a table of shots, and how a table of pyarrow columns becomes a batch."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import Any

import numpy as np

from rcbench.arrays import BoolArray, IntArray
from rcbench.shots.records import (
    MAX_COUNT,
    MAX_REPEAT,
    Batch,
    Irregular,
    Place,
    Text,
    times_utc,
    whole_counts,
    whole_repeats,
)

COLUMNS = ("circuit_id", "bitstring", "count", "repeat", "batch", "time_utc")
_SPACE = 32


def arrow_batch(columns: Mapping[str, Any], *, strip: bool, place: Callable[[int], Place] | None) -> Batch:
    """A batch from pyarrow arrays.

    Args:
        columns: arrays by name, one of COLUMNS each; text, or (from Parquet) numbers and times where that is meant.
        strip: take spaces off both ends of text.
        place: where row i stands, or None.
    """
    if strip:
        columns = _stripped(columns)
    ids, circuit = _dictionary(columns["circuit_id"])
    labels, label = _dictionary(columns["batch"]) if "batch" in columns else ([], None)
    times, bad_time = _times(columns["time_utc"]) if "time_utc" in columns else (None, None)

    def shown(name: str, row: int) -> object:
        return _plain(columns[name][row].as_py())

    return Batch(
        ids=ids,
        circuit=circuit,
        bits=Text.from_arrow(_plain_text(columns["bitstring"])),
        place=place,
        content=lambda row: ",".join(str(shown(name, row)) for name in columns),
        count=_whole(columns["count"], 1, MAX_COUNT, 0) if "count" in columns else None,
        repeat=_whole(columns["repeat"], 0, MAX_REPEAT, -1) if "repeat" in columns else None,
        time=times,
        bad_time=bad_time,
        labels=labels,
        label=label,
        shown=shown,
    )


def _plain(value: object) -> object:
    return value.decode("utf-8", "backslashreplace") if isinstance(value, bytes) else value


def _stripped(columns: Mapping[str, Any]) -> dict[str, Any]:
    """Bitstrings and numbers without spaces round them; ids and labels lose theirs in `_dictionary`."""
    import pyarrow as pa
    import pyarrow.compute as pc

    out = dict(columns)
    for name, column in columns.items():
        if hasattr(column, "dictionary"):
            continue
        data = Text.from_arrow(column).data
        if data.size and data.min() <= _SPACE:
            try:
                plain = pc.ascii_trim_whitespace(column.cast(pa.string()))
            except pa.ArrowException as error:
                raise Irregular(str(error)) from None
            out[name] = plain.cast(column.type)
    return out


def _plain_text(column: Any) -> Any:
    """A text column without a dictionary and without the view types, whose bytes do not lie one after another."""
    import pyarrow as pa

    if hasattr(column, "dictionary"):
        column = column.dictionary_decode()
    kind = column.type
    if pa.types.is_string_view(kind):
        return column.cast(pa.large_string())
    return column.cast(pa.large_binary()) if pa.types.is_binary_view(kind) else column


def _dictionary(column: Any) -> tuple[list[str], IntArray]:
    """Different values as text, and the position of each row's value among them; missing is the empty text."""
    if not hasattr(column, "dictionary"):
        column = _plain_text(column).dictionary_encode()
    words: dict[str, int] = {}
    values = [_plain(value) for value in column.dictionary.to_pylist()]
    places = [words.setdefault("" if v is None else str(v).strip(), len(words)) for v in values]
    if column.null_count:
        places.append(words.setdefault("", len(words)))
        column = column.indices.fill_null(len(places) - 1)
    else:
        column = column.indices
    index = column.to_numpy(zero_copy_only=False)
    return list(words), np.array(places, dtype=np.int64)[index] if places else np.zeros(0, dtype=np.int64)


def _whole(column: Any, low: int, high: int, otherwise: int) -> IntArray:
    """Whole numbers within limits, `otherwise` where a value is none."""
    import pyarrow as pa

    column = _plain_text(column)
    try:
        if column.null_count or pa.types.is_boolean(column.type):
            raise pa.ArrowInvalid("missing values or truth values")
        numbers = column.cast(pa.int64()).to_numpy(zero_copy_only=False)
    except (pa.ArrowInvalid, pa.ArrowNotImplementedError):
        values = [_plain(value) for value in column.to_pylist()]
        return whole_counts(values) if otherwise == 0 else whole_repeats(values)
    within = (numbers >= low) & (numbers <= high)
    return numbers if within.all() else np.where(within, numbers, otherwise)


def _times(column: Any) -> tuple[Any, BoolArray | None]:
    """Times in UTC as datetime64[us], and which rows hold none that can be read."""
    import pyarrow as pa

    column = _plain_text(column)
    kind = column.type
    if pa.types.is_timestamp(kind):
        # a time zone only changes how a stamp is shown: what is stored is UTC
        plain = column.cast(pa.timestamp("us", tz=kind.tz), safe=False).cast(pa.int64())
        missing = column.is_null().to_numpy(zero_copy_only=False)
        times = plain.fill_null(0).to_numpy(zero_copy_only=False).astype("datetime64[us]")
        times[missing] = np.datetime64("NaT", "us")
        return times, None
    if not (pa.types.is_string(kind) or pa.types.is_large_string(kind) or pa.types.is_binary(kind)):
        return np.full(len(column), np.datetime64("NaT", "us")), np.ones(len(column), dtype=np.bool_)
    coded = column.dictionary_encode()
    times, bad = times_utc([str(_plain(v)) for v in coded.dictionary.to_pylist()])
    index = coded.indices.fill_null(len(times)).to_numpy(zero_copy_only=False)
    return np.append(times, np.datetime64("NaT", "us"))[index], np.append(bad, False)[index]
