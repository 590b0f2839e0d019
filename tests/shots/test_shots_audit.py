import itertools
import json

import numpy as np
import pytest
from shot_cases import Row, make_kit, random_bits, strings_of, write

from rcbench.shots.audit import check_shots, missing_circuits
from rcbench.shots.completeness import joined_trend, trend
from rcbench.shots.reader import read_shots


def audit(folder, kit, content, execution=None, **how):
    """The audit of shots given as {circuit_id: number of shots}, or as the text of a CSV file."""
    folder.mkdir(exist_ok=True)
    if isinstance(content, dict):
        width = {row.circuit_id: len(row.measured_qubits) for row in kit.rows}
        content = "circuit_id,bitstring,count\n" + "".join(
            f"{c},{'0' * width.get(c, 4)},{n}\n" for c, n in content.items()
        )
    write(folder / "s.csv", content)
    if execution is not None:
        write(folder / "execution.toml", execution)
    shots = read_shots(folder, kit, bit_order="q0-first", **how)
    return check_shots(kit, shots)


def ladder(instances=6, depths=(2, 4, 8, 16), **more):
    rows = [Row(circuit_id=f"c{i}-{d}", instance=i, depth=d, **more) for i in range(instances) for d in depths]
    return make_kit(*rows)


def texts(found):
    return [(problem.severity, problem.text) for problem in found.problems]


def test_a_complete_return_needs_no_attention(tmp_path):
    kit = ladder()
    found = audit(tmp_path, kit, {row.circuit_id: 100 for row in kit.rows})
    assert not found.needs_attention
    assert found.problems == ()
    row = found.table.iloc[0]
    assert (row["asked"], row["returned"], row["complete"], row["missing"]) == (24, 24, 24, 0)
    assert (row["shots_asked"], row["shots_returned"]) == (2400, 2400)
    assert "Nothing needs attention." in found.text()


def test_the_table_counts_each_kind_once(tmp_path):
    rows = [Row(circuit_id=c) for c in ("whole", "short", "over", "gone")]
    rows += [Row(circuit_id="again", repeat=1), Row(circuit_id="other", experiment="ring")]
    shots = {"whole": 100, "short": 60, "over": 130, "again": 100, "other": 100, "foreign": 7, "strange": 1}
    found = audit(tmp_path, make_kit(*rows), shots)
    assert found.table.to_dict(orient="list") == {
        "experiment": ["line", "ring", "(not of this kit)"],
        "asked": [5, 1, 0],
        "returned": [4, 1, 0],
        "complete": [3, 1, 0],
        "short": [1, 0, 0],
        "over": [1, 0, 0],
        "missing": [1, 0, 0],
        "unknown": [0, 0, 2],
        "repeats": [1, 0, 0],
        "discards": [0, 0, 0],
        "shots_asked": [500, 100, 0],
        "shots_returned": [390, 100, 0],
    }
    assert found.needs_attention
    assert texts(found) == [
        ("warning", "1 circuit of 6 did not come back (gone)"),
        (
            "warning",
            "1 circuit came back with fewer shots than asked for; what there is is used (short)",
        ),
        ("warning", "2 circuit ids not of this kit, with 8 shots not used (foreign, strange)"),
        ("note", "1 circuit came back with more shots than asked for; all are used (over)"),
    ]
    assert "rcbench build CAMPAIGN --out KIT --missing SHOTS" in found.problems[0].hint


def test_ids_with_a_file_ending_get_the_hint_that_mends_them(tmp_path):
    found = audit(tmp_path, make_kit(Row(circuit_id="a")), {"a": 100, "a.qasm": 5})
    assert "without its ending" in found.problems[0].hint


def test_repeats_beyond_the_roster_are_kept_and_told(tmp_path):
    content = "circuit_id,bitstring,count,repeat\na,0101,100,0\na,0101,100,1\n"
    found = audit(tmp_path, make_kit(Row(circuit_id="a")), content)
    assert texts(found) == [("note", "1 circuit came back as a repeat that was not asked for (a)")]
    assert found.table.iloc[0]["repeats"] == 1
    assert not found.needs_attention


def test_discards_count_as_delivered_but_not_as_usable(tmp_path):
    write(tmp_path / "shots.toml", 'lost = "x"\nbit_order = "q0-first"')
    content = "circuit_id,bitstring,count\na,0101,60\na,01x1,40\n"
    row = audit(tmp_path, make_kit(Row(circuit_id="a")), content).table.iloc[0]
    assert (row["complete"], row["discards"], row["shots_returned"]) == (1, 40, 60)


def test_the_same_shots_in_two_formats_are_found(tmp_path):
    bits = strings_of(random_bits(7, 100, 4))
    for name in ("s", "t"):  # a blank line more, so that the files differ
        write(
            tmp_path / f"{name}.csv",
            "circuit_id,bitstring\n" + "".join(f"a,{b}\n" for b in bits) + "\n" * (name == "t"),
        )
    kit = make_kit(Row(circuit_id="a"))
    found = check_shots(kit, read_shots(tmp_path, kit, bit_order="q0-first"))
    assert found.problems[0].severity == "error"
    assert "every outcome of 1 circuit came two or more times over: the same shots twice? (a)" in found.problems[0].text


def test_what_is_missing_and_grows_with_depth_is_warned_of(tmp_path):
    kit = ladder(instances=10)
    kept = {r.circuit_id: 100 for r in kit.rows if r.depth < 16 or r.instance < 3}
    found = audit(tmp_path, kit, kept)
    assert any(
        "line: what is missing grows with depth, from 0.0% at depth 2 to 70.0% at depth 16 (linear trend, z = 4.6"
        in text
        for _, text in texts(found)
    )
    spread = {r.circuit_id: 100 for r in kit.rows if (r.instance + r.depth // 4) % 3}
    assert not any("grows with depth" in text for _, text in texts(audit(tmp_path, kit, spread)))


def test_discards_that_grow_with_depth_are_warned_of(tmp_path):
    write(tmp_path / "shots.toml", 'lost = "x"\nbit_order = "q0-first"')
    kit = ladder()
    lines = [
        f"{r.circuit_id},{s},{n}" for r in kit.rows for s, n in (("0101", 100 - 3 * r.depth), ("01x1", 3 * r.depth))
    ]
    found = audit(tmp_path, kit, "circuit_id,bitstring,count\n" + "\n".join(lines))
    assert (
        "line: what is discarded grows with depth, from 6.0% at depth 2 to 48.0% at depth 16" in found.problems[0].text
    )


def test_the_trend_has_the_mean_and_variance_of_all_orders():
    """All 720 orders of six values: the null of the test, counted out."""
    depth, lost = np.array([1.0, 2, 2, 4, 8, 9]), np.array([0, 0, 0.5, 1, 0, 1])
    scores = [trend(depth, np.array(order)).score for order in itertools.permutations(lost)]
    assert abs(np.mean(scores)) < 1e-12
    assert np.var(scores) == pytest.approx(trend(depth, lost).variance, rel=1e-12)


def test_the_trend_of_proportions_agrees_with_a_published_table():
    """Graubard and Korn, Biometrics 43, 471 (1987): alcohol; z**2 = 6.57 in Agresti's books (from memory)."""
    absent, present = [17066, 14464, 788, 126, 37], [48, 38, 5, 1, 1]
    scores = np.array([0, 0.5, 1.5, 4, 7])
    depth = np.concatenate([np.repeat(scores, absent), np.repeat(scores, present)])
    lost = np.concatenate([np.zeros(sum(absent)), np.ones(sum(present))])
    assert trend(depth, lost).z ** 2 == pytest.approx(6.57, abs=0.005)


def test_a_joined_trend_of_one_is_the_same_and_of_none_is_nothing():
    one = trend(np.arange(10.0), np.arange(10.0) / 10)
    assert joined_trend([one]) == one
    assert one.z == pytest.approx(3.0)  # r = 1, N = 10
    assert joined_trend([]).z == 0
    assert trend(np.ones(5), np.arange(5.0)).z == 0


def butterfly_kit():
    rows = []
    for i, d in itertools.product(range(3), (2, 4)):
        rows.append(Row(circuit_id=f"ref-{i}-{d}", role="reference", instance=i, depth=d))
        rows += [
            Row(circuit_id=f"bf{s}-{i}-{d}", role="butterfly", instance=i, depth=d, params={"butterfly": s, "probe": 0})
            for s in (1, 2)
        ]
    return make_kit(*rows, estimators=("butterfly-echo",))


def test_an_instance_without_its_reference_is_dropped_whole_and_named(tmp_path):
    kit = butterfly_kit()
    shots = {row.circuit_id: 100 for row in kit.rows if row.circuit_id not in ("ref-1-4", "bf1-0-2")}
    found = audit(tmp_path, kit, shots)
    assert found.dropped == {("line", 1, 4)}
    assert (
        "warning",
        "1 instance dropped whole, since the reference echo is missing (line instance 1 depth 4)",
    ) in texts(found)


def test_missing_circuits_are_those_without_any_shot(tmp_path):
    kit = make_kit(*(Row(circuit_id=c) for c in "abc"), Row(circuit_id="d", repeat=1), Row(circuit_id="d"))
    write(tmp_path / "shots.toml", 'lost = "x"\nbit_order = "q0-first"')
    content = "circuit_id,bitstring,repeat\na,0101,0\nb,01x1,0\nd,0101,1\n"
    shots = read_shots(write(tmp_path / "s.csv", content), kit)
    assert missing_circuits(kit, shots) == {"c", "d"}


@pytest.mark.parametrize(
    ("execution", "severity", "message"),
    [
        ('kit_hash = "0000000000000000"', "error", "shots for kit 000000000000; this kit is ffffffffffff"),
        (
            'physical_qubits = ["A0", "A1", "A2", "B9"]',
            "warning",
            "other physical qubits than the kit's (not in the kit: B9; lacking: A3)",
        ),
        ('post_selection = "heralded"', "warning", "shots were post-selected (heralded)"),
        ("readout_correction = true", "warning", "readout was corrected before sending (yes)"),
    ],
)
def test_facts_that_speak_against_the_shots_are_told(tmp_path, execution, severity, message):
    found = audit(tmp_path, make_kit(Row(circuit_id="a")), {"a": 100}, execution)
    assert found.problems[0].severity == severity
    assert message in found.problems[0].text


def test_facts_that_agree_with_the_kit_are_no_problem(tmp_path):
    execution = f'kit_hash = "{"f" * 64}"\nphysical_qubits = "A3 A2 A1 A0"\npost_selection = false\n'
    assert audit(tmp_path, make_kit(Row(circuit_id="a")), {"a": 100}, execution).problems == ()


def test_wall_time_comes_from_the_shots_or_from_what_is_stated(tmp_path):
    kit = make_kit(Row(circuit_id="a", shots=2))
    stated = "started = 2026-03-04T09:00:00Z\nended = 2026-03-04T10:00:00Z\n"
    assert audit(tmp_path / "1", kit, {"a": 2}).wall_time == {}
    assert audit(tmp_path / "2", kit, {"a": 2}, stated).wall_time["seconds"] == 3600
    timed = "circuit_id,bitstring,time_utc\na,0101,2026-03-04T09:30:00Z\na,0101,2026-03-04T09:31:30.5Z\n"
    found = audit(tmp_path / "3", kit, timed, stated)
    assert found.wall_time["seconds"] == 90.5
    assert found.wall_time["first"] == "2026-03-04T09:30:00Z"
    assert not found.needs_attention
    late = audit(tmp_path / "4", kit, timed.replace("09:31", "19:31"), stated)
    assert "outside the run of execution.toml" in late.problems[0].text


def test_circuits_of_another_batch_are_noted(tmp_path):
    content = "circuit_id,bitstring,batch\na,0101,3\n"
    found = audit(tmp_path, make_kit(Row(circuit_id="a", shots=1, batch=0)), content)
    assert found.problems[0].text.startswith("1 circuit ran in another batch than planned")


def test_the_audit_survives_json_and_the_terminal(tmp_path):
    kit = butterfly_kit()
    content = {row.circuit_id: 90 for row in kit.rows if row.instance}
    found = audit(tmp_path, kit, content | {"<x>": 3}, 'notes = "a\\u001b[31m note"')
    held = json.loads(json.dumps(found.as_dict()))
    assert held["missing_count"] == 6
    assert held["unknown"] == {"<x>": 3}
    assert held["execution"]["software"] == "not stated"
    assert held["files"][0]["name"] == "s.csv"
    text = found.text()
    assert "\x1b" not in text
    lines = text.splitlines()
    head = next(i for i, line in enumerate(lines) if line.startswith("experiment"))
    assert len(lines[head].rstrip()) == len(lines[head + 1].rstrip())  # the columns are aligned
