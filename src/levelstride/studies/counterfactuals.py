"""What if: the stable step with explicit terms implicit or absent, and of every air by itself."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace
from math import log

import numpy as np

from levelstride.column.column import Column
from levelstride.errors import CalculationError
from levelstride.operator.terms import CATALOGUE
from levelstride.results.biting import Change, Counterfactual, StepOfAir
from levelstride.results.cause import cause
from levelstride.results.dataset import Limit
from levelstride.schemes.scheme import TimeScheme
from levelstride.splitting.splitting import Splitting
from levelstride.stability.courant import rows_hold
from levelstride.stability.march_bounds import DOUBTFUL, SLOW_STRIDE
from levelstride.stability.nearby import Nearby
from levelstride.stability.spectrum import sampled_wavenumbers
from levelstride.stability.tolerance import Tolerance
from levelstride.stability.verdict import LONGEST_STEP_S, ColumnVerdict, StableStep
from levelstride.stability.wave_problem import wave_terms
from levelstride.studies.holding import Waves
from levelstride.studies.what_bites import binding_air

REFERENCE = "reference-state"
"""Stands for a term: what the implicit terms on the air have beyond those on the reference."""

FAR = 20.0
"""Multiple of the stable step up to which others are sought: beyond it nobody wants to know."""

BEYOND = 1.002
"""Multiple of the stable step at which it is lost for certain, the bisection being to 0.1 %."""

SHARES = (1.0, 0.9, 0.75, 0.5, 0.25)
"""Shares of the stable step at which every wave is looked at where nothing is gained."""

AHEAD = 1.5
"""A longer step is sought near this multiple of one that is kept: looks begin at the latter."""

SEEN = 1e-3
"""Growth in one step that no march overlooks."""

Terms = tuple[str, ...]


@dataclass(frozen=True, slots=True)
class AsItIs:
    """What is known of the stable step as things are.

    Parameters
    ----------
    step_s : float or None
        Stable step [s]; None if nothing bites.
    kappa : float or None
        Wavenumber of the wave that binds [1/m]; None if none does.
    air : str
        Air state that binds.
    """

    step_s: float | None
    kappa: float | None
    air: str

    @property
    def far_s(self) -> float:
        """Longest step of interest [s]."""
        if self.step_s is None:
            return LONGEST_STEP_S
        return min(LONGEST_STEP_S, FAR * self.step_s)


def ask_what_if(
    column: Column, found: Limit, splitting: Splitting, tableau: TimeScheme, tolerance: Tolerance
) -> Limit:
    """Add to a limit its counterfactuals, the step of every air state, and the cause they show.

    Parameters
    ----------
    column : Column
        The column with the slope gradient the limit was found for.
    found : Limit
        The limit.
    splitting : Splitting
    tableau : TimeScheme
    tolerance : Tolerance

    Returns
    -------
    Limit
        The same, completed.
    """
    if found.stable_step_s is None and not found.unbounded:
        return found
    kappa = None if found.bites is None else found.bites.wavenumber_per_m or None
    known = AsItIs(found.stable_step_s, kappa, found.air)
    completed = replace(
        found,
        counterfactuals=tuple(_counterfactuals(column, splitting, tableau, tolerance, known)),
        stable_step_by_air=tuple(_steps_by_air(column, splitting, tableau, tolerance, known)),
    )
    return replace(completed, cause=cause(completed))


def counterfactuals(
    column: Column,
    splitting: Splitting,
    tableau: TimeScheme,
    tolerance: Tolerance,
    found: StableStep,
) -> tuple[Counterfactual, ...]:
    """Search the stable step with every explicit term changed in turn.

    Each term that is explicit, in the stages or once per step, and not zero on this column is made
    implicit and left out of the equations, by itself and together with its partner in the energy
    if that is explicit too. An explicit method has no implicit part, so there terms are only left
    out. On a reference state, the reference is taken away as well: the implicit terms are then
    built on the air itself.

    Parameters
    ----------
    column : Column
    splitting : Splitting
    tableau : TimeScheme
    tolerance : Tolerance
    found : StableStep
        The stable step as things are.

    Returns
    -------
    tuple of Counterfactual
        In the order of the catalogue, partners together after each of them; empty if nothing
        bites.
    """
    kappa = None if found.bracket is None else found.bracket.problem.kappa
    known = AsItIs(found.step_s, kappa, binding_air(found))
    return tuple(_counterfactuals(column, splitting, tableau, tolerance, known))


def _counterfactuals(
    column: Column, splitting: Splitting, tableau: TimeScheme, tolerance: Tolerance, known: AsItIs
) -> Iterator[Counterfactual]:
    if known.step_s is None:
        return
    if tableau.kind == "explicit":
        splitting = splitting.without_implicit()
    for terms, change in _changes(column, splitting, tableau):
        changed, treated = _changed(column, splitting, terms, change)
        step, unbounded = _step(changed, treated, tableau, tolerance, known)
        yield Counterfactual(
            terms=terms,
            change=change,
            stable_step_s=step,
            unbounded=unbounded,
            gain=None if step is None else step / known.step_s,
            scanned_to_s=known.far_s,
        )


def _steps_by_air(
    column: Column, splitting: Splitting, tableau: TimeScheme, tolerance: Tolerance, known: AsItIs
) -> Iterator[StepOfAir]:
    if len(column.airs) == 1:
        return
    for air in column.airs:
        step, unbounded = known.step_s, known.step_s is None
        if air.name != known.air and not unbounded:
            alone = replace(column, airs=(air,))
            step, unbounded = _step(alone, splitting, tableau, tolerance, known)
        yield StepOfAir(
            air=air.name, stable_step_s=step, unbounded=unbounded, scanned_to_s=known.far_s
        )


def explicit_groups(column: Column, splitting: Splitting) -> list[Terms]:
    """Explicit terms that act on this column, partners in one group.

    Parameters
    ----------
    column : Column
    splitting : Splitting

    Returns
    -------
    list of tuple of str
        In the order of the catalogue.
    """
    acting = [
        term
        for term in CATALOGUE
        if splitting.treatment[term] in ("explicit", "after-step") and _acts(column, term)
    ]
    groups: list[Terms] = []
    for term in acting:
        partner = CATALOGUE[term].partner
        if partner is None or partner == term or partner not in acting:
            groups.append((term,))
        elif acting.index(partner) > acting.index(term):
            groups.append((term, partner))
    return groups


def _changes(
    column: Column, splitting: Splitting, tableau: TimeScheme
) -> Iterator[tuple[Terms, Change]]:
    changes: tuple[Change, ...] = ("implicit", "absent")
    if tableau.kind == "explicit":
        changes = ("absent",)
    for group in explicit_groups(column, splitting):
        singles = [(term,) for term in group] if len(group) > 1 else []
        for terms in (*singles, group):
            for change in changes:
                yield terms, change
    if column.reference is not None and splitting.implicit:
        yield (REFERENCE,), "absent"


def _acts(column: Column, term: str) -> bool:
    return any(
        not wave_terms(column, air, float(kappa)).terms[term].is_zero
        for air in column.airs
        for kappa in sampled_wavenumbers(column.horizontal)
    )


def _changed(
    column: Column, splitting: Splitting, terms: Terms, change: Change
) -> tuple[Column, Splitting]:
    if terms == (REFERENCE,):
        return replace(column, reference=None), splitting
    if change == "absent":
        return replace(column, left_out=column.left_out | set(terms)), splitting
    for term in terms:
        splitting = splitting.with_treatment(term, "implicit")
    return column, splitting


def _step(
    column: Column,
    splitting: Splitting,
    tableau: TimeScheme,
    tolerance: Tolerance,
    known: AsItIs,
) -> tuple[float | None, bool]:
    """Stable step, and whether nothing bites; no step at all if none is stable.

    The waves are those of the sample and the one that binds as things are, so that a change that
    does not matter leaves the step as it is.
    """
    verdict = ColumnVerdict(column, splitting, tableau, known.far_s)
    if known.kappa is not None:
        extra = known.kappa
        verdict.search.kappas = [sorted({*kappas, extra}) for kappas in verdict.search.kappas]
    asked = _Asked(verdict, tolerance)
    kept_s = 0.0
    if known.step_s is not None:
        lost_beyond = asked.loses(BEYOND * known.step_s, known.kappa)
        if (lost_beyond or verdict.marches) and asked.keeps(known.step_s):
            if lost_beyond:
                return known.step_s, False
            kept_s = known.step_s
    try:
        step = asked.stable_step(kept_s)
    except CalculationError:
        return None, False
    return step, step is None


class _Asked:
    """A changed column that is asked about single steps."""

    def __init__(self, verdict: ColumnVerdict, tolerance: Tolerance) -> None:
        self._verdict, self._tolerance = verdict, tolerance
        self._waves = Waves(verdict, tolerance)

    def loses(self, step_s: float, kappa: float | None) -> bool:
        """Whether a step is lost at one wave or in a frozen row."""
        airs = range(len(self._verdict.column.airs)) if kappa is not None else ()
        problems = [self._verdict.problem(air, kappa or 0.0) for air in airs]
        if self._waves.growing(problems, step_s) is not None or not self._rows_hold(step_s):
            return True
        return not all(self._waves.surely_stable(problem, step_s) for problem in problems)

    def keeps(self, step_s: float) -> bool:
        """Whether a step is kept at every wave and in every frozen row, and shorter ones too."""
        if not self._rows_hold(step_s):
            return False
        problems = self._verdict.search.problems()
        return all(self._waves.growing(problems, share * step_s) is None for share in SHARES)

    def stable_step(self, kept_s: float) -> float | None:
        """Search from a step on that is kept, 0 if none is known; None if nothing bites.

        Where marching decides, shorter steps are not looked at again, unless frozen layers grow
        slowly at the step found or below it, which a march does not see.
        """
        if kept_s > 0.0 and self._verdict.marches:
            near = Nearby(AHEAD * kept_s)
            found = self._verdict.stable_step(self._tolerance, refine=False, near=near).step_s
            if not self._may_grow_slowly(kept_s, found or self._verdict.largest_s):
                return found
        return self._verdict.stable_step(self._tolerance, refine=False, known_s=kept_s).step_s

    def _may_grow_slowly(self, kept_s: float, found_s: float) -> bool:
        """Whether frozen layers grow more than is tolerated, and less than a march sees."""
        looks = 1 + max(0, int(log(found_s / kept_s) / log(SLOW_STRIDE)))
        steps = np.array([found_s / SLOW_STRIDE**i for i in range(looks)])
        for problem in self._verdict.search.problems():
            growth = problem.local_screen.growth(steps)
            seen = growth * steps > SEEN
            if np.any(~seen & (growth > DOUBTFUL * problem.rate(self._tolerance))):
                return True
        return False

    def _rows_hold(self, step_s: float) -> bool:
        verdict, rate = self._verdict, self._tolerance.rate
        return all(
            rows_hold(verdict.column, air, verdict.splitting, verdict.tableau, rate, step_s)
            for air in verdict.column.airs
        )
