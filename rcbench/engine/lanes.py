"""Vectors of real numbers as wide as the processor's registers, for the compiled kernels.

Amplitudes inside a block lie in chunks: WIDTH real parts, then WIDTH imaginary parts. Gates on the qubits that count
chunks are plain arithmetic between chunks; gates on the qubits inside a chunk exchange lanes within a register. So no
qubit is slow, and nothing depends on whether a compiler finds out by itself that a loop can be vectorised.

The functions can be called in compiled code only. `load` and `store` take a contiguous array of floats.
"""

from __future__ import annotations

import operator
from collections.abc import Callable
from typing import Any

import llvmlite.binding
from llvmlite import ir
from numba.core import types
from numba.extending import intrinsic, models, overload, register_model


def _register_bytes() -> int:
    features = llvmlite.binding.get_host_cpu_features()
    return 64 if features.get("avx512f") else 32 if features.get("avx") else 16


REGISTER_BYTES = _register_bytes()
WIDTH = {"float32": REGISTER_BYTES // 4, "float64": REGISTER_BYTES // 8}
LANE_BITS = {name: width.bit_length() - 1 for name, width in WIDTH.items()}


class Lanes(types.Type):  # type: ignore[misc]
    """The numba type of one register of floats."""

    def __init__(self, element: Any) -> None:
        self.element = element
        self.width = WIDTH[element.name]
        super().__init__(name=f"lanes({self.width} x {element.name})")


@register_model(Lanes)
class _LanesModel(models.PrimitiveModel):  # type: ignore[misc]
    def __init__(self, manager: Any, lanes: Lanes) -> None:
        element = ir.FloatType() if lanes.element.bitwidth == 32 else ir.DoubleType()
        super().__init__(manager, lanes, ir.VectorType(element, lanes.width))


def _pointer(context: Any, builder: Any, array_type: Any, array: Any, index: Any, lanes: Lanes) -> Any:
    data = context.make_array(array_type)(context, builder, array).data
    return builder.bitcast(builder.gep(data, [index]), context.get_value_type(lanes).as_pointer())


def _shuffled(builder: Any, first: Any, second: Any, order: list[int]) -> Any:
    mask = ir.Constant(ir.VectorType(ir.IntType(32), len(order)), order)
    return builder.shuffle_vector(first, second, mask)


@intrinsic  # type: ignore[untyped-decorator]
def load(typing: Any, array: Any, index: Any) -> Any:
    """WIDTH numbers of an array from an index on."""
    lanes = Lanes(array.dtype)

    def generate(context: Any, builder: Any, signature: Any, args: Any) -> Any:
        pointer = _pointer(context, builder, array, args[0], args[1], lanes)
        return builder.load(pointer, align=array.dtype.bitwidth // 8)

    return lanes(array, types.intp), generate


@intrinsic  # type: ignore[untyped-decorator]
def store(typing: Any, array: Any, index: Any, value: Any) -> Any:
    """Write a register into an array from an index on."""

    def generate(context: Any, builder: Any, signature: Any, args: Any) -> Any:
        pointer = _pointer(context, builder, array, args[0], args[1], value)
        builder.store(args[2], pointer, align=array.dtype.bitwidth // 8)
        return context.get_dummy_value()

    return types.void(array, types.intp, value), generate


@intrinsic  # type: ignore[untyped-decorator]
def splat(typing: Any, number: Any) -> Any:
    """A register with the same number in every lane."""
    lanes = Lanes(number)

    def generate(context: Any, builder: Any, signature: Any, args: Any) -> Any:
        empty = ir.Constant(context.get_value_type(lanes), ir.Undefined)
        one = builder.insert_element(empty, args[0], ir.IntType(32)(0))
        return _shuffled(builder, one, empty, [0] * lanes.width)

    return lanes(number), generate


@intrinsic(prefer_literal=True)  # type: ignore[untyped-decorator]
def exchange(typing: Any, value: Any, bit: Any) -> Any:
    """The register with each lane swapped for the one whose index differs in one bit; the bit is a constant."""
    flip = 1 << bit.literal_value

    def generate(context: Any, builder: Any, signature: Any, args: Any) -> Any:
        return _shuffled(builder, args[0], args[0], [lane ^ flip if flip < value.width else lane for lane in range(value.width)])

    return value(value, bit), generate


@intrinsic  # type: ignore[untyped-decorator]
def width(typing: Any, array: Any) -> Any:
    """Numbers in a register of an array's type."""

    def generate(context: Any, builder: Any, signature: Any, args: Any) -> Any:
        return context.get_constant(types.intp, Lanes(array.dtype).width)

    return types.intp(array), generate


@intrinsic(prefer_literal=True)  # type: ignore[untyped-decorator]
def choose(typing: Any, array: Any, zero: Any, one: Any, bit: Any) -> Any:
    """array[zero] in the lanes whose index has a 0 in one bit, array[one] in the others; the bit is a constant."""
    lanes = Lanes(array.dtype)
    place = bit.literal_value

    def generate(context: Any, builder: Any, signature: Any, args: Any) -> Any:
        data = context.make_array(array)(context, builder, args[0]).data
        indices = [context.cast(builder, arg, kind, types.intp) for arg, kind in zip(args[1:3], signature.args[1:3], strict=True)]
        return _from_memory(context, builder, data, indices, lanes, [lane >> place & 1 for lane in range(lanes.width)])

    return lanes(array, zero, one, bit), generate


@intrinsic(prefer_literal=True)  # type: ignore[untyped-decorator]
def choose4(typing: Any, array: Any, first: Any, stride_high: Any, stride_low: Any, high: Any, low: Any) -> Any:
    """array[first + stride_high * (bit `high` of the lane's index) + stride_low * (bit `low`)]; the bits are constants."""
    lanes = Lanes(array.dtype)
    bits = high.literal_value, low.literal_value

    def generate(context: Any, builder: Any, signature: Any, args: Any) -> Any:
        data = context.make_array(array)(context, builder, args[0]).data
        start, up, across = (
            context.cast(builder, arg, kind, types.intp) for arg, kind in zip(args[1:4], signature.args[1:4], strict=True)
        )
        second = builder.add(start, up)
        indices = [start, builder.add(start, across), second, builder.add(second, across)]
        order = [2 * (lane >> bits[0] & 1) + (lane >> bits[1] & 1) for lane in range(lanes.width)]
        return _from_memory(context, builder, data, indices, lanes, order)

    return lanes(array, first, stride_high, stride_low, high, low), generate


def _from_memory(context: Any, builder: Any, data: Any, indices: list[Any], lanes: Lanes, order: list[int]) -> Any:
    """A register whose lanes are a few numbers of memory, in the order given."""
    empty = ir.Constant(context.get_value_type(lanes), ir.Undefined)
    few = empty
    for place, index in enumerate(indices):
        few = builder.insert_element(few, builder.load(builder.gep(data, [index])), ir.IntType(32)(place))
    return _shuffled(builder, few, empty, order)


def _two_register_shuffle(name: str, doc: str, order: Callable[[int], list[int]]) -> Any:
    def typer(typing: Any, first: Any, second: Any) -> Any:
        def generate(context: Any, builder: Any, signature: Any, args: Any) -> Any:
            return _shuffled(builder, args[0], args[1], order(first.width))

        return first(first, second), generate

    typer.__name__, typer.__doc__ = name, doc
    return intrinsic(typer)


evens = _two_register_shuffle("evens", "Lanes 0, 2, 4, ... of two registers.", lambda w: list(range(0, 2 * w, 2)))
odds = _two_register_shuffle("odds", "Lanes 1, 3, 5, ... of two registers.", lambda w: list(range(1, 2 * w, 2)))
zip_low = _two_register_shuffle(
    "zip_low", "First halves of two registers, lane by lane.", lambda w: [i // 2 + w * (i % 2) for i in range(w)]
)
zip_high = _two_register_shuffle(
    "zip_high", "Second halves of two registers, lane by lane.", lambda w: [(w + i) // 2 + w * (i % 2) for i in range(w)]
)


def _arithmetic(name: str, symbol: Callable[[Any, Any], Any]) -> None:
    """Let compiled code write x + y, x - y and x * y for registers; products and sums may become one instruction."""

    @intrinsic  # type: ignore[untyped-decorator]
    def operate(typing: Any, x: Any, y: Any) -> Any:
        def generate(context: Any, builder: Any, signature: Any, args: Any) -> Any:
            return getattr(builder, name)(args[0], args[1], flags=("fast",))

        return x(x, y), generate

    @overload(symbol)  # type: ignore[untyped-decorator]
    def implementation(x, y):  # type: ignore[no-untyped-def]
        if isinstance(x, Lanes) and isinstance(y, Lanes):
            return lambda x, y: operate(x, y)
        return None


_arithmetic("fadd", operator.add)
_arithmetic("fsub", operator.sub)
_arithmetic("fmul", operator.mul)
