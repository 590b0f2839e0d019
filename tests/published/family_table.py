"""Prints the table of families by signatures, in Markdown: python tests/published/family_table.py

Six qubits on a line, depth 24 (for families that repeat: 12 periods), 60 circuits each; means, with the standard error
of the last digits in brackets. The first lines are closed forms.
"""

from __future__ import annotations

import numpy as np
from family_circuits import at, draw, otoc, unitaries

from rcbench.circuits.families import MODELS
from rcbench.engine.state import final_state
from rcbench.reference import conserving, haar, matchgate
from rcbench.signatures import frame_potential
from rcbench.signatures.entropy import vonneumann_entropy
from rcbench.signatures.paulis import pauli_weights
from rcbench.signatures.spreading import operator_size
from rcbench.signatures.tmi import choi_of, halves, operator_tmi

N, DEPTHS, INSTANCES = 6, (4, 24), 60
BIT = np.log(2)
COLUMNS = (
    "entropy of half, depth 4", "entropy of half", "operator TMI, halves, Renyi-2", "OTOC X0 X5", "OTOC Z0 Z5",
    "size of X0", "frame potential, k = 1",
)  # fmt: skip


def measured(name: str, gates: str, **more) -> list[str]:
    """One line of the table."""
    rows, members = [], []
    for instance in range(INSTANCES):
        circuits = draw(name, N, DEPTHS, instance, gates=gates, native="cz", **more)
        u = unitaries(circuits)[DEPTHS[-1]]
        members.append(u)
        half = [
            float(vonneumann_entropy(final_state(circuits[depth], "complex128", threads=1)[None], range(N // 2))[0])
            for depth in DEPTHS
        ]
        moved = {letter: u.conj().T @ at(letter, 0, N) @ u for letter in "XZ"}
        tmi = float(operator_tmi(choi_of(u[None]), halves(N)[0], halves(N)[0], order=2)[0])
        ends = [otoc(moved[letter], at(letter, N - 1, N)) for letter in "XZ"]
        rows.append([*(value / BIT for value in (*half, tmi)), *ends, operator_size(pauli_weights(moved["X"]))])
    table = np.array(rows)
    errors = table.std(axis=0, ddof=1) / np.sqrt(INSTANCES)
    first = frame_potential.of_unitaries(np.array(members), 1)
    means = [shown(*pair) for pair in zip(table.mean(axis=0), errors, strict=True)]
    return [*means, shown(first.value, first.std_error)]


def shown(value: float, error: float) -> str:
    return f"{value:.2f}({100 * error:.0f})" if error > 5e-3 else f"{round(value, 2) + 0.0:.2f}"


def line(name: str, cells) -> str:
    return f"| {name} | " + " | ".join(cells) + " |"


def main() -> None:
    print(line("circuits", COLUMNS))
    print("|---" * (len(COLUMNS) + 1) + "|")
    tmi, page = haar.operator_tmi_renyi2(N // 2, N // 2, N) / BIT, haar.vonneumann_entropy(N // 2, N) / BIT
    ends, size = [f"{haar.otoc(N):.2f}"] * 2, f"{haar.operator_size(N):.2f}"
    print(line("Haar, closed form", ["", f"{page:.2f}", f"{tmi:.2f}", *ends, size, "1"]))
    late = [matchgate.late_otoc(N, (letter, 0), (letter, N - 1)) for letter in "XZ"]
    print(line("matchgate, closed form", ["", "", "", *[f"{value:.2f}" for value in late], "", "2"]))
    charges = f"{conserving.late_otoc_of_charges(N):.2f}"
    print(line("charge-conserving, closed form", ["", "", "", "", charges, "", str(N + 1)]))
    print(line("brickwork, haar", measured("brickwork", "haar", one_qubit="none")))
    print(line("brickwork, clifford", measured("brickwork", "clifford", one_qubit="none")))
    for name in MODELS:
        print(line(name, measured(name, name)))
    print(line("trotter, xxz, disorder 1", measured("trotter", "trotter", hamiltonian="xxz", disorder=1.0)))
    print(line("dimers of brickwork, haar", measured("dimers", "haar", one_qubit="none")))
    print(line("product of brickwork, haar", measured("product", "haar", one_qubit="none")))


if __name__ == "__main__":
    main()
