"""One row of the signature registry: what a signature is, and the words of its card in the report."""

from __future__ import annotations

from dataclasses import dataclass

AXES = ("spread", "kept", "faithful", "prediction only")


@dataclass(frozen=True, slots=True, kw_only=True)
class Signature:
    """One signature.

    Args:
        key: name in files. title: name in text. axis: one of AXES. unit: outside unit, empty for a pure number.
        low, high: range of the exact quantity (estimates may leave it).
        null: value for a fully mixed state of n qubits, as a function of n; None where it depends on more.
        guard: key of the companion that must exclude its own null where a scrambled value equals a mixed one, else
            empty.
        margin: default margin, absolute unless margin_relative says that it is a share of the prediction.
        higher_is_better: +1 where more is better, -1 where less is, 0 where neither.
        formula, source, blind: what the card says: the formula, where it was published, what it cannot show.
    """

    key: str
    title: str
    axis: str
    unit: str = ""
    low: float
    high: float
    null: str = ""
    guard: str = ""
    margin: float = 0.05
    margin_relative: bool = False
    higher_is_better: int = 0
    estimator: str = ""
    formula: str
    source: str
    blind: str

    def null_value(self, n_qubits: int) -> float | None:
        """The value for a fully mixed state of n qubits."""
        dimension = 2.0**n_qubits
        return {"": None, "0": 0.0, "1": 1.0, "1/D": 1 / dimension, "n": float(n_qubits)}[self.null]
