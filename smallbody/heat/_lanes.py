# mypy: ignore-errors
"""Sixteen numbers that a kernel works on as one value: the facets of a block, side by side in vector registers.

Numba leaves loops over a short last axis mostly scalar, because it cannot tell that the arrays of a kernel do not
overlap. Here a row of such an array is loaded into one LLVM vector, so that the kernel reads like the scalar formula
and runs in whatever vector registers the processor has (measured on both heat kernels: five times as fast).

    x = load(t, i)                 the row t[i, :] of a C-contiguous float64 array (n, LANES)
    store(t, i, x + 2.0 * y)       and back; + - * / between lanes, or lanes and a float
    spread(0.0), larger(x, y), smaller(x, y), size(x), root(x), any_above(x, limit), largest(x)

NaN: `larger` and `smaller` return x where either is NaN; `any_above` counts NaN as above and `largest` returns it, so
that a loop that waits for every lane to settle does not take NaN for an answer. With NUMBA_DISABLE_JIT the same names
work on NumPy rows.
"""

from __future__ import annotations

import operator

import numpy as np
from llvmlite import ir
from numba import config
from numba.core import cgutils, types
from numba.core.typing.templates import AbstractTemplate, infer_global, signature
from numba.extending import intrinsic, lower_builtin, models, register_model

LANES = 16
FAST = {"contract", "arcp", "nsz"}  # fast-math flags of the heat kernels: NaN stays NaN, sums keep their order

_VECTOR = ir.VectorType(ir.DoubleType(), LANES)
_INDEX = ir.IntType(32)


class LanesType(types.Type):
    """Numba's name for the vector."""

    def __init__(self) -> None:
        super().__init__(name=f"Lanes{LANES}")


_lanes = LanesType()


@register_model(LanesType)
class _LanesModel(models.PrimitiveModel):
    def __init__(self, manager, fe_type):
        super().__init__(manager, fe_type, _VECTOR)


def _splat(builder, x):
    empty = ir.Constant(_VECTOR, ir.Undefined)
    one = builder.insert_element(empty, x, ir.Constant(_INDEX, 0))
    return builder.shuffle_vector(one, empty, ir.Constant(ir.VectorType(_INDEX, LANES), [0] * LANES))


def _row(context, builder, sig, args):
    """Pointer to row args[1] of array args[0]."""
    kind = sig.args[0]
    array = context.make_array(kind)(context, builder, args[0])
    index = context.cast(builder, args[1], sig.args[1], types.intp)
    start = cgutils.get_item_pointer(
        context, builder, kind, array, [index, context.get_constant(types.intp, 0)], wraparound=False
    )
    return builder.bitcast(start, _VECTOR.as_pointer())


def _call(builder, name, args, result=_VECTOR, **flags):
    kind = ir.FunctionType(result, [_VECTOR] * len(args))
    function = cgutils.get_or_insert_function(builder.module, kind, f"llvm.{name}.v{LANES}f64")
    return builder.call(function, args, **flags)


@intrinsic
def _spread(typing, x):
    def code(context, builder, sig, args):
        return _splat(builder, args[0])

    return _lanes(types.float64), code


@intrinsic
def _load(typing, a, i):
    def code(context, builder, sig, args):
        value = builder.load(_row(context, builder, sig, args))
        value.align = 8  # NumPy promises no more
        return value

    return _lanes(a, i), code


@intrinsic
def _store(typing, a, i, x):
    def code(context, builder, sig, args):
        done = builder.store(args[2], _row(context, builder, sig, args))
        done.align = 8
        return context.get_dummy_value()

    return types.none(a, i, x), code


@intrinsic
def _larger(typing, x, y):
    def code(context, builder, sig, args):
        return builder.select(builder.fcmp_unordered(">", *args), *args)

    return _lanes(x, y), code


@intrinsic
def _smaller(typing, x, y):
    def code(context, builder, sig, args):
        return builder.select(builder.fcmp_unordered("<", *args), *args)

    return _lanes(x, y), code


@intrinsic
def _size(typing, x):
    return _lanes(x), lambda context, builder, sig, args: _call(builder, "fabs", args)


@intrinsic
def _root(typing, x):
    return _lanes(x), lambda context, builder, sig, args: _call(builder, "sqrt", args)


@intrinsic
def _any_above(typing, x, limit):
    def code(context, builder, sig, args):
        bits = builder.bitcast(builder.fcmp_unordered(">", args[0], _splat(builder, args[1])), ir.IntType(LANES))
        return builder.icmp_unsigned("!=", bits, ir.Constant(ir.IntType(LANES), 0))

    return types.boolean(x, types.float64), code


@intrinsic
def _largest(typing, x):
    def code(context, builder, sig, args):
        bits = builder.bitcast(builder.fcmp_unordered("uno", args[0], args[0]), ir.IntType(LANES))
        broken = builder.icmp_unsigned("!=", bits, ir.Constant(ir.IntType(LANES), 0))
        found = _call(builder, "vector.reduce.fmax", args, ir.DoubleType())
        return builder.select(broken, ir.Constant(ir.DoubleType(), float("nan")), found)

    return types.float64(x), code


def _arithmetic(op, name):
    @infer_global(op)
    class _Typing(AbstractTemplate):
        def generic(self, args, kws):
            if len(args) == 2 and _lanes in args and all(a in (_lanes, types.float64) for a in args):
                return signature(_lanes, *args)
            return None

    def code(context, builder, sig, args):
        x, y = (v if isinstance(kind, LanesType) else _splat(builder, v) for v, kind in zip(args, sig.args))
        return getattr(builder, name)(x, y, flags=tuple(sorted(FAST)))

    for kinds in ((LanesType, LanesType), (LanesType, types.Float), (types.Float, LanesType)):
        lower_builtin(op, *kinds)(code)


for _op, _name in ((operator.add, "fadd"), (operator.sub, "fsub"), (operator.mul, "fmul"), (operator.truediv, "fdiv")):
    _arithmetic(_op, _name)


if config.DISABLE_JIT:
    spread = lambda x: np.full(LANES, float(x))  # noqa: E731
    load = lambda a, i: a[i].copy()  # noqa: E731
    store = operator.setitem
    larger = lambda x, y: np.where(~(x <= y), x, y)  # noqa: E731
    smaller = lambda x, y: np.where(~(x >= y), x, y)  # noqa: E731
    size = np.abs
    root = np.sqrt
    any_above = lambda x, limit: not np.all(x <= limit)  # noqa: E731
    largest = np.max
else:
    spread, load, store, larger, smaller = _spread, _load, _store, _larger, _smaller
    size, root, any_above, largest = _size, _root, _any_above, _largest
