"""Does one step hold on a column? Asked of many columns that differ a little.

The full search proves that a step holds, and costs hundreds of looks. Most columns that a study
asks about are refused by a wave that refused another one before, and need one look.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from functools import cached_property
from math import pi

from levelstride.column.column import Column
from levelstride.column.knobs import lowest_slope_gradients
from levelstride.errors import CalculationError
from levelstride.splitting.splitting import Splitting
from levelstride.stability.courant import rows_hold
from levelstride.stability.spectrum import sampled_wavenumbers
from levelstride.stability.step_limit import StepSearch
from levelstride.stability.tolerance import Tolerance
from levelstride.stability.verdict import SAME, ColumnVerdict, StableStep
from levelstride.tableaux.tableau import Tableau

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


class Trial:
    """A column under examination: with a slope, both treatments of its lowest gradient.

    Parameters
    ----------
    column : Column
    splitting : Splitting
    tableau : Tableau
    """

    def __init__(self, column: Column, splitting: Splitting, tableau: Tableau) -> None:
        self._splitting, self._tableau = splitting, tableau
        self.columns = lowest_slope_gradients(column)

    @cached_property
    def verdicts(self) -> list[ColumnVerdict]:
        """One for each treatment; their problems are made when they are first asked for."""
        return [ColumnVerdict(c, self._splitting, self._tableau) for c in self.columns]

    def agrees(self, look: Look, step_s: float, tolerance: Tolerance) -> bool:
        """Whether a look finds nothing that grows."""
        return self.refused_at(look, step_s, tolerance) is None

    def refused_at(self, look: Look, step_s: float, tolerance: Tolerance) -> float | None:
        """Step, up to the one given, at which a look finds growth [s]; None if it finds none."""
        if look.variant >= len(self.columns):
            return None
        verdict = self.verdicts[look.variant]
        column = verdict.column
        if look.angle is None:
            air, rate = column.airs[look.air], tolerance.rate
            held = rows_hold(column, air, verdict.splitting, verdict.tableau, rate, step_s)
            return None if held else step_s
        kappa = look.angle / column.horizontal.grid_spacing_m
        if not verdict.problem(look.air, kappa).stable(step_s, tolerance):
            return step_s
        return (
            self._loss_below(look.air, kappa, step_s, tolerance, verdict) if look.shorter else None
        )

    def objection(self, look: Look, step_s: float, tolerance: Tolerance) -> Objection:
        """Say what a look breaks at a step at which it finds growth."""
        if look.angle is None:
            return Objection("courant", None)
        verdict = self.verdicts[look.variant]
        kappa = look.angle / verdict.column.horizontal.grid_spacing_m
        broken = verdict.problem(look.air, kappa).violated(step_s, tolerance)
        return Objection("+".join(broken) or "transient", 2 * pi / kappa)

    @staticmethod
    def _loss_below(
        air: int, kappa: float, step_s: float, tolerance: Tolerance, verdict: ColumnVerdict
    ) -> float | None:
        search = StepSearch(lambda _, k: verdict.problem(air, k), 1, [kappa], step_s)
        try:
            found = search.run(lambda problem, dt: problem.stable(dt, tolerance), refine=False)
        except CalculationError:
            return step_s
        return None if found is None or found.low * SAME >= step_s else found.high

    def search(self, variant: int, largest_s: float, tolerance: Tolerance) -> StableStep | None:
        """Search one treatment in full up to a step; None if no step is stable."""
        verdict = ColumnVerdict(
            self.columns[variant], self._splitting, self._tableau, largest_s=largest_s
        )
        try:
            return verdict.stable_step(tolerance)
        except CalculationError:
            return None


class StepQuestion:
    """Whether a step is stable on a column, and with it all shorter ones.

    ``holds`` is the cheap answer, about the very step and the sampled waves; ``objection`` is that
    of the full search, about all shorter steps and the waves between.

    Parameters
    ----------
    splitting : Splitting
    tableau : Tableau
    tolerance : Tolerance
    step_s : float
        The step [s].

    Attributes
    ----------
    worst : list of Look
        Looks that found growth on some column, the latest first.
    """

    def __init__(
        self, splitting: Splitting, tableau: Tableau, tolerance: Tolerance, step_s: float
    ) -> None:
        self.splitting, self.tableau = splitting, tableau
        self.tolerance, self.step_s = tolerance, step_s
        self.worst: list[Look] = []

    def trial(self, column: Column) -> Trial:
        """Take up a column."""
        return Trial(column, self.splitting, self.tableau)

    def refusal(self, trial: Trial) -> Look | None:
        """Ask what refused other columns before; returns the look that refuses this one."""
        for look in self.worst:
            if not trial.agrees(look, self.step_s, self.tolerance):
                return look
        return None

    def holds(self, trial: Trial, every: int = 1) -> bool:
        """Ask the frozen rows and one sampled wave in ``every``, at the very step."""
        if self.refusal(trial) is not None:
            return False
        for look in _looks(trial, every):
            if not trial.agrees(look, self.step_s, self.tolerance):
                self.worst.insert(0, look)
                return False
        return True

    def objection(self, trial: Trial) -> Objection | None:
        """Search in full, all shorter steps and the waves between; None if the step is proven.

        What objects is asked first from then on.
        """
        for variant in range(len(trial.columns))[::-1]:
            found = trial.search(variant, REACH * self.step_s, self.tolerance)
            if found is None:
                return Objection("spectrum", None)
            if found.step_s is not None and SAME * found.step_s < self.step_s:
                look = self._culprit(trial.columns[variant], variant, found)
                self.worst.insert(0, look)
                return trial.objection(look, found.step_s * SAME, self.tolerance)
        return None

    @staticmethod
    def _culprit(column: Column, variant: int, found: StableStep) -> Look:
        names = [air.name for air in column.airs]
        if found.waves_bind and found.bracket is not None:
            problem, spacing = found.bracket.problem, column.horizontal.grid_spacing_m
            air = names.index(problem.air.name)
            return Look(variant, air, problem.kappa * spacing, shorter=True)
        return Look(variant, names.index(found.courant_air), None)


def _looks(trial: Trial, every: int) -> Iterator[Look]:
    """All looks at a column at the step itself, short waves first: these refuse most often.

    Over a slope only at the last treatment of its lowest gradient, ``full``, which is the harder
    one; the full search looks at both.
    """
    variant = len(trial.columns) - 1
    column = trial.columns[variant]
    kappas = sampled_wavenumbers(column.horizontal)[::-1][::every]
    for air in range(len(column.airs)):
        yield Look(variant, air, None)
        for kappa in kappas:
            yield Look(variant, air, float(kappa) * column.horizontal.grid_spacing_m)
