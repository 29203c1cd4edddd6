"""A column with one number of its definition turned, everything else the same."""

import re
from collections.abc import Mapping
from copy import deepcopy
from dataclasses import replace
from typing import Any

import numpy as np

from ..errors import InputError
from .column import Column, LowestSlopeGradient
from .read import build

_STEP = re.compile(r"([a-z_]+)(?:\[(\d+)\])?")


def with_value(column: Column, key: str, value: float) -> Column:
    """Change one number of a column.

    Parameters
    ----------
    column : Column
        The column.
    key : str
        Path in the column file, such as ``terrain.slope`` or ``air[1].temperature_k``; ``air``
        alone is the first state. A table that is missing is made.
    value : float
        The number to put there.

    Returns
    -------
    Column
        The column anew from its definition.

    Raises
    ------
    InputError
        If there is no such key, or the value is not allowed there.

    Examples
    --------
    >>> from levelstride.column.read import build
    >>> column = build({
    ...     "levels": {"kind": "uniform", "layers": 4, "top_m": 4000.0},
    ...     "air": {"kind": "standard"},
    ...     "horizontal": {"grid_spacing_m": 1000.0},
    ... })
    >>> float(with_value(column, "terrain.slope", 0.2).slope_f[0])
    0.2
    """
    definition = deepcopy(dict(column.definition))
    *tables, last = key.split(".")
    place: Any = definition
    for name in tables:
        place = _inside(place, name, key)
    if not isinstance(place, dict) or isinstance(place.get(last), dict | list | str):
        raise InputError(f"{column.source}: {key}: is no number; name a key that holds one")
    whole = isinstance(place.get(last), int) and float(value).is_integer()
    place[last] = int(value) if whole else value
    return _again(column, definition)


def with_reference(column: Column, table: Mapping[str, Any] | None) -> Column:
    """Give a column another ``[reference]`` table, or none.

    Parameters
    ----------
    column : Column
        The column.
    table : mapping or None
        The keys of the table; None builds the implicit operator on the air itself.
    """
    definition = {k: v for k, v in column.definition.items() if k != "reference"}
    if table is not None:
        definition["reference"] = dict(table)
    return _again(column, definition)


def largest_slope(column: Column) -> float:
    """Magnitude of the slope at the ground [1]."""
    return float(abs(column.slope_f[0]))


def with_largest_slope(column: Column, slope: float) -> Column:
    """Change the magnitude of the slope at the ground [1], its sign kept."""
    sign = -1.0 if column.slope_f[0] < 0.0 else 1.0
    return with_value(column, "terrain.slope", sign * slope)


def largest_wind(column: Column) -> float:
    """Largest wind speed of all air states [m/s]."""
    return max(float(np.abs(w).max()) for air in column.airs for w in (air.wind_c, air.wind_f))


def with_largest_wind(column: Column, speed: float) -> Column:
    """Scale the wind as a whole; where there is none, the same at every height is put in its place.

    Parameters
    ----------
    column : Column
        The column.
    speed : float
        Largest speed of the new wind over all heights and air states [m/s].
    """
    present = largest_wind(column)
    definition = deepcopy(dict(column.definition))
    wind = definition.get("wind", {})
    if present == 0.0:
        scheme = {"advection": wind["advection"]} if "advection" in wind else {}
        definition["wind"] = {"kind": "uniform", "speed_m_per_s": speed, **scheme}
        return _again(column, definition)
    ascents = [*definition["air"], definition.get("reference", {})]
    for table in (wind, *ascents):
        for key in ("speed_m_per_s", "surface_m_per_s", "shear_per_s"):
            _scale(table, key, speed / present)
        for key in ("speeds_m_per_s", "winds_m_per_s"):
            _scale(table, key, speed / present)
    return _again(column, definition)


def largest_updraft(column: Column) -> float:
    """Largest vertical wind that the column file gives [m/s]."""
    table = column.definition.get("updraft", {})
    return float(
        np.abs([0.0, table.get("speed_m_per_s", 0.0), *table.get("speeds_m_per_s", [])]).max()
    )


def with_largest_updraft(column: Column, speed: float) -> Column:
    """Scale the vertical wind; where there is none, it is made a sine between ground and lid."""
    return _with_profile(
        column, "updraft", ("speed_m_per_s", "speeds_m_per_s"), speed, largest_updraft(column)
    )


def largest_diffusivity(column: Column) -> float:
    """Largest vertical diffusivity K [m2/s]."""
    return float(max(column.diffusivity_c.max(), column.diffusivity_f.max()))


def with_largest_diffusivity(column: Column, diffusivity: float) -> Column:
    """Scale the vertical diffusivity; where there is none, it is made the same at every height."""
    keys = ("vertical_m2_per_s", "values_m2_per_s")
    return _with_profile(column, "diffusion", keys, diffusivity, largest_diffusivity(column))


def with_grid_spacing(column: Column, spacing_m: float) -> Column:
    """Change the grid spacing [m]; the user's own gradient operator is scaled with it."""
    definition = deepcopy(dict(column.definition))
    horizontal = definition["horizontal"]
    _scale(horizontal, "largest_gradient_per_m", column.horizontal.grid_spacing_m / spacing_m)
    horizontal["grid_spacing_m"] = spacing_m
    return _again(column, definition)


def lowest_slope_gradients(column: Column) -> tuple[Column, ...]:
    """Take a column over a slope once for each treatment of the lowest slope gradient."""
    if not np.any(column.slope_f):
        return (column,)
    gradients: tuple[LowestSlopeGradient, ...] = ("half", "full")
    return tuple(replace(column, lowest_slope_gradient=gradient) for gradient in gradients)


def _with_profile(
    column: Column, name: str, keys: tuple[str, str], value: float, present: float
) -> Column:
    """Scale a table that holds either one number or a list; present is their largest."""
    single, listed = keys
    definition = deepcopy(dict(column.definition))
    table = definition.setdefault(name, {})
    if present == 0.0 or single in table:
        for key in ("heights_m", listed):
            table.pop(key, None)
        sign = -1.0 if table.get(single, 0.0) < 0.0 else 1.0
        table[single] = sign * value
    else:
        _scale(table, listed, value / present)
    return _again(column, definition)


def _scale(table: dict[str, Any], key: str, factor: float) -> None:
    if isinstance(table.get(key), list):
        table[key] = [factor * number for number in table[key]]
    elif key in table:
        table[key] = factor * table[key]


def _inside(place: Any, name: str, key: str) -> Any:
    """Go down one step of a path."""
    match = _STEP.fullmatch(name)
    if match is None or not isinstance(place, dict):
        raise InputError(f"{key}: is no key path; write table.key, or air[1].key for a second air")
    inner = place.setdefault(match[1], {})
    if not isinstance(inner, list):
        return inner
    index = int(match[2] or 0)
    if index >= len(inner):
        raise InputError(f"{key}: there are {len(inner)} of {match[1]}, counted from 0")
    return inner[index]


def _again(column: Column, definition: Mapping[str, Any]) -> Column:
    """Build a column anew, with what it has beside its definition now."""
    return replace(
        build(definition, source=column.source),
        lowest_slope_gradient=column.lowest_slope_gradient,
        left_out=column.left_out,
    )
