"""What the predictions of a campaign will cost, before they are made: time, work and memory by experiment.

Gates are counted on the circuits of the first instance, and everything else is timed on this machine on a small part of
the work: drawing the circuits, a few hundredths of a second of evolution, one depth's estimators. Experiments without
a protocol are timed at up to three of their depths.
"""

from __future__ import annotations

import io
import time
from collections.abc import Sequence
from dataclasses import dataclass, replace
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from rcbench.campaign import Campaign, Experiment
from rcbench.engine.distribution import Distribution
from rcbench.engine.work import Work, collecting
from rcbench.predictions import (
    Options,
    PlannedRun,
    depth_values,
    open_source,
    peak_memory,
    runs_of_campaign,
    runs_of_kit,
    trajectories_for,
)

if TYPE_CHECKING:
    from rcbench.engine.noise import NoiseModel
    from rcbench.kit import Kit
    from rcbench.protocol import Protocol

_TRIAL_BITS = 16  # estimators are timed on registers up to here; their cost grows as the number of outcomes
_TRIAL_PARTS = 4  # bits, where distributions are of few bits each
_TILTED = ("one_qubit", "two_qubit", "idle", "readout")
_LOADING = 2.0  # seconds to load compiled code and libraries
_LONG = 20.0  # seconds: a depth that takes so long is not timed again at others


@dataclass(frozen=True, slots=True)
class Cost:
    """What the prediction of one experiment will take.

    Args:
        experiment: its name. circuits, trajectories: simulated, of all instances; light cones are circuits
            of their own.
        amplitudes: amplitudes that gates are applied to, added up over the gates.
        seconds: wall time. peak_bytes: memory of the whole process.
    """

    experiment: str
    circuits: int
    trajectories: int
    amplitudes: float
    seconds: float
    peak_bytes: int


def expected_cost(source: Path | str, *, options: Options | None = None) -> list[Cost]:
    """The cost of `predictions.predict` for a campaign or kit with these options, within about a factor of two.

    Args:
        source: a campaign file or a kit folder. options: as they will be given to `predict`.
    Returns:
        One entry an experiment, in the order of the campaign; a first entry named "start" for what comes once.
    Raises:
        InputError: a bad campaign or kit.
    """
    started = time.perf_counter()
    campaign, kit, _ = open_source(Path(source))
    options = options or Options()
    _start_engine()
    # what had to be compiled is on the disk now, and will only be loaded
    start = Cost("start", 0, 0, 0.0, min(time.perf_counter() - started, _LOADING), peak_memory())
    return [start, *(_of_experiment(campaign, kit, experiment, options) for experiment in campaign.experiments)]


def cost_text(costs: Sequence[Cost], memory_limit: int | None = None) -> str:
    """The table for people, and the total."""
    from rcbench.engine.memory import available_memory

    total = Cost(
        "total",
        sum(cost.circuits for cost in costs),
        sum(cost.trajectories for cost in costs),
        sum(cost.amplitudes for cost in costs),
        sum(cost.seconds for cost in costs),
        max(cost.peak_bytes for cost in costs),
    )
    head = ("experiment", "circuits", "trajectories", "amplitudes x gates", "time", "memory")
    cells = [
        (
            cost.experiment,
            str(cost.circuits),
            str(cost.trajectories),
            f"{cost.amplitudes:.3g}",
            _duration(cost.seconds),
            f"{cost.peak_bytes / 2**20:.0f} MiB",
        )
        for cost in [*costs[1:], total]
    ]
    widths = [max(len(row[column]) for row in [head, *cells]) for column in range(len(head))]
    lines = [
        "  ".join(
            cell.rjust(width) if place else cell.ljust(width)
            for place, (cell, width) in enumerate(zip(row, widths, strict=True))
        )
        for row in [head, *cells]
    ]
    limit = available_memory() if memory_limit is None else memory_limit
    if total.peak_bytes > limit:
        lines.append(f"more than the {limit / 2**20:.0f} MiB that may be taken: the prediction will be refused")
    return "\n".join(lines)


def _duration(seconds: float) -> str:
    if seconds < 120:
        return f"{seconds:.2g} s" if seconds < 10 else f"{seconds:.0f} s"
    return f"{seconds / 60:.0f} min" if seconds < 7200 else f"{seconds / 3600:.1f} h"


def _start_engine() -> None:
    """Load what simulates and writes tables, and compile it where it must be: a cost that comes once."""
    import pandas as pd

    from rcbench.circuits.circuit import CircuitBuilder
    from rcbench.engine.noise import NoiseModel
    from rcbench.engine.predict import distributions

    n = 3
    builder = CircuitBuilder(n)
    for pair in ([0, 1], [1, 2]):
        builder.add("h", pair[:1])
        builder.next_layer()
        builder.add("cz", pair)
        builder.next_layer()
    builder.measure(range(n))
    model = NoiseModel(
        one_qubit=np.full(n, 0.01), two_qubit=np.full((n, n), 0.01), t1=np.full(n, np.inf), t2=np.full(n, np.inf),
        gate_times=(1.0, 1.0), read_1_of_0=np.full(n, 0.01), read_0_of_1=np.full(n, 0.01),
    )  # fmt: skip
    with collecting(Work()):
        list(distributions([builder.build()], model, trajectories=16))
    pd.DataFrame({"value": [0.0]}).to_parquet(io.BytesIO())


def _of_experiment(campaign: Campaign, kit: Kit | None, experiment: Experiment, options: Options) -> Cost:
    from rcbench.engine.noise import NoiseModel
    from rcbench.protocol import load_protocol

    if experiment.protocol is None:
        return _without_protocol(campaign, experiment, options)
    protocol = kit.protocol(experiment) if kit is not None else load_protocol(experiment.protocol)
    device = campaign.device
    noise = NoiseModel.from_device(device, experiment.qubits) if device.errors is not None else None
    started = time.perf_counter()
    if kit is not None:
        by_instance = list(runs_of_kit(kit, experiment.name).values())
        runs, instances = by_instance[0], len(by_instance)
        started = time.perf_counter()
    else:
        runs, instances = next(runs_of_campaign(campaign, experiment, protocol)), experiment.instances
    return _with_protocol(experiment, protocol, runs, instances, noise, options, started)


def _with_protocol(
    experiment: Experiment,
    protocol: Protocol,
    runs: list[PlannedRun],
    instances: int,
    noise: NoiseModel | None,
    options: Options,
    started: float,
) -> Cost:
    from rcbench.engine.forecast import expected

    circuits = [run.load() for run in runs]
    making = time.perf_counter() - started
    trajectories = options.trajectories or trajectories_for(experiment)
    work = expected(
        circuits, noise, trajectories=trajectories, dtype=options.dtype,
        memory_limit=options.memory_limit, threads=options.threads,
    )  # fmt: skip
    estimating, held = _estimators(experiment, protocol, runs, noise is not None)
    return Cost(
        experiment.name,
        instances * work.circuits,
        instances * work.trajectories,
        instances * work.amplitudes,
        instances * (making + work.seconds + estimating),
        peak_memory() + work.peak_bytes + held,
    )


def _estimators(experiment: Experiment, protocol: Protocol, runs: list[PlannedRun], noisy: bool) -> tuple[float, int]:
    """Seconds for the estimators of one instance, and the bytes of the distributions of one depth."""
    from rcbench.engine.local import MOST_JOINT_BITS
    from rcbench.engine.register import batch_count

    depths = sorted({run.depth for run in runs})
    members = [run for run in runs if run.depth == depths[len(depths) // 2]]
    widest = max(len(run.measured_qubits) for run in members)
    trial = _TRIAL_BITS if widest <= MOST_JOINT_BITS else _TRIAL_PARTS
    ideal, real = {}, {}
    for place, run in enumerate(members):
        bits = min(len(run.measured_qubits), trial)
        members[place] = replace(run, measured_qubits=run.measured_qubits[:bits], target=run.target[:bits])
        ideal[run.circuit_id] = _any_distribution(bits, 0)
        real[run.circuit_id] = _any_distribution(bits, batch_count(bits))
    started = time.perf_counter()
    depth_values(experiment.name, protocol, members, ideal, ideal, shift=False)
    if noisy:
        depth_values(experiment.name, protocol, members, real, ideal, shift=True)
    seconds = time.perf_counter() - started
    numbers = 1 + noisy * (2 + batch_count(widest) + len(_TILTED))
    if widest > MOST_JOINT_BITS:  # distributions of few bits each
        return seconds * widest / trial * len(depths), 0
    held = 2**widest * 8 * numbers * len(members)
    return seconds * 2.0 ** max(0, widest - _TRIAL_BITS) * len(depths), held


def _any_distribution(bits: int, batches: int) -> Distribution:
    """One of that size with all that a prediction may have."""
    rng = np.random.default_rng(0)
    rows = rng.exponential(size=(1 + batches, 2**bits))
    rows /= rows.sum(axis=1, keepdims=True)
    if not batches:
        return Distribution(bits, rows[0])
    tilts = {source: np.zeros(2**bits) for source in _TILTED}
    return Distribution(bits, rows[0], 0.5, rows[1:], tilts)


def _without_protocol(campaign: Campaign, experiment: Experiment, options: Options) -> Cost:
    from rcbench.circuits.families import draw_circuits
    from rcbench.predictions import question_of
    from rcbench.signatures.ensemble import Gathering
    from rcbench.signatures.instance import of_instance

    question = question_of(campaign, experiment, options)
    started = time.perf_counter()
    circuits = draw_circuits(experiment, campaign.device, campaign.seed, 0)
    drawing = time.perf_counter() - started
    depths = sorted(circuits)

    def trial(chosen: Sequence[int]) -> Work:
        gathering = Gathering(question, experiment.depths, experiment.instances)
        work, start = Work(), time.perf_counter()
        with collecting(work):
            of_instance(question, {depth: circuits[depth] for depth in chosen}, gathering=gathering)
        work.seconds = time.perf_counter() - start
        return work

    # the first trial also loads and compiles; the marginal cost of a depth is that of a middle one beside the deepest
    work = trial(depths[:1])
    if len(depths) > 1 and work.seconds > _LONG:
        work.amplitudes, work.seconds = work.amplitudes * len(depths), work.seconds * len(depths)
    else:
        work = trial(depths[-1:])
        if len(depths) > 1:
            both = trial([depths[(len(depths) - 1) // 2], depths[-1]])
            more = len(depths) - 1
            work.seconds += more * max(0.0, both.seconds - work.seconds)
            work.amplitudes += more * (both.amplitudes - work.amplitudes)
    joint, held = _ensemble(experiment, question, options)
    count = experiment.instances
    return Cost(
        experiment.name,
        count * len(depths),
        0,
        count * work.amplitudes,
        count * (drawing + work.seconds) + joint,
        peak_memory() + held,
    )


def _ensemble(experiment: Experiment, question: Any, options: Options) -> tuple[float, int]:
    """Seconds for the products of all pairs of instances at all depths, and the bytes of what is kept for them."""
    from rcbench.engine.memory import state_dtype
    from rcbench.signatures.ensemble import Gathering
    from rcbench.signatures.frame_potential import overlaps

    wants = Gathering(question, experiment.depths, experiment.instances).wants
    dtype, seconds, held = state_dtype(options.dtype), 0.0, 0
    for name, size in (("unitaries", 4**experiment.n_qubits), ("states", 2**experiment.n_qubits)):
        if name not in wants:
            continue
        part = min(size, 2**14)
        vectors = np.ones((experiment.instances, part), dtype=dtype)
        overlaps(vectors)
        started = time.perf_counter()
        overlaps(vectors)
        seconds += (time.perf_counter() - started) * size / part * len(experiment.depths)
        held += size * dtype.itemsize * len(experiment.depths) * experiment.instances
    return seconds, held
