"""Moving from level set to level set until one carries a step, with as little change as may be."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from levelstride.column.column import Column
from levelstride.column.variants import with_levels
from levelstride.errors import CalculationError, InputError
from levelstride.schemes.scheme import TimeScheme
from levelstride.splitting.splitting import Splitting
from levelstride.stability.tolerance import Tolerance
from levelstride.stability.verdict import ColumnVerdict, StableStep
from levelstride.studies.least_change import Cuts, Rules, propose
from levelstride.studies.sensitivity import branches_at

Array = NDArray[np.float64]

AIM = 1.0015
"""The target is aimed at with this factor: the search brackets a step to 0.1 %."""

JUST = 1.005
"""A step up to this factor above the target is just the target."""

REACH, MOST = 1.08, 12
"""States up to this factor beyond the limit count as bounds, so many of them at most."""

FIRST_RADIUS, LARGEST_RADIUS, SMALLEST_RADIUS = 0.25, 0.7, 0.004
"""Largest change of ln thickness in one move."""

SMALLEST_MOVE = 1e-5
"""Change of ln thickness that is none."""

SETTLED = 0.01
"""Relative change of the distance below which a set that carries the target is near enough."""

STALLED = 5e-4
"""Gain of ln step that is no progress."""

MOST_STALLED = 3
"""Moves without progress after which the search ends."""

SHRINKINGS = 8
"""Halvings of the segment to the given set, at most."""


@dataclass(frozen=True, eq=False)
class LevelPoint:
    """One level set and what it carries.

    Attributes
    ----------
    x : ndarray, shape (nlev,)
        ln thickness.
    column : Column
    verdict : ColumnVerdict
    found : StableStep
    """

    x: Array
    column: Column
    verdict: ColumnVerdict
    found: StableStep

    @property
    def log_step(self) -> float:
        """ln of the stable step; inf if nothing bites."""
        return np.inf if self.found.step_s is None else float(np.log(self.found.step_s))


class Workshop:
    """Makes level sets and has them searched, counting."""

    def __init__(
        self,
        column: Column,
        splitting: Splitting,
        tableau: TimeScheme,
        tolerance: Tolerance,
        tell: Callable[[int], None],
    ) -> None:
        self.column, self.splitting, self.tableau = column, splitting, tableau
        self.tolerance, self._tell = tolerance, tell
        self.searches = 0

    def given(self) -> LevelPoint:
        """The user's own level set."""
        return self._searched(np.log(self.column.levels.thickness_m), self.column)

    def at(self, x: Array, rules: Rules) -> LevelPoint | None:
        """Search a level set; None where there is no such column or no step is stable."""
        own = self.column.levels.interfaces_m
        interfaces = np.concatenate([[0.0], np.cumsum(np.exp(x))])
        # what is kept is kept to the last digit
        if rules.lowest_kept:
            interfaces[1] = own[1]
        if rules.lid_kept:
            interfaces[-1] = own[-1]
        try:
            return self._searched(x, with_levels(self.column, interfaces))
        except (InputError, CalculationError):
            return None

    def _searched(self, x: Array, column: Column) -> LevelPoint:
        self._tell(self.searches)
        self.searches += 1
        verdict = ColumnVerdict(column, self.splitting, self.tableau)
        return LevelPoint(x, column, verdict, verdict.stable_step(self.tolerance))

    def cuts(self, point: LevelPoint) -> Cuts:
        """Linear models of what binds at a level set, or nearly does."""
        branches = branches_at(
            point.column, point.verdict, point.found, self.tolerance, REACH, MOST
        )
        if not branches:
            raise CalculationError(
                f"what binds the step at {point.found.step_s:.6g} s could not be followed beyond it"
            )
        steps = np.array([branch.lost.step_s for branch in branches])
        slopes = np.array([branch.by_thickness for branch in branches]) / steps[:, None]
        at = np.broadcast_to(point.x, slopes.shape)
        return Cuts(at, np.log(steps), slopes * np.exp(point.x))


@dataclass(frozen=True, eq=False)
class Approach:
    """What came of moving towards the target.

    Attributes
    ----------
    nearest : LevelPoint or None
        The nearest set that carries it, None if none was met.
    longest : LevelPoint
        The set with the longest step.
    """

    nearest: LevelPoint | None
    longest: LevelPoint


def approach(
    shop: Workshop,
    rules: Rules,
    start: LevelPoint,
    log_target: float,
    moves: int,
    *,
    reach_only: bool = False,
) -> Approach:
    """Move from set to set: least change under linear models of the step, within a trust radius.

    Models of earlier sets are kept beside those of the latest as long as they deny no step that
    was found, which bends the linear models where the step itself bends. With ``reach_only`` any
    set that carries the target ends the search, and so does a promise too small to get there.
    """
    walk = _Walk(start, shop.cuts(start))
    for _ in range(moves):
        x = propose(rules, walk.cuts, walk.current.x, log_target + np.log(AIM), walk.radius)
        promised = walk.cuts.lowest(x) - walk.current.log_step if x is not None else 0.0
        missing = log_target - walk.current.log_step
        if x is None or (walk.nearest is None and promised < STALLED):
            if not walk.forget():
                break
            continue
        if np.abs(x - walk.current.x).max() < SMALLEST_MOVE:
            break
        if reach_only and walk.radius >= FIRST_RADIUS and promised * moves < missing:
            break
        trial = shop.at(x, rules)
        if trial is None:
            walk.radius /= 3
        elif trial.log_step >= log_target:
            settled = walk.carried_by(trial, rules, shop)
            if settled or reach_only or trial.found.step_s is None:
                break
        else:
            walk.missed_by(trial, min(promised, missing), shop)
        if walk.stalled >= MOST_STALLED or walk.radius < SMALLEST_RADIUS:
            break
    return Approach(walk.nearest, walk.longest)


class _Walk:
    """Where an approach stands.

    Parameters
    ----------
    start : LevelPoint
    cuts : Cuts
        Models of what binds there.

    Attributes
    ----------
    current : LevelPoint
        The set moved from.
    nearest : LevelPoint or None
        The nearest set that carries the target.
    longest : LevelPoint
        The set with the longest step.
    cuts : Cuts
        The models that are believed.
    radius : float
        Largest change of ln thickness in the next move.
    stalled : int
        Moves that brought nothing.
    """

    def __init__(self, start: LevelPoint, cuts: Cuts) -> None:
        self.current = self.longest = start
        self.nearest: LevelPoint | None = None
        self.cuts = self._fresh = cuts
        self.radius, self.stalled = FIRST_RADIUS, 0

    def forget(self) -> bool:
        """Believe the models of the current set only; False if they were all there is."""
        if self.cuts is self._fresh:
            return False
        self.cuts, self.radius = self._fresh, FIRST_RADIUS
        self.stalled += 1
        return True

    def carried_by(self, trial: LevelPoint, rules: Rules, shop: Workshop) -> bool:
        """Take note of a set that carries the target; True if it settles the matter."""
        self.longest = max(self.longest, trial, key=lambda point: point.log_step)
        before = np.inf if self.nearest is None else distance(rules, self.nearest.x)
        gain = 1 - distance(rules, trial.x) / before if before else 0.0
        if gain > 0:
            self.nearest = trial
        if gain >= SETTLED and trial.found.step_s is not None:
            self._learn(trial, shop, move=True)
            return False
        return True

    def missed_by(self, trial: LevelPoint, promised: float, shop: Workshop) -> None:
        """Take note of a set that does not carry the target."""
        gained = trial.log_step - self.current.log_step
        self.longest = max(self.longest, trial, key=lambda point: point.log_step)
        better = self.nearest is None and gained > max(0.1 * promised, 0.0)
        reached = float(np.abs(trial.x - self.current.x).max())
        if better and gained > 0.6 * promised:
            self.radius = min(1.6 * self.radius, LARGEST_RADIUS)
        elif not better:
            self.radius = min(self.radius, reached) / 2
        self.stalled += abs(gained) < STALLED
        self._learn(trial, shop, move=better)

    def _learn(self, trial: LevelPoint, shop: Workshop, *, move: bool) -> None:
        fresh = shop.cuts(trial)
        self.cuts = self.cuts.allowing(trial.x, trial.log_step) + fresh
        if move:
            self.current, self._fresh = trial, fresh


def distance(rules: Rules, x: Array) -> float:
    """Root of the sum of (change of ln thickness) squared."""
    return float(np.linalg.norm(x - rules.start))


def just_carrying(
    shop: Workshop, rules: Rules, given: LevelPoint, found: LevelPoint, log_target: float
) -> LevelPoint:
    """Go back towards the given set as long as the target is carried.

    Thicknesses are mixed linearly, which keeps lid, lowest layer and bounds on ratios.
    """
    least, most = 0.0, 1.0
    below, best = given.log_step, found
    for _ in range(SHRINKINGS):
        if best.log_step <= log_target + np.log(JUST):
            break
        share = 0.5
        if np.isfinite(best.log_step):
            aim = log_target + 0.5 * np.log(JUST)
            share = float(np.clip((aim - below) / (best.log_step - below), 0.1, 0.9))
        middle = least + share * (most - least)
        mixed = (1 - middle) * np.exp(given.x) + middle * np.exp(found.x)
        trial = shop.at(np.log(mixed), rules)
        if trial is not None and trial.log_step >= log_target:
            most, best = middle, trial
        else:
            least, below = middle, given.log_step if trial is None else trial.log_step
    return best
