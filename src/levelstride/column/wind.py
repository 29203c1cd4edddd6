"""Horizontal wind and frozen updraft on the levels."""

import numpy as np

from .arrays import Array
from .levels import Levels


def between(heights_m: Array, values: Array, at_m: Array) -> Array:
    """Linear between the given heights, constant beyond them; shape of ``at_m``."""
    return np.interp(at_m, heights_m, values)


def sine_updraft(speed_m_per_s: float, levels: Levels) -> tuple[Array, Array]:
    """W = speed sin(pi z/top) at centres (nlev,) and interfaces (nlev+1,) [m/s], 0 at both ends."""
    at_f = speed_m_per_s * np.sin(np.pi * levels.interfaces_m / levels.top_m)
    at_f[[0, -1]] = 0.0
    return speed_m_per_s * np.sin(np.pi * levels.centres_m / levels.top_m), at_f


def table_updraft(heights_m: Array, speeds: Array, levels: Levels) -> tuple[Array, Array]:
    """W linear between listed heights and zero at ground and lid, (nlev,) and (nlev+1,) [m/s]."""
    inside = (heights_m > 0.0) & (heights_m < levels.top_m)
    heights = np.concatenate([[0.0], heights_m[inside], [levels.top_m]])
    values = np.concatenate([[0.0], speeds[inside], [0.0]])
    return (
        between(heights, values, levels.centres_m),
        between(heights, values, levels.interfaces_m),
    )
