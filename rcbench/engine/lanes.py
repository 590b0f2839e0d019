"""Registers of amplitudes, as wide as the processor's, for the compiled kernels.

Amplitudes inside a block lie in chunks: a register of real parts, then one of imaginary parts. Gates on the qubits that
count chunks are plain arithmetic between chunks; gates on the qubits inside a chunk exchange lanes within a register.
So no qubit is slow, and nothing depends on whether a compiler finds out by itself that a loop can be vectorised.

Compiled code can call the functions here and write x + y, x - y and x * y for registers of amplitudes. Arrays are
contiguous floats; `bit` arguments are constants.
"""

from __future__ import annotations

import operator
from collections.abc import Callable
from typing import Any

import llvmlite.binding  # type: ignore[import-untyped]
import llvmlite.ir  # type: ignore[import-untyped]
import numba.core.cgutils
import numba.core.imputils
import numba.core.typing.templates
import numba.extending
from numba.core import types as numba_types

# numba and llvmlite are typed in some of the supported versions only
types: Any = numba_types
ir: Any = llvmlite.ir
_extending: Any = numba.extending
register_model: Any = numba.extending.register_model
models: Any = numba.extending.models
lower_builtin: Any = numba.core.imputils.lower_builtin
infer_global: Any = numba.core.typing.templates.infer_global
AbstractTemplate: Any = numba.core.typing.templates.AbstractTemplate
cgutils: Any = numba.core.cgutils


def intrinsic(function: Any) -> Any:
    """A function that writes instructions for compiled code."""
    return _extending.intrinsic(function)


def intrinsic_with_constants(function: Any) -> Any:
    """The same for arguments that must be known when it is compiled."""
    return _extending.intrinsic(prefer_literal=True)(function)


def _register_bytes() -> int:
    features = llvmlite.binding.get_host_cpu_features()
    return 64 if features.get("avx512f") else 32 if features.get("avx") else 16


REGISTER_BYTES = _register_bytes()
LANES = {"float32": REGISTER_BYTES // 4, "float64": REGISTER_BYTES // 8}


class Amplitudes(types.Type):  # type: ignore[misc]
    """The numba type of a register of real parts and one of imaginary parts."""

    def __init__(self, element: Any) -> None:
        self.element, self.lanes = element, LANES[element.name]
        super().__init__(name=f"amplitudes({self.lanes} x {element.name})")


def _register(kind: Amplitudes) -> Any:
    element = ir.FloatType() if kind.element.bitwidth == 32 else ir.DoubleType()
    return ir.VectorType(element, kind.lanes)


@register_model(Amplitudes)
class _AmplitudesModel(models.PrimitiveModel):  # type: ignore[misc]
    def __init__(self, manager: Any, kind: Amplitudes) -> None:
        register = _register(kind)
        super().__init__(manager, kind, ir.LiteralStructType([register, register]))


def _pack(builder: Any, re: Any, im: Any) -> Any:
    empty = ir.Constant(ir.LiteralStructType([re.type, im.type]), ir.Undefined)
    return builder.insert_value(builder.insert_value(empty, re, 0), im, 1)


def _unpack(builder: Any, value: Any) -> tuple[Any, Any]:
    return builder.extract_value(value, 0), builder.extract_value(value, 1)


def _shuffle(builder: Any, first: Any, second: Any, order: list[int]) -> Any:
    return builder.shuffle_vector(first, second, ir.Constant(ir.VectorType(ir.IntType(32), len(order)), order))


class _Memory:
    """Reads and writes of one array argument inside an intrinsic."""

    def __init__(self, context: Any, builder: Any, array_type: Any, array: Any) -> None:
        self.context, self.builder = context, builder
        self.data = context.make_array(array_type)(context, builder, array).data
        self.register = _register(Amplitudes(array_type.dtype))
        self.align = array_type.dtype.bitwidth // 8

    def _at(self, index: Any, registers: int) -> Any:
        place = self.builder.add(index, index.type(registers * self.register.count))
        return self.builder.bitcast(self.builder.gep(self.data, [place]), self.register.as_pointer())

    def read(self, index: Any, registers: int = 0) -> Any:
        """The register that begins so many registers after an index."""
        return self.builder.load(self._at(index, registers), align=self.align)

    def write(self, value: Any, index: Any, registers: int = 0) -> None:
        """Write a register there."""
        self.builder.store(value, self._at(index, registers), align=self.align)

    def spread(self, indices: list[Any], order: list[int]) -> Any:
        """A register whose lane k holds the number at indices[order[k]]."""
        few = empty = ir.Constant(self.register, ir.Undefined)
        for place, index in enumerate(indices):
            number = self.builder.load(self.builder.gep(self.data, [index]))
            few = self.builder.insert_element(few, number, ir.IntType(32)(place))
        return _shuffle(self.builder, few, empty, order)

    def spread_complex(self, entries: list[Any], order: list[int]) -> Any:
        """The same for complex numbers, real and imaginary part in turn."""
        real = [self.builder.mul(entry, entry.type(2)) for entry in entries]
        imag = [self.builder.add(index, index.type(1)) for index in real]
        return _pack(self.builder, self.spread(real, order), self.spread(imag, order))


def _integers(context: Any, builder: Any, signature: Any, args: Any, places: range) -> list[Any]:
    return [context.cast(builder, args[k], signature.args[k], types.intp) for k in places]


@intrinsic
def lanes(typing: Any, array: Any) -> Any:
    """Amplitudes in a register of an array's type."""

    def generate(context: Any, builder: Any, signature: Any, args: Any) -> Any:
        return context.get_constant(types.intp, LANES[array.dtype.name])

    return types.intp(array), generate


@intrinsic
def load(typing: Any, block: Any, index: Any) -> Any:
    """The chunk of a block that begins at a float index."""

    def generate(context: Any, builder: Any, signature: Any, args: Any) -> Any:
        memory = _Memory(context, builder, block, args[0])
        return _pack(builder, memory.read(args[1]), memory.read(args[1], 1))

    return Amplitudes(block.dtype)(block, types.intp), generate


@intrinsic
def store(typing: Any, block: Any, index: Any, value: Any) -> Any:
    """Write a chunk of a block."""

    def generate(context: Any, builder: Any, signature: Any, args: Any) -> Any:
        memory = _Memory(context, builder, block, args[0])
        for place, part in enumerate(_unpack(builder, args[2])):
            memory.write(part, args[1], place)
        return context.get_dummy_value()

    return types.void(block, types.intp, value), generate


@intrinsic
def load_pairs(typing: Any, state: Any, index: Any) -> Any:
    """Amplitudes from an array of real and imaginary parts in turn, from a float index on."""

    def generate(context: Any, builder: Any, signature: Any, args: Any) -> Any:
        memory = _Memory(context, builder, state, args[0])
        first, second = memory.read(args[1]), memory.read(args[1], 1)
        count = memory.register.count
        parts = [_shuffle(builder, first, second, list(range(part, 2 * count, 2))) for part in range(2)]
        return _pack(builder, *parts)

    return Amplitudes(state.dtype)(state, types.intp), generate


@intrinsic
def store_pairs(typing: Any, state: Any, index: Any, value: Any) -> Any:
    """Write amplitudes into an array of real and imaginary parts in turn."""

    def generate(context: Any, builder: Any, signature: Any, args: Any) -> Any:
        memory = _Memory(context, builder, state, args[0])
        re, im = _unpack(builder, args[2])
        count = memory.register.count
        for half in range(2):
            order = [(half * count + lane) // 2 + count * (lane % 2) for lane in range(count)]
            memory.write(_shuffle(builder, re, im, order), args[1], half)
        return context.get_dummy_value()

    return types.void(state, types.intp, value), generate


@intrinsic
def entry(typing: Any, numbers: Any, place: Any) -> Any:
    """One complex number, at a place counted in complex numbers, in every lane."""

    def generate(context: Any, builder: Any, signature: Any, args: Any) -> Any:
        memory = _Memory(context, builder, numbers, args[0])
        return memory.spread_complex(
            _integers(context, builder, signature, args, range(1, 2)), [0] * memory.register.count
        )

    return Amplitudes(numbers.dtype)(numbers, place), generate


@intrinsic_with_constants
def choose(typing: Any, numbers: Any, zero: Any, one: Any, bit: Any) -> Any:
    """Complex number `zero` in the lanes whose index has a 0 in one bit, complex number `one` in the others."""
    place = bit.literal_value

    def generate(context: Any, builder: Any, signature: Any, args: Any) -> Any:
        memory = _Memory(context, builder, numbers, args[0])
        entries = _integers(context, builder, signature, args, range(1, 3))
        return memory.spread_complex(entries, [lane >> place & 1 for lane in range(memory.register.count)])

    return Amplitudes(numbers.dtype)(numbers, zero, one, bit), generate


@intrinsic_with_constants
def choose4(typing: Any, numbers: Any, first: Any, up: Any, across: Any, high: Any, low: Any) -> Any:
    """Complex number first + up * (bit `high` of the lane's index) + across * (bit `low`)."""
    bits = high.literal_value, low.literal_value

    def generate(context: Any, builder: Any, signature: Any, args: Any) -> Any:
        memory = _Memory(context, builder, numbers, args[0])
        start, rise, step = _integers(context, builder, signature, args, range(1, 4))
        second = builder.add(start, rise)
        entries = [start, builder.add(start, step), second, builder.add(second, step)]
        order = [2 * (lane >> bits[0] & 1) + (lane >> bits[1] & 1) for lane in range(memory.register.count)]
        return memory.spread_complex(entries, order)

    return Amplitudes(numbers.dtype)(numbers, first, up, across, high, low), generate


def _flipped(builder: Any, part: Any, bit: int) -> Any:
    count = part.type.count  # a bit that smaller registers do not have changes nothing
    return _shuffle(builder, part, part, [lane ^ (1 << bit) if 1 << bit < count else lane for lane in range(count)])


@intrinsic_with_constants
def exchange(typing: Any, value: Any, bit: Any) -> Any:
    """Each lane swapped for the one whose index differs in one bit."""

    def generate(context: Any, builder: Any, signature: Any, args: Any) -> Any:
        return _pack(builder, *(_flipped(builder, part, bit.literal_value) for part in _unpack(builder, args[0])))

    return value(value, bit), generate


def _fused(builder: Any, x: Any, y: Any, z: Any) -> Any:
    """x * y + z in one instruction where the processor has it.

    Written out, and never left to relaxed arithmetic: the same inputs must give the same digits whenever and with
    whatever the code was compiled.
    """
    name = f"llvm.fmuladd.v{x.type.count}f{32 if isinstance(x.type.element, ir.FloatType) else 64}"
    function = cgutils.get_or_insert_function(builder.module, ir.FunctionType(x.type, [x.type] * 3), name)
    return builder.call(function, [x, y, z])


def _add_product(
    builder: Any, x: tuple[Any, Any], a: tuple[Any, Any], total: tuple[Any, Any] | None
) -> tuple[Any, Any]:
    """x * a, or x * a + total, of complex registers."""
    (xr, xi), (ar, ai) = x, a
    if total is None:
        re, im = builder.fmul(xr, ar), builder.fmul(xi, ar)
    else:
        re, im = _fused(builder, xr, ar, total[0]), _fused(builder, xi, ar, total[1])
    return _fused(builder, builder.fneg(xi), ai, re), _fused(builder, xr, ai, im)


@intrinsic_with_constants
def turn(typing: Any, value: Any, bit: Any) -> Any:
    """[[1, -1], [1, 1]] on the qubit that is one bit of the lane's index."""

    def generate(context: Any, builder: Any, signature: Any, args: Any) -> Any:
        out = []
        for part in _unpack(builder, args[0]):
            signs = [2.0 * (lane >> bit.literal_value & 1) - 1 for lane in range(part.type.count)]
            other = _flipped(builder, part, bit.literal_value)
            out.append(_fused(builder, other, ir.Constant(part.type, signs), part))
        return _pack(builder, *out)

    return value(value, bit), generate


def _sum_of_products(builder: Any, args: Any) -> Any:
    total = None
    for x, a in zip(args[::2], args[1::2], strict=True):
        total = _add_product(builder, _unpack(builder, x), _unpack(builder, a), total)
    assert total is not None
    return _pack(builder, *total)


@intrinsic
def mix2(typing: Any, x0: Any, a0: Any, x1: Any, a1: Any) -> Any:
    """x0 a0 + x1 a1."""
    return x0(x0, a0, x1, a1), lambda context, builder, signature, args: _sum_of_products(builder, args)


@intrinsic
def mix4(typing: Any, x0: Any, a0: Any, x1: Any, a1: Any, x2: Any, a2: Any, x3: Any, a3: Any) -> Any:
    """x0 a0 + x1 a1 + x2 a2 + x3 a3."""
    return x0(x0, a0, x1, a1, x2, a2, x3, a3), lambda context, builder, signature, args: _sum_of_products(builder, args)


def _operation(symbol: Any, parts: Callable[[Any, Any, Any], tuple[Any, Any]]) -> None:
    """Teach compiled code one sign between two registers of amplitudes."""

    class Typing(AbstractTemplate):  # type: ignore[misc]
        def generic(self, args: Any, kws: Any) -> Any:
            if len(args) == 2 and isinstance(args[0], Amplitudes) and args[0] == args[1]:
                return args[0](*args)
            return None

    infer_global(symbol)(Typing)

    def generate(context: Any, builder: Any, signature: Any, args: Any) -> Any:
        return _pack(builder, *parts(builder, _unpack(builder, args[0]), _unpack(builder, args[1])))

    lower_builtin(symbol, Amplitudes, Amplitudes)(generate)


_operation(operator.add, lambda builder, x, y: (builder.fadd(x[0], y[0]), builder.fadd(x[1], y[1])))
_operation(operator.sub, lambda builder, x, y: (builder.fsub(x[0], y[0]), builder.fsub(x[1], y[1])))
_operation(operator.mul, lambda builder, x, y: _add_product(builder, x, y, None))
