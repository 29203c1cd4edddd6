"""All criteria together: the stable step of one splitting and tableau on a whole column."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace

from levelstride.column.column import Column
from levelstride.errors import CalculationError
from levelstride.operator.setting import layout_of
from levelstride.schemes.scheme import TimeScheme
from levelstride.splitting.splitting import Splitting
from levelstride.stability.certificate import Certificate, Keeps, settle
from levelstride.stability.courant import CourantLimit, courant_limit
from levelstride.stability.extremes import is_skew, largest_modulus, spectral_norm
from levelstride.stability.march_bounds import CERTAIN_UNKNOWNS
from levelstride.stability.march_search import MarchSearch
from levelstride.stability.nearby import Nearby
from levelstride.stability.own_growth import ROUND_OFF
from levelstride.stability.spectrum import sampled_wavenumbers
from levelstride.stability.step_limit import SCAN_RATIO, Bracket, StepSearch, Watch, silent
from levelstride.stability.strict import strict_step
from levelstride.stability.tolerance import STANDARD_EFOLDINGS_S, Tolerance
from levelstride.stability.wave_problem import FEW_UNKNOWNS, WaveProblem
from levelstride.tableaux.tableau import Tableau

LONGEST_STEP_S = 1.0e4
"""Step up to which is scanned [s]; longer ones are of no use to a model of the weather."""

SAME = 1.001
"""Limits within this factor bind together: the width of the bisection."""

GROWTH_SHARE = 1e-3
"""Own growth below this share of the strictest tolerated growth is round-off."""

WINDOW_REACH = 4.0
"""How far beyond the limit windows of stability are looked for, as a factor."""


@dataclass(frozen=True, eq=False)
class StableStep:
    """Longest stable step for one tolerance.

    Attributes
    ----------
    step_s : float or None
        None if nothing bites [s].
    bracket : Bracket or None
        Spectrum and transient criterion, None if these do not bite.
    courant : CourantLimit or None
        Courant criterion, None if it does not bite.
    courant_air : str
        Air state of the Courant limit.
    """

    step_s: float | None
    bracket: Bracket | None
    courant: CourantLimit | None
    courant_air: str = ""

    @property
    def courant_binds(self) -> bool:
        """Whether the Courant criterion crosses within the bisection of the limit."""
        return (
            self.courant is not None
            and self.step_s is not None
            and self.courant.step_s <= SAME * self.step_s
        )

    @property
    def waves_bind(self) -> bool:
        """Whether spectrum or transient criterion cross within the bisection of the limit."""
        return (
            self.bracket is not None
            and self.step_s is not None
            and self.bracket.low <= SAME * self.step_s
        )


class ColumnVerdict:
    """Searches over one column for one splitting and tableau; what is learnt serves all of them.

    Parameters
    ----------
    column : Column
    splitting : Splitting
    tableau : TimeScheme
    largest_s : float
        Step up to which is scanned [s].
    """

    def __init__(
        self,
        column: Column,
        splitting: Splitting,
        tableau: TimeScheme,
        largest_s: float = LONGEST_STEP_S,
    ) -> None:
        if tableau.kind == "explicit":
            splitting = splitting.without_implicit()
        self.column, self.splitting, self.tableau = column, splitting, tableau
        self.largest_s = largest_s
        # full matrices are asked at every step looked at only where unknowns are few; those of
        # programs cost several times as much
        few = FEW_UNKNOWNS if isinstance(tableau, Tableau) else FEW_UNKNOWNS // 2
        self.marches = layout_of(column).size > few
        self._problems: dict[tuple[int, float], WaveProblem] = {}
        kappas = [float(kappa) for kappa in sampled_wavenumbers(column.horizontal)]
        self.search = StepSearch(self.problem, len(column.airs), kappas, largest_s)

    def problem(self, air: int, kappa: float) -> WaveProblem:
        """Return the problem of one air state and wave, always the same object."""
        key = (air, kappa)
        if key not in self._problems:
            self._problems[key] = WaveProblem(
                self.column, self.column.airs[air], self.splitting, self.tableau, kappa
            )
        return self._problems[key]

    def stable_step(
        self,
        tolerance: Tolerance,
        *,
        refine: bool = True,
        known_s: float = 0.0,
        near: Nearby | None = None,
        watch: Watch = silent,
    ) -> StableStep:
        """Longest step that keeps all three criteria.

        Parameters
        ----------
        tolerance : Tolerance
        refine : bool
            Whether to add wavenumbers around the worst ones.
        known_s : float
            A step up to which all is known to be stable, from a stricter tolerance [s].
        near : Nearby or None
            Where the limit should lie, from a column that hardly differs: a shorter search, to be
            borne out by a whole one where it is an answer.
        watch : callable
            Told what is being looked at.

        Raises
        ------
        CalculationError
            If no step does, however short.
        """
        courant, courant_air = self._courant(tolerance)
        largest = self.largest_s
        if courant is not None:
            largest = min(largest, SAME * courant.step_s)
        self.search.largest_s = largest
        if self.marches:
            marching = MarchSearch(self.search, tolerance, near=near, watch=watch)
            bracket = marching.run(refine=refine, known_s=known_s)
        else:
            bracket = self.search.run(
                lambda problem, dt: problem.stable(dt, tolerance), refine=refine, watch=watch
            )
        steps = [limit.step_s for limit in [courant] if limit is not None]
        steps += [found.low for found in [bracket] if found is not None]
        return StableStep(min(steps, default=None), bracket, courant, courant_air)

    def certified_step(
        self, found: StableStep, tolerance: Tolerance
    ) -> tuple[StableStep, Certificate]:
        """Ask every sampled wave about both sides of a limit; find it again where one refutes it.

        Without a wave that binds, every wave is asked about the Courant limit or the longest step.

        Parameters
        ----------
        found : StableStep
        tolerance : Tolerance

        Returns
        -------
        StableStep
            The same, or the shorter one that holds.
        Certificate
            Of that step.

        Raises
        ------
        CalculationError
            If no step holds, however short.
        """
        sampled = [float(kappa) for kappa in sampled_wavenumbers(self.column.horizontal)]
        for air, kappas in enumerate(self.search.kappas):
            self.search.kappas[air] = sorted({*kappas, *sampled})
        bracket = found.bracket if found.waves_bind else None
        low = (found.step_s or self.largest_s) if bracket is None else bracket.low
        keeps = self._keeps(tolerance)
        certificate = settle(self.search.problems(), low, tolerance, bracket, keeps)
        if certificate.refuted:
            low = certificate.low
            step = low if found.courant is None else min(low, found.courant.step_s)
            found = replace(found, step_s=step, bracket=certificate.bracket)
        return found, certificate

    @staticmethod
    def grows_by_itself(problem: WaveProblem) -> bool:
        """Whether the semi-discrete operator grows at this wave, round-off aside."""
        return problem.facts.own_growth * STANDARD_EFOLDINGS_S[0] > GROWTH_SHARE

    def strict_step(self, found: StableStep) -> float | None:
        """Longest step with no radius beyond one but for round-off; None if none or no limit.

        Parameters
        ----------
        found : StableStep
            The stable step for any tolerance.
        """
        if any(self.grows_by_itself(problem) for problem in self.search.problems()):
            return None
        self.search.largest_s = self.largest_s
        try:
            if layout_of(self.column).size > CERTAIN_UNKNOWNS:
                return strict_step(self.search, found.bracket)
            bracket = self.search.run(lambda problem, dt: problem.strict(dt), refine=False)
        except CalculationError:
            return None
        return bracket.low if bracket else None

    def windows(self, limit: StableStep, tolerance: Tolerance) -> list[tuple[float, float]]:
        """Runs of steps beyond the first loss at which every wave is stable again."""
        if limit.bracket is None or limit.step_s is None or limit.courant_binds:
            return []
        most = min(WINDOW_REACH * limit.step_s, self.largest_s)
        if limit.courant is not None:
            most = min(most, limit.courant.step_s)
        found: list[tuple[float, float]] = []
        keeps = self._keeper(limit.bracket.problem, tolerance)
        dt, last = limit.bracket.high * SCAN_RATIO, 0.0
        while dt <= most:
            if keeps(dt):
                start = found.pop()[0] if found and last == found[-1][1] else dt
                found.append((start, dt))
                last = dt
            else:
                last = 0.0
            dt *= SCAN_RATIO
        return found

    def _keeper(self, worst: WaveProblem, tolerance: Tolerance) -> Callable[[float], bool]:
        """Return what tells whether a step keeps every wave stable, the worst asked first."""
        others = sorted(self.search.problems(), key=lambda problem: problem is not worst)
        keeps = self._keeps(tolerance)
        return lambda dt: keeps([worst], dt) and keeps(others[1:], dt)

    def _keeps(self, tolerance: Tolerance) -> Keeps:
        """Return what tells whether a step keeps some waves stable."""
        if self.marches:
            return MarchSearch(self.search, tolerance).keeps
        return lambda problems, dt: all(problem.stable(dt, tolerance) for problem in problems)

    def explicit_rate(self) -> float:
        """Largest |eigenvalue| of the partner pairs with an explicit member [1/s]."""
        return max(
            spectral_norm(pairs) if is_skew(pairs, ROUND_OFF) else largest_modulus(pairs)
            for pairs in (problem.explicit_pairs() for problem in self.search.problems())
        )

    def _courant(self, tolerance: Tolerance) -> tuple[CourantLimit | None, str]:
        best: tuple[CourantLimit | None, str] = (None, "")
        for air in self.column.airs:
            limit = courant_limit(
                self.column, air, self.splitting, self.tableau, tolerance.rate, self.largest_s
            )
            if limit is not None and (best[0] is None or limit.step_s < best[0].step_s):
                best = (limit, air.name)
        return best
