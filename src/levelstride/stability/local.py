"""Per-layer von Neumann analysis of one step: a screen for steps where weak growth may sit.

The operator is frozen layer by layer and its blocks meet a vertical phase angle (Hirsch 2007,
Numerical Computation of Internal and External Flows, chapter 7), so that a step becomes a few dozen
matrices of four or five unknowns instead of one of hundreds. That says where to look. It is no
verdict: modes that fill the column feel many layers at once, and an instability that lives on the
change from layer to layer is not in it at all. Dense eigenvalues judge.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from levelstride.operator.bands import Banded
from levelstride.schemes.program import Program, run
from levelstride.schemes.scheme import ProgramScheme, TimeScheme
from levelstride.splitting.parts import Parts
from levelstride.stability.symbols import (
    chosen_layers,
    distinct,
    frozen_symbols,
    larger,
    phase_angles,
    turned_real,
)
from levelstride.stepper.plan import NONE, Plan
from levelstride.stepper.program_stepper import roles

Matrix = NDArray[Any]
Array = NDArray[np.float64]

SPAN_S = 3.0e6
"""Time over which the norm of a power is followed to tell which symbol grows most [s]."""

UNCHECKED = 4
"""Squarings between two looks at the norm."""

BLOCK_BYTES = 2**18
"""Size of the arrays of matrices stepped together: beyond it, memory is fetched anew each time."""


class LocalScreen:
    """Growth of the frozen symbols of one wave under one tableau.

    Parameters
    ----------
    parts : Parts
        In energy coordinates, in which partner terms are skew.
    tableau : TimeScheme
    layers : int
        Layers looked at, at most.
    angles : int
        Vertical phase angles up to pi, more where few layers stand for the column.

    Attributes
    ----------
    layers : ndarray of int, shape (nlayer,)
        Layers looked at, ascending.
    angles : ndarray, shape (nlayer, nangle)
        Phase angles from one layer to the next, their sign left out [rad].
    symbols : ndarray, shape (npart, stride, stride, nlane)
        Frozen slow, fast and two after-step parts, and for schemes that are programs explicit
        pressure gradients and divergences, real or complex [1/s]. A lane is a layer and an
        angle, or a layer without vertical motion; of lanes that are alike only one is kept.
    own : ndarray, shape (nlane,)
        Growth of each symbol itself, zero if it decays [1/s].
    """

    def __init__(
        self, parts: Parts, tableau: TimeScheme, *, layers: int = 10, angles: int = 9
    ) -> None:
        layout = parts.layout
        self.layers = chosen_layers(parts.whole, layout, layers)
        angles = max(angles, layers * angles // (2 * self.layers.size))
        self.angles = phase_angles(parts.whole, layout, self.layers, angles)
        slow, fast = parts.slow, parts.fast
        if tableau.kind == "explicit":
            slow, fast = slow + fast, Banded.zeros(slow.size)
        every: tuple[Banded, ...] = (slow, fast, parts.after, parts.after_implicit)
        if isinstance(tableau, ProgramScheme):
            of = roles(parts, tableau)
            every = (of.slow, of.fast, *every[2:], of.wind, of.pressure)
        stack = frozen_symbols(every, layout, self.layers, self.angles)
        if not parts.is_real:
            stack = larger(stack, frozen_symbols(every, layout, self.layers, -self.angles))
        self.symbols = distinct(turned_real(stack))
        whole = np.moveaxis(self.symbols.sum(axis=0), -1, 0)
        self.own: Array = np.maximum(np.linalg.eigvals(whole).real.max(axis=-1), 0.0)
        self._program = tableau.program if isinstance(tableau, ProgramScheme) else None
        if not isinstance(tableau, ProgramScheme):
            self._plan = Plan(tableau, has_slow=not slow.is_zero, has_fast=not fast.is_zero)

    def growth(self, dts: Array) -> Array:
        """Largest growth rate by the time scheme over all layers and angles.

        Parameters
        ----------
        dts : ndarray, shape (ndt,)
            Steps [s].

        Returns
        -------
        ndarray, shape (ndt,)
            [1/s], the symbol's own growth taken out; inf where a stage has no solution.

        Notes
        -----
        Norms of high powers tell which lane grows most, to about 1e-6 1/s; what is returned is
        the spectral radius of that lane by eigenvalues.
        """
        dts = np.asarray(dts, dtype=float)
        together = max(1, BLOCK_BYTES // self.symbols[0].nbytes)
        with np.errstate(over="ignore", invalid="ignore", divide="ignore"):
            pieces = [
                self._largest(dts[first : first + together])
                for first in range(0, dts.size, together)
            ]
        return np.concatenate(pieces) if pieces else np.zeros(0)

    def _largest(self, dts: Array) -> Array:
        """Largest growth rate of all lanes, shape (ndt,)."""
        shape = (dts.size, self.own.size)
        matrices = self._step(dts)
        lost: NDArray[np.bool_] = np.asarray(~np.isfinite(matrices).all(axis=(0, 1)))
        matrices[:, :, lost] = 0.0
        doublings = int(np.ceil(np.log2(max(SPAN_S / dts.min(), 1.0))))
        bound = log_radius_bound(matrices, doublings).reshape(shape)
        worst = (bound / dts[:, None] - self.own).argmax(axis=1)
        lanes = np.moveaxis(matrices[:, :, np.arange(dts.size) * shape[1] + worst], -1, 0)
        radius = np.abs(np.linalg.eigvals(lanes)).max(axis=-1)
        rates: Array = np.log(radius) / dts - self.own[worst]
        rates[np.any(lost.reshape(shape), axis=1)] = np.inf
        return rates

    def _step(self, dts: Array) -> Matrix:
        """One step of every lane by every dt, shape (levels * stride,) twice, (ndt * nlane,)."""
        if self._program is not None:
            return self._step_of(self._program, dts)
        plan = self._plan
        slow, fast, after, after_implicit = (
            (dts[:, None] * part[:, :, None, :]).reshape(*part.shape[:2], -1)
            for part in self.symbols
        )
        solve = [inverse(_added_to_one(-d * fast)) for d in plan.diagonals]
        schedule = plan.schedule(1.0)  # the step is in the symbols
        kept: list[Matrix] = [slow] * plan.nslot

        def combined(stage: int) -> Matrix:
            entries = range(schedule.first[stage], schedule.first[stage + 1])
            y = np.zeros_like(slow)
            for entry in entries:
                y += schedule.weight[entry] * kept[schedule.slot[entry]]
            return _added_to_one(y)

        y: Matrix = slow
        for i in np.flatnonzero(plan.used).tolist():
            y = right = combined(i)
            if plan.solver[i] != NONE:
                y = product(solve[plan.solver[i]], right)
            if plan.slow_slot[i] != NONE:
                kept[plan.slow_slot[i]] = product(slow, y)
            if plan.fast_slot[i] != NONE:
                solved = plan.solver[i] != NONE
                kept[plan.fast_slot[i]] = y - right if solved else product(fast, y)
        if plan.result_stage == NONE:
            y = combined(plan.nstage)
        return self._after(y, after, after_implicit)

    def _after(self, y: Matrix, after: Matrix, after_implicit: Matrix) -> Matrix:
        """Apply what follows the step."""
        if np.any(self.symbols[2]):
            y = y + product(after, y)
        if np.any(self.symbols[3]):
            y = product(inverse(_added_to_one(-after_implicit)), y)
        return y

    def _step_of(self, program: Program, dts: Array) -> Matrix:
        slow, fast, after, after_implicit, wind, pressure = (
            (dts[:, None] * part[:, :, None, :]).reshape(*part.shape[:2], -1)
            for part in self.symbols
        )
        of = {"slow": slow, "fast": fast, "wind": wind, "pressure": pressure}
        present = {name: part for name, part in of.items() if np.any(part)}
        solvers = {
            a: inverse(_added_to_one(-a * fast)) for a in program.diagonals if "fast" in present
        }

        def tendency(part: str, y: Matrix) -> Matrix | None:
            return product(present[part], y) if part in present else None

        def solve(a: float, y: Matrix) -> Matrix:
            return product(solvers[a], y) if a in solvers else y.copy()

        n, wide = slow.shape[0], program.levels * slow.shape[0]
        one = np.repeat(np.eye(wide)[:, :, None], slow.shape[2], axis=2).astype(slow.dtype)
        new = list(
            run(program, [one[k * n : (k + 1) * n] for k in range(program.levels)], tendency, solve)
        )
        new[0] = self._after(new[0], after, after_implicit)
        return np.concatenate(new)


def product(a: Matrix, b: Matrix) -> Matrix:
    """Multiply matrices lane by lane, shape (n, n, nlane): the compiler vectorises over lanes."""
    found: Matrix = np.einsum("ijl,jkl->ikl", a, b)
    return found


def _added_to_one(matrices: Matrix) -> Matrix:
    """Add the identity in place."""
    diagonal = np.einsum("iil->il", matrices)
    diagonal += 1.0
    return matrices


def inverse(matrices: Matrix) -> Matrix:
    """Invert matrices in place, shape (n, n, nlane); not finite where a pivot vanishes.

    Gauss-Jordan elimination without exchange of rows: the stage systems I - h F of terms that
    conserve or damp energy have pivots of one at least.
    """
    for p in range(matrices.shape[0]):
        row = matrices[p]
        pivot = 1.0 / row[p]
        row[p] = 1.0
        row *= pivot
        column = matrices[:, p].copy()
        column[p] = 0.0
        matrices[:p, p] = matrices[p + 1 :, p] = 0.0
        matrices -= column[:, None] * row
    return matrices


def log_radius_bound(matrices: Matrix, doublings: int) -> Array:
    """Upper bound of ln(spectral radius), ln ||R^m||/m with m = 2^``doublings`` or a little more.

    Parameters
    ----------
    matrices : ndarray, shape (n, n, nlane)
    doublings : int

    Returns
    -------
    ndarray, shape (nlane,)
        -inf for a matrix whose power vanishes.
    """
    # numpy multiplies real matrices faster lane by lane, complex ones matrix by matrix
    lanes_first = np.iscomplexobj(matrices)
    power = np.ascontiguousarray(np.moveaxis(matrices, -1, 0)) if lanes_first else matrices
    multiply = np.matmul if lanes_first else product
    steps, bound = 1.0, np.zeros(matrices.shape[2])
    for _ in range(-(-doublings // UNCHECKED)):
        # of norm one, so that the next powers cannot overflow
        size = _frobenius(power, lanes_first)
        scale = 1.0 / np.where(size > 0, size, 1.0)
        power = power * (scale[:, None, None] if lanes_first else scale)
        bound += np.log(size) / steps
        for _ in range(UNCHECKED):
            power = multiply(power, power)
        steps *= 2.0**UNCHECKED
    bound += np.log(_frobenius(power, lanes_first)) / steps
    return bound


def _frobenius(matrices: Matrix, lanes_first: bool) -> Array:
    subscripts = "lij,lij->l" if lanes_first else "ijl,ijl->l"
    squares = np.einsum(subscripts, matrices, matrices.conj())
    norm: Array = np.sqrt(squares.real)
    return norm
