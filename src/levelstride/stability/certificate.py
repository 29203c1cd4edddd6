"""A limit asked again at every sampled wave, on both sides, by other means than found it.

Up to ``DENSE_UNKNOWNS`` dense eigenvalues tell the growth of every wave below and above the limit,
and exact power norms the transient criterion below it. That decides both, but for what happens at
steps and waves in between. Beyond that size a long march of every wave below the limit is the
judge: it refutes where states grow, and its silence is strong evidence and no proof. Eigenvalues by
shift-and-invert add growths that are there but for their residual, at the eigenvalues that marches
bring out and around the one that binds; others that grow could hide from them.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace

import numpy as np

from levelstride.errors import CalculationError
from levelstride.stability.by_growth import first_failure
from levelstride.stability.march import EFOLDINGS, GLANCE, Look, March, Seen
from levelstride.stability.marched_growth import Suspect, fastest_growth, suspect_of
from levelstride.stability.powers import peak_exceeds
from levelstride.stability.step_limit import (
    BISECTION,
    SCAN_RATIO,
    SMALLEST_FIRST_STEP,
    Bracket,
    no_step,
)
from levelstride.stability.tolerance import Tolerance
from levelstride.stability.wave_problem import WaveProblem, lowest_log_limit
from levelstride.tableaux.tableau import Tableau

DENSE_UNKNOWNS = 1300
"""Up to so many unknowns full matrices certify; dense eigenvalues take some ten seconds there."""

MOST_MARCHED = 200_000
"""Steps of a certifying march at most; where it needs more it is a glance."""

TOGETHER = 16
"""Waves that march together."""

FILL = 2.0
"""How far below a limit found again, as a factor, every wave is looked at closely."""

RISES = 1.2
"""Share of the tolerated rate beyond which a march that is not over refutes: ripples aside."""

Keeps = Callable[[Sequence[WaveProblem], float], bool]
"""Whether a step keeps waves stable."""

DENSE = "dense eigenvalues"
NORMS = "power norms, where dense eigenvalues scatter"
SOLVED = "shift-and-invert"


@dataclass(frozen=True, eq=False)
class CertifiedWave:
    """One wave on both sides of a limit.

    Attributes
    ----------
    problem : WaveProblem
    growth_low : float
        Growth rate at the stable step [1/s].
    growth_high : float or None
        At the unstable step [1/s]; None if there is none, inf where a stage has no solution.
    tolerated : float
        Tolerated growth rate [1/s].
    method : str
        How growth was found; with the larger residual where it is by shift-and-invert.
    broken : tuple of str
        Criteria that the stable step breaks.
    """

    problem: WaveProblem
    growth_low: float
    growth_high: float | None
    tolerated: float
    method: str
    broken: tuple[str, ...]


@dataclass(frozen=True, eq=False)
class Refuted:
    """A step that was not stable after all.

    Attributes
    ----------
    step_s : float
        [s]
    problem : WaveProblem
        The wave that breaks a criterion there.
    broken : tuple of str
        Which.
    """

    step_s: float
    problem: WaveProblem
    broken: tuple[str, ...]


@dataclass(frozen=True, eq=False)
class Certificate:
    """All sampled waves on both sides of a limit.

    Attributes
    ----------
    low : float
        Stable step [s].
    high : float or None
        Unstable step [s]; None where no wave of spectrum or transient criterion binds.
    waves : tuple of CertifiedWave
        In the order they were given.
    breaks_high : tuple of str
        Criteria that the wave that binds breaks at ``high``.
    bracket : Bracket or None
        The limit that was certified.
    refuted : tuple of Refuted
        Limits that this one replaces.
    marched : int
        Steps of the longest march; 0 where full matrices certify.
    """

    low: float
    high: float | None
    waves: tuple[CertifiedWave, ...]
    breaks_high: tuple[str, ...]
    bracket: Bracket | None
    refuted: tuple[Refuted, ...] = ()
    marched: int = 0

    @property
    def holds(self) -> bool:
        """Whether no wave breaks a criterion at the stable step."""
        return not any(wave.broken for wave in self.waves)

    @property
    def worst(self) -> CertifiedWave:
        """The wave that breaks a criterion at the stable step, else the one that binds.

        Where none or several do, that of fastest growth there, own growth taken out.
        """
        binding = None if self.bracket is None else self.bracket.problem
        return max(
            self.waves,
            key=lambda wave: (
                bool(wave.broken),
                wave.problem is binding,
                wave.growth_low - wave.problem.facts.own_growth,
            ),
        )


def certify(
    problems: Sequence[WaveProblem],
    low: float,
    tolerance: Tolerance,
    bracket: Bracket | None = None,
) -> Certificate:
    """Ask every wave about both sides of a limit.

    Parameters
    ----------
    problems : sequence of WaveProblem
        Every sampled wave of every air state.
    low : float
        Step said to be stable [s].
    tolerance : Tolerance
    bracket : Bracket or None
        The wave that is said to bind, with its unstable step; None if no wave binds.
    """
    high = None if bracket is None else bracket.high
    if problems[0].size > DENSE_UNKNOWNS:
        _refuse_programs(problems[0])
        return _certify_by_marches(problems, low, tolerance, bracket)
    waves = tuple(_dense(problem, low, high, tolerance) for problem in problems)
    breaks: tuple[str, ...] = ()
    if bracket is not None:
        breaks = bracket.problem.violated(bracket.high, tolerance)
    return Certificate(low, high, waves, breaks, bracket)


def _refuse_programs(problem: WaveProblem) -> None:
    """Shift-and-invert reads the tables of a tableau."""
    if not isinstance(problem.tableau, Tableau):
        raise CalculationError(
            f"{problem.tableau.name}: a limit is certified up to {DENSE_UNKNOWNS} unknowns of all "
            f"time levels together; here are {problem.size}"
        )


def settle(
    problems: Sequence[WaveProblem],
    low: float,
    tolerance: Tolerance,
    bracket: Bracket | None,
    keeps: Keeps,
) -> Certificate:
    """Certify a limit; where a wave refutes it, find that wave's limit and certify that.

    A limit found again is the end of a stable run of steps that begins at half of it or before, for
    all waves.

    Parameters
    ----------
    problems : sequence of WaveProblem
        Every sampled wave of every air state.
    low : float
        Step said to be stable [s].
    tolerance : Tolerance
    bracket : Bracket or None
        The wave that is said to bind; None if no wave binds.
    keeps : callable
        Whether a step keeps waves stable, as the search asks it.

    Returns
    -------
    Certificate
        One that holds.

    Raises
    ------
    CalculationError
        If a wave is stable at no step, however short.
    """
    refuted: list[Refuted] = []
    while True:
        found = certify(problems, low, tolerance, bracket)
        if found.holds:
            return replace(found, refuted=tuple(refuted))
        worst = found.worst
        refuted.append(Refuted(low, worst.problem, worst.broken))
        bracket = _first_failure(worst.problem, low, tolerance)
        bracket = _fill_below(problems, bracket, tolerance, keeps)
        low = bracket.low


def _fill_below(
    problems: Sequence[WaveProblem], bracket: Bracket, tolerance: Tolerance, keeps: Keeps
) -> Bracket:
    """Look for the first loss of any wave below a limit that was approached from above."""
    low, step = 0.0, bracket.low / FILL
    while step < bracket.low:
        if not keeps(problems, step):
            failing = next(problem for problem in problems if not keeps([problem], step))
            if low == 0.0:
                below = _first_failure(failing, step, tolerance)
                return _fill_below(problems, below, tolerance, keeps)
            return _bisected(failing, low, step, lambda problem, dt: not keeps([problem], dt))
        low, step = step, step * SCAN_RATIO
    return bracket


def _bisected(
    problem: WaveProblem, low: float, high: float, broken: Callable[[WaveProblem, float], bool]
) -> Bracket:
    while high / low > BISECTION:
        middle = float(np.sqrt(low * high))
        if broken(problem, middle):
            high = middle
        else:
            low = middle
    return Bracket(low, high, problem)


def _dense(
    problem: WaveProblem, low: float, high: float | None, tolerance: Tolerance
) -> CertifiedWave:
    broken, method = _broken(problem, low, tolerance), DENSE
    if broken and problem.stable(low, tolerance):
        broken, method = (), NORMS
    return CertifiedWave(
        problem,
        problem.growth(low),
        None if high is None else problem.growth(high),
        problem.rate(tolerance),
        method,
        broken,
    )


def _broken(problem: WaveProblem, dt: float, tolerance: Tolerance) -> tuple[str, ...]:
    """Criteria that a step breaks.

    exp(t L), which is costly to follow, only raises the limit of powers.
    """
    if problem.growth(dt) <= problem.rate(tolerance):
        matrix, lowest = problem.matrix(dt), lowest_log_limit(tolerance)
        if not peak_exceeds(matrix, dt, problem.rate(tolerance), tolerance.horizon, lowest):
            return ()
    return problem.violated(dt, tolerance)


def _first_failure(problem: WaveProblem, high: float, tolerance: Tolerance) -> Bracket:
    if problem.size <= DENSE_UNKNOWNS:
        return first_failure(problem, high, tolerance)
    suspects = _suspects(Bracket(high, high, problem), tolerance)

    def broken(problem: WaveProblem, dt: float) -> bool:
        look, _ = _look([problem], dt, tolerance)
        return bool(_marched(problem, dt, None, look[0], tolerance, suspects).broken)

    low = high / SCAN_RATIO
    while broken(problem, low):
        high, low = low, low / SCAN_RATIO
        if low < SMALLEST_FIRST_STEP:
            raise no_step(problem.kappa)
    return _bisected(problem, low, high, broken)


def _certify_by_marches(
    problems: Sequence[WaveProblem], low: float, tolerance: Tolerance, bracket: Bracket | None
) -> Certificate:
    high = None if bracket is None else bracket.high
    suspects = _suspects(bracket, tolerance)
    looks, marched = _look(problems, low, tolerance)
    waves = tuple(
        _marched(problem, low, high, look, tolerance, suspects)
        for problem, look in zip(problems, looks, strict=True)
    )
    breaks: tuple[str, ...] = ()
    if bracket is not None:
        problem = bracket.problem
        beyond = fastest_growth(problem, bracket.high, suspects).rate
        if beyond > problem.rate(tolerance):
            breaks = ("spectrum",)
        elif _look([problem], bracket.high, tolerance)[0][0].seen is Seen.GROWS:
            breaks = ("transient",)
    return Certificate(low, high, waves, breaks, bracket, marched=marched)


def _suspects(bracket: Bracket | None, tolerance: Tolerance) -> tuple[Suspect, ...]:
    if bracket is None:
        return ()
    problem = bracket.problem
    suspect = suspect_of(problem, bracket.high, problem.rate(tolerance))
    return () if suspect is None else (suspect,)


def _look(
    problems: Sequence[WaveProblem], dt: float, tolerance: Tolerance
) -> tuple[list[Look], int]:
    """March all waves, long where that is not too long; and how many steps the longest took."""
    steps = int(np.ceil(EFOLDINGS * tolerance.efolding_s / dt))
    long = steps <= MOST_MARCHED
    march, looks = March(tolerance), list[Look]()
    for first in range(0, len(problems), TOGETHER):
        group = problems[first : first + TOGETHER]
        looks += march.look(group, dt, None if long else GLANCE)
    return looks, steps if long else GLANCE


def _marched(
    problem: WaveProblem,
    low: float,
    high: float | None,
    look: Look,
    tolerance: Tolerance,
    suspects: tuple[Suspect, ...],
) -> CertifiedWave:
    rate = problem.rate(tolerance)
    below = fastest_growth(problem, low, suspects)
    above = None if high is None else fastest_growth(problem, high, suspects)
    broken: tuple[str, ...] = ()
    rises = look.seen is Seen.UNCLEAR and look.rate > RISES * tolerance.rate
    if below.rate > rate or rises:
        broken = ("spectrum",)
    elif look.seen is Seen.GROWS:
        broken = ("transient",)
    residual = max(one.residual for one in (below, above) if one is not None)
    return CertifiedWave(
        problem,
        below.rate,
        None if above is None else above.rate,
        rate,
        f"{SOLVED}, residual {residual:.1e}",
        broken,
    )
