"""Mended shots beside the originals, through the command line."""

import json

import click
import numpy as np
import pyarrow as pa
import pyarrow.parquet as pq
import pytest
from fault_cases import draw, exchange, make_world, permuted

from rcbench.cli import cli
from rcbench.errors import InputError
from rcbench.shots.audit import check_shots
from rcbench.shots.evidence.mend import mended_characters
from rcbench.shots.evidence.orders import Order
from rcbench.shots.evidence.series import read_series
from rcbench.shots.mended import MENDED_FILE, mended_notes
from rcbench.shots.reader import read_shots

N = 6


@pytest.fixture(scope="module")
def world(tmp_path_factory):
    return make_world(tmp_path_factory.mktemp("kit"), N, depths=(4,), instances=5, shots=1500)


def faulty(world):
    """Shots in reversed order, two circuits exchanged; and what they should be."""
    world.rng = np.random.default_rng(0)
    good = draw(world, 0.7, 1500)
    keys = sorted(good)
    bad = exchange(good, keys[0], keys[3])
    return good, {key: permuted(index, N, range(N)[::-1]) for key, index in bad.items()}


def strings(index):
    return [format(value, f"0{N}b") for value in index.tolist()]


def write_shots(folder, drawn, form, order="q0-first"):
    folder.mkdir()
    rows = [(key[0], text if order == "q0-first" else text[::-1]) for key, v in drawn.items() for text in strings(v)]
    ids, texts = [r[0] for r in rows], [r[1] for r in rows]
    if form == "csv":
        lines = [f"{i},{t},{k % 2},2026-03-04T09:30:00Z" for k, (i, t) in enumerate(rows)]
        (folder / "s.csv").write_text("\n".join(["circuit_id,bitstring,batch,time_utc", *lines, ""]))
    elif form == "parquet":
        pq.write_table(pa.table({"circuit_id": ids, "bitstring": texts}), folder / "s.parquet")
    elif form == "json":
        counted = {key[0]: {} for key in drawn}
        for one, text in rows:
            counted[one][text] = counted[one].get(text, 0) + 1
        (folder / "s.json").write_text(json.dumps(counted))
    else:
        arrays = {i: [] for i in ids}
        for one, text in rows:
            arrays[one].append([int(c) for c in text])
        np.savez(folder / "s.npz", **{k: np.array(v, dtype=np.uint8) for k, v in arrays.items()})
    (folder / "shots.toml").write_text(f'bit_order = "{order}"\n')
    return folder


def check(capsys, *arguments):
    """Status and text of `rcbench check`."""
    try:
        status = cli.main(["check", *map(str, arguments)], standalone_mode=False)
    except click.exceptions.Exit as stop:
        status = stop.exit_code
    return status or 0, capsys.readouterr().out


@pytest.mark.parametrize(
    ("form", "order"),
    [("csv", "q0-first"), ("parquet", "q0-last"), ("json", "q0-first"), ("npz", "q0-first")],
)
def test_mended_shots_are_the_shots_as_they_should_be(world, tmp_path, capsys, form, order):
    good, bad = faulty(world)
    folder = write_shots(tmp_path / "shots", bad, form, order)
    before = {path.name: path.read_bytes() for path in folder.iterdir()}
    status, text = check(capsys, world.kit.folder, folder, "--strict", "--apply", tmp_path / "out")
    assert status == 1
    assert "found (bit-order)" in text
    assert "found (other-circuit)" in text
    assert text.index("experiment  asked") < text.index("found (bit-order)")
    assert {path.name: path.read_bytes() for path in folder.iterdir()} == before
    mended = read_shots(tmp_path / "out", world.kit)
    for key, index in good.items():
        values, counts = np.unique(index, return_counts=True)
        found = mended.outcomes[key]
        assert dict(zip(found.index().tolist(), found.counts.tolist(), strict=True)) == dict(
            zip(values.tolist(), counts.tolist(), strict=True)
        )
    if form == "csv":
        assert set(mended.batches.values()) == {("0", "1")}
        assert mended.times
        series = read_series(tmp_path / "out", world.kit, mended)
        assert np.array_equal(series.index[sorted(good)[1]], good[sorted(good)[1]])
    audit = check_shots(world.kit, mended)
    notes = [problem.text for problem in audit.problems if problem.severity == "note"]
    assert any("mended before it was read: bits put in order in 5 circuits" in note for note in notes)
    assert any("shots filed under another circuit" in note for note in notes)
    assert not audit.needs_attention
    assert MENDED_FILE in {file.name for file in mended.files}
    status, text = check(capsys, world.kit.folder, tmp_path / "out", "--strict")
    assert (status, "nothing against the kit" in text) == (0, True)


def test_the_record_says_what_was_done_to_which_files(world, tmp_path, capsys):
    good, bad = faulty(world)
    folder = write_shots(tmp_path / "shots", bad, "csv")
    check(capsys, world.kit.folder, folder, "--apply", tmp_path / "out")
    record = json.loads((tmp_path / "out" / MENDED_FILE).read_text())
    keys = sorted(good)
    assert record["kit"] == world.kit.hash
    assert record["files"] == [{"from": "s.csv", "to": "s.parquet", "rows": 7500}]
    assert {file["name"] for file in record["originals"]} == {"s.csv", "shots.toml"}
    assert [one["source"] for one in record["reordered"]] == [[5, 4, 3, 2, 1, 0]]
    moved = {one["from"][0]: one["to"][0] for one in record["refiled"]}
    assert moved == {keys[0][0]: keys[3][0], keys[3][0]: keys[0][0]}


def test_shots_without_a_fault_write_nothing(world, tmp_path, capsys):
    good, _ = faulty(world)
    folder = write_shots(tmp_path / "shots", good, "csv")
    status, text = check(capsys, world.kit.folder, folder, "--strict", "--apply", tmp_path / "out")
    assert (status, "nothing written" in text) == (0, True)
    assert not (tmp_path / "out").exists()


def test_quick_leaves_the_examination_out(world, tmp_path, capsys):
    _, bad = faulty(world)
    folder = write_shots(tmp_path / "shots", bad, "csv")
    status, text = check(capsys, world.kit.folder, folder, "--strict", "--quick")
    assert (status, "What the shots say" in text) == (0, False)
    with pytest.raises(InputError, match="without --quick"):
        check(capsys, world.kit.folder, folder, "--quick", "--apply", tmp_path / "out")


def test_a_folder_that_is_there_is_never_written_into(world, tmp_path, capsys):
    _, bad = faulty(world)
    folder = write_shots(tmp_path / "shots", bad, "csv")
    (tmp_path / "out").mkdir()
    with pytest.raises(InputError, match="a folder that does not exist yet"):
        check(capsys, world.kit.folder, folder, "--apply", tmp_path / "out")
    assert list((tmp_path / "out").iterdir()) == []


def mended_string(text, order, columns):
    return mended_characters(np.frombuffer(text.encode(), dtype=np.uint8)[None], order, columns).tobytes().decode()


def test_symbols_for_lost_qubits_move_with_their_bit_and_are_never_inverted():
    order = Order("", (2, 0, 1), (1,))  # bit 0 is at place 2, bit 1 inverted at place 0, bit 2 at place 1
    assert mended_string("01x", order, slice(None)) == "x11"
    assert mended_string("x01", order, slice(None)) == "1x0"


def test_a_string_is_mended_in_the_order_in_which_it_is_written():
    order = Order("", (2, 0, 1))
    assert mended_string("011", order, slice(None)) == "101"
    assert mended_string("110", order, slice(None, None, -1)) == "101"
    assert mended_string("0_11", order, np.array([0, 2, 3])) == "1_01"  # a register map with a character to skip


@pytest.mark.parametrize(
    "content",
    ["", "[]", "{}", '{"kit": 1}', '{"kit": "a", "originals": 3, "reordered": [], "refiled": []}', "\xff"],
)
def test_a_record_of_another_make_is_refused(tmp_path, content):
    (tmp_path / MENDED_FILE).write_bytes(content.encode("latin-1"))
    with pytest.raises(InputError, match="as `rcbench check --apply` writes it"):
        mended_notes(tmp_path)


def test_a_record_for_another_kit_is_a_warning(tmp_path):
    record = {"kit": "a" * 64, "originals": [], "reordered": [], "refiled": []}
    (tmp_path / MENDED_FILE).write_text(json.dumps(record))
    [problem] = mended_notes(tmp_path, "b" * 64)
    assert problem.severity == "warning"
    assert mended_notes(tmp_path, "a" * 64) == []
