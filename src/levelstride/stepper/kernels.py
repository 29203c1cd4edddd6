"""The compiled inner loops of a step; the only module that knows numba.

States are arrays of shape (nstate, nlane) with the lanes innermost: all lanes do the same
arithmetic, so the compiler turns the inner loops into vector instructions. A lane is one state, for
instance one column of the identity. A kernel writes into what it is handed and returns a status.

Coefficients are arrays of shape (n,), shared by all lanes, or (n, nlane), one a lane: ``lane_of``
picks the one or the other when the kernel is compiled.
"""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from typing import Any, Final, NamedTuple

import numba
import numpy as np
from numba.extending import overload
from numpy.typing import NDArray

Vector = NDArray[Any]
Places = NDArray[np.int64]

DONE: Final = 0
WRONG_SHAPE: Final = -1

LANES: Final = 32
"""Lanes taken through a whole step at once, so that the stages of a block stay in the cache."""


def compiled(function: Callable[..., Any]) -> Any:
    """Compile a kernel on first use: the one place for flags and caching.

    ``cache``: compiling takes seconds, and a command that answers in one must not pay them every
    time; where neither the package's folder nor the user's cache can be written, numba refuses to
    cache and the kernel is compiled in every process. ``fastmath`` stays off: reordered sums would
    make results depend on the number of lanes, and infinities must pass through so that an
    unstable step shows as such. ``error_model="numpy"``: no check of divisors inside the loops,
    the factorisation looks at its own pivots.
    """
    flags: dict[str, Any] = {"error_model": "numpy", "fastmath": False}
    try:
        return numba.njit(cache=True, **flags)(function)
    except RuntimeError:
        return numba.njit(cache=False, **flags)(function)


class Rows(NamedTuple):
    """A sparse matrix, row by row: ``start`` (nstate+1,), ``column`` and ``value`` (nentry,)."""

    start: Places
    column: Places
    value: Vector


class Schedule(NamedTuple):
    """A step: the weights of the kept tendencies in each stage, and what each stage must do.

    ``first`` (nstage+2,) bounds the entries of each stage, and of the result, in ``slot`` and
    ``weight``; ``used``, ``solver``, ``slow_slot``, ``fast_slot`` (nstage,) as in ``Plan``.
    """

    first: Places
    slot: Places
    weight: Vector
    used: Places
    solver: Places
    slow_slot: Places
    fast_slot: Places
    result_stage: int


class Places5(NamedTuple):
    """Where the unknowns of layer and interface 0 are, and the stride to the next."""

    nlev: int
    stride: int
    u: int
    pi: int
    w: int
    theta: int


class Traits(NamedTuple):
    """Which couplings the stage system has; loops over absent ones are left out."""

    wind_in_pressure: int
    neighbours_in_pressure: int
    pressure_in_wind: int
    buoyancy: int
    stratification: int
    lorenz: int


class Reduction(NamedTuple):
    """Stage system reduced to w, per distinct diagonal coefficient, all times h = a_ii dt.

    Layers (ndiagonal, nlev): pi' from u (``pi_u`` and neighbours), ``shrink`` = 1/(1 - h^2 H P),
    pi' from w with ``shrink`` included, u from pi', theta' from w. Interfaces (ndiagonal, nlev-1):
    w from pi' and theta', and the factors ``lower``, ``inverse``, ``upper`` of the tridiagonal
    system. ``below`` and ``above`` say on which side the neighbour lies.
    """

    pi_u: Vector
    pi_u_below: Vector
    pi_u_above: Vector
    shrink: Vector
    pi_w_below: Vector
    pi_w_above: Vector
    u_pi: Vector
    theta_w_below: Vector
    theta_w_above: Vector
    w_pi_below: Vector
    w_pi_above: Vector
    w_theta_below: Vector
    w_theta_above: Vector
    lower: Vector
    inverse: Vector
    upper: Vector


def lane_of(coefficient: Any, lane: int) -> Any:
    """Return a shared coefficient as it is, a row of coefficients at the lane."""
    return coefficient[lane] if np.ndim(coefficient) else coefficient


@overload(lane_of, inline="always")
def _lane_of(coefficient, lane):  # type: ignore[no-untyped-def]  # numba compares signatures
    if isinstance(coefficient, numba.types.Array):
        return lambda coefficient, lane: coefficient[lane]
    return lambda coefficient, lane: coefficient


@compiled
def multiply(rows: Rows, x: Vector, y: Vector, nlane: int) -> None:
    """Y = A x for the first ``nlane`` lanes."""
    for i in range(y.shape[0]):
        out = y[i]
        first, last = rows.start[i], rows.start[i + 1]
        if first == last:
            for lane in range(nlane):
                out[lane] = 0.0
            continue
        a, source = rows.value[first], x[rows.column[first]]
        for lane in range(nlane):
            out[lane] = lane_of(a, lane) * source[lane]
        for k in range(first + 1, last):
            add_product(out, rows.value[k], x[rows.column[k]], nlane)


@compiled
def add_product(out: Vector, coefficient: Any, source: Vector, nlane: int) -> None:
    """Add coefficient times source to out, lane by lane."""
    for lane in range(nlane):
        out[lane] += lane_of(coefficient, lane) * source[lane]


@compiled
def factor(sub: Vector, diagonal: Vector, sup: Vector, lower: Vector, inverse: Vector,
           upper: Vector) -> int:  # fmt: skip
    """Factor a tridiagonal matrix without interchanges.

    Parameters
    ----------
    sub, diagonal, sup : ndarray, shape (n,)
        Row-aligned; ``sub[0]`` and ``sup[n-1]`` are not read.
    lower, inverse, upper : ndarray, shape (n,)
        Written: multipliers and inverse pivots times ``sup``, both negative so that the solve only
        adds, and inverse pivots.

    Returns
    -------
    int
        0, or the number of the first row, counted from 1, whose pivot cancels to nothing.
    """
    status = DONE
    for i in range(diagonal.shape[0]):
        taken = 0.0 * diagonal[i]
        lower[i] = taken
        if i > 0:
            lower[i] = -sub[i] * inverse[i - 1]
            taken = -lower[i] * sup[i - 1]
        pivot = diagonal[i] - taken
        if status == DONE and not abs(pivot) > 1e-10 * (abs(diagonal[i]) + abs(taken)):
            status = i + 1
        inverse[i] = 1.0 / pivot
        upper[i] = -inverse[i] * sup[i]
    return status


@compiled
def solve(y: Vector, at: Places5, has: Traits, c: Reduction, d: int, nlane: int) -> None:
    """Solve the stage system for the d-th diagonal coefficient in place, from rhs to Y.

    Upward: pi' without its part from w, then the right-hand side of w, eliminating from below.
    Downward: w, then pi', u and theta' of the layer above it. Shapes: ``y`` (nstate, nlane).
    """
    for j in range(at.nlev):
        begin_layer(y, at, has, c, d, j, nlane)
        if j > 0:
            m = j - 1
            w = y[at.w + m * at.stride]
            begin_interface(y, w, at, has, c, d, m, nlane)
            if m > 0:
                add_product(w, c.lower[d][m], y[at.w + (m - 1) * at.stride], nlane)
    for m in range(at.nlev - 2, -1, -1):
        w, inverse = y[at.w + m * at.stride], c.inverse[d][m]
        for lane in range(nlane):
            w[lane] *= lane_of(inverse, lane)
        if m < at.nlev - 2:
            add_product(w, c.upper[d][m], y[at.w + (m + 1) * at.stride], nlane)
        finish_layer(y, at, has, c, d, m + 1, nlane)
    finish_layer(y, at, has, c, d, 0, nlane)


@compiled
def begin_layer(y: Vector, at: Places5, has: Traits, c: Reduction, d: int, j: int,
                nlane: int) -> None:  # fmt: skip
    """Put into pi' what it is without w."""
    pi = y[at.pi + j * at.stride]
    if has.wind_in_pressure:
        add_product(pi, c.pi_u[d][j], y[at.u + j * at.stride], nlane)
    if has.neighbours_in_pressure:
        if j > 0:
            add_product(pi, c.pi_u_below[d][j], y[at.u + (j - 1) * at.stride], nlane)
        if j < at.nlev - 1:
            add_product(pi, c.pi_u_above[d][j], y[at.u + (j + 1) * at.stride], nlane)
    if has.pressure_in_wind:
        shrink = c.shrink[d][j]
        for lane in range(nlane):
            pi[lane] *= lane_of(shrink, lane)


@compiled
def begin_interface(y: Vector, w: Vector, at: Places5, has: Traits, c: Reduction, d: int, m: int,
                    nlane: int) -> None:  # fmt: skip
    """Put into w the right-hand side of the tridiagonal system."""
    add_product(w, c.w_pi_below[d][m], y[at.pi + m * at.stride], nlane)
    add_product(w, c.w_pi_above[d][m], y[at.pi + (m + 1) * at.stride], nlane)
    if has.buoyancy:
        add_product(w, c.w_theta_below[d][m], y[at.theta + m * at.stride], nlane)
        if has.lorenz:
            add_product(w, c.w_theta_above[d][m], y[at.theta + (m + 1) * at.stride], nlane)


@compiled
def finish_layer(y: Vector, at: Places5, has: Traits, c: Reduction, d: int, j: int,
                 nlane: int) -> None:  # fmt: skip
    """Give pi', u and theta' of a layer their part from the solved w."""
    pi = y[at.pi + j * at.stride]
    below, above = y[at.w + (j - 1) * at.stride], y[at.w + j * at.stride]
    theta = y[at.theta + j * at.stride]
    stored = j < at.nlev - 1 or has.lorenz
    if j > 0:
        add_product(pi, c.pi_w_below[d][j], below, nlane)
        if has.stratification and has.lorenz:
            add_product(theta, c.theta_w_below[d][j], below, nlane)
    if j < at.nlev - 1:
        add_product(pi, c.pi_w_above[d][j], above, nlane)
        if has.stratification and stored:
            add_product(theta, c.theta_w_above[d][j], above, nlane)
    if has.pressure_in_wind:
        add_product(y[at.u + j * at.stride], c.u_pi[d][j], pi, nlane)


@compiled
def combine(q: Vector, kept: Vector, schedule: Schedule, stage: int, out: Vector, start: int,
            nlane: int) -> None:  # fmt: skip
    """Out = lanes of q from ``start`` + the weighted tendencies kept for one stage."""
    first, last = schedule.first[stage], schedule.first[stage + 1]
    for i in range(out.shape[0]):
        target, source = out[i], q[i]
        for lane in range(nlane):
            target[lane] = source[start + lane]
        for k in range(first, last):
            add_product(target, schedule.weight[k], kept[schedule.slot[k], i], nlane)


@compiled
def difference(kept: Vector, y: Vector, rhs: Vector, nlane: int) -> None:
    """Kept = y - rhs for the first lanes."""
    for i in range(y.shape[0]):
        target, high, low = kept[i], y[i], rhs[i]
        for lane in range(nlane):
            target[lane] = high[lane] - low[lane]


@compiled
def advance(q: Vector, out: Vector, kept: Vector, y: Vector, rhs: Vector, schedule: Schedule,
            slow: Rows, fast: Rows, at: Places5, has: Traits, c: Reduction) -> int:  # fmt: skip
    """Take one step for all lanes, a block of lanes at a time.

    Parameters
    ----------
    q, out : ndarray, shape (nstate, nlane)
        State before and after the step.
    kept : ndarray, shape (nslot, nstate, nblock)
        Workspace for the tendencies.
    y, rhs : ndarray, shape (nstate, nblock)
        Workspace for a stage and its right-hand side.
    schedule : Schedule
    slow, fast : Rows
        The two parts of the operator.
    at, has, c : Places5, Traits, Reduction
        The stage systems; not read where no stage is solved.

    Returns
    -------
    int
        `DONE`, or `WRONG_SHAPE` if the workspaces do not fit.
    """
    nstate, nlane, nblock = q.shape[0], q.shape[1], y.shape[1]
    if y.shape[0] != nstate or rhs.shape != y.shape or kept.shape[1:] != y.shape or nblock < 1:
        return WRONG_SHAPE
    nstage = schedule.used.shape[0]
    for start in range(0, nlane, nblock):
        width = min(nblock, nlane - start)
        for i in range(nstage):
            if not schedule.used[i]:
                continue
            combine(q, kept, schedule, i, y, start, width)
            if schedule.solver[i] >= 0:
                rhs[:, :width] = y[:, :width]
                solve(y, at, has, c, schedule.solver[i], width)
                if schedule.fast_slot[i] >= 0:
                    difference(kept[schedule.fast_slot[i]], y, rhs, width)
            elif schedule.fast_slot[i] >= 0:
                multiply(fast, y, kept[schedule.fast_slot[i]], width)
            if schedule.slow_slot[i] >= 0:
                multiply(slow, y, kept[schedule.slow_slot[i]], width)
        if schedule.result_stage < 0:
            combine(q, kept, schedule, nstage, y, start, width)
        out[:, start : start + width] = y[:, :width]
    return DONE


def is_compiled() -> bool:
    """Whether the step is compiled, in this process or in a cache at least as new as this file."""
    if advance.signatures:
        return True
    folder = advance.stats.cache_path
    if folder is None:
        return False
    written = Path(__file__).stat().st_mtime
    return any(
        found.stat().st_mtime >= written
        for found in Path(folder).glob(f"{Path(__file__).stem}.advance-*.nbi")
    )
