"""Orders of convergence over steps of falling length, and what a reader must know of them."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import replace
from itertools import pairwise
from math import log
from typing import Final

import numpy as np
from numpy.typing import NDArray

from levelstride.results.wording import number
from levelstride.results.work_precision import WorkPoint, WorkPrecision
from levelstride.splitting.parts import Parts
from levelstride.tableaux.audit import HIGHEST_ORDER, audit
from levelstride.tableaux.tableau import Tableau

HALVINGS: Final = 8
"""How often the shortest step is halved at most to find the asymptotic order."""

SAME_ORDER: Final = 0.05
"""Local orders that differ by less have settled [1]."""

ABOVE_ROUND_OFF: Final = 10.0
"""An error must exceed round-off by this factor to tell an order [1]."""

REDUCED: Final = 0.25
"""A local order that falls short of the linear order by more than this is reduced [1]."""

LARGE_STEPS: Final = 4.0
"""Factor of the step over which the order at the largest steps is taken [1]."""

GROWN: Final = 2.0
"""A packet that the column itself carries to more than this norm is no gravity wave any more."""

At = Callable[[int], WorkPoint | None]


def shorter_steps(
    at: At, fewest: int, found: Sequence[WorkPoint], round_off: float
) -> list[WorkPoint]:
    """Halve the step on until the order has settled or round-off is reached.

    Parameters
    ----------
    at : callable
        Takes so many steps; None if that cannot be done.
    fewest : int
        Number of steps of the last point.
    found : sequence of WorkPoint
        From the longest step to the shortest.
    round_off : float
        Error that round-off may make [1].

    Returns
    -------
    list of WorkPoint
        The shorter ones.
    """
    line, floor = list(found), ABOVE_ROUND_OFF * round_off
    for k in range(1, HALVINGS + 1):
        if line[-1].error <= floor or _settled(line, floor):
            break
        point = at(fewest * 2**k)
        if point is None:
            break
        line.append(point)
    return line[len(found) :]


def with_orders(answer: WorkPrecision) -> WorkPrecision:
    """Fill in the local order of every point and the orders of the whole."""
    floor = ABOVE_ROUND_OFF * answer.round_off_error
    line = [*answer.points, *answer.shorter]
    told = [
        replace(point, local_order=_slope(point, after) if after.error > floor else None)
        for point, after in pairwise(line)
    ] + line[-1:]
    clean = [point for point in line if point.error > floor]
    answer = replace(
        answer,
        points=tuple(told[: len(answer.points)]),
        shorter=tuple(told[len(answer.points) :]),
        largest_steps_order=_largest_steps_order(answer.points, floor),
    )
    if len(clean) < 2:
        return answer
    return replace(
        answer,
        observed_order=_slope(clean[-2], clean[-1]),
        settled=_settled(clean, floor),
        order_from_s=clean[-2].step_s,
        order_to_s=clean[-1].step_s,
    )


def _slope(longer: WorkPoint, shorter: WorkPoint) -> float | None:
    if min(longer.error, shorter.error) <= 0.0:
        return None
    return log(longer.error / shorter.error) / log(longer.step_s / shorter.step_s)


def _settled(line: Sequence[WorkPoint], floor: float) -> bool:
    """Whether the last two local orders agree, short of round-off and where sound is resolved."""
    if len(line) < 3 or line[-1].error <= floor or line[-1].vertical_courant > 1.0:
        return False
    before, last = _slope(line[-3], line[-2]), _slope(line[-2], line[-1])
    return before is not None and last is not None and abs(before - last) <= SAME_ORDER


def _largest_steps_order(points: Sequence[WorkPoint], floor: float) -> float | None:
    clean = [point for point in points if point.error > floor]
    if len(clean) < 2:
        return None
    target = clean[0].step_s / LARGE_STEPS
    return _slope(clean[0], min(clean[1:], key=lambda p: abs(log(p.step_s / target))))


def linear_order(tableau: Tableau, parts: Sequence[Parts]) -> int:
    """Order on linear equations with constant coefficients of the parts that there are.

    Parameters
    ----------
    tableau : Tableau
    parts : sequence of Parts
        The column's operator as it is split, one per air state.

    Returns
    -------
    int
        That of the pair; of one table alone where the other has nothing to do; 1 at most where
        terms are treated after the step. Orders beyond 5 count as 5.
    """
    if all(part.fast.is_zero for part in parts):
        order = _order_alone(tableau.a_explicit, tableau.b_explicit)
    elif all(part.slow.is_zero for part in parts):
        order = _order_alone(tableau.a_implicit, tableau.b_implicit)
    else:
        order = audit(tableau).linear_order
    after = any(not (part.after.is_zero and part.after_implicit.is_zero) for part in parts)
    return min(order, 1) if after else order


def _order_alone(a: NDArray[np.float64], b: NDArray[np.float64]) -> int:
    """Number of conditions b.A^(k-1).1 = 1/k! that hold one after the other."""
    vector, wanted = np.ones(b.size), 1.0
    for k in range(1, HIGHEST_ORDER + 1):
        wanted /= k
        if abs(float(b @ vector) - wanted) > 1e-9:
            return k - 1
        vector = a @ vector
    return HIGHEST_ORDER


def notes(answer: WorkPrecision) -> list[str]:
    """Say what a reader must know of an answer with orders: round-off, reduction, own growth."""
    said = [
        f"air '{packet.air}' itself carries the packet to {number(packet.kept, 2)} times its norm: "
        "it is no gravity wave any more"
        for packet in answer.packets
        if packet.kept > GROWN
    ]
    said += _of_round_off(answer)
    if answer.observed_order is not None and not answer.settled:
        said.append(
            f"order {answer.observed_order:.2f} between {number(answer.order_from_s)} s and "
            f"{number(answer.order_to_s)} s has not settled"
        )
    return said + _of_reduction(answer)


def _of_round_off(answer: WorkPrecision) -> list[str]:
    floor = number(answer.round_off_error, 1)
    reached = [
        point.step_s
        for point in answer.points
        if point.error <= ABOVE_ROUND_OFF * answer.round_off_error
    ]
    if len(reached) == len(answer.points):
        return [f"the error is round-off (about {floor}) at every step: no order"]
    if reached:
        return [f"round-off (about {floor}) hides the order from {number(reached[0])} s downwards"]
    return []


def _of_reduction(answer: WorkPrecision) -> list[str]:
    """Steps at which the local order is short of what linear equations give."""
    short = [
        point
        for point in answer.points
        if point.local_order is not None and point.local_order < answer.linear_order - REDUCED
    ]
    if not short:
        return []
    worst = min(short, key=lambda point: point.local_order or 0.0)
    return [
        f"order reduction: {worst.local_order:.2f} instead of {answer.linear_order} at "
        f"{number(worst.step_s)} s, where the vertical acoustic Courant number is "
        f"{number(worst.vertical_courant, 3)}"
    ]
