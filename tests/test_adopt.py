"""Kits from circuits that somebody else's compiler wrote: capitalised gates, includes, virtual Z, permuted bits."""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np
import pytest
from qiskit import qasm2
from qiskit.quantum_info import Statevector

from rcbench.adopt import adopt
from rcbench.adopt.reading import read_folder
from rcbench.campaign import load_campaign
from rcbench.engine.state import final_state
from rcbench.errors import InputError, InputErrors
from rcbench.kit import read_kit
from rcbench.shots.reader import read_shots
from rcbench.verbs import compare

LOW = "gate RZ(angle) a { U(0, 0, angle) a; }\ngate RX(theta) a { U(theta, -pi/2, 2*pi/4) a; } // about X\n"
NATIVE = """include "low.inc";
gate PX(theta, phi) a { RZ(-phi) a; RX(theta) a; RZ(phi) a; }
/* the entangler, exp(-i angle/2 XX) */
gate MS(angle) a, b { CX a, b; RX(angle) a; CX a, b; }
"""
DEVICE = """
[device]
name = "Yew-6"
invented = true
layout = "{layout}"
qubits = {qubits}
one_qubit = "r+rz"

[device.two_qubit.zz]

[device.timings]
two_qubit_ns = 200

[device.limits]
circuits_per_job = 2

[device.errors.two_qubit]
rate = 0.01
kind = "average-infidelity"
uncertainty = 0.1

[device.errors.readout_0to1]
rate = 0.01
[device.errors.readout_1to0]
rate = 0.02
"""


def program(n: int, depth: int, seed: int, *, mirror: bool = False, bits: str = "reversed") -> str:
    """An OpenQASM 2.0 file in the gates of native.inc; a mirror circuit runs back, then flips the odd qubits."""
    rng = np.random.default_rng(seed)
    layers = []
    for _ in range(depth):
        layers += [[f"PX({rng.uniform(-1, 1):.6f}*pi, {rng.uniform(-3, 3):.6f}) q[{q}];" for q in range(n)]]
        layers += [[f"RZ(-pi*{rng.uniform(-1, 1):.6f}) q[{q}];" for q in range(n)]]
        order = rng.permutation(n)
        layers += [
            [f"MS(pi/{rng.integers(2, 5)}) q[{a}],q[{b}];" for a, b in zip(order[::2], order[1::2], strict=False)]
        ]
    lines = [line for layer in layers for line in layer]
    if mirror:
        lines += [back(line) for line in reversed(lines)] + [f"RX(pi) q[{q}];" for q in range(1, n, 2)]
    target = {q: n - 1 - q if bits == "reversed" else q for q in range(n)}
    lines += [f"measure q[{q}] -> c[{target[q]}];" for q in range(n)]
    head = f'OPENQASM 2.0;\ninclude "native.inc";\nqreg q[{n}];\ncreg c[{n}];\n'
    return head + "\n".join(lines) + "\n"


def back(line: str) -> str:
    """The inverse of one gate line: its first angle negated."""
    name, rest = line.split("(", 1)
    angle, after = rest.split(",", 1) if name == "PX" else rest.split(")", 1)
    return f"{name}(-({angle}){',' if name == 'PX' else ')'}{after}"


@pytest.fixture
def folders(tmp_path: Path) -> tuple[Path, Path]:
    """An empty folder of circuits and one with the include files."""
    (tmp_path / "circuits").mkdir()
    (tmp_path / "include").mkdir()
    (tmp_path / "include" / "native.inc").write_text(NATIVE)
    (tmp_path / "include" / "low.inc").write_text(LOW)
    return tmp_path / "circuits", tmp_path / "include"


def write(folder: Path, **programs: str) -> None:
    for name, text in programs.items():
        (folder / f"{name}.qasm").write_text(text)


def test_a_folder_becomes_a_kit_that_needs_no_include_folder(folders, tmp_path):
    circuits, include = folders
    write(circuits, b=program(4, 3, 1), a=program(4, 3, 2), deeper=program(4, 5, 3))
    (circuits / "README.txt").write_text("not a circuit")
    kit = adopt(circuits, tmp_path / "kit", include_dirs=[include], shots=700)
    assert sorted(row.circuit_id for row in kit.rows) == ["a", "b", "deeper"]
    for row in kit.rows:
        assert (row.experiment, row.protocol, row.role) == ("adopted", "direct-sampling", "circuit")
        assert (row.family, row.gates, row.shots, row.n_qubits) == ("adopted", "imported", 700, 4)
        assert row.measured_qubits == (3, 2, 1, 0)
        assert row.physical_qubits == ("q[0]", "q[1]", "q[2]", "q[3]")
        assert row.two_qubit_gates == 2 * row.depth
    assert {row.circuit_id: (row.depth, row.instance) for row in kit.rows} == {
        "a": (3, 0),
        "b": (3, 1),
        "deeper": (5, 0),
    }
    text = kit.text(kit.rows[0])
    assert "the entangler" in text
    assert 'include "' not in text


def test_the_state_of_an_adopted_circuit_is_the_one_that_qiskit_finds(folders, tmp_path):
    """qiskit reads neither capitalised names nor the include, so it gets the same file in plain gates."""
    circuits, include = folders
    text = program(4, 4, 7)
    write(circuits, one=text)
    kit = adopt(circuits, tmp_path / "kit", include_dirs=[include])
    plain = LOW + "\n".join(NATIVE.splitlines()[1:2] + NATIVE.splitlines()[3:]) + text.split('native.inc";\n', 1)[1]
    for name in ("RZ", "RX", "PX", "MS"):
        plain = plain.replace(f"{name}(", f"my_{name.lower()}(")
    circuit = qasm2.loads("OPENQASM 2.0;\n" + plain)
    circuit.remove_final_measurements()
    expected = np.abs(Statevector(circuit.reverse_bits()).data) ** 2
    found = np.abs(final_state(kit.circuit(kit.rows[0]), "complex128")) ** 2
    np.testing.assert_allclose(found, expected, atol=1e-10)


def test_mirror_return_finds_each_outcome_and_honours_the_map_of_bits(folders, tmp_path):
    circuits, include = folders
    write(circuits, straight=program(5, 3, 1, mirror=True, bits="straight"), turned=program(5, 3, 2, mirror=True))
    kit = adopt(circuits, tmp_path / "kit", include_dirs=[include], protocol="mirror-return", margin=0.05)
    assert {row.circuit_id: row.target for row in kit.rows} == {"straight": "01010", "turned": "01010"[::-1]}
    assert all(row.depth == 6 for row in kit.rows)
    assert kit.campaign.experiments[0].margins.keys() == {"echo_return"}


def test_a_circuit_without_one_certain_outcome_is_refused_by_name_and_nothing_is_written(folders, tmp_path):
    circuits, include = folders
    write(circuits, good=program(4, 2, 1, mirror=True), bad=program(4, 2, 2), worse=program(4, 3, 3))
    with pytest.raises(InputErrors) as caught:
        adopt(circuits, tmp_path / "kit", include_dirs=[include], protocol="mirror-return")
    assert [error.where for error in caught.value.errors] == ["bad: ", "worse: "]
    assert "one bitstring with probability" in str(caught.value)
    assert not (tmp_path / "kit").exists()


def test_given_targets_take_the_place_of_a_simulation(folders, tmp_path):
    circuits, include = folders
    write(circuits, a=program(3, 2, 1), b=program(3, 2, 2))
    targets = tmp_path / "targets.csv"
    targets.write_text("circuit_id,bitstring\na,010\nb,001\n")
    kit = adopt(circuits, tmp_path / "kit", include_dirs=[include], protocol="mirror-return", targets=targets)
    assert {row.circuit_id: row.target for row in kit.rows} == {"a": "010", "b": "001"}


@pytest.mark.parametrize(
    ("table", "message"),
    [
        ("id,bits\na,010\n", "targets.csv:1: columns: found 'id,bits'; allowed: circuit_id,bitstring"),
        ("circuit_id,bitstring\na,010\nc,001\n", "targets.csv:3: circuit_id: found 'c'; allowed: a, b"),
        ("circuit_id,bitstring\na,010\na,010\n", "targets.csv:3: circuit_id: found 'a'; allowed: each circuit once"),
        ("circuit_id,bitstring\na,01\n", "targets.csv:2: bitstring: found '01'; allowed: 3 characters"),
        ("circuit_id,bitstring\na,01x\n", "targets.csv:2: bitstring: found '01x'"),
        ("circuit_id,bitstring\na\n", "targets.csv:2: row: found 'a'"),
        ("circuit_id,bitstring\na,010\n", "targets.csv: targets: found 'none for b'"),
        ("", "targets.csv:1: columns"),
    ],
)
def test_a_table_of_targets_that_does_not_fit_is_refused_with_its_line(folders, tmp_path, table, message):
    circuits, include = folders
    write(circuits, a=program(3, 2, 1), b=program(3, 2, 2))
    targets = tmp_path / "targets.csv"
    targets.write_text(table)
    with pytest.raises(InputError, match=message):
        adopt(circuits, tmp_path / "kit", include_dirs=[include], protocol="mirror-return", targets=targets)


def test_a_device_gives_labels_batches_durations_and_margins(folders, tmp_path):
    circuits, include = folders
    write(circuits, a=program(4, 2, 1), b=program(4, 2, 2), c=program(4, 2, 3))
    device = tmp_path / "device.toml"
    device.write_text(DEVICE.format(layout="all-to-all", qubits=6))
    kit = adopt(circuits, tmp_path / "kit", include_dirs=[include], device_file=device, margin=0.1)
    assert [row.batch for row in kit.rows] == [0, 0, 1]
    assert kit.rows[0].physical_qubits == ("0", "1", "2", "3")
    assert kit.rows[0].duration_ns == 2 * (30 + 200) + 1000
    experiment = kit.campaign.experiments[0]
    assert experiment.margins["xeb_fidelity"].value == 0.1
    assert experiment.margins["collision_probability"].relative
    assert "porter_thomas_ks" not in experiment.margins


@pytest.mark.parametrize(
    ("layout", "qubits", "message"),
    [("line", 4, r"^a: coupler: found 'q\[\d\] and q\[\d\]'"), ("all-to-all", 3, r"^a: qubit: found 'q\[3\]'")],
)
def test_circuits_that_do_not_fit_the_device_are_refused_by_name(folders, tmp_path, layout, qubits, message):
    circuits, include = folders
    write(circuits, a=program(4, 4, 1))
    device = tmp_path / "device.toml"
    device.write_text(DEVICE.format(layout=layout, qubits=qubits))
    with pytest.raises(InputError, match=message):
        adopt(circuits, tmp_path / "kit", include_dirs=[include], device_file=device)


def test_physical_qubits_are_found_by_the_labels_of_the_device(folders, tmp_path):
    circuits, _ = folders
    head = 'OPENQASM 3.0;\ninclude "stdgates.inc";\nbit[2] c;\n'
    write(circuits, a=head + "cz $7, $2;\nc[0] = measure $2;\nc[1] = measure $7;\n")
    device = tmp_path / "device.toml"
    device.write_text(
        DEVICE.format(layout="all-to-all", qubits=3).replace("qubits = 3", 'qubits = 3\nphysical = ["7", "9", "2"]')
    )
    kit = adopt(circuits, tmp_path / "kit", device_file=device)
    assert kit.campaign.experiments[0].qubits == (2, 0)
    assert kit.rows[0].physical_qubits == ("2", "7")
    assert kit.campaign.circuit_format == "qasm3"


def test_qubits_that_a_circuit_leaves_alone_cost_nothing(folders, tmp_path):
    """Compilers declare the whole device: a state of 60 qubits would not fit any memory."""
    circuits, _ = folders
    head = 'OPENQASM 2.0;\ninclude "qelib1.inc";\nqreg q[60];\ncreg c[60];\n'
    gates = "h q[50];\ncx q[50],q[7];\nbarrier q;\nx q[31];\n"
    write(circuits, a=head + gates + "measure q[7] -> c[40];\nmeasure q[50] -> c[3];\nmeasure q[31] -> c[41];\n")
    kit = adopt(circuits, tmp_path / "kit", protocol="direct-sampling")
    row = kit.rows[0]
    assert row.physical_qubits == ("q[7]", "q[31]", "q[50]")
    assert row.measured_qubits == (2, 0, 1)
    assert row.params == {"bits": ["c[3]", "c[40]", "c[41]"]}
    np.testing.assert_allclose(np.abs(final_state(kit.circuit(row))) ** 2, [0, 0, 0.5, 0, 0, 0, 0, 0.5], atol=1e-6)


def test_circuits_on_different_qubits_become_experiments_of_their_own(folders, tmp_path):
    circuits, include = folders
    write(circuits, a=program(3, 2, 1), b=program(4, 2, 2), c=program(4, 2, 3))
    kit = adopt(circuits, tmp_path / "kit", include_dirs=[include])
    assert {row.circuit_id: (row.experiment, row.n_qubits, row.instance) for row in kit.rows} == {
        "a": ("adopted-3q", 3, 0),
        "b": ("adopted-4q", 4, 0),
        "c": ("adopted-4q", 4, 1),
    }


def test_the_campaign_of_an_adopted_kit_reads_back_and_can_not_be_built(folders, tmp_path):
    from rcbench.kit import build_kit

    circuits, include = folders
    write(circuits, a=program(3, 2, 1))
    kit = adopt(circuits, tmp_path / "kit", include_dirs=[include])
    campaign = load_campaign(tmp_path / "kit" / "campaign.toml")
    assert campaign == kit.campaign
    assert campaign.experiments[0].margins == {}
    with pytest.raises(InputError, match="family: found 'adopted'"):
        build_kit(campaign, tmp_path / "again")


def test_adopting_again_changes_nothing_and_other_circuits_are_refused(folders, tmp_path):
    circuits, include = folders
    write(circuits, a=program(3, 2, 1))
    first = adopt(circuits, tmp_path / "kit", include_dirs=[include])
    assert adopt(circuits, tmp_path / "kit", include_dirs=[include]).hash == first.hash
    other = adopt(circuits, tmp_path / "other", include_dirs=[include])
    assert other.hash == first.hash
    write(circuits, a=program(3, 2, 2))
    with pytest.raises(InputError, match="this one is of other inputs"):
        adopt(circuits, tmp_path / "kit", include_dirs=[include])


def test_an_edited_circuit_is_refused_by_name(folders, tmp_path):
    circuits, include = folders
    write(circuits, a=program(3, 2, 1))
    adopt(circuits, tmp_path / "kit", include_dirs=[include])
    path = tmp_path / "kit" / "circuits" / "a.qasm"
    path.write_text(path.read_text().replace("MS(", "MS(-"))
    kit = read_kit(tmp_path / "kit")
    with pytest.raises(InputError, match=r"a.qasm.*its hash differs"):
        kit.circuit(kit.rows[0])


def test_all_files_with_errors_are_reported_together_with_file_and_line(folders, tmp_path):
    circuits, include = folders
    write(
        circuits,
        a=program(3, 2, 1),
        b="OPENQASM 2.0;\nqreg q[1];\nfoo q[0];\n",
        c=program(3, 2, 1).replace("native", "no"),
    )
    write(circuits, d='OPENQASM 2.0;\ninclude "qelib1.inc";\nqreg q[1];\nx q[0];\n')
    with pytest.raises(InputErrors) as caught:
        adopt(circuits, tmp_path / "kit", include_dirs=[include])
    lines = str(caught.value).splitlines()
    assert lines[0].startswith("b.qasm:3: gate: found 'foo'")
    assert lines[1].startswith("c.qasm:2: include: found 'no.inc'")
    assert lines[1].endswith("nowhere defined: PX, RZ, MS")
    assert lines[2].startswith("d.qasm: measure: found 'no measurement'")
    assert not (tmp_path / "kit").exists()


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        ({"protocol": "mirror"}, "protocol: found 'mirror'; allowed: direct-sampling, mirror-return"),
        ({"shots": 0}, "shots: found 0"),
        ({"margin": -1.0}, "margin: found -1.0; allowed: a number above 0"),
        ({"targets": "t.csv"}, "targets with the protocol mirror-return only"),
        ({"include_dirs": ["nowhere"]}, "include: found 'nowhere'; allowed: a folder"),
        ({"device_file": "nowhere.toml"}, "nowhere.toml"),
    ],
)
def test_arguments_that_make_no_sense_are_refused(folders, tmp_path, arguments, message):
    circuits, include = folders
    write(circuits, a=program(3, 2, 1))
    with pytest.raises(InputError, match=message):
        adopt(circuits, tmp_path / "kit", **{"include_dirs": [include], **arguments})


def test_a_folder_without_circuits_or_with_two_of_a_name_is_refused(tmp_path):
    with pytest.raises(InputError, match="a folder of OpenQASM files"):
        read_folder(tmp_path / "nowhere")
    with pytest.raises(InputError, match=r"files that end in \.qasm"):
        read_folder(tmp_path)
    for name in ("a.qasm", "A.qasm3"):
        (tmp_path / name).write_text("")
    with pytest.raises(InputError, match="one file of that name"):
        read_folder(tmp_path)


def sampled(kit, share: float, seed: int) -> str:
    """Shots of a device that gives the ideal outcomes with probability `share` and uniform ones else."""
    rng = np.random.default_rng(seed)
    lines = ["circuit_id,bitstring"]
    for row in kit.rows:
        ideal = np.abs(final_state(kit.circuit(row), "complex128")) ** 2
        width = len(row.measured_qubits)
        ideal = ideal.reshape((2,) * row.n_qubits).transpose(row.measured_qubits).ravel()
        good = rng.binomial(row.shots, share)
        found = [*rng.choice(2**width, good, p=ideal / ideal.sum()), *rng.integers(0, 2**width, row.shots - good)]
        lines += [f"{row.circuit_id},{outcome:0{width}b}" for outcome in found]
    return "\n".join(lines) + "\n"


@pytest.mark.parametrize(("protocol", "key"), [("direct-sampling", "xeb_fidelity"), ("mirror-return", "echo_return")])
def test_shots_of_an_adopted_kit_give_the_fidelity_that_went_in(folders, tmp_path, protocol, key):
    """Six circuits of 2,000 shots: a fidelity of 0.8 is found within 4 of its own standard errors."""
    circuits, include = folders
    mirror = protocol == "mirror-return"
    write(circuits, **{f"c{seed}": program(5, 4, seed, mirror=mirror) for seed in range(6)})
    kit = adopt(circuits, tmp_path / "kit", include_dirs=[include], protocol=protocol, shots=2000, margin=0.05)
    (tmp_path / "shots").mkdir()
    (tmp_path / "shots" / "shots.csv").write_text(sampled(kit, 0.8, 5))
    (tmp_path / "shots" / "shots.toml").write_text('bit_order = "q0-first"\n')
    read_shots(tmp_path / "shots", kit)
    frame = compare(tmp_path / "kit", tmp_path / "shots", tmp_path / "out").table
    row = frame[frame["signature"] == key].iloc[0]
    expected = 0.8 + 0.2 / 2**5 if mirror else 0.8
    assert abs(row["measured"] - expected) < 4 * max(row["std_error"], 0.005)
    assert row["ideal"] == pytest.approx(1, abs=1e-3)
    assert row["finding"] == "undecided"
    assert "no error budget" in row["note"]


def test_provenance_names_the_command_and_the_hash(folders, tmp_path):
    circuits, include = folders
    write(circuits, a=program(3, 2, 1))
    kit = adopt(circuits, tmp_path / "kit", include_dirs=[include])
    facts = json.loads((tmp_path / "kit" / "provenance.json").read_text())
    assert (facts["command"], facts["complete"], facts["kit_hash"]) == ("adopt", True, kit.hash)
    assert kit.hash in (tmp_path / "kit" / "HANDOVER.md").read_text()
