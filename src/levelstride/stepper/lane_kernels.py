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

from typing import Any, Final, NamedTuple

from levelstride.stepper.kernels import DONE, WRONG_SHAPE, Places, Vector, compiled, inlined
from levelstride.stepper.lane_registers import (
    Span,
    add_scaled,
    bare,
    exchanged,
    fixed,
    load,
    nothing,
    number,
    store,
)


class Program(NamedTuple):
    """One step as sweeps over the layers.

    ``sweep`` (nsweep, 5): first and last+1 set of rows, +1 from the ground up or -1 from the top
    down, layers in a block, largest lag.
    ``rows`` (nrows, 9), sets of rows, one a layer: place written, layers it lags behind the sweep,
    first and number of ``entry``, of ``group``, of ``lane_entry``, position in `SHAPES` from 1.
    ``entry`` (nentry, 3): place read, place of the coefficient, its stride from layer to layer.
    ``group`` (ngroup, 4): places of the real and of the imaginary part of a factor for every lane,
    the latter -1 if it is zero, first and number of the entries summed before.
    ``lane_entry`` (nlane_entry, 3): place read, place of the coefficients, whether halves are
    exchanged. Places are those of layer 0.
    """

    sweep: Places
    rows: Places
    entry: Places
    group: Places
    lane_entry: Places
    coefficient: Vector


SHAPES: Final = (
    (1, 0, 0, 0),
    (2, 0, 0, 0),
    (3, 0, 0, 0),
    (4, 0, 0, 0),
    (5, 0, 0, 0),
    (6, 0, 0, 0),
    (2, 1, 0, 0),
    (3, 1, 0, 0),
    (4, 1, 0, 0),
    (5, 1, 0, 0),
    (6, 1, 0, 0),
    (0, 0, 1, 0),
    (1, 0, 1, 0),
    (2, 0, 1, 0),
    (0, 0, 2, 0),
    (1, 0, 2, 0),
    (0, 0, 1, 1),
    (1, 0, 1, 1),
    (0, 0, 2, 1),
    (1, 0, 2, 1),
)
"""Numbers of entries, carried, in the group, turned: sums for which there is a loop of its own.

Their order is that of the numbers in `write_rows`, where 0 stands for all others.
"""


class Bare(NamedTuple):
    """A workspace and a program, all flat and without reference counts."""

    work: Any
    lanes: Any
    coefficient: Any
    sweep: Any
    rows: Any
    entry: Any
    group: Any
    lane_entry: Any


@inlined
def simple_rows(b: Bare, k: int, n: int, carry: int, m: int, turned: int, first: int, layers: int,
                move: int, row: int, span: Span) -> None:  # fmt: skip
    """Write rows that are sums of ``n`` entries, six at the most, and of one group of ``m`` <= 2.

    With ``carry`` the last of the ``n`` is the row written just before: it stays in registers.
    ``turned``: the factor of the group has an imaginary part. All four are known to the compiler.
    """
    here, up = first * row, move * row
    target, k0 = number(b.rows, 9 * k) + here, 3 * number(b.rows, 9 * k + 2)
    k1, k2, k3 = k0 + 3 * min(1, n - 1), k0 + 3 * min(2, n - 1), k0 + 3 * min(3, n - 1)
    k4, k5 = k0 + 3 * min(4, n - 1), k0 + 3 * min(5, n - 1)
    p0, c0, s0 = number(b.entry, k0) + here, number(b.entry, k0 + 1), number(b.entry, k0 + 2)
    p1, c1, s1 = number(b.entry, k1) + here, number(b.entry, k1 + 1), number(b.entry, k1 + 2)
    p2, c2, s2 = number(b.entry, k2) + here, number(b.entry, k2 + 1), number(b.entry, k2 + 2)
    p3, c3, s3 = number(b.entry, k3) + here, number(b.entry, k3 + 1), number(b.entry, k3 + 2)
    p4, c4, s4 = number(b.entry, k4) + here, number(b.entry, k4 + 1), number(b.entry, k4 + 2)
    p5, c5, s5 = number(b.entry, k5) + here, number(b.entry, k5 + 1), number(b.entry, k5 + 2)
    g, ka = 0, 0
    if m > 0:
        g = 4 * number(b.rows, 9 * k + 4)
        ka = 3 * number(b.group, g + 2)
    kb = ka + 3 * min(1, m - 1)
    pa, ca, sa = number(b.entry, ka) + here, number(b.entry, ka + 1), number(b.entry, ka + 2)
    pb, cb, sb = number(b.entry, kb) + here, number(b.entry, kb + 1), number(b.entry, kb + 2)
    none = nothing(b.work, span)
    real, imaginary, before = none, none, none
    if m > 0:
        real = load(b.lanes, number(b.group, g), span)
        if turned:
            imaginary = load(b.lanes, number(b.group, g + 1), span)
    if carry:
        before = load(b.work, p5, span)
    for i in range(layers):
        r, j = i * up, first + i * move
        total = none
        if n - carry > 0:
            total = add_scaled(none, number(b.coefficient, c0 + j * s0), load(b.work, p0 + r, span))
        if n - carry > 1:
            total = add_scaled(
                total, number(b.coefficient, c1 + j * s1), load(b.work, p1 + r, span)
            )
        if n - carry > 2:
            total = add_scaled(
                total, number(b.coefficient, c2 + j * s2), load(b.work, p2 + r, span)
            )
        if n - carry > 3:
            total = add_scaled(
                total, number(b.coefficient, c3 + j * s3), load(b.work, p3 + r, span)
            )
        if n - carry > 4:
            total = add_scaled(
                total, number(b.coefficient, c4 + j * s4), load(b.work, p4 + r, span)
            )
        if n - carry > 5:
            total = add_scaled(
                total, number(b.coefficient, c5 + j * s5), load(b.work, p5 + r, span)
            )
        if m > 0:
            part = add_scaled(none, number(b.coefficient, ca + j * sa), load(b.work, pa + r, span))
            if m > 1:
                part = add_scaled(
                    part, number(b.coefficient, cb + j * sb), load(b.work, pb + r, span)
                )
            total = add_scaled(total, real, part)
            if turned:
                total = add_scaled(total, imaginary, exchanged(part))
        if carry:
            total = add_scaled(total, number(b.coefficient, c5 + j * s5), before)
            before = total
        store(b.work, target + r, total)


@inlined
def any_rows(b: Bare, k: int, first: int, layers: int, move: int, row: int,
             span: Span) -> None:  # fmt: skip
    """Write rows with entries of every kind."""
    out, n, k9 = number(b.rows, 9 * k), len(span), 9 * k
    first_entry = number(b.rows, k9 + 2)
    last_entry = first_entry + number(b.rows, k9 + 3)
    first_group = number(b.rows, k9 + 4)
    last_group = first_group + number(b.rows, k9 + 5)
    first_lane = number(b.rows, k9 + 6)
    last_lane = first_lane + number(b.rows, k9 + 7)
    for i in range(layers):
        j = first + i * move
        total = nothing(b.work, span)
        for e in range(3 * first_entry, 3 * last_entry, 3):
            a = number(b.coefficient, number(b.entry, e + 1) + j * number(b.entry, e + 2))
            total = add_scaled(total, a, load(b.work, number(b.entry, e) + j * row, span))
        for g in range(4 * first_group, 4 * last_group, 4):
            part = nothing(b.work, span)
            begin = 3 * number(b.group, g + 2)
            for e in range(begin, begin + 3 * number(b.group, g + 3), 3):
                a = number(b.coefficient, number(b.entry, e + 1) + j * number(b.entry, e + 2))
                part = add_scaled(part, a, load(b.work, number(b.entry, e) + j * row, span))
            total = add_scaled(total, load(b.lanes, number(b.group, g), span), part)
            if number(b.group, g + 1) >= 0:
                imaginary = load(b.lanes, number(b.group, g + 1), span)
                total = add_scaled(total, imaginary, exchanged(part))
        for e in range(3 * first_lane, 3 * last_lane, 3):
            part = load(b.work, number(b.lane_entry, e) + j * row, span)
            if number(b.lane_entry, e + 2):
                part = exchanged(part)
            a = load(b.lanes, number(b.lane_entry, e + 1) + j * n, span)
            total = add_scaled(total, a, part)
        store(b.work, out + j * row, total)


@inlined
def write_rows(b: Bare, k: int, low: int, high: int, move: int, row: int,
               span: Span) -> None:  # fmt: skip
    """Write the k-th set of rows at the layers from ``low`` to ``high`` - 1; see `SHAPES`."""
    first, layers, shape = low if move > 0 else high - 1, high - low, number(b.rows, 9 * k + 8)
    if shape == 0:
        any_rows(b, k, first, layers, move, row, span)
    elif shape == 1:
        simple_rows(b, k, fixed(1), fixed(0), fixed(0), fixed(0), first, layers, move, row, span)
    elif shape == 2:
        simple_rows(b, k, fixed(2), fixed(0), fixed(0), fixed(0), first, layers, move, row, span)
    elif shape == 3:
        simple_rows(b, k, fixed(3), fixed(0), fixed(0), fixed(0), first, layers, move, row, span)
    elif shape == 4:
        simple_rows(b, k, fixed(4), fixed(0), fixed(0), fixed(0), first, layers, move, row, span)
    elif shape == 5:
        simple_rows(b, k, fixed(5), fixed(0), fixed(0), fixed(0), first, layers, move, row, span)
    elif shape == 6:
        simple_rows(b, k, fixed(6), fixed(0), fixed(0), fixed(0), first, layers, move, row, span)
    elif shape == 7:
        simple_rows(b, k, fixed(2), fixed(1), fixed(0), fixed(0), first, layers, move, row, span)
    elif shape == 8:
        simple_rows(b, k, fixed(3), fixed(1), fixed(0), fixed(0), first, layers, move, row, span)
    elif shape == 9:
        simple_rows(b, k, fixed(4), fixed(1), fixed(0), fixed(0), first, layers, move, row, span)
    elif shape == 10:
        simple_rows(b, k, fixed(5), fixed(1), fixed(0), fixed(0), first, layers, move, row, span)
    elif shape == 11:
        simple_rows(b, k, fixed(6), fixed(1), fixed(0), fixed(0), first, layers, move, row, span)
    elif shape == 12:
        simple_rows(b, k, fixed(0), fixed(0), fixed(1), fixed(0), first, layers, move, row, span)
    elif shape == 13:
        simple_rows(b, k, fixed(1), fixed(0), fixed(1), fixed(0), first, layers, move, row, span)
    elif shape == 14:
        simple_rows(b, k, fixed(2), fixed(0), fixed(1), fixed(0), first, layers, move, row, span)
    elif shape == 15:
        simple_rows(b, k, fixed(0), fixed(0), fixed(2), fixed(0), first, layers, move, row, span)
    elif shape == 16:
        simple_rows(b, k, fixed(1), fixed(0), fixed(2), fixed(0), first, layers, move, row, span)
    elif shape == 17:
        simple_rows(b, k, fixed(0), fixed(0), fixed(1), fixed(1), first, layers, move, row, span)
    elif shape == 18:
        simple_rows(b, k, fixed(1), fixed(0), fixed(1), fixed(1), first, layers, move, row, span)
    elif shape == 19:
        simple_rows(b, k, fixed(0), fixed(0), fixed(2), fixed(1), first, layers, move, row, span)
    elif shape == 20:
        simple_rows(b, k, fixed(1), fixed(0), fixed(2), fixed(1), first, layers, move, row, span)


@compiled
def take_steps(b: Bare, nsweep: int, steps: int, nlev: int, row: int, span: Span) -> None:
    """Take steps with the lanes in the workspace."""
    for _ in range(steps):
        for s in range(0, 5 * nsweep, 5):
            begin, end = number(b.sweep, s), number(b.sweep, s + 1)
            move, block = number(b.sweep, s + 2), number(b.sweep, s + 3)
            for passed in range(0, nlev + number(b.sweep, s + 4), block):
                for k in range(begin, end):
                    lag = number(b.rows, 9 * k + 1)
                    low, high = max(passed - lag, 0), min(passed + block - lag, nlev)
                    if low >= high:
                        continue
                    if move < 0:
                        low, high = nlev - high, nlev - low
                    write_rows(b, k, low, high, move, row, span)


@compiled
def take_steps_in(work: Vector, lanes: Vector, p: Program, steps: int, nlev: int, row: int,
                  span: Span) -> None:  # fmt: skip
    """Take steps with the lanes in the workspace."""
    b = Bare(
        bare(work), bare(lanes), bare(p.coefficient), bare(p.sweep.reshape(-1)),
        bare(p.rows.reshape(-1)), bare(p.entry.reshape(-1)), bare(p.group.reshape(-1)),
        bare(p.lane_entry.reshape(-1)),
    )  # fmt: skip
    take_steps(b, p.sweep.shape[0], steps, nlev, row, span)


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
        take_steps_in(work, lanes[tile], p, steps, nlev, row, span)
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
