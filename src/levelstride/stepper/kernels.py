"""The compiled inner loops of a step; the only module that knows numba.

States are arrays of shape (nstate, nlane) with the lanes innermost: all lanes do the same
arithmetic, so the compiler turns the inner loops into vector instructions. A lane is one state, for
instance one column of the identity. A kernel writes into what it is handed and returns a status.

Coefficients are arrays of shape (n,), shared by all lanes, or (n, nlane), one a lane: ``lane_of``
picks the one or the other when the kernel is compiled.
"""

from __future__ import annotations

from collections.abc import Callable
from functools import partial
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

PIECE: Final = 1024
"""Numbers of a state added up at once, so that they stay in the innermost cache."""


def compiled(function: Callable[..., Any], *, inline: bool = False) -> Any:
    """Compile a kernel on first use: the one place for flags and caching.

    ``cache``: compiling takes seconds, and a command that answers in one must not pay them every
    time; where neither the package's folder nor the user's cache can be written, numba refuses to
    cache and the kernel is compiled in every process. ``fastmath`` stays off: reordered sums would
    make results depend on the number of lanes, and infinities must pass through so that an
    unstable step shows as such. ``error_model="numpy"``: no check of divisors inside the loops,
    the factorisation looks at its own pivots. ``nogil``: kernels see arrays only, so that other
    threads may work meanwhile. ``inline`` is for what is called once a layer:
    handing over sixteen arrays costs more than the work. The cache names the records of this
    module: after renaming one, old cache files in ``__pycache__`` must go.
    """
    flags: dict[str, Any] = {
        "error_model": "numpy",
        "fastmath": False,
        "forceinline": inline,
        "nogil": True,
    }
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


class Origin(NamedTuple):
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


inlined = partial(compiled, inline=True)
"""Compile into the caller."""


def lane_of(coefficient: Any, lane: int) -> Any:
    """Return a shared coefficient as it is, a row of coefficients at the lane."""
    return coefficient[lane] if np.ndim(coefficient) else coefficient


@overload(lane_of)
def _lane_of(coefficient, lane):  # type: ignore[no-untyped-def]  # numba compares signatures
    if isinstance(coefficient, numba.types.Array):
        return lambda coefficient, lane: coefficient[lane]
    return lambda coefficient, lane: coefficient


@compiled
def multiply(rows: Rows, x: Vector, y: Vector, nlane: int) -> None:
    """Y = A x for the first ``nlane`` lanes; two entries of a row at a time."""
    for i in range(y.shape[0]):
        out = y[i]
        first, last = rows.start[i], rows.start[i + 1]
        odd = (last - first) % 2
        if odd:
            a, p = rows.value[first], x[rows.column[first]]
            for lane in range(nlane):
                out[lane] = lane_of(a, lane) * p[lane]
        else:
            for lane in range(nlane):
                out[lane] = 0.0
        for k in range(first + odd, last, 2):
            a, p = rows.value[k], x[rows.column[k]]
            b, q = rows.value[k + 1], x[rows.column[k + 1]]
            for lane in range(nlane):
                out[lane] += lane_of(a, lane) * p[lane] + lane_of(b, lane) * q[lane]


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
def solve(y: Vector, at: Origin, has: Traits, c: Reduction, d: int, nlane: int) -> None:
    """Solve the stage system for the d-th diagonal coefficient in place, from rhs to Y.

    Upward: pi' without its part from w, then the right-hand side of w, eliminating from below.
    Downward: w, then pi', u and theta' of the layer above it. Shapes: ``y`` (nstate, nlane).
    Couplings that the ground and the lid lack have coefficient zero.
    """
    for j in range(at.nlev):
        begin_layer(y, at, has, c, d, j, nlane)
        if j > 0:
            begin_interface(y, at, has, c, d, j - 1, nlane)
    for j in range(at.nlev - 1, -1, -1):
        if j > 0:
            m = j - 1
            w = y[at.w + m * at.stride]
            above = y[at.w + min(j, at.nlev - 2) * at.stride]
            inverse, upper = c.inverse[d][m], c.upper[d][m]
            for lane in range(nlane):
                w[lane] = lane_of(inverse, lane) * w[lane] + lane_of(upper, lane) * above[lane]
        finish_layer(y, at, has, c, d, j, nlane)


@inlined
def begin_layer(y: Vector, at: Origin, has: Traits, c: Reduction, d: int, j: int,
                nlane: int) -> None:  # fmt: skip
    """Put into pi' what it is without w."""
    pi, u = y[at.pi + j * at.stride], y[at.u + j * at.stride]
    if has.neighbours_in_pressure:
        below = y[at.u + max(j - 1, 0) * at.stride]
        above = y[at.u + min(j + 1, at.nlev - 1) * at.stride]
        a, b = c.pi_u_below[d][j], c.pi_u_above[d][j]
        for lane in range(nlane):
            pi[lane] += lane_of(a, lane) * below[lane] + lane_of(b, lane) * above[lane]
    if has.wind_in_pressure or has.pressure_in_wind:
        a, b = c.pi_u[d][j], c.shrink[d][j]
        for lane in range(nlane):
            pi[lane] = lane_of(b, lane) * (pi[lane] + lane_of(a, lane) * u[lane])


@inlined
def begin_interface(y: Vector, at: Origin, has: Traits, c: Reduction, d: int, m: int,
                    nlane: int) -> None:  # fmt: skip
    """Put into w the right-hand side of the tridiagonal system, and eliminate the w below."""
    w, below = y[at.w + m * at.stride], y[at.w + max(m - 1, 0) * at.stride]
    pi_low, pi_high = y[at.pi + m * at.stride], y[at.pi + (m + 1) * at.stride]
    if has.buoyancy:
        low = y[at.theta + m * at.stride]
        a = c.w_theta_below[d][m]
        for lane in range(nlane):
            w[lane] += lane_of(a, lane) * low[lane]
        if has.lorenz:
            high = y[at.theta + (m + 1) * at.stride]
            b = c.w_theta_above[d][m]
            for lane in range(nlane):
                w[lane] += lane_of(b, lane) * high[lane]
    p, q, r = c.w_pi_below[d][m], c.w_pi_above[d][m], c.lower[d][m]
    for lane in range(nlane):
        w[lane] += (
            lane_of(p, lane) * pi_low[lane]
            + lane_of(q, lane) * pi_high[lane]
            + lane_of(r, lane) * below[lane]
        )


@inlined
def finish_layer(y: Vector, at: Origin, has: Traits, c: Reduction, d: int, j: int,
                 nlane: int) -> None:  # fmt: skip
    """Give pi', u and theta' of a layer their part from the solved w."""
    pi, u = y[at.pi + j * at.stride], y[at.u + j * at.stride]
    below = y[at.w + max(j - 1, 0) * at.stride]
    above = y[at.w + min(j, at.nlev - 2) * at.stride]
    a, b, g = c.pi_w_below[d][j], c.pi_w_above[d][j], c.u_pi[d][j]
    for lane in range(nlane):
        pi[lane] += lane_of(a, lane) * below[lane] + lane_of(b, lane) * above[lane]
    if has.pressure_in_wind:
        for lane in range(nlane):
            u[lane] += lane_of(g, lane) * pi[lane]
    if has.stratification and (has.lorenz or j < at.nlev - 1):
        theta = y[at.theta + j * at.stride]
        a, b = c.theta_w_below[d][j], c.theta_w_above[d][j]
        for lane in range(nlane):
            theta[lane] += lane_of(a, lane) * below[lane] + lane_of(b, lane) * above[lane]


@compiled
def combine(q: Vector, kept: Vector, schedule: Schedule, stage: int, out: Vector) -> None:
    """Out = q + the weighted tendencies kept for one stage; all arrays flat, ``kept`` by slot.

    A piece of ``out`` stays in the cache while all tendencies are added to it, two at a time.
    """
    first, last = schedule.first[stage], schedule.first[stage + 1]
    odd = (last - first) % 2
    for begin in range(0, out.shape[0], PIECE):
        end = min(begin + PIECE, out.shape[0])
        target = out[begin:end]
        target[:] = q[begin:end]
        if odd:
            a, p = schedule.weight[first], kept[schedule.slot[first], begin:end]
            for i in range(target.shape[0]):
                target[i] += a * p[i]
        for k in range(first + odd, last, 2):
            a, p = schedule.weight[k], kept[schedule.slot[k], begin:end]
            b, r = schedule.weight[k + 1], kept[schedule.slot[k + 1], begin:end]
            for i in range(target.shape[0]):
                target[i] += a * p[i] + b * r[i]


@compiled
def advance(q: Vector, out: Vector, kept: Vector, work: Vector, schedule: Schedule, slow: Rows,
            fast: Rows, at: Origin, has: Traits, c: Reduction) -> int:  # fmt: skip
    """Take one step for all lanes, a block of lanes at a time.

    Parameters
    ----------
    q, out : ndarray, shape (nstate, nlane)
        State before and after the step.
    kept : ndarray, shape (nslot, nstate, nblock)
        Workspace for the tendencies.
    work : ndarray, shape (2, nstate, nblock)
        Workspace for the block's state before the step and for a stage.
    schedule : Schedule
    slow, fast : Rows
        The two parts of the operator.
    at, has, c : Origin, Traits, Reduction
        The stage systems; not read where no stage is solved.

    Returns
    -------
    int
        `DONE`, or `WRONG_SHAPE` if the workspaces do not fit.
    """
    nstate, nlane, nblock = q.shape[0], q.shape[1], work.shape[2]
    if work.shape[1] != nstate or kept.shape[1:] != work.shape[1:] or nblock < 1:
        return WRONG_SHAPE
    nstage = schedule.used.shape[0]
    start_of_step, y = work[0], work[1]
    flat_start, flat_y = start_of_step.reshape(-1), y.reshape(-1)
    flat_kept = kept.reshape(kept.shape[0], nstate * nblock)
    work[:] = 0.0
    for start in range(0, nlane, nblock):
        width = min(nblock, nlane - start)
        start_of_step[:, :width] = q[:, start : start + width]
        for i in range(nstage):
            if not schedule.used[i]:
                continue
            combine(flat_start, flat_kept, schedule, i, flat_y)
            keep = schedule.fast_slot[i]
            if schedule.solver[i] >= 0:
                if keep >= 0:
                    flat_kept[keep] = flat_y
                solve(y, at, has, c, schedule.solver[i], width)
                if keep >= 0:
                    for k in range(flat_y.shape[0]):
                        flat_kept[keep, k] = flat_y[k] - flat_kept[keep, k]
            elif keep >= 0:
                multiply(fast, y, kept[keep], width)
            if schedule.slow_slot[i] >= 0:
                multiply(slow, y, kept[schedule.slow_slot[i]], width)
        if schedule.result_stage < 0:
            combine(flat_start, flat_kept, schedule, nstage, flat_y)
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
