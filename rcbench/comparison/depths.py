"""The rows of one experiment at its single depths."""

from __future__ import annotations

import re
from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np

from rcbench.comparison.cells import Cell, Key, Predicted
from rcbench.comparison.finding import Finding, Guard, companion_guard
from rcbench.comparison.fits import fit_rows
from rcbench.comparison.row import Row, Terms, write_row
from rcbench.estimators import decay
from rcbench.estimators.pool import Table, interval, pool_for
from rcbench.regions import read_setting, write_setting
from rcbench.signatures.registry import signature

_EMPTY = Table(values=np.zeros((0, 1, 1)), errors=np.zeros((0, 1, 1)))


class ExperimentRows:
    """The rows of one experiment.

    Args:
        terms: on what terms it is compared. cells: what is known of it.
        planned, returned: instances of the roster and those that came back, by depth.
        measured: signature keys of its protocol, in order.
    """

    def __init__(
        self,
        terms: Terms,
        cells: Mapping[Key, Cell],
        planned: Mapping[int, set[int]],
        returned: Mapping[int, set[int]],
        measured: Sequence[str],
    ) -> None:
        self.terms = terms
        self.planned = planned
        self.returned = returned
        self.measured = [key for key in measured if signature(key).axis != "prediction only"]
        self.cells = {key: cell for key, cell in cells.items() if self._is_row(key, cells)}
        self.warning = self._missing_grows()

    def _is_row(self, key: Key, cells: Mapping[Key, Cell]) -> bool:
        if key.signature not in self.measured or key.depth not in self.returned:
            return False
        # a group dropped whole has empty values under no region: a row of its own only where no region is named
        named = any(other.signature == key.signature and other.region for other in cells)
        return bool(key.region) or not named

    def rows(self) -> list[dict[str, Any]]:
        """The rows in the order of the protocol's signatures, regions and depths, the fits after what they fit."""
        out: list[dict[str, Any]] = []
        fits = [name for name in self.measured if name in decay.SIGNATURES]
        source = next((name for name in decay.LAYERS_PER_DEPTH if name in self.measured), "") if fits else ""
        for name in self.measured:
            if name in fits:
                continue
            keys = sorted((key for key in self.cells if key.signature == name), key=_order)
            keys = keys or [Key(name, "", depth) for depth in self.returned]
            out += [write_row(self.terms, self._at_depth(key)) for key in keys]
            if name == source:
                cells = [self.cells[key] for key in keys if key in self.cells]
                out += fit_rows(self.terms, name, fits, cells, (_all(self.planned), _all(self.returned)))
        return out

    def _at_depth(self, key: Key) -> Row:
        cell = self.cells.get(key) or Cell(key=key, used=[], refused=[], table=_EMPTY, shots=0)
        # with no data the row still says what was expected
        shown = cell.used or sorted(self.planned[key.depth])
        return Row(
            entry=signature(key.signature),
            region=key.region,
            depth=key.depth,
            pool=pool_for(key.signature),
            used=cell.used,
            planned=len(self.planned[key.depth]),
            returned=len(self.returned[key.depth]),
            table=cell.table,
            shots=cell.shots,
            ideal=_predicted(cell.ideal, shown),
            noise=_predicted(cell.noise, shown),
            u_model=cell.noise.u_model if cell.noise else 0.0,
            notes=self._notes(cell),
            guard=self._companion(cell),
            empty=None if cell.used else self._without_data(cell),
        )

    def _notes(self, cell: Cell) -> list[str]:
        notes = [self.warning] if self.warning else []
        if cell.used and cell.key.signature == "otoc" and self.terms.against == "ideal":
            notes.append("once scrambled, a normalised OTOC is larger than the ideal one")
        if cell.used and cell.refused:
            notes.append(f"{len(cell.refused)} returned instances gave no value")
        model = cell.ideal if self.terms.against == "ideal" else cell.noise
        alone = sum(i not in model.values for i in cell.used) if model else 0
        if alone:
            notes.append(f"{alone} used instances have no prediction and are not in the difference")
        gone = len(self.returned[cell.key.depth]) - len(cell.used) - len(cell.refused)
        if cell.used and gone > 0:
            notes.append(f"{gone} returned instances dropped: a role is missing")
        return notes

    def _without_data(self, cell: Cell) -> Finding:
        dropped = bool(signature(cell.key.signature).guard) and not cell.key.region
        if cell.refused and not dropped:
            note = "no signal left: none of the returned instances gave a value"
            return Finding(finding="undecided", note=note)
        if self.returned[cell.key.depth]:
            return Finding(finding="not-tested", note="a role is missing in every returned instance")
        return Finding(finding="not-tested", note="no data returned")

    def _companion(self, cell: Cell) -> Guard | None:
        """The guard of a signature that scrambling and mixing drive to one value; None where its own value guards."""
        key, entry = cell.key, signature(cell.key.signature)
        if not entry.guard or not cell.used:
            return None
        companion = signature(entry.guard)
        if len(cell.refused) > len(cell.used):
            return Guard(dead=f"its companion, the {companion.title.lower()}, is too weak in most instances")
        probe = read_setting(key.region).get("probe") if "=" in key.region else None
        region = write_setting({"probe": probe}) if probe else ""
        other = self.cells.get(Key(entry.guard, region, key.depth))
        found = None
        if other is not None and other.used:
            found = interval(pool_for(entry.guard), other.table, self.terms.confidence)
        null = companion.null_value(self.terms.experiment.n_qubits)
        return companion_guard(companion.title.lower(), null, found)

    def _missing_grows(self) -> str:
        """A warning where deep circuits are missing more often than shallow ones, so that the rest may look better."""
        depths = sorted(depth for depth in self.planned if self.planned[depth])
        half = len(depths) // 2
        if half == 0 or not any(self.returned.values()):
            return ""
        lost = {depth: len(self.planned[depth] - self.returned[depth]) for depth in depths}
        shares = [lost[depth] / len(self.planned[depth]) for depth in depths]
        more = sum(lost[depth] for depth in depths[-half:]) - sum(lost[depth] for depth in depths[:half])
        steeper = (sum(shares[-half:]) - sum(shares[:half])) / half
        return "what is missing grows with depth" if more >= half and steeper >= 0.1 else ""


def _all(instances: Mapping[int, set[int]]) -> set[int]:
    return set().union(*instances.values())


def _order(key: Key) -> tuple[list[tuple[bool, int, str]], int]:
    """Regions in natural order, numbers as numbers, then depths."""
    parts = re.findall(r"\d+|\D+", key.region)
    return [(part.isdigit(), int(part) if part.isdigit() else 0, part) for part in parts], key.depth


def _predicted(found: Predicted | None, instances: Sequence[int]) -> Table | None:
    if found is None or not any(i in found.values for i in instances):
        return None
    return found.table(instances)
