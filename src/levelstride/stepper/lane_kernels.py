"""The compiled inner loops for many steps of many lanes.

All unknowns of a lane are rows of one workspace, and a row holds ``len(span)`` lanes side by side:
as many as fill whole vector registers, known when the kernel is compiled. Every part of a step,
whether it adds tendencies up, multiplies with a part of the operator or goes through the factors of
a stage system, is a set of rows written as weighted sums of other rows. ``Program`` lists them;
`march` reads it. See ``lane_program`` for how it is made.

Complex lanes are two halves of a row, real parts first; an imaginary coefficient reads the halves
exchanged and has the sign of the first half turned.
"""

from __future__ import annotations

from typing import Any, NamedTuple

import numpy as np
from llvmlite import ir
from numba import types
from numba.core import cgutils
from numba.extending import intrinsic, models, overload, register_model

from levelstride.stepper.kernels import DONE, WRONG_SHAPE, Places, Vector, compiled, inlined

Span = tuple[int, ...]
"""As many zeros as a row has lanes: the compiler sees the length of a tuple, not that of a row."""

_generated: Any = intrinsic
_function_of: Any = cgutils.get_or_insert_function


class Program(NamedTuple):
    """One step as sweeps over the layers.

    ``sweep`` (nsweep, 5): first and last+1 row set, +1 from the ground up or -1 from the top down,
    layers in a block, largest lag. ``rows`` (nrows, 8), one set of rows, one a layer: place
    written, layers it lags behind the sweep, first and number of ``entry``, of ``group``, of
    ``lane_entry``. ``entry`` (nentry, 3): place read, place of the coefficient, its stride from
    layer to layer.
    ``group`` (ngroup, 4): place of a factor for every lane, whether halves are exchanged, first and
    number of the entries summed before. ``lane_entry`` (nlane_entry, 3): place read, place of the
    coefficients, whether halves are exchanged. Places are those of layer 0.
    """

    sweep: Places
    rows: Places
    entry: Places
    group: Places
    lane_entry: Places
    coefficient: Vector


class _LaneRow(types.Type):
    """A row of lanes in vector registers."""

    def __init__(self, dtype: Any, count: int) -> None:
        self.dtype, self.count = dtype, count
        super().__init__(name=f"LaneRow({dtype}, {count})")


@register_model(_LaneRow)
class _LaneRowModel(models.PrimitiveModel):
    def __init__(self, manager: Any, kind: Any) -> None:
        number = manager.lookup(kind.dtype).get_value_type()
        super().__init__(manager, kind, ir.VectorType(number, kind.count))  # type: ignore[no-untyped-call]


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


def _address(context: Any, builder: Any, array_type: Any, array: Any, index: Any, kind: Any) -> Any:
    data = context.make_array(array_type)(context, builder, array).data
    return builder.bitcast(builder.gep(data, [index]), kind.as_pointer())


@_generated
def _load(_, array, index, span):  # type: ignore[no-untyped-def]
    row = _LaneRow(array.dtype, span.count)

    def generate(context, builder, signature, arguments):  # type: ignore[no-untyped-def]
        kind = context.get_value_type(row)
        place = _address(context, builder, array, arguments[0], arguments[1], kind)
        return builder.load(place, align=array.dtype.bitwidth // 8)

    return row(array, types.int64, span), generate


@_generated
def _store(_, array, index, row):  # type: ignore[no-untyped-def]
    def generate(context, builder, signature, arguments):  # type: ignore[no-untyped-def]
        kind = arguments[2].type
        place = _address(context, builder, array, arguments[0], arguments[1], kind)
        builder.store(arguments[2], place, align=array.dtype.bitwidth // 8)
        return context.get_dummy_value()

    return types.void(array, types.int64, row), generate


@_generated
def _nothing(_, array, span):  # type: ignore[no-untyped-def]
    row = _LaneRow(array.dtype, span.count)

    def generate(context, builder, signature, arguments):  # type: ignore[no-untyped-def]
        return ir.Constant(context.get_value_type(row), None)

    return row(array, span), generate


@_generated
def _add_scaled(_, total, factor, row):  # type: ignore[no-untyped-def]
    def generate(context, builder, signature, arguments):  # type: ignore[no-untyped-def]
        total, factor, row = arguments
        if not isinstance(factor.type, ir.VectorType):
            factor = _spread(builder, factor, row.type)
        return _muladd(builder, factor, row, total)

    return total(total, factor, row), generate


@_generated
def _exchanged(_, row):  # type: ignore[no-untyped-def]
    def generate(context, builder, signature, arguments):  # type: ignore[no-untyped-def]
        count = row.count
        order = [(i + count // 2) % count for i in range(count)]
        mask = ir.Constant(ir.VectorType(ir.IntType(32), count), order)
        unused = ir.Constant(arguments[0].type, ir.Undefined)
        return builder.shuffle_vector(arguments[0], unused, mask)

    return row(row), generate


def load(array: Vector, index: int, span: Span) -> Any:
    """Read a row of lanes."""
    return array[index : index + len(span)].copy()


def store(array: Vector, index: int, row: Any) -> None:
    """Write a row of lanes."""
    array[index : index + row.shape[0]] = row


def nothing(array: Vector, span: Span) -> Any:
    """Return a row of zeros."""
    return np.zeros(len(span), array.dtype)


def add_scaled(total: Any, factor: Any, row: Any) -> Any:
    """Add a row times a number, or times a factor for every lane."""
    return total + factor * row


def exchanged(row: Any) -> Any:
    """Exchange the halves of a row."""
    return np.roll(row, row.shape[0] // 2)


@overload(load, inline="always")
def _load_compiled(array, index, span):  # type: ignore[no-untyped-def]
    return lambda array, index, span: _load(array, index, span)


@overload(store, inline="always")
def _store_compiled(array, index, row):  # type: ignore[no-untyped-def]
    return lambda array, index, row: _store(array, index, row)


@overload(nothing, inline="always")
def _nothing_compiled(array, span):  # type: ignore[no-untyped-def]
    return lambda array, span: _nothing(array, span)


@overload(add_scaled, inline="always")
def _add_scaled_compiled(total, factor, row):  # type: ignore[no-untyped-def]
    return lambda total, factor, row: _add_scaled(total, factor, row)


@overload(exchanged, inline="always")
def _exchanged_compiled(row):  # type: ignore[no-untyped-def]
    return lambda row: _exchanged(row)


@inlined
def plain_rows(work: Vector, coefficient: Vector, entry: Places, out: int, n: int, first: int,
               layers: int, move: int, row: int, span: Span) -> None:  # fmt: skip
    """Write rows that are sums of up to four entries with one coefficient for all lanes."""
    target, here = out + first * row, first * row
    p0, c0, s0 = entry[0, 0] + here, entry[0, 1] + first * entry[0, 2], move * entry[0, 2]
    k1, k2, k3 = min(1, n - 1), min(2, n - 1), min(3, n - 1)
    p1, c1, s1 = entry[k1, 0] + here, entry[k1, 1] + first * entry[k1, 2], move * entry[k1, 2]
    p2, c2, s2 = entry[k2, 0] + here, entry[k2, 1] + first * entry[k2, 2], move * entry[k2, 2]
    p3, c3, s3 = entry[k3, 0] + here, entry[k3, 1] + first * entry[k3, 2], move * entry[k3, 2]
    none = nothing(work, span)
    for i in range(layers):
        r = i * move * row
        total = add_scaled(none, coefficient[c0 + i * s0], load(work, p0 + r, span))
        if n > 1:
            total = add_scaled(total, coefficient[c1 + i * s1], load(work, p1 + r, span))
        if n > 2:
            total = add_scaled(total, coefficient[c2 + i * s2], load(work, p2 + r, span))
        if n > 3:
            total = add_scaled(total, coefficient[c3 + i * s3], load(work, p3 + r, span))
        store(work, target + r, total)


@inlined
def any_rows(work: Vector, lanes: Vector, p: Program, k: int, first: int, layers: int, move: int,
             row: int, span: Span) -> None:  # fmt: skip
    """Write rows with entries of every kind."""
    out, n = p.rows[k, 0], len(span)
    first_entry, last_entry = p.rows[k, 2], p.rows[k, 2] + p.rows[k, 3]
    first_group, last_group = p.rows[k, 4], p.rows[k, 4] + p.rows[k, 5]
    first_lane, last_lane = p.rows[k, 6], p.rows[k, 6] + p.rows[k, 7]
    for i in range(layers):
        j = first + i * move
        total = nothing(work, span)
        for e in range(first_entry, last_entry):
            a = p.coefficient[p.entry[e, 1] + j * p.entry[e, 2]]
            total = add_scaled(total, a, load(work, p.entry[e, 0] + j * row, span))
        for g in range(first_group, last_group):
            part = nothing(work, span)
            for e in range(p.group[g, 2], p.group[g, 2] + p.group[g, 3]):
                a = p.coefficient[p.entry[e, 1] + j * p.entry[e, 2]]
                part = add_scaled(part, a, load(work, p.entry[e, 0] + j * row, span))
            if p.group[g, 1]:
                part = exchanged(part)
            total = add_scaled(total, load(lanes, p.group[g, 0], span), part)
        for e in range(first_lane, last_lane):
            part = load(work, p.lane_entry[e, 0] + j * row, span)
            if p.lane_entry[e, 2]:
                part = exchanged(part)
            total = add_scaled(total, load(lanes, p.lane_entry[e, 1] + j * n, span), part)
        store(work, out + j * row, total)


@compiled
def write_rows(work: Vector, lanes: Vector, p: Program, k: int, low: int, high: int, move: int,
               row: int, span: Span) -> None:  # fmt: skip
    """Write the k-th set of rows at the layers from ``low`` to ``high`` - 1."""
    first, layers = low if move > 0 else high - 1, high - low
    if p.rows[k, 5] == 0 and p.rows[k, 7] == 0 and 1 <= p.rows[k, 3] <= 4:
        begin, n = p.rows[k, 2], p.rows[k, 3]
        entry = p.entry[begin:]
        if n == 1:
            plain_rows(work, p.coefficient, entry, p.rows[k, 0], 1, first, layers, move, row, span)
        elif n == 2:
            plain_rows(work, p.coefficient, entry, p.rows[k, 0], 2, first, layers, move, row, span)
        elif n == 3:
            plain_rows(work, p.coefficient, entry, p.rows[k, 0], 3, first, layers, move, row, span)
        else:
            plain_rows(work, p.coefficient, entry, p.rows[k, 0], 4, first, layers, move, row, span)
    else:
        any_rows(work, lanes, p, k, first, layers, move, row, span)


@compiled
def take_steps(work: Vector, lanes: Vector, p: Program, steps: int, nlev: int, row: int,
               span: Span) -> None:  # fmt: skip
    """Take steps with the lanes in the workspace."""
    for _ in range(steps):
        for s in range(p.sweep.shape[0]):
            begin, end, move, block = p.sweep[s, 0], p.sweep[s, 1], p.sweep[s, 2], p.sweep[s, 3]
            for passed in range(0, nlev + p.sweep[s, 4], block):
                for k in range(begin, end):
                    lag = p.rows[k, 1]
                    low = max(passed - lag, 0)
                    high = min(passed + block - lag, nlev)
                    if low >= high:
                        continue
                    if move < 0:
                        low, high = nlev - high, nlev - low
                    write_rows(work, lanes, p, k, low, high, move, row, span)


@compiled
def march(q: Vector, steps: int, place: Places, p: Program, lanes: Vector, work: Vector, nlev: int,
          row: int, span: Span) -> int:  # fmt: skip
    """Take steps in place, with as many lanes at a time as a row has.

    Parameters
    ----------
    q : ndarray, shape (nstate, nlane, npart)
        States; ``npart`` is 1, or 2 for real and imaginary parts.
    steps : int
    place : ndarray of int, shape (nstate,)
        Places of the unknowns in ``work``.
    p : Program
    lanes : ndarray, shape (ntile, n)
        Factors and coefficients that differ from lane to lane, a row for each set of lanes.
    work : ndarray
        Workspace; written.
    nlev, row : int
        Number of layers, and the stride from one to the next.
    span : tuple
        As long as a row of lanes.

    Returns
    -------
    int
        `DONE`, or `WRONG_SHAPE` if the coefficients are not those of as many lanes.
    """
    nstate, nlane, npart = q.shape
    width = len(span) // npart
    if lanes.shape[0] * width < nlane or place.shape[0] != nstate:
        return WRONG_SHAPE
    for tile in range((nlane + width - 1) // width):
        begin = tile * width
        end = min(begin + width, nlane)
        work[:] = 0.0
        for i in range(nstate):
            for lane in range(begin, end):
                for part in range(npart):
                    work[place[i] + part * width + lane - begin] = q[i, lane, part]
        take_steps(work, lanes[tile], p, steps, nlev, row, span)
        for i in range(nstate):
            for lane in range(begin, end):
                for part in range(npart):
                    q[i, lane, part] = work[place[i] + part * width + lane - begin]
    return DONE


@compiled
def factor_lanes(band: Vector, lower: int, largest: Vector, factor: Vector) -> int:
    """Factor band matrices, one a lane, in place and without interchanges.

    Parameters
    ----------
    band : ndarray, shape (nrow, nband, nlane)
        ``band[i, k]`` is the entry of row i in column i - lower + k. Written: negative multipliers
        to the left; inverse pivot; right of it the row over the pivot, negative.
    lower : int
        Number of entries left of the diagonal.
    largest : ndarray of float, shape (nlane,)
        Workspace.
    factor : ndarray, shape (nlane,)
        Workspace of the type of ``band``.

    Returns
    -------
    int
        0, or the number of the first row, counted from 1, whose pivot cancels to nothing.
    """
    nrow, nband, nlane = band.shape
    for i in range(nrow):
        row = band[i]
        for lane in range(nlane):
            largest[lane] = abs(row[lower, lane])
        for k in range(max(0, lower - i), lower):
            other = band[i - lower + k]
            found = False
            for lane in range(nlane):
                factor[lane] = row[k, lane] * other[lower, lane]
                found = found or row[k, lane] != 0.0
            if not found:
                continue
            for m in range(lower + 1, nband):
                # the row was divided by its pivot: take back what the multiplier divides by
                if k + m - lower >= nband:
                    break
                target = row[k + m - lower]
                for lane in range(nlane):
                    taken = row[k, lane] * other[m, lane]
                    target[lane] += taken
                    if k + m - lower == lower:
                        largest[lane] += abs(taken)
            for lane in range(nlane):
                row[k, lane] = -factor[lane]
        for lane in range(nlane):
            if not abs(row[lower, lane]) > 1e-10 * largest[lane]:
                return i + 1
            row[lower, lane] = 1.0 / row[lower, lane]
            for m in range(lower + 1, nband):
                row[m, lane] *= -row[lower, lane]
    return DONE
