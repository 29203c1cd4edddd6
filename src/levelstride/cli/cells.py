"""Headings and cells that several tables share."""

import re
from typing import TYPE_CHECKING

from levelstride.cli.console import Heading

if TYPE_CHECKING:
    from levelstride.results.dataset import ColumnSummary

WIDTH_OF_SPLITTING = 18
"""Characters in a line of a table's column of splittings."""

METHOD = (Heading("tableau", whole=True), Heading("implicit", whole=True))
STABLE = Heading("stable", "step [s]", number=True)


def in_lines(split: str) -> str:
    """Break a splitting behind its groups into lines that leave room for the rest.

    Examples
    --------
    >>> in_lines("sound+buoyancy+divergence").splitlines()
    ['sound+buoyancy+', 'divergence']
    """
    lines = [""]
    for group in re.findall(r"[^+]*\+?", split):
        if len(lines[-1]) + len(group) > WIDTH_OF_SPLITTING and lines[-1]:
            lines.append("")
        lines[-1] += group
    return "\n".join(lines)


def stable_step(step_s: float | None, *, unbounded: bool) -> str:
    """Write a stable step [s], or that there is no limit."""
    from levelstride.results.wording import step

    return "no limit" if unbounded else step(step_s)


def level_set(column: "ColumnSummary") -> str:
    """Tell a level set in one line."""
    from levelstride.results.wording import metres, number

    return (
        f"{column.layers} layers, lowest {metres(column.lowest_layer_m)}, thickest "
        f"{metres(column.thickest_layer_m)}, largest ratio {number(column.largest_ratio)}, lid at "
        f"{metres(column.top_m)}"
    )
