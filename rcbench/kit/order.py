"""The order in which a kit is run: which circuits share a batch (a job), and where each stands in it.

Everything that one instance needs stands in one batch, so that drift between jobs does not come between a circuit and
what it is compared with: all roles, settings and depths of an instance, of every experiment that shares its circuits,
and of the controls of these. Another repeat of an instance is another such group, free to stand in another batch.
Groups come in a random order and fill batches of at most `limits.circuits_per_job`; a group that is larger than a batch
is cut between depths. In a batch the circuits run in a random order. All of it is drawn from the campaign's seed.

Besides, every batch holds

- the circuits of roles that are for every batch, such as calibration;
- an anchor of each experiment: its first circuit (shallowest depth, instance 0), run again as a further repeat, so
  that batches can be told apart. Anchors take at most a tenth of a batch, experiments in the order of the campaign;
  batches of fewer than ten circuits have none.

Both have repeat numbers from the experiment's `repeats` on, which tells them from the repeats that were asked for.
"""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Iterable, Sequence
from dataclasses import dataclass, field

from rcbench.campaign import Campaign
from rcbench.errors import InputError
from rcbench.protocol.expansion import Slot
from rcbench.randomness import Draw

ANCHOR_SHARE = 10  # anchors take at most one in so many places of a batch


@dataclass(slots=True)
class Entry:
    """One run of a circuit: its slot in an experiment (by number), which repeat, and its place once it has one."""

    experiment: int
    slot: Slot
    repeat: int
    anchor: bool = False
    batch: int = 0
    run_order: int = 0


@dataclass(slots=True)
class _Batch:
    room: int | None
    entries: list[Entry] = field(default_factory=list)

    def takes(self, count: int) -> bool:
        return self.room is None or len(self.entries) + count <= self.room


def arrange(entries: Sequence[Entry], campaign: Campaign, *, whole: bool = True) -> list[Entry]:
    """Give each entry its batch and place, in the order in which they run.

    Args:
        entries: what is to run, experiment by experiment, instance by instance.
        campaign: gives the seed, the limits, and which experiments belong together.
        whole: add anchors, and repeat the circuits for every batch; else arrange the entries as they are.
    Raises:
        InputError: a batch that cannot hold the circuits for every batch.
    """
    capacity = campaign.device.limits.circuits_per_job
    everywhere = [entry for entry in entries if whole and entry.slot.role.every_batch]
    others = [entry for entry in entries if not (whole and entry.slot.role.every_batch)]
    anchors = _anchors(others, capacity) if whole else []
    room = None if capacity is None else capacity - len(everywhere) - len(anchors)
    if room is not None and room < 1:
        raise InputError(
            "limits.circuits_per_job", capacity, f"more than the {len(everywhere)} circuits that every batch repeats"
        )
    batches = _fill(_groups(others, campaign), room, campaign.seed)
    _repeat(batches, everywhere, anchors, [experiment.repeats for experiment in campaign.experiments])
    arranged: list[Entry] = []
    for number, batch in enumerate(batches):
        order = Draw(campaign.seed, "run order", "batch", number).permutation(len(batch.entries))
        for index in order.tolist():
            entry = batch.entries[index]
            entry.batch, entry.run_order = number, len(arranged)
            arranged.append(entry)
    return arranged


def _anchors(entries: Iterable[Entry], capacity: int | None) -> list[Entry]:
    """The first entry of each experiment: its shallowest circuit of instance 0; none where there is one batch only."""
    if capacity is None:
        return []
    first: dict[int, Entry] = {}
    for entry in entries:
        if entry.slot.instance == 0 and entry.repeat == 0:
            first.setdefault(entry.experiment, entry)
    return list(first.values())[: capacity // ANCHOR_SHARE]


def _groups(entries: Iterable[Entry], campaign: Campaign) -> list[list[Entry]]:
    """The entries that must share a batch."""
    family = _families(campaign)
    groups: dict[tuple[int, int, int], list[Entry]] = defaultdict(list)
    for entry in entries:
        groups[family[entry.experiment], entry.slot.instance, entry.repeat].append(entry)
    return list(groups.values())


def _families(campaign: Campaign) -> list[int]:
    """A number for each experiment, the same for those that share circuits or are controls of each other."""
    names = [experiment.name for experiment in campaign.experiments]
    family = list(range(len(names)))
    for number, experiment in enumerate(campaign.experiments):
        for other in (experiment.circuit_source, experiment.control_for):
            if other in names:
                old, new = family[number], family[names.index(other)]
                family = [new if member == old else member for member in family]
    return family


def _fill(groups: list[list[Entry]], room: int | None, seed: int) -> list[_Batch]:
    """Batches filled with groups in random order, each group in the first batch that takes it whole."""
    batches: list[_Batch] = []
    open_from = 0  # batches before this one are full
    for index in Draw(seed, "run order", "groups").permutation(len(groups)).tolist():
        for part in _parts(groups[index], room):
            place = next((batch for batch in batches[open_from:] if batch.takes(len(part))), None)
            if place is None:
                place = _Batch(room)
                batches.append(place)
            place.entries += part
            while open_from < len(batches) and not batches[open_from].takes(1):
                open_from += 1
    return batches


def _parts(group: list[Entry], room: int | None) -> list[list[Entry]]:
    """The group itself where a batch holds it; else cut between depths, and within a depth only where it must be."""
    if room is None or len(group) <= room:
        return [group]
    by_depth: dict[int, list[Entry]] = defaultdict(list)
    for entry in group:
        by_depth[entry.slot.depth].append(entry)
    parts: list[list[Entry]] = []
    for depth in sorted(by_depth):
        block = by_depth[depth]
        pieces = [block[start : start + room] for start in range(0, len(block), room)]
        for piece in pieces:
            if parts and len(parts[-1]) + len(piece) <= room:
                parts[-1] += piece
            else:
                parts.append(list(piece))
    return parts


def _repeat(batches: list[_Batch], everywhere: list[Entry], anchors: list[Entry], repeats: Sequence[int]) -> None:
    """Add to every batch the circuits for every batch, and the anchors that are not in it anyway."""
    if not batches and everywhere:
        batches.append(_Batch(None))
    home = {id(entry): number for number, batch in enumerate(batches) for entry in batch.entries}
    for number, batch in enumerate(batches):
        for entry in everywhere:
            repeat = entry.repeat + number * repeats[entry.experiment]
            batch.entries.append(Entry(entry.experiment, entry.slot, repeat))
    for entry in anchors:
        repeat = repeats[entry.experiment]
        for number, batch in enumerate(batches):
            if number != home[id(entry)]:
                batch.entries.append(Entry(entry.experiment, entry.slot, repeat, anchor=True))
                repeat += 1
