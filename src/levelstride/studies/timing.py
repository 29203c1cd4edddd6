"""Measured time of one step."""

from time import perf_counter

import numpy as np

from levelstride.column.column import Column
from levelstride.operator.wave import Wave
from levelstride.schemes.scheme import TimeScheme
from levelstride.splitting.parts import split_operator
from levelstride.splitting.splitting import Splitting
from levelstride.stability.spectrum import steepest_wavenumber
from levelstride.stepper.any_scheme import AnyStepper, levels_of, stepper_of

ROUNDS = 3
ROUND_S = 0.002


def step_time(column: Column, splitting: Splitting, tableau: TimeScheme, step_s: float) -> float:
    """Measure the time of one step of one state of a column, the best of a few rounds.

    Parameters
    ----------
    column : Column
        The column, stepped in its first air state and at its steepest wave.
    splitting : Splitting
        The splitting.
    tableau : TimeScheme
        The time scheme.
    step_s : float
        The step [s].

    Returns
    -------
    float
        Time of one step [s].
    """
    wave = Wave(steepest_wavenumber(column.horizontal), column.horizontal)
    stepper = stepper_of(split_operator(splitting, column, column.airs[0], wave), tableau, step_s)
    state = np.ones(stepper.layout.size * levels_of(stepper), dtype=stepper.dtype)
    stepper.step(state)
    return min(_round(stepper, state) for _ in range(ROUNDS))


def _round(stepper: AnyStepper, state: np.ndarray) -> float:
    count, start = 0, perf_counter()
    while (elapsed := perf_counter() - start) < ROUND_S or count == 0:
        stepper.step(state)
        count += 1
    return elapsed / count
