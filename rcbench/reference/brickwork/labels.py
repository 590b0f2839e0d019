"""Averages over Haar gates that are quadratic in U and U*: sums over two labels a site, identity and swap.

The average of U x U* x U x U* over a two-site Haar gate leaves both sites with one label, so that the weights of all
label patterns of a brickwork need one binary variable a gate of the last layer and not one a site: 2^(n/2) numbers,
not 2^n.

Source: Nahum, Vijay and Haah, PRX 8, 021014 (2018); Zhou and Nahum, PRB 99, 174205 (2019), arXiv:1804.09737; Dalzell,
Hunter-Jones and Brandao, PRX Quantum 3, 010333 (2022), arXiv:2011.12277.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Sequence

import numpy as np

from rcbench.arrays import FloatArray
from rcbench.reference.brickwork.layers import Pairs, split_rate

IDENTITY, SWAP = 0, 1
MOST_SITES = 32  # 2^17 weights; every two sites more double time and memory


def gate_rule(q: int) -> FloatArray:
    """(2, 2, 2) weights [label before of the first site, of the second, label after of both]."""
    rule = np.full((2, 2, 2), split_rate(q))
    for label in (IDENTITY, SWAP):
        rule[label, label] = np.eye(2)[label]
    return rule


def noise_rule(shrink: float, q: int) -> FloatArray:
    """(2, 2) weights [before, after] of one site: swap becomes shrink swap + (1 - shrink)/q identity."""
    return np.array([[1.0, 0.0], [(1 - shrink) / q, shrink]])


class LabelWeights:
    """Weights of label patterns, one variable for sites that share a label; gates and noise act on them in place.

    Args:
        start: (n, 2) weights of the labels of each site before any gate.
        q: local dimension.
        batch: independent sets of weights, kept on the slowest axis.
    """

    def __init__(self, start: FloatArray, q: int = 2, batch: int = 1) -> None:
        self.start, self.rule = start, gate_rule(q)
        self.weights = np.ones(batch)
        self.variables: list[int] = []  # in the order of the axes of `weights`
        self.owner: list[int | None] = [None] * len(start)
        self.leg: list[FloatArray | None] = [None] * len(start)  # noise since the last gate
        self._next = 0

    def gate(self, first: int, second: int) -> None:
        """A Haar gate on two sites: both get a new label in common."""
        rule = self.rule
        for axis, site in enumerate((first, second)):
            if (leg := self.leg[site]) is not None:
                rule = np.moveaxis(np.tensordot(leg, rule, (1, axis)), 0, axis)
        a, b = self.owner[first], self.owner[second]
        self.owner[first] = self.owner[second] = new = self._next
        self.leg[first] = self.leg[second] = None
        self._next += 1
        if a is None:
            rule = np.tensordot(self.start[first], rule, (0, 0))
            if b is None:
                self._append(new, self.start[second] @ rule)
            else:
                self._one(b, rule, new)
        elif b is None:
            self._one(a, np.tensordot(self.start[second], rule, (0, 1)), new)
        elif a == b:
            self._one(a, np.einsum("aag->ag", rule), new)
        else:
            self._two(a, b, rule, new)

    def noise(self, site: int, rule: FloatArray) -> None:
        """One-site noise after a gate on that site; acts when the site is met again, or at the end."""
        leg = self.leg[site]
        self.leg[site] = rule if leg is None else leg @ rule

    def total(self, end: FloatArray) -> FloatArray:
        """(batch,) sums over all patterns with weights `end`, (n, 2), on the labels of each site."""
        factors = {variable: np.ones(2) for variable in self.variables}
        scale = 1.0
        for site, owner in enumerate(self.owner):
            leg = self.leg[site]
            value = end[site] if leg is None else leg @ end[site]
            if owner is None:
                scale *= float(self.start[site] @ value)
            else:
                factors[owner] = factors[owner] * value
        left = self.weights
        for variable in reversed(self.variables):
            left = left.reshape(-1, 2) @ factors[variable]
        return np.asarray(scale * left)

    def _append(self, new: int, values: FloatArray) -> None:
        self.weights = np.multiply.outer(self.weights, values).ravel()
        self.variables.append(new)

    def _one(self, old: int, rule: FloatArray, new: int) -> None:
        """A rule [old, new] on one variable, which stays only where another site still bears it."""
        place = self.variables.index(old)
        weights = self.weights.reshape(-1, 2, 1 << (len(self.variables) - place - 1))
        if old in self.owner:
            self.weights = np.einsum("xaz,ag->xagz", weights, rule).ravel()
            self.variables.insert(place + 1, new)
        else:
            self.weights = np.einsum("xaz,ag->xgz", weights, rule).ravel()
            self.variables[place] = new

    def _two(self, a: int, b: int, rule: FloatArray, new: int) -> None:
        """A rule [a, b, new] on two variables, each of which stays only where another site still bears it."""
        first, second = self.variables.index(a), self.variables.index(b)
        if first > second:
            first, second, a, b, rule = second, first, b, a, rule.transpose(1, 0, 2)
        count = len(self.variables)
        weights = self.weights.reshape(-1, 2, 1 << (second - first - 1), 2, 1 << (count - second - 1))
        keep_a, keep_b = a in self.owner, b in self.owner
        # the new axis takes the place of one that ends, so that along a line the axes stay in the order of the sites
        out = f"x{'ayg' if keep_a else 'gy'}{'b' if keep_b else ''}z"
        self.weights = np.einsum(f"xaybz,abg->{out}", weights, rule).ravel()
        self.variables[first : second + 1] = [
            *([a] if keep_a else [new]),
            *self.variables[first + 1 : second],
            *([new] if keep_a else []),
            *([b] if keep_b else []),
        ]


def totals(
    start: FloatArray, end: FloatArray, layers: Iterable[Pairs], q: int = 2, noise: Sequence[FloatArray] | None = None
) -> FloatArray:
    """(depth + 1,) sums after 0, 1, .. layers of gates, each gate followed by noise on both its sites where given."""
    return np.array(list(_totals(start, end, layers, q, noise)))


def _totals(
    start: FloatArray, end: FloatArray, layers: Iterable[Pairs], q: int, noise: Sequence[FloatArray] | None
) -> Iterator[float]:
    labels = LabelWeights(start, q)
    yield float(labels.total(end)[0])
    for number, pairs in enumerate(layers):
        for first, second in pairs:
            labels.gate(first, second)
            if noise is not None:
                labels.noise(first, noise[number])
                labels.noise(second, noise[number])
        yield float(labels.total(end)[0])


def product_state(n_qubits: int, q: int) -> FloatArray:
    """(n, 2) weights of a product state after a random gate on every site."""
    weight = 1 / (q * (q + 1))
    return same_on_all(n_qubits, weight, weight)


def same_on_all(n_qubits: int, identity: float, swap: float) -> FloatArray:
    """(n, 2) the same weights of identity and swap on every site."""
    return np.tile(np.array([identity, swap], dtype=np.float64), (n_qubits, 1))
