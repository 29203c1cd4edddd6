"""Columns that differ from a given one in their level set alone."""

from collections.abc import Mapping
from dataclasses import replace
from typing import Any

import numpy as np

from .arrays import Array
from .column import Column
from .read import build


def levels_definition(definition: Mapping[str, Any], interfaces_m: Array) -> dict[str, Any]:
    """Put a list of interfaces in place of the level set of a definition.

    The heights are those above the ground that the column has in the end, so that compression over
    terrain, which may have made them, is switched off and not applied to them once more.

    Parameters
    ----------
    definition : mapping
        ``Column.definition``.
    interfaces_m : (nlev+1,) array
        Heights above the ground [m], increasing, the first 0.

    Returns
    -------
    dict
        A definition with ``levels.kind = "table"`` and ``terrain.compression = "none"``, otherwise
        the same.
    """
    heights = np.asarray(interfaces_m, dtype=np.float64)
    table = {"kind": "table", "heights_m": heights.tolist(), "at": "interfaces"}
    terrain = {**definition.get("terrain", {}), "compression": "none"}
    return {**definition, "levels": table, "terrain": terrain}


def with_levels(column: Column, interfaces_m: Array) -> Column:
    """Make a column with another level set and everything else the same.

    Air, wind, updraft, slope, mixing and the absorbing layer are evaluated anew on the levels; a
    slope with linear decay and the absorbing layer reach to the new lid. Levels that were given by
    pressure are heights from here on. Terms that the column leaves out stay left out.

    Parameters
    ----------
    column : Column
        The column.
    interfaces_m : (nlev+1,) array
        Heights of the new interfaces above the ground [m], increasing, the first 0; not compressed
        any further.

    Returns
    -------
    Column
        Its definition lists the interfaces and can be built, or written as a column file and
        loaded, again; its digest is that of this definition. What is left out is no part of it.

    Raises
    ------
    InputError
        Where the heights make no level set, or the air or the absorbing layer does not fit under
        the new lid.

    Examples
    --------
    >>> from levelstride.column.read import build
    >>> column = build({
    ...     "levels": {"kind": "uniform", "layers": 4, "top_m": 4000.0},
    ...     "air": {"kind": "standard"},
    ...     "horizontal": {"grid_spacing_m": 1000.0},
    ... })
    >>> with_levels(column, [0.0, 50.0, 200.0, 4000.0]).levels.nlev
    3
    """
    made = levels_definition(column.definition, interfaces_m)
    made["terrain"]["lowest_slope_gradient"] = column.lowest_slope_gradient
    return replace(build(made, source=column.source), left_out=column.left_out)
