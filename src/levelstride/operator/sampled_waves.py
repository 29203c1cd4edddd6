"""Which horizontal waves are examined."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from levelstride.column.column import Horizontal
from levelstride.operator.wave import gradient_symbol

SAMPLES = 16
LONGEST_IN_CELLS = 128
"""The longest wave of the sample in grid cells: kappa = pi/(64 dx)."""


def sampled_wavenumbers(horizontal: Horizontal, samples: int = SAMPLES) -> NDArray[np.float64]:
    """Wavenumbers along one axis from pi/(64 dx) to pi/dx, geometric, and the steepest one.

    Parameters
    ----------
    horizontal : Horizontal
    samples : int

    Returns
    -------
    ndarray, shape (nwave,)
        Ascending [1/m]; the wave of largest gradient is among them.
    """
    shortest = np.pi / horizontal.grid_spacing_m
    waves = np.geomspace(2 * shortest / LONGEST_IN_CELLS, shortest, samples)
    steepest = steepest_wavenumber(horizontal)
    if np.min(np.abs(waves / steepest - 1)) > 1e-9:
        waves = np.sort(np.append(waves, steepest))
    return waves


def steepest_wavenumber(horizontal: Horizontal) -> float:
    """Wavenumber of the largest horizontal gradient [1/m]."""
    angle = {
        "centred-2": np.pi / 2,
        # 8 sin a - sin 2a is largest where cos a = 1 - sqrt(3/2)
        "centred-4": float(np.arccos(1 - np.sqrt(1.5))),
    }.get(horizontal.gradient, np.pi)
    return angle / horizontal.grid_spacing_m


def steepest_gradient(horizontal: Horizontal) -> float:
    """Largest |k_x| along the wave's direction [1/m]."""
    angle = steepest_wavenumber(horizontal) * horizontal.grid_spacing_m
    return float(np.sqrt(horizontal.directions)) * gradient_symbol(angle, horizontal)
