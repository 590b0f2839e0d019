"""The registers of an OpenQASM program, and which qubits or bits an operand names."""

from __future__ import annotations

import difflib
import re
from collections.abc import Callable, Iterable

from rcbench.errors import InputError, suggest

MAX_QUBITS = 10_000
MAX_BITS = 100_000
_OPERAND = re.compile(r"\s*+([^\W\d]\w*+|\$\d++)\s*+(?:\[([^\[\]]*+)\]\s*+)?")
_SIZED = re.compile(r"\s*+([^\W\d]\w*+)\s*+(?:\[([^\[\]]*+)\]\s*+)?")
_WITH_SETS = re.compile(r"(?:[^,\[]|\[[^\]]*+\]?)++")  # up to a comma outside brackets


def split_operands(text: str) -> list[str]:
    """The operands of a statement."""
    if not text.strip():
        return []
    return _WITH_SETS.findall(text) if "{" in text else text.split(",")


def some(names: Iterable[str], like: str) -> str:
    """Names for a message: those like the one that was found come first, and not all where there are many."""
    known = list(names)
    if len(known) <= 50:
        return suggest(like, known)
    close = difflib.get_close_matches(like, known[:5000], n=3)
    return ", ".join([*close, *known[: 50 - len(close)], "..."])


class Registers:
    """Qubits or classical bits in the order of their declaration.

    Args:
        word: what errors call one element: qubit or bit.
        limit: how many there may be.
        whole: the value of a whole-number expression, for sizes and indices.
    """

    def __init__(self, word: str, limit: int, whole: Callable[[str], int]) -> None:
        self.word, self._limit, self._whole = word, limit, whole
        self.names: list[str] = []  # of each element, as `q[0]`
        self.index: dict[str, int] = {}  # each element by that name
        self._registers: dict[str, tuple[list[int], bool]] = {}  # its elements; true where it may be indexed

    def __contains__(self, name: str) -> bool:
        return name in self._registers

    def __len__(self) -> int:
        return len(self.names)

    def declare(self, name: str, size: str | None) -> None:
        """A new register; no size: a single element.

        Raises:
            InputError: a size that is no whole number above 0, too many elements, or a name used before.
        """
        count = 1 if size is None else self._whole(size)
        if count < 1:
            raise InputError(name, count, f"a register of at least one {self.word}")
        if len(self.names) + count > self._limit:
            raise InputError(name, count, f"at most {self._limit} {self.word}s in one program")
        start = len(self.names)
        added = [name] if size is None else [f"{name}[{index}]" for index in range(count)]
        self.names += added
        self.index.update(zip(added, range(start, start + count), strict=True))
        self.alias(name, list(range(start, start + count)), size is not None)

    def alias(self, name: str, elements: list[int], indexed: bool = True) -> None:
        """Another name for some elements."""
        if name in self._registers:
            raise InputError("register", name, "a name that is not declared before")
        self._registers[name] = (elements, indexed)

    def declare_all(self, labels: list[str]) -> None:
        """Single elements by labels, the physical qubits $0, $1 ... of OpenQASM 3."""
        if len(labels) > self._limit:
            raise InputError(self.word, len(labels), f"at most {self._limit} {self.word}s in one program")
        for label in labels:
            self._registers[label] = ([len(self.names)], False)
            self.names.append(label)

    def resolve(self, text: str) -> tuple[list[int], bool]:
        """Elements that an operand names, and whether it names a list of them, not a single one.

        Raises:
            InputError: an unknown register, or an index outside it.
        """
        match = _OPERAND.fullmatch(text)
        if match is None:
            missing = " (a ; seems to be missing)" if "\n" in text.strip() else ""
            raise InputError("operand", text.strip()[:60], f"a {self.word} as q[0], or a register{missing}")
        name, index = match.groups()
        if name not in self._registers:
            allowed = some(self._registers, name) if self._registers else f"a {self.word} register declared before"
            raise InputError(f"{self.word} register", name, allowed)
        elements, indexed = self._registers[name]
        if index is None:
            return elements, indexed
        if not indexed:
            raise InputError("operand", text.strip()[:60], f"{name} without an index: it is a single {self.word}")
        if ":" in index or "{" in index:
            return self._several(text, index, elements), True
        return [self._element(text, index, elements)], False

    def _element(self, text: str, index: str, elements: list[int]) -> int:
        place = self._whole(index)
        if not -len(elements) <= place < len(elements):
            raise InputError("index", text.strip()[:60], f"0 to {len(elements) - 1}")
        return elements[place]

    def _several(self, text: str, index: str, elements: list[int]) -> list[int]:
        """A set {a, b, ...} or a range a:b or a:step:b, both ends included, as OpenQASM 3 has them."""
        index = index.strip()
        if index.startswith("{"):
            found = [self._element(text, one, elements) for one in index.strip("{}").split(",")]
            if len(set(found)) != len(found):
                raise InputError("operand", text.strip()[:60], f"each {self.word} once")
            return found
        parts = index.split(":")
        step = self._whole(parts[1]) if len(parts) == 3 else 1
        if len(parts) > 3 or step == 0:
            raise InputError("index", text.strip()[:60], "a range a:b or a:step:b with a step that is not 0")
        first, last = 0 if step > 0 else -1, -1 if step > 0 else 0
        begin = elements.index(self._element(text, parts[0] if parts[0].strip() else str(first), elements))
        end = elements.index(self._element(text, parts[-1] if parts[-1].strip() else str(last), elements))
        return [elements[place] for place in range(begin, end + (1 if step > 0 else -1), step)]


def read_sized(text: str) -> tuple[str, str | None] | None:
    """Name and size of `name[size]` or `name`; None where it is neither."""
    match = _SIZED.fullmatch(text)
    return (match.group(1), match.group(2)) if match else None
