"""Compiled loops that apply operators to a block of amplitudes.

A block is a contiguous array of floats, 2**bits amplitudes in chunks (see lanes.py). A qubit is known here by its
position, the bit of the amplitude's index that it is; `high` and `low` are positions with high > low. An operator's
numbers `c` are real and imaginary parts in turn, row by row, the qubit at `high` the more significant.

There are three cases by where the positions lie: both count chunks, one is inside a chunk, both are. Positions inside
a chunk are constants of their kernels, since lane exchanges are instructions with a fixed pattern.
"""

from __future__ import annotations

from typing import Any

import numpy as np

from rcbench.engine.compiled import kernel
from rcbench.engine.lanes import choose, choose4, exchange, load, splat, store, width

# the cheapest exact kernel of an operator
ONE, DENSE, DIAGONAL, MIDDLE, QUARTER = range(5)


@kernel
def _times(re, im, a, b):  # type: ignore[no-untyped-def]
    """(re + i im)(a + i b)."""
    return re * a - im * b, im * a + re * b


@kernel
def _row(c, k, r0, m0, r1, m1, r2, m2, r3, m3):  # type: ignore[no-untyped-def]
    """One row of a (4, 4) matrix, from c[k] on, times four registers."""
    a, b = splat(c[k]), splat(c[k + 1])
    re, im = r0 * a - m0 * b, m0 * a + r0 * b
    a, b = splat(c[k + 2]), splat(c[k + 3])
    re, im = re + r1 * a - m1 * b, im + m1 * a + r1 * b
    a, b = splat(c[k + 4]), splat(c[k + 5])
    re, im = re + r2 * a - m2 * b, im + m2 * a + r2 * b
    a, b = splat(c[k + 6]), splat(c[k + 7])
    return re + r3 * a - m3 * b, im + m3 * a + r3 * b


@kernel
def _dense_chunks(buf, bits, high, low, c):  # type: ignore[no-untyped-def]
    w = width(buf)
    far, near, size = (2 << high), (2 << low), (2 << bits)  # strides in floats
    for top in range(0, size, 2 * far):
        for middle in range(top, top + far, 2 * near):
            for i0 in range(middle, middle + near, 2 * w):
                i1, i2, i3 = i0 + near, i0 + far, i0 + far + near
                r0, m0, r1, m1 = load(buf, i0), load(buf, i0 + w), load(buf, i1), load(buf, i1 + w)
                r2, m2, r3, m3 = load(buf, i2), load(buf, i2 + w), load(buf, i3), load(buf, i3 + w)
                re, im = _row(c, 0, r0, m0, r1, m1, r2, m2, r3, m3)
                store(buf, i0, re)
                store(buf, i0 + w, im)
                re, im = _row(c, 8, r0, m0, r1, m1, r2, m2, r3, m3)
                store(buf, i1, re)
                store(buf, i1 + w, im)
                re, im = _row(c, 16, r0, m0, r1, m1, r2, m2, r3, m3)
                store(buf, i2, re)
                store(buf, i2 + w, im)
                re, im = _row(c, 24, r0, m0, r1, m1, r2, m2, r3, m3)
                store(buf, i3, re)
                store(buf, i3 + w, im)


def _make_dense_mixed(bit: int) -> Any:
    @kernel
    def dense_mixed(buf, bits, high, c):  # type: ignore[no-untyped-def]
        w = width(buf)
        far, size = (2 << high), (2 << bits)
        # same: the lane's own amplitude; cross: that of the lane with the other bit. 10 and 2 lie one diagonal further
        a00, b00, e00, f00 = choose(c, 0, 10, bit), choose(c, 1, 11, bit), choose(c, 2, 8, bit), choose(c, 3, 9, bit)
        a01, b01, e01, f01 = choose(c, 4, 14, bit), choose(c, 5, 15, bit), choose(c, 6, 12, bit), choose(c, 7, 13, bit)
        a10, b10, e10, f10 = choose(c, 16, 26, bit), choose(c, 17, 27, bit), choose(c, 18, 24, bit), choose(c, 19, 25, bit)
        a11, b11, e11, f11 = choose(c, 20, 30, bit), choose(c, 21, 31, bit), choose(c, 22, 28, bit), choose(c, 23, 29, bit)
        for top in range(0, size, 2 * far):
            for i0 in range(top, top + far, 2 * w):
                i1 = i0 + far
                r0, m0, r1, m1 = load(buf, i0), load(buf, i0 + w), load(buf, i1), load(buf, i1 + w)
                s0, n0, s1, n1 = exchange(r0, bit), exchange(m0, bit), exchange(r1, bit), exchange(m1, bit)
                re = r0 * a00 - m0 * b00 + s0 * e00 - n0 * f00 + r1 * a01 - m1 * b01 + s1 * e01 - n1 * f01
                im = m0 * a00 + r0 * b00 + n0 * e00 + s0 * f00 + m1 * a01 + r1 * b01 + n1 * e01 + s1 * f01
                store(buf, i0, re)
                store(buf, i0 + w, im)
                re = r0 * a10 - m0 * b10 + s0 * e10 - n0 * f10 + r1 * a11 - m1 * b11 + s1 * e11 - n1 * f11
                im = m0 * a10 + r0 * b10 + n0 * e10 + s0 * f10 + m1 * a11 + r1 * b11 + n1 * e11 + s1 * f11
                store(buf, i1, re)
                store(buf, i1 + w, im)

    return dense_mixed


def _make_dense_inside(high: int, low: int) -> Any:
    @kernel
    def dense_inside(buf, bits, c):  # type: ignore[no-untyped-def]
        w = width(buf)
        # row 2h + l of the matrix for a lane with bits h and l; its column is the lane's own index with bits flipped
        a0, b0 = choose4(c, 0, 20, 10, high, low), choose4(c, 1, 20, 10, high, low)
        a1, b1 = choose4(c, 2, 20, 6, high, low), choose4(c, 3, 20, 6, high, low)
        a2, b2 = choose4(c, 4, 12, 10, high, low), choose4(c, 5, 12, 10, high, low)
        a3, b3 = choose4(c, 6, 12, 6, high, low), choose4(c, 7, 12, 6, high, low)
        for i in range(0, 2 << bits, 2 * w):
            r0, m0 = load(buf, i), load(buf, i + w)
            r1, m1 = exchange(r0, low), exchange(m0, low)
            r2, m2 = exchange(r0, high), exchange(m0, high)
            r3, m3 = exchange(r1, high), exchange(m1, high)
            re = r0 * a0 - m0 * b0 + r1 * a1 - m1 * b1 + r2 * a2 - m2 * b2 + r3 * a3 - m3 * b3
            im = m0 * a0 + r0 * b0 + m1 * a1 + r1 * b1 + m2 * a2 + r2 * b2 + m3 * a3 + r3 * b3
            store(buf, i, re)
            store(buf, i + w, im)

    return dense_inside


_dense_mixed0, _dense_mixed1, _dense_mixed2, _dense_mixed3 = (_make_dense_mixed(bit) for bit in range(4))
_dense_inside10, _dense_inside20, _dense_inside30, _dense_inside21, _dense_inside31, _dense_inside32 = (
    _make_dense_inside(high, low) for high, low in ((1, 0), (2, 0), (3, 0), (2, 1), (3, 1), (3, 2))
)


@kernel
def dense(buf, bits, high, low, c):  # type: ignore[no-untyped-def]
    """Any operator on two qubits."""
    w = width(buf)
    if (1 << low) >= w:
        _dense_chunks(buf, bits, high, low, c)
    elif (1 << high) >= w:
        if low == 0:
            _dense_mixed0(buf, bits, high, c)
        elif low == 1:
            _dense_mixed1(buf, bits, high, c)
        elif low == 2:
            _dense_mixed2(buf, bits, high, c)
        else:
            _dense_mixed3(buf, bits, high, c)
    elif low == 2:
        _dense_inside32(buf, bits, c)
    elif low == 1:
        if high == 2:
            _dense_inside21(buf, bits, c)
        else:
            _dense_inside31(buf, bits, c)
    elif high == 1:
        _dense_inside10(buf, bits, c)
    elif high == 2:
        _dense_inside20(buf, bits, c)
    else:
        _dense_inside30(buf, bits, c)


@kernel
def _one_chunks(buf, bits, high, c):  # type: ignore[no-untyped-def]
    w = width(buf)
    far, size = (2 << high), (2 << bits)
    for top in range(0, size, 2 * far):
        for i0 in range(top, top + far, 2 * w):
            i1 = i0 + far
            r0, m0, r1, m1 = load(buf, i0), load(buf, i0 + w), load(buf, i1), load(buf, i1 + w)
            x, y = _times(r0, m0, splat(c[0]), splat(c[1]))
            re, im = _times(r1, m1, splat(c[2]), splat(c[3]))
            store(buf, i0, x + re)
            store(buf, i0 + w, y + im)
            x, y = _times(r0, m0, splat(c[4]), splat(c[5]))
            re, im = _times(r1, m1, splat(c[6]), splat(c[7]))
            store(buf, i1, x + re)
            store(buf, i1 + w, y + im)


def _make_one_inside(bit: int) -> Any:
    @kernel
    def one_inside(buf, bits, c):  # type: ignore[no-untyped-def]
        w = width(buf)
        a, b, e, f = choose(c, 0, 6, bit), choose(c, 1, 7, bit), choose(c, 2, 4, bit), choose(c, 3, 5, bit)
        for i in range(0, 2 << bits, 2 * w):
            re, im = load(buf, i), load(buf, i + w)
            s, t = exchange(re, bit), exchange(im, bit)
            store(buf, i, re * a - im * b + s * e - t * f)
            store(buf, i + w, im * a + re * b + t * e + s * f)

    return one_inside


_one_inside0, _one_inside1, _one_inside2, _one_inside3 = (_make_one_inside(bit) for bit in range(4))


@kernel
def one(buf, bits, high, c):  # type: ignore[no-untyped-def]
    """Any operator on one qubit."""
    if (1 << high) >= width(buf):
        _one_chunks(buf, bits, high, c)
    elif high == 0:
        _one_inside0(buf, bits, c)
    elif high == 1:
        _one_inside1(buf, bits, c)
    elif high == 2:
        _one_inside2(buf, bits, c)
    else:
        _one_inside3(buf, bits, c)


@kernel
def diagonal(buf, bits, high, low, c):  # type: ignore[no-untyped-def]
    """Phases on two qubits; c holds the four of them, qubit at `high` first."""
    w = width(buf)
    factors = np.empty(8 * w, dtype=buf.dtype)  # a chunk of factors for each value of the bits that count chunks
    for chunk in range(4):
        for lane in range(w):
            place = lane
            if (1 << high) >= w:
                place |= (chunk >> 1) << high
            if (1 << low) >= w:
                place |= (chunk & 1) << low
            which = 2 * (place >> high & 1) + (place >> low & 1)
            factors[2 * w * chunk + lane] = c[2 * which]
            factors[2 * w * chunk + w + lane] = c[2 * which + 1]
    high_chunk, low_chunk = (2 << high), (2 << low)
    for i in range(0, 2 << bits, 2 * w):
        factor = 2 * w * (2 * ((i & high_chunk) != 0) + ((i & low_chunk) != 0))
        re, im = _times(load(buf, i), load(buf, i + w), load(factors, factor), load(factors, factor + w))
        store(buf, i, re)
        store(buf, i + w, im)


@kernel
def middle(buf, bits, high, low, c):  # type: ignore[no-untyped-def]
    """An operator that mixes |01> and |10> and multiplies |00> and |11> (swap-like); both positions count chunks."""
    w = width(buf)
    far, near, size = (2 << high), (2 << low), (2 << bits)
    for top in range(0, size, 2 * far):
        for start in range(top, top + far, 2 * near):
            for i0 in range(start, start + near, 2 * w):
                i1, i2, i3 = i0 + near, i0 + far, i0 + far + near
                r1, m1, r2, m2 = load(buf, i1), load(buf, i1 + w), load(buf, i2), load(buf, i2 + w)
                x, y = _times(r1, m1, splat(c[10]), splat(c[11]))
                re, im = _times(r2, m2, splat(c[12]), splat(c[13]))
                store(buf, i1, x + re)
                store(buf, i1 + w, y + im)
                x, y = _times(r1, m1, splat(c[18]), splat(c[19]))
                re, im = _times(r2, m2, splat(c[20]), splat(c[21]))
                store(buf, i2, x + re)
                store(buf, i2 + w, y + im)
                if c[0] != 1 or c[1] != 0:
                    re, im = _times(load(buf, i0), load(buf, i0 + w), splat(c[0]), splat(c[1]))
                    store(buf, i0, re)
                    store(buf, i0 + w, im)
                if c[30] != 1 or c[31] != 0:
                    re, im = _times(load(buf, i3), load(buf, i3 + w), splat(c[30]), splat(c[31]))
                    store(buf, i3, re)
                    store(buf, i3 + w, im)


# Quarter turns: any one-qubit gate whose entries have equal magnitude is phases, then [[1, -1], [1, 1]], then phases.
# Two of them and phases after, on two qubits: c holds the four phases (with the factor 1/2), then -1 and 1.


@kernel
def _quarter_chunks(buf, bits, high, low, c):  # type: ignore[no-untyped-def]
    w = width(buf)
    far, near, size = (2 << high), (2 << low), (2 << bits)
    for top in range(0, size, 2 * far):
        for start in range(top, top + far, 2 * near):
            for i0 in range(start, start + near, 2 * w):
                i1, i2, i3 = i0 + near, i0 + far, i0 + far + near
                r0, m0, r1, m1 = load(buf, i0), load(buf, i0 + w), load(buf, i1), load(buf, i1 + w)
                r2, m2, r3, m3 = load(buf, i2), load(buf, i2 + w), load(buf, i3), load(buf, i3 + w)
                r0, r1, m0, m1 = r0 - r1, r0 + r1, m0 - m1, m0 + m1
                r2, r3, m2, m3 = r2 - r3, r2 + r3, m2 - m3, m2 + m3
                re, im = _times(r0 - r2, m0 - m2, splat(c[0]), splat(c[1]))
                store(buf, i0, re)
                store(buf, i0 + w, im)
                re, im = _times(r1 - r3, m1 - m3, splat(c[2]), splat(c[3]))
                store(buf, i1, re)
                store(buf, i1 + w, im)
                re, im = _times(r0 + r2, m0 + m2, splat(c[4]), splat(c[5]))
                store(buf, i2, re)
                store(buf, i2 + w, im)
                re, im = _times(r1 + r3, m1 + m3, splat(c[6]), splat(c[7]))
                store(buf, i3, re)
                store(buf, i3 + w, im)


def _make_quarter_mixed(bit: int) -> Any:
    @kernel
    def quarter_mixed(buf, bits, high, c):  # type: ignore[no-untyped-def]
        w = width(buf)
        far, size = (2 << high), (2 << bits)
        sign = choose(c, 8, 9, bit)
        a0, b0, a1, b1 = choose(c, 0, 2, bit), choose(c, 1, 3, bit), choose(c, 4, 6, bit), choose(c, 5, 7, bit)
        for top in range(0, size, 2 * far):
            for i0 in range(top, top + far, 2 * w):
                i1 = i0 + far
                r0, m0, r1, m1 = load(buf, i0), load(buf, i0 + w), load(buf, i1), load(buf, i1 + w)
                r0, m0 = r0 + sign * exchange(r0, bit), m0 + sign * exchange(m0, bit)
                r1, m1 = r1 + sign * exchange(r1, bit), m1 + sign * exchange(m1, bit)
                re, im = _times(r0 - r1, m0 - m1, a0, b0)
                store(buf, i0, re)
                store(buf, i0 + w, im)
                re, im = _times(r0 + r1, m0 + m1, a1, b1)
                store(buf, i1, re)
                store(buf, i1 + w, im)

    return quarter_mixed


def _make_quarter_inside(high: int, low: int) -> Any:
    @kernel
    def quarter_inside(buf, bits, c):  # type: ignore[no-untyped-def]
        w = width(buf)
        up, down = choose(c, 8, 9, high), choose(c, 8, 9, low)
        a, b = choose4(c, 0, 4, 2, high, low), choose4(c, 1, 4, 2, high, low)
        for i in range(0, 2 << bits, 2 * w):
            re, im = load(buf, i), load(buf, i + w)
            re, im = re + down * exchange(re, low), im + down * exchange(im, low)
            re, im = re + up * exchange(re, high), im + up * exchange(im, high)
            re, im = _times(re, im, a, b)
            store(buf, i, re)
            store(buf, i + w, im)

    return quarter_inside


_quarter_mixed0, _quarter_mixed1, _quarter_mixed2, _quarter_mixed3 = (_make_quarter_mixed(bit) for bit in range(4))
_quarter_inside10, _quarter_inside20, _quarter_inside30, _quarter_inside21, _quarter_inside31, _quarter_inside32 = (
    _make_quarter_inside(high, low) for high, low in ((1, 0), (2, 0), (3, 0), (2, 1), (3, 1), (3, 2))
)


@kernel
def quarter(buf, bits, high, low, c):  # type: ignore[no-untyped-def]
    """A quarter turn on each of two qubits, then phases."""
    w = width(buf)
    if (1 << low) >= w:
        _quarter_chunks(buf, bits, high, low, c)
    elif (1 << high) >= w:
        if low == 0:
            _quarter_mixed0(buf, bits, high, c)
        elif low == 1:
            _quarter_mixed1(buf, bits, high, c)
        elif low == 2:
            _quarter_mixed2(buf, bits, high, c)
        else:
            _quarter_mixed3(buf, bits, high, c)
    elif low == 2:
        _quarter_inside32(buf, bits, c)
    elif low == 1:
        if high == 2:
            _quarter_inside21(buf, bits, c)
        else:
            _quarter_inside31(buf, bits, c)
    elif high == 1:
        _quarter_inside10(buf, bits, c)
    elif high == 2:
        _quarter_inside20(buf, bits, c)
    else:
        _quarter_inside30(buf, bits, c)


@kernel
def apply_operator(buf, bits, kind, high, low, c):  # type: ignore[no-untyped-def]
    """One operator of a program on one block."""
    if kind == ONE:
        one(buf, bits, high, c)
    elif kind == QUARTER:
        quarter(buf, bits, high, low, c)
    elif kind == DIAGONAL:
        diagonal(buf, bits, high, low, c)
    elif kind == MIDDLE and (1 << low) >= width(buf):
        middle(buf, bits, high, low, c)
    else:
        dense(buf, bits, high, low, c)
