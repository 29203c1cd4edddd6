"""Eigenvalues of the step matrix R(dt) near a point, without R: a sparse system in the stages.

(R - mu) x = b is one step written out, with the stages, the stepped state and x as unknowns. Taken
layer by layer the system is a narrow band, so that a factorisation costs as much as the number of
unknowns, not its cube. An eigenvalue found so comes with a residual r = ||R x - lambda x||/||x||,
R x by the stepper itself: lambda is an eigenvalue of a matrix no further than r from R. What lies
elsewhere is not seen.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
import scipy.sparse as sparse
from numpy.typing import NDArray
from scipy.sparse.linalg import ArpackNoConvergence, LinearOperator, eigs, splu

from levelstride.operator.bands import Banded
from levelstride.splitting.parts import Parts
from levelstride.stepper.imex import Stepper
from levelstride.stepper.plan import Scheme

Array = NDArray[Any]

MOST_RESTARTS = 100
"""Restarts of the search for the nearest eigenvalues: those of a dense cluster take hundreds."""

MOST_REFINEMENTS = 8
"""Inverse iterations after which an eigenpair is as good as it gets."""

ENOUGH = 1e-13
"""Residual that needs no improvement: in a step of a second it is growth of 1e-13 1/s."""

ROUND_OFF = 1e-14
"""How far a shift that is an eigenvalue to the last digit is moved."""


@dataclass(frozen=True, slots=True, eq=False)
class Eigenpair:
    """An eigenvalue of R as its residual knows it.

    Attributes
    ----------
    value : complex
    vector : ndarray, shape (nstate,)
        Of norm one.
    residual : float
        ||R x - lambda x|| for this vector.
    """

    value: complex
    vector: Array
    residual: float


class ShiftInvert:
    """Solves with R(dt) - mu, and finds eigenvalues of R near mu.

    Parameters
    ----------
    parts : Parts
        In energy coordinates where residuals are to be energies.
    tableau : Scheme
    dt : float
        Step [s].

    Raises
    ------
    CalculationError
        If a stage has no solution at this step.

    Notes
    -----
    As in the stepper, the fast tendency of a solved stage is (Y - right-hand side)/(a_ii dt): only
    then do the two agree to round-off at large dt. Eliminating the right-hand sides, which are sums
    of what came before, leaves Y_i with coefficients that depend on the tableau alone.
    """

    def __init__(self, parts: Parts, tableau: Scheme, dt: float) -> None:
        self._stepper = Stepper(parts, tableau, dt)
        slow, fast = parts.slow, parts.fast
        if tableau.kind == "explicit":
            slow, fast = slow + fast, Banded.zeros(slow.size)
        blocks = _Blocks(tableau, solves=not fast.is_zero)
        self._size, self._width = parts.layout.size, blocks.width
        whole: Any = sparse.kron(sparse.identity(self._size), blocks.plain, format="csc")
        for matrix, block in (
            (slow, blocks.slow),
            (fast, blocks.fast),
            (parts.after, blocks.after),
            (parts.after_implicit, blocks.after_implicit),
        ):
            if not matrix.is_zero:
                whole = whole + sparse.kron(_sparse(matrix), dt * block, format="csc")
        self._matrix = whole.astype(complex)
        self._of_shift: Any = sparse.kron(sparse.identity(self._size), blocks.shift, format="csc")

    def solve_at(self, shift: complex) -> LinearOperator[np.complex128]:
        """Return what solves (R - shift) x = b for x."""
        try:
            factors = splu((self._matrix - shift * self._of_shift).tocsc())
        except RuntimeError:  # the shift is an eigenvalue to the last digit
            moved = shift * (1 + ROUND_OFF) + ROUND_OFF
            factors = splu((self._matrix - moved * self._of_shift).tocsc())
        last = slice(self._width - 1, None, self._width)
        rhs = np.zeros(self._matrix.shape[0], dtype=complex)

        def solve(b: Array) -> Array:
            rhs[last] = b.ravel()
            found: Array = factors.solve(rhs)[last]
            return found

        return LinearOperator((self._size, self._size), matvec=solve, dtype=np.complex128)

    def pair(self, vector: Array) -> Eigenpair:
        """Take the Rayleigh quotient of a vector as its eigenvalue."""
        vector = vector / np.linalg.norm(vector)
        stepped = self._stepper.step(vector)
        value = complex(np.vdot(vector, stepped))
        return Eigenpair(value, vector, float(np.linalg.norm(stepped - value * vector)))

    def nearest(self, shift: complex, count: int) -> list[Eigenpair]:
        """Find eigenpairs nearest to a point, nearest first.

        Parameters
        ----------
        shift : complex
        count : int
            How many; fewer where fewer converge or exist.
        """
        count = min(count, self._size - 2)
        shape = (self._size, self._size)
        step = LinearOperator(shape, matvec=self._stepper.step, dtype=np.complex128)
        start = np.random.default_rng(self._size).standard_normal(self._size).astype(complex)
        vectors: Array
        try:
            _, vectors = eigs(
                step, count, sigma=shift, OPinv=self.solve_at(shift), v0=start,
                maxiter=MOST_RESTARTS,
            )  # fmt: skip
        except ArpackNoConvergence as broken_off:
            vectors = broken_off.eigenvectors
        pairs = [self.refine(self.pair(vector)) for vector in vectors.T]
        return sorted(pairs, key=lambda pair: abs(pair.value - shift))

    def refine(self, pair: Eigenpair) -> Eigenpair:
        """Improve an eigenpair by inverse iteration, the shift its value and then that found.

        Parameters
        ----------
        pair : Eigenpair
            Anything near; it may belong to a neighbouring step or wave.
        """
        best, shift = self.pair(pair.vector), pair.value
        for _ in range(MOST_REFINEMENTS):
            if best.residual <= ENOUGH:
                break
            better = self.pair(self.solve_at(shift).matvec(best.vector))
            if better.residual >= best.residual / 2:
                return min(best, better, key=lambda one: one.residual)
            best, shift = better, better.value
        return best


class _Blocks:
    """What couples the unknowns of one place: stages, their result, the stepped state, x."""

    def __init__(self, tableau: Scheme, *, solves: bool) -> None:
        s = np.asarray(tableau.b_explicit).size
        stages, result, stepped, x = slice(0, s), s, s + 1, s + 2
        self.width = s + 3
        self.plain, self.slow, self.fast, self.after, self.after_implicit, self.shift = (
            np.zeros((self.width, self.width)) for _ in range(6)
        )
        diagonal = np.diag(tableau.a_implicit) if solves else np.zeros(s)
        solved = diagonal != 0.0
        inverse = np.where(solved, 1.0 / np.where(solved, diagonal, 1.0), 0.0)
        lower = np.tril(tableau.a_implicit, -1)
        kept, multiplied = lower * inverse, lower * ~solved
        # right-hand sides of stages: to_rhs (x + dt A_ex S Y + kept Y + dt multiplied F Y)
        to_rhs = np.linalg.inv(np.eye(s) + kept)
        self.plain[stages, stages] = np.eye(s) - to_rhs @ kept
        self.plain[stages, x] = -to_rhs.sum(axis=1)
        self.slow[stages, stages] = -to_rhs @ tableau.a_explicit
        self.fast[stages, stages] = -to_rhs @ multiplied - np.diag(diagonal)
        weights = tableau.b_implicit * inverse
        of_rhs = weights @ to_rhs
        self.plain[result, result] = 1.0
        self.plain[result, stages] = -weights + of_rhs @ kept
        self.plain[result, x] = of_rhs.sum() - 1.0
        self.slow[result, stages] = -tableau.b_explicit + of_rhs @ tableau.a_explicit
        self.fast[result, stages] = -(tableau.b_implicit * ~solved) + of_rhs @ multiplied
        # the parts after the step: (1 - dt D_im) stepped = (1 + dt D_ex) result
        self.plain[stepped, [stepped, result]] = 1.0, -1.0
        self.after[stepped, result] = -1.0
        self.after_implicit[stepped, stepped] = -1.0
        self.plain[x, stepped] = 1.0
        self.shift[x, x] = 1.0


def _sparse(matrix: Banded) -> Any:
    n = matrix.size
    rows, columns, values = [], [], []
    for k, offset in enumerate(matrix.offsets):
        places = np.arange(max(0, -offset), min(n, n - offset))
        rows.append(places)
        columns.append(places + offset)
        values.append(matrix.diagonals[k, places])
    entries = np.concatenate(values)
    return sparse.csc_matrix((entries, (np.concatenate(rows), np.concatenate(columns))), (n, n))
