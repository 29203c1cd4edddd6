"""The stepper of whatever scheme: a tableau, or a program of one or more time levels."""

from __future__ import annotations

from typing import Any, Final, TypeAlias

import numpy as np
from numpy.typing import NDArray

from levelstride.errors import CalculationError
from levelstride.schemes.scheme import ProgramScheme, TimeScheme
from levelstride.splitting.parts import Parts
from levelstride.stepper.imex import Stepper
from levelstride.stepper.program_stepper import ProgramStepper

Array: TypeAlias = NDArray[Any]

FAINTEST: Final = 1e-3

AnyStepper: TypeAlias = Stepper | ProgramStepper
"""Both take ``step``, ``matrix`` and ``at_step``; only programs have more than one time level."""


def stepper_of(parts: Parts, scheme: TimeScheme, dt: float) -> AnyStepper:
    """Make the stepper of a scheme.

    Parameters
    ----------
    parts : Parts
        Operator sorted by treatment.
    scheme : TimeScheme
    dt : float
        Length of the step [s].

    Raises
    ------
    CalculationError
        If a system is singular at this step.
    """
    if isinstance(scheme, ProgramScheme):
        return ProgramStepper(parts, scheme, dt)
    return Stepper(parts, scheme, dt)


def levels_of(stepper: AnyStepper) -> int:
    """Time levels that a step starts from."""
    return stepper.levels if isinstance(stepper, ProgramStepper) else 1


def with_history(vectors: Array, factors: Array, levels: int) -> Array:
    """Put the time levels before under states that are multiplied by known factors every step.

    Parameters
    ----------
    vectors : ndarray, shape (nstate, nmode)
        States at the newest level.
    factors : ndarray of complex, shape (nmode,)
        By which each is multiplied in one step; moduli below `FAINTEST` are taken for that.
    levels : int

    Returns
    -------
    ndarray, shape (levels * nstate, nmode)
        The states themselves where there is one level.
    """
    if levels == 1:
        return vectors
    size = np.maximum(np.abs(factors), 1e-300)
    safe = factors * np.maximum(FAINTEST / size, 1.0)
    safe = np.where(np.abs(factors) > 0, safe, FAINTEST)
    return np.concatenate([vectors * safe ** (-k) for k in range(levels)])


def first_steps(stepper: AnyStepper, state: Array, steps: int) -> tuple[Array, int]:
    """Take the first steps of a scheme that needs any.

    Parameters
    ----------
    stepper : AnyStepper
    state : ndarray, shape (nstate, nlane)
    steps : int
        Number of steps wanted in all.

    Returns
    -------
    ndarray, shape (levels * nstate, nlane)
    int
        Steps that are left to be taken.

    Raises
    ------
    CalculationError
        If fewer steps are wanted than the start takes.
    """
    if not isinstance(stepper, ProgramStepper) or stepper.levels == 1:
        return state, steps
    first = stepper.levels - 1
    if steps < first:
        raise CalculationError(
            f"{stepper.scheme.name}: {steps} steps are fewer than the {first} that its start takes"
        )
    return stepper.start(state), steps - first
