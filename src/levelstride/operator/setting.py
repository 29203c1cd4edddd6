"""What every term is built from."""

from __future__ import annotations

from dataclasses import dataclass

from levelstride.column.air import Background
from levelstride.column.column import Column
from levelstride.operator.state import Layout
from levelstride.operator.wave import Wave


@dataclass(frozen=True, slots=True, eq=False)
class Setting:
    """One air state of one column under one horizontal wave.

    Attributes
    ----------
    column : Column
    air : Background
        The air the terms are built on: one of the column's own or its reference.
    wave : Wave
    layout : Layout
    """

    column: Column
    air: Background
    wave: Wave
    layout: Layout


def layout_of(column: Column) -> Layout:
    """Return order and staggering of the unknowns of a column."""
    return Layout(column.levels.nlev, column.staggering, column.coriolis_per_s != 0.0)
