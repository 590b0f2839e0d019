"""The examination as a whole, on kits whose shots Cirq drew: every kind of fault once, and none where there is none."""

import numpy as np
import pytest
from fault_cases import MIRROR, as_shots, cirq_noisy, draw, exchange, make_world, permuted
from fault_table import PLANTS, measure

from rcbench.circuits.export import to_cirq
from rcbench.errors import InputError
from rcbench.shots.evidence import evidence_text, find_evidence
from rcbench.shots.evidence.series import Series

BUTTERFLY = """
[[experiment]]
name = "otoc"
protocol = "butterfly-echo"
same_circuits_as = "sampling"
sites = { butterfly = [5], probe = [0, 1, 2] }
"""


@pytest.fixture(scope="module")
def world(tmp_path_factory):
    folder = tmp_path_factory.mktemp("world")
    how = {"depths": (2, 6), "instances": 4, "shots": 2000, "more": MIRROR}
    made = make_world(folder / "a", 6, **how)
    made.other = make_world(folder / "b", 6, **how, seed=6)
    return made


def examined(world, drawn, **more):
    shots = as_shots(world, drawn, **more)
    return find_evidence(world.kit, shots, world.probabilities, series=Series(drawn, {}))


def drawn_at(world, fidelity, seed=0, shots=2000, **how):
    world.rng = np.random.default_rng(seed)
    return draw(world, fidelity, shots, up=0.01, down=0.03, **how)


@pytest.mark.parametrize("kind", [kind for kind in PLANTS if kind != "none"])
def test_a_planted_fault_is_found_and_nothing_else(world, kind):
    row = measure(world, kind, 0.6, 2)
    assert (row.found, row.false) == (2, 0)


@pytest.mark.parametrize("fidelity", [1.0, 0.5, 0.1, 0.0])
def test_nothing_is_found_in_shots_that_are_as_they_should_be(world, fidelity):
    for seed in range(3):
        assert not [f for f in examined(world, drawn_at(world, fidelity, seed)) if f.told]


@pytest.mark.parametrize(("gate", "decay"), [(0.01, 0.005), (0.1, 0.05)])
def test_local_noise_and_relaxation_are_no_fault(world, gate, decay):
    """Depolarising after each gate and amplitude damping of all qubits, by Cirq's density matrices; 30,000 shots."""
    real = {
        row.base_id: cirq_noisy(to_cirq(world.kit.circuit(row)), row, gate, decay)
        for row in world.kit.rows
        if row.circuit_id == row.base_id
    }
    assert not [f for f in examined(world, drawn_at(world, 1.0, real=real, shots=30_000)) if f.told]


def test_the_text_names_circuits_evidence_and_the_command_that_mends(world):
    drawn = drawn_at(world, 0.6)
    keys = sorted(key for key in drawn if key[0].startswith("sampling"))
    found = examined(world, exchange(drawn, keys[1], keys[4]))
    text = evidence_text(found)
    assert f"the shots of {keys[1][0]} and {keys[4][0]} are exchanged [log-likelihood ratio" in text
    assert "rcbench check KIT SHOTS --apply OUT" in text
    assert "in shots.csv" in text
    assert found[0].circuits == (keys[1][0], keys[4][0])
    assert found[0].evidence > found[0].limit


def test_shots_of_one_order_and_misfiled_too_are_told_both(world):
    drawn = drawn_at(world, 0.6)
    keys = sorted(key for key in drawn if key[0].startswith("sampling"))
    drawn = exchange(drawn, keys[1], keys[4])
    found = [f for f in examined(world, {k: permuted(v, 6, range(6)[::-1]) for k, v in drawn.items()}) if f.told]
    assert sorted(f.kind for f in found) == ["bit-order", "other-circuit"]
    assert found[0].repair.moves == {keys[1]: keys[4], keys[4]: keys[1]} or found[1].repair.moves


def test_runs_that_cannot_show_their_order_are_taken_to_be_like_the_others(tmp_path):
    """Echoes that return to zeros look alike in any order, and three probes are too few to tell."""
    more = BUTTERFLY + MIRROR.replace('"mirror"', '"echo"').replace("mirror-echo", "loschmidt-echo")
    world = make_world(tmp_path, 6, depths=(2, 6), instances=3, more=more)
    width = {row.circuit_id: len(row.measured_qubits) for row in world.kit.rows}
    drawn = {k: permuted(v, width[k[0]], range(width[k[0]])[::-1]) for k, v in drawn_at(world, 0.6).items()}
    [found] = [f for f in examined(world, drawn) if f.told]
    assert found.kind == "bit-order"
    assert set(found.repair.orders) == set(drawn)
    assert all(order.source == tuple(range(width[k[0]]))[::-1] for k, order in found.repair.orders.items())
    assert "cannot show it and are taken to be alike" in found.text


def test_one_circuit_in_reversed_order_is_told_alone(world):
    drawn = drawn_at(world, 0.6, seed=3)
    key = sorted(key for key in drawn if key[0].startswith("sampling"))[-1]
    found = [f for f in examined(world, drawn | {key: permuted(drawn[key], 6, range(6)[::-1])}) if f.told]
    assert [(f.kind, f.runs) for f in found] == [("bit-order", (key,))]


def test_a_copy_under_another_name_is_told_without_a_repair(world):
    drawn = drawn_at(world, 0.6)
    keys = sorted(key for key in drawn if key[0].startswith("sampling"))
    found = [f for f in examined(world, drawn | {keys[0]: drawn[keys[5]]}) if f.told]
    assert "same-shots" in {f.kind for f in found}
    assert not any(f.repair for f in found)


def test_shots_of_a_missing_circuit_are_moved_there_where_that_is_clear(tmp_path):
    world = make_world(tmp_path, 8, depths=(8,), instances=5)
    drawn = drawn_at(world, 0.6)
    keys = sorted(drawn)
    drawn[keys[2]] = drawn.pop(keys[3])
    [found] = [f for f in examined(world, drawn) if f.told]
    assert found.repair.moves == {keys[2]: keys[3]}
    assert f"the shots filed under {keys[2][0]} are of {keys[3][0]}" in found.text


def test_noise_is_answered_with_cannot_tell_and_shots_that_do_tell(world):
    """At F = 0.15 some of 8 circuits are open after 300 shots; with the shots asked for, nine of ten are settled."""
    drawn = drawn_at(world, 0.15, shots=300)
    open_now = [f for f in examined(world, drawn) if not f.told and f.kind == "identity"]
    assert open_now
    assert all("cannot tell: sampling depth" in f.lines()[0] and f.shots_needed > 300 for f in open_now)
    needed = max(f.shots_needed for f in open_now)
    assert needed < 100_000
    again = examined(world, drawn_at(world, 0.15, seed=1, shots=needed))
    assert sum(len(f.runs) for f in again if f.kind == "identity") <= 2


def test_a_uniform_output_is_said_to_tell_nothing(tmp_path):
    world = make_world(tmp_path, 5, depths=(1,), instances=3)
    world.ideal = {key: np.full(32, 1 / 32) for key in world.ideal}
    [found] = examined(world, drawn_at(world, 1.0))
    assert "no number of shots tells" in found.text
    assert found.shots_needed is None


def test_a_butterfly_and_its_reference_exchanged_are_told(tmp_path):
    world = make_world(tmp_path, 6, depths=(2, 8), instances=3, more=BUTTERFLY)
    drawn = drawn_at(world, 0.5)
    assert not [f for f in examined(world, drawn) if f.told]
    a, b = ("otoc-reference-i001-d008", 0), ("otoc-butterfly-i001-d008-s000", 0)
    [found] = [f for f in examined(world, exchange(drawn, a, b)) if f.told]
    assert found.repair.moves == {a: b, b: a}
    # before the butterfly's cone reaches the probes both return alike: nothing can be told, and nothing is wrong
    a, b = ("otoc-reference-i001-d002", 0), ("otoc-butterfly-i001-d002-s000", 0)
    assert not [f for f in examined(world, exchange(drawn, a, b)) if f.told]


def test_anchors_that_fall_from_batch_to_batch_are_told(tmp_path):
    world = make_world(tmp_path, 5, depths=(3, 6), instances=10, limits="\n[device.limits]\ncircuits_per_job = 12\n")
    assert len({row.batch for row in world.kit.rows}) > 1
    assert not [f for f in examined(world, drawn_at(world, 0.6)) if f.told]
    first = min(row.batch for row in world.kit.rows)
    drawn = drawn_at(world, lambda row: 0.7 if row.batch == first else 0.45)
    [found] = [f for f in examined(world, drawn) if f.told]
    assert found.kind == "drift"
    assert "from batch to batch" in found.text


def test_large_circuits_are_left_out_and_said_so(world):
    shots = as_shots(world, drawn_at(world, 0.5))
    found = find_evidence(world.kit, shots, world.probabilities, max_qubits=5)
    assert [f.lines()[0] for f in found if f.kind == "not-examined"] == [
        "not examined: 8 runs of sampling: more than 5 qubits, which --max-qubits raises at the cost of time"
    ]


def test_a_circuit_that_cannot_be_simulated_is_named(world):
    shots = as_shots(world, drawn_at(world, 0.5))

    def refused(circuit_id):
        raise InputError("memory", "8 GiB", "4 GiB")

    found = find_evidence(world.kit, shots, refused)
    assert any("cannot be simulated (memory: 8 GiB; allowed: 4 GiB)" in f.text for f in found)


def test_a_single_shot_of_each_circuit_says_nothing(world):
    assert not [f for f in examined(world, drawn_at(world, 0.5, shots=1)) if f.told]
