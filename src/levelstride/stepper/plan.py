"""What one step has to evaluate, worked out from the numbers of a tableau."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from levelstride.stepper.kernels import Schedule

Array = NDArray[np.float64]

NONE = -1


class Scheme(Protocol):
    """What the stepper asks of a tableau."""

    def __hash__(self) -> int:
        """Tableaux are told apart by identity or by value, whichever they choose."""

    @property
    def name(self) -> str:
        """As published."""

    @property
    def kind(self) -> str:
        """``additive`` or ``explicit``."""

    @property
    def a_explicit(self) -> Array:
        """Strictly lower triangular, shape (nstage, nstage)."""

    @property
    def a_implicit(self) -> Array:
        """Lower triangular, shape (nstage, nstage)."""

    @property
    def b_explicit(self) -> Array:
        """Weights of the slow tendencies, shape (nstage,)."""

    @property
    def b_implicit(self) -> Array:
        """Weights of the fast tendencies, shape (nstage,)."""


@dataclass(frozen=True, slots=True, eq=False)
class _Table:
    """The stages of one part: stage table with the final weights as its last row."""

    rows: Array

    @classmethod
    def of(cls, a: Array, b: Array, *, present: bool) -> _Table:
        rows = np.vstack([a, b]).astype(float)
        return cls(rows if present else np.zeros_like(rows))

    @property
    def ends_on_last_stage(self) -> bool:
        return bool(np.array_equal(self.rows[-1], self.rows[-2]))


class Plan:
    """Which stages, tendencies and solves a step needs, and with which weights.

    A tendency that no later stage and no final weight uses is not evaluated, nor a stage that
    nothing uses. Where both tables end on their last stage, that stage is the new state. A tableau
    of kind ``explicit`` takes the whole operator as its slow part.

    Parameters
    ----------
    scheme : Scheme
    has_slow, has_fast : bool
        Whether the slow and the fast part are there at all.

    Attributes
    ----------
    diagonals : ndarray, shape (ndiagonal,)
        Distinct non-zero diagonal entries of the implicit table, one factorisation each.
    solver : ndarray of int, shape (nstage,)
        Index into ``diagonals``, or -1 where the stage is not solved.
    used : ndarray of bool, shape (nstage,)
    slow_slot, fast_slot : ndarray of int, shape (nstage,)
        Where the stage keeps its tendency, or -1.
    nslot : int
    result_stage : int
        Stage that is the new state, or -1 where the final weights are summed.
    """

    def __init__(self, scheme: Scheme, *, has_slow: bool, has_fast: bool) -> None:
        implicit = has_fast and scheme.kind != "explicit"
        self._slow = _Table.of(scheme.a_explicit, scheme.b_explicit, present=has_slow)
        self._fast = _Table.of(scheme.a_implicit, scheme.b_implicit, present=implicit)
        self.name = scheme.name
        nstage = self.nstage = self._slow.rows.shape[1]
        ends = self._slow.ends_on_last_stage and self._fast.ends_on_last_stage
        self.result_stage = nstage - 1 if ends else NONE
        self.used, slow_needed, fast_needed = self._needs()
        diagonal = np.diag(self._fast.rows) * self.used
        self.diagonals = np.unique(diagonal[diagonal != 0.0])
        self.solver = np.where(
            diagonal != 0.0, np.searchsorted(self.diagonals, diagonal), NONE
        ).astype(np.int64)
        self.slow_slot = np.where(slow_needed, np.cumsum(slow_needed) - 1, NONE)
        first = int(slow_needed.sum())
        self.fast_slot = np.where(fast_needed, first + np.cumsum(fast_needed) - 1, NONE)
        self.nslot = first + int(fast_needed.sum())

    def _needs(self) -> tuple[NDArray[np.bool_], NDArray[np.bool_], NDArray[np.bool_]]:
        nstage = self.nstage
        used, slow, fast = (np.zeros(nstage, dtype=bool) for _ in range(3))
        for i in reversed(range(nstage)):
            later = np.append(used[i + 1 :], self.result_stage == NONE)
            slow[i] = bool(np.any(self._slow.rows[i + 1 :, i] * later))
            fast[i] = bool(np.any(self._fast.rows[i + 1 :, i] * later))
            used[i] = slow[i] or fast[i] or i == self.result_stage
        return used, slow, fast

    @property
    def explicit_evaluations(self) -> int:
        """Slow tendencies evaluated in a step."""
        return int(np.sum(self.slow_slot != NONE))

    @property
    def fast_evaluations(self) -> int:
        """Fast tendencies found by multiplying, at stages that are not solved."""
        return int(np.sum((self.fast_slot != NONE) & (self.solver == NONE)))

    @property
    def solves(self) -> int:
        """Stage systems solved in a step."""
        return int(np.sum(self.solver != NONE))

    @cached_property
    def _unit_weights(self) -> tuple[Array, Array]:
        """Weights of the slots in every stage and in the result: factor of dt, and plain.

        A solved stage keeps Y - rhs = a_ii dt F(Y), so its weight is a_ki/a_ii without dt.
        """
        with_dt = np.zeros((self.nstage + 1, self.nslot))
        plain = np.zeros((self.nstage + 1, self.nslot))
        for j in range(self.nstage):
            later = slice(j + 1, None)
            if self.slow_slot[j] != NONE:
                with_dt[later, self.slow_slot[j]] = self._slow.rows[later, j]
            if self.fast_slot[j] != NONE and self.solver[j] == NONE:
                with_dt[later, self.fast_slot[j]] = self._fast.rows[later, j]
            elif self.fast_slot[j] != NONE:
                diagonal = self._fast.rows[j, j]
                plain[later, self.fast_slot[j]] = self._fast.rows[later, j] / diagonal
        return with_dt, plain

    def schedule(self, dt: float) -> Schedule:
        """Return the step as the kernel reads it, for a step of ``dt`` [s]."""
        with_dt, plain = self._unit_weights
        weights = dt * with_dt + plain
        present = (with_dt != 0.0) | (plain != 0.0)
        first = np.concatenate(([0], np.cumsum(present.sum(axis=1))))
        return Schedule(
            first=first.astype(np.int64),
            slot=np.nonzero(present)[1].astype(np.int64),
            weight=weights[present],
            used=self.used.astype(np.int64),
            solver=self.solver,
            slow_slot=self.slow_slot.astype(np.int64),
            fast_slot=self.fast_slot.astype(np.int64),
            result_stage=self.result_stage,
        )
