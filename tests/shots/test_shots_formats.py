import gzip
import json
from collections import Counter

import numpy as np
import pandas as pd
import pyarrow as pa
import pyarrow.parquet as pq
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from shot_cases import Row, make_kit, random_bits, strings_of, two_circuits, write

from rcbench.shots.decode import pack_words, packed_bytes
from rcbench.shots.outcomes import Outcomes
from rcbench.shots.reader import read_shots


def seen(outcomes):
    """Outcomes as a counter of bitstrings."""
    return dict(zip(strings_of(outcomes.bits()), outcomes.counts.tolist(), strict=True))


def write_csv(path, bits, circuit_id="a", head="circuit_id,bitstring"):
    return write(path, "\n".join([head, *(f"{circuit_id},{s}" for s in strings_of(bits))]) + "\n")


def write_json(path, bits):
    return write(path, json.dumps({"a": Counter(strings_of(bits))}))


def write_counts(path, bits):
    lines = [f"a,{s},{c}" for s, c in Counter(strings_of(bits)).items()]
    return write(path, "\n".join(["circuit_id,bitstring,count", *lines]))


def write_npz(path, bits):
    np.savez(path, a=bits)
    return path


def write_npz_compressed(path, bits):
    np.savez_compressed(path, a=bits.astype(bool))
    return path


def write_parquet(path, bits):
    pd.DataFrame({"circuit_id": "a", "bitstring": strings_of(bits)}).to_parquet(path, index=False)
    return path


def write_categories(path, bits):
    frame = pd.DataFrame({"circuit_id": "a", "bitstring": strings_of(bits), "count": np.float64(1)})
    frame.astype({"circuit_id": "category"}).to_parquet(path, index=False)
    return path


def write_large_types(path, bits):
    columns = {"circuit_id": pa.array(["a"] * len(bits), pa.large_string())}
    columns["bitstring"] = pa.array([s.encode() for s in strings_of(bits)], pa.large_binary())
    pq.write_table(pa.table(columns), path)
    return path


def write_gzip(path, bits):
    plain = write_csv(path.with_name("plain.txt"), bits)
    write(path, gzip.compress(plain.read_bytes()))
    plain.unlink()
    return path


WRITERS = {
    "shots.csv": write_csv,
    "counts.csv": write_counts,
    "shots.csv.gz": write_gzip,
    "shots.json": write_json,
    "shots.npz": write_npz,
    "compressed.npz": write_npz_compressed,
    "shots.parquet": write_parquet,
    "categories.parquet": write_categories,
    "large.parquet": write_large_types,
}


@pytest.mark.parametrize("n_bits", [1, 3, 8, 20, 41, 70])
@pytest.mark.parametrize("name", WRITERS)
def test_every_format_gives_the_bitstrings_that_were_written(tmp_path, name, n_bits):
    bits = random_bits(1, 300, n_bits)
    kit = make_kit(Row(circuit_id="a", measured_qubits=tuple(range(n_bits))))
    shots = read_shots(WRITERS[name](tmp_path / name, bits), kit, bit_order="q0-first")
    assert seen(shots.outcomes["a", 0]) == Counter(strings_of(bits))
    turned = read_shots(tmp_path / name, kit, bit_order="q0-last")
    assert seen(turned.outcomes["a", 0]) == Counter(strings_of(bits[:, ::-1]))
    assert shots.files[0].name == name


@given(n_bits=st.integers(1, 140), shots=st.integers(1, 20), seed=st.integers(0, 2**32 - 1))
@settings(max_examples=60, deadline=None, derandomize=True)
def test_packing_agrees_with_numpy_packbits_and_with_whole_numbers(n_bits, shots, seed):
    bits = random_bits(seed, shots, n_bits)
    words = pack_words(bits + np.uint8(48))
    spelled = [int("".join(map(str, row)), 2) for row in bits.tolist()]
    joined = [sum(int(w) << (64 * k) for k, w in enumerate(reversed(row))) for row in words]
    assert joined == spelled
    assert np.array_equal(packed_bytes(words, n_bits), np.packbits(bits, axis=1))


def test_outcomes_equal_those_made_from_a_bit_matrix(tmp_path):
    bits = random_bits(2, 500, 4)
    kit = make_kit(Row(circuit_id="a"))
    read = read_shots(write_csv(tmp_path / "s.csv", bits), kit, bit_order="q0-first").outcomes["a", 0]
    made = Outcomes.from_bits(bits)
    assert np.array_equal(read.packed, made.packed)
    assert np.array_equal(read.counts, made.counts)
    assert read.packed.dtype == np.uint8
    assert read.counts.dtype == np.int64


def test_rows_of_many_circuits_of_different_width_may_come_in_any_order(tmp_path):
    rng = np.random.default_rng(3)
    rows = [Row(circuit_id=f"c{k}", measured_qubits=tuple(range(1 + k % 7))) for k in range(50)]
    written = [(f"c{k}", "".join(map(str, rng.integers(0, 2, 1 + k % 7)))) for k in rng.integers(0, 50, 4000).tolist()]
    path = write(tmp_path / "s.csv", "bitstring,circuit_id\n" + "\n".join(f"{s},{c}" for c, s in written))
    shots = read_shots(path, make_kit(*rows), bit_order="q0-first")
    found = {(c, s): n for (c, _), o in shots.outcomes.items() for s, n in seen(o).items()}
    assert found == Counter(written)


def test_leading_zeros_survive_in_csv_and_json(tmp_path):
    kit = make_kit(Row(circuit_id="007"))
    text = "circuit_id,bitstring,count\n007,0001,3\n"
    for path in (write(tmp_path / "s.csv", text), write(tmp_path / "s.json", '{"007": {"0001": 3}}')):
        assert seen(read_shots(path, kit, bit_order="q0-first").outcomes["007", 0]) == {"0001": 3}


@pytest.mark.parametrize(
    "content",
    [
        "\ufeffcircuit_id,bitstring,count\r\na,0101,2\r\na,1111,1\r\n",
        "circuit_id , bitstring , count\n a , 0101 , 2 \n\n a,1111,1\n\n",
        '"circuit_id","bitstring","count"\n"a","0101","2"\n"a","1111","1"',
        "circuit_id,bitstring,count\ra,0101,2\ra,1111,1\r",
        "count,bitstring,circuit_id\n2.0,0101,a\n1e0,1111,a\n",
        'note,circuit_id,bitstring,count\nx,a,0101,2\n"y, and z",a,1111,1\n',
    ],
    ids=["byte order mark and CRLF", "spaces and blank lines", "quotes", "CR", "whole floats", "a column more"],
)
def test_csv_is_read_however_it_is_dressed(tmp_path, content):
    path = write(tmp_path / "s.csv", content)
    shots = read_shots(path, make_kit(Row(circuit_id="a")), bit_order="q0-first")
    assert seen(shots.outcomes["a", 0]) == {"0101": 2, "1111": 1}


def test_a_column_that_is_not_read_is_told(tmp_path):
    path = write(tmp_path / "s.csv", "circuit_id,bitstring,counts\na,0101,2\n")
    shots = read_shots(path, make_kit(Row(circuit_id="a")), bit_order="q0-first")
    assert "'counts'; read are" in shots.problems[0].text
    assert "did you mean 'count'?" in shots.problems[0].text


def test_a_folder_is_read_whole_and_circuits_may_be_split_over_files(tmp_path):
    write(tmp_path / "1.csv", "circuit_id,bitstring\na,0101\na,0101\n")
    write(tmp_path / "2.json", '{"a": {"0101": 1, "1111": 1}, "b": {"010": 3}}')
    write(tmp_path / "readme.txt", "taken on a Tuesday")
    write(tmp_path / ".hidden.csv", "nothing")
    shots = read_shots(tmp_path, two_circuits(), bit_order="q0-first")
    assert seen(shots.outcomes["a", 0]) == {"0101": 3, "1111": 1}
    assert seen(shots.outcomes["b", 0]) == {"010": 3}
    assert [file.name for file in shots.files] == ["1.csv", "2.json"]
    assert [p.text for p in shots.problems] == ["not read: readme.txt"]


def test_repeats_are_kept_apart(tmp_path):
    kit = make_kit(Row(circuit_id="a", repeat=0), Row(circuit_id="a", repeat=1))
    path = write(tmp_path / "s.csv", "circuit_id,bitstring,repeat\na,0101,0\na,1111,1\na,1111,1\na,0000,7\n")
    shots = read_shots(path, kit, bit_order="q0-first")
    assert {key: seen(o) for key, o in shots.outcomes.items()} == {
        ("a", 0): {"0101": 1},
        ("a", 1): {"1111": 2},
        ("a", 7): {"0000": 1},
    }


def test_without_a_repeat_shots_belong_to_the_one_that_the_roster_has(tmp_path):
    path = write(tmp_path / "s.json", '{"a": {"0101": 2}}')
    assert list(read_shots(path, make_kit(Row(circuit_id="a", repeat=1)), bit_order="q0-first").outcomes) == [("a", 1)]


@pytest.mark.parametrize(
    ("repeats", "keys"), [((0,), [1]), ((1,), [1]), ((0, 1), [0, 1]), ((2,), [2]), ((0, 2), [1, 2])]
)
def test_the_first_run_of_a_circuit_is_the_one_asked_for_whichever_way_runs_are_counted(tmp_path, repeats, keys):
    lines = [f"a-r1,{5:04b},{1 + r},{r}" for r in repeats]
    path = write(tmp_path / "s.csv", "\n".join(["circuit_id,bitstring,count,repeat", *lines]))
    shots = read_shots(path, make_kit(Row(circuit_id="a"), Row(circuit_id="a-r1", repeat=1)), bit_order="q0-first")
    assert {key: o.shots for key, o in shots.outcomes.items()} == {
        ("a-r1", key): 1 + r for key, r in zip(keys, repeats, strict=True)
    }


@pytest.mark.parametrize("n_bits", [1, 7, 8, 9, 20, 62])
def test_indices_of_outcomes_are_the_numbers_their_bits_spell(n_bits):
    bits = random_bits(4, 50, n_bits)
    index = Outcomes.from_bits(bits).index()
    assert index.dtype == np.int64
    assert sorted(index.tolist()) == sorted({int(s, 2) for s in strings_of(bits)})


def test_a_file_can_state_its_repeat(tmp_path):
    kit = make_kit(Row(circuit_id="a", repeat=0), Row(circuit_id="a", repeat=1))
    write(tmp_path / "first.json", '{"a": {"0101": 2}}')
    write(tmp_path / "second.json", '{"a": {"0101": 3}}')
    write(tmp_path / "shots.toml", 'bit_order = "q0-first"\n[repeat]\n"first.json" = 0\n"second.json" = 1\n')
    shots = read_shots(tmp_path, kit)
    assert {key: o.shots for key, o in shots.outcomes.items()} == {("a", 0): 2, ("a", 1): 3}


def test_times_and_batches_are_kept_by_run(tmp_path):
    lines = ["circuit_id,bitstring,batch,time_utc", "a,0101,m1,2026-03-04T09:30:00Z", "a,0101,m2,2026-03-04T09:10:00"]
    path = write(tmp_path / "s.csv", "\n".join([*lines, "b,010,m1,", "a,0000,m1,2026-03-04 09:20:00+00:00"]))
    shots = read_shots(path, two_circuits(), bit_order="q0-first")
    first, last = shots.times["a", 0]
    assert first == np.datetime64("2026-03-04T09:10:00")
    assert last == np.datetime64("2026-03-04T09:30:00")
    assert shots.batches == {("a", 0): ("m1", "m2"), ("b", 0): ("m1",)}
    assert ("b", 0) not in shots.times


def test_parquet_times_with_a_zone_are_the_same_instants_in_utc(tmp_path):
    stamps = pd.to_datetime(["2026-03-04T09:30:00", None], utc=True).tz_convert("Europe/Oslo")
    frame = pd.DataFrame({"circuit_id": ["a", "a"], "bitstring": ["0101", "1111"], "time_utc": stamps})
    frame.to_parquet(tmp_path / "s.parquet")
    shots = read_shots(tmp_path / "s.parquet", two_circuits(), bit_order="q0-first")
    assert shots.times["a", 0] == (np.datetime64("2026-03-04T09:30:00"),) * 2


def test_batch_labels_may_be_numbers_in_parquet(tmp_path):
    frame = pd.DataFrame({"circuit_id": ["a", "a"], "bitstring": ["0101", "1111"], "batch": [0, 3]})
    frame.to_parquet(tmp_path / "s.parquet")
    assert read_shots(tmp_path / "s.parquet", two_circuits(), bit_order="q0-first").batches == {("a", 0): ("0", "3")}
