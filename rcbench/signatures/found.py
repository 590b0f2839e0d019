"""One value of a signature, as the hooks hand it to a table; and what an experiment asks of them."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field

from rcbench.errors import InputError
from rcbench.regions import write_setting

LETTER_W, LETTER_V = "X", "Z"  # circuits begin and end in random one-qubit gates, so the letters are a convention


@dataclass(frozen=True, slots=True, kw_only=True)
class Found:
    """One value. depth: None where it belongs to all; std_error: numerical or statistical; method: how, and caveats."""

    key: str
    region: str = ""
    depth: int | None
    value: float
    std_error: float = 0.0
    method: str = ""


@dataclass(frozen=True, slots=True, kw_only=True)
class Question:
    """What is asked of the circuits.

    Args:
        keys: of the registry. n_qubits: of the circuits. regions: of experiment qubits, halves' first where none.
        sites: named qubits: `probe`, where V starts (qubit 0 where none); `butterfly`, where W acts (all where none);
            `ones`, the input bits that are 1 in the first of two twins; `flipped`, the bits in which the second
            differs (the middle one where none).
        seed: of random states. dtype, memory_limit, threads: as `engine.tree.walk`.
    """

    keys: tuple[str, ...]
    n_qubits: int
    regions: Sequence[Sequence[int]] = ()
    sites: Mapping[str, Sequence[int]] = field(default_factory=dict)
    seed: int = 0
    dtype: str = "complex64"
    memory_limit: int | None = None
    threads: int | None = None

    def __post_init__(self) -> None:
        for name in ("probe", "butterfly", "ones", "flipped"):
            for site in self.sites.get(name, ()):
                if not 0 <= site < self.n_qubits:
                    raise InputError(f"sites.{name}", site, f"qubits of the experiment, 0 to {self.n_qubits - 1}")

    def asks(self, keys: Sequence[str]) -> tuple[str, ...]:
        """The keys among some that are asked for."""
        return tuple(key for key in self.keys if key in keys)

    @property
    def all_regions(self) -> Sequence[Sequence[int]]:
        """The regions, the first half where none is named."""
        return self.regions or (tuple(range((self.n_qubits + 1) // 2)),)

    @property
    def probes(self) -> tuple[int, ...]:
        """Where V starts."""
        return tuple(self.sites.get("probe", ())) or (0,)

    @property
    def butterflies(self) -> tuple[int, ...]:
        """Where W acts."""
        return tuple(self.sites.get("butterfly", ())) or tuple(range(self.n_qubits))

    @property
    def twin_inputs(self) -> tuple[str, str]:
        """Both input bit strings of twins."""
        ones = frozenset(self.sites.get("ones", ()))
        flipped = frozenset(self.sites.get("flipped", ()) or (self.n_qubits // 2,))
        return self._bits(ones), self._bits(ones ^ flipped)

    def _bits(self, ones: frozenset[int]) -> str:
        return "".join("1" if qubit in ones else "0" for qubit in range(self.n_qubits))

    @property
    def resources(self) -> dict[str, object]:
        """Keyword arguments of everything that simulates."""
        return {"dtype": self.dtype, "memory_limit": self.memory_limit, "threads": self.threads}


def pair_label(butterfly: int, probe: int) -> str:
    """Label of an OTOC."""
    return write_setting({"butterfly": butterfly, "probe": probe, "W": LETTER_W, "V": LETTER_V})


def operator_label(probe: int, **more: object) -> str:
    """Label of a quantity of the operator that starts at a probe."""
    return write_setting({"probe": probe, "V": LETTER_V, **more})
