"""Circuits to distributions over their measured bits: ideal, and under the stated error model.

What is measured often depends on a part of a circuit only. Of a large register that part alone is simulated (local.py)
where it is enough smaller, or where the whole does not fit the memory.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence

from rcbench.circuits.circuit import Circuit
from rcbench.engine import memory
from rcbench.engine.local import on_cones, reduces
from rcbench.engine.noise import NoiseModel
from rcbench.engine.parts import Prediction
from rcbench.engine.register import How, whole_distributions
from rcbench.engine.work import Work, or_current
from rcbench.errors import InputError


def distributions(
    circuits: Sequence[Circuit],
    noise: NoiseModel | None,
    *,
    trajectories: int = 200,
    seed: int = 0,
    dtype: str = "complex64",
    memory_limit: int | None = None,
    threads: int | None = None,
    progress: Callable[[int, int], None] | None = None,
    work: Work | None = None,
) -> Iterator[tuple[int, Prediction, Prediction | None]]:
    """The distribution of every circuit over its measured bits.

    Args:
        circuits: any mixture; shared beginnings are evolved once.
        noise: the error model of the circuits' qubits, or None for ideal distributions only.
        trajectories: error patterns drawn for each circuit, rounded up to whole batches.
        seed: of the error patterns; they depend on it and on the circuit's rows alone.
        dtype, memory_limit, threads: as in `tree.walk`.
        progress: called with (circuits done, circuits in all) after each.
        work: what is done is added to it; to the one that collects where None.
    Yields:
        (index of the circuit, ideal, noisy), in no particular order; noisy is None without a noise model, and where
        only the ideal one fits the memory. Both are `Parts` where one distribution of all bits does not fit. Classical
        bit 0 is the most significant. Readout flips are in the noisy one only. Its tilts hold those of "one_qubit",
        "two_qubit", "idle" and "readout" that have an uncertainty and act on the circuit.
    Raises:
        InputError: nothing measured, a reset or a gate after the qubit's measurement, a noise model of another size,
            or too little memory.
    """
    if noise is not None and trajectories < 1:
        raise InputError("trajectories", trajectories, "a whole number, 1 or more")
    memory.state_dtype(dtype)
    for circuit in circuits:
        if not circuit.measured_qubits:
            raise InputError("circuit", "no measurement", "at least one measured qubit")
        if noise is not None and noise.n_qubits != circuit.n_qubits:
            raise InputError("noise", f"{noise.n_qubits} qubits", f"the circuit's {circuit.n_qubits} qubits")
    work, how = or_current(work), How(trajectories, seed, dtype, memory_limit, threads)
    reduced = {index for index, circuit in enumerate(circuits) if reduces(circuit, noise, how)}
    whole = [index for index in range(len(circuits)) if index not in reduced]

    def found() -> Iterator[tuple[int, Prediction, Prediction | None]]:
        for index in sorted(reduced):
            yield index, *on_cones(circuits[index], noise, how, work)
        for place, ideal, noisy in whole_distributions([circuits[index] for index in whole], noise, how, work):
            yield whole[place], ideal, noisy

    for done, (index, ideal, noisy) in enumerate(found()):
        yield index, ideal, noisy
        if progress is not None:
            progress(done + 1, len(circuits))
