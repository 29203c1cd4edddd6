"""Families of level sets: one number stretches a set, and something of it is kept.

Every family has the user's own set as a member, which is handed back as it is. Its coordinate is
the thickness of the lowest layer, but for the family that keeps the lowest layers, where it is the
height of the lid.

``layers-and-lid``
    The number of layers and the lid stay. The ratio of every pair of neighbouring layers (upper
    over lower) is raised to one power, and the thicknesses are scaled to the lid: power 1 is the
    user's own set, power 0 makes the layers equal, larger powers stretch more. A ratio below 1.01
    changes by the factor by which 1.01 would, so that equal layers can be stretched too, and layers
    that get thinner upward are not made to do so more.
``ratio``
    The stretching ratio at every height stays, and so does the lid; the number of layers changes.
    From the lowest layer upward every layer is as many times as thick as the one below as the
    user's set has it at that height (its logarithm linear between interfaces). All ratios are then
    corrected by one factor close to 1, so that a whole number of layers ends at the lid.
``lowest-layers``
    The lowest layers stay as they are, and so does the number of layers; the ratios above are
    raised to one power as in ``layers-and-lid``, and the lid moves.
``upper-levels``
    The levels above the lowest layers stay; what lies below is made anew from a thinner lowest
    layer, with the ratios of the user's set at that height as in ``ratio``, by as many layers as
    meet the first kept one with nearly the ratio of the user's set there.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Final

import numpy as np
from scipy.optimize import brentq

from levelstride.column.arrays import Array
from levelstride.column.level_sets import THINNEST
from levelstride.errors import InputError

KEEPS: Final = ("layers-and-lid", "ratio", "lowest-layers", "upper-levels")
"""What a family may keep; the first is the default."""

LEAST_GROWTH: Final = float(np.log(1.01))
"""Logarithm of the thickness ratio below which ratios change by the factor of this one."""

LARGEST_RATIO: Final = 3.0
"""Thickness ratio of neighbouring layers beyond which no family goes [1]."""

THINNEST_SHARE: Final = 0.05
"""Lowest layer with which a family ends, as a share of the user's own [1]; or ..."""

THINNEST_M: Final = 1.0
"""... this one [m], whichever is thinner."""

MOST_TIMES: Final = 2.0
"""Layers and lid are at most this multiple of the user's own, and the lid at least 1/this."""

SAME: Final = 1e-12
"""Relative difference of coordinates below which the user's own set is meant."""

STEEPEST: Final = 1e4
"""Power or correction of ratios beyond which none is looked for."""


class NoMemberError(ValueError):
    """There is no such member; the message says why."""


@dataclass(frozen=True, eq=False)
class Family:
    """Level sets with a single degree of freedom.

    Parameters
    ----------
    interfaces_m : (nlev+1,) array
        The user's own set, heights above the ground [m].
    keep : str
        One of ``KEEPS``.
    lowest : int
        How many layers ``lowest-layers`` keeps and ``upper-levels`` makes anew; 0 takes a third of
        them.

    Raises
    ------
    InputError
        If ``keep`` is unknown, or ``lowest`` leaves nothing to stretch.

    Examples
    --------
    >>> family = Family(np.array([0.0, 100.0, 300.0, 700.0]))
    >>> family.at(family.own).tolist(), family.at(50.0)[[0, 1, -1]].tolist()
    ([0.0, 100.0, 300.0, 700.0], [0.0, 50.0, 700.0])
    """

    interfaces_m: Array
    keep: str = KEEPS[0]
    lowest: int = 0

    def __post_init__(self) -> None:
        if self.keep not in KEEPS:
            raise InputError(f"keep: unknown '{self.keep}'; known are {', '.join(KEEPS)}")
        layers = self.interfaces_m.size - 1
        if self.lowest == 0:
            object.__setattr__(self, "lowest", max(1, round(layers / 3)))
        if not 1 <= self.lowest < layers:
            raise InputError(
                f"lowest: received {self.lowest}; with {layers} layers it must be 1 to {layers - 1}"
            )

    @property
    def by_lid(self) -> bool:
        """Whether the coordinate is the height of the lid and not the lowest layer."""
        return self.keep == "lowest-layers"

    @property
    def own(self) -> float:
        """Coordinate of the user's own set [m]."""
        return float(self.interfaces_m[-1] if self.by_lid else self.interfaces_m[1])

    def at(self, coordinate: float) -> Array:
        """Make a member.

        Parameters
        ----------
        coordinate : float
            Lowest layer or, with ``lowest-layers``, height of the lid [m].

        Returns
        -------
        (n+1,) array
            Interfaces [m].

        Raises
        ------
        NoMemberError
            If there is no such member.
        """
        if abs(coordinate / self.own - 1.0) <= SAME:
            return self.interfaces_m
        if self.keep == "layers-and-lid":
            heights = with_one_power(self.interfaces_m, coordinate)
        elif self.keep == "ratio":
            heights = with_same_ratio(self.interfaces_m, coordinate)
        elif self.keep == "lowest-layers":
            heights = above_the_lowest(self.interfaces_m, coordinate, self.lowest)
        else:
            heights = below_the_upper(self.interfaces_m, coordinate, self.lowest)
        if np.min(np.diff(heights)) < THINNEST:
            raise NoMemberError(f"a layer would be thinner than {THINNEST:g} m")
        return heights

    def coordinates(self, points: int) -> tuple[float, ...]:
        """Spread members from the least to the most stretched one.

        Parameters
        ----------
        points : int
            How many, at least 3.

        Returns
        -------
        tuple of float
            Coordinates in geometric sequence on either side of the user's own set, which is among
            them: lowest layers from thick to thin, or lids from low to high [m].
        """
        first, last = self._ends()
        reach = abs(np.log(last / first))
        if reach < SAME:
            return (self.own,)
        share = abs(np.log(self.own / first)) / reach
        before = round((points - 1) * share)
        before = min(max(before, int(share > 0.0)), points - 1 - int(share < 1.0))
        coarser = np.geomspace(first, self.own, before + 1)[:-1]
        thinner = np.geomspace(self.own, last, points - before)[1:]
        return tuple(float(x) for x in (*coarser, self.own, *thinner))

    def _ends(self) -> tuple[float, float]:
        """Coordinates of the coarsest and of the most stretched member."""
        if self.by_lid:
            return self._reach(self.own / MOST_TIMES), self._reach(self.own * MOST_TIMES)
        layers = self.lowest if self.keep == "upper-levels" else self.interfaces_m.size - 1
        equal = float(self.interfaces_m[layers]) / layers
        thinnest = min(THINNEST_M, THINNEST_SHARE * self.own)
        return self._reach(max(self.own, equal)), self._reach(thinnest)

    def _reach(self, wanted: float) -> float:
        """The coordinate wanted or, if it has no sound member, the last one on the way there."""
        if self._sound(wanted):
            return wanted
        inside, outside = self.own, wanted
        while abs(np.log(outside / inside)) > 1e-3:
            middle = float(np.sqrt(inside * outside))
            if self._sound(middle):
                inside = middle
            else:
                outside = middle
        return inside

    def _sound(self, coordinate: float) -> bool:
        try:
            heights = self.at(coordinate)
        except NoMemberError:
            return False
        most = max(LARGEST_RATIO, largest_ratio(self.interfaces_m))
        return largest_ratio(heights) <= most * (1.0 + SAME)


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

    return _stacked(thickness(_root(lambda power: np.log(thickness(power).sum() / top))), top)


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

    above = thickness(_root(lambda power: np.log(thickness(power).sum() / room)))
    heights = np.concatenate([interfaces_m[: lowest + 1], base + np.cumsum(above)])
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
    fits = [fit for n in range(2, logs.size + 1) if (fit := _fitted(logs[:n], lowest_m, top))]
    if not fits:
        raise NoMemberError("no number of layers ends at the lid")
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
    fits = [fit for n in range(2, logs.size + 1) if (fit := _fitted(logs[:n], lowest_m, base))]
    if not fits:
        raise NoMemberError("no number of layers meets the levels above")
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


def _fitted(logs: Array, lowest_m: float, height_m: float) -> tuple[float, Array] | None:
    """Correct all ratios by one factor so that the layers end at a height; its log, thicknesses."""
    places = np.arange(logs.size)

    def thickness(correction: float) -> Array:
        made: Array = lowest_m * np.exp(np.clip(logs + correction * places, -600.0, 600.0))
        return made

    try:
        found = _root(lambda correction: np.log(thickness(correction).sum() / height_m))
    except NoMemberError:
        return None
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
