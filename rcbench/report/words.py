"""Words that both reports say of an experiment and of its signatures."""

from __future__ import annotations

from pathlib import Path

from rcbench.campaign import Experiment
from rcbench.circuits.families import ADOPTED, family_of
from rcbench.report.source import Source
from rcbench.signatures.registry import SIGNATURES, Signature

_OTHERS = {
    ADOPTED: "imported circuits",
    "product": "no entangling gate, the same one-qubit layers: it cannot spread",
    "dimers": "the same gate count, but each qubit keeps one partner: the same loss, no spreading",
}


def protocol_name(experiment: Experiment) -> str:
    """A protocol's name, of a file its name without the folder; empty where there is none."""
    return Path(experiment.protocol).name if experiment.protocol else ""


def about(experiment: Experiment) -> str:
    """Protocol, circuits and gates of an experiment, and what it is a control for."""
    circuits = _OTHERS.get(experiment.circuits.family, family_of(experiment.circuits.two_qubit).about)
    role = f" Control for {experiment.control_for}." if experiment.control_for else ""
    return (
        f"{protocol_name(experiment) or 'Predicted only'}, {experiment.circuits.family} ({circuits}), "
        f"{experiment.circuits.gates}.{role}"
    )


def cards(source: Source) -> list[Signature]:
    """The registry's rows of every signature that the comparison or the predictions hold, by axis."""
    used = set(source.comparison["signature"]) | set(source.predictions["signature"])
    return [row for key, row in SIGNATURES.items() if key in used]
