"""From a campaign to a kit: plan all circuits, give them their order, then write them one by one.

An interrupted build goes on where it stopped. What is in a kit depends on the campaign alone: the same campaign gives
the same bytes.
"""

from __future__ import annotations

import tempfile
from collections.abc import Iterable, Sequence
from dataclasses import replace
from pathlib import Path

from rcbench.campaign import Campaign, Experiment, dump_campaign, load_campaign
from rcbench.files import OutputFolder, output_folder, sha256_bytes, write_bytes, write_text
from rcbench.kit.folder import (
    CAMPAIGN,
    HANDOVER,
    PROTOCOLS,
    ROSTER_FILE,
    Kit,
    defining_files,
    file_hashes,
    in_run_order,
    kit_hash,
    read_kit,
)
from rcbench.kit.handover import handover
from rcbench.kit.order import Entry
from rcbench.kit.planning import Plan, plan_kit
from rcbench.kit.roster import RosterRow, write_roster
from rcbench.kit.writing import Facts, PlannedRuns, Progress, remove_records, write_circuits
from rcbench.protocol import protocol_text


def build_kit(
    campaign: Campaign,
    out: Path | str,
    *,
    circuit_format: str | None = None,
    missing: frozenset[str] | None = None,
    progress: Progress | None = None,
    processes: int = 1,
) -> Kit:
    """Write the kit of a campaign into a folder, or what is lacking of it.

    Args:
        campaign: what to build.
        out: the folder; an interrupted build of the same campaign goes on, another campaign's folder is refused.
        circuit_format: one of campaign.CIRCUIT_FORMATS in place of the campaign's.
        missing: circuit ids; only these runs are built.
        progress: called with (circuits written, circuits in all, experiment).
        processes: make the circuits in so many processes, which are spawned: a script that asks for more than one must
            guard its own start by ``if __name__ == "__main__"``.
    Raises:
        InputError: whatever the device cannot run, limits that are exceeded, a folder of other inputs.
    """
    out = Path(out)
    if circuit_format is not None:
        campaign = replace(campaign, circuit_format=circuit_format)
    plan = plan_kit(campaign, missing)
    campaign, own = _with_own_protocols(campaign)
    text = dump_campaign(campaign)
    _check_readable(text, own)
    inputs = {
        "campaign": sha256_bytes(text.encode()),
        "protocols": file_hashes(own),
        "missing": None if missing is None else sha256_bytes("\n".join(sorted(missing)).encode()),
    }
    with output_folder(out, "build", inputs) as folder:
        if not folder.complete:
            rows = _rows(plan, write_circuits(plan, out, progress, processes))
            for name, data in own.items():
                write_bytes(out / name, data)
            write_text(out / CAMPAIGN, text)
            finish_kit(folder, campaign, rows)
            remove_records(out)
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


def write_resolved(campaign: Campaign, folder: Path) -> None:
    """Write campaign.toml with every default filled in and a user's protocol files beside it: it reads alone."""
    campaign, own = _with_own_protocols(campaign)
    for name, data in own.items():
        write_bytes(folder / name, data)
    write_text(folder / CAMPAIGN, dump_campaign(campaign))


def _check_readable(text: str, own: dict[str, bytes]) -> None:
    """A campaign that was made in Python may hold what no file may: told now, not when the circuits are written."""
    with tempfile.TemporaryDirectory() as folder:
        for name, data in own.items():
            write_bytes(Path(folder) / name, data)
        write_text(Path(folder) / CAMPAIGN, text)
        load_campaign(Path(folder) / CAMPAIGN)


def finish_kit(folder: OutputFolder, campaign: Campaign, rows: Sequence[RosterRow], **facts: object) -> str:
    """Write roster and hand-over note of a folder that holds campaign.toml and the circuits; returns the kit's hash."""
    ordered = in_run_order(rows)
    write_text(folder.path / ROSTER_FILE, write_roster(ordered))
    files = defining_files(folder.path)
    whole = kit_hash(files)
    write_text(folder.path / HANDOVER, handover(campaign, ordered, whole))
    folder.finish(kit_hash=whole, files=file_hashes(files), seed=campaign.seed, circuits=len(rows), **facts)
    return whole


def _rows(plan: Plan, facts: Iterable[tuple[PlannedRuns, Facts]]) -> list[RosterRow]:
    return [_row(plan, run, made) for circuit, made in facts for run in circuit.runs]


def _row(plan: Plan, run: Entry, made: Facts) -> RosterRow:
    campaign = plan.campaign
    experiment, expander = campaign.experiments[run.experiment], plan.expanders[run.experiment]
    assert expander is not None
    physical = campaign.device.physical
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
        params=made["params"],
        two_qubit_gates=made["two_qubit_gates"],
        native_layers=made["native_layers"],
        duration_ns=made["duration_ns"],
        sha256=made["sha256"],
    )
