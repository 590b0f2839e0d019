import contextlib
import csv
import gzip
import io
import json
import pickle
import zipfile

import numpy as np
import pandas as pd
import pytest
from shot_cases import Row, make_kit, two_circuits, write

from rcbench.errors import InputError, InputErrors
from rcbench.shots.reader import read_shots

HEAD = "circuit_id,bitstring,count\n"


def read(path, kit=None, **how):
    return read_shots(path, kit or two_circuits(), bit_order="q0-first", **how)


def refusal(path, kit=None):
    with pytest.raises(InputError) as caught:
        read(path, kit)
    return str(caught.value)


@pytest.mark.parametrize(
    ("row", "message"),
    [
        ("a,010,1", "bitstring: found '010'; allowed: 4 characters, 0 and 1"),
        ("a,01011,1", "bitstring: found '01011'; allowed: 4 characters, 0 and 1"),
        ("b,0101,1", "bitstring: found '0101'; allowed: 3 characters, 0 and 1"),
        ("a,01a1,1", "bitstring: found '01a1'; allowed: 4 characters, 0 and 1"),
        ("a,01 1,1", "bitstring: found '01 1'; allowed: 4 characters, 0 and 1"),
        ("a,,1", "bitstring: found ''; allowed: 4 characters, 0 and 1"),
        ("a,5,1", "bitstring: found '5'; allowed: 4 characters, 0 and 1"),
        ("a,0101,0", "count: found '0'; allowed: a whole number of shots, 1 to 9007199254740992"),
        ("a,0101,-3", "count: found '-3'; allowed: a whole number of shots"),
        ("a,0101,2.5", "count: found '2.5'; allowed: a whole number of shots"),
        ("a,0101,many", "count: found 'many'; allowed: a whole number of shots"),
        ("a,0101,", "count: found ''; allowed: a whole number of shots"),
        ("a,0101,nan", "count: found 'nan'; allowed: a whole number of shots"),
        ("a,0101,1_0", "count: found '1_0'; allowed: a whole number of shots"),
        ("a,0101,99999999999999999999999", "count: found '99999999999999999999999'; allowed: a whole number of shots"),
        (",0101,1", "circuit_id: found 'nothing'; allowed: the id of a circuit of the kit"),
        ("a,0101", "row: found '2 columns'; allowed: 3 columns, as in the first line"),
        ("a,0101,1,9", "row: found '4 columns'; allowed: 3 columns, as in the first line"),
        ('a,"0101,1', "row: found 'quotes that do not close'; allowed: 3 columns"),
        ("a;0101;1", "row: found '1 columns'; allowed: 3 columns"),
    ],
)
def test_a_bad_row_is_refused_with_its_line(tmp_path, row, message):
    path = write(tmp_path / "s.csv", f"{HEAD}a,0101,2\n\nb,111,1\n{row}\na,0000,1\n")
    assert f"s.csv:5: {message}" in refusal(path)


def test_the_lines_are_right_far_into_a_large_file(tmp_path):
    lines = ["a,0101,1"] * 60_000
    lines[52_345] = "a,0121,1"
    lines[59_999] = "a,0101,x"
    message = refusal(write(tmp_path / "s.csv", HEAD + "\n".join(lines)))
    assert "s.csv:52347: bitstring: found '0121'" in message
    assert "s.csv:60001: count: found 'x'" in message


def test_all_errors_of_all_files_come_at_once_up_to_twenty(tmp_path):
    write(tmp_path / "1.csv", HEAD + "a,01,1\na,0101,0\n")
    write(tmp_path / "2.json", '{"a": {"0101": 1,\n "01": 2}}')
    with pytest.raises(InputErrors) as caught:
        read(tmp_path)
    assert [error.where for error in caught.value.errors] == ["1.csv:2: ", "1.csv:3: ", "2.json:2: "]
    write(tmp_path / "1.csv", HEAD + "a,01,1\n" * 5000)
    with pytest.raises(InputErrors, match="reading stopped after 20 errors") as caught:
        read(tmp_path)
    assert len(caught.value.errors) == 20


@pytest.mark.parametrize(
    ("name", "content", "message"),
    [
        ("s.csv", "", "s.csv: content: found 'an empty file'"),
        ("s.csv", b"\x00\x01\x02" * 50, "s.csv: content: found 'a binary file'"),
        ("s.csv", b"PAR1" + bytes(20), "s.csv: content: found 'a binary file (Parquet)'"),
        ("s.csv", gzip.compress(b"a", mtime=0), "s.csv: content: found 'a binary file (gzip)'"),
        ("s.csv", HEAD.encode("utf-16"), "s.csv: content: found 'text in UTF-16'"),
        ("s.csv", "a,0101\n", "s.csv:1: columns: found 'a,0101'; allowed: a first line with the column circuit_id"),
        ("s.csv", "circuit_id,bits\na,1\n", "allowed: a first line with the column bitstring"),
        ("s.csv", "circuit_id;bitstring\na;0101\n", "s.csv:1: separator: found 'semicolons'; allowed: commas"),
        ("s.csv", "circuit_id,bitstring,bitstring\na,0101,0101\n", "allowed: the column bitstring once"),
        ("s.csv", HEAD + "a," + "0" * 3_000_000 + ",1", "s.csv:2: line: found 'more than 1048576 characters'"),
        ("s.csv", "c" * 3_000_000, "s.csv:1: line: found"),
        ("s.csv.gz", b"\x1f\x8b garbage", "s.csv.gz: compression"),
        ("s.csv.gz", gzip.compress(HEAD.encode() * 9999)[:-50], "s.csv.gz"),
        ("s.json", '{"a": {"0101": 1', "s.json:1: syntax: found 'end of file'; allowed: JSON"),
        ("s.json", '{"a": {"0101": 1},\n', "s.json:2: syntax: found 'end of file'; allowed: JSON"),
        ("s.json", '{"a": {"0101": 1}} x', "s.json:1: syntax: found 'x'; allowed: nothing after"),
        ("s.json", '["a"]', "s.json:1: syntax: found"),
        ("s.json", '{"a": ["0101"]}', "s.json:1: a: found 'list'; allowed: bitstrings with counts"),
        (
            "s.json",
            '{"a": {"0101": 1}, "a": {"0101": 1}}',
            "s.json:1: circuit_id: found 'a'; allowed: every circuit once",
        ),
        ("s.json", '{"a": {"0101": 1, "0101": 2}}', "s.json:1: a: found '0101'; allowed: every bitstring once"),
        ("s.json", b'{"a": \xff}', "s.json:1: content: found b'\\xff'; allowed: text in UTF-8"),
        ("s.json", '{"a": ' + "[" * 100_000, "s.json:1: syntax"),
        ("s.json", '{"a": {"0101": 1,\n"0111":\n2.5}}', "s.json:2: count: found 2.5; allowed: a whole number"),
        ("s.json", '{"a": {"0101": true}}', "s.json:1: count: found True"),
        ("s.json", '{"a": {"0101": "3"}}', "s.json:1: count: found '3'"),
        ("s.json", '{"a": {"0101": NaN}}', "s.json:1: count: found nan"),
        ("s.json", '{"b": {"000": {"x": 1},\n"001": 1,\n "0y1": 1}}', "s.json:3: bitstring: found '0y1'"),
        ("s.json", '{"a": {"0101": ' + "9" * 5000 + "}}", "s.json:1: syntax"),
        ("s.npz", b"not a zip", "s.npz: content: found"),
        ("s.parquet", b"PAR1 not really PAR1", "s.parquet: content: found"),
        ("s.txt", "a", "shots: found 's.txt'; allowed: a file with one of the endings .csv"),
    ],
)
def test_a_broken_file_is_refused_in_one_message(tmp_path, name, content, message):
    assert message in refusal(write(tmp_path / name, content))


@pytest.mark.parametrize(
    ("arrays", "message"),
    [
        ({"a": np.zeros((3, 4))}, "array 'a': found 'type float64'; allowed: whole numbers"),
        ({"a": np.zeros(4, dtype=np.uint8)}, "array 'a': found 'shape (4,)'; allowed: two dimensions"),
        ({"a": np.zeros((3, 4), dtype=np.uint8, order="F")}, "column after column"),
        ({"a": np.zeros((3, 0), dtype=np.uint8)}, "array 'a': found '0 columns'"),
        ({"a": np.zeros((3, 5), dtype=np.uint8)}, "array 'a', row 1: bitstring: found '00000'; allowed: 4 characters"),
        ({"a": np.array([[0, 1, 0, 1], [0, 2, 0, 1]], dtype=np.uint8)}, "array 'a', row 2: bitstring: found '0201'"),
        ({"a": np.full((1, 4), -1)}, "array 'a', row 1: bitstring"),
        ({"a": np.array([[None] * 4])}, "array 'a': found 'type object'"),
    ],
)
def test_an_array_that_holds_no_bits_is_refused(tmp_path, arrays, message):
    np.savez(tmp_path / "s.npz", **arrays)
    assert message in refusal(tmp_path / "s.npz")


class Trap:
    def __reduce__(self):
        return (pytest.fail, ("a pickle was loaded",))


def test_no_pickle_is_ever_loaded(tmp_path):
    with zipfile.ZipFile(tmp_path / "s.npz", "w") as archive:
        archive.writestr("a.npy", pickle.dumps(Trap()))
    assert "array 'a'" in refusal(tmp_path / "s.npz")
    array = np.empty((1, 4), dtype=object)
    array[:] = [[Trap() for _ in range(4)]]
    np.savez(tmp_path / "s.npz", a=array)
    assert "type object" in refusal(tmp_path / "s.npz")


def test_an_array_shorter_than_it_says_is_refused(tmp_path):
    out = io.BytesIO()
    np.save(out, np.zeros((10**6, 4), dtype=np.uint8))
    with zipfile.ZipFile(tmp_path / "s.npz", "w") as archive:
        archive.writestr("a.npy", out.getvalue()[:1000])
    assert "array 'a': found 'an end at row 218'; allowed: 1000000 rows" in refusal(tmp_path / "s.npz")


@pytest.mark.parametrize(
    ("columns", "message"),
    [
        ({"circuit_id": ["a"], "bitstring": [101]}, "bitstring: found 'int64'; allowed: a column of text"),
        ({"circuit_id": ["a"], "bits": ["0101"]}, "allowed: the column bitstring"),
        ({"circuit_id": ["a", "a"], "bitstring": ["0101", None]}, "s.parquet: row 2: bitstring: found ''"),
        ({"circuit_id": ["a", None], "bitstring": ["0101", "0101"]}, "row 2: circuit_id: found 'nothing'"),
        ({"circuit_id": ["a"], "bitstring": ["0101"], "count": [1.5]}, "row 1: count: found 1.5"),
        ({"circuit_id": ["a", "a"], "bitstring": ["0101"] * 2, "count": [1, None]}, "row 2: count: found None"),
        ({"circuit_id": ["a"], "bitstring": ["0101"], "count": [-1]}, "row 1: count: found -1"),
        ({"circuit_id": ["a"], "bitstring": ["0101"], "repeat": [-1]}, "row 1: repeat: found -1"),
        ({"circuit_id": ["a"], "bitstring": ["0101"], "time_utc": ["noon"]}, "row 1: time_utc: found 'noon'"),
    ],
)
def test_bad_parquet_is_refused_with_the_row(tmp_path, columns, message):
    pd.DataFrame(columns).to_parquet(tmp_path / "s.parquet")
    assert message in refusal(tmp_path / "s.parquet")


def test_shots_for_another_kit_are_refused(tmp_path):
    path = write(tmp_path / "s.csv", "circuit_id,bitstring\nx-1,0101\nx-2,0101\n")
    assert "circuit_id: found 'x-1, x-2'; allowed: circuits of this kit (a, b, ...); these are shots for" in refusal(
        path
    )


def test_some_unknown_circuits_are_counted_and_not_fatal(tmp_path):
    shots = read(write(tmp_path / "s.csv", HEAD + "x,0101101,3\na,0101,1\nx,1,2\n"))
    assert shots.unknown == {"x": 5}
    assert list(shots.outcomes) == [("a", 0)]


def test_a_file_without_rows_is_refused_alone_and_told_among_others(tmp_path):
    write(tmp_path / "1.csv", HEAD)
    assert "shots: found '1.csv without a shot'" in refusal(tmp_path / "1.csv")
    write(tmp_path / "2.csv", HEAD + "a,0101,1\n")
    assert [p.text for p in read(tmp_path).problems] == ["1.csv: no rows"]


def test_the_same_file_twice_is_refused(tmp_path):
    for name in ("1.csv", "2.csv"):
        write(tmp_path / name, HEAD + "a,0101,1\n")
    assert "2.csv: file: found 'the same content as 1.csv'; allowed: every file once" in refusal(tmp_path)


def test_several_repeats_in_the_roster_need_a_repeat_in_the_shots(tmp_path):
    kit = make_kit(Row(circuit_id="a", repeat=0), Row(circuit_id="a", repeat=1))
    message = refusal(write(tmp_path / "s.csv", HEAD + "a,0101,1\n"), kit)
    assert "s.csv:2: repeat: found 'nothing'; allowed: a column repeat, or the file's repeat in shots.toml" in message


def test_bad_rows_are_set_aside_on_request_and_counted(tmp_path):
    folder = tmp_path / "shots"
    folder.mkdir()
    write(folder / "1.csv", HEAD + 'a,0101,2\na,01x1,5\na,0101,0\na,"01,1\na,1111,1\n')
    write(folder / "2.csv", HEAD + 'a,0101,2\na,01x1,5\na,0101,0\na,"01,1\na,1111,1\n')
    write(folder / "3.json", '{"a": {"0101": 1')
    write(folder / "4.json", '{"a": {"0101": 1,\n "1": 1}}')
    shots = read(folder, skip_bad=tmp_path / "bad.csv")
    assert shots.outcomes["a", 0].shots == 4
    rows = list(csv.reader((tmp_path / "bad.csv").read_text().splitlines()))
    assert rows[0] == ["file", "line", "reason", "content"]
    assert [row[:2] for row in rows[1:]] == [
        ["1.csv", "3"],
        ["1.csv", "4"],
        ["1.csv", "5"],
        ["2.csv", "0"],
        ["3.json", "0"],
        ["4.json", "2"],
    ]
    assert rows[1][3] == "a,01x1,5"
    assert rows[3][3] == 'a,"01,1'
    assert "found '01x1'" in rows[1][2]
    texts = [problem.text for problem in shots.problems]
    assert (
        texts[0] == "1.csv: 3 of 5 rows set aside (1 with a wrong bitstring, 1 with a wrong count, 1 with a wrong row)"
    )
    assert texts[1].startswith("2.csv: the whole file set aside (")
    assert len(shots.bad_rows) == 6


def test_bad_rows_may_be_kept_without_a_file(tmp_path):
    shots = read(write(tmp_path / "s.csv", HEAD + "a,01,1\na,0101,1\n"), skip_bad=True)
    assert [(name, bad.place.number) for name, bad in shots.bad_rows] == [("s.csv", 2)]
    assert sorted(p.name for p in tmp_path.iterdir()) == ["s.csv"]


def test_the_file_of_bad_rows_must_not_lie_among_the_shots(tmp_path):
    write(tmp_path / "s.csv", HEAD + "a,01,1\n")
    with pytest.raises(InputError, match=r"skip_bad: .*a file outside the folder of shots"):
        read(tmp_path, skip_bad=tmp_path / "bad.csv")


def test_sums_that_would_not_be_exact_are_refused(tmp_path):
    kit = make_kit(Row(circuit_id="a"))
    path = write(tmp_path / "s.csv", HEAD + f"a,0101,{2**53 - 1}\na,0101,1\n")
    assert read(path, kit).outcomes["a", 0].shots == 2**53
    message = refusal(write(path, HEAD + f"a,0101,{2**53}\na,0101,1\n"), kit)
    assert "count: found 9007199254740993; allowed: at most 9007199254740992 shots in one file" in message


WHOLE = HEAD + "a,0101,2\nb,011,1\na,1111,1\n"
MAKERS = {
    "s.csv": lambda path: write(path, WHOLE),
    "s.csv.gz": lambda path: write(path, gzip.compress(WHOLE.encode(), mtime=0)),
    "s.json": lambda path: write(path, json.dumps({"a": {"0101": 2, "1111": 1}, "b": {"011": 1}})),
    "s.npz": lambda path: np.savez(path, a=np.eye(4, dtype=np.uint8)),
    "s.parquet": lambda path: pd.read_csv(io.StringIO(WHOLE), dtype={"bitstring": str}).to_parquet(path),
}


@pytest.mark.parametrize("name", MAKERS)
@pytest.mark.parametrize("files", [60, pytest.param(4000, marks=pytest.mark.slow)])
def test_a_damaged_file_is_read_or_refused_but_never_crashes(tmp_path, name, files):
    MAKERS[name](tmp_path / name)
    whole = (tmp_path / name).read_bytes()
    rng = np.random.default_rng(files)
    for _ in range(files):
        content = bytearray(whole)
        for place in rng.integers(0, len(whole), rng.integers(1, 5)).tolist():
            content[place] = rng.integers(0, 256)
        cut = rng.integers(1, len(whole)) if rng.random() < 0.3 else len(whole)
        path = write(tmp_path / name, bytes(content[:cut]))
        for skip in (None, True):
            with contextlib.suppress(InputError):
                read(path, skip_bad=skip)
