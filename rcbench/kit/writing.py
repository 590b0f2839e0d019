"""Making the circuits of a kit, in parts that are recorded when they are written, in one process or several.

A part is a list of circuits, made in the order of experiment, instance and depth, so that what the circuits of an
instance share is made once. Its record says what the roster needs; it lies in `.parts` until the kit is whole, and a
build that goes on takes over every part whose files are still as they were written.
"""

from __future__ import annotations

import json
import multiprocessing
import signal
from collections.abc import Callable, Iterator, Sequence
from concurrent.futures import ProcessPoolExecutor
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

from rcbench.circuits.export import write_circuit
from rcbench.files import sha256_bytes, sha256_file, versions, write_bytes, write_text
from rcbench.kit.folder import circuit_file
from rcbench.kit.order import Entry
from rcbench.kit.planning import Plan
from rcbench.kit.roster import circuit_facts
from rcbench.kit.storage import ARCHIVE_SIZE, FOLDER, PACK_ABOVE, archive_name, pack, write_new
from rcbench.protocol.expansion import Slot

Facts = dict[str, Any]  # what the roster needs to know of a circuit as written
Progress = Callable[[int, int, str], None]
RECORDS = ".parts"
PART_SIZE = 100  # runs a part, where circuits are files of their own


@dataclass(slots=True)
class PlannedRuns:
    """A circuit of the plan and all its runs."""

    experiment: int
    slot: Slot
    runs: list[Entry]


@dataclass(slots=True)
class _Part:
    """Some circuits of a kit. number: from 1; archive: where they are packed, None where they are files."""

    number: int
    circuits: list[PlannedRuns]
    archive: Path | None
    record: Path

    @property
    def n_runs(self) -> int:
        return sum(len(circuit.runs) for circuit in self.circuits)


def write_circuits(
    plan: Plan, out: Path, progress: Progress | None, processes: int = 1
) -> Iterator[tuple[PlannedRuns, Facts]]:
    """Write all circuits into the folder `out`, and yield each with what the roster needs of it."""
    parts = list(_parts(plan, out))
    before = [_written_before(part, plan, out) for part in parts]
    todo = [part for part, facts in zip(parts, before, strict=True) if facts is None]
    alone = processes < 2 or len(todo) < 2
    made = _one_by_one(plan, todo, out) if alone else _in_processes(plan, todo, out, processes)
    done, total = 0, len(plan.runs)
    for part, known in zip(parts, before, strict=True):
        collected: list[Facts] = list(known or ())
        name = plan.campaign.experiments[part.circuits[-1].experiment].name
        if known is None:
            for count, facts in next(made):
                collected += facts
                if progress:
                    progress(done + count, total, name)
            write_text(part.record, json.dumps({"versions": versions(), "circuits": collected, **_seal(part)}))
        done += part.n_runs
        if progress:
            progress(done, total, name)
        yield from zip(part.circuits, collected, strict=True)


def remove_records(out: Path) -> None:
    """Remove what only an interrupted build needs."""
    for path in (out / RECORDS).glob("*.json"):
        path.unlink()
    if (out / RECORDS).is_dir():
        (out / RECORDS).rmdir()


def _parts(plan: Plan, out: Path) -> Iterator[_Part]:
    """The circuits in the order in which they are made, in parts of about the same number of runs."""
    packed = len(plan.runs) > PACK_ABOVE
    size = ARCHIVE_SIZE if packed else PART_SIZE
    part: list[PlannedRuns] = []
    number = count = 0
    circuits = _circuits(plan)
    for circuit in circuits:
        part.append(circuit)
        count += len(circuit.runs)
        if count >= size or circuit is circuits[-1]:
            number += 1
            archive = out / FOLDER / archive_name(number) if packed else None
            yield _Part(number, part, archive, out / RECORDS / f"{number:06d}.json")
            part, count = [], 0


def _circuits(plan: Plan) -> list[PlannedRuns]:
    """The different circuits: experiment by experiment, instance, depth, role, setting."""
    found: dict[tuple[int, int, int, str, int], PlannedRuns] = {}
    for run in plan.runs:
        slot = run.slot
        key = (run.experiment, slot.instance, slot.depth, slot.role.name, slot.number)
        found.setdefault(key, PlannedRuns(run.experiment, slot, [])).runs.append(run)
    return [found[key] for key in sorted(found)]


# What a maker yields of each part: an iterator of (runs written so far, facts of the circuits since the last one)
_Made = Iterator[Iterator[tuple[int, list[Facts]]]]


def _one_by_one(plan: Plan, parts: Sequence[_Part], out: Path) -> _Made:
    for part in parts:
        yield _make(plan, part, out)


def _in_processes(plan: Plan, parts: Sequence[_Part], out: Path, processes: int) -> _Made:
    """Spawned, never forked: a fork would copy the threads of numerical libraries in any state."""
    light = replace(plan, runs=())
    context = multiprocessing.get_context("spawn")
    with ProcessPoolExecutor(min(processes, len(parts)), mp_context=context, initializer=_leave_to_parent) as pool:
        futures = [pool.submit(_make_whole, light, part, out) for part in parts]
        try:
            for part, future in zip(parts, futures, strict=True):
                yield iter([(part.n_runs, future.result())])
        except BaseException:
            pool.shutdown(cancel_futures=True)
            raise


def _leave_to_parent() -> None:
    """Ctrl-C reaches all processes of a terminal; the one that was asked stops the others."""
    signal.signal(signal.SIGINT, signal.SIG_IGN)


def _make_whole(plan: Plan, part: _Part, out: Path) -> list[Facts]:
    return [facts for _, some in _make(plan, part, out) for facts in some]


def _make(plan: Plan, part: _Part, out: Path) -> Iterator[tuple[int, list[Facts]]]:
    """Make the circuits of a part and write them."""
    campaign = plan.campaign
    texts: dict[str, str] = {}
    done = 0
    for circuit in part.circuits:
        expander = plan.expanders[circuit.experiment]
        assert expander is not None
        written = expander.write(circuit.slot)
        text = write_circuit(written.circuit, campaign.circuit_format)
        facts = circuit_facts(written.circuit, campaign.device.timings)
        facts |= {"target": written.target, "params": written.params, "sha256": sha256_bytes(text.encode())}
        for run in circuit.runs:
            name = circuit_file(plan.circuit_id(run), campaign.circuit_format)
            if part.archive is None:
                write_new(out / FOLDER / name, text.encode())
            else:
                texts[name] = text
        done += len(circuit.runs)
        if circuit is part.circuits[-1] and part.archive is not None:
            write_bytes(part.archive, pack(texts))
        yield done, [facts]


def _seal(part: _Part) -> Facts:
    return {} if part.archive is None else {"archive": sha256_file(part.archive)}


def _written_before(part: _Part, plan: Plan, out: Path) -> list[Facts] | None:
    """What a run before this one recorded of a part, if its files are as it wrote them; None to make it again."""
    try:
        record = json.loads(part.record.read_text(encoding="utf-8"))
        facts: list[Facts] = record["circuits"]
        if record["versions"] != versions() or len(facts) != len(part.circuits):
            return None
        if part.archive is not None:
            return facts if sha256_file(part.archive) == record["archive"] else None
        for circuit, made in zip(part.circuits, facts, strict=True):
            for run in circuit.runs:
                name = circuit_file(plan.circuit_id(run), plan.campaign.circuit_format)
                if sha256_file(out / FOLDER / name) != made["sha256"]:
                    return None
    except (OSError, ValueError, KeyError, TypeError):
        return None
    return facts
