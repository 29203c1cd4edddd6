"""What a comparison says, in plain words."""

from collections.abc import Sequence
from typing import Final

from .comparison import ComparedRow, Comparison
from .wording import number, percent, step

DEARER: Final = 4.0
"""Rows that cost more than this times the cheapest are out of the question for most."""


def pair(row: ComparedRow) -> str:
    """Name a row by its tableau and splitting."""
    return f"{row.tableau} with {row.split}"


def numbered(rows: Sequence[int]) -> str:
    """List rows by the numbers they have in a table, counted from 1.

    Examples
    --------
    >>> numbered([0]), numbered([0, 2]), numbered([0, 2, 3])
    ('row 1', 'rows 1 and 3', 'rows 1, 3 and 4')
    """
    told = [str(i + 1) for i in rows]
    if len(told) == 1:
        return f"row {told[0]}"
    return f"rows {', '.join(told[:-1])} and {told[-1]}"


def verdict(found: Comparison) -> str:
    """Say which row is cheapest, which is most accurate, and between which the choice lies."""
    if found.cheapest is None:
        return "no row can be used; the table says why"
    cheapest = found.rows[found.cheapest]
    parts = [
        f"cheapest is row {found.cheapest + 1}, {pair(cheapest)}: "
        f"{number(cheapest.cost_per_hour)} per simulated hour at {step(cheapest.step_s)} s"
    ]
    if found.most_accurate is not None:
        parts.append(_most_accurate(found, found.most_accurate))
    parts.append(_choice(found, cheapest))
    return "; ".join(parts)


def _choice(found: Comparison, cheapest: ComparedRow) -> str:
    """Name the rows that are left, those of sensible cost first."""
    if len(found.undominated) == 1:
        return f"it beats every other row: {numbered(found.undominated)}"
    dearest = DEARER * (cheapest.cost_per_hour or 0.0)
    dear = [i for i in found.undominated if (found.rows[i].cost_per_hour or 0.0) > dearest]
    near = [i for i in found.undominated if i not in dear]
    told = f"the choice lies between {numbered(near)}"
    if len(near) == 1:
        told = f"nothing of such cost is more accurate than {numbered(near)}"
    if dear:
        told += f", and {numbered(dear)} at more than {number(DEARER)} times the cost"
    return told


def _most_accurate(found: Comparison, place: int) -> str:
    row = found.rows[place]
    if row.error_at_equal_cost is None or found.equal_cost_per_hour is None:
        assert row.errors is not None
        return (
            f"least frequency error has row {place + 1}, {pair(row)}: "
            f"{percent(row.errors.frequency_error)}"
        )
    return (
        f"most accurate at {number(found.equal_cost_per_hour)} per hour is row {place + 1}, "
        f"{pair(row)}: {percent(row.error_at_equal_cost)} at {step(row.step_at_equal_cost_s)} s"
    )


def compared_at(found: Comparison) -> str:
    """Say at which steps rows are compared."""
    if found.step_s is not None:
        return f"{number(found.step_s, 6)} s, as given"
    return "the step advised for each row"


def what_dominates(found: Comparison, row: ComparedRow) -> str:
    """Say by which rows one is dominated, and at which of their steps; empty if by none."""
    return ", ".join(
        f"{pair(found.rows[by.row])} at {step(by.step_s)} s" for by in row.dominated_by
    )
