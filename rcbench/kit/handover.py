"""HANDOVER.md: what the people who run the kit must know, the most important first."""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Sequence

from rcbench.campaign import Campaign
from rcbench.circuits.export import SUFFIX
from rcbench.kit.roster import RosterRow
from rcbench.kit.storage import PACK_ABOVE

_FORMATS = {"qasm3": "OpenQASM 3", "qasm2": "OpenQASM 2.0", "cirq-json": "Cirq JSON"}
_MOST_BATCHES = 40  # listed one by one

_RULES = """\
# Hand-over: {title}

**Run every circuit verbatim: no optimisation, no re-routing, no merging across barriers, or the echo vanishes.**

Many of these circuits run a random circuit and then its exact reverse. A compiler that sees this cancels the two, and
the device is then not tested at all. So switch off gate cancellation, resynthesis, routing and any scheduling that
moves gates over a `barrier`. Every layer and the turning point of an echo carry a barrier{empty_moments}. The gates are
the native gates of the device already; gates outside the standard gate file are defined in each file, and mean your
native gates of that name. If something like decoupling, twirling or post-selection is used, say so in `execution.toml`
(below).

Device: **{device}**{invented}. Circuits: {count} in {format}, {shots:,} shots in all.
Kit hash: `{kit_hash}`

## Qubits and bits

- Qubit {qubit} of a circuit is the device qubit in place j of the column `physical_qubits` of `roster.csv`. Do not
  choose other qubits.
- Classical bit {bit} is the qubit in place j of the column `measured_qubits`.
- A bitstring is written with bit 0 as its first character; then state `bit_order = "q0-first"`. If your software writes
  bit 0 last, leave the strings as they are and state `bit_order = "q0-last"`.

## Run order

`roster.csv` lists the circuits in the order in which they are to run: by `run_order`, batch by batch. Send a batch as
one job if you can. The order is random on purpose, and keeps in one batch what is compared with each other; please keep
to it. The column `shots` says how many shots each circuit gets. The circuit itself is `circuits/NAME{suffix}`, NAME its
`circuit_id`{packed}. Circuits whose name ends in `-r1`, `-r2`, ... repeat the circuit without that ending, and are
meant to be run again.

{batches}
## Sending shots back

One folder, with as many data files as you like (CSV, Parquet, JSON or NPZ) and two small files beside them.

`shots.csv`, one row a shot, or one row an outcome with a column `count` (these outcomes are made up):

```
{sample}
```

Bitstrings are text: keep leading zeros. Rows of one circuit may be spread over several files. A part of the circuits is
welcome too: what is there is compared as far as it goes.

`shots.toml`, how the bitstrings are written:

```
bit_order = "q0-first"
```

`execution.toml`, how they were taken; what is left out is reported as not stated:

```
kit_hash = "{kit_hash}"
started = 2026-03-04T09:30:00Z
ended = 2026-03-04T11:05:00Z
device = "{device}"
calibration = "id of the calibration in use"
compiler = "name, version and settings"
decoupling = "none"
twirling = "none"
post_selection = "none"
readout_correction = "none"
```
"""

_INVENTED = """
## Invented

This device is invented: its name, layout and every number of its error budget are made up to show how rcbench works. No
such device exists, and nothing here was measured.
"""


def handover(campaign: Campaign, rows: Sequence[RosterRow], kit_hash: str) -> str:
    """The text of HANDOVER.md; rows in run order."""
    device, cirq = campaign.device, campaign.circuit_format == "cirq-json"
    text = _RULES.format(
        title=campaign.title,
        device=device.name,
        invented=" (invented, see the end)" if device.invented else "",
        count=f"{len(rows):,}",
        format=_FORMATS[campaign.circuit_format],
        shots=sum(row.shots for row in rows),
        kit_hash=kit_hash,
        qubit="`LineQubit(j)`" if cirq else "`q[j]`",
        bit="j of the measurement key `c`" if cirq else "`c[j]`",
        empty_moments=" (in Cirq, which has none, an empty moment)" if cirq else "",
        suffix=SUFFIX[campaign.circuit_format],
        packed=", in one of the zip archives there" if len(rows) > PACK_ABOVE else "",
        batches=_batches(campaign, rows),
        sample=sample_shots(rows),
    )
    return text + (_INVENTED if device.invented else "")


def _batches(campaign: Campaign, rows: Sequence[RosterRow]) -> str:
    timings = campaign.device.timings
    by_batch: dict[int, list[RosterRow]] = defaultdict(list)
    for row in rows:
        by_batch[row.batch].append(row)
    lines = ["| batch | circuits | shots | time on the device, estimated |", "| ---: | ---: | ---: | ---: |"]
    for batch, members in sorted(by_batch.items()):
        if len(lines) - 2 == _MOST_BATCHES:
            lines.append(f"| ... | {len(by_batch)} batches in all | | |")
            break
        seconds = timings.job + sum(row.shots * (row.duration_ns + timings.overhead) for row in members)
        lines.append(f"| {batch} | {len(members)} | {sum(row.shots for row in members):,} | {seconds * 1e-9:.3g} s |")
    return "\n".join(lines) + "\n"


def sample_shots(rows: Sequence[RosterRow]) -> str:
    """Some rows of a file of shots, with made-up outcomes."""
    lines = ["circuit_id,bitstring,count"]
    for number, row in enumerate(rows[:2]):
        width = len(row.measured_qubits)
        lines.append(f"{row.circuit_id},{'0' * width},{row.shots - 1 if row.shots > 1 else 1}")
        if row.shots > 1:
            lines.append(f"{row.circuit_id},{format(1 << number % width, f'0{width}b')},1")
    return "\n".join(lines)
