"""States of one wave that are lost together: how their limits move where they mix.

Two states whose eigenvalues nearly coincide do not keep to themselves when the column changes:
which mixture of them is lost first depends on the change. Their limits move by the eigenvalues of
the matrix that the change has between them (first-order perturbation of a degenerate eigenvalue;
Stewart and Sun 1990, Matrix Perturbation Theory, chapter IV), and the smallest and the largest of
these are the derivatives on either side.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np
from numpy.typing import NDArray

from levelstride.column.column import Column
from levelstride.splitting.parts import Parts
from levelstride.stability.lost_states import LostState
from levelstride.stability.sensitivity import (
    STEP_SHARE,
    Eigenvalues,
    OwnGrowth,
    Pair,
    parts_of,
)
from levelstride.stability.tolerance import Tolerance
from levelstride.stepper.any_scheme import stepper_of

Matrix = NDArray[Any]

MIXING = 0.005
"""States whose eigenvalues of R are this close mix."""


def joint_derivatives(
    states: Sequence[LostState], column: Column, pairs: Sequence[Pair], tolerance: Tolerance
) -> Matrix:
    """Derivatives of the limits of states of one wave, their mixtures included.

    Parameters
    ----------
    states : sequence of LostState
        All states of one wave that are lost up to some step, by the spectrum.
    column : Column
    pairs : sequence of Pair
        Small changes of that column.
    tolerance : Tolerance

    Returns
    -------
    ndarray, shape (npair, nstate, nstate)
        Its eigenvalues, and those of weighted sums over the pairs, are the derivatives of the
        limits, the limits taken as one [s per unit of the quantity].
    """
    problem = states[0].problem
    dt = max(state.step_s for state in states)
    found = Eigenvalues.largest(problem.matrix(dt), np.abs, slice(len(states)))
    mixes = np.abs(found.values[:, None] - found.values[None, :]) <= MIXING
    own = OwnGrowth(problem)
    number = next(i for i, air in enumerate(column.airs) if air is problem.air)

    def stepped(parts: Parts, step: float) -> Matrix:
        return stepper_of(parts, problem.tableau, step).step(found.right)

    def logarithmic(images: Matrix) -> Matrix:
        return np.where(mixes, found.changes(images) / found.values[:, None], 0.0)

    width = STEP_SHARE * dt
    parts = problem.parts
    longer = logarithmic(stepped(parts, dt + width) - stepped(parts, dt - width)) / (2 * width)
    along_step = np.diag(longer).real - problem.rate(tolerance)
    derivatives = np.empty((len(pairs), len(states), len(states)), dtype=complex)
    for k, pair in enumerate(pairs):
        more, less = (parts_of(problem, one, number) for one in (pair.more, pair.less))
        change = logarithmic(stepped(more, dt) - stepped(less, dt))
        change -= dt * own.between(more, less) * np.eye(len(states))
        derivatives[k] = -change / pair.width / along_step[:, None]
    return derivatives
