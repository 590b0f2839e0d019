"""The verbs that go from files to files: compare, and the whole job in one; the command line is a face on these."""

from __future__ import annotations

import json
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

from rcbench.errors import InputError
from rcbench.files import (
    check_files,
    file_hashes,
    output_folder,
    read_provenance,
    write_bytes,
    write_csv,
    write_parquet,
    write_text,
)
from rcbench.predictions import Options, Progress, predict, predict_parts, read_predictions, remove_parts, runs_of_kit
from rcbench.tables import COMPARISON, ESTIMATES, PREDICTIONS

if TYPE_CHECKING:
    import pandas as pd

    from rcbench.arrays import FloatArray
    from rcbench.kit import Kit
    from rcbench.shots.reader import Shots


# what a comparison leaves for the report, which refuses them when they were edited since
COMPARED = ("campaign.toml", "roster.csv", "predictions.csv", "estimates.csv", "comparison.csv", "audit.json")


NOT_EXAMINED = {
    "severity": "note",
    "text": "What the shots themselves give evidence of (another bit order, exchanged files, stuck bits) was not "
    "examined for this report.",
    "hint": "rcbench check KIT SHOTS examines it",
}


@dataclass(frozen=True, slots=True)
class Compared:
    """What a comparison gave: the table, and whether the audit or a finding needs attention."""

    table: pd.DataFrame
    needs_attention: bool


class IdealProbabilities:
    """Ideal outcome probabilities by circuit, an instance at a time, since circuits share their beginnings."""

    def __init__(self, kit: Kit, options: Options) -> None:
        self._options = options
        self._runs = {
            run.circuit_id: runs
            for experiment in kit.campaign.experiments
            if experiment.protocol is not None
            for runs in runs_of_kit(kit, experiment.name).values()
            for run in runs
        }
        self._base = {row.circuit_id: row.base_id for row in kit.rows}
        self._held: dict[str, FloatArray | None] = {}

    def __call__(self, circuit_id: str) -> FloatArray | None:
        """(2**n,) probabilities of a circuit's outcomes, None of too many; a repeat has those of the one it repeats."""
        circuit_id = self._base[circuit_id]
        if circuit_id not in self._held:
            from rcbench.engine.predict import distributions

            runs = self._runs[circuit_id]
            self._held = {
                runs[place].circuit_id: perfect.exact
                for place, perfect, _ in distributions(
                    [run.load() for run in runs],
                    None,
                    trajectories=0,
                    seed=0,
                    dtype=self._options.dtype,
                    memory_limit=self._options.memory_limit,
                    threads=self._options.threads,
                )
            }
        return self._held[circuit_id]


def compare(
    kit: Path | str,
    shots: Path | str,
    out: Path | str,
    *,
    bit_order: str | None = None,
    skip_bad: bool = False,
    predictions: Path | str | None = None,
    options: Options | None = None,
    progress: Progress | None = None,
) -> Compared:
    """Estimate every signature from measured bitstrings and compare it with both predictions, into a folder.

    Args:
        kit: kit folder. shots: file or folder of measured bitstrings.
        out: folder for comparison.csv, estimates.csv, predictions.csv and audit.json.
        bit_order: `q0-first` or `q0-last` where the shots do not declare it.
        skip_bad: set broken rows aside into bad-rows.csv instead of refusing the file.
        predictions: a folder that `predict` filled for this kit; what is lacking is predicted first.
        options: how to simulate. progress: called with (instances done, in all, experiment).
    Raises:
        InputError: broken shots, shots of another kit, predictions of another kit, a folder of other inputs.
    """
    from rcbench.comparison import compare_frames, estimate
    from rcbench.kit import read_kit
    from rcbench.kit.folder import PROTOCOLS
    from rcbench.shots.audit import check_shots
    from rcbench.shots.reader import bad_rows_csv, read_shots

    out, options = Path(out), options or Options()
    source = read_kit(Path(kit))
    measured = read_shots(Path(shots), source, bit_order=bit_order, skip_bad=skip_bad)
    inputs = {
        "kit": source.hash,
        "shots": {name: digest for name, digest, _ in measured.files},
        "bit_order": measured.bit_order,
        "skip_bad": skip_bad,
        "dtype": options.dtype,
        "trajectories": options.trajectories,
    }
    audit = check_shots(source, measured)
    with output_folder(out, "compare", inputs) as folder:
        if folder.complete:
            return _compared(_read_comparison(out), audit.needs_attention)
        if measured.bad_rows:
            write_text(out / "bad-rows.csv", bad_rows_csv(measured.bad_rows))
        predicted = _predictions(source, out, predictions, options, progress)
        write_csv(out / "predictions.csv", predicted, PREDICTIONS)
        write_parquet(out / "predictions.parquet", predicted, PREDICTIONS)
        predicted = read_predictions(out / "predictions.csv")
        estimates = estimate(source, measured, IdealProbabilities(source, options))
        write_csv(out / "estimates.csv", estimates, ESTIMATES)
        table = compare_frames(source, estimates, predicted)
        write_csv(out / "comparison.csv", table, COMPARISON)
        write_parquet(out / "comparison.parquet", table, COMPARISON)
        said = audit.as_dict()
        said["problems"] = [*said["problems"], NOT_EXAMINED]
        write_text(out / "audit.json", json.dumps(said, indent=1, sort_keys=True) + "\n")
        own = [f"{PROTOCOLS}/{path.name}" for path in sorted((source.folder / PROTOCOLS).glob("*.toml"))]
        for name in ("campaign.toml", "roster.csv", *own):  # the campaign names a user's protocols by their place
            write_bytes(out / name, (source.folder / name).read_bytes())
        remove_parts(out / ".parts")
        folder.finish(
            kit_hash=source.hash,
            kit_built=read_provenance(source.folder).get("started", ""),
            rule_fixed_before_data=rule_fixed_before_data(source, measured),
            seed=source.campaign.seed,
            files=file_hashes(out, COMPARED),
        )
        return _compared(_read_comparison(out), audit.needs_attention)


def rule_fixed_before_data(kit: Kit, shots: Shots) -> bool | None:
    """Whether margins and rule stood before the data: the device team quoted this kit's hash, another one, or none.

    The hash covers the margins and the rule, so data that quote it were taken when both were fixed.
    """
    quoted = shots.execution.kit_hash
    return (quoted == kit.hash) if quoted else None


def _compared(table: pd.DataFrame, audit_needs_attention: bool) -> Compared:
    wanting = bool((table["finding"].isin(["departs", "undecided", "not-tested"])).any())
    return Compared(table, audit_needs_attention or wanting)


def _read_comparison(out: Path) -> pd.DataFrame:
    from rcbench.comparison import read_comparison

    return read_comparison(out / "comparison.csv")


def _predictions(
    kit: Kit, out: Path, folder: Path | str | None, options: Options, progress: Progress | None
) -> pd.DataFrame:
    """The predictions of a folder where it has them for this kit, else made now."""
    if folder is None:
        return predict_parts(kit.campaign, kit, out / ".parts", options, progress)
    facts = read_provenance(Path(folder))
    inputs = facts.get("inputs")
    made_for = inputs.get("source") if isinstance(inputs, dict) else None
    if made_for != kit.hash or not facts.get("complete"):
        raise InputError("predictions", str(folder), f"a complete folder of `rcbench predict` for kit {kit.hash[:12]}")
    check_files(Path(folder), facts)
    return read_predictions(Path(folder) / "predictions.csv")


def run(
    campaign: Path | str,
    shots: Path | str,
    out: Path | str,
    *,
    bit_order: str | None = None,
    skip_bad: bool = False,
    options: Options | None = None,
    progress: Callable[[str], Progress | None] | None = None,
) -> tuple[Compared, Path]:
    """The whole job under one folder: kit, predictions, comparison, report; gives the result and the report's path."""
    from rcbench.campaign import load_campaign
    from rcbench.kit import build_kit
    from rcbench.report.write import write_report

    out = Path(out)
    step: Any = progress or (lambda _: None)
    build_kit(load_campaign(campaign), out / "kit", progress=step("building circuits"))
    predict(out / "kit", out / "predictions", options=options, progress=step("predicting"))
    result = compare(
        out / "kit",
        shots,
        out / "report",
        bit_order=bit_order,
        skip_bad=skip_bad,
        predictions=out / "predictions",
        options=options,
        progress=step("comparing"),
    )
    return result, write_report(out / "report")
