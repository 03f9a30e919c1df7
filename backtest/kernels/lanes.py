"""Eight numbers that move together: a vector type for compiled kernels, so that eight windows share one pass.

A kernel written with these operators reads like one on floats; the processor's vector unit does eight lanes at once.
Each lane sees the operations that a lone float would see, so that a window's result does not depend on its lane.
"""

import operator
from typing import Any

from llvmlite import ir
from numba.core import cgutils, types
from numba.core.imputils import lower_builtin
from numba.core.typing.templates import AbstractTemplate, infer_global, signature
from numba.extending import intrinsic, models, register_model

WIDTH = 8

_FLAGS = ("contract", "arcp", "nsz")
_VECTOR = ir.VectorType(ir.DoubleType(), WIDTH)


class LanesType(types.Type):
    """The compiled type of eight floats."""

    def __init__(self) -> None:
        super().__init__(name=f"Lanes{WIDTH}")


LANES = LanesType()


@register_model(LanesType)
class _LanesModel(models.PrimitiveModel):
    def __init__(self, manager: Any, kind: Any) -> None:
        super().__init__(manager, kind, _VECTOR)


def _native(function: Any) -> Any:
    """Make a function that writes machine instructions callable from kernels."""
    return intrinsic(function)


def _spread(builder: Any, value: Any, kind: Any) -> Any:
    """Return a vector operand: a float becomes eight copies of itself."""
    if kind is LANES:
        return value
    if isinstance(kind, types.Integer | types.IntegerLiteral):
        value = builder.sitofp(value, ir.DoubleType())
    first = builder.insert_element(ir.Constant(_VECTOR, ir.Undefined), value, ir.Constant(ir.IntType(32), 0))
    mask = ir.Constant(ir.VectorType(ir.IntType(32), WIDTH), [0] * WIDTH)
    return builder.shuffle_vector(first, ir.Constant(_VECTOR, ir.Undefined), mask)


def _register(operation: Any, in_place: Any, instruction: str) -> None:
    def typed(self: Any, args: Any, kws: Any) -> Any:
        numbers = (types.Float, types.Integer, LanesType)
        if len(args) == 2 and LANES in args and all(isinstance(a, numbers) for a in args):
            return signature(LANES, *args)
        return None

    def lowered(context: Any, builder: Any, sig: Any, args: Any) -> Any:
        left, right = (_spread(builder, v, k) for v, k in zip(args, sig.args, strict=True))
        return getattr(builder, instruction)(left, right, flags=_FLAGS)

    for key in (operation, in_place):
        infer_global(key)(type(f"Lanes_{instruction}", (AbstractTemplate,), {"key": key, "generic": typed}))
        for pair in ((LANES, LANES), (LANES, types.Number), (types.Number, LANES)):
            lower_builtin(key, *pair)(lowered)


_register(operator.add, operator.iadd, "fadd")
_register(operator.sub, operator.isub, "fsub")
_register(operator.mul, operator.imul, "fmul")
_register(operator.truediv, operator.itruediv, "fdiv")


def _row_pointer(context: Any, builder: Any, kind: Any, array: Any, row: Any) -> Any:
    made = context.make_array(kind)(context, builder, array)
    start = builder.mul(row, ir.Constant(row.type, WIDTH))
    return builder.bitcast(builder.gep(made.data, [start]), _VECTOR.as_pointer())


@_native
def load(_: Any, array: Any, row: Any) -> Any:
    """Return the eight numbers at ``row`` of a contiguous array whose last axis has WIDTH entries."""

    def code(context: Any, builder: Any, sig: Any, args: Any) -> Any:
        row = context.cast(builder, args[1], sig.args[1], types.intp)
        return builder.load(_row_pointer(context, builder, sig.args[0], args[0], row), align=8)

    return LANES(array, row), code


@_native
def store(_: Any, array: Any, row: Any, value: Any) -> Any:
    """Write eight numbers at ``row`` of a contiguous array whose last axis has WIDTH entries."""

    def code(context: Any, builder: Any, sig: Any, args: Any) -> Any:
        row = context.cast(builder, args[1], sig.args[1], types.intp)
        builder.store(args[2], _row_pointer(context, builder, sig.args[0], args[0], row), align=8)
        return context.get_dummy_value()

    return types.void(array, row, value), code


@_native
def spread(_: Any, value: Any) -> Any:
    """Return eight copies of a float."""

    def code(context: Any, builder: Any, sig: Any, args: Any) -> Any:
        builder.function.attributes.alignstack = 64
        return _spread(builder, args[0], types.float64)

    return LANES(types.float64), code


@_native
def where_positive(_: Any, test: Any, yes: Any, no: Any) -> Any:
    """Return ``yes`` in the lanes where ``test`` is above zero, ``no`` in the others."""

    def code(context: Any, builder: Any, sig: Any, args: Any) -> Any:
        above = builder.fcmp_ordered(">", args[0], ir.Constant(_VECTOR, [0.0] * WIDTH))
        return builder.select(above, args[1], args[2])

    return LANES(LANES, LANES, LANES), code


def _of_each(name: str) -> Any:
    @_native
    def applied(_: Any, value: Any) -> Any:
        def code(context: Any, builder: Any, sig: Any, args: Any) -> Any:
            function = cgutils.get_or_insert_function(
                builder.module, ir.FunctionType(_VECTOR, [_VECTOR]), f"llvm.{name}.v{WIDTH}f64"
            )
            return builder.call(function, [args[0]])

        return LANES(LANES), code

    return applied


square_root = _of_each("sqrt")
"""The square root of each lane."""
