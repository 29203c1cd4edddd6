"""Level sets made of a level set: stretched by one power, or made anew with its own ratios.

``levelstride.studies.level_families`` says what each is for.
"""

from __future__ import annotations

from collections.abc import Callable
from contextlib import suppress
from typing import Final

import numpy as np
from scipy.optimize import brentq

from levelstride.column.arrays import Array

LEAST_GROWTH: Final = float(np.log(1.01))
"""Logarithm of the thickness ratio below which ratios change by the factor of this one."""

MOST_TIMES: Final = 2.0
"""Sets have at most this multiple of the layers that they are made of."""

STEEPEST: Final = 1e4
"""Power or correction of ratios beyond which none is looked for."""


class NoMemberError(ValueError):
    """There is no such set; the message says why."""


def largest_ratio(interfaces_m: Array) -> float:
    """Largest ratio of the thicknesses of neighbouring layers, thicker over thinner [1]."""
    thickness = np.diff(interfaces_m)
    ratios = thickness[1:] / thickness[:-1]
    return float(np.maximum(ratios, 1.0 / ratios).max())


def with_one_power(interfaces_m: Array, lowest_m: float) -> Array:
    """Raise all ratios to the power with which layers from ``lowest_m`` on end at the same lid.

    Parameters
    ----------
    interfaces_m : (nlev+1,) array
        A set [m].
    lowest_m : float
        Its new lowest layer [m].

    Returns
    -------
    (nlev+1,) array
        Interfaces [m].

    Raises
    ------
    NoMemberError
        If no power does.
    """
    log_ratios, top = _log_ratios(interfaces_m), float(interfaces_m[-1])

    def thickness(power: float) -> Array:
        return lowest_m * _grown(0.0, _raised(log_ratios, power))

    return _stacked(_reaching(thickness, top)[1], top)


def above_the_lowest(interfaces_m: Array, lid_m: float, lowest: int) -> Array:
    """Keep the lowest layers and raise the ratios above to the power that leads to a lid.

    Parameters
    ----------
    interfaces_m : (nlev+1,) array
        A set [m].
    lid_m : float
        Its new lid [m].
    lowest : int
        How many layers are kept.

    Returns
    -------
    (nlev+1,) array
        Interfaces [m].

    Raises
    ------
    NoMemberError
        If no power does.
    """
    base, below = float(interfaces_m[lowest]), np.diff(interfaces_m)[lowest - 1]
    log_ratios, room = _log_ratios(interfaces_m)[lowest - 1 :], lid_m - base
    if room <= 0.0:
        raise NoMemberError(f"the lowest layers reach to {base:g} m")

    def thickness(power: float) -> Array:
        made: Array = below * _grown(0.0, _raised(log_ratios, power))[1:]
        return made

    above = np.cumsum(_reaching(thickness, room)[1])
    heights = np.concatenate([interfaces_m[: lowest + 1], base + above])
    heights[-1] = lid_m
    return heights


def with_same_ratio(interfaces_m: Array, lowest_m: float) -> Array:
    """Keep the ratio at every height and the lid, and change the number of layers.

    Parameters
    ----------
    interfaces_m : (nlev+1,) array
        A set [m].
    lowest_m : float
        Its new lowest layer [m].

    Returns
    -------
    (n+1,) array
        Interfaces [m]; n differs.

    Raises
    ------
    NoMemberError
        If it would take more than twice as many layers.
    """
    top, most = float(interfaces_m[-1]), int(MOST_TIMES * (interfaces_m.size - 1))
    logs = _same_at_height(interfaces_m, lowest_m, top, most)
    if lowest_m * np.exp(logs).sum() < top:
        raise NoMemberError(f"it would take more than {most} layers")
    fits = _fits(logs, lowest_m, top, "ends at the lid")
    return _stacked(min(fits, key=lambda fit: abs(fit[0]))[1], top)


def below_the_upper(interfaces_m: Array, lowest_m: float, lowest: int) -> Array:
    """Keep the levels above the lowest layers and make those anew from a thinner one.

    Parameters
    ----------
    interfaces_m : (nlev+1,) array
        A set [m].
    lowest_m : float
        Its new lowest layer [m].
    lowest : int
        How many layers are made anew.

    Returns
    -------
    (n+1,) array
        Interfaces [m]; n differs.

    Raises
    ------
    NoMemberError
        If no number of layers does.
    """
    base, above = float(interfaces_m[lowest]), float(np.diff(interfaces_m)[lowest])
    most = int(MOST_TIMES * (interfaces_m.size - 1)) - (interfaces_m.size - 1 - lowest)
    logs = _same_at_height(interfaces_m, lowest_m, base, most)
    meets = float(_log_ratios(interfaces_m)[lowest - 1])
    fits = _fits(logs, lowest_m, base, "meets the levels above")
    best = min(fits, key=lambda fit: abs(np.log(above / fit[1][-1]) - meets))
    made: Array = np.concatenate([_stacked(best[1], base), interfaces_m[lowest + 1 :]])
    return made


def _log_ratios(interfaces_m: Array) -> Array:
    """Logarithms of the thickness ratios, upper over lower, shape (nlev-1,)."""
    made: Array = np.diff(np.log(np.diff(interfaces_m)))
    return made


def _raised(log_ratios: Array, power: float) -> Array:
    """Logarithms of ratios raised to a power."""
    made: Array = log_ratios + (power - 1.0) * np.maximum(log_ratios, LEAST_GROWTH)
    return made


def _grown(first: float, log_ratios: Array) -> Array:
    """Thicknesses, relative, one more than ratios."""
    logs = np.concatenate([[first], first + np.cumsum(log_ratios)])
    made: Array = np.exp(np.clip(logs, -600.0, 600.0))
    return made


def _same_at_height(interfaces_m: Array, lowest_m: float, height_m: float, most: int) -> Array:
    """Logarithms of relative thicknesses with the set's ratio at every height, well beyond one."""
    at, log_ratios = interfaces_m[1:-1], _log_ratios(interfaces_m)
    logs, top = [0.0], lowest_m
    while top < 2.0 * height_m and len(logs) < most:
        logs.append(logs[-1] + float(np.interp(top, at, log_ratios)))
        top += lowest_m * float(np.exp(logs[-1]))
    return np.array(logs)


def _fits(logs: Array, lowest_m: float, height_m: float, aim: str) -> list[tuple[float, Array]]:
    """Let 2, 3, ... layers end at a height: what corrects the ratios, and the thicknesses."""
    fits = []
    for n in range(2, logs.size + 1):
        with suppress(NoMemberError):
            fits.append(_fitted(logs[:n], lowest_m, height_m))
    if not fits:
        raise NoMemberError(f"no number of layers {aim}")
    return fits


def _fitted(logs: Array, lowest_m: float, height_m: float) -> tuple[float, Array]:
    """Correct all ratios by one factor so that the layers end at a height; its log, thicknesses."""
    places = np.arange(logs.size)

    def thickness(correction: float) -> Array:
        made: Array = lowest_m * np.exp(np.clip(logs + correction * places, -600.0, 600.0))
        return made

    return _reaching(thickness, height_m)


def _reaching(thickness: Callable[[float], Array], height_m: float) -> tuple[float, Array]:
    """Where layers that grow with a number add up to a height: the number and the thicknesses."""
    found = _root(lambda number: float(np.log(thickness(number).sum() / height_m)))
    return found, thickness(found)


def _root(gap: Callable[[float], float]) -> float:
    """Where a rising function is zero."""
    low, high = -0.5, 0.5
    while gap(low) > 0.0 and low > -STEEPEST:
        low *= 2.0
    while gap(high) < 0.0 and high < STEEPEST:
        high *= 2.0
    if gap(low) > 0.0 or gap(high) < 0.0:
        raise NoMemberError("no stretching of the layers does it")
    return float(brentq(gap, low, high, xtol=1e-14))


def _stacked(thickness: Array, top_m: float) -> Array:
    """Interfaces from the ground to exactly the top."""
    heights = np.concatenate([[0.0], np.cumsum(thickness)])
    heights[-1] = top_m
    return heights
