"""How the limit of one state moves with the column: first-order perturbation.

At the limit dt the growth of the state equals what is tolerated, g(dt, h) = 0, so that
d dt/dh = -(dg/dh)/(dg/dt). For the spectrum g = ln|lambda| - dt rate, and an eigenvalue moves by
y^H (dR/dh) x/(y^H x) with its left and right eigenvectors y and x. For powers
g = ln||R^m|| - m dt rate - ln(limit), and the largest singular value of R^m moves by u^H d(R^m) v
with its singular vectors (Stewart and Sun 1990, Matrix Perturbation Theory, chapters I and IV).

dR/dh is the central difference between two columns, each stepped in the coordinates in which its
own energy norm is Euclidean: an eigenvalue does not depend on coordinates, and the norm is meant in
these. For an eigenvalue one state is all that is stepped.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Any, Protocol

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import eig, expm

from levelstride.column.column import Column
from levelstride.errors import CalculationError
from levelstride.operator.energy import energy_weights
from levelstride.operator.setting import layout_of
from levelstride.operator.wave import Wave
from levelstride.splitting.parts import Parts, split_operator
from levelstride.stability.amplification import energy_parts
from levelstride.stability.lost_states import LostState, unpaired
from levelstride.stability.powers import Peak, power_peak
from levelstride.stability.tolerance import Tolerance
from levelstride.stability.verdict import ColumnVerdict
from levelstride.stability.wave_problem import WaveProblem
from levelstride.stepper.any_scheme import stepper_of

Matrix = NDArray[Any]
Array = NDArray[np.float64]

STEP_SHARE = 1e-5
"""Relative change of the step for derivatives with respect to it."""

DEFECTIVE = 1e-13
"""|y^H x| of unit eigenvectors below which an eigenvalue has no derivative."""

SMALL_PEAK = 1e-6
"""Logarithm of the peak of exp(t L) below which its change is round-off."""


@dataclass(frozen=True, eq=False)
class Pair:
    """A column changed a little both ways.

    Attributes
    ----------
    more, less : Column
    width : float
        Difference of the changed quantity between them.
    """

    more: Column
    less: Column
    width: float


def step_derivatives(
    states: Sequence[LostState], column: Column, pairs: Sequence[Pair], tolerance: Tolerance
) -> Array:
    """Derivatives of the limits of states with respect to every changed quantity.

    Parameters
    ----------
    states : sequence of LostState
    column : Column
        The column they belong to.
    pairs : sequence of Pair
        Small changes of that column.
    tolerance : Tolerance

    Returns
    -------
    ndarray, shape (len(states), npair)
        [s per unit of the quantity]

    Raises
    ------
    CalculationError
        If a critical eigenvalue has no derivative.
    """
    derivatives = np.empty((len(states), len(pairs)))
    for problem in dict.fromkeys(state.problem for state in states):
        rows = [i for i, state in enumerate(states) if state.problem is problem]
        excesses = [_excess(states[i], column, tolerance) for i in rows]
        along_step = np.array([excess.along_step() for excess in excesses])
        number = next(i for i, air in enumerate(column.airs) if air is problem.air)
        for k, pair in enumerate(pairs):
            more, less = (parts_of(problem, one, number) for one in (pair.more, pair.less))
            changes = np.array([excess.between(more, less) for excess in excesses])
            derivatives[rows, k] = -changes / pair.width / along_step
    return derivatives


def _excess(state: LostState, column: Column, tolerance: Tolerance) -> _Excess:
    if state.criterion == "spectrum":
        return _OfSpectrum(state, tolerance)
    return _OfPowers(state, column, tolerance)


def parts_of(problem: WaveProblem, column: Column, number: int) -> Parts:
    """Operator of the same wave on another column, in that column's energy coordinates.

    Parameters
    ----------
    problem : WaveProblem
        The wave.
    column : Column
        The other column.
    number : int
        Which of its air states.
    """
    air = column.airs[number]
    parts = split_operator(problem.splitting, column, air, Wave(problem.kappa, column.horizontal))
    return energy_parts(parts, energy_weights(column, air, layout_of(column)))


class _Excess(Protocol):
    """By how much ln of growth exceeds what is tolerated: its first-order changes."""

    def along_step(self) -> float:
        """Derivative with respect to the step [1/s]."""

    def between(self, more: Parts, less: Parts) -> float:
        """First-order difference between two columns, neighbours of this one."""


@dataclass(frozen=True, eq=False)
class Eigenvalues:
    """Eigenvalues with their eigenvectors, y^H x = 1.

    Attributes
    ----------
    values : ndarray, shape (nvalue,)
    right, left : ndarray, shape (nstate, nvalue)
    """

    values: NDArray[np.complex128]
    right: NDArray[np.complex128]
    left: NDArray[np.complex128]

    @classmethod
    def largest(cls, matrix: Matrix, size: Callable[[Matrix], Array], ranks: slice) -> Eigenvalues:
        """Take those of some ranks by size; of conjugate ones only that above the real axis.

        Raises
        ------
        CalculationError
            If one is defective.
        """
        found: Any = eig(matrix, left=True, right=True)
        values, left, right = found
        order = unpaired(values)
        order = order[np.argsort(-size(values[order]), kind="stable")][ranks]
        x, y = right[:, order].astype(complex), left[:, order].astype(complex)
        product = (y.conj() * x).sum(axis=0)
        if np.abs(product).min() < DEFECTIVE:
            raise CalculationError(
                "the critical eigenvalue is defective at its limit and has no derivative with "
                "respect to the layers; ask for another e-folding time"
            )
        return cls(values[order].astype(complex), x, y / product.conj())

    def changes(self, images: Matrix) -> Matrix:
        """Y^H dR X where the change of the matrix takes X to ``images``."""
        changes: Matrix = self.left.conj().T @ images
        return changes


class OwnGrowth:
    """Growth of the operator itself, where there is any: tolerated, and it changes with the air.

    Parameters
    ----------
    problem : WaveProblem
    """

    def __init__(self, problem: WaveProblem) -> None:
        self._found: Eigenvalues | None = None
        if ColumnVerdict.grows_by_itself(problem):
            operator = problem.parts.whole.to_dense()
            self._found = Eigenvalues.largest(operator, lambda values: values.real, slice(1))

    def between(self, more: Parts, less: Parts) -> float:
        """Difference between two columns [1/s]."""
        if self._found is None:
            return 0.0
        x = self._found.right
        change = self._found.changes(more.whole.apply(x) - less.whole.apply(x))
        return float(change[0, 0].real)


class _OfSpectrum:
    """g = ln|lambda| - dt rate."""

    def __init__(self, state: LostState, tolerance: Tolerance) -> None:
        self._problem, self._dt = state.problem, state.step_s
        self._rate = state.problem.rate(tolerance)
        chosen = slice(state.rank, state.rank + 1)
        self._found = Eigenvalues.largest(state.problem.matrix(self._dt), np.abs, chosen)
        self._own = OwnGrowth(state.problem)

    def along_step(self) -> float:
        width = STEP_SHARE * self._dt
        longer, shorter = (
            self._stepped(self._problem.parts, self._dt + change) for change in (width, -width)
        )
        return self._logarithmic(longer - shorter) / (2 * width) - self._rate

    def between(self, more: Parts, less: Parts) -> float:
        growth = self._logarithmic(self._stepped(more, self._dt) - self._stepped(less, self._dt))
        return growth - self._dt * self._own.between(more, less)

    def _stepped(self, parts: Parts, dt: float) -> Matrix:
        return stepper_of(parts, self._problem.tableau, dt).step(self._found.right)

    def _logarithmic(self, image: Matrix) -> float:
        return float((self._found.changes(image)[0, 0] / self._found.values[0]).real)


class _OfPowers:
    """g = ln||R^m|| - m dt rate - ln(limit), m the power that exceeds it most."""

    def __init__(self, state: LostState, column: Column, tolerance: Tolerance) -> None:
        problem, dt = state.problem, state.step_s
        self._problem, self._dt, self._rate = problem, dt, problem.rate(tolerance)
        matrix = problem.matrix(dt)
        peak = power_peak(matrix, dt, self._rate, tolerance.horizon)
        self._steps, self._slope = peak.steps, power_slope(matrix, peak)
        self._own = OwnGrowth(problem)
        self._exponential: tuple[float, int, Matrix] | None = None
        if problem.facts.log_exponential_peak(self._rate) > SMALL_PEAK:
            longest = 10 * max(column.advice.efolding_s, Tolerance.LONGEST_EFOLDING_S)
            self._exponential = _exponential_peak(problem, self._rate, longest)

    def along_step(self) -> float:
        width = STEP_SHARE * self._dt
        longer, shorter = (
            self._stepped(self._problem.parts, self._dt + change) for change in (width, -width)
        )
        return inner(self._slope, longer - shorter) / (2 * width) - self._steps * self._rate

    def between(self, more: Parts, less: Parts) -> float:
        change = inner(self._slope, self._stepped(more, self._dt) - self._stepped(less, self._dt))
        span, own = self._steps * self._dt, self._own.between(more, less)
        if self._exponential is not None:
            first, steps, slope = self._exponential
            above, below = (expm(first * parts.whole.to_dense()) for parts in (more, less))
            # the peak of exp(t L) exp(-t rate) raises the limit
            change -= inner(slope, above - below)
            span -= steps * first
        return change - span * own

    def _stepped(self, parts: Parts, dt: float) -> Matrix:
        return stepper_of(parts, self._problem.tableau, dt).matrix()


def _exponential_peak(
    problem: WaveProblem, rate: float, horizon: float
) -> tuple[float, int, Matrix]:
    """Where exp(t L) exp(-t rate) is largest: unit of time [s], t in it, and ``power_slope``."""
    operator = problem.parts.whole.to_dense()
    first = 0.25 / float(np.linalg.norm(operator, 2))
    short = expm(first * operator)
    peak = power_peak(short, first, rate, horizon)
    return first, peak.steps, power_slope(short, peak)


def power_slope(matrix: Matrix, peak: Peak) -> Matrix:
    """Derivative of ln||A^m|| (spectral norm) with respect to every entry of A.

    Parameters
    ----------
    matrix : ndarray, shape (nstate, nstate)
        A.
    peak : Peak
        Which power m, and the logarithm of its norm.

    Returns
    -------
    ndarray, shape (nstate, nstate)
        G with d ln||A^m|| = Re sum conj(G) dA = ``inner(G, dA)``.

    Notes
    -----
    With u and v the singular vectors of the largest singular value s of A^m,
    G = sum_k (A^H)^(m-1-k) u v^H (A^H)^k/s, which is the upper right block of the m-th power of
    [[A^H, u v^H], [0, A^H]] over s (Higham 2008, Functions of Matrices, chapter 3). A is scaled
    so that A^m has norm one.
    """
    n, steps = matrix.shape[0], peak.steps
    scale = np.exp(-peak.log_norm / steps)
    scaled = matrix * scale
    u, s, vh = np.linalg.svd(np.linalg.matrix_power(scaled, steps))
    block = np.zeros((2 * n, 2 * n), dtype=matrix.dtype)
    block[:n, :n] = block[n:, n:] = scaled.conj().T
    block[:n, n:] = np.outer(u[:, 0], vh[0])
    slope: Matrix = np.linalg.matrix_power(block, steps)[:n, n:] * (scale / s[0])
    return slope


def inner(slope: Matrix, change: Matrix) -> float:
    """Re sum conj(G) dA."""
    return float(np.vdot(slope, change).real)
