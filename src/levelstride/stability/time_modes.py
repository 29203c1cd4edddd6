"""Whether a state that a scheme of several time levels grows is physical or computational."""

from __future__ import annotations

from typing import Any, Final

import numpy as np
from numpy.typing import NDArray

from levelstride.schemes.program import PARTS, scalar_factors
from levelstride.schemes.scheme import ProgramScheme, TimeScheme
from levelstride.splitting.parts import Parts
from levelstride.stepper.program_stepper import roles

Matrix = NDArray[Any]

MERGED: Final = 0.1
"""Relative difference up to which two factors count as merged."""


def mode_in_time(
    parts: Parts, scheme: TimeScheme, dt: float, value: complex, state: Matrix
) -> str | None:
    """Tell which of the modes of a multistep scheme an eigenvector is.

    The rates of its parts along the state make an oscillation of one unknown; the scheme has one
    factor for each time level there, and the physical one is that nearest to the exact one.

    Parameters
    ----------
    parts : Parts
        In energy coordinates.
    scheme : TimeScheme
    dt : float
        Step [s].
    value : complex
        Eigenvalue of the companion matrix.
    state : ndarray, shape (nstate,)
        Its eigenvector at the newest time level.

    Returns
    -------
    str or None
        ``physical``, ``computational`` or, where both have merged, ``merged``; None for schemes of
        one time level.
    """
    if not isinstance(scheme, ProgramScheme) or scheme.levels == 1:
        return None
    found, unit = roles(parts, scheme), state / np.linalg.norm(state)
    rates = {
        part: np.array([dt * np.vdot(unit, getattr(found, part).apply(unit))]) for part in PARTS
    }
    factors = scalar_factors(scheme.program, **rates)[0]
    exact = np.exp(sum(rates.values()))[0]
    physical = int(np.argmin(np.abs(factors - exact)))
    own = int(np.argmin(np.abs(factors - value)))
    others = np.delete(factors, own)
    if np.abs(others - factors[own]).min() <= MERGED * abs(factors[own]):
        return "merged"
    return "physical" if own == physical else "computational"
