"""The forecast of a prediction's cost against what is done then."""

from __future__ import annotations

import pytest
from engine_cases import noise_model, random_circuit

from rcbench.engine.forecast import expected
from rcbench.engine.predict import distributions
from rcbench.engine.work import Work


@pytest.mark.parametrize("trajectories", [0, 96])
def test_forecast_counts_the_work_that_is_done(trajectories):
    circuits = [random_circuit(n, 6, seed) for n in (4, 7) for seed in range(5)]
    noise = {n: noise_model(n) for n in (4, 7)} if trajectories else {}
    forecast, work = Work(), Work()
    for n in (4, 7):
        chosen = [circuit for circuit in circuits if circuit.n_qubits == n]
        part = expected(chosen, noise.get(n), trajectories=trajectories)
        list(distributions(chosen, noise.get(n), trajectories=trajectories, work=work))
        forecast.amplitudes += part.amplitudes
        forecast.circuits += part.circuits
        forecast.trajectories += part.trajectories
        assert part.seconds > 0
        assert part.peak_bytes == pytest.approx(work.peak_bytes, rel=0.5)
    assert (forecast.circuits, forecast.trajectories) == (work.circuits, work.trajectories)
    # the sample is all ten circuits; where trajectories start from is a mean over patterns
    assert forecast.amplitudes == pytest.approx(work.amplitudes, rel=0.1)
