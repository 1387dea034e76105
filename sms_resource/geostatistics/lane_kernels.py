"""Eight numbers at a time: the vector type that the kriging kernels are written in.

A *pack* holds one float64 for each of eight blocks. Every operation works lane by lane, so a block's result
does not depend on which blocks share its pack, and eight small linear systems are solved side by side with
the full width of the machine (two or one vector registers). The loop vectoriser cannot do that by itself,
because it cannot prove that the arrays of a workspace do not overlap.

With the JIT off (``NUMBA_DISABLE_JIT=1``) the same names are NumPy functions on arrays of eight.
"""

# mypy: allow-untyped-defs

from __future__ import annotations

import numpy as np
from llvmlite import ir
from numba import config, njit, types
from numba.core.cgutils import get_or_insert_function
from numba.extending import intrinsic, models, register_model

LANES = 8

if config.DISABLE_JIT:  # type: ignore[attr-defined]

    def load(array, start):
        """The eight numbers of ``array`` (flat) from ``start``."""
        return array[start : start + LANES].copy()

    def store(array, start, pack):
        """Write eight numbers into ``array`` (flat) from ``start``."""
        array[start : start + LANES] = pack

    def splat(number):
        """One number in all lanes."""
        return np.full(LANES, float(number))

    def add(a, b):
        """``a + b``."""
        return a + b

    def sub(a, b):
        """``a - b``."""
        return a - b

    def mul(a, b):
        """``a * b``."""
        return a * b

    def div(a, b):
        """``a / b``."""
        with np.errstate(divide="ignore", invalid="ignore"):
            return a / b

    def fma(a, b, c):
        """``a * b + c`` (rounded once where compiled)."""
        return a * b + c

    def fnma(a, b, c):
        """``c - a * b`` (rounded once where compiled)."""
        return c - a * b

    def root(a):
        """Square root."""
        with np.errstate(invalid="ignore"):
            return np.sqrt(a)

    def where_less(a, b, yes, no):
        """``yes`` in the lanes where ``a < b``, else ``no`` (also where either is NaN)."""
        return np.where(a < b, yes, no)

    def power_of_two(k):
        """2 to the whole numbers ``k``, from -1022 to 1023."""
        return np.exp2(k)

    def nearest_whole(a):
        """``a`` rounded to the nearest whole number, halves to even."""
        return np.rint(a)

else:

    class PackType(types.Type):
        """Numba type of eight float64 lanes."""

        def __init__(self):
            super().__init__(name="Pack8")

    pack_type = PackType()
    _VECTOR = ir.VectorType(ir.DoubleType(), LANES)
    _INTEGERS = ir.VectorType(ir.IntType(64), LANES)

    @register_model(PackType)
    class _PackModel(models.PrimitiveModel):
        def __init__(self, manager, kind):
            super().__init__(manager, kind, _VECTOR)

    def _constant(vector, value):
        return ir.Constant(vector, [value] * LANES)

    def _address(context, builder, array_type, array, start):
        data = context.make_array(array_type)(context, builder, array).data
        return builder.bitcast(builder.gep(data, [start]), _VECTOR.as_pointer())

    @intrinsic
    def load(typing_context, array, start):
        """The eight numbers of ``array`` (flat) from ``start``."""

        def build(context, builder, signature, args):
            place = context.cast(builder, args[1], signature.args[1], types.intp)
            pointer = _address(context, builder, signature.args[0], args[0], place)
            return builder.load(pointer, align=8)

        return pack_type(array, start), build

    @intrinsic
    def store(typing_context, array, start, pack):
        """Write eight numbers into ``array`` (flat) from ``start``."""

        def build(context, builder, signature, args):
            place = context.cast(builder, args[1], signature.args[1], types.intp)
            pointer = _address(context, builder, signature.args[0], args[0], place)
            builder.store(args[2], pointer, align=8)
            return context.get_dummy_value()

        return types.void(array, start, pack), build

    @intrinsic
    def splat(typing_context, number):
        """One number in all lanes."""

        def build(context, builder, signature, args):
            value = context.cast(builder, args[0], signature.args[0], types.float64)
            single = builder.insert_element(ir.Constant(_VECTOR, ir.Undefined), value, ir.IntType(32)(0))
            order = ir.Constant(ir.VectorType(ir.IntType(32), LANES), [0] * LANES)
            return builder.shuffle_vector(single, ir.Constant(_VECTOR, ir.Undefined), order)

        return pack_type(number), build

    def _two(name, doc):
        @intrinsic
        def operation(typing_context, a, b):
            def build(context, builder, signature, args):
                return getattr(builder, name)(args[0], args[1])

            return pack_type(pack_type, pack_type), build

        operation.__doc__ = doc
        return operation

    add = _two("fadd", "``a + b``.")
    sub = _two("fsub", "``a - b``.")
    mul = _two("fmul", "``a * b``.")
    div = _two("fdiv", "``a / b``.")

    def _machine(builder, name, args):
        """Call an LLVM intrinsic on packs."""
        kind = ir.FunctionType(_VECTOR, [_VECTOR] * len(args))
        return builder.call(get_or_insert_function(builder.module, kind, f"{name}.v{LANES}f64"), args)

    @intrinsic
    def fma(typing_context, a, b, c):
        """``a * b + c`` (rounded once where the machine can)."""

        def build(context, builder, signature, args):
            return _machine(builder, "llvm.fmuladd", list(args))

        return pack_type(pack_type, pack_type, pack_type), build

    @intrinsic
    def fnma(typing_context, a, b, c):
        """``c - a * b`` (rounded once where the machine can)."""

        def build(context, builder, signature, args):
            return _machine(builder, "llvm.fmuladd", [builder.fneg(args[0]), args[1], args[2]])

        return pack_type(pack_type, pack_type, pack_type), build

    def _one(name, doc):
        @intrinsic
        def operation(typing_context, a):
            def build(context, builder, signature, args):
                return _machine(builder, name, [args[0]])

            return pack_type(pack_type), build

        operation.__doc__ = doc
        return operation

    root = _one("llvm.sqrt", "Square root.")
    nearest_whole = _one("llvm.rint", "``a`` rounded to the nearest whole number, halves to even.")

    @intrinsic
    def where_less(typing_context, a, b, yes, no):
        """``yes`` in the lanes where ``a < b``, else ``no`` (also where either is NaN)."""

        def build(context, builder, signature, args):
            return builder.select(builder.fcmp_ordered("<", args[0], args[1]), args[2], args[3])

        return pack_type(pack_type, pack_type, pack_type, pack_type), build

    @intrinsic
    def power_of_two(typing_context, k):
        """2 to the whole numbers ``k``, from -1022 to 1023."""

        def build(context, builder, signature, args):
            whole = builder.fptosi(args[0], _INTEGERS)
            biased = builder.add(whole, _constant(_INTEGERS, 1023))
            return builder.bitcast(builder.shl(biased, _constant(_INTEGERS, 52)), _VECTOR)

        return pack_type(pack_type), build


# ln 2 in two parts, so that k ln 2 is taken off without loss (Cody & Waite 1980).
_LOG2_E = 1.4426950408889634
_LN2_HIGH = 6.93147180369123816490e-01
_LN2_LOW = 1.90821492927058770002e-10


@njit(cache=True, error_model="numpy")
def exponential(a):
    """exp(a) for a <= 0, lane by lane, to about one unit in the last place; 0 below -700.

    Cody & Waite (1980) reduction to |r| <= ln(2)/2, then the Taylor series to r^13, whose first dropped term
    is below 5e-18 there.
    """
    a = where_less(a, splat(-700.0), splat(-700.0), a)
    k = nearest_whole(mul(a, splat(_LOG2_E)))
    r = fnma(k, splat(_LN2_HIGH), a)
    r = fnma(k, splat(_LN2_LOW), r)
    p = fma(r, splat(1.0 / 6227020800.0), splat(1.0 / 479001600.0))
    p = fma(p, r, splat(1.0 / 39916800.0))
    p = fma(p, r, splat(1.0 / 3628800.0))
    p = fma(p, r, splat(1.0 / 362880.0))
    p = fma(p, r, splat(1.0 / 40320.0))
    p = fma(p, r, splat(1.0 / 5040.0))
    p = fma(p, r, splat(1.0 / 720.0))
    p = fma(p, r, splat(1.0 / 120.0))
    p = fma(p, r, splat(1.0 / 24.0))
    p = fma(p, r, splat(1.0 / 6.0))
    p = fma(p, r, splat(0.5))
    p = fma(p, r, splat(1.0))
    p = fma(p, r, splat(1.0))
    return mul(p, power_of_two(k))
