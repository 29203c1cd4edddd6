"""Which rows of a comparison nobody needs, and what errors an equal cost buys."""

from collections.abc import Sequence
from dataclasses import replace
from typing import Final

from levelstride.results.comparison import ComparedRow, CurvePoint, Dominator, at_cost
from levelstride.results.comparison_wording import DEARER
from levelstride.results.wording import number

CLEARLY: Final = 1e-3
"""An error must be smaller by this share to count as smaller [1]: rows agree to round-off."""


def equal_cost(rows: Sequence[ComparedRow], given: float | None = None) -> tuple[float | None, str]:
    """Find the cost at which errors are compared, so that every row of sensible cost can pay it.

    Parameters
    ----------
    rows : sequence of ComparedRow
        With their costs and curves.
    given : float, optional
        The cost that the user wants [1/h].

    Returns
    -------
    float or None
        Cost [1/h]; None where no row has a curve.
    str
        Where it comes from.
    """
    if given is not None:
        return given, "given"
    costs = {
        i: min(point.cost_per_hour for point in row.curve)
        for i, row in enumerate(rows)
        if row.usable and row.curve
    }
    if not costs:
        return None, "no row has a packet error"
    least = min(costs.values())
    place = max((i for i in costs if costs[i] <= DEARER * least), key=lambda i: costs[i])
    reason = f"what row {place + 1} costs at its step, the dearest"
    if max(costs.values()) > DEARER * least:
        reason += f" of those up to {number(DEARER)} times the cheapest"
    return costs[place], reason


def with_equal_cost(row: ComparedRow, cost: float | None) -> ComparedRow:
    """Fill in the error that a cost buys, where the stable steps of a row can be had for it."""
    bought = None if cost is None else at_cost(row.curve, cost)
    if bought is None:
        return row
    return replace(row, error_at_equal_cost=bought.error, step_at_equal_cost_s=bought.step_s)


def dominators(rows: Sequence[ComparedRow]) -> list[tuple[Dominator, ...]]:
    """Find for every row those that are cheaper, or as cheap, and more accurate.

    A row dominates another if one of its stable steps costs no more than the step of the other and
    carries the packet of gravity waves with less error. Without packet errors it dominates if at
    its own step it costs no more, neither the frequency error nor the change of amplitude is
    larger, and one of the three is smaller. A row whose solve couples columns dominates only such
    rows, since it costs more than is counted. Rows without a usable step take no part.

    Parameters
    ----------
    rows : sequence of ComparedRow
        With their costs and curves.

    Returns
    -------
    list of tuple of Dominator
        For every row, the most accurate dominator first.
    """
    return [
        tuple(
            sorted(
                (found for i in range(len(rows)) if (found := _over(rows, i, k)) is not None),
                key=lambda found: (found.error or 0.0, found.cost_per_hour, found.row),
            )
        )
        for k in range(len(rows))
    ]


def _over(rows: Sequence[ComparedRow], i: int, k: int) -> Dominator | None:
    """How row i dominates row k, if it does."""
    one, other = rows[i], rows[k]
    if i == k or not (one.usable and other.usable):
        return None
    if one.couples_columns and not other.couples_columns:
        return None
    assert other.errors is not None
    error = other.errors.packet_error
    if error is not None and one.curve:
        best = _best_up_to(one, other.cost_per_hour or 0.0)
        if best is None or best.error >= (1 - CLEARLY) * error:
            return None
        return Dominator(
            row=i, step_s=best.step_s, cost_per_hour=best.cost_per_hour, error=best.error
        )
    return _by_single_waves(one, other, i)


def _best_up_to(row: ComparedRow, cost: float) -> CurvePoint | None:
    """The least error that a row has for a cost or less."""
    able = [point for point in row.curve if point.cost_per_hour <= cost]
    bought = at_cost(row.curve, cost)
    return min((*able, *([bought] if bought else [])), key=lambda p: p.error, default=None)


def _by_single_waves(one: ComparedRow, other: ComparedRow, place: int) -> Dominator | None:
    """Compare two rows at their own steps."""
    if one.cost_per_hour is None or other.cost_per_hour is None or one.step_s is None:
        return None
    pairs = [(one.cost_per_hour, other.cost_per_hour)]
    pairs += [
        (left, right)
        for left, right in zip(_sizes(one), _sizes(other), strict=True)
        if left is not None and right is not None
    ]
    if len(pairs) == 1 or any(left > right for left, right in pairs):
        return None
    if not any(left < (1 - CLEARLY) * right for left, right in pairs):
        return None
    return Dominator(row=place, step_s=one.step_s, cost_per_hour=one.cost_per_hour, error=None)


def _sizes(row: ComparedRow) -> tuple[float | None, float | None]:
    assert row.errors is not None
    change = row.errors.amplitude_change_per_period
    return row.errors.frequency_error, None if change is None else abs(change)


def most_accurate(rows: Sequence[ComparedRow]) -> int | None:
    """Find the row of least error at the equal cost.

    Without packet errors it is that of least frequency error at its own step. Rows whose solve
    couples columns come after all others.
    """

    def error(row: ComparedRow) -> float | None:
        if any(one.error_at_equal_cost is not None for one in rows):
            return row.error_at_equal_cost
        return None if row.errors is None else row.errors.frequency_error

    able = [i for i, row in enumerate(rows) if row.usable and error(row) is not None]
    return min(able, key=lambda i: (rows[i].couples_columns, error(rows[i]) or 0.0), default=None)
