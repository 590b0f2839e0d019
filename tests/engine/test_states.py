"""States: fused and blocked evolution against row-by-row numpy, conservation, threads, memory."""

from __future__ import annotations

import numpy as np
import pytest
from engine_cases import ONE_QUBIT, TWO_QUBIT, random_circuit, turns_circuit
from hypothesis import given, settings
from hypothesis import strategies as st

from rcbench.circuits.circuit import CircuitBuilder
from rcbench.engine import blocks
from rcbench.engine.blocks import apply_plan, plan
from rcbench.engine.kernels import QUARTER
from rcbench.engine.operators import encode
from rcbench.engine.program import fuse, gate_rows
from rcbench.engine.reference import apply_reference, final_state_reference
from rcbench.engine.state import compile_circuit, final_state, zero_state
from rcbench.engine.threads import Pool
from rcbench.engine.turns import split_turns
from rcbench.errors import InputError

TOLERANCE = {"complex64": 2e-6, "complex128": 1e-13}


@pytest.mark.parametrize("name", [*ONE_QUBIT, *TWO_QUBIT, "matrix2"])
def test_every_gate_kind_between_random_gates_gives_the_reference_state(name):
    one = (name,) if name in ONE_QUBIT else ONE_QUBIT
    two = (name,) if name not in ONE_QUBIT else TWO_QUBIT
    circuit = random_circuit(6, 4, seed=len(name), one_qubit=one, two_qubit=two)
    np.testing.assert_allclose(final_state(circuit, "complex128"), final_state_reference(circuit), atol=1e-13)


@given(n=st.integers(1, 9), layers=st.integers(0, 6), share=st.floats(0, 1), seed=st.integers(0, 2**32 - 1))
@settings(deadline=None, max_examples=40)
def test_fused_evolution_equals_row_by_row(n, layers, share, seed):
    circuit = random_circuit(n, layers, seed, share=share)
    reference = final_state_reference(circuit)
    for dtype, tolerance in TOLERANCE.items():
        np.testing.assert_allclose(final_state(circuit, dtype), reference, atol=tolerance)


@pytest.mark.parametrize("n", [2, 5, 9])
def test_quarter_turns_between_diagonal_gates_take_the_cheap_kernel_and_give_the_reference_state(n):
    circuit = turns_circuit(n, 9, seed=n)
    kinds = encode(fuse(split_turns(gate_rows(circuit))), np.dtype(np.complex128)).kind
    assert n < 9 or np.count_nonzero(kinds == QUARTER) > len(kinds) / 2
    np.testing.assert_allclose(final_state(circuit, "complex128"), final_state_reference(circuit), atol=1e-13)


@pytest.mark.parametrize("n", [9, 11])
@pytest.mark.parametrize("make", [random_circuit, turns_circuit])
def test_sweeps_over_small_blocks_give_the_reference_state(monkeypatch, make, n):
    monkeypatch.setattr(blocks, "BLOCK_BYTES", 16 * 2**7)
    monkeypatch.setattr(blocks, "RUN_BYTES", 16 * 2**4)
    circuit = make(n, 8, seed=n)
    sweeps = compile_circuit(circuit, "complex128")
    assert len(sweeps.active) > 2
    assert all(int(mask).bit_count() == 7 for mask in sweeps.active)
    np.testing.assert_allclose(final_state(circuit, "complex128"), final_state_reference(circuit), atol=1e-13)


def test_states_above_one_block_are_the_same_for_one_and_two_threads_to_the_last_bit():
    circuit = random_circuit(17, 5, seed=1)
    assert final_state(circuit, threads=1).tobytes() == final_state(circuit, threads=2).tobytes()


def test_norm_is_kept_to_1e_5_over_200_layers():
    circuit = random_circuit(8, 200, seed=4, two_qubit=("matrix2",))
    assert abs(np.linalg.norm(final_state(circuit).astype(np.complex128)) - 1) < 1e-5


def test_overlap_of_two_states_is_conserved():
    """Unitary evolution keeps the overlap of any two states."""
    n, rng = 9, np.random.default_rng(8)
    pair = rng.normal(size=(2, 2**n)) + 1j * rng.normal(size=(2, 2**n))
    pair /= np.linalg.norm(pair, axis=1, keepdims=True)
    before = np.vdot(pair[0], pair[1])
    program = fuse(split_turns(gate_rows(random_circuit(n, 20, seed=2))))
    sweeps = plan(encode(program, pair.dtype), program.start)
    with Pool(1) as pool:
        for state in pair:
            apply_plan(state, sweeps, pool)
    assert abs(np.vdot(pair[0], pair[1]) - before) < 1e-13


def test_double_precision_says_how_good_single_precision_is():
    """40 layers of ten qubits; rounding grows like the square root of the number of operators."""
    circuit = random_circuit(10, 40, seed=6)
    error = np.linalg.norm(final_state(circuit) - final_state(circuit, "complex128"))
    assert error < 1e-5


def test_operators_act_on_the_qubits_they_name():
    """Qubit 0 is the most significant bit: X on qubit 1 of three gives index 2, whatever the register size."""
    for n, qubit in ((1, 0), (3, 1), (6, 5), (9, 0)):
        builder = CircuitBuilder(n)
        builder.add("x", [qubit])
        assert np.flatnonzero(np.abs(final_state(builder.build())) > 0.5).tolist() == [2 ** (n - 1 - qubit)]


def test_reference_contraction_equals_a_kronecker_product():
    rng = np.random.default_rng(1)
    gate, state = rng.normal(size=(4, 4)) + 0j, rng.normal(size=(1, 8)) + 0j
    np.testing.assert_allclose(apply_reference(state, gate, (0, 1))[0], np.kron(gate, np.eye(2)) @ state[0])


def test_zero_state_is_aligned_to_registers():
    assert zero_state(5).ctypes.data % 64 == 0


@pytest.mark.parametrize(
    ("rows", "message"),
    [
        ([("x", 0), ("reset", 0)], "reset of qubit 0 after a gate"),
        ([("measure", 0), ("x", 0)], "x on qubit 0 after its measurement"),
        ([("measure", 1), ("reset", 1)], "reset on qubit 1 after its measurement"),
    ],
)
def test_what_a_pure_state_cannot_follow_is_refused(rows, message):
    builder = CircuitBuilder(2)
    for name, qubit in rows:
        builder.add(name, [qubit, 0] if name == "measure" else [qubit])
        builder.next_layer()
    with pytest.raises(InputError, match=message):
        final_state(builder.build())


def test_reset_before_the_first_gate_changes_nothing():
    builder = CircuitBuilder(2)
    builder.add("reset", [0])
    builder.next_layer()
    builder.add("h", [0])
    builder.measure([0, 1])
    np.testing.assert_allclose(final_state(builder.build()), np.array([1, 0, 1, 0]) / np.sqrt(2), atol=1e-6)


def test_a_state_that_does_not_fit_is_refused_with_the_number_of_bytes():
    builder = CircuitBuilder(20)
    builder.add("h", [0])
    with pytest.raises(InputError, match=r"8388608 bytes for a state of 20 qubits.*at most 1000000 bytes"):
        final_state(builder.build(), memory_limit=10**6)


def test_unknown_precision_is_refused_by_name():
    with pytest.raises(InputError, match="complex64 or complex128"):
        final_state(random_circuit(2, 1, seed=0), "float32")
