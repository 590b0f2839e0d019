"""From characters to bits: which character is which classical bit, and what may stand there."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from rcbench.arrays import BoolArray, IntArray
from rcbench.errors import InputError

BIT_ORDERS = ("q0-first", "q0-last")
ZERO = 48  # the character 0
# Eight characters at once: the lowest bit of byte i of a little-endian word goes to bit 63 - i of the product
_GATHER = np.uint64(0x8040201008040201)
_LOW_BITS = np.uint64(0x0101010101010101)


@dataclass(frozen=True, slots=True, kw_only=True)
class Reading:
    """How bitstrings are written.

    Args:
        bit_order: one of BIT_ORDERS, or None where `bits` says it.
        bits: which classical bit each character is, first character first; -1 for one that is not of the circuit.
        symbols: characters for a lost or leaked qubit.
        separator: a character between registers that carries nothing, or empty.
    """

    bit_order: str | None = None
    bits: tuple[int, ...] | None = None
    symbols: str = ""
    separator: str = ""

    @property
    def name(self) -> str:
        """The bit order in words."""
        return self.bit_order or "register map"

    def fits(self, n_bits: int) -> bool:
        """Whether circuits of n_bits classical bits can be read: a register map is of one number of bits."""
        return self.bits is None or max(self.bits) + 1 == n_bits

    def n_characters(self, n_bits: int) -> int:
        """Characters that the bitstring of a circuit of n_bits classical bits has."""
        return n_bits if self.bits is None else len(self.bits)

    def columns(self, n_bits: int) -> slice | IntArray:
        """Position of the character of each classical bit."""
        if self.bits is None:
            return slice(None) if self.bit_order == "q0-first" else slice(None, None, -1)
        return np.array([self.bits.index(bit) for bit in range(n_bits)], dtype=np.int64)

    def alphabet(self) -> str:
        """The characters allowed, in words."""
        return "0 and 1" + (f" (or {', '.join(self.symbols)} for a lost or leaked qubit)" if self.symbols else "")

    def sort_rows(self, characters: IntArray) -> tuple[BoolArray, BoolArray] | None:
        """Which rows hold a declared symbol, and which an illegal character; None where all are 0 and 1."""
        if characters.size == 0 or (characters.min() >= ZERO and characters.max() <= ZERO + 1):
            return None
        kind = np.full(256, 2, dtype=np.uint8)
        kind[[ZERO, ZERO + 1]] = 0
        kind[[ord(s) for s in self.symbols]] = 1
        worst = kind[characters].max(axis=1)
        return worst == 1, worst == 2


def pack_words(characters: IntArray) -> IntArray:
    """Words of 64 bits from characters 0 and 1.

    Args:
        characters: (rows, n) uint8, the most significant bit first.
    Returns:
        (rows, ceil(n / 64)) uint64: the whole number each row spells, most significant word first.
    """
    rows, n = characters.shape
    n_bytes = -(-n // 8)
    padded = np.zeros((rows, 8 * n_bytes), dtype=np.uint8)
    padded[:, 8 * n_bytes - n :] = characters
    eights = padded.view("<u8")
    eights &= _LOW_BITS
    eights *= _GATHER
    eights >>= np.uint64(56)
    words = np.zeros((rows, max(1, -(-n_bytes // 8))), dtype=np.uint64)
    for place in range(n_bytes):
        word = words[:, -1 - (n_bytes - 1 - place) // 8]
        word <<= np.uint64(8)
        word |= eights[:, place]
    return words


def packed_bytes(words: IntArray, n_bits: int) -> IntArray:
    """Rows as `numpy.packbits` writes them, from words as `pack_words` makes them: (rows, ceil(n_bits / 8)) uint8."""
    n_bytes = -(-n_bits // 8)
    number = np.ascontiguousarray(words.astype(">u8")).view(np.uint8).reshape(len(words), -1)[:, -n_bytes:]
    spare = 8 * n_bytes - n_bits  # packbits fills up at the end, a number at the front
    if not spare:
        return np.ascontiguousarray(number)
    packed = number << np.uint8(spare)
    packed[:, :-1] |= number[:, 1:] >> np.uint8(8 - spare)
    return packed


def check_symbols(key: str, symbols: Sequence[str], where: str = "") -> str:
    """One string of single characters that can stand for a lost or leaked qubit."""
    for symbol in symbols:
        if len(symbol) != 1 or not symbol.isascii() or not symbol.isprintable() or symbol in '01 ,"':
            raise InputError(
                key, symbol, "single printable ASCII characters other than 0, 1, space, comma, quote", where
            )
    return "".join(dict.fromkeys(symbols))
