"""A kit as a folder: reading it back, every file checked against the hashes that were stored when it was written."""

from __future__ import annotations

import hashlib
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from pathlib import Path

from rcbench.campaign import Campaign, Experiment, load_campaign
from rcbench.circuits.circuit import Circuit
from rcbench.circuits.export import SUFFIX
from rcbench.errors import InputError
from rcbench.files import PROVENANCE, read_provenance, sha256_bytes
from rcbench.kit.roster import RosterRow, read_roster
from rcbench.kit.storage import Store
from rcbench.protocol import Protocol, load_protocol

CAMPAIGN, ROSTER_FILE, HANDOVER, PROTOCOLS = "campaign.toml", "roster.csv", "HANDOVER.md", "protocols"
_AS_WRITTEN = "the file as rcbench wrote it; build the kit again rather than edit it"


@dataclass(frozen=True, slots=True, eq=False)
class Kit:
    """A kit folder.

    Args:
        folder: where it is. campaign: what it was built from. rows: the roster in run order.
        hash: SHA-256 over campaign.toml, roster.csv and the protocol files of its own; margins and rule are in it.
    """

    folder: Path
    campaign: Campaign
    rows: tuple[RosterRow, ...]
    hash: str
    _store: Store = field(repr=False)
    _protocols: dict[str, Protocol] = field(default_factory=dict, repr=False)

    def text(self, row: RosterRow) -> str:
        """The text of a circuit; InputError names a file that was edited."""
        name = circuit_file(row.circuit_id, self.campaign.circuit_format)
        text = self._store.read(name)
        if sha256_bytes(text.encode()) != row.sha256:
            raise InputError("circuit", self._store.place(name), f"{_AS_WRITTEN} (its hash differs from the roster's)")
        return text

    def circuit(self, row: RosterRow) -> Circuit:
        """The circuit of a row, read from the kit's text; an adopted one without the qubits that it leaves alone."""
        from rcbench.circuits.qasm import read_circuit
        from rcbench.circuits.relabel import restrict, used_qubits

        name = circuit_file(row.circuit_id, self.campaign.circuit_format)
        circuit = read_circuit(self.text(row), self.campaign.circuit_format, name)
        return circuit if circuit.n_qubits == row.n_qubits else restrict(circuit, used_qubits(circuit))

    def protocol(self, experiment: Experiment | str) -> Protocol:
        """The protocol of an experiment."""
        if isinstance(experiment, str):
            experiment = self.campaign.experiment(experiment)
        if experiment.protocol is None:
            raise InputError("experiment", experiment.name, "an experiment with a protocol")
        if experiment.protocol not in self._protocols:
            self._protocols[experiment.protocol] = load_protocol(experiment.protocol)
        return self._protocols[experiment.protocol]


def circuit_file(circuit_id: str, circuit_format: str) -> str:
    """Name of a circuit's file."""
    return circuit_id + SUFFIX[circuit_format]


def kit_hash(files: Mapping[str, bytes]) -> str:
    """SHA-256 over the files that define a kit, by name."""
    digest = hashlib.sha256()
    for name in sorted(files):
        digest.update(f"{name}\n{len(files[name])}\n".encode() + files[name])
    return digest.hexdigest()


def defining_files(folder: Path) -> dict[str, bytes]:
    """The files of a kit folder that its hash is made of, by name."""
    paths = [folder / CAMPAIGN, folder / ROSTER_FILE, *sorted((folder / PROTOCOLS).glob("*.toml"))]
    found = {}
    for path in paths:
        try:
            found[path.relative_to(folder).as_posix()] = path.read_bytes()
        except OSError as error:
            raise InputError("kit", str(path), f"a file of the kit ({error.strerror})") from None
    return found


def read_kit(folder: Path | str) -> Kit:
    """Open a kit folder; circuits are read and checked when they are asked for.

    Raises:
        InputError: no kit, a kit whose building was interrupted, or a file that was edited by hand (named).
    """
    folder = Path(folder)
    if not folder.is_dir():
        raise InputError("kit", str(folder), "a folder that `rcbench build` or `rcbench adopt` wrote")
    facts = read_provenance(folder)
    stored = facts.get("files")
    if not isinstance(stored, dict):
        allowed = "a kit that is whole" if facts else "a folder that `rcbench build` or `rcbench adopt` wrote"
        raise InputError("kit", str(folder), f"{allowed} (no file hashes in {PROVENANCE})")
    found = defining_files(folder)
    for name in sorted(stored.keys() | found.keys()):
        if name not in found or stored.get(name) != sha256_bytes(found[name]):
            raise InputError("kit", str(folder / name), _AS_WRITTEN)
    campaign = load_campaign(folder / CAMPAIGN)
    return Kit(folder, campaign, read_roster(folder / ROSTER_FILE), kit_hash(found), Store(folder))


def file_hashes(files: Mapping[str, bytes]) -> dict[str, str]:
    """SHA-256 of each file by name, for provenance.json."""
    return {name: sha256_bytes(data) for name, data in files.items()}


def in_run_order(rows: Sequence[RosterRow]) -> list[RosterRow]:
    """The rows as the roster lists them."""
    return sorted(rows, key=lambda row: row.run_order)
