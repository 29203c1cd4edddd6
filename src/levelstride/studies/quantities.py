"""What about a column may change: slope, wind, updraft, mixing, grid spacing, lowest layer."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Final

from levelstride.column import knobs
from levelstride.column.column import Column
from levelstride.column.variants import with_levels
from levelstride.studies.level_families import Family

FINEST_SHARE: Final = 0.01
"""Grid spacing that is tried at last, as a share of the present one [1]."""


@dataclass(frozen=True, slots=True)
class Quantity:
    """Something about a column that may change.

    Parameters
    ----------
    present : callable
        Its value in a column.
    changed : callable
        Makes a column with another value.
    end : callable
        Value of a column that is tried at last.
    start : float
        Value tried first where the column has none; 0 where smaller values are harder.
    """

    present: Callable[[Column], float]
    changed: Callable[[Column, float], Column]
    end: Callable[[Column], float]
    start: float = 0.0

    @property
    def smaller(self) -> bool:
        """Whether smaller values are harder."""
        return self.start == 0.0


def _lowest_layer(column: Column) -> float:
    return float(column.levels.thickness_m[0])


def _thinnest_lowest_layer(column: Column) -> float:
    """The end of the family of level sets, or whatever the air and the tables allow before it."""
    return Family(column.levels.interfaces_m).coordinates(3)[-1]


def _with_lowest_layer(column: Column, thickness_m: float) -> Column:
    return with_levels(column, Family(column.levels.interfaces_m).at(thickness_m))


def _up_to(last: float, present: Callable[[Column], float]) -> Callable[[Column], float]:
    return lambda column: max(last, 4.0 * present(column))


QUANTITIES: Final[Mapping[str, Quantity]] = {
    "slope": Quantity(
        knobs.largest_slope, knobs.with_largest_slope, _up_to(3.0, knobs.largest_slope), 0.2
    ),
    "wind_m_per_s": Quantity(
        knobs.largest_wind, knobs.with_largest_wind, _up_to(200.0, knobs.largest_wind), 20.0
    ),
    "updraft_m_per_s": Quantity(
        knobs.largest_updraft,
        knobs.with_largest_updraft,
        _up_to(100.0, knobs.largest_updraft),
        2.0,
    ),
    "vertical_diffusion_m2_per_s": Quantity(
        knobs.largest_diffusivity,
        knobs.with_largest_diffusivity,
        _up_to(1e4, knobs.largest_diffusivity),
        10.0,
    ),
    "grid_spacing_m": Quantity(
        lambda column: column.horizontal.grid_spacing_m,
        knobs.with_grid_spacing,
        lambda column: FINEST_SHARE * column.horizontal.grid_spacing_m,
    ),
    "lowest_layer_m": Quantity(_lowest_layer, _with_lowest_layer, _thinnest_lowest_layer),
}
"""What is varied, in the order of the answer."""
