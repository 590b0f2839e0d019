"""Kits written and read back: what is in them, hashes, resuming, and what is refused."""

from __future__ import annotations

import io
import json
import zipfile
from pathlib import Path

import numpy as np
import pytest
from kit_cases import CAMPAIGN, small_campaign

from rcbench.campaign import load_campaign
from rcbench.circuits.circuit import Circuit, CircuitBuilder
from rcbench.device import Timings
from rcbench.errors import InputError
from rcbench.files import read_provenance
from rcbench.kit import build_kit, duration_ns, plan_kit, read_kit, storage
from rcbench.kit import writing as writing_module
from rcbench.protocol import expand, load_protocol, protocol_text
from rcbench.tables import ROSTER


def contents(folder: Path) -> dict[str, bytes]:
    """Every file of a kit but the provenance, which holds a date."""
    return {
        path.relative_to(folder).as_posix(): path.read_bytes()
        for path in sorted(folder.rglob("*"))
        if path.is_file() and path.name != "provenance.json"
    }


def assert_same_circuit(one: Circuit, two: Circuit) -> None:
    for name in ("kind", "qubits", "parameters"):
        assert np.array_equal(getattr(one, name), getattr(two, name))
    assert np.array_equal(np.unique(one.layer, return_inverse=True)[1], np.unique(two.layer, return_inverse=True)[1])


@pytest.fixture
def kit(tmp_path):
    return build_kit(small_campaign(tmp_path), tmp_path / "kit")


def test_a_kit_holds_the_roster_the_circuits_and_the_note(kit):
    names = {path.name for path in kit.folder.iterdir()}
    assert names == {"campaign.toml", "roster.csv", "circuits", "HANDOVER.md", "provenance.json"}
    assert (kit.folder / "roster.csv").read_text().splitlines()[0] == ",".join(ROSTER)
    # sampling 4 x 3, echo 4 x 3 x 2, otoc 3 x 3 x 3, control 2 x 2
    assert len(kit.rows) == 12 + 24 + 27 + 4
    assert {row.circuit_id for row in kit.rows} == {path.stem for path in (kit.folder / "circuits").iterdir()}
    assert [row.run_order for row in kit.rows] == list(range(len(kit.rows)))
    row = next(row for row in kit.rows if row.circuit_id == "otoc-butterfly-i002-d003-s001")
    assert (row.experiment, row.protocol, row.role, row.family) == ("otoc", "butterfly-echo", "butterfly", "brickwork")
    assert (row.gates, row.depth, row.instance, row.setting) == ("cz+quarter-turns", 3, 2, "butterfly=2")
    assert (row.n_qubits, row.measured_qubits, row.physical_qubits) == (4, (0, 1), ("A1", "A2", "B1", "B2"))
    assert row.params == {"butterfly": 2, "pauli": "X", "measured": "Z", "probes": [0, 1]}
    assert row.two_qubit_gates == 2 * 5
    # 2 x (4 one-qubit + 3 two-qubit layers) and the butterfly
    assert row.native_layers == 15
    assert row.duration_ns == 9 * 25 + 6 * 40 + 500
    echo = next(row for row in kit.rows if row.experiment == "echo" and row.repeat == 1)
    assert echo.circuit_id.endswith("-r1")
    assert echo.base_id == echo.circuit_id.removesuffix("-r1")
    assert echo.target == "0000"


def test_the_circuits_of_a_kit_are_those_of_the_protocols(kit):
    for name in ("sampling", "echo", "otoc"):
        experiment = kit.campaign.experiment(name)
        rows = {row.circuit_id: row for row in kit.rows}
        for planned in expand(load_protocol(experiment.protocol), experiment, kit.campaign):
            row = rows[planned.circuit_id]
            assert_same_circuit(kit.circuit(row), planned.circuit)
            assert (row.target, row.setting, row.repeat) == (planned.target, planned.setting, planned.repeat)
            assert dict(row.params) == dict(planned.params)
        assert kit.protocol(experiment).name == kit.protocol(name).name == experiment.protocol


@pytest.mark.parametrize("circuit_format", ["qasm2", "cirq-json"])
def test_all_formats_hold_the_same_circuits(kit, tmp_path, circuit_format):
    other = build_kit(small_campaign(tmp_path), tmp_path / "other", circuit_format=circuit_format)
    assert other.campaign.circuit_format == circuit_format
    for one, two in zip(kit.rows[:10], other.rows, strict=False):
        assert one.circuit_id == two.circuit_id
        first, second = kit.circuit(one), other.circuit(two)
        assert np.array_equal(first.qubits, second.qubits)
        assert second.measured_qubits == one.measured_qubits
        assert np.allclose(first.parameters, second.parameters, atol=1e-9)


def test_the_same_campaign_gives_the_same_bytes(kit, tmp_path):
    again = build_kit(small_campaign(tmp_path), tmp_path / "again")
    assert contents(again.folder) == contents(kit.folder)
    assert again.hash == kit.hash == read_provenance(kit.folder)["kit_hash"]


def test_another_experiment_changes_no_other_circuit(kit, tmp_path):
    path = tmp_path / "more.toml"
    first = CAMPAIGN.index("[[experiment]]")
    more = '[[experiment]]\nname = "before"\nprotocol = "mirror-echo"\ndepths = [2]\ninstances = 3\n\n'
    path.write_text((CAMPAIGN[:first] + more + CAMPAIGN[first:]).format(limits=""))
    again = build_kit(load_campaign(path), tmp_path / "more")
    shas = {row.circuit_id: row.sha256 for row in again.rows}
    assert all(shas[row.circuit_id] == row.sha256 for row in kit.rows)


def test_a_kit_that_is_complete_is_left_alone(kit, tmp_path):
    before = {path: path.stat().st_mtime_ns for path in kit.folder.rglob("*")}
    again = build_kit(small_campaign(tmp_path), kit.folder)
    assert again.hash == kit.hash
    assert {path: path.stat().st_mtime_ns for path in kit.folder.rglob("*")} == before


def test_an_interrupted_build_goes_on_and_ends_in_the_same_kit(kit, tmp_path, monkeypatch):
    monkeypatch.setattr(writing_module, "PART_SIZE", 10)
    out = tmp_path / "again"

    def stop(done: int, total: int, name: str) -> None:
        if done > 35:
            raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt):
        build_kit(small_campaign(tmp_path), out, progress=stop)
    with pytest.raises(InputError, match="a kit that is whole"):
        read_kit(out)
    early = {path: path.stat().st_mtime_ns for path in (out / "circuits").iterdir()}
    assert 35 <= len(early) < len(kit.rows)
    written: list[int] = []
    real = writing_module.write_circuit
    monkeypatch.setattr(writing_module, "write_circuit", lambda *args: written.append(1) or real(*args))
    again = build_kit(small_campaign(tmp_path), out)
    assert contents(again.folder) == contents(kit.folder)
    assert {path: path.stat().st_mtime_ns for path in early} == early
    assert len(written) == 55 - 21  # 55 different circuits; three records of 10 runs each hold 10 + 6 + 5 of them


def test_a_damaged_circuit_of_an_interrupted_build_is_made_again(kit, tmp_path, monkeypatch):
    monkeypatch.setattr(writing_module, "PART_SIZE", 10)
    out = tmp_path / "again"

    def stop(done: int, total: int, name: str) -> None:
        if done > 35:
            raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt):
        build_kit(small_campaign(tmp_path), out, progress=stop)
    next((out / "circuits").iterdir()).write_text("half a file")
    assert contents(build_kit(small_campaign(tmp_path), out).folder) == contents(kit.folder)


def test_several_processes_write_the_same_kit(kit, tmp_path, monkeypatch):
    monkeypatch.setattr(writing_module, "PART_SIZE", 20)
    seen: list[tuple[int, int]] = []
    again = build_kit(
        small_campaign(tmp_path),
        tmp_path / "two",
        processes=2,
        progress=lambda done, total, _: seen.append((done, total)),
    )
    assert contents(again.folder) == contents(kit.folder)
    assert seen[-1] == (67, 67)
    assert seen == sorted(seen)


def test_another_campaign_is_refused_and_nothing_is_changed(kit, tmp_path):
    before = contents(kit.folder)
    other = tmp_path / "other.toml"
    other.write_text(CAMPAIGN.format(limits="").replace("seed = 4", "seed = 5"))
    with pytest.raises(InputError, match="this one is of other inputs"):
        build_kit(load_campaign(other), kit.folder)
    assert contents(kit.folder) == before


@pytest.mark.parametrize("name", ["campaign.toml", "roster.csv"])
def test_a_file_edited_by_hand_is_refused_by_name(kit, name):
    path = kit.folder / name
    path.write_text(path.read_text().replace("200", "300"))
    with pytest.raises(InputError, match=rf"kit: found '.*{name}'; allowed: the file as rcbench wrote it"):
        read_kit(kit.folder)


def test_a_circuit_edited_by_hand_is_refused_by_name_when_it_is_read(kit):
    path = kit.folder / "circuits" / f"{kit.rows[5].circuit_id}.qasm"
    path.write_text(path.read_text().replace("cz", "cx"))
    opened = read_kit(kit.folder)
    opened.circuit(opened.rows[4])
    with pytest.raises(InputError, match=rf"circuit: found '.*{path.name}'.*its hash differs"):
        opened.circuit(opened.rows[5])
    path.unlink()
    with pytest.raises(InputError, match=rf"circuit: found '.*{path.name}'; allowed: a file of the kit"):
        opened.circuit(opened.rows[5])


def test_what_is_no_kit_is_refused(tmp_path):
    with pytest.raises(InputError, match="a folder that `rcbench build`"):
        read_kit(tmp_path / "nothing")
    (tmp_path / "other").mkdir()
    with pytest.raises(InputError, match="a folder that `rcbench build`"):
        read_kit(tmp_path / "other")


def test_more_shots_than_the_device_takes_are_refused_by_the_name_of_the_limit(tmp_path):
    with pytest.raises(InputError) as caught:
        build_kit(small_campaign(tmp_path, "shots_per_circuit = 150"), tmp_path / "kit")
    assert "experiment 'sampling': shots: found 200; allowed: at most 150, limits.shots_per_circuit" in str(
        caught.value
    )
    assert not (tmp_path / "kit").exists()


def test_a_place_that_cannot_be_written_is_told(tmp_path):
    (tmp_path / "file").write_text("")
    with pytest.raises(InputError, match="out"):
        build_kit(small_campaign(tmp_path), tmp_path / "file")
    with pytest.raises(InputError, match="a place that can be written"):
        build_kit(small_campaign(tmp_path), tmp_path / "file" / "kit")


def test_a_kit_of_what_is_missing_holds_these_runs_only(kit, tmp_path):
    campaign = small_campaign(tmp_path)
    wanted = frozenset(row.circuit_id for row in kit.rows[::7])
    rest = build_kit(campaign, tmp_path / "rest", missing=wanted)
    assert {row.circuit_id for row in rest.rows} == wanted
    assert rest.hash != kit.hash
    shas = {row.circuit_id: row.sha256 for row in kit.rows}
    assert all(row.sha256 == shas[row.circuit_id] for row in rest.rows)
    with pytest.raises(InputError, match="missing: found 'nothing that this campaign has'"):
        build_kit(campaign, tmp_path / "none", missing=frozenset({"x"}))


def test_many_circuits_are_packed_in_archives_and_read_as_before(kit, tmp_path, monkeypatch):
    monkeypatch.setattr(writing_module, "PACK_ABOVE", 50)
    monkeypatch.setattr(writing_module, "ARCHIVE_SIZE", 20)
    packed = [build_kit(small_campaign(tmp_path), tmp_path / name) for name in ("one", "two")]
    names = sorted(path.name for path in (packed[0].folder / "circuits").iterdir())
    assert names == ["circuits-0001.zip", "circuits-0002.zip", "circuits-0003.zip", "circuits-0004.zip"]
    assert contents(packed[0].folder) == contents(packed[1].folder)
    for row, other in zip(kit.rows, packed[0].rows, strict=True):
        assert row == other
        assert packed[0].text(other) == kit.text(row)
    archive = packed[0].folder / "circuits" / names[0]
    archive.write_bytes(storage.pack({"a.qasm": "x"}))
    opened = read_kit(packed[0].folder)
    lost = next(row for row in opened.rows if row.circuit_id == "sampling-sample-i000-d000")
    with pytest.raises(InputError, match="a file of the kit"):
        opened.text(lost)
    archive.write_bytes(b"no archive")
    with pytest.raises(InputError, match=r"circuits: found '.*circuits-0001.zip'; allowed: an archive"):
        read_kit(packed[0].folder).text(packed[0].rows[0])


def test_an_archive_has_no_date_of_its_own():
    data = storage.pack({"a.qasm": "x", "b.qasm": "y"})
    assert data == storage.pack({"a.qasm": "x", "b.qasm": "y"})
    assert {entry.date_time for entry in zipfile.ZipFile(io.BytesIO(data)).infolist()} == {(1980, 1, 1, 0, 0, 0)}


def test_a_protocol_of_the_users_own_goes_with_the_kit(tmp_path):
    (tmp_path / "mine.toml").write_text(protocol_text("mirror-echo"))
    text = CAMPAIGN.format(limits="").replace('"loschmidt-echo"', '"mine.toml"')
    (tmp_path / "c.toml").write_text(text)
    kit = build_kit(load_campaign(tmp_path / "c.toml"), tmp_path / "kit")
    (tmp_path / "mine.toml").unlink()
    moved = (tmp_path / "kit").rename(tmp_path / "moved")
    again = read_kit(moved)
    assert again.protocol("echo").measured == load_protocol("mirror-echo").measured
    assert {row.protocol for row in again.rows if row.experiment == "echo"} == {"mine"}
    assert again.hash == kit.hash
    assert str(tmp_path) not in (moved / "campaign.toml").read_text()
    own = moved / "protocols" / "mine.toml"
    own.write_text(own.read_text() + "\n# changed\n")
    with pytest.raises(InputError, match=r"kit: found '.*mine.toml'"):
        read_kit(moved)


def test_the_note_opens_with_the_rule_that_keeps_the_echo_and_names_what_is_needed(kit):
    text = (kit.folder / "HANDOVER.md").read_text()
    rule = text.split("\n\n")[1]
    assert rule.startswith("**Run every circuit verbatim: no optimisation, no re-routing, no merging across barriers")
    assert rule.endswith("or the echo vanishes.**")
    for part in (kit.hash, "bit_order", "Larch-4", "## Run order", "circuit_id,bitstring,count", "## Invented", "-r1"):
        assert part in text


def test_the_sample_of_the_note_is_read_by_the_reader_of_shots(kit, tmp_path):
    from rcbench.shots.reader import read_shots

    text = (kit.folder / "HANDOVER.md").read_text()
    blocks = [block for number, block in enumerate(text.split("```")) if number % 2]
    folder = tmp_path / "shots"
    folder.mkdir()
    for name, block in zip(("shots.csv", "shots.toml", "execution.toml"), blocks, strict=True):
        (folder / name).write_text(block.strip() + "\n")
    shots = read_shots(folder, kit)
    assert sum(outcomes.shots for outcomes in shots.outcomes.values()) == 400
    assert shots.execution.kit_hash == kit.hash


def test_provenance_says_what_the_kit_was_made_from(kit):
    facts = json.loads((kit.folder / "provenance.json").read_text())
    assert facts["seed"] == 4
    assert facts["circuits"] == len(kit.rows)
    assert facts["complete"] is True
    assert set(facts["files"]) == {"campaign.toml", "roster.csv"}


def test_a_layer_takes_as_long_as_its_slowest_gate():
    """Worked by hand: 20 + 100 + 0 (virtual) + 700."""
    builder = CircuitBuilder(4)
    builder.add("x", [0])
    builder.add("rz", [1], [0.1])
    builder.next_layer()
    builder.add("cz", [0, 1])
    builder.add("x", [2])
    builder.barrier()
    builder.add("rz", [3], [0.2])
    builder.measure([0, 1])
    assert duration_ns(builder.build(), Timings(one_qubit=20, two_qubit=100, measure=700)) == 820


def test_planning_makes_no_circuit_and_names_every_run(tmp_path, kit):
    campaign = small_campaign(tmp_path)
    plan = plan_kit(campaign)
    assert [plan.circuit_id(run) for run in plan.runs] == [row.circuit_id for row in kit.rows]
