"""The signature registry: one table that every other part asks.

A row holds the key, the axis, the unit, the range, the value for a fully mixed state, the guard and the default
margin of a signature, and the words of its card in the report.
"""

from __future__ import annotations

from dataclasses import dataclass

from rcbench.errors import InputError, suggest

AXES = ("spread", "kept", "faithful", "prediction only")


@dataclass(frozen=True, slots=True, kw_only=True)
class Signature:
    """One signature.

    Args:
        key: name in files. title: name in text. axis: one of AXES. unit: outside unit, empty for a pure number.
        low, high: range of the exact quantity (estimates may leave it).
        null: value for a fully mixed state of n qubits, as a function of n; None where it depends on more.
        guard: key of the companion that must exclude its own null where a scrambled value equals a mixed one; else empty.
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


_ROWS = (
    Signature(
        key="xeb_linear",
        title="Linear cross-entropy",
        axis="faithful",
        low=-1.0,
        high=float("inf"),
        null="0",
        margin=0.15,
        margin_relative=True,
        higher_is_better=1,
        estimator="cross-entropy",
        formula="X = D <p(x)> - 1, the mean ideal probability p of the outcomes seen, D = 2^n",
        source="Arute et al., Nature 574, 505 (2019)",
        blind="At shallow depth it exceeds the fidelity, and its ideal value differs from circuit to circuit.",
    ),
    Signature(
        key="xeb_fidelity",
        title="Cross-entropy fidelity",
        axis="faithful",
        low=-1.0,
        high=1.0,
        null="0",
        margin=0.05,
        higher_is_better=1,
        estimator="cross-entropy",
        formula="F = X / v with v = D sum p^2 - 1 of that circuit",
        source="ratio form as in Choi et al., Nature 613, 468 (2023); supplement of Arute et al., Nature 574, 505 (2019)",
        blind="Equals the state fidelity for white noise only; with local noise at shallow depth it is larger.",
    ),
    Signature(
        key="self_fidelity",
        title="Collision-based self-fidelity",
        axis="kept",
        low=0.0,
        high=float("inf"),
        null="0",
        margin=0.1,
        higher_is_better=1,
        estimator="cross-entropy",
        formula="F_self^2 = (D C - 1) / v, C = coincident pairs of shots / all pairs, v = D sum p^2 - 1",
        source="speckle purity as in the supplement of Arute et al., Nature 574, 505 (2019) (from memory)",
        blind="Says that some structure is there, not that it is the structure of this circuit. Needs shots of the order of sqrt(2 D) / F^2.",
    ),
    Signature(
        key="collision_probability",
        title="Collision probability",
        axis="kept",
        low=0.0,
        high=1.0,
        null="1/D",
        margin=0.15,
        margin_relative=True,
        estimator="cross-entropy",
        formula="C = sum_x c_x (c_x - 1) / (M (M - 1)) from counts c_x of M shots",
        source="Dalzell, Hunter-Jones, Brandao, PRX Quantum 3, 010333 (2022)",
        blind="A circuit that has not spread has a high value whether or not anything was lost.",
    ),
    Signature(
        key="porter_thomas_ks",
        title="Porter-Thomas distance",
        axis="prediction only",
        low=0.0,
        high=1.0,
        margin=0.05,
        higher_is_better=-1,
        estimator="cross-entropy",
        formula="sup over y of |share of outcomes with D p <= y - (1 - (1 - y/D)^(D-1))|, of the ideal probabilities",
        source="Boixo et al., Nature Physics 14, 595 (2018)",
        blind="A property of the ideal circuits: whether they reach the Porter-Thomas law. Not a test of the device.",
    ),
    Signature(
        key="echo_return",
        title="Echo return",
        axis="faithful",
        low=0.0,
        high=1.0,
        null="1/D",
        margin=0.05,
        higher_is_better=1,
        estimator="echo",
        formula="L = share of shots that give the target string",
        source="Yan, Cincio, Zurek, Phys. Rev. Lett. 124, 160603 (2020), arXiv:1903.02651",
        blind="Cannot see an error that the reversal undoes; never supports 'kept' on its own.",
    ),
    Signature(
        key="polarization",
        title="Effective polarization",
        axis="faithful",
        low=-1.0,
        high=1.0,
        null="0",
        margin=0.05,
        higher_is_better=1,
        estimator="echo",
        formula="S = 4^n/(4^n - 1) sum_k (-1/2)^k h_k - 1/(4^n - 1), h_k = share of shots at Hamming distance k from the target",
        source="Proctor et al., Nature Physics 18, 75 (2022), arXiv:2008.11294",
        blind="Equals the process polarization only between random local Clifford layers and for Pauli errors.",
    ),
    Signature(
        key="layer_loss",
        title="Loss a layer",
        axis="faithful",
        low=0.0,
        high=1.0,
        margin=0.01,
        higher_is_better=-1,
        estimator="decay-fit",
        formula="(1 - 4^-n)(1 - q) from a fit A q^m over the layers m",
        source="Proctor et al., Phys. Rev. Lett. 129, 150502 (2022)",
        blind="Assumes one exponential; errors near both ends belong to the prefactor A.",
    ),
    Signature(
        key="spam",
        title="Preparation and readout factor",
        axis="faithful",
        low=0.0,
        high=float("inf"),
        margin=0.1,
        higher_is_better=1,
        estimator="decay-fit",
        formula="A of the fit A q^m over the layers m",
        source="Proctor et al., Phys. Rev. Lett. 129, 150502 (2022)",
        blind="Preparation and readout errors cannot be told apart.",
    ),
    Signature(
        key="otoc",
        title="Out-of-time-order correlator",
        axis="spread",
        low=-1.0,
        high=1.0,
        null="0",
        guard="reference_echo",
        margin=0.1,
        estimator="butterfly-echo",
        formula="C = <Z_m> of the butterfly echo over <Z_m> of the same echo without the butterfly",
        source="Mi et al., Science 374, 1479 (2021), arXiv:2101.08870",
        blind="A small value alone is no evidence of scrambling: it needs a reference echo that is still alive, and the ratio over-corrects once scrambled.",
    ),
    Signature(
        key="reference_echo",
        title="Reference echo",
        axis="faithful",
        low=-1.0,
        high=1.0,
        null="0",
        margin=0.1,
        higher_is_better=1,
        estimator="butterfly-echo",
        formula="R = <Z_m> after U and its inverse, ideally 1",
        source="Mi et al., Science 374, 1479 (2021), arXiv:2101.08870",
        blind="One qubit only; gates outside its light cone cancel.",
    ),
    Signature(
        key="purity",
        title="Purity",
        axis="kept",
        low=0.0,
        high=1.0,
        null="1/D",
        margin=0.05,
        higher_is_better=1,
        formula="tr rho^2 of the region",
        source="Lubkin, J. Math. Phys. 19, 1028 (1978) (from memory)",
        blind="Of a part of the system it falls by entanglement and by loss alike; only the whole-state purity shows what is kept.",
    ),
    Signature(
        key="renyi2_entropy",
        title="Renyi-2 entropy",
        axis="spread",
        unit="bits",
        low=0.0,
        high=float("inf"),
        null="n",
        guard="purity",
        margin=0.1,
        formula="-log2 tr rho^2 of the region",
        source="Lubkin, J. Math. Phys. 19, 1028 (1978) (from memory)",
        blind="Entanglement and decoherence both raise it.",
    ),
    Signature(
        key="vonneumann_entropy",
        title="Von Neumann entropy",
        axis="prediction only",
        unit="bits",
        low=0.0,
        high=float("inf"),
        null="n",
        margin=0.1,
        formula="-tr rho log2 rho of the region",
        source="Page, Phys. Rev. Lett. 71, 1291 (1993)",
        blind="Not measured; predicted from the state only.",
    ),
)
SIGNATURES: dict[str, Signature] = {row.key: row for row in _ROWS}


def signature(key: str) -> Signature:
    """A row of the registry; a mistyped key gets the list of keys."""
    if key not in SIGNATURES:
        raise InputError("signature", key, suggest(key, SIGNATURES))
    return SIGNATURES[key]
