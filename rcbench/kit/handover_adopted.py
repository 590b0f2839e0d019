"""HANDOVER.md of a kit of adopted circuits, which those who run them know: how bits count and shots come back."""

from __future__ import annotations

from collections.abc import Sequence

from rcbench.campaign import Campaign
from rcbench.kit.handover import sample_shots
from rcbench.kit.roster import RosterRow

_TEXT = """\
# Hand-over: {title}

**Run every circuit as it is written: a circuit that is optimised, or merged across its barriers, is another circuit.**

{count} circuits, {shots:,} shots in all. They were taken over as they came, with the files that they include put in
place, so that each stands alone: `circuits/NAME.qasm`, NAME its `circuit_id`. `roster.csv` lists them in the order in
which they are to run, if they are still to be run. If something like decoupling, twirling or post-selection is used,
say so in `execution.toml`.

Kit hash: `{kit_hash}`

## Bits

A bitstring has one character for each classical bit that a circuit measures, in the order in which the circuit declares
its registers; a bit that it declares and never measures has none. With `bit_order = "q0-first"` the first character is
the first bit of the first register; with `bit_order = "q0-last"` the string is the other way round.

## Sending shots back

One folder, with as many data files as you like (CSV, Parquet, JSON or NPZ) and two small files beside them.

`shots.csv`, one row a shot, or one row an outcome with a column `count` (these outcomes are made up):

```
{sample}
```

Bitstrings are text: keep leading zeros. `shots.toml`, how they are written:

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


def handover_adopted(campaign: Campaign, rows: Sequence[RosterRow], kit_hash: str) -> str:
    """The text of HANDOVER.md; rows in run order."""
    return _TEXT.format(
        title=campaign.title,
        count=f"{len(rows):,}",
        shots=sum(row.shots for row in rows),
        kit_hash=kit_hash,
        device=campaign.device.name,
        sample=sample_shots(rows),
    )
