"""The ideal outcomes of circuits that have one certain outcome each: found by simulation, or read from a table."""

from __future__ import annotations

import csv
import io
from collections.abc import Sequence
from pathlib import Path

import numpy as np

from rcbench.adopt.reading import MOST_ERRORS, Adopted, Progress
from rcbench.errors import InputError, raise_all, suggest
from rcbench.files import read_text

# An outcome this likely is the outcome: angles are often written with few digits, and states have single precision
CERTAIN = 1 - 1e-4


def find_targets(found: Sequence[Adopted], progress: Progress | None = None) -> dict[str, str]:
    """The ideal outcome of each circuit, by simulation.

    Raises:
        InputError: circuits without a single certain outcome, together.
    """
    from rcbench.engine.readout import measured
    from rcbench.engine.register import probabilities
    from rcbench.engine.state import final_state

    out, errors = {}, []
    for done, one in enumerate(found, start=1):
        qubits = one.circuit.measured_qubits
        kept = sorted(qubits)
        shares = measured(probabilities(final_state(one.circuit)), kept)  # in their own order: nothing is moved
        best = int(np.argmax(shares))
        bits = format(best, f"0{len(kept)}b")
        likely = float(shares[best] / shares.sum(dtype=np.float64))
        if likely < CERTAIN:
            allowed = f"one bitstring with probability {CERTAIN:g} or more, for the protocol mirror-return"
            errors.append(
                InputError("ideal outcome", f"the likeliest has {likely:.6g}", allowed, f"{one.circuit_id}: ")
            )
        out[one.circuit_id] = "".join(bits[kept.index(qubit)] for qubit in qubits)
        if progress:
            progress(done, len(found), "simulated")
    raise_all(errors[:MOST_ERRORS])
    return out


def read_targets(path: Path, found: Sequence[Adopted]) -> dict[str, str]:
    """Ideal outcomes from a CSV circuit_id,bitstring.

    Raises:
        InputError: with file and line, for a row that fits no circuit; a circuit without a row.
    """
    bits = {one.circuit_id: len(one.program.bits) for one in found}
    reader = csv.reader(io.StringIO(read_text(path, "targets")))
    try:
        rows = [(reader.line_num, row) for row in reader if row]
    except csv.Error as error:
        raise InputError("targets", str(error), "a CSV table", f"{path.name}:{reader.line_num}: ") from None
    head = [cell.strip() for cell in rows[0][1]] if rows else []
    if "circuit_id" not in head or "bitstring" not in head:
        raise InputError("columns", ",".join(head)[:80], "circuit_id,bitstring", f"{path.name}:1: ")
    columns = head.index("circuit_id"), head.index("bitstring")
    out: dict[str, str] = {}
    for line, row in rows[1:]:
        where = f"{path.name}:{line}: "
        if len(row) != len(head):
            raise InputError("row", ",".join(row)[:80], f"{len(head)} cells", where)
        circuit_id, bitstring = (row[column].strip() for column in columns)
        if circuit_id not in bits:
            raise InputError("circuit_id", circuit_id, suggest(circuit_id, list(bits)[:50]), where)
        if circuit_id in out:
            raise InputError("circuit_id", circuit_id, "each circuit once", where)
        if len(bitstring) != bits[circuit_id] or set(bitstring) - {"0", "1"}:
            allowed = f"{bits[circuit_id]} characters 0 and 1, one for each measured bit, the first bit first"
            raise InputError("bitstring", bitstring, allowed, where)
        out[circuit_id] = bitstring
    left = sorted(bits.keys() - out.keys())
    if left:
        raise InputError("targets", f"none for {', '.join(left[:5])}", "a row for every circuit", f"{path.name}: ")
    return out
