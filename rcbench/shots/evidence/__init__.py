"""What the shots themselves say: faults that no file states, found with the ideal predictions.

- `examine`: `find_evidence`, all questions in turn; `finding`: what each gives; `wording`: in words.
- `scores`: likelihood, cross-entropy and coincidences against a floor of noise. `cases`: runs as arrays, in lanes that
  share a floor; `own`: each run against its own circuit; `studies`: a lane and what is known of it.
- one file a question: `stuck`; `bit_order`, with `orders`, `pools` (`sampled_pool`, `return_pool`) and `ordering`;
  `identity`, with `matching` and `exchange`; `orphans` and `seed`, with `left_over`; `blocks` and `drift`, with
  `repeats`. The first of each works on arrays, the others bring it to a kit. A new question is one such pair.
- `check`: from files to findings; `series`: shots in order; `mend`: mended shots beside the originals.
"""

from rcbench.shots.evidence.examine import find_evidence
from rcbench.shots.evidence.finding import Finding, Repair, evidence_text

__all__ = ["Finding", "Repair", "evidence_text", "find_evidence"]
