import json
import os
import stat

import pandas as pd
import pytest

from rcbench.errors import InputError
from rcbench.files import format_number, output_folder, read_csv, shipped, write_bytes, write_csv, write_text


@pytest.mark.parametrize(
    ("value", "cell"),
    [
        (None, ""),
        (float("nan"), ""),
        (float("inf"), ""),
        (-float("inf"), ""),
        (pd.NA, ""),
        (3, "3"),
        (3.0, "3"),
        (0.1 + 0.2, "0.3"),
        (2**53, "9007199254740992"),
        (-0.0, "0"),
        (1e-12, "1e-12"),
        ("007", "007"),
        ("nan", "nan"),
        (True, "true"),
    ],
)
def test_a_cell_is_empty_or_a_finite_number_or_the_text(value, cell):
    assert format_number(value) == cell


def test_a_table_reads_back_with_its_text_columns_as_text(tmp_path):
    frame = pd.DataFrame({"bits": ["001", ""], "value": [0.25, float("nan")]})
    write_csv(tmp_path / "t.csv", frame, ["bits", "value"])
    assert (tmp_path / "t.csv").read_text() == "bits,value\n001,0.25\n,\n"
    back = read_csv(tmp_path / "t.csv", ["bits", "value"], text=["bits"])
    assert back["bits"].tolist() == ["001", ""]
    assert back["value"].isna().tolist() == [False, True]


def test_a_failed_write_leaves_the_old_file_and_no_other(tmp_path, monkeypatch):
    write_text(tmp_path / "a.txt", "old")

    def full(*_):
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(os, "replace", full)
    with pytest.raises(InputError, match="No space left on device"):
        write_text(tmp_path / "a.txt", "new")
    assert [entry.name for entry in tmp_path.iterdir()] == ["a.txt"]
    assert (tmp_path / "a.txt").read_text() == "old"


def test_output_can_be_read_by_others(tmp_path):
    write_bytes(tmp_path / "a", b"x")
    assert stat.S_IMODE((tmp_path / "a").stat().st_mode) == 0o644


def test_a_folder_of_the_same_inputs_is_resumed_and_then_complete(tmp_path):
    out = tmp_path / "out"
    with output_folder(out, "predict", {"source": "abc"}) as folder:
        assert not folder.complete
    (out / ".writing-killed").write_text("half")
    with output_folder(out, "predict", {"source": "abc"}) as folder:
        assert not folder.complete
        assert not (out / ".writing-killed").exists()
        folder.finish(rows=3)
    with output_folder(out, "predict", {"source": "abc"}) as folder:
        assert folder.complete
    assert json.loads((out / "provenance.json").read_text())["rows"] == 3


def test_a_folder_of_other_inputs_or_of_another_command_is_refused(tmp_path):
    out = tmp_path / "out"
    with output_folder(out, "predict", {"source": "abc", "dtype": "complex64"}):
        pass
    with (
        pytest.raises(InputError, match="source differ"),
        output_folder(out, "predict", {"source": "x", "dtype": "complex64"}),
    ):
        pass
    with pytest.raises(InputError, match="output of `predict`"), output_folder(out, "compare", {"source": "abc"}):
        pass


def test_a_folder_that_is_not_ours_is_refused(tmp_path):
    (tmp_path / "notes.txt").write_text("mine")
    with pytest.raises(InputError, match="one that rcbench wrote"), output_folder(tmp_path, "build", {}):
        pass
    with pytest.raises(InputError, match=r"found .*notes\.txt"), output_folder(tmp_path / "notes.txt", "build", {}):
        pass


def test_a_second_writer_is_refused_while_the_first_is_at_work(tmp_path):
    with (
        output_folder(tmp_path / "out", "build", {}),
        pytest.raises(InputError, match="no other rcbench"),
        output_folder(tmp_path / "out", "build", {}),
    ):
        pass


def test_the_shipped_folders_are_found():
    assert (shipped("protocols")).is_dir()
    with pytest.raises(InputError, match="carries its folder"):
        shipped("nothing")
