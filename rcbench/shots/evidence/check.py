"""From files to findings: what `rcbench check` does beyond the audit, and with `--apply`."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

from rcbench.shots.evidence.cases import MAX_QUBITS
from rcbench.shots.evidence.examine import Progress, find_evidence
from rcbench.shots.evidence.finding import Finding, evidence_text
from rcbench.shots.evidence.mend import refuse_existing, summary, write_mended
from rcbench.shots.evidence.series import MOST_ROWS, read_series
from rcbench.shots.evidence.wording import not_examined
from rcbench.shots.shots import Shots

if TYPE_CHECKING:
    from rcbench.kit import Kit


def examine_files(
    kit: Kit,
    path: Path,
    shots: Shots,
    *,
    bit_order: str | None = None,
    max_qubits: int = MAX_QUBITS,
    apply: Path | None = None,
    progress: Progress | None = None,
) -> tuple[str, bool]:
    """Examine shots that were read from files, and mend them where that is asked for.

    Args:
        kit: the kit. path: the file or folder that `shots` were read from. bit_order: as it was given to `read_shots`.
        max_qubits: larger circuits are not simulated. apply: a new folder for mended shots.
        progress: called with (done, in all, what).
    Returns:
        The findings for a terminal, and whether one of them needs attention.
    """
    from rcbench.predictions import Options
    from rcbench.verbs import IdealProbabilities

    if apply is not None:
        refuse_existing(apply)  # before the work, not after
    findings: list[Finding] = []
    series = read_series(path, kit, shots, bit_order=bit_order)
    if series is None:
        findings.append(not_examined(f"the order of shots, since there are more than {MOST_ROWS:,} rows"))
    ideal = IdealProbabilities(kit, Options())
    findings = [
        *find_evidence(kit, shots, ideal, series=series, max_qubits=max_qubits, progress=progress),
        *findings,
    ]
    text = evidence_text(findings)
    if apply is not None:
        record = write_mended(findings, path, apply, kit, shots, bit_order=bit_order)
        done = "nothing that can be mended; nothing written" if record is None else summary(record, apply)
        text = f"{text}\n\n{done}"
    return text, any(finding.told for finding in findings)
