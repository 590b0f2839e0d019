"""Kits of circuits that exist already: a folder of OpenQASM files becomes a kit that all other commands work on.

Each circuit is taken over as it is written, with the files that it includes put in place. The circuits become one
experiment named `adopted`; where they act on different sets of qubits, one experiment a set, named after its size.
Their depth is the number of layers that hold a two-qubit gate, their instance the running number at that depth.

reading     the circuits of a folder
placing     their qubits on the device, and the campaign of the kit
targets     ideal outcomes, found or given
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from pathlib import Path

from rcbench.adopt.placing import Place, make_campaign, on_device
from rcbench.adopt.reading import Adopted, Progress, read_folder
from rcbench.adopt.targets import find_targets, read_targets
from rcbench.campaign import ADOPTED, Campaign, dump_campaign, load_device
from rcbench.errors import InputError, suggest
from rcbench.files import (
    OutputFolder,
    output_folder,
    read_provenance,
    sha256_bytes,
    sha256_file,
    write_bytes,
    write_text,
)
from rcbench.kit import FOLDER, Kit, RosterRow, circuit_facts, read_kit, write_roster
from rcbench.kit.folder import CAMPAIGN, HANDOVER, ROSTER_FILE, defining_files, file_hashes, in_run_order, kit_hash
from rcbench.kit.handover_adopted import handover_adopted
from rcbench.randomness import Draw

PROTOCOLS = ("direct-sampling", "mirror-return")
ROLES = {"direct-sampling": "circuit", "mirror-return": "run"}


def adopt(
    circuits: Path | str,
    out: Path | str,
    *,
    include_dirs: Sequence[Path | str] = (),
    protocol: str = "direct-sampling",
    device_file: Path | str | None = None,
    margin: float | None = None,
    targets: Path | str | None = None,
    shots: int = 1000,
    progress: Progress | None = None,
) -> Kit:
    """Make a kit from a folder of OpenQASM 2.0 or 3 files.

    Args:
        circuits: the folder; its files that end in one of ENDINGS. A circuit_id is the file's name without its ending.
        out: folder of the kit; one of other inputs is refused.
        include_dirs: folders of the files that the circuits include; their own folder is searched first.
        protocol: one of PROTOCOLS. mirror-return is for circuits whose ideal outcome is one bitstring.
        device_file: TOML with a [device] table; qubit j of a program is qubit j of the device, $k the one labelled k.
            Without it there is no noise model.
        margin: of every signature of the protocol, absolute or relative as its own default is; None for estimates only.
        targets: CSV circuit_id,bitstring with the ideal outcomes (mirror-return); else they are found by simulation.
        shots: of each circuit.
        progress: called with (circuits done, circuits in all, what is done).
    Raises:
        InputError: with file and line, for whatever is not read; circuits that do not fit the device or the protocol.
    """
    folder, out = Path(circuits), Path(out)
    if protocol not in PROTOCOLS:
        raise InputError("protocol", protocol, suggest(protocol, PROTOCOLS))
    if targets is not None and protocol != "mirror-return":
        raise InputError("targets", str(targets), "targets with the protocol mirror-return only")
    if shots < 1:
        raise InputError("shots", shots, "a whole number, 1 or more")
    found = read_folder(folder, [Path(one) for one in include_dirs], progress)
    device = load_device(Path(device_file)) if device_file is not None else None
    where, device = on_device(found, device)
    campaign, places = make_campaign(found, where, device, protocol, margin, shots)
    outcomes: dict[str, str] = {}
    if targets is not None:
        outcomes = read_targets(Path(targets), found)
    elif protocol == "mirror-return" and not read_provenance(out).get("complete"):
        outcomes = find_targets(found, progress)  # before the folder is touched: they may be refused
    inputs = {
        "campaign": sha256_bytes(dump_campaign(campaign).encode()),
        "circuits": {one.circuit_id: sha256_bytes(one.program.text.encode()) for one in found},
        "targets": sha256_file(Path(targets)) if targets is not None else None,
    }
    with output_folder(out, "adopt", inputs) as folder_out:
        if not folder_out.complete:
            _write(folder_out, campaign, found, places, outcomes, progress)
    return read_kit(out)


def _write(
    folder: OutputFolder,
    campaign: Campaign,
    found: Sequence[Adopted],
    places: Mapping[str, Place],
    targets: Mapping[str, str],
    progress: Progress | None,
) -> None:
    order = Draw(campaign.seed, "run order", ADOPTED).permutation(len(found)).tolist()
    rows = []
    for done, (one, run_order) in enumerate(zip(found, order, strict=True), start=1):
        data = one.program.text.encode()
        write_bytes(folder.path / FOLDER / f"{one.circuit_id}.qasm", data)
        rows.append(_row(one, places[one.circuit_id], campaign, targets.get(one.circuit_id, ""), run_order, data))
        if progress:
            progress(done, len(found), "written")
    rows = in_run_order(rows)
    write_text(folder.path / CAMPAIGN, dump_campaign(campaign))
    write_text(folder.path / ROSTER_FILE, write_roster(rows))
    files = defining_files(folder.path)
    whole = kit_hash(files)
    write_text(folder.path / HANDOVER, handover_adopted(campaign, rows, whole))
    folder.finish(kit_hash=whole, files=file_hashes(files), seed=campaign.seed, circuits=len(rows))


def _row(one: Adopted, place: Place, campaign: Campaign, target: str, run_order: int, data: bytes) -> RosterRow:
    experiment, device = place.experiment, campaign.device
    per_job = device.limits.circuits_per_job
    complete = len(one.program.bits) == one.program.declared_bits
    return RosterRow(
        circuit_id=one.circuit_id,
        experiment=experiment.name,
        protocol=str(experiment.protocol),
        role=ROLES[str(experiment.protocol)],
        family=experiment.circuits.family,
        gates=experiment.circuits.gates,
        n_qubits=len(one.qubits),
        physical_qubits=tuple(device.physical[qubit] for qubit in experiment.qubits),
        patch="",
        depth=one.depth,
        instance=place.instance,
        setting="",
        repeat=0,
        shots=experiment.shots,
        run_order=run_order,
        batch=run_order // per_job if per_job else 0,
        target=target,
        params={} if complete else {"bits": list(one.program.bits)},
        sha256=sha256_bytes(data),
        **circuit_facts(one.circuit, device.timings),
    )
