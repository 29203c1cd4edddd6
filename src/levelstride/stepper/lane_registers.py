"""Rows of lanes in vector registers, and the instructions of the lane kernels for them.

A loop over lanes of a length known to the compiler becomes vector instructions only where it can
prove that rows do not overlap, which it cannot. A row is therefore a value of its own, of as many
numbers as a tuple is long that the kernels hand on; LLVM splits it into registers. Arrays are
handed on as bare places: counting references to them costs more than the rows of a layer.
"""

from __future__ import annotations

from typing import Any

from llvmlite import ir
from numba import types
from numba.core import cgutils
from numba.extending import intrinsic, models, register_model

Span = tuple[int, ...]
"""As many zeros as a row has lanes: the compiler sees the length of a tuple, not that of a row."""

_generated: Any = intrinsic
_function_of: Any = cgutils.get_or_insert_function


class _LaneRow(types.Type):
    """A row of lanes in vector registers."""

    def __init__(self, dtype: Any, count: int) -> None:
        self.dtype, self.count = dtype, count
        super().__init__(name=f"LaneRow({dtype}, {count})")


@register_model(_LaneRow)
class _LaneRowModel(models.PrimitiveModel):
    def __init__(self, manager: Any, kind: Any) -> None:
        value = manager.lookup(kind.dtype).get_value_type()
        super().__init__(manager, kind, ir.VectorType(value, kind.count))  # type: ignore[no-untyped-call]


class _Room(types.Type):
    """The numbers of an array, without its reference count: handing it on costs nothing."""

    def __init__(self, dtype: Any) -> None:
        self.dtype = dtype
        super().__init__(name=f"LaneRoom({dtype})")


@register_model(_Room)
class _RoomModel(models.PrimitiveModel):
    def __init__(self, manager: Any, kind: Any) -> None:
        value = manager.lookup(kind.dtype).get_data_type()
        super().__init__(manager, kind, value.as_pointer())  # type: ignore[no-untyped-call]


def _spread(builder: Any, scalar: Any, kind: Any) -> Any:
    index = ir.Constant(ir.IntType(32), 0)
    single = builder.insert_element(ir.Constant(kind, ir.Undefined), scalar, index)
    zeros = ir.Constant(ir.VectorType(ir.IntType(32), kind.count), [0] * kind.count)
    return builder.shuffle_vector(single, ir.Constant(kind, ir.Undefined), zeros)


def _muladd(builder: Any, a: Any, b: Any, c: Any) -> Any:
    """Multiply and add in one instruction where the machine has it."""
    kind = c.type
    name = f"llvm.fmuladd.v{kind.count}f{64 if isinstance(kind.element, ir.DoubleType) else 32}"
    function = _function_of(builder.module, ir.FunctionType(kind, [kind, kind, kind]), name)
    return builder.call(function, [a, b, c])


def _address(builder: Any, room: Any, index: Any, kind: Any) -> Any:
    return builder.bitcast(builder.gep(room, [index]), kind.as_pointer())


@_generated
def bare(_, array):  # type: ignore[no-untyped-def]
    """Return the numbers of an array for `load`, `number` and `store`."""

    def generate(context, builder, signature, arguments):  # type: ignore[no-untyped-def]
        return context.make_array(array)(context, builder, arguments[0]).data

    return _Room(array.dtype)(array), generate


@_generated
def fixed(_, value):  # type: ignore[no-untyped-def]
    """Hand a number to the machine-code compiler, not to numba: it would compile one each."""
    return types.int64(types.int64), lambda context, builder, signature, arguments: arguments[0]


@_generated
def load(_, room, index, span):  # type: ignore[no-untyped-def]
    """Read a row of lanes."""
    row = _LaneRow(room.dtype, span.count)

    def generate(context, builder, signature, arguments):  # type: ignore[no-untyped-def]
        place = _address(builder, arguments[0], arguments[1], context.get_value_type(row))
        return builder.load(place, align=room.dtype.bitwidth // 8)

    return row(room, types.int64, span), generate


@_generated
def number(_, room, index):  # type: ignore[no-untyped-def]
    """Read a number, which must be there."""

    def generate(context, builder, signature, arguments):  # type: ignore[no-untyped-def]
        return builder.load(builder.gep(arguments[0], [arguments[1]]))

    return room.dtype(room, types.int64), generate


@_generated
def store(_, room, index, row):  # type: ignore[no-untyped-def]
    """Write a row of lanes."""

    def generate(context, builder, signature, arguments):  # type: ignore[no-untyped-def]
        place = _address(builder, arguments[0], arguments[1], arguments[2].type)
        builder.store(arguments[2], place, align=room.dtype.bitwidth // 8)
        return context.get_dummy_value()

    return types.void(room, types.int64, row), generate


@_generated
def nothing(_, room, span):  # type: ignore[no-untyped-def]
    """Return a row of zeros."""
    row = _LaneRow(room.dtype, span.count)

    def generate(context, builder, signature, arguments):  # type: ignore[no-untyped-def]
        return ir.Constant(context.get_value_type(row), None)

    return row(room, span), generate


@_generated
def add_scaled(_, total, factor, row):  # type: ignore[no-untyped-def]
    """Return total + factor * row, the factor being a number or one for every lane."""

    def generate(context, builder, signature, arguments):  # type: ignore[no-untyped-def]
        total, factor, row = arguments
        if not isinstance(factor.type, ir.VectorType):
            factor = _spread(builder, factor, row.type)
        return _muladd(builder, factor, row, total)

    return total(total, factor, row), generate


@_generated
def exchanged(_, row):  # type: ignore[no-untyped-def]
    """Exchange the halves of a row."""

    def generate(context, builder, signature, arguments):  # type: ignore[no-untyped-def]
        count = row.count
        order = [(i + count // 2) % count for i in range(count)]
        mask = ir.Constant(ir.VectorType(ir.IntType(32), count), order)
        unused = ir.Constant(arguments[0].type, ir.Undefined)
        return builder.shuffle_vector(arguments[0], unused, mask)

    return row(row), generate
