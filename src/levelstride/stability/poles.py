"""Steps at which an implicit stage has no solution.

A stage solves (1 - a dt F) y = right-hand side, so the step matrix has a pole where an eigenvalue
of the fast part F is 1/(a dt). A negative diagonal entry meets the damped ones, a positive one
those that grow, as in air that turns over; either way the step is unstable in a window around the
pole that is too narrow for a scan.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from levelstride.schemes.scheme import TimeScheme

Array = NDArray[np.float64]

NEARLY_REAL = 0.3
"""Largest ratio of imaginary to real part of an eigenvalue that a real step comes close to."""


def pole_steps(eigenvalues: NDArray[np.complex128], tableau: TimeScheme) -> Array:
    """Steps at which a stage is singular or nearly so.

    Parameters
    ----------
    eigenvalues : ndarray
        Of the fast part [1/s].
    tableau : TimeScheme

    Returns
    -------
    ndarray
        Ascending [s].
    """
    if tableau.kind == "explicit":
        return np.zeros(0)
    steps = []
    for diagonal in tableau.distinct_diagonals:
        met = diagonal * eigenvalues
        met = met[(met.real > 0) & (np.abs(met.imag) < NEARLY_REAL * met.real)]
        # where |1 - dt met| is smallest
        steps.append(met.real / np.abs(met) ** 2)
    return np.unique(np.concatenate(steps)) if steps else np.zeros(0)
