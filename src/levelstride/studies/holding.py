"""Does one step hold on a column? Asked of many columns that differ a little.

The full search proves that a step holds, and costs hundreds of looks. Most columns that a study
asks about are refused by a wave that refused another one before, and need one look. Where unknowns
are many, waves are marched side by side, and full matrices are asked what that leaves open.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property
from math import pi

from levelstride.column.column import Column
from levelstride.column.knobs import lowest_slope_gradients
from levelstride.errors import CalculationError
from levelstride.operator.setting import layout_of
from levelstride.schemes.scheme import TimeScheme
from levelstride.splitting.splitting import Splitting
from levelstride.stability.courant import rows_hold
from levelstride.stability.march import March, Seen
from levelstride.stability.march_bounds import DENSE_UNKNOWNS, LONG_MARCH, TOGETHER
from levelstride.stability.march_search import MarchSearch
from levelstride.stability.spectrum import sampled_wavenumbers
from levelstride.stability.step_limit import Bracket, StepSearch
from levelstride.stability.tolerance import Tolerance
from levelstride.stability.verdict import SAME, ColumnVerdict, StableStep
from levelstride.stability.wave_problem import WaveProblem

REACH = 1.05
"""The full search scans to this multiple of the step: beyond it nothing is asked."""


@dataclass(frozen=True, slots=True)
class Look:
    """One wave, or all frozen rows, at the step.

    Attributes
    ----------
    variant : int
        Which treatment of the lowest slope gradient.
    air : int
        Which air state.
    angle : float or None
        Wavenumber times grid spacing [rad]; None for the frozen rows.
    shorter : bool
        Whether the wave is searched over all shorter steps as well.
    """

    variant: int
    air: int
    angle: float | None
    shorter: bool = False


@dataclass(frozen=True, slots=True)
class Objection:
    """What speaks against a step.

    Attributes
    ----------
    criterion : str
        Criteria that are broken, joined by ``+``.
    wavelength_m : float or None
        Horizontal wavelength along one axis of the wave that breaks them [m].
    """

    criterion: str
    wavelength_m: float | None


class Waves:
    """Asks waves of one column about single steps.

    Parameters
    ----------
    verdict : ColumnVerdict
        Of the column.
    tolerance : Tolerance
    """

    def __init__(self, verdict: ColumnVerdict, tolerance: Tolerance) -> None:
        self._verdict, self._tolerance = verdict, tolerance
        size = layout_of(verdict.column).size
        self._judges = size <= DENSE_UNKNOWNS
        most = {} if self._judges else {"most": LONG_MARCH}
        self._march = March(tolerance, **most) if verdict.marches else None

    def growing(self, problems: Sequence[WaveProblem], dt: float) -> WaveProblem | None:
        """Find a wave that grows at a step: the fastest of those that march together.

        Parameters
        ----------
        problems : sequence of WaveProblem
        dt : float
            [s]

        Returns
        -------
        WaveProblem or None
            None if all are stable, as far as marching tells where unknowns are many.
        """
        if self._march is None:
            return next((p for p in problems if not p.stable(dt, self._tolerance)), None)
        for first in range(0, len(problems), TOGETHER):
            found = self._marched(self._march, problems[first : first + TOGETHER], dt)
            if found is not None:
                return found
        return None

    def surely_stable(self, problem: WaveProblem, dt: float) -> bool:
        """Ask full matrices about a wave, which see growth too slow for a march."""
        if self._judges:
            return problem.stable(dt, self._tolerance)
        return self.growing([problem], dt) is None

    def loss_below(self, air: int, kappa: float, step_s: float) -> Bracket | None:
        """Search the shorter steps of a wave; None if none is lost.

        Raises
        ------
        CalculationError
            If no step is stable, however short.
        """
        search = StepSearch(lambda _, k: self._verdict.problem(air, k), 1, [kappa], step_s)
        if self._verdict.marches:
            return MarchSearch(search, self._tolerance).run(refine=False)
        return search.run(lambda problem, dt: problem.stable(dt, self._tolerance), refine=False)

    def _marched(
        self, march: March, problems: Sequence[WaveProblem], dt: float
    ) -> WaveProblem | None:
        looks = march.look(problems, dt)
        told = {Seen.GROWS} if self._judges else {Seen.GROWS, Seen.UNCLEAR}
        growing = [i for i, look in enumerate(looks) if look.seen in told]
        if growing:
            return problems[max(growing, key=lambda i: looks[i].rate)]
        unclear = [i for i, look in enumerate(looks) if look.seen is Seen.UNCLEAR]
        for i in sorted(unclear, key=lambda i: -looks[i].rate):
            if not problems[i].stable(dt, self._tolerance):
                return problems[i]
        return None


class Trial:
    """A column under examination: with a slope, both treatments of its lowest gradient.

    Parameters
    ----------
    column : Column
    splitting : Splitting
    tableau : TimeScheme
    tolerance : Tolerance
    """

    def __init__(
        self, column: Column, splitting: Splitting, tableau: TimeScheme, tolerance: Tolerance
    ) -> None:
        self._splitting, self._tableau, self._tolerance = splitting, tableau, tolerance
        self.columns = lowest_slope_gradients(column)

    @cached_property
    def verdicts(self) -> list[ColumnVerdict]:
        """One for each treatment; their problems are made when they are first asked for."""
        return [ColumnVerdict(c, self._splitting, self._tableau) for c in self.columns]

    @cached_property
    def _waves(self) -> list[Waves]:
        return [Waves(verdict, self._tolerance) for verdict in self.verdicts]

    def refused_at(self, look: Look, step_s: float) -> float | None:
        """Step, up to the one given, at which a look finds growth [s]; None if it finds none."""
        if look.variant >= len(self.columns):
            return None
        if look.angle is None:
            return None if self._rows_hold(look, step_s) else step_s
        waves, problem = self._waves[look.variant], self._problem(look)
        if waves.growing([problem], step_s) is not None:
            return step_s
        return self._loss_below(look, step_s) if look.shorter else None

    def refusal(self, looks: Sequence[Look], step_s: float) -> Look | None:
        """Find a look that refuses a step, of looks at one treatment of the slope gradient.

        Frozen rows come first, and waves march together.
        """
        for look in looks:
            if look.angle is None and not self._rows_hold(look, step_s):
                return look
        of_waves = [look for look in looks if look.angle is not None]
        if not of_waves:
            return None
        problems = [self._problem(look) for look in of_waves]
        found = self._waves[of_waves[0].variant].growing(problems, step_s)
        return None if found is None else of_waves[problems.index(found)]

    def objection(self, look: Look, step_s: float) -> Objection:
        """Say what a look breaks at a step at which it finds growth."""
        if look.angle is None:
            return Objection("courant", None)
        problem = self._problem(look)
        broken = problem.violated(step_s, self._tolerance)
        return Objection("+".join(broken) or "transient", 2 * pi / problem.kappa)

    def _problem(self, look: Look) -> WaveProblem:
        assert look.angle is not None
        verdict = self.verdicts[look.variant]
        return verdict.problem(look.air, look.angle / verdict.column.horizontal.grid_spacing_m)

    def _rows_hold(self, look: Look, step_s: float) -> bool:
        verdict = self.verdicts[look.variant]
        column, rate = verdict.column, self._tolerance.rate
        air = column.airs[look.air]
        return rows_hold(column, air, verdict.splitting, verdict.tableau, rate, step_s)

    def _loss_below(self, look: Look, step_s: float) -> float | None:
        waves, problem = self._waves[look.variant], self._problem(look)
        if not waves.surely_stable(problem, step_s):
            return step_s
        try:
            found = waves.loss_below(look.air, problem.kappa, step_s)
        except CalculationError:
            return step_s
        return None if found is None or found.low * SAME >= step_s else found.high

    def search(self, variant: int, largest_s: float) -> StableStep | None:
        """Search one treatment in full up to a step; None if no step is stable."""
        verdict = ColumnVerdict(
            self.columns[variant], self._splitting, self._tableau, largest_s=largest_s
        )
        try:
            return verdict.stable_step(self._tolerance)
        except CalculationError:
            return None


class StepQuestion:
    """Whether a step is stable on a column, and with it all shorter ones.

    ``holds`` is the cheap answer, about the very step and the sampled waves; ``objection`` is that
    of the full search, about all shorter steps and the waves between.

    Parameters
    ----------
    splitting : Splitting
    tableau : TimeScheme
    tolerance : Tolerance
    step_s : float
        The step [s].

    Attributes
    ----------
    worst : list of Look
        Looks that found growth on some column, the latest first.
    """

    def __init__(
        self, splitting: Splitting, tableau: TimeScheme, tolerance: Tolerance, step_s: float
    ) -> None:
        self.splitting, self.tableau = splitting, tableau
        self.tolerance, self.step_s = tolerance, step_s
        self.worst: list[Look] = []

    def trial(self, column: Column) -> Trial:
        """Take up a column."""
        return Trial(column, self.splitting, self.tableau, self.tolerance)

    def refusal(self, trial: Trial) -> Look | None:
        """Ask what refused other columns before; returns the look that refuses this one."""
        for look in self.worst:
            if trial.refused_at(look, self.step_s) is not None:
                return look
        return None

    def holds(self, trial: Trial, every: int = 1) -> bool:
        """Ask the frozen rows and one sampled wave in ``every``, at the very step."""
        if self.refusal(trial) is not None:
            return False
        look = trial.refusal(_looks(trial, every), self.step_s)
        if look is not None:
            self.worst.insert(0, look)
        return look is None

    def objection(self, trial: Trial) -> Objection | None:
        """Search in full, all shorter steps and the waves between; None if the step is proven.

        What objects is asked first from then on.
        """
        for variant in range(len(trial.columns))[::-1]:
            found = trial.search(variant, REACH * self.step_s)
            if found is None:
                return Objection("spectrum", None)
            if found.step_s is not None and SAME * found.step_s < self.step_s:
                look = self._culprit(trial.columns[variant], variant, found)
                self.worst.insert(0, look)
                return trial.objection(look, found.step_s * SAME)
        return None

    @staticmethod
    def _culprit(column: Column, variant: int, found: StableStep) -> Look:
        names = [air.name for air in column.airs]
        if found.waves_bind and found.bracket is not None:
            problem, spacing = found.bracket.problem, column.horizontal.grid_spacing_m
            air = names.index(problem.air.name)
            return Look(variant, air, problem.kappa * spacing, shorter=True)
        return Look(variant, names.index(found.courant_air), None)


def _looks(trial: Trial, every: int) -> list[Look]:
    """All looks at a column at the step itself, short waves first: these refuse most often.

    Over a slope only at the last treatment of its lowest gradient, ``full``, which is the harder
    one; the full search looks at both.
    """
    variant = len(trial.columns) - 1
    column = trial.columns[variant]
    kappas = sampled_wavenumbers(column.horizontal)[::-1][::every]
    angles = [float(kappa) * column.horizontal.grid_spacing_m for kappa in kappas]
    return [
        Look(variant, air, angle) for air in range(len(column.airs)) for angle in (None, *angles)
    ]
