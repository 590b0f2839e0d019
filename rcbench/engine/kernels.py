"""Compiled loops that apply operators to a block of amplitudes.

A block is a contiguous array of floats: 2**bits amplitudes in chunks (see lanes.py), and four chunks to work in. A
qubit is known here by its position, the bit of the amplitude's index that it is; `high` and `low` are positions with
high > low. The numbers `c` of an operator are real and imaginary parts in turn, row by row, the qubit at `high` the
more significant.

There are three cases by where the positions lie: both count chunks, one is inside a chunk, both are. Positions inside
a chunk are constants of their kernels, since lane exchanges are instructions with a fixed pattern.
"""

from __future__ import annotations

from typing import Any

from rcbench.engine.compiled import kernel, part
from rcbench.engine.lanes import choose, choose4, entry, exchange, lanes, load, mix2, mix4, store, turn

# the cheapest exact kernel of an operator
ONE, DENSE, DIAGONAL, MIDDLE, QUARTER = range(5)
INSIDE = ((1, 0), (2, 0), (3, 0), (2, 1), (3, 1), (3, 2))  # pairs of positions inside the largest chunk


@part
def _dense_chunks(block, bits, high, low, c):  # type: ignore[no-untyped-def]
    step, far, near = 2 * lanes(block), 2 << high, 2 << low  # in floats
    for top in range(0, 2 << bits, 2 * far):
        for start in range(top, top + far, 2 * near):
            for i0 in range(start, start + near, step):
                i1, i2, i3 = i0 + near, i0 + far, i0 + far + near
                x0, x1, x2, x3 = load(block, i0), load(block, i1), load(block, i2), load(block, i3)
                store(block, i0, mix4(x0, entry(c, 0), x1, entry(c, 1), x2, entry(c, 2), x3, entry(c, 3)))
                store(block, i1, mix4(x0, entry(c, 4), x1, entry(c, 5), x2, entry(c, 6), x3, entry(c, 7)))
                store(block, i2, mix4(x0, entry(c, 8), x1, entry(c, 9), x2, entry(c, 10), x3, entry(c, 11)))
                store(block, i3, mix4(x0, entry(c, 12), x1, entry(c, 13), x2, entry(c, 14), x3, entry(c, 15)))


def _make_dense_mixed(bit: int) -> Any:
    @part
    def dense_mixed(block, bits, high, c):  # type: ignore[no-untyped-def]
        step, far = 2 * lanes(block), 2 << high
        # the lane's own amplitude, then that of the lane with the other bit, for each of the two chunks
        own00, other00, own01, other01 = (
            choose(c, 0, 5, bit),
            choose(c, 1, 4, bit),
            choose(c, 2, 7, bit),
            choose(c, 3, 6, bit),
        )
        own10, other10, own11, other11 = (
            choose(c, 8, 13, bit),
            choose(c, 9, 12, bit),
            choose(c, 10, 15, bit),
            choose(c, 11, 14, bit),
        )
        for top in range(0, 2 << bits, 2 * far):
            for i0 in range(top, top + far, step):
                x0, x1 = load(block, i0), load(block, i0 + far)
                y0, y1 = exchange(x0, bit), exchange(x1, bit)
                store(block, i0, mix4(x0, own00, y0, other00, x1, own01, y1, other01))
                store(block, i0 + far, mix4(x0, own10, y0, other10, x1, own11, y1, other11))

    return dense_mixed


def _make_dense_inside(high: int, low: int) -> Any:
    @part
    def dense_inside(block, bits, c):  # type: ignore[no-untyped-def]
        # a lane with bits h, l is row 2h + l; the columns are its index with no, one, the other and both bits flipped
        own, flip_low = choose4(c, 0, 10, 5, high, low), choose4(c, 1, 10, 3, high, low)
        flip_high, flip_both = choose4(c, 2, 6, 5, high, low), choose4(c, 3, 6, 3, high, low)
        for i in range(0, 2 << bits, 2 * lanes(block)):
            x = load(block, i)
            y, z = exchange(x, low), exchange(x, high)
            store(block, i, mix4(x, own, y, flip_low, z, flip_high, exchange(y, high), flip_both))

    return dense_inside


_dense_mixed0, _dense_mixed1, _dense_mixed2, _dense_mixed3 = (_make_dense_mixed(bit) for bit in range(4))
_dense_inside10, _dense_inside20, _dense_inside30, _dense_inside21, _dense_inside31, _dense_inside32 = (
    _make_dense_inside(*pair) for pair in INSIDE
)


@part
def dense(block, bits, high, low, c):  # type: ignore[no-untyped-def]
    """Any operator on two qubits."""
    w = lanes(block)
    if (1 << low) >= w:
        _dense_chunks(block, bits, high, low, c)
    elif (1 << high) >= w:
        if low == 0:
            _dense_mixed0(block, bits, high, c)
        elif low == 1:
            _dense_mixed1(block, bits, high, c)
        elif low == 2:
            _dense_mixed2(block, bits, high, c)
        else:
            _dense_mixed3(block, bits, high, c)
    elif low == 2:
        _dense_inside32(block, bits, c)
    elif low == 1:
        if high == 2:
            _dense_inside21(block, bits, c)
        else:
            _dense_inside31(block, bits, c)
    elif high == 1:
        _dense_inside10(block, bits, c)
    elif high == 2:
        _dense_inside20(block, bits, c)
    else:
        _dense_inside30(block, bits, c)


@part
def _one_chunks(block, bits, high, c):  # type: ignore[no-untyped-def]
    step, far = 2 * lanes(block), 2 << high
    for top in range(0, 2 << bits, 2 * far):
        for i0 in range(top, top + far, step):
            x0, x1 = load(block, i0), load(block, i0 + far)
            store(block, i0, mix2(x0, entry(c, 0), x1, entry(c, 1)))
            store(block, i0 + far, mix2(x0, entry(c, 2), x1, entry(c, 3)))


def _make_one_inside(bit: int) -> Any:
    @part
    def one_inside(block, bits, c):  # type: ignore[no-untyped-def]
        own, other = choose(c, 0, 3, bit), choose(c, 1, 2, bit)
        for i in range(0, 2 << bits, 2 * lanes(block)):
            x = load(block, i)
            store(block, i, mix2(x, own, exchange(x, bit), other))

    return one_inside


_one_inside0, _one_inside1, _one_inside2, _one_inside3 = (_make_one_inside(bit) for bit in range(4))


@part
def one(block, bits, high, c):  # type: ignore[no-untyped-def]
    """Any operator on one qubit."""
    if (1 << high) >= lanes(block):
        _one_chunks(block, bits, high, c)
    elif high == 0:
        _one_inside0(block, bits, c)
    elif high == 1:
        _one_inside1(block, bits, c)
    elif high == 2:
        _one_inside2(block, bits, c)
    else:
        _one_inside3(block, bits, c)


@part
def diagonal(block, bits, high, low, c):  # type: ignore[no-untyped-def]
    """Phases on two qubits; c holds the four of them, qubit at `high` first."""
    w = lanes(block)
    step, far, near = 2 * w, 2 << high, 2 << low
    factors = 2 << bits  # behind the block: a chunk of factors for each value of the bits that count chunks
    for chunk in range(4):
        for lane in range(w):
            place = lane
            if (1 << high) >= w:
                place |= (chunk >> 1) << high
            if (1 << low) >= w:
                place |= (chunk & 1) << low
            which = 2 * (place >> high & 1) + (place >> low & 1)
            block[factors + step * chunk + lane] = c[2 * which]
            block[factors + step * chunk + w + lane] = c[2 * which + 1]
    for i in range(0, 2 << bits, step):
        chunk = 2 * ((i & far) != 0) + ((i & near) != 0)
        store(block, i, load(block, i) * load(block, factors + step * chunk))


@part
def middle(block, bits, high, low, c):  # type: ignore[no-untyped-def]
    """An operator that mixes |01> and |10> and multiplies |00> and |11> (swap-like); both positions count chunks."""
    step, far, near = 2 * lanes(block), 2 << high, 2 << low
    first, last = c[0] != 1 or c[1] != 0, c[30] != 1 or c[31] != 0
    for top in range(0, 2 << bits, 2 * far):
        for start in range(top, top + far, 2 * near):
            for i0 in range(start, start + near, step):
                i1, i2, i3 = i0 + near, i0 + far, i0 + far + near
                x1, x2 = load(block, i1), load(block, i2)
                store(block, i1, mix2(x1, entry(c, 5), x2, entry(c, 6)))
                store(block, i2, mix2(x1, entry(c, 9), x2, entry(c, 10)))
                if first:
                    store(block, i0, load(block, i0) * entry(c, 0))
                if last:
                    store(block, i3, load(block, i3) * entry(c, 15))


# Quarter turns: any one-qubit gate whose entries have equal magnitude is phases, then [[1, -1], [1, 1]], then phases.
# Two of them, on two qubits, and phases after: c holds the four phases, with the factor 1/2.


@part
def _quarter_chunks(block, bits, high, low, c):  # type: ignore[no-untyped-def]
    step, far, near = 2 * lanes(block), 2 << high, 2 << low
    for top in range(0, 2 << bits, 2 * far):
        for start in range(top, top + far, 2 * near):
            for i0 in range(start, start + near, step):
                i1, i2, i3 = i0 + near, i0 + far, i0 + far + near
                x0, x1, x2, x3 = load(block, i0), load(block, i1), load(block, i2), load(block, i3)
                y0, y1, y2, y3 = x0 - x1, x0 + x1, x2 - x3, x2 + x3
                store(block, i0, (y0 - y2) * entry(c, 0))
                store(block, i1, (y1 - y3) * entry(c, 1))
                store(block, i2, (y0 + y2) * entry(c, 2))
                store(block, i3, (y1 + y3) * entry(c, 3))


def _make_quarter_mixed(bit: int) -> Any:
    @part
    def quarter_mixed(block, bits, high, c):  # type: ignore[no-untyped-def]
        step, far = 2 * lanes(block), 2 << high
        phase0, phase1 = choose(c, 0, 1, bit), choose(c, 2, 3, bit)
        for top in range(0, 2 << bits, 2 * far):
            for i0 in range(top, top + far, step):
                x0, x1 = turn(load(block, i0), bit), turn(load(block, i0 + far), bit)
                store(block, i0, (x0 - x1) * phase0)
                store(block, i0 + far, (x0 + x1) * phase1)

    return quarter_mixed


def _make_quarter_inside(high: int, low: int) -> Any:
    @part
    def quarter_inside(block, bits, c):  # type: ignore[no-untyped-def]
        phase = choose4(c, 0, 2, 1, high, low)
        for i in range(0, 2 << bits, 2 * lanes(block)):
            store(block, i, turn(turn(load(block, i), low), high) * phase)

    return quarter_inside


_quarter_mixed0, _quarter_mixed1, _quarter_mixed2, _quarter_mixed3 = (_make_quarter_mixed(bit) for bit in range(4))
_quarter_inside10, _quarter_inside20, _quarter_inside30, _quarter_inside21, _quarter_inside31, _quarter_inside32 = (
    _make_quarter_inside(*pair) for pair in INSIDE
)


@part
def quarter(block, bits, high, low, c):  # type: ignore[no-untyped-def]
    """A quarter turn on each of two qubits, then phases."""
    w = lanes(block)
    if (1 << low) >= w:
        _quarter_chunks(block, bits, high, low, c)
    elif (1 << high) >= w:
        if low == 0:
            _quarter_mixed0(block, bits, high, c)
        elif low == 1:
            _quarter_mixed1(block, bits, high, c)
        elif low == 2:
            _quarter_mixed2(block, bits, high, c)
        else:
            _quarter_mixed3(block, bits, high, c)
    elif low == 2:
        _quarter_inside32(block, bits, c)
    elif low == 1:
        if high == 2:
            _quarter_inside21(block, bits, c)
        else:
            _quarter_inside31(block, bits, c)
    elif high == 1:
        _quarter_inside10(block, bits, c)
    elif high == 2:
        _quarter_inside20(block, bits, c)
    else:
        _quarter_inside30(block, bits, c)


@kernel
def apply_operator(block, bits, kind, high, low, c):  # type: ignore[no-untyped-def]
    """One operator of a program on one block."""
    if kind == ONE:
        one(block, bits, high, c)
    elif kind == QUARTER:
        quarter(block, bits, high, low, c)
    elif kind == DIAGONAL:
        diagonal(block, bits, high, low, c)
    elif kind == MIDDLE and (1 << low) >= lanes(block):
        middle(block, bits, high, low, c)
    else:
        dense(block, bits, high, low, c)
