"""What the shots themselves give evidence of, one finding a fault, and what would mend it."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

from rcbench.shots.audit import safe
from rcbench.shots.evidence.orders import Order
from rcbench.shots.shots import RunKey

SIGMAS, NATS = "sigmas", "nats"  # how evidence is counted: standard deviations, or a natural-log likelihood ratio
# Chance of a false finding of one kind in a whole campaign that the limits are set for
ALPHA = 1e-3
APPLY = "rcbench check KIT SHOTS --apply OUT"


@dataclass(frozen=True, slots=True)
class Repair:
    """What `--apply` does: the order in which bits come, by run, and the run whose shots a run really holds."""

    orders: Mapping[RunKey, Order] = field(default_factory=dict)
    moves: Mapping[RunKey, RunKey] = field(default_factory=dict)

    def __bool__(self) -> bool:
        return bool(self.orders or self.moves)


@dataclass(frozen=True, slots=True, kw_only=True)
class Finding:
    """One fault, or one question that the shots cannot answer.

    Args:
        kind: `orphan`, `other-circuit`, `bit-order`, `flipped-bits`, `stuck-bit`, `same-shots`, `drift`,
            `other-kit`, or what was asked and not answered.
        told: False where the answer is `cannot tell`, or where nothing was asked.
        runs: the runs it is about. files: the files they came from, where known.
        evidence, limit: how strong, and from what on it is told; in `measure`, SIGMAS or NATS.
        text: one sentence. mend: the command or the deed that mends it.
        shots_needed: shots a circuit that would tell, where it cannot be told.
        repair: what `--apply` would do.
    """

    kind: str
    text: str
    told: bool = True
    runs: tuple[RunKey, ...] = ()
    files: tuple[str, ...] = ()
    evidence: float = 0.0
    limit: float = 0.0
    measure: str = SIGMAS
    mend: str = ""
    shots_needed: int | None = None
    repair: Repair = field(default_factory=Repair)

    @property
    def circuits(self) -> tuple[str, ...]:
        """Ids of the circuits it is about, each once."""
        return tuple(dict.fromkeys(circuit_id for circuit_id, _ in self.runs))

    def lines(self) -> list[str]:
        """The finding for a terminal."""
        if not self.told:
            head = "cannot tell" if self.kind != "not-examined" else "not examined"
            return [f"{head}: {self.text}"]
        strength = f"{self.evidence:.1f}" if self.evidence < 1000 else f"{self.evidence:.0f}"
        words = f"{strength} sigmas" if self.measure == SIGMAS else f"log-likelihood ratio {strength}"
        found = [f"found ({self.kind}): {self.text} [{words}, limit {self.limit:.1f}]"]
        if self.files:
            found.append(f"  in {some(self.files)}")
        if self.mend:
            found.append(f"  to mend it: {self.mend}")
        return found


def some(names: tuple[str, ...], shown: int = 3) -> str:
    """The first few names, and how many more."""
    rest = len(names) - shown
    return ", ".join(names[:shown]) + (f" and {rest} more" if rest > 0 else "")


def evidence_text(findings: list[Finding]) -> str:
    """All findings for a terminal, worst first as they are listed."""
    if not findings:
        return "What the shots say for themselves: nothing against the kit."
    lines = [safe(line) for finding in findings for line in finding.lines()]
    told = sum(finding.told for finding in findings)
    head = f"{told} found" if told else "nothing found"
    return "\n".join([f"What the shots say for themselves: {head}", *lines])
