"""Orders of convergence over steps of falling length, and what a reader must know of them."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import replace
from functools import lru_cache
from itertools import pairwise, takewhile
from math import log
from typing import Final

import numpy as np
from numpy.typing import NDArray

from levelstride.results.wording import number
from levelstride.results.work_precision import WorkPoint, WorkPrecision
from levelstride.schemes.scheme import ProgramScheme, TimeScheme
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

LOST: Final = 0.2
"""Beyond this error the packet is out of phase, and orders tell of that and not of sound [1]."""

LARGE_STEPS: Final = 4.0
"""Factor of the step over which the order at the largest steps is taken [1]."""

GROWN: Final = 2.0
"""A packet that the column itself carries to more than this norm is no gravity wave any more."""

At = Callable[[int], WorkPoint | None]


def shorter_steps(
    at: At, fewest: int, found: Sequence[WorkPoint], expected: int
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
    expected : int
        Order on linear equations.

    Returns
    -------
    list of WorkPoint
        The shorter ones.
    """
    line = list(found)
    for k in range(1, HALVINGS + 1):
        if not _clear(line[-1]) or _settled(line, expected):
            break
        point = at(fewest * 2**k)
        if point is None:
            break
        line.append(point)
    return line[len(found) :]


def with_orders(answer: WorkPrecision) -> WorkPrecision:
    """Fill in the local order of every point and the orders of the whole."""
    line = [*answer.points, *answer.shorter]
    told = [
        replace(point, local_order=_slope(point, after) if _clear(after) else None)
        for point, after in pairwise(line)
    ] + line[-1:]
    clean = _clear_ones(line)
    answer = replace(
        answer,
        points=tuple(told[: len(answer.points)]),
        shorter=tuple(told[len(answer.points) :]),
        largest_steps_order=_largest_steps_order(answer.points),
    )
    if len(clean) < 2:
        return answer
    return replace(
        answer,
        observed_order=_slope(clean[-2], clean[-1]),
        settled=_settled(clean, answer.linear_order),
        order_from_s=clean[-2].step_s,
        order_to_s=clean[-1].step_s,
    )


def _clear(point: WorkPoint) -> bool:
    """Whether the error stands out from round-off."""
    return point.error > ABOVE_ROUND_OFF * point.round_off


def _clear_ones(line: Sequence[WorkPoint]) -> list[WorkPoint]:
    """The points down to the first that does not stand out from round-off."""
    return list(takewhile(_clear, line))


def _slope(longer: WorkPoint, shorter: WorkPoint) -> float | None:
    if min(longer.error, shorter.error) <= 0.0:
        return None
    return log(longer.error / shorter.error) / log(longer.step_s / shorter.step_s)


def _settled(line: Sequence[WorkPoint], expected: int) -> bool:
    """Whether the last two local orders agree, short of round-off.

    With one another where vertical sound is resolved, elsewhere with the expected order as well:
    reduced orders may stand for a while.
    """
    if len(line) < 3 or not _clear(line[-1]):
        return False
    before, last = _slope(line[-3], line[-2]), _slope(line[-2], line[-1])
    if before is None or last is None or abs(before - last) > SAME_ORDER:
        return False
    return line[-1].vertical_courant <= 1.0 or abs(last - expected) <= SAME_ORDER


def _largest_steps_order(points: Sequence[WorkPoint]) -> float | None:
    clean = _clear_ones(points)
    if len(clean) < 2:
        return None
    target = clean[0].step_s / LARGE_STEPS
    return _slope(clean[0], min(clean[1:], key=lambda p: abs(log(p.step_s / target))))


def linear_order(tableau: TimeScheme, parts: Sequence[Parts]) -> int:
    """Order on linear equations with constant coefficients of the parts that there are.

    Parameters
    ----------
    tableau : TimeScheme
    parts : sequence of Parts
        The column's operator as it is split, one per air state.

    Returns
    -------
    int
        That of the pair; of one table alone where the other has nothing to do; 1 at most where
        terms are treated after the step. Orders beyond 5 count as 5.
    """
    if isinstance(tableau, ProgramScheme):
        alone = all(part.fast.is_zero for part in parts) and not tableau.substeps
        order = tableau.slow_order if alone else tableau.order
    elif all(part.fast.is_zero for part in parts):
        order = _order_alone(tableau.a_explicit, tableau.b_explicit)
    elif all(part.slow.is_zero for part in parts):
        order = _order_alone(tableau.a_implicit, tableau.b_implicit)
    else:
        order = _order_of_pair(tableau)
    after = any(not (part.after.is_zero and part.after_implicit.is_zero) for part in parts)
    return min(order, 1) if after else order


@lru_cache(maxsize=256)
def _order_of_pair(tableau: Tableau) -> int:
    """Audits of schemes of many stages take half a second, and compare asks for each again."""
    return audit(tableau).linear_order


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
    hidden = answer.points[len(_clear_ones(answer.points)) :]
    if not hidden:
        return []
    floor = number(hidden[0].round_off, 1)
    if len(hidden) == len(answer.points):
        return [f"the error is round-off (about {floor}) at every step: no order"]
    return [
        f"round-off (about {floor}) hides the order from {number(hidden[0].step_s)} s downwards"
    ]


def _of_reduction(answer: WorkPrecision) -> list[str]:
    """Steps at which the local order is short of what linear equations give."""
    short = [
        point
        for point in answer.points
        if point.error <= LOST
        and point.local_order is not None
        and point.local_order < answer.linear_order - REDUCED
    ]
    if not short:
        return []
    worst = min(short, key=lambda point: point.local_order or 0.0)
    return [
        f"order reduction: {worst.local_order:.2f} instead of {answer.linear_order} at "
        f"{number(worst.step_s)} s, where the vertical acoustic Courant number is "
        f"{number(worst.vertical_courant, 3)}"
    ]
