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
from typing import Final, TypeAlias

import numpy as np

from levelstride.column.arrays import Array
from levelstride.column.level_sets import THINNEST
from levelstride.errors import InputError
from levelstride.studies.stretched_levels import (
    MOST_TIMES,
    NoMemberError,
    above_the_lowest,
    below_the_upper,
    largest_ratio,
    with_one_power,
    with_same_ratio,
)

KEEPS: Final = ("layers-and-lid", "ratio", "lowest-layers", "upper-levels")
"""What a family may keep; the first is the default."""

LARGEST_RATIO: Final = 3.0
"""Thickness ratio of neighbouring layers beyond which no curve goes, or twice the own one [1]."""

THINNEST_SHARE: Final = 0.05
"""Lowest layer with which a family ends, as a share of the user's own [1]; or ..."""

THINNEST_M: Final = 1.0
"""... this one [m], whichever is thinner."""

SAME: Final = 1e-12
"""Relative difference of coordinates below which the user's own set is meant."""

CLOSE: Final = 1e-3
"""Relative width to which the end of a family is found, where it ends early."""


Fits: TypeAlias = Callable[[Array], bool]


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

    def coordinates(self, points: int, fits: Fits = lambda _: True) -> tuple[float, ...]:
        """Spread members from the least to the most stretched one.

        Parameters
        ----------
        points : int
            How many, at least 3.
        fits : callable
            Whether a set suits whatever it is used for.

        Returns
        -------
        tuple of float
            Coordinates in geometric sequence on either side of the user's own set, which is among
            them: lowest layers from thick to thin, or lids from low to high [m].
        """
        first, last = (self._reach(end, fits) for end in self.ends)
        reach = abs(np.log(last / first))
        if reach < SAME:
            return (self.own,)
        share = abs(np.log(self.own / first)) / reach
        before = round((points - 1) * share)
        before = min(max(before, int(share > 0.0)), points - 1 - int(share < 1.0))
        coarser = np.geomspace(first, self.own, before + 1)[:-1]
        thinner = np.geomspace(self.own, last, points - before)[1:]
        return tuple(float(x) for x in (*coarser, self.own, *thinner))

    @property
    def steepest(self) -> float:
        """Largest ratio of neighbouring thicknesses on a curve [1]."""
        return max(LARGEST_RATIO, 2.0 * largest_ratio(self.interfaces_m))

    @property
    def ends(self) -> tuple[float, float]:
        """Coordinates between which members are wanted, of the least stretched one first [m]."""
        if self.by_lid:
            return self.own / MOST_TIMES, self.own * MOST_TIMES
        layers = self.lowest if self.keep == "upper-levels" else self.interfaces_m.size - 1
        equal = float(self.interfaces_m[layers]) / layers
        return max(self.own, equal), min(THINNEST_M, THINNEST_SHARE * self.own)

    def _reach(self, wanted: float, fits: Fits) -> float:
        """The coordinate wanted or, if it has no sound member, the last one on the way there."""
        if self._sound(wanted, fits):
            return wanted
        inside, outside = self.own, wanted
        while abs(np.log(outside / inside)) > CLOSE:
            middle = float(np.sqrt(inside * outside))
            if self._sound(middle, fits):
                inside = middle
            else:
                outside = middle
        return inside

    def _sound(self, coordinate: float, fits: Fits) -> bool:
        try:
            heights = self.at(coordinate)
        except NoMemberError:
            return False
        return largest_ratio(heights) <= self.steepest * (1.0 + SAME) and fits(heights)
