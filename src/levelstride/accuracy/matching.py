"""Normal modes followed into the eigenvalues of one step, by continuation in dt and by overlap."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Any, cast

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import eig

from levelstride.errors import CalculationError
from levelstride.schemes.scheme import TimeScheme
from levelstride.splitting.parts import Parts
from levelstride.stepper.any_scheme import AnyStepper, stepper_of, with_history

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]
Complex = NDArray[np.complex128]
Matrix = NDArray[Any]

DOUBT = 0.3
"""An overlap further from one than this does not decide."""

FAINT = 0.1
"""A mode of which one step leaves less than this share has no phase to speak of."""

MOST_LOOKS = 12
"""Steps at which all eigenvalues of one wave are found before a mode is given up as ambiguous."""

USELESS, FEW_LOOKS = 1.1, 4
"""A step that grows by more than this is of no use, and gets so many looks only."""

MOST_HALVINGS = 6

NEAR_TURN, LARGEST_TURN = 1.0, 2.0
"""Turns between neighbouring steps [rad]: that aimed at, and the largest that is unambiguous."""

LARGEST_DECAY = 7.0
"""Decay in one step beyond exp of minus this is taken for that where time levels are made up."""

STRIDE = 0.25
"""Beyond the first turns a factor varies over steps of this share of the step."""


@dataclass(frozen=True, slots=True, eq=False)
class Pairs:
    """Eigenvalues with their right and left eigenvectors, ``left^H right = 1``.

    Attributes
    ----------
    value : ndarray, shape (npair,)
    right, left : ndarray, shape (nstate, npair)
    """

    value: Complex
    right: Matrix
    left: Matrix

    @classmethod
    def of(cls, matrix: Matrix) -> Pairs:
        """Find all of a full matrix."""
        value, right = np.linalg.eig(matrix)
        with np.errstate(all="ignore"):
            try:
                left = np.linalg.inv(right).conj().T
            except np.linalg.LinAlgError:
                left = np.full_like(right, np.nan)
        if not np.all(np.isfinite(left)):
            solved = cast("tuple[Matrix, Matrix, Matrix]", eig(matrix, left=True, right=True))
            value, left, right = solved
            product = np.sum(left.conj() * right, axis=0)
            left = left / np.where(np.abs(product) < 1e-13, 1e-13, product).conj()
        return cls(value.astype(np.complex128), right, left)

    def select(self, chosen: NDArray[Any]) -> Pairs:
        """Return some of them, by mask or number."""
        return Pairs(self.value[chosen], self.right[:, chosen], self.left[:, chosen])


@dataclass(frozen=True, slots=True, eq=False)
class Followed:
    """What became of each mode in one step.

    Attributes
    ----------
    factor : ndarray of complex, shape (nmode,)
        Eigenvalue of R(dt) that belongs to the mode; NaN where none does decisively.
    turn : ndarray, shape (nmode,)
        Its phase by continuation from dt = 0, beyond half a turn too [rad]. NaN without a match,
        and where one step leaves less than a tenth of the mode, so that it has no phase.
    matched : ndarray of bool, shape (nmode,)
    looks : int
        Number of steps at which eigenvalues were found.
    radius : float
        Largest modulus of all eigenvalues of R(dt).
    """

    factor: Complex
    turn: Array
    matched: Mask
    looks: int
    radius: float


@dataclass(frozen=True, slots=True, eq=False)
class _Front:
    """Modes at one step on their way.

    ``pairs.value`` are eigenvalues of R there, ``rate`` is how fast they turned so far [rad/s] and
    ``growth`` how fast they grew [1/s].
    """

    step: float
    pairs: Pairs
    turn: Array
    rate: Array
    growth: Array

    def select(self, mask: Mask) -> _Front:
        pairs = self.pairs.select(mask)
        return _Front(self.step, pairs, self.turn[mask], self.rate[mask], self.growth[mask])


class Follower:
    """Follows modes of one wave under one tableau and splitting to any step.

    Parameters
    ----------
    parts : Parts
        The operator by treatment, in energy coordinates.
    tableau : TimeScheme
    most_looks : int
        Steps at which eigenvalues may be found on the way to one step.

    Notes
    -----
    At dt -> 0 eigenvectors of R(dt) are those of the operator. From a step a, where eigenvectors x
    and their duals y are known, to a longer step b with eigenvectors X and duals Y, the overlap of
    mode i with eigenvector j is (y_i^H X_j)(Y_j^H x_i). It does not depend on any scaling, and sums
    to one over j, in whatever way vectors are entangled. One within 0.3 of one decides; otherwise
    the way is halved, for the modes in doubt alone. Narrow crossings of eigenvalues are thus passed
    by the mode that looks the same on both sides. What is still in doubt after six halvings, or 12
    steps at which eigenvalues were found, is ambiguous; after four of them where the step grows by
    more than a tenth, since it is of no use anyway.

    The phase is that of y_i^H R(h) x_i, followed from a to b in turns of about a radian, and at b
    corrected to the eigenvalue. Without a reliable phase a match does not count, unless the step
    damps the mode to less than a tenth.

    References
    ----------
    Golub and Van Loan 2013, Matrix Computations, 4th edition, section 7.2 (eigenvalues and their
    condition by left and right eigenvectors; textbook).
    """

    def __init__(self, parts: Parts, tableau: TimeScheme, *, most_looks: int = MOST_LOOKS) -> None:
        self._parts, self._tableau, self._most_looks = parts, tableau, most_looks
        self._most = most_looks
        self._stepper: AnyStepper | None = None
        self._seen: dict[float, Pairs] = {}

    def follow(self, exponent: Complex, right: Matrix, left: Matrix, dt: float) -> Followed:
        """Follow modes to one step.

        Parameters
        ----------
        exponent : ndarray, shape (nmode,)
            Modes go as exp(exponent t) [1/s].
        right, left : ndarray, shape (nstate, nmode)
            Modes and their duals in energy coordinates, ``left^H right = 1``.
        dt : float
            Step [s].

        Raises
        ------
        CalculationError
            If an implicit stage has no solution at this step.
        """
        self._seen = {}
        last = self._pairs(dt)
        radius = float(np.abs(last.value).max())
        self._most = self._most_looks if radius <= USELESS else min(self._most_looks, FEW_LOOKS)
        one = np.ones(exponent.size, dtype=np.complex128)
        still, pairs = np.zeros(exponent.size), Pairs(one, right, left)
        start = _Front(0.0, pairs, still, exponent.imag, exponent.real)
        end, matched = self._reach(start, dt, 0)
        missing = np.where(matched, 1.0, np.nan)
        return Followed(
            end.pairs.value * missing, end.turn * missing, matched, len(self._seen), radius
        )

    def bundle(self, right: Matrix, left: Matrix, dt: float) -> Complex | None:
        """Find the eigenvalues at one step that belong to modes of equal frequency and growth.

        Parameters
        ----------
        right, left : ndarray, shape (nstate, nmode)
            Modes, any mixture of which is a mode as well, and their duals.
        dt : float
            Step [s].

        Returns
        -------
        ndarray of complex, shape (nmode,), or None
            None where the space that they span does not decide.
        """
        found = self._pairs(dt)
        still = np.zeros(right.shape[1])
        front = _Front(
            0.0, Pairs(np.ones(still.size, dtype=np.complex128), right, left), still, still, still
        )
        right, left = self._lifted(front, dt)
        overlap = np.sum((left.conj().T @ found.right) * (found.left.conj().T @ right).T, axis=0)
        best = np.argsort(-np.abs(overlap))[: right.shape[1]]
        return found.value[best] if np.all(np.abs(overlap[best] - 1) <= DOUBT) else None

    def _at(self, step: float) -> AnyStepper:
        if self._stepper is None:
            self._stepper = stepper_of(self._parts, self._tableau, step)
        elif self._stepper.dt != step:
            self._stepper = self._stepper.at_step(step)
        return self._stepper

    def _pairs(self, step: float) -> Pairs:
        if step not in self._seen:
            matrix = self._at(step).matrix()
            if not np.all(np.isfinite(matrix)):
                raise CalculationError(
                    f"{self._tableau.name}: one step of {step:g} s overflows; take a shorter one"
                )
            self._seen[step] = Pairs.of(matrix)
        return self._seen[step]

    def _reach(self, front: _Front, step: float, halvings: int) -> tuple[_Front, Mask]:
        """Follow modes to a step, by halves where that is needed; say which arrived."""
        if front.turn.size == 0:
            return front, np.zeros(0, dtype=bool)
        arrived, sure = front, np.zeros(front.turn.size, dtype=bool)
        if step in self._seen or len(self._seen) < self._most:
            try:
                arrived, sure = self._leap(front, step)
            except CalculationError:  # a pole on the way
                return front, sure
        if sure.all() or halvings == MOST_HALVINGS or len(self._seen) >= self._most:
            return arrived, sure
        doubtful = front.select(~sure)
        halfway, passed = self._reach(doubtful, (front.step + step) / 2, halvings + 1)
        onward, there = self._reach(halfway.select(passed), step, halvings + 1)
        places = np.flatnonzero(~sure)[passed][there]
        return _joined(arrived, onward.select(there), places, step), sure | np.isin(
            np.arange(sure.size), places
        )

    def _leap(self, front: _Front, step: float) -> tuple[_Front, Mask]:
        """Match modes with eigenvalues at another step; say which match is sure."""
        found = self._pairs(step)
        right, left = self._lifted(front, step)
        overlap = (left.conj().T @ found.right) * (found.left.conj().T @ right).T
        best = np.argmax(np.abs(overlap), axis=1)
        near = np.abs(overlap[np.arange(best.size), best] - 1) <= DOUBT
        sure = near & (np.bincount(best[near], minlength=found.value.size)[best] <= 1)
        chosen = found.select(best)
        turn = self._turns(front, step, overlap @ found.value, chosen.value)
        faint = np.abs(chosen.value) < FAINT
        sure &= faint | np.isfinite(turn)
        turn = np.where(faint, np.nan, turn)
        rate = np.where(np.isfinite(turn), (turn - front.turn) / (step - front.step), front.rate)
        with np.errstate(divide="ignore"):
            growth = np.log(np.abs(chosen.value)) / step
        return _Front(step, chosen, turn, rate, growth), sure

    def _lifted(self, front: _Front, step: float) -> tuple[Matrix, Matrix]:
        """Modes of a front and their duals at a step, with the time levels before it.

        A scheme of several levels sees a mode as it has turned and grown so far; the duals are
        scaled so that their product with it is one. The exact duals weigh the newest level alone.
        """
        right, left = front.pairs.right, front.pairs.left
        levels, size = self._tableau.levels, self._parts.layout.size
        if levels == 1:
            return right, left
        turned = np.where(np.isfinite(front.rate), front.rate, 0.0)
        growth = np.maximum(front.growth, -LARGEST_DECAY / step)
        right = with_history(right[:size], np.exp((growth + 1j * turned) * step), levels)
        if left.shape[0] == size:
            left = np.concatenate([left, np.zeros(((levels - 1) * size, left.shape[1]))])
        product = np.sum(left.conj() * right, axis=0)
        with np.errstate(divide="ignore", invalid="ignore"):
            return right, left / product.conj()

    def _turns(self, front: _Front, step: float, quotient: Complex, value: Complex) -> Array:
        """Phases of eigenvalues on the branch that continues those of the front; NaN if unsure."""
        turn, before = front.turn.copy(), front.pairs.value
        for now in self._quotients(front, step, quotient):
            with np.errstate(divide="ignore", invalid="ignore"):
                turned = np.angle(now / before)
            turn += np.where(np.abs(turned) <= LARGEST_TURN, turned, np.nan)
            before = now
        close = np.abs(quotient - value) <= (1 - DOUBT) * np.abs(value)
        with np.errstate(divide="ignore", invalid="ignore"):
            turn += np.angle(value / quotient)
        return np.where(close, turn, np.nan)

    def _quotients(self, front: _Front, step: float, last: Complex) -> Iterator[Complex]:
        """Quotients y^H R(h) x at steps h between the front and a further step, and there."""
        fastest = float(np.abs(front.rate).max())
        at = front.step
        while (at := max(at + NEAR_TURN / max(fastest, 1e-300), (1 + STRIDE) * at)) < step:
            right, left = self._lifted(front, at)
            stepped = self._at(at).step(right)
            yield np.sum(left.conj() * stepped, axis=0).astype(np.complex128)
        yield last


def _joined(front: _Front, more: _Front, places: NDArray[np.intp], step: float) -> _Front:
    """Put the modes of another front into their places."""
    value, right, left = (
        front.pairs.value.copy(),
        front.pairs.right.astype(np.complex128),
        front.pairs.left.astype(np.complex128),
    )
    turn, rate, growth = front.turn.copy(), front.rate.copy(), front.growth.copy()
    value[places], turn[places], rate[places] = more.pairs.value, more.turn, more.rate
    growth[places] = more.growth
    right[:, places], left[:, places] = more.pairs.right, more.pairs.left
    return _Front(step, Pairs(value, right, left), turn, rate, growth)
