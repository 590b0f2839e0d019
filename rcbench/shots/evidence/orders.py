"""Orders in which bits can come: the named ones that software makes, and any other."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from rcbench.arrays import IntArray


@dataclass(frozen=True, slots=True)
class Order:
    """How a delivered string is to be read.

    Args:
        name: in words.
        source: place in the delivered string of each classical bit, bit 0 first.
        flipped: classical bits that come inverted.
    """

    name: str
    source: tuple[int, ...]
    flipped: tuple[int, ...] = ()

    @property
    def is_identity(self) -> bool:
        """Whether it changes nothing."""
        return not self.flipped and self.source == tuple(range(len(self.source)))

    def mended(self, index: IntArray) -> IntArray:
        """State indices as they should have come, from those delivered; any shape, int64."""
        n = len(self.source)
        out = np.zeros_like(index)
        for bit, place in enumerate(self.source):
            out |= (index >> (n - 1 - place) & 1) << (n - 1 - bit)
        return out ^ self.mask if self.flipped else out

    @property
    def mask(self) -> int:
        """The flipped bits as a state index."""
        return sum(1 << (len(self.source) - 1 - bit) for bit in self.flipped)


def identity(n_bits: int) -> Order:
    """Bits as the kit asks for them."""
    return Order("as asked", tuple(range(n_bits)))


def named_orders(n_bits: int, labels: Sequence[str] = ()) -> list[Order]:
    """The orders that common software makes by mistake, each once; the identity is not among them.

    Args:
        n_bits: classical bits. labels: the device's own label of each bit's qubit, to sort by.
    """
    bits = list(range(n_bits))
    delivered: list[tuple[str, list[int]]] = [("reversed", bits[::-1])]  # the bit that stands at each place
    delivered += [(f"rotated by {k}", bits[k:] + bits[:k]) for k in range(1, n_bits)]
    delivered.append(("even bits, then odd ones", bits[0::2] + bits[1::2]))
    delivered.append(("odd bits, then even ones", bits[1::2] + bits[0::2]))
    delivered.append(("first and second half in turn", _halves(bits)))
    for first in (0, 1):
        by_text = sorted(bits, key=lambda bit, first=first: str(bit + first))  # type: ignore[misc]
        delivered.append((f"sorted as text, numbered from {first}", by_text))
        delivered.append((f"sorted as text, numbered from {first}, and reversed", by_text[::-1]))
    if len(set(labels)) == n_bits:
        delivered.append(("sorted by device label", sorted(bits, key=lambda bit: labels[bit])))
        delivered.append(("sorted by number in the device label", sorted(bits, key=lambda bit: _numbers(labels[bit]))))
    if n_bits > 8:
        groups = [bits[start : start + 8] for start in range(0, n_bits, 8)]
        delivered.append(("bytes in reversed order", [bit for group in groups[::-1] for bit in group]))
        delivered.append(("each byte reversed", [bit for group in groups for bit in group[::-1]]))
    for rows in range(2, n_bits // 2 + 1):
        if n_bits % rows == 0:
            turned = np.arange(n_bits).reshape(rows, -1).T.reshape(-1).tolist()
            delivered.append((f"rows and columns of a {rows} x {n_bits // rows} grid exchanged", turned))
    inverse = [(f"{name}, the other way round", _inverse(order)) for name, order in delivered]
    # the bit at place k is order[k], so that bit j stands at the inverse of it
    found = {tuple(_inverse(order)): name for name, order in [*inverse[::-1], *delivered[::-1]] if order != bits}
    orders = [Order(name, source) for source, name in reversed(found.items())]
    return [*orders, *(order for name in INVERTED if (order := by_name(name, n_bits)))]


INVERTED = ("every bit inverted", "reversed, every bit inverted")


def by_name(name: str, n_bits: int) -> Order | None:
    """The orders that mean the same for any number of bits; None for another name."""
    everything = tuple(range(n_bits))
    if name not in ("reversed", *INVERTED):
        return None
    source = everything if name == INVERTED[0] else everything[::-1]
    return Order(name, source, everything if name in INVERTED else ())


def _halves(bits: list[int]) -> list[int]:
    half = (len(bits) + 1) // 2
    turned = [bit for pair in zip(bits[:half], bits[half:], strict=False) for bit in pair]
    return turned + (bits[half - 1 : half] if len(bits) % 2 else [])


def _inverse(order: Sequence[int]) -> list[int]:
    return [int(place) for place in np.argsort(np.asarray(order, dtype=np.int64))]


def _numbers(label: str) -> tuple[list[int], str]:
    import re

    return [int(number) for number in re.findall(r"\d{1,9}", label)], label


def words(order: Order) -> str:
    """An order in words: its name where it has one, else where each bit comes from."""
    if order.name:
        return order.name
    places = " ".join(f"{bit}<-{place}" for bit, place in enumerate(order.source) if bit != place)
    inverted = f"; inverted: {' '.join(map(str, order.flipped))}" if order.flipped else ""
    return f"classical bit <- place in the string: {places or 'none moved'}{inverted}"
