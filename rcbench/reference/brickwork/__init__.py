"""Averages over brickworks of independent Haar two-site gates on a line: exact at every depth, no sampling.

All are quadratic in U and U*, so any gates that form a 2-design (uniform two-qubit Cliffords) give the same values; not
so means of logarithms, variances and higher frame potentials.

    layers            which sites a layer joins
    spreading         OTOC profile and map, right end, front: lines to 2000 sites
    strings           distributions over whole operator strings, operator size, echo return, other gates: to 22
    purity            purity of one cut, of contiguous regions (to 2000), of subsets (to 32, with noise)
    choi              Choi purity and annealed tripartite mutual information: to 32
    output            collision probability, linear cross-entropy (with noise), depth of anticoncentration: to 32
    frame_potential   second frame potential: to 20
    noise             fidelity with noise, errors that count, noisy echo
    labels            the sums over identity and swap that the last five are made of

Depth is in layers, entropies are in nats. Functions that sweep the depth give all depths at once, row 0 before any
gate: a layer of random one-qubit gates on a product state. Modules are fetched on first use.
"""

from __future__ import annotations

from importlib import import_module
from types import ModuleType

__all__ = ["choi", "frame_potential", "labels", "layers", "noise", "output", "purity", "spreading", "strings"]


def __getattr__(name: str) -> ModuleType:
    if name not in __all__:
        raise AttributeError(f"module 'rcbench.reference.brickwork' has no attribute {name!r}")
    return import_module(f"rcbench.reference.brickwork.{name}")


def __dir__() -> list[str]:
    return sorted({*globals(), *__all__})
