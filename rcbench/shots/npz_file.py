"""Shots as NPZ: one array (shots x qubits) of 0 and 1 a circuit_id, read in slices and never unpickled."""

from __future__ import annotations

import lzma
import struct
import zipfile
from collections.abc import Iterator
from typing import IO, Any

import numpy as np

from rcbench.errors import InputError
from rcbench.shots.decode import ZERO
from rcbench.shots.records import Batch, Place, Text, joined
from rcbench.shots.sources import BROKEN, Source, one_line

CELLS = 1 << 22
# a damaged archive can name any way of compression, and give any of their errors
_DAMAGED = (zipfile.BadZipFile, RuntimeError, ValueError, MemoryError, struct.error, lzma.LZMAError, *BROKEN)
WIDEST = 1 << 16
ILLEGAL = 127  # unprintable, so it cannot be a declared symbol
_LARGEST_VALUE = 9  # one character: 0, 1 and the declared symbols 2 to 9


def batches(source: Source, exact: bool) -> Iterator[Batch]:
    """The rows of an NPZ file; rows have numbers, so `exact` changes nothing.

    Raises:
        InputError: no NPZ, an array that is not two-dimensional, or of another type than whole numbers or truth values.
    """
    return joined(_array_batches(source))


def _array_batches(source: Source) -> Iterator[Batch]:
    try:
        with source.open() as raw, zipfile.ZipFile(raw) as archive:
            names = archive.namelist()
            for name in names:
                if names.count(name) > 1:
                    raise source.error("array", name, "every array once")
            for name in names:
                with archive.open(name) as member:
                    yield from _array(source, name.removesuffix(".npy"), member)
    except InputError:
        raise
    except _DAMAGED as error:
        raise source.error("content", one_line(error), "a whole NPZ file, as numpy.savez writes it") from None


def _array(source: Source, circuit_id: str, member: IO[bytes]) -> Iterator[Batch]:
    shape, columns_first, kind = _read_header(source, circuit_id, member)
    key = f"array {circuit_id!r}"
    # only plain numbers: an object array would have to be unpickled, and a pickle can run anything
    if kind.hasobject or kind.kind not in "bui":
        raise source.error(key, f"type {kind}", "whole numbers (uint8) or truth values")
    if len(shape) != 2 or columns_first:
        found = f"shape {shape}" + (", column after column" if columns_first else "")
        raise source.error(key, found, "two dimensions, shots x qubits, row after row")
    rows, width = shape
    if not 1 <= width <= WIDEST:
        raise source.error(key, f"{width} columns", f"1 to {WIDEST} qubits")
    step = CELLS // width
    for first in range(0, rows, step):
        count = min(step, rows - first)
        data = _read(member, count * width * kind.itemsize)
        if len(data) != count * width * kind.itemsize:
            raise source.error(key, f"an end at row {first + len(data) // (width * kind.itemsize)}", f"{rows} rows")
        values = np.frombuffer(data, dtype=kind).reshape(count, width)
        within = (values >= 0) & (values <= _LARGEST_VALUE)
        characters = np.where(within, values.astype(np.uint8) + ZERO, ILLEGAL).astype(np.uint8)
        yield _batch(source.name, circuit_id, characters, first + 1)


def _read(member: IO[bytes], size: int) -> bytes:
    """As many bytes as there are, up to size."""
    parts = []
    while size and (part := member.read(size)):
        parts.append(part)
        size -= len(part)
    return b"".join(parts)


def _read_header(source: Source, circuit_id: str, member: IO[bytes]) -> tuple[tuple[int, ...], bool, np.dtype[Any]]:
    from numpy.lib import format as npy

    try:
        version = npy.read_magic(member)
        read = {(1, 0): npy.read_array_header_1_0, (2, 0): npy.read_array_header_2_0}[version]
        return read(member)
    except (ValueError, KeyError, SyntaxError, RecursionError, MemoryError, TypeError) as error:
        raise source.error(f"array {circuit_id!r}", one_line(error), "an array as numpy.savez writes it") from None


def _batch(name: str, circuit_id: str, characters: Any, first: int) -> Batch:
    rows, width = characters.shape
    return Batch(
        ids=[circuit_id],
        circuit=np.zeros(rows, dtype=np.int64),
        bits=Text(characters.reshape(-1), np.arange(rows + 1, dtype=np.int64) * width),
        place=lambda i: Place(first + i, f"{name}: array {circuit_id!r}, row {first + i}: "),
        content=lambda i: f"{circuit_id},{characters[i].tobytes().decode()}",
    )
