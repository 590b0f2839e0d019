"""Which figures an experiment's predictions get: one file a family of signatures, and curves for what has none."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

from rcbench.campaign import Experiment
from rcbench.report import figure_entropy, figure_front, figure_outputs, figure_size, figure_twins
from rcbench.report.figure_frames import frames_figure
from rcbench.report.figure_tmi import STATES, tmi_figure
from rcbench.report.figures import Picture
from rcbench.report.predicted import predicted_keys
from rcbench.report.source import Source
from rcbench.signatures import CHOI_KEYS, FRONT_KEYS, STATE_FRAME_KEYS, UNITARY_FRAME_KEYS

_SINGLE: tuple[Callable[[Source, Experiment, Path], Picture | None], ...] = (
    figure_entropy.entropy_figure,
    tmi_figure,
    figure_size.size_figure,
    frames_figure,
    figure_outputs.outputs_figure,
    figure_twins.twins_figure,
)
_DRAWN = frozenset({
    *figure_entropy.KEYS, *STATES, *CHOI_KEYS, *(entry[0] for entry in figure_front.MAPS), "light_cone_front",
    figure_size.MEAN, figure_size.SHARES, *UNITARY_FRAME_KEYS, *STATE_FRAME_KEYS, *FRONT_KEYS, "two_design_depth",
    *figure_outputs.KEYS, figure_twins.LOCAL, figure_twins.TRACE, figure_twins.OVERLAP,
})  # fmt: skip


def predicted_figures(source: Source, experiment: Experiment, folder: Path) -> list[Picture]:
    """The figures of one experiment's predictions, in the order of the registry's families.

    An experiment with a protocol has its signatures against depth, ideal and by the noise model; one without has a
    figure for each family of the ideal signatures that it asks for.
    """
    keys = predicted_keys(source, experiment.name)
    if experiment.protocol is not None:
        found = [figure_outputs.curves_figure(source, experiment, keys, folder)]
    else:
        found = [draw(source, experiment, folder) for draw in _SINGLE]
        found[2:2] = figure_front.front_figures(source, experiment, folder)
        found.append(
            figure_outputs.curves_figure(source, experiment, [key for key in keys if key not in _DRAWN], folder)
        )
    return [picture for picture in found if picture is not None]
