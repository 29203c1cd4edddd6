"""One level set of a family, and what lies between two of them: work that is shared out."""

import pickle
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import lru_cache
from math import exp, log
from typing import Final

import numpy as np

from levelstride.column.column import Column
from levelstride.column.variants import with_levels
from levelstride.errors import CalculationError
from levelstride.results.dataset import Limit
from levelstride.results.stretch_wording import binding_words
from levelstride.results.stretching import Binding, StretchPoint
from levelstride.schemes.scheme import TimeScheme
from levelstride.splitting.splitting import Splitting, resolve
from levelstride.stability.bites import anatomy, critical_state
from levelstride.stability.blas import on_one_thread
from levelstride.stability.courant import CourantLimit
from levelstride.stability.nearby import Nearby
from levelstride.stability.step_limit import Bracket
from levelstride.stability.tolerance import Tolerance
from levelstride.stability.verdict import ColumnVerdict, StableStep
from levelstride.studies.advised_step import Choice, choose_step
from levelstride.studies.level_families import Family
from levelstride.studies.methods import tableau_of
from levelstride.studies.stretched_levels import largest_ratio
from levelstride.studies.work_item import StepChecker

SURPRISE: Final = (1.5, 1.2)
"""Factor from the expected step beyond which it is looked for in full, by one member and by two."""

EVEN: Final = 1.02
"""The same where another wave binds than at the members before."""

EVERY: Final = 2
"""Of so many sampled waves one is asked about a member that is followed, the others by turns."""

AGREES: Final = 0.005
"""Difference of ln(step) up to which two searches agree."""

FAR_APART: Final = 1e-6
"""Difference of ln(coordinate) from which two members tell a slope."""


@dataclass(frozen=True, slots=True)
class StretchItem:
    """A family with a tableau and a splitting, as plain data.

    Parameters
    ----------
    column : bytes
        The column, pickled; each process unpacks it once.
    keep : str
        What the family keeps.
    lowest : int
        How many of the lowest layers it keeps or makes anew.
    tableau : str
        Name.
    split : str or mapping
        Name, or term to treatment.
    efolding_s : float
        Tolerated e-folding time [s].
    """

    column: bytes
    keep: str
    lowest: int
    tableau: str
    split: str | Mapping[str, str]
    efolding_s: float


@dataclass(frozen=True, slots=True)
class PointItem:
    """One member, and whether a step is to be advised for it besides."""

    of: StretchItem
    coordinate: float
    advise: bool = False


@dataclass(frozen=True, slots=True)
class RunItem:
    """Members that follow each other along the family, from the one next to a known member on.

    Parameters
    ----------
    of : StretchItem
    coordinates : tuple of float
        The members, in order [m].
    near : StretchPoint or None
        The known member; without it the first one is searched in full.
    """

    of: StretchItem
    coordinates: tuple[float, ...]
    near: StretchPoint | None = None


@dataclass(frozen=True, slots=True)
class Measured:
    """A member, and the step advised for it if one was asked for."""

    point: StretchPoint
    choice: Choice | None = None


class Members:
    """Level sets of a family under one tableau and splitting.

    Parameters
    ----------
    item : StretchItem
        What to look at.
    """

    def __init__(self, item: StretchItem) -> None:
        self.column = unpacked(item.column)
        self.family = Family(self.column.levels.interfaces_m, item.keep, item.lowest)
        self.splitting: Splitting = resolve(item.split)
        self.tableau: TimeScheme = tableau_of(self.column, item.tableau)
        self.tolerance = Tolerance(item.efolding_s, self.column.advice.transient_limit)

    def coordinate(self, point: StretchPoint) -> float:
        """Find the place of a point in the family [m]."""
        return point.lid_m if self.family.by_lid else point.lowest_layer_m

    def at(self, coordinate: float, *near: StretchPoint, turn: int = 0) -> StretchPoint:
        """Search the stable step of a member.

        Parameters
        ----------
        coordinate : float
            Its place in the family [m].
        *near : StretchPoint
            Members on the way to it, the nearest last: its limit is looked for where theirs lead
            to, and in full if it is not there. Without any it is looked for in full.
        turn : int
            Which of the sampled waves are asked about it, by turns.
        """
        column = with_levels(self.column, self.family.at(coordinate))
        faces = column.levels.interfaces_m
        found, whole = self._search(column, coordinate, near, turn)
        return StretchPoint(
            lowest_layer_m=float(faces[1]),
            ratio=largest_ratio(faces),
            stable_step_s=None if found is None else found.step_s,
            unbounded=found is not None and found.step_s is None,
            layers=column.levels.nlev,
            lid_m=column.levels.top_m,
            own=coordinate == self.family.own,
            binds=None if found is None else binding(column, found, self.tolerance),
            whole_search=whole,
        )

    def _search(
        self, column: Column, coordinate: float, near: Sequence[StretchPoint], turn: int
    ) -> tuple[StableStep | None, bool]:
        """Find the stable step, and tell whether all was searched for it."""
        verdict = ColumnVerdict(column, self.splitting, self.tableau)
        expected_s = self._expected_s(coordinate, near) if verdict.marches else None
        try:
            if expected_s is not None:
                waves = dict.fromkeys(wave for point in near for wave in self._wave(point))
                nearby = Nearby(expected_s, tuple(waves), EVERY, turn)
                found = verdict.stable_step(self.tolerance, refine=False, near=nearby)
                taken_over = found.waves_bind and _wave_of(column, found) not in waves
                even = EVEN if taken_over else SURPRISE[min(len(near), 2) - 1]
                if found.step_s and expected_s / even < found.step_s < expected_s * even:
                    return found, False
                verdict = ColumnVerdict(column, self.splitting, self.tableau)
            return verdict.stable_step(self.tolerance), True
        except CalculationError:
            return None, True

    def _expected_s(self, coordinate: float, near: Sequence[StretchPoint]) -> float | None:
        """Go on from the two nearest members as a power of the coordinate."""
        steps = [point.stable_step_s for point in near[-2:]]
        if not steps or None in steps:
            return None
        places = [log(self.coordinate(point)) for point in near[-2:]]
        logs = [log(step) for step in steps if step is not None]
        if len(logs) == 1 or abs(places[1] - places[0]) < FAR_APART:
            return exp(logs[-1])
        power = (logs[1] - logs[0]) / (places[1] - places[0])
        return exp(logs[1] + power * (log(coordinate) - places[1]))

    def _wave(self, point: StretchPoint) -> list[tuple[int, float]]:
        """Air state and wavenumber that bind a member, if a wave does."""
        if point.binds is None or point.binds.criterion == "courant":
            return []
        names = [air.name for air in self.column.airs]
        return [(names.index(point.binds.air), point.binds.wavenumber_per_m)]

    def advised(self, own: StretchPoint) -> Choice:
        """Choose the step that an advice names for the user's own set with this stable step."""
        asked = self.column.advice
        checker = StepChecker((self.column,), self.splitting, self.tableau)
        limit = Limit(
            tableau=self.tableau.name,
            split=self.splitting.name,
            stable_step_s=own.stable_step_s,
            unbounded=own.unbounded,
            scanned_to_s=ColumnVerdict(self.column, self.splitting, self.tableau).largest_s,
            criterion="none" if own.binds is None else binding_words(own.binds),
        )
        return choose_step(
            limit, safety=asked.safety, intervals_s=asked.divides_s, check=checker.examine
        )


@lru_cache(maxsize=4)
def unpacked(packed: bytes) -> Column:
    """Unpack a column, the same object each time."""
    column: Column = pickle.loads(packed)
    return column


@on_one_thread
def measure(item: PointItem) -> Measured:
    """Search one member."""
    members = Members(item.of)
    point = members.at(item.coordinate)
    return Measured(point, members.advised(point) if item.advise else None)


@on_one_thread
def follow(item: RunItem) -> list[Measured]:
    """Search members one after the other, each where those before it lead to."""
    members, near = Members(item.of), [item.near] if item.near is not None else []
    found: list[StretchPoint] = []
    for coordinate in item.coordinates:
        point = members.at(coordinate, *near, turn=len(found) % EVERY)
        if near and point.whole_search:
            _look_back(members, found)
        found.append(point)
        near = [*near[:1], *found][-2:]
    return [Measured(point) for point in found]


def _look_back(members: Members, found: list[StretchPoint]) -> None:
    """Search members in full, back to one where following and searching agree.

    What surprised at the next one may bind them too and have been passed over.
    """
    for k in reversed(range(len(found))):
        followed = found[k]
        if followed.whole_search:
            return
        found[k] = members.at(members.coordinate(followed))
        searched_s, followed_s = found[k].stable_step_s, followed.stable_step_s
        if searched_s and followed_s and abs(log(searched_s / followed_s)) < AGREES:
            return


def _wave_of(column: Column, found: StableStep) -> tuple[int, float] | None:
    if found.bracket is None:
        return None
    problem = found.bracket.problem
    return [air.name for air in column.airs].index(problem.air.name), problem.kappa


def carries(point: StretchPoint, target_s: float) -> bool:
    """Whether a member carries a step."""
    return point.unbounded or (point.stable_step_s is not None and point.stable_step_s >= target_s)


def binding(column: Column, found: StableStep, tolerance: Tolerance) -> Binding | None:
    """Say in short what binds a stable step.

    Parameters
    ----------
    column : Column
    found : StableStep
    tolerance : Tolerance

    Returns
    -------
    Binding or None
        None if nothing does.
    """
    if found.waves_bind and found.bracket is not None:
        return _of_wave(column, found.bracket, tolerance)
    if found.courant_binds and found.courant is not None:
        return _of_row(column, found.courant, found.courant_air)
    return None


def _of_wave(column: Column, bracket: Bracket, tolerance: Tolerance) -> Binding:
    problem, faces = bracket.problem, column.levels.interfaces_m
    grows = problem.growth(bracket.high) > problem.rate(tolerance)
    where = anatomy(problem, critical_state(problem, bracket.low, tolerance).basis)
    return Binding(
        criterion="spectrum" if grows else "transient",
        air=problem.air.name,
        kind=max(where.kind_share, key=lambda kind: where.kind_share[kind]),
        wavenumber_per_m=problem.kappa,
        wavelength_m=2 * np.pi / problem.kappa,
        layer_lowest=where.layer_lowest,
        layer_highest=where.layer_highest,
        bottom_m=float(faces[where.layer_lowest]),
        top_m=float(faces[where.layer_highest + 1]),
    )


def _of_row(column: Column, courant: CourantLimit, air: str) -> Binding:
    faces = column.levels.interfaces_m
    return Binding(
        criterion="courant",
        air=air,
        kind=courant.kind,
        wavenumber_per_m=courant.kappa,
        wavelength_m=2 * np.pi / courant.kappa if courant.kappa > 0 else None,
        layer_lowest=courant.layer,
        layer_highest=courant.layer,
        bottom_m=float(faces[courant.layer]),
        top_m=float(faces[courant.layer + 1]),
    )
