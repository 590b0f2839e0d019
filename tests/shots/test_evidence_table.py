"""The table of planted faults: kind, noise and qubits against detection and false alarms. Printed with pytest -s."""

import pytest
from fault_table import FIDELITIES, HEAD, PLANTS, measure, table_world, write_row

# what must be found of 100 runs, by kind, at the fidelities 0.6, 0.2 and 0.05 and 2000 shots a circuit; 0: too weak
LEAST = {
    "two files exchanged": (95, 90, 0),
    "foreign shots in a file": (95, 0, 0),
    "bits reversed": (95, 95, 95),
    "bits shuffled": (95, 95, 95),
    "two bits exchanged": (95, 95, 95),
    "one bit inverted": (95, 95, 95),
    "one bit stuck": (95, 95, 95),
    "a block twice": (95, 95, 95),
    "half a file noise": (95, 0, 0),
    "kit of another seed": (95, 95, 0),
}


FULL = [pytest.param(n, runs, marks=pytest.mark.benchmark) for n, runs in ((6, 100), (12, 100), (20, 2))]  # hours
SHORT = [pytest.param(6, 4, marks=pytest.mark.slow)]


@pytest.mark.parametrize(("n_qubits", "runs"), [*SHORT, *FULL])
def test_faults_are_found_and_clean_shots_are_not_accused(tmp_path, capsys, n_qubits, runs):
    """False alarms: of all sets of shots, clean or with another fault, at most 1 in 100 with a wrong finding."""
    world = table_world(tmp_path, n_qubits)
    rows = [measure(world, kind, fidelity, runs) for kind in PLANTS for fidelity in FIDELITIES]
    with capsys.disabled():
        print("\n" + "\n".join([HEAD, *map(write_row, rows)]))
    assert sum(row.false for row in rows) <= len(rows) * runs / 100
    for row in rows:
        least = LEAST.get(row.kind, (0, 0, 0))[FIDELITIES.index(row.fidelity)]
        assert row.found >= least * runs // 100, row
