"""What lies between two level sets of a family: where a step is lost, and what takes over."""

from collections.abc import Callable
from dataclasses import dataclass
from math import inf, log
from typing import Final

import numpy as np

from levelstride.results.stretch_wording import binding_words, span
from levelstride.results.stretching import Binding, Crossing, StretchPoint
from levelstride.stability.blas import on_one_thread
from levelstride.studies.stretch_point import Members, StretchItem, carries

CLOSE: Final = log(1.01)
"""ln of the ratio of two coordinates between which the last set that carries the target lies."""

NUDGE: Final = log(1.004)
"""ln of how far beside the expected place a set is tried, so that two of them close the bracket."""

CROSSED: Final = log(1.05)
"""The same as CLOSE for the places where another wave takes over."""

OTHER_WAVE: Final = log(1.5)
"""ln of the ratio of wavelengths from which they count as different: samples lie 1.32 apart."""

LONG: Final = 7.99
"""Grid spacings from which waves count as long."""


@dataclass(frozen=True, slots=True)
class LossItem:
    """Where a target is lost.

    Parameters
    ----------
    of : StretchItem
    run : tuple of StretchPoint
        The members of the curve that carry the target, up to the last one.
    after : StretchPoint or None
        The next one; None where the run ends with the range.
    target_s : float
        The target [s].
    """

    of: StretchItem
    run: tuple[StretchPoint, ...]
    after: StretchPoint | None
    target_s: float


@dataclass(frozen=True, slots=True)
class Loss:
    """Where a target is lost, by whole searches on the side that carries it.

    Parameters
    ----------
    last : StretchPoint or None
        The last member that carries it; None if, looked at closely, none of the run does.
    first : StretchPoint or None
        The first that does not, at most 1 % apart; None if the last ends the range.
    corrected : tuple of StretchPoint
        Members of the curve as whole searches have them.
    """

    last: StretchPoint | None
    first: StretchPoint | None
    corrected: tuple[StretchPoint, ...] = ()


@dataclass(frozen=True, slots=True)
class BetweenItem:
    """Two neighbours of a curve between which something takes over."""

    of: StretchItem
    before: StretchPoint
    after: StretchPoint


@on_one_thread
def lost_between(item: LossItem) -> Loss:
    """Bracket where a target is lost, and bear it out by a whole search."""
    members, target_s = Members(item.of), item.target_s
    at, place = members.at, members.coordinate
    last, first = item.run[-1], item.after
    if first is not None:
        last, first = close_in(at, place, last, first, target_s=target_s)
    if not last.whole_search:
        last = at(place(last))
    if carries(last, target_s):
        return Loss(last, first)
    first, corrected = last, []
    for point in reversed(item.run):
        known = point if point.whole_search else at(place(point))
        if known is not point:
            corrected.append(known)
        if carries(known, target_s):
            last, first = close_in(
                lambda coordinate, *_: at(coordinate), place, known, first, target_s=target_s
            )
            return Loss(last, first, tuple(corrected))
        first = known
    return Loss(None, first, tuple(corrected))


@on_one_thread
def taken_over_between(item: BetweenItem) -> tuple[Crossing, ...]:
    """Find the places between two members where what binds becomes another."""
    members = Members(item.of)
    return tuple(_crossings(members, item.before, item.after))


def close_in(
    at: Callable[..., StretchPoint],
    coordinate: Callable[[StretchPoint], float],
    inside: StretchPoint,
    outside: StretchPoint,
    *,
    target_s: float,
) -> tuple[StretchPoint, StretchPoint]:
    """Bracket the loss of a target step to 1 %, with as few members as possible.

    Where the logarithm of the step is nearly linear in that of the coordinate, the place is known
    after one or two members; the next ones are taken just beside it on either side. Where it is
    not, every second member halves what is left.

    Parameters
    ----------
    at : callable
        Makes a member from its coordinate, and from members around it whose steps are known.
    coordinate : callable
        Finds that of a member.
    inside, outside : StretchPoint
        A member that carries the target and one that does not.
    target_s : float
        The target [s].

    Returns
    -------
    inside, outside : StretchPoint
        The same, at most 1 % apart.
    """
    halve = False
    while (width := abs(log(coordinate(outside) / coordinate(inside)))) > CLOSE:
        share = 0.5 if halve else _share(inside, outside, target_s, NUDGE / width)
        middle = coordinate(inside) * (coordinate(outside) / coordinate(inside)) ** share
        found = at(middle, inside, outside)
        if carries(found, target_s):
            inside = found
        else:
            outside = found
        halve = not halve and abs(log(coordinate(outside) / coordinate(inside))) > 0.6 * width
    return inside, outside


def _share(inside: StretchPoint, outside: StretchPoint, target_s: float, nudge: float) -> float:
    """Where between two members to look next, as a share of the way to the second."""
    if not inside.stable_step_s or not outside.stable_step_s:
        return 0.5
    above = log(inside.stable_step_s / target_s)
    below = log(target_s / outside.stable_step_s)
    if above + below <= 0.0:
        return 0.5
    expected = above / (above + below)
    beside = expected + nudge if expected < 0.5 else expected - nudge
    return float(np.clip(beside, nudge, 1.0 - nudge))


def changes(one: Binding | None, other: Binding | None, spacing_m: float) -> tuple[str, ...]:
    """Name what is different about what binds at two members; nothing where it only drifts.

    The layers count as different where those of one end below those of the other; the criterion,
    where the courant criterion is on one side; the wavenumber, where it jumps and not both waves
    are long: the limits of long waves are so much alike that they take turns.

    Parameters
    ----------
    one, other : Binding or None
        What binds.
    spacing_m : float
        Horizontal grid spacing [m].

    Returns
    -------
    tuple of str
        ``criterion``, ``air``, ``kind``, ``wavenumber``, ``layers``.
    """
    if one is None or other is None:
        return () if one is other else ("criterion",)
    differs = {
        "criterion": one.criterion != other.criterion
        and "courant" in (one.criterion, other.criterion),
        "air": one.air != other.air,
        "kind": one.kind != other.kind,
        "wavenumber": _other_wave(one.wavelength_m, other.wavelength_m, LONG * spacing_m),
        "layers": one.top_m <= other.bottom_m or other.top_m <= one.bottom_m,
    }
    return tuple(name for name, different in differs.items() if different)


def _other_wave(one_m: float | None, other_m: float | None, long_m: float) -> bool:
    first, second = (inf if length is None else length for length in (one_m, other_m))
    if min(first, second) >= long_m:
        return False
    return max(first, second) == inf or abs(log(first / second)) > OTHER_WAVE


def _crossings(members: Members, before: StretchPoint, after: StretchPoint) -> list[Crossing]:
    spacing_m = members.column.horizontal.grid_spacing_m
    differs = changes(before.binds, after.binds, spacing_m)
    if not differs:
        return []
    first, last = members.coordinate(before), members.coordinate(after)
    if abs(log(last / first)) <= CROSSED:
        return [_crossing(before, after, differs, by_lid=members.family.by_lid)]
    middle = members.at((first * last) ** 0.5, before, after)
    return _crossings(members, before, middle) + _crossings(members, middle, after)


def _crossing(
    before: StretchPoint, after: StretchPoint, differs: tuple[str, ...], *, by_lid: bool
) -> Crossing:
    if by_lid:
        place = f"lid at {span(before.lid_m, after.lid_m)}"
    else:
        place = f"lowest layer of {span(before.lowest_layer_m, after.lowest_layer_m)}"
    told = [
        "nothing"
        if one is None
        else binding_words(one, criterion="criterion" in differs, air="air" in differs)
        for one in (before.binds, after.binds)
    ]
    return Crossing(
        above_lowest_layer_m=before.lowest_layer_m,
        below_lowest_layer_m=after.lowest_layer_m,
        above_lid_m=before.lid_m,
        below_lid_m=after.lid_m,
        stable_step_s=before.stable_step_s,
        before=before.binds,
        after=after.binds,
        changes=differs,
        sentence=f"{place}: {told[1]} takes over from {told[0]}",
    )
