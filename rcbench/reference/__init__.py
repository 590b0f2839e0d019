"""Closed forms and exact averages: what an ideal scrambler shows, and what its controls show.

    haar               random states and unitaries: purity, Page's entropy, mutual information, OTOC, operator size
    frame_potentials   Haar unitaries and states, the Clifford group, instances needed
    porter_thomas      the output distribution: its law, moments, entropies, cross-entropy
    fidelity           average and entanglement fidelity, white noise
    recovery           Hayden-Preskill decoding
    spectrum           form factor and gap ratios, for circuits that repeat one period
    brickwork          random brickworks on a line, exact at every depth (a package of its own)
    kicked_ising       self-dual kicked Ising chain: fastest entanglement
    dual_unitary       dual-unitary brickworks: light rays
    conserving         charge-conserving brickworks: diffusion
    matchgate          free fermions: spreading without scrambling
    hamiltonian        spin models by exact diagonalisation, for circuits that are steps of time

Take `haar` for the late-time value of a circuit that scrambles, `brickwork` for its way there, the last five for the
families that must differ. Where signatures have a key, the function has its name: `haar.tmi_renyi2(2, 2, 2, 8)`.
Entropies are in nats, depth is in layers of two-qubit gates, qubit 0 is the most significant bit. A value that does
not exist for a size is an InputError. Sources are named at each function, "from memory" where not looked up again.
Modules are fetched on first use.
"""

from __future__ import annotations

from importlib import import_module
from types import ModuleType

__all__ = [
    "brickwork",
    "conserving",
    "dual_unitary",
    "fidelity",
    "frame_potentials",
    "haar",
    "hamiltonian",
    "kicked_ising",
    "matchgate",
    "porter_thomas",
    "recovery",
    "spectrum",
]


def __getattr__(name: str) -> ModuleType:
    if name not in __all__:
        raise AttributeError(f"module 'rcbench.reference' has no attribute {name!r}")
    return import_module(f"rcbench.reference.{name}")


def __dir__() -> list[str]:
    return sorted({*globals(), *__all__})
