"""Predictions: what an ideal device and a device of the stated error budget would give, for the circuits of the kit.

Each circuit is simulated gate for gate as compiled; the same estimator that will read the measured bitstrings is
applied to the simulated distribution, so that a prediction is always of the quantity that is measured.
"""

from __future__ import annotations

import math
import time
from collections import Counter, defaultdict
from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from rcbench.campaign import Campaign, Experiment
from rcbench.circuits.circuit import Circuit
from rcbench.device import Device
from rcbench.engine.parts import Prediction
from rcbench.engine.work import Work, collecting
from rcbench.errors import InputError
from rcbench.estimators import estimator
from rcbench.estimators.sample import Group, Measured, Run
from rcbench.files import file_hashes, output_folder, read_csv, sha256_bytes, write_csv, write_parquet
from rcbench.signatures.registry import signature
from rcbench.tables import PREDICTIONS

if TYPE_CHECKING:
    import pandas as pd

    from rcbench.kit import Kit
    from rcbench.protocol import Protocol
    from rcbench.signatures.ensemble import Gathering
    from rcbench.signatures.found import Found, Question

Progress = Callable[[int, int, str], None]
# The scatter of a signature between single error trajectories, as a share of its range: sets how many are drawn
TRAJECTORY_SPREAD = 0.5
LEAST_TRAJECTORIES, MOST_TRAJECTORIES = 32, 2048
_TEXT = ("experiment", "protocol", "signature", "axis", "unit", "region", "circuit_id", "model", "method")


@dataclass(frozen=True, slots=True)
class Options:
    """How to simulate. trajectories: a circuit, None to choose by the margins; memory_limit in bytes."""

    trajectories: int | None = None
    dtype: str = "complex64"
    memory_limit: int | None = None
    threads: int | None = None


@dataclass(frozen=True, slots=True, kw_only=True)
class PlannedRun:
    """What a prediction needs to know of one circuit, wherever it comes from."""

    circuit_id: str
    role: str
    setting: str
    depth: int
    instance: int
    measured_qubits: tuple[int, ...]
    target: str
    params: dict[str, Any]
    load: Callable[[], Circuit]


def runs_of_kit(kit: Kit, experiment: str) -> dict[int, list[PlannedRun]]:
    """The different circuits of an experiment by instance; repeats of a circuit count once."""
    out: dict[int, list[PlannedRun]] = defaultdict(list)
    seen: set[str] = set()
    for row in kit.rows:
        if row.experiment != experiment or row.base_id in seen:
            continue
        seen.add(row.base_id)
        out[row.instance].append(
            PlannedRun(
                circuit_id=row.base_id,
                role=row.role,
                setting=row.setting,
                depth=row.depth,
                instance=row.instance,
                measured_qubits=row.measured_qubits,
                target=row.target,
                params=dict(row.params),
                load=lambda row=row: kit.circuit(row),  # type: ignore[misc]
            )
        )
    return dict(sorted(out.items()))


def runs_of_campaign(campaign: Campaign, experiment: Experiment, protocol: Protocol) -> Iterator[list[PlannedRun]]:
    """The same from a campaign, instance by instance, with no kit written."""
    from rcbench.protocol import expand

    batch: list[PlannedRun] = []
    for planned in expand(protocol, experiment, campaign):
        if planned.repeat:
            continue
        if batch and batch[-1].instance != planned.instance:
            yield batch
            batch = []
        batch.append(
            PlannedRun(
                circuit_id=planned.circuit_id,
                role=planned.role,
                setting=planned.setting,
                depth=planned.depth,
                instance=planned.instance,
                measured_qubits=planned.circuit.measured_qubits,
                target=planned.target,
                params=dict(planned.params),
                load=lambda circuit=planned.circuit: circuit,  # type: ignore[misc]
            )
        )
    if batch:
        yield batch


def group_runs(
    experiment: str, runs: Sequence[PlannedRun], samples: Mapping[str, Prediction], ideal: Mapping[str, Prediction]
) -> list[Group]:
    """One group a depth, with the samples given and the ideal probabilities beside them."""
    by_depth: dict[int, list[Run]] = defaultdict(list)
    for run in runs:
        if run.circuit_id in samples:
            by_depth[run.depth].append(
                Run(
                    circuit_id=run.circuit_id,
                    role=run.role,
                    setting=run.setting,
                    n_qubits=len(run.measured_qubits),
                    measured_qubits=run.measured_qubits,
                    target=np.array([int(bit) for bit in run.target], dtype=np.int64) if run.target else None,
                    params=run.params,
                    sample=samples[run.circuit_id],
                    ideal=ideal[run.circuit_id].exact,
                )
            )
    return [
        Group(experiment=experiment, depth=depth, instance=runs[0].instance, runs=tuple(members))
        for depth, members in sorted(by_depth.items())
    ]


def trajectories_for(experiment: Experiment) -> int:
    """Trajectories a circuit for a Monte Carlo error of the mean over instances of a fifth of the smallest margin."""
    margins = [
        margin.value
        for key, margin in experiment.margins.items()
        if not margin.relative
        and signature(key).high - signature(key).low <= 2
        and key not in ("collision_probability", "layer_loss")
    ]
    wanted = (5 * TRAJECTORY_SPREAD / min(margins, default=0.05)) ** 2 / experiment.instances
    return int(min(max(math.ceil(wanted), LEAST_TRAJECTORIES), MOST_TRAJECTORIES))


class _Writer:
    """Collects rows of the prediction table for one experiment."""

    def __init__(self, experiment: Experiment, protocol: str) -> None:
        self.experiment, self.protocol = experiment, protocol
        self.rows: list[dict[str, Any]] = []
        self._deltas: dict[tuple[str, str, int, str], list[dict[str, float]]] = defaultdict(list)

    def add(
        self, depth: int, instance: int, model: str, value: Measured, deltas: dict[str, float], method: str
    ) -> None:
        """One value of one instance; deltas: its change for one standard uncertainty of each error source."""
        u_model = math.sqrt(sum(delta**2 for delta in deltas.values())) if model == "noise-model" else 0.0
        self._deltas[value.signature, value.region, depth, model].append(deltas)
        self._row(depth, instance, model, value, u_model, method)

    def ensemble(self, found: Found, model: str) -> None:
        """One value of all instances together, at a depth or of all depths."""
        value = Measured(
            signature=found.key, region=found.region, value=found.value, std_error=found.std_error, shots=0
        )
        self._row(found.depth, None, model, value, 0.0, found.method)

    def scrambled(self) -> None:
        """Beside every quantity its value for Haar-random states or unitaries of the same size, where it is known."""
        from rcbench.signatures.scrambled import METHOD, haar_value

        for key, region, depth in dict.fromkeys((row["signature"], row["region"], row["depth"]) for row in self.rows):
            value = haar_value(key, region, self.experiment.n_qubits)
            if value is not None:
                measured = Measured(signature=key, region=region, value=value, std_error=0.0, shots=0)
                self._row(depth, None, "haar", measured, 0.0, METHOD)

    def _row(self, depth: int | None, instance: int | None, model: str, value: Measured, u: float, method: str) -> None:
        row = signature(value.signature)
        self.rows.append(
            {
                "experiment": self.experiment.name,
                "protocol": self.protocol,
                "signature": value.signature,
                "axis": row.axis,
                "unit": row.unit,
                "region": value.region,
                "n_qubits": self.experiment.n_qubits,
                "depth": depth,
                "instance": instance,
                "circuit_id": value.circuit_id,
                "model": model,
                "value": value.value,
                "std_error": value.std_error,
                "u_model": u,
                "method": method,
            }
        )

    def averages(self) -> None:
        """The mean over instances of every quantity; uncertainties of the rates are common to all instances."""
        groups: dict[tuple[str, str, int, str], list[dict[str, Any]]] = defaultdict(list)
        for row in self.rows:
            groups[row["signature"], row["region"], row["depth"], row["model"]].append(row)
        for (key, region, depth, model), rows in groups.items():
            values = np.array([row["value"] for row in rows])
            error = math.sqrt(sum(row["std_error"] ** 2 for row in rows)) / len(rows)
            totals: dict[str, float] = defaultdict(float)
            for deltas in self._deltas[key, region, depth, model]:
                for source, delta in deltas.items():
                    totals[source] += delta / len(rows)
            mean = Measured(signature=key, region=region, value=float(values.mean()), std_error=error, shots=0)
            u_model = math.sqrt(sum(total**2 for total in totals.values())) if model == "noise-model" else 0.0
            self._row(depth, None, model, mean, u_model, rows[0]["method"])


def predict_instance(
    writer: _Writer, protocol: Protocol, runs: Sequence[PlannedRun], noise: Any, options: Options, seed: int
) -> None:
    """Both predictions of all circuits of one instance."""
    from rcbench.engine.predict import distributions

    trajectories = options.trajectories or trajectories_for(writer.experiment)
    simulated = distributions(
        [run.load() for run in runs],
        noise,
        trajectories=trajectories,
        seed=seed,
        dtype=options.dtype,
        memory_limit=options.memory_limit,
        threads=options.threads,
    )
    name, left = writer.experiment.name, Counter(run.depth for run in runs)
    ideal: dict[str, Prediction] = {}
    noisy: dict[str, Prediction] = {}
    found: dict[tuple[str, int], list[tuple[Measured, dict[str, float]]]] = {}
    for place, perfect, real in simulated:
        depth = runs[place].depth
        ideal[runs[place].circuit_id] = perfect
        if real is not None:
            noisy[runs[place].circuit_id] = real
        left[depth] -= 1
        if left[depth]:
            continue
        # a depth is worked out as soon as it is whole: distributions of all depths at once can outgrow the memory
        members = [run for run in runs if run.depth == depth]
        found["ideal", depth] = depth_values(name, protocol, members, ideal, ideal, shift=False)
        if all(run.circuit_id in noisy for run in members):
            found["noise-model", depth] = depth_values(name, protocol, members, noisy, ideal, shift=True)
        for run in members:
            del ideal[run.circuit_id]
            noisy.pop(run.circuit_id, None)
    methods = {"ideal": "state vector", "noise-model": f"{trajectories} trajectories a circuit"}
    for model, depth in sorted(found):
        for value, deltas in found[model, depth]:
            writer.add(depth, runs[0].instance, model, value, deltas, methods[model])


def depth_values(
    experiment: str,
    protocol: Protocol,
    runs: Sequence[PlannedRun],
    samples: Mapping[str, Prediction],
    ideal: Mapping[str, Prediction],
    *,
    shift: bool,
) -> list[tuple[Measured, dict[str, float]]]:
    """The finite values of the runs of one depth, each with its change for a standard uncertainty of each source."""
    found = []
    for group in group_runs(experiment, runs, samples, ideal):
        for family in (estimator(name) for name in protocol.estimators):
            shifts = _shifts(family.apply, group) if shift else {}
            for value in family.apply(group):
                if not math.isfinite(value.value) or not math.isfinite(value.std_error):
                    continue
                name = (value.signature, value.region)
                deltas = {
                    source: moved[name] - value.value
                    for source, moved in shifts.items()
                    if math.isfinite(moved.get(name, math.nan))
                }
                found.append((value, deltas))
    return found


def _shifts(apply: Callable[[Group], list[Measured]], group: Group) -> dict[str, dict[tuple[str, str], float]]:
    """The group's values with each error source one standard uncertainty up, by source."""
    sources = sorted({source for run in group.runs for source in getattr(run.sample, "tilts", {})})
    out = {}
    for source in sources:
        moved = replace(group, runs=tuple(replace(run, sample=_shift(run.sample, source)) for run in group.runs))
        out[source] = {(value.signature, value.region): value.value for value in apply(moved)}
    return out


def _shift(sample: Any, source: str) -> Any:
    return sample.shifted(source) if source in sample.tilts else sample


def predict_states(
    writer: _Writer, device: Device, seed: int, instance: int, options: Options, gathering: Gathering
) -> None:
    """The ideal values of an experiment without a protocol, of one instance; the gathering takes up what it needs."""
    from rcbench.circuits.families import draw_circuits
    from rcbench.signatures.instance import of_instance

    circuits = draw_circuits(writer.experiment, device, seed, instance)
    for found in of_instance(gathering.question, circuits, instance=instance, gathering=gathering):
        assert found.depth is not None
        value = Measured(
            signature=found.key, region=found.region, value=found.value, std_error=found.std_error, shots=0
        )
        writer.add(found.depth, instance, "ideal", value, {}, found.method)


def question_of(campaign: Campaign, experiment: Experiment, options: Options) -> Question:
    """What an experiment without a protocol asks of its circuits."""
    from rcbench.signatures.found import Question

    return Question(
        keys=experiment.signatures,
        n_qubits=experiment.n_qubits,
        regions=experiment.regions,
        sites=experiment.sites,
        seed=campaign.seed,
        dtype=options.dtype,
        memory_limit=options.memory_limit,
        threads=options.threads,
    )


def _predict_without_protocol(
    campaign: Campaign, experiment: Experiment, options: Options, progress: Callable[[int], None]
) -> _Writer:
    """States, operators and ensembles of the ideal circuits, and the Haar value beside each."""
    from rcbench.signatures import check_keys
    from rcbench.signatures.ensemble import Gathering, of_ensemble

    writer = _Writer(experiment, "")
    try:
        check_keys(experiment.signatures)
        question = question_of(campaign, experiment, options)
        gathering = Gathering(question, experiment.depths, experiment.instances)
        for instance in range(experiment.instances):
            predict_states(writer, campaign.device, campaign.seed, instance, options, gathering)
            progress(instance + 1)
        writer.averages()
        for found in of_ensemble(gathering):
            writer.ensemble(found, "ideal")
    except InputError as error:
        raise error.at(f"experiment {experiment.name}: ") from None
    writer.scrambled()
    return writer


def predict(
    source: Path | str,
    out: Path | str,
    *,
    options: Options | None = None,
    progress: Progress | None = None,
) -> pd.DataFrame:
    """Predict every signature of a campaign or kit, ideal and under the stated error budget, into a folder.

    Args:
        source: a campaign file or a kit folder.
        out: folder for predictions.csv and predictions.parquet; resumed where it holds part of the same work.
        options: how to simulate.
        progress: called with (instances done, instances in all, experiment).
    Returns:
        One row an (experiment, signature, region, depth, instance, model), and rows with no instance for the means.
    Raises:
        InputError: bad campaign or kit, a folder of other inputs, or a state that does not fit the memory.
    """
    from rcbench.kit.build import write_resolved

    out, options = Path(out), options or Options()
    campaign, kit, identity = open_source(Path(source))
    inputs = {"source": identity, "trajectories": options.trajectories, "dtype": options.dtype}
    with output_folder(out, "predict", inputs) as folder:
        if folder.complete:
            return read_predictions(out / "predictions.csv")
        started, work = time.perf_counter(), Work()
        with collecting(work):
            frame = predict_parts(campaign, kit, out / ".parts", options, progress)
        write_csv(out / "predictions.csv", frame, PREDICTIONS)
        write_parquet(out / "predictions.parquet", frame, PREDICTIONS)
        write_resolved(campaign, out)
        remove_parts(out / ".parts")
        seconds = round(time.perf_counter() - started, 3)
        files = file_hashes(out, ("campaign.toml", "predictions.csv"))
        folder.finish(seconds=seconds, peak_memory_bytes=peak_memory(), files=files, **work.facts())
        return frame


def open_source(source: Path) -> tuple[Campaign, Kit | None, str]:
    """The campaign of a campaign file or a kit folder, the kit if it is one, and a hash of what it asks for."""
    if source.is_dir():
        from rcbench.kit import read_kit

        kit = read_kit(source)
        return kit.campaign, kit, kit.hash
    from rcbench.campaign import dump_campaign, load_campaign

    campaign = load_campaign(source)
    return campaign, None, sha256_bytes(dump_campaign(campaign).encode())


def predict_parts(
    campaign: Campaign, kit: Kit | None, parts: Path, options: Options, progress: Progress | None
) -> pd.DataFrame:
    """The prediction table, experiment by experiment; a finished experiment is kept in `parts` for a resumed run."""
    import pandas as pd

    total = sum(experiment.instances for experiment in campaign.experiments)
    done, frames = 0, []
    for experiment in campaign.experiments:
        part = parts / f"{experiment.name}.csv"
        if not part.is_file():
            rows = _predict_experiment(campaign, kit, experiment, options, progress, done, total)
            write_csv(part, pd.DataFrame(rows, columns=list(PREDICTIONS)), PREDICTIONS)
        frames.append(read_predictions(part))  # also when fresh, so that a resumed run has the very same numbers
        done += experiment.instances
    return pd.concat([frame for frame in frames if len(frame)] or frames[:1], ignore_index=True)


def _predict_experiment(
    campaign: Campaign,
    kit: Kit | None,
    experiment: Experiment,
    options: Options,
    progress: Progress | None,
    done: int,
    total: int,
) -> list[dict[str, Any]]:
    from rcbench.engine.noise import NoiseModel
    from rcbench.protocol import load_protocol

    if experiment.protocol is None:
        return _predict_without_protocol(
            campaign,
            experiment,
            options,
            lambda made: progress(done + made, total, experiment.name) if progress else None,
        ).rows
    protocol = kit.protocol(experiment) if kit is not None else load_protocol(experiment.protocol)
    writer = _Writer(experiment, protocol.name)
    stated = campaign.device.errors is not None
    noise = NoiseModel.from_device(campaign.device, experiment.qubits) if stated else None
    batches: Iterator[list[PlannedRun]] | list[list[PlannedRun]] = (
        list(runs_of_kit(kit, experiment.name).values())
        if kit is not None
        else runs_of_campaign(campaign, experiment, protocol)
    )
    aside = {role.name for role in protocol.roles if role.every_batch}  # calibrations belong to no instance
    for place, batch in enumerate(batches):
        runs = [run for run in batch if run.role not in aside]
        if runs:
            predict_instance(writer, protocol, runs, noise, options, campaign.seed)
        if progress:
            progress(done + place + 1, total, experiment.name)
    writer.averages()
    return writer.rows


def read_predictions(path: Path) -> pd.DataFrame:
    """A prediction table that rcbench wrote; instance and depth are whole numbers or missing."""
    frame = read_csv(path, PREDICTIONS, text=_TEXT)
    for column in ("instance", "depth", "n_qubits"):
        frame[column] = frame[column].astype("Int64")
    for column in ("value", "std_error", "u_model"):
        frame[column] = frame[column].astype("float64")
    return frame


def remove_parts(parts: Path) -> None:
    """The finished experiments of a run that is now complete."""
    for part in parts.glob("*.csv"):
        part.unlink()
    if parts.is_dir():
        parts.rmdir()


def peak_memory() -> int:
    """The largest memory this process has held, in bytes."""
    import resource
    import sys

    peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
    return peak if sys.platform == "darwin" else peak * 1024
