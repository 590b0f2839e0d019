"""From a campaign to a kit: plan all circuits, give them their order, then write them one by one.

The plan is cheap and whole; circuits are made lazily, in parts, and each part is recorded in `.parts` when it is
written, so that an interrupted build goes on where it stopped. What is in a kit depends on the campaign alone: the same
campaign gives the same bytes.
"""

from __future__ import annotations

import json
from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

from rcbench.campaign import Campaign, Experiment, dump_campaign
from rcbench.circuits.export import write_circuit
from rcbench.files import OutputFolder, output_folder, sha256_bytes, sha256_file, versions, write_bytes, write_text
from rcbench.kit.folder import (
    CAMPAIGN,
    HANDOVER,
    PROTOCOLS,
    ROSTER_FILE,
    Kit,
    circuit_file,
    defining_files,
    file_hashes,
    in_run_order,
    kit_hash,
    read_kit,
)
from rcbench.kit.handover import handover
from rcbench.kit.order import Entry
from rcbench.kit.planning import Plan, plan_kit
from rcbench.kit.roster import RosterRow, circuit_facts, write_roster
from rcbench.kit.storage import ARCHIVE_SIZE, FOLDER, PACK_ABOVE, archive_name, pack, write_new
from rcbench.protocol import protocol_text
from rcbench.protocol.expansion import Slot

Progress = Callable[[int, int, str], None]
_PARTS = ".parts"
_PART_SIZE = 200  # runs between two records of what is written, where circuits are files of their own


def build_kit(
    campaign: Campaign,
    out: Path | str,
    *,
    circuit_format: str | None = None,
    missing: frozenset[str] | None = None,
    progress: Progress | None = None,
) -> Kit:
    """Write the kit of a campaign into a folder, or what is lacking of it.

    Args:
        campaign: what to build.
        out: the folder; an interrupted build of the same campaign goes on, another campaign's folder is refused.
        circuit_format: one of campaign.CIRCUIT_FORMATS in place of the campaign's.
        missing: circuit ids; only these runs are built.
        progress: called with (circuits written, circuits in all, experiment).
    Raises:
        InputError: whatever the device cannot run, limits that are exceeded, a folder of other inputs.
    """
    out = Path(out)
    if circuit_format is not None:
        campaign = replace(campaign, circuit_format=circuit_format)
    plan = plan_kit(campaign, missing)
    campaign, own = _with_own_protocols(campaign)
    text = dump_campaign(campaign)
    inputs = {
        "campaign": sha256_bytes(text.encode()),
        "protocols": file_hashes(own),
        "missing": None if missing is None else sha256_bytes("\n".join(sorted(missing)).encode()),
    }
    with output_folder(out, "build", inputs) as folder:
        if not folder.complete:
            rows = _write_circuits(plan, out, progress)
            for name, data in own.items():
                write_bytes(out / name, data)
            write_text(out / CAMPAIGN, text)
            finish_kit(folder, campaign, rows)
            _remove_parts(out / _PARTS)
    return read_kit(out)


def _with_own_protocols(campaign: Campaign) -> tuple[Campaign, dict[str, bytes]]:
    """The campaign with a user's protocol files taken into the kit, and these files by their name there."""
    own: dict[str, bytes] = {}
    names: dict[str, str] = {}
    experiments: list[Experiment] = []
    for experiment in campaign.experiments:
        path = experiment.protocol
        if path is not None and path.endswith(".toml"):
            if path not in names:
                name = f"{PROTOCOLS}/{Path(path).name}"
                data = protocol_text(path).encode()
                while name in own and own[name] != data:
                    name = f"{name.removesuffix('.toml')}-2.toml"
                names[path], own[name] = name, data
            experiment = replace(experiment, protocol=names[path])
        experiments.append(experiment)
    return replace(campaign, experiments=tuple(experiments)), own


def finish_kit(folder: OutputFolder, campaign: Campaign, rows: Sequence[RosterRow], **facts: object) -> str:
    """Write roster and hand-over note of a folder that holds campaign.toml and the circuits; returns the kit's hash."""
    ordered = in_run_order(rows)
    write_text(folder.path / ROSTER_FILE, write_roster(ordered))
    files = defining_files(folder.path)
    whole = kit_hash(files)
    write_text(folder.path / HANDOVER, handover(campaign, ordered, whole))
    folder.finish(kit_hash=whole, files=file_hashes(files), seed=campaign.seed, circuits=len(rows), **facts)
    return whole


@dataclass(slots=True)
class _Circuit:
    """A circuit of the plan and its runs."""

    experiment: int
    slot: Slot
    runs: list[Entry]


def _circuits(plan: Plan) -> list[_Circuit]:
    """The different circuits in the order in which they are made: experiment, instance, depth, role, setting."""
    found: dict[tuple[int, str, int, int, int], _Circuit] = {}
    for run in plan.runs:
        slot = run.slot
        key = (run.experiment, slot.role.name, slot.instance, slot.depth, slot.number)
        found.setdefault(key, _Circuit(run.experiment, slot, [])).runs.append(run)
    return sorted(found.values(), key=_place)


def _place(circuit: _Circuit) -> tuple[int, int, int, str, int]:
    slot = circuit.slot
    return circuit.experiment, slot.instance, slot.depth, slot.role.name, slot.number


def _write_circuits(plan: Plan, out: Path, progress: Progress | None) -> list[RosterRow]:
    """Write all circuits and return their roster rows; parts that a run before this one wrote are kept."""
    circuits = _circuits(plan)
    packed = len(plan.runs) > PACK_ABOVE
    rows: list[RosterRow] = []
    for number, part in enumerate(_parts(circuits, ARCHIVE_SIZE if packed else _PART_SIZE), start=1):
        record = out / _PARTS / f"{number:06d}.json"
        facts = _written_before(record, plan, part, out, packed, number)
        if facts is None:
            facts = _write_part(plan, part, out, packed, number, progress, len(rows))
            write_text(record, json.dumps({"versions": versions(), **facts}))
        for circuit, made in zip(part, facts["circuits"], strict=True):
            rows += [_row(plan, run, made) for run in circuit.runs]
        if progress:
            progress(len(rows), len(plan.runs), plan.campaign.experiments[part[-1].experiment].name)
    return rows


def _parts(circuits: Sequence[_Circuit], size: int) -> Iterator[list[_Circuit]]:
    """Circuits in lists of about `size` runs."""
    part: list[_Circuit] = []
    count = 0
    for circuit in circuits:
        part.append(circuit)
        count += len(circuit.runs)
        if count >= size:
            yield part
            part, count = [], 0
    if part:
        yield part


def _write_part(
    plan: Plan, part: Sequence[_Circuit], out: Path, packed: bool, number: int, progress: Progress | None, done: int
) -> dict[str, Any]:
    """Make the circuits of a part and write them; returns what the roster needs of each."""
    campaign = plan.campaign
    made: list[dict[str, Any]] = []
    texts: dict[str, str] = {}
    for circuit in part:
        expander = plan.expanders[circuit.experiment]
        assert expander is not None
        written = expander.write(circuit.slot)
        text = write_circuit(written.circuit, campaign.circuit_format)
        facts = circuit_facts(written.circuit, campaign.device.timings)
        facts |= {"target": written.target, "params": written.params, "sha256": sha256_bytes(text.encode())}
        made.append(facts)
        for run in circuit.runs:
            name = circuit_file(plan.circuit_id(run), campaign.circuit_format)
            if packed:
                texts[name] = text
            else:
                write_new(out / FOLDER / name, text.encode())
        done += len(circuit.runs)
        if progress:
            progress(done, len(plan.runs), campaign.experiments[circuit.experiment].name)
    if not packed:
        return {"circuits": made}
    path = out / FOLDER / archive_name(number)
    write_bytes(path, pack(texts))
    return {"circuits": made, "archive": sha256_file(path)}


def _written_before(
    record: Path, plan: Plan, part: Sequence[_Circuit], out: Path, packed: bool, number: int
) -> dict[str, Any] | None:
    """What a run before this one recorded of a part, if its files are as it wrote them; None to make it again."""
    try:
        facts = json.loads(record.read_text(encoding="utf-8"))
        if facts["versions"] != versions() or len(facts["circuits"]) != len(part):
            return None
        if packed:
            return facts if sha256_file(out / FOLDER / archive_name(number)) == facts["archive"] else None
        for circuit, made in zip(part, facts["circuits"], strict=True):
            for run in circuit.runs:
                name = circuit_file(plan.circuit_id(run), plan.campaign.circuit_format)
                if sha256_file(out / FOLDER / name) != made["sha256"]:
                    return None
    except (OSError, ValueError, KeyError, TypeError):
        return None
    return dict(facts)


def _row(plan: Plan, run: Entry, made: dict[str, Any]) -> RosterRow:
    campaign = plan.campaign
    experiment, expander = campaign.experiments[run.experiment], plan.expanders[run.experiment]
    assert expander is not None
    physical = campaign.device.physical
    params = {**made["params"], "anchor": True} if run.anchor else made["params"]
    return RosterRow(
        circuit_id=plan.circuit_id(run),
        experiment=experiment.name,
        protocol=expander.protocol.name,
        role=run.slot.role.name,
        family=experiment.circuits.family,
        gates=experiment.circuits.gates,
        n_qubits=experiment.n_qubits,
        measured_qubits=tuple(made["measured_qubits"]),
        physical_qubits=tuple(physical[qubit] if physical else str(qubit) for qubit in experiment.qubits),
        patch=experiment.patch,
        depth=run.slot.depth,
        instance=run.slot.instance,
        setting=run.slot.setting,
        repeat=run.repeat,
        shots=experiment.shots,
        run_order=run.run_order,
        batch=run.batch,
        target=made["target"],
        params=params,
        two_qubit_gates=made["two_qubit_gates"],
        native_layers=made["native_layers"],
        duration_ns=made["duration_ns"],
        sha256=made["sha256"],
    )


def _remove_parts(parts: Path) -> None:
    for path in parts.glob("*.json"):
        path.unlink()
    if parts.is_dir():
        parts.rmdir()
