"""Planted faults, how often they are found, and how often something is found that is not there.

    PYTHONPATH=. python tests/shots/fault_table.py 6 100            # qubits, runs of each kind and noise level
    PYTHONPATH=. python tests/shots/fault_table.py 6 100 sampled    # without the mirror echoes beside them

Shots are drawn from Cirq's final states with white noise mixed in and readout flips of 1 % and 3 % on top.
"""

from __future__ import annotations

import sys
import tempfile
import time
from collections.abc import Callable
from pathlib import Path
from typing import NamedTuple

import numpy as np
from fault_cases import MIRROR, World, as_shots, draw, exchange, make_world, permuted

from rcbench.shots.evidence import Finding, find_evidence
from rcbench.shots.evidence.series import Series

FIDELITIES = (0.6, 0.2, 0.05)
SHOTS = 2000
Planted = tuple[dict, Callable[[list[Finding]], bool], frozenset[str]]


def clean(world: World, drawn: dict, rng: np.random.Generator) -> Planted:
    return drawn, lambda told: False, frozenset()


def exchanged(world: World, drawn: dict, rng: np.random.Generator) -> Planted:
    keys = _two(world, drawn, rng)
    wanted = {keys[0]: keys[1], keys[1]: keys[0]}
    return (
        exchange(drawn, *keys),
        lambda told: any(f.repair.moves == wanted for f in told),
        frozenset({"other-circuit"}),
    )


def foreign(world: World, drawn: dict, rng: np.random.Generator) -> Planted:
    """Shots of a random circuit of no kit."""
    key = _two(world, drawn, rng)[0]
    n = world.kit.rows[0].n_qubits
    p = rng.exponential(size=2**n)
    f = world.fidelity * p / p.sum() + (1 - world.fidelity) / 2**n
    other = rng.choice(2**n, size=SHOTS, p=f / f.sum())
    return drawn | {key: other}, lambda told: any(key in f.runs for f in told), frozenset({"orphan"})


def reversed_bits(world: World, drawn: dict, rng: np.random.Generator) -> Planted:
    n = world.kit.rows[0].n_qubits
    return _ordered(drawn, n, tuple(range(n))[::-1])


def shuffled_bits(world: World, drawn: dict, rng: np.random.Generator) -> Planted:
    n = world.kit.rows[0].n_qubits
    return _ordered(drawn, n, tuple(rng.permutation(n).tolist()))


def two_bits(world: World, drawn: dict, rng: np.random.Generator) -> Planted:
    n = world.kit.rows[0].n_qubits
    source = list(range(n))
    a, b = rng.choice(n, 2, replace=False)
    source[a], source[b] = source[b], source[a]
    return _ordered(drawn, n, tuple(source))


def inverted(world: World, drawn: dict, rng: np.random.Generator) -> Planted:
    n = world.kit.rows[0].n_qubits
    bit = int(rng.integers(n))

    def right(told: list[Finding]) -> bool:
        orders = {order.flipped for f in told for order in f.repair.orders.values()}
        return orders == {(bit,)}

    return {k: v ^ (1 << (n - 1 - bit)) for k, v in drawn.items()}, right, frozenset({"flipped-bits"})


def stuck(world: World, drawn: dict, rng: np.random.Generator) -> Planted:
    n = world.kit.rows[0].n_qubits
    bit = int(rng.integers(n))
    planted = {k: v & ~(1 << (n - 1 - bit)) for k, v in drawn.items()}
    right = lambda told: any(f.kind == "stuck-bit" and f.text.startswith(f"bit {bit} ") for f in told)  # noqa: E731
    return planted, right, frozenset({"stuck-bit"})


def doubled(world: World, drawn: dict, rng: np.random.Generator) -> Planted:
    """A tenth of the shots of one circuit again, at its end."""
    key = _two(world, drawn, rng)[0]
    start = int(rng.integers(SHOTS * 8 // 10))
    planted = drawn | {key: np.concatenate([drawn[key], drawn[key][start : start + SHOTS // 10]])}
    return planted, lambda told: any(f.kind == "same-shots" and key in f.runs for f in told), frozenset({"same-shots"})


def drifting(world: World, drawn: dict, rng: np.random.Generator) -> Planted:
    """The second half of one circuit's shots is noise."""
    key = _two(world, drawn, rng)[0]
    n = world.kit.rows[0].n_qubits
    planted = drawn | {key: np.concatenate([drawn[key][: SHOTS // 2], rng.integers(2**n, size=SHOTS // 2)])}
    return planted, lambda told: any(f.kind == "drift" and key in f.runs for f in told), frozenset({"drift"})


def other_seed(world: World, drawn: dict, rng: np.random.Generator) -> Planted:
    """Shots of the kit of another seed, filed under the same names."""
    assert world.other is not None
    world.other.rng = rng
    planted = draw(world.other, world.fidelity, SHOTS, up=0.01, down=0.03)
    right = lambda told: {"other-kit"} <= {f.kind for f in told}  # noqa: E731
    return planted, right, frozenset({"other-kit", "orphan"})


PLANTS = {
    "none": clean,
    "two files exchanged": exchanged,
    "foreign shots in a file": foreign,
    "bits reversed": reversed_bits,
    "bits shuffled": shuffled_bits,
    "two bits exchanged": two_bits,
    "one bit inverted": inverted,
    "one bit stuck": stuck,
    "a block twice": doubled,
    "half a file noise": drifting,
    "kit of another seed": other_seed,
}


def _two(world: World, drawn: dict, rng: np.random.Generator) -> list:
    """Two sampled circuits."""
    keys = [key for key in drawn if key[0].startswith("sampling")]
    return [keys[place] for place in rng.choice(len(keys), 2, replace=False)]


def _ordered(drawn: dict, n: int, source: tuple[int, ...]) -> Planted:
    def right(told: list[Finding]) -> bool:
        orders = {order.source for f in told for order in f.repair.orders.values()}
        return orders == ({source} if source != tuple(range(n)) else set())

    return {k: permuted(v, n, source) for k, v in drawn.items()}, right, frozenset({"bit-order"})


class Row(NamedTuple):
    """found: right answers; false: runs with a finding of a kind that was not planted, or with a wrong repair."""

    qubits: int
    kind: str
    fidelity: float
    runs: int
    found: int
    false: int
    silent: int
    seconds: float


def measure(
    world: World, kind: str, fidelity: float, runs: int, seed: int = 0, shown: Callable[[str], None] | None = None
) -> Row:
    world.fidelity = fidelity
    found = false = silent = 0
    started = time.perf_counter()
    for run in range(runs):
        rng = np.random.default_rng([seed, run, int(1000 * fidelity)])
        world.rng = rng
        planted, right, kinds = PLANTS[kind](world, draw(world, fidelity, SHOTS, up=0.01, down=0.03), rng)
        told = [
            f
            for f in find_evidence(world.kit, as_shots(world, planted), world.probabilities, series=Series(planted, {}))
            if f.told
        ]
        good = right(told)
        bad = [f for f in told if f.kind not in kinds or (f.repair and not good)]
        found, false, silent = found + good, false + bool(bad), silent + (not told)
        if bad and shown:
            shown(f"{kind} F={fidelity} run {run}: " + " | ".join(f.lines()[0][:250] for f in bad))
    return Row(world.kit.rows[0].n_qubits, kind, fidelity, runs, found, false, silent, time.perf_counter() - started)


def table_world(folder: Path, n: int, mirror: bool = True) -> World:
    """Sampled circuits of three depths, and mirror echoes of the same."""
    how = {"depths": (2, 6, 10), "instances": 5 if n < 20 else 3, "shots": SHOTS, "more": MIRROR if mirror else ""}
    world = make_world(folder / "a", n, **how)
    world.other = make_world(folder / "b", n, **how, seed=6)
    return world


def write_row(row: Row) -> str:
    return (
        f"{row.qubits:>6} {row.kind:<24} {row.fidelity:>8} {row.runs:>5} {row.found:>6} {row.false:>6} "
        f"{row.silent:>7} {row.seconds / max(row.runs, 1):>9.2f}"
    )


HEAD = (
    f"{'qubits':>6} {'planted':<24} {'fidelity':>8} {'runs':>5} {'found':>6} {'false':>6} {'silent':>7} {'s a run':>9}"
)


def main() -> None:
    n, runs = int(sys.argv[1]), int(sys.argv[2])
    mirror = "sampled" not in sys.argv
    kinds = [kind for kind in PLANTS if kind in sys.argv] or list(PLANTS)
    with tempfile.TemporaryDirectory() as folder:
        world = table_world(Path(folder), n, mirror)
        print(HEAD, flush=True)
        for kind in kinds:
            for fidelity in FIDELITIES:
                print(write_row(measure(world, kind, fidelity, runs, shown=lambda line: print("  ", line))), flush=True)


if __name__ == "__main__":
    main()
