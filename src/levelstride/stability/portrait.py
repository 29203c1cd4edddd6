"""A disturbance as vertical profiles in physical units."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from levelstride.column.column import Column
from levelstride.operator.state import FIELDS
from levelstride.stability.wave_problem import WaveProblem

Array = NDArray[np.float64]

NOTHING = 1e-8
"""Share of the largest amplitude, in energy coordinates, below which a phase is round-off."""


@dataclass(frozen=True, eq=False)
class Profile:
    """One field of a disturbance.

    Attributes
    ----------
    field : str
    heights_m : ndarray, shape (nlev,) or (nlev-1,)
        Centres of the layers, or interior interfaces [m].
    amplitude : ndarray, shape (nlev,) or (nlev-1,)
        Of a disturbance of energy 1 J/m2 [m/s; K for theta', 1 for pi'].
    phase : ndarray, shape (nlev,) or (nlev-1,)
        Against the unknown that holds most energy, from -pi to pi [rad].
    """

    field: str
    heights_m: Array
    amplitude: Array
    phase: Array


def portrait(column: Column, problem: WaveProblem, vector: NDArray[Any]) -> tuple[Profile, ...]:
    """Turn a state into profiles of the fields that the column carries.

    Parameters
    ----------
    column : Column
    problem : WaveProblem
        The wave the state belongs to.
    vector : ndarray, shape (nstate,)
        The state in energy coordinates, of norm one.
    """
    layout, levels = problem.parts.layout, column.levels
    physical = layout.phase * vector * np.sqrt(2 / problem.wave_terms.weights)
    largest = int(np.argmax(np.abs(vector)))
    physical = physical * np.exp(-1j * np.angle(physical[largest]))
    phase = np.where(np.abs(vector) > NOTHING * abs(vector[largest]), np.angle(physical), 0.0)
    found = []
    for field in FIELDS:
        places = layout.places(field)
        if places.size:
            in_layers = places.size == levels.nlev
            heights = levels.centres_m if in_layers else levels.interfaces_m[1:-1]
            found.append(Profile(field, heights, np.abs(physical[places]), phase[places]))
    return tuple(found)
