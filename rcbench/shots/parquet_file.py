"""Shots as Parquet: the columns of the CSV form, bitstrings as text."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

from rcbench.errors import InputError
from rcbench.shots.columns import COLUMNS, arrow_batch
from rcbench.shots.records import Batch, Place
from rcbench.shots.sources import Source, one_line

ROWS = 100_000


def batches(source: Source, exact: bool) -> Iterator[Batch]:
    """The rows of a Parquet file; rows have numbers, so `exact` changes nothing.

    Raises:
        InputError: no Parquet, a column missing or of a type that cannot hold what it should.
    """
    import pyarrow as pa
    import pyarrow.parquet as pq

    try:
        with pq.ParquetFile(str(source.path)) as file:
            used, footer = _columns(source, file.schema_arrow), file.metadata
        # as a dictionary: a circuit_id stands in thousands of rows
        with pq.ParquetFile(str(source.path), metadata=footer, read_dictionary=["circuit_id"]) as file:
            first = 1
            for table in file.iter_batches(batch_size=ROWS, columns=used):
                table.validate(full=True)  # damaged pages can hold positions outside their dictionary
                columns = {name: table.column(name) for name in used}
                yield arrow_batch(columns, strip=False, place=_place(source.name, first))
                first += table.num_rows
    except InputError:
        raise
    except (pa.ArrowException, OSError, ValueError, KeyError, MemoryError) as error:  # a damaged footer can give any
        raise source.error("content", one_line(error), "a whole Parquet file") from None


def _place(name: str, first: int) -> Any:
    return lambda i: Place(first + i, f"{name}: row {first + i}: ")


def _columns(source: Source, schema: Any) -> list[str]:
    import pyarrow as pa

    def is_text(kind: Any) -> bool:
        kind = kind.value_type if pa.types.is_dictionary(kind) else kind
        return bool(
            pa.types.is_string(kind)
            or pa.types.is_large_string(kind)
            or pa.types.is_string_view(kind)
            or pa.types.is_binary(kind)
            or pa.types.is_large_binary(kind)
            or pa.types.is_binary_view(kind)
        )

    names = list(schema.names)
    for name in set(names) & set(COLUMNS):
        if names.count(name) > 1:
            raise source.error("columns", ",".join(names), f"the column {name} once")
    for name in ("circuit_id", "bitstring"):
        if name not in names:
            raise source.error("columns", ",".join(names), f"the column {name}: {', '.join(COLUMNS)}")
    for name in ("circuit_id", "bitstring"):
        if not is_text(schema.field(name).type):
            raise source.error(name, str(schema.field(name).type), "a column of text: a number loses leading zeros")
    if others := [name for name in names if name not in COLUMNS]:
        source.notes.append(f"{source.name}: columns not read: {', '.join(map(repr, others))}")
    return [name for name in COLUMNS if name in names]
