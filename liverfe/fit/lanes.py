"""Sixteen voxels side by side: a vector type for the compiled kernels.

A `Lanes` value holds 16 single-precision numbers and lives in vector registers, as wide as the
machine has them. Every operation is one IEEE operation a lane, fused multiply-adds are asked for by
name, and nothing is reordered: a voxel comes out the same to the bit whatever lane it lies in and
whatever lies beside it.

Only compiled functions can hold such values. Arithmetic is written with ``+ - * /``; the functions
here are the rest. numba's own vectoriser is not relied on: it gives up at the first branch.
"""

from __future__ import annotations

import operator
from typing import Any

from llvmlite import ir
from numba import extending, njit, types
from numba.core import cgutils
from numba.core.typing.templates import ConcreteTemplate, infer_global, signature
from numba.extending import lower_builtin, models, register_model

WIDTH = 16

intrinsic: Any = extending.intrinsic
"""Makes a function whose machine code is built by hand."""

_FLOAT = ir.FloatType()
_INT = ir.IntType(32)
_FLOATS = ir.VectorType(_FLOAT, WIDTH)
_INTS = ir.VectorType(_INT, WIDTH)


class LanesType(types.Type):
    """The type of 16 float32 side by side."""

    def __init__(self) -> None:
        super().__init__(name="Lanes")


lanes_type = LanesType()


@register_model(LanesType)
class _LanesModel(models.PrimitiveModel):
    def __init__(self, manager: Any, of: Any) -> None:
        super().__init__(manager, of, _FLOATS)


def _teach(python_operator: Any, instruction: str) -> None:
    """Let two `Lanes` be combined by an operator, one machine instruction a lane."""

    @infer_global(python_operator)
    class _Signature(ConcreteTemplate):
        cases = [signature(lanes_type, lanes_type, lanes_type)]

    @lower_builtin(python_operator, lanes_type, lanes_type)
    def _lower(context: Any, builder: Any, sig: Any, args: Any) -> Any:
        return getattr(builder, instruction)(*args)


for _operator, _instruction in (
    (operator.add, "fadd"),
    (operator.sub, "fsub"),
    (operator.mul, "fmul"),
    (operator.truediv, "fdiv"),
):
    _teach(_operator, _instruction)


def _same_in_all(builder: Any, value: Any, of: Any) -> Any:
    one = builder.insert_element(ir.Constant(of, ir.Undefined), value, ir.Constant(_INT, 0))
    zeros = ir.Constant(_INTS, [0] * WIDTH)
    return builder.shuffle_vector(one, ir.Constant(of, ir.Undefined), zeros)


def _call(builder: Any, name: str, *args: Any) -> Any:
    kind = ir.FunctionType(_FLOATS, [a.type for a in args])
    function = cgutils.get_or_insert_function(builder.module, kind, f"{name}.v{WIDTH}f32")
    return builder.call(function, args)


def _pointer(context: Any, builder: Any, array_type: Any, array: Any, place: Any) -> Any:
    data = context.make_array(array_type)(context, builder, array).data
    return builder.bitcast(builder.gep(data, [place]), _FLOATS.as_pointer())


@intrinsic
def everywhere(typingctx: Any, value: Any) -> Any:
    """The same number in every lane."""

    def build(context: Any, builder: Any, sig: Any, args: Any) -> Any:
        single = context.cast(builder, args[0], sig.args[0], types.float32)
        return _same_in_all(builder, single, _FLOATS)

    return lanes_type(value), build


@intrinsic
def load(typingctx: Any, array: Any, place: Any) -> Any:
    """Sixteen numbers of a contiguous float32 array, from element `place` on."""

    def build(context: Any, builder: Any, sig: Any, args: Any) -> Any:
        where = context.cast(builder, args[1], sig.args[1], types.intp)
        return builder.load(_pointer(context, builder, sig.args[0], args[0], where), align=4)

    return lanes_type(array, place), build


@intrinsic
def store(typingctx: Any, array: Any, place: Any, value: Any) -> Any:
    """Write sixteen numbers to a contiguous float32 array, from element `place` on."""

    def build(context: Any, builder: Any, sig: Any, args: Any) -> Any:
        where = context.cast(builder, args[1], sig.args[1], types.intp)
        builder.store(args[2], _pointer(context, builder, sig.args[0], args[0], where), align=4)
        return context.get_dummy_value()

    return types.void(array, place, value), build


@intrinsic
def turn(typingctx: Any, rows: Any, place: Any, stride: Any, n_columns: Any, columns: Any) -> Any:
    """Turn sixteen rows of sixteen numbers into columns, and write the first `n_columns` of these.

    Row k starts at element ``place + k * stride`` of the contiguous array `rows`; sixteen numbers
    from there on are read, whether they belong to it or not.
    """

    def build(context: Any, builder: Any, sig: Any, args: Any) -> Any:
        at, step, n = (context.cast(builder, args[k], sig.args[k], types.intp) for k in (1, 2, 3))
        lines = []
        for k in range(WIDTH):
            here = builder.add(at, builder.mul(step, ir.Constant(at.type, k)))
            where = _pointer(context, builder, sig.args[0], args[0], here)
            lines.append(builder.load(where, align=4))
        block = 1
        while block < WIDTH:  # exchange squares of side `block`, then twice as large ones
            low = [j if not j & block else WIDTH + j - block for j in range(WIDTH)]
            high = [j + block if not j & block else WIDTH + j for j in range(WIDTH)]
            for k in range(WIDTH):
                if not k & block:
                    one, other = lines[k], lines[k + block]
                    for line, picks in ((k, low), (k + block, high)):
                        mask = ir.Constant(_INTS, picks)
                        lines[line] = builder.shuffle_vector(one, other, mask)
            block *= 2
        for k in range(WIDTH):
            wanted = builder.icmp_signed(">", n, ir.Constant(n.type, k))
            with builder.if_then(wanted, likely=True):
                here = ir.Constant(at.type, k * WIDTH)
                where = _pointer(context, builder, sig.args[4], args[4], here)
                builder.store(lines[k], where, align=4)
        return context.get_dummy_value()

    return types.void(rows, place, stride, n_columns, columns), build


@intrinsic
def fused(typingctx: Any, a: Any, b: Any, c: Any) -> Any:
    """``a * b + c``, rounded once."""

    def build(context: Any, builder: Any, sig: Any, args: Any) -> Any:
        return _call(builder, "llvm.fma", *args)

    return lanes_type(a, b, c), build


@intrinsic
def negative(typingctx: Any, a: Any) -> Any:
    """Minus `a`: nothing is left of it inside `fused`."""

    def build(context: Any, builder: Any, sig: Any, args: Any) -> Any:
        return builder.fneg(args[0])

    return lanes_type(a), build


@intrinsic
def root(typingctx: Any, a: Any) -> Any:
    """Square root."""

    def build(context: Any, builder: Any, sig: Any, args: Any) -> Any:
        return _call(builder, "llvm.sqrt", *args)

    return lanes_type(a), build


@intrinsic
def where_above(typingctx: Any, a: Any, b: Any, yes: Any, no: Any) -> Any:
    """`yes` in the lanes where ``a > b``, else `no`; a NaN is above nothing."""

    def build(context: Any, builder: Any, sig: Any, args: Any) -> Any:
        return builder.select(builder.fcmp_ordered(">", args[0], args[1]), args[2], args[3])

    return lanes_type(a, b, yes, no), build


@intrinsic
def any_above(typingctx: Any, a: Any, b: Any) -> Any:
    """Whether ``a > b`` in some lane."""

    def build(context: Any, builder: Any, sig: Any, args: Any) -> Any:
        mask = builder.bitcast(builder.fcmp_ordered(">", *args), ir.IntType(WIDTH))
        return builder.icmp_unsigned("!=", mask, ir.Constant(ir.IntType(WIDTH), 0))

    return types.boolean(a, b), build


@intrinsic
def times_power_of_two(typingctx: Any, a: Any, exponent: Any) -> Any:
    """``a * 2**exponent`` for whole exponents from -126 to 127."""

    def build(context: Any, builder: Any, sig: Any, args: Any) -> Any:
        whole = builder.fptosi(args[1], _INTS)
        biased = builder.add(whole, ir.Constant(_INTS, [127] * WIDTH))
        bits = builder.shl(biased, ir.Constant(_INTS, [23] * WIDTH))
        return builder.fmul(args[0], builder.bitcast(bits, _FLOATS))

    return lanes_type(a, exponent), build


@intrinsic
def nearest_whole(typingctx: Any, a: Any) -> Any:
    """Rounded to the nearest whole number, halves to even."""

    def build(context: Any, builder: Any, sig: Any, args: Any) -> Any:
        return _call(builder, "llvm.nearbyint", *args)

    return lanes_type(a), build


_HALF_ROOT_BITS = 0x3F3504F3
"""sqrt(1/2) as single-precision bits: mantissas are taken from there to sqrt(2)."""


@intrinsic
def binary_exponent(typingctx: Any, a: Any) -> Any:
    """The whole number k for which ``a / 2**k`` lies between sqrt(1/2) and sqrt(2); a > 0."""

    def build(context: Any, builder: Any, sig: Any, args: Any) -> Any:
        bits = builder.bitcast(args[0], _INTS)
        above = builder.sub(bits, ir.Constant(_INTS, [_HALF_ROOT_BITS] * WIDTH))
        return builder.sitofp(builder.ashr(above, ir.Constant(_INTS, [23] * WIDTH)), _FLOATS)

    return lanes_type(a), build


_INSIDE: dict[str, Any] = {"no_cpython_wrapper": True, "no_cfunc_wrapper": True}
inner_lanes = njit(forceinline=True, error_model="numpy", **_INSIDE)
"""For functions of `Lanes`: they are written into what calls them, so values stay in registers."""


@inner_lanes
def larger(a: Any, b: Any) -> Any:
    """The larger of the two in each lane; `b` where `a` is NaN."""
    return where_above(a, b, a, b)


@inner_lanes
def smaller(a: Any, b: Any) -> Any:
    """The smaller of the two in each lane; `a` where `b` is NaN."""
    return where_above(a, b, b, a)
