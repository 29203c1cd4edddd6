"""The answer for one tableau and splitting, made of its curve."""

from collections.abc import Sequence
from dataclasses import dataclass, replace
from math import inf
from typing import TypeVar

from levelstride.errors import CalculationError
from levelstride.results.mending import LayerSensitivity, Mended
from levelstride.results.stretch_wording import verdict_of
from levelstride.results.stretching import Crossing, StretchPoint, StretchRow
from levelstride.schemes.scheme import TimeScheme
from levelstride.splitting.splitting import Splitting
from levelstride.studies.level_families import Family
from levelstride.studies.stretch_between import Loss
from levelstride.studies.stretch_point import carries

Found = TypeVar("Found")


@dataclass(frozen=True, slots=True, eq=False)
class Draft:
    """The curve of one pair, and its target; where the target is lost is looked for here."""

    tableau: TimeScheme
    splitting: Splitting
    curve: tuple[StretchPoint, ...]
    target: tuple[float | None, str]

    @property
    def run(self) -> tuple[int, int] | None:
        """First and last place of the run of points that carry the target.

        The run is that of the user's own set or, where it does not carry the target, the nearest
        one of less and then of more stretched sets.
        """
        target_s = self.target[0]
        if target_s is None:
            return None
        able = [carries(point, target_s) for point in self.curve]
        own = next(i for i, point in enumerate(self.curve) if point.own)
        order = (*range(own, -1, -1), *range(own + 1, len(able)))
        inside = next((i for i in order if able[i]), None)
        if inside is None:
            return None
        last = inside
        while last + 1 < len(able) and able[last + 1]:
            last += 1
        return inside, last

    @property
    def loss(self) -> tuple[tuple[StretchPoint, ...], StretchPoint | None] | None:
        """The run that carries the target and its next neighbour, if there are any."""
        if self.run is None:
            return None
        first, last = self.run
        after = self.curve[last + 1] if last + 1 < len(self.curve) else None
        return self.curve[first : last + 1], after

    def corrected(self, points: Sequence[StretchPoint]) -> "Draft":
        """Put members that were looked at more closely in their places."""
        closer = {(point.lowest_layer_m, point.lid_m): point for point in points}
        curve = (closer.get((one.lowest_layer_m, one.lid_m), one) for one in self.curve)
        return replace(self, curve=tuple(curve))


@dataclass(slots=True)
class Extras:
    """What belongs to one row beyond its curve.

    Parameters
    ----------
    lost : Loss or None
        The last set that carries the target and the next one.
    crossings : tuple of Crossing
        Where another wave takes over.
    layer_costs, mended
        What was asked for besides, or why it was not found.
    """

    lost: Loss | None = None
    crossings: tuple[Crossing, ...] = ()
    layer_costs: LayerSensitivity | CalculationError | None = None
    mended: Mended | CalculationError | None = None


@dataclass(frozen=True, slots=True)
class Telling:
    """How rows are told."""

    family: Family
    air: bool

    def row(self, draft: Draft, extras: Extras) -> StretchRow:
        """Make a row of what was found for a pair."""
        (target_s, reason), last, first = draft.target, None, None
        if extras.lost is not None:
            last, first = extras.lost.last, extras.lost.first
            draft = draft.corrected(extras.lost.corrected)
        own = next(point for point in draft.curve if point.own)
        return StretchRow(
            tableau=draft.tableau.name,
            split=draft.splitting.name,
            target_step_s=target_s,
            target_reason=reason,
            own_stable_step_s=own.stable_step_s,
            thinnest_lowest_layer_m=None if last is None else last.lowest_layer_m,
            largest_ratio=None if last is None else last.ratio,
            lid_m=None if last is None else last.lid_m,
            interfaces_m=() if last is None else self._interfaces(last),
            lost=first,
            never_bites=last is not None and first is None,
            verdict=self._verdict(draft, last, first),
            curve=draft.curve,
            crossings=extras.crossings,
            layer_costs=_if_found(extras.layer_costs),
            mended=_if_found(extras.mended),
        )

    def _interfaces(self, point: StretchPoint) -> tuple[float, ...]:
        at = point.lid_m if self.family.by_lid else point.lowest_layer_m
        return tuple(float(z) for z in self.family.at(at))

    def _verdict(self, draft: Draft, last: StretchPoint | None, first: StretchPoint | None) -> str:
        target_s, reason = draft.target
        if target_s is None:
            return f"there is no target: no step can be advised for the user's own set ({reason})"
        longest = max(draft.curve, key=_reach)
        told = verdict_of(target_s, last, first, longest, by_lid=self.family.by_lid, air=self.air)
        return told + self._asides(draft, target_s)

    def _asides(self, draft: Draft, target_s: float) -> str:
        """What else is true of the curve: the user's own set fails, or it recovers further on."""
        run, aside = draft.run, ""
        if run is None:
            return aside
        own = next(i for i, point in enumerate(draft.curve) if point.own)
        if not carries(draft.curve[own], target_s):
            aside += "; the user's own set does not carry it"
        if any(carries(point, target_s) for point in draft.curve[run[1] + 2 :]):
            aside += "; some sets that are stretched further carry it again, not recommended"
        return aside


def _reach(point: StretchPoint) -> float:
    return inf if point.unbounded else point.stable_step_s or 0.0


def _if_found(one: Found | CalculationError | None) -> Found | None:
    return None if isinstance(one, CalculationError) else one
