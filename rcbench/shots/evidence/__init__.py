"""What the shots themselves say: faults that no file states, found with the ideal predictions.

- `examine`: `find_evidence`, all questions in turn; `finding`: what each gives; `wording`: in words.
- `scores`: likelihood, cross-entropy and coincidences against a floor of noise; `cases`, `pools`: runs as arrays;
  `own`: each run against its own circuit.
- one file a question: `stuck`, `bit_order` (with `orders`), `identity` (with `matching`, `exchange`), `orphans`,
  `seed`, `blocks` and `drift` (with `repeats`).
- `series`: shots in order; `mend`: mended shots beside the originals.
"""

from rcbench.shots.evidence.examine import find_evidence
from rcbench.shots.evidence.finding import Finding, Repair, evidence_text

__all__ = ["Finding", "Repair", "evidence_text", "find_evidence"]
