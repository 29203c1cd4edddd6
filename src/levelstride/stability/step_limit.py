"""The search for the longest stable step over all waves and air states."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass

import numpy as np

from levelstride.errors import CalculationError
from levelstride.stability.wave_problem import FEW_UNKNOWNS, WaveProblem

Criterion = Callable[[WaveProblem, float], bool]
Maker = Callable[[int, float], WaveProblem]
Watch = Callable[[str], None]


def silent(_: str) -> None:
    """Tell nobody what is being looked at."""


SCAN_RATIO = 1.05
BISECTION = 1.001
FIRST_STEP = 1e-3
"""First step scanned, over the largest |eigenvalue| of the whole operator."""

STRIDE_SHORT, STRIDE_STIFF, STRIDE_DENSE = 94, 24, 4
"""Steps of the scan from one look to the next in the three regimes of ``_looks``."""

MANY_UNKNOWNS, THINNING = 300, 3.0
"""Beyond so many unknowns strides are so many times longer and frozen layers say where to look."""

SHORT, NOT_SMALL = 0.3, 0.15
"""Step times rate above which a term is not small in one step."""

FILL_REACH = 30.0
"""How far below its limit, as a factor, the binding wave is looked at closely at most."""

SPREAD = 2.23
"""Turns of the looks per unit of ln(wavenumber): the golden ratio from wave to wave sampled."""

SMALLEST_FIRST_STEP = 1e-12
"""First step [s] below which a tableau counts as unstable however short the step."""

NEAR_MINIMUM = 1.05
"""Waves whose limit is within this factor of the smallest are refined around."""

FLAT = 1.0025
"""Where the limits on both sides are this close, nothing much smaller lies between them."""

RESOLVED = 1.005
"""Change of the limit below which no further waves are added."""


@dataclass(frozen=True, eq=False)
class Bracket:
    """A stable and an unstable step of one wave, as close as the bisection brought them.

    Attributes
    ----------
    low, high : float
        Stable and unstable step [s].
    problem : WaveProblem
    """

    low: float
    high: float
    problem: WaveProblem


class StepSearch:
    """Longest step that keeps a criterion at every wave of every air state.

    Parameters
    ----------
    make : callable
        Returns the problem of an air state (by number) and a wavenumber, the same object each time.
    nair : int
        Number of air states.
    kappas : sequence of float
        Sampled wavenumbers, ascending [1/m].
    largest_s : float
        Step up to which is scanned [s].
    """

    def __init__(self, make: Maker, nair: int, kappas: Sequence[float], largest_s: float) -> None:
        self.problem, self.nair, self.largest_s = make, nair, largest_s
        self.kappas = [list(kappas) for _ in range(nair)]

    def problems(self) -> list[WaveProblem]:
        """All problems looked at so far, steepest gradient first."""
        every = [self.problem(air, k) for air in range(self.nair) for k in self.kappas[air]]
        return sorted(every, key=lambda problem: -problem.slow_rate)

    def run(
        self, holds: Criterion, *, refine: bool = True, watch: Watch = silent
    ) -> Bracket | None:
        """Find the limit.

        Parameters
        ----------
        holds : callable
            Whether a wave keeps the criterion at a step.
        refine : bool
            Whether to add wavenumbers around the worst ones.
        watch : callable
            Told what is being looked at.

        Returns
        -------
        Bracket or None
            None if the criterion holds up to ``largest_s``.

        Raises
        ------
        CalculationError
            If it fails at every step, however short.
        """
        pass_ = _Pass(self, holds, NEAR_MINIMUM if refine else 1.0, watch)
        pass_.cover(self.problems())
        if pass_.best is None:
            return None
        for air in range(self.nair) if refine else ():
            self._add_longer(pass_, air)
            self._refine(pass_, air)
        pass_.fill_below()
        pass_.recheck(self.problems())
        return pass_.best

    def _add_longer(self, pass_: _Pass, air: int) -> None:
        """Go on to longer waves while the longest one is the worst and the limit still falls."""
        for _ in range(24):
            longest = self.problem(air, self.kappas[air][0])
            assert pass_.best is not None
            if pass_.best.problem is not longest:
                return
            before = pass_.best.low
            self.kappas[air].insert(0, longest.kappa / 2)
            pass_.cover([self.problem(air, longest.kappa / 2)])
            if before / pass_.best.low < RESOLVED:
                return

    def _refine(self, pass_: _Pass, air: int) -> None:
        """Halve the spacing of the waves around every local minimum near the smallest limit."""
        for _ in range(6):
            assert pass_.best is not None
            before, added = pass_.best.low, self._between(pass_, air)
            if not added:
                return
            self.kappas[air] = sorted({*self.kappas[air], *added})
            pass_.cover([self.problem(air, kappa) for kappa in added])
            if before / pass_.best.low < 1 + (RESOLVED - 1) / 4:
                return

    def _between(self, pass_: _Pass, air: int) -> list[float]:
        kappas = self.kappas[air]
        limits = [pass_.limit(self.problem(air, kappa)) for kappa in kappas]
        assert pass_.best is not None
        return between(kappas, limits, pass_.best.low)


def between(kappas: Sequence[float], limits: Sequence[float], smallest: float) -> list[float]:
    """Wavenumbers half-way to the neighbours of every local minimum near the smallest limit.

    Parameters
    ----------
    kappas : sequence of float, length nwave
        Ascending [1/m].
    limits : sequence of float, length nwave
        Longest stable step of each, inf where it is beyond all that matters [s].
    smallest : float
        The smallest limit [s].
    """
    added = []
    for i, limit in enumerate(limits):
        left = limits[i - 1] if i else np.inf
        right = limits[i + 1] if i + 1 < len(limits) else np.inf
        flat = max(left, right) <= FLAT * limit
        if limit <= min(left, right, NEAR_MINIMUM * smallest) and not flat:
            if i:
                added.append(float(np.sqrt(kappas[i - 1] * kappas[i])))
            if i + 1 < len(kappas):
                added.append(float(np.sqrt(kappas[i] * kappas[i + 1])))
    return added


def no_step(kappa: float) -> CalculationError:
    """Say that no step is stable, however short."""
    return CalculationError(
        f"no step down to {SMALLEST_FIRST_STEP:g} s keeps the tolerated growth at "
        f"wavenumber {kappa:.4g} 1/m; allow a shorter e-folding time"
    )


class _Pass:
    """One criterion carried over the waves; keeps the smallest limit found."""

    def __init__(self, search: StepSearch, holds: Criterion, reach: float, watch: Watch) -> None:
        self._watch = watch
        self._largest_s, self._holds, self._reach = search.largest_s, holds, reach
        self.best: Bracket | None = None
        self._limits: dict[int, float] = {}
        self._start = self._first_step(search.problems())

    def limit(self, problem: WaveProblem) -> float:
        """Limit of one wave; inf if it is beyond all that matters."""
        return self._limits.get(id(problem), np.inf)

    def _first_step(self, problems: list[WaveProblem]) -> float:
        fastest = max(problem.facts.largest_eigenvalue for problem in problems)
        start = FIRST_STEP / fastest if fastest > 0 else FIRST_STEP * self._largest_s
        for problem in problems:
            while not self._holds(problem, start):
                start /= 10
                if start < SMALLEST_FIRST_STEP:
                    raise no_step(problem.kappa)
        return start

    def cover(self, problems: Iterable[WaveProblem]) -> None:
        """Scan waves up to a little beyond the smallest limit known."""
        waiting = list(problems)
        for i, problem in enumerate(waiting):
            self._watch(f"wave {i + 1} of {len(waiting)}")
            cap = self._largest_s
            if self.best is not None:
                cap = min(cap, self._reach * self.best.low)
            self._note(problem, self._first_failure(problem, cap))

    def _note(self, problem: WaveProblem, bracket: Bracket | None) -> None:
        if bracket is None:
            return
        self._limits[id(problem)] = bracket.low
        if self.best is None or bracket.low < self.best.low:
            self.best = bracket

    def _first_failure(self, problem: WaveProblem, cap: float) -> Bracket | None:
        looks = _looks(problem, self._start, cap)
        low = 0.0
        for high in looks:
            if not self._holds(problem, high):
                return self._close_in(problem, low, high)
            low = high
        return None

    def _close_in(self, problem: WaveProblem, low: float, high: float) -> Bracket:
        """Bisect between a stable and an unstable step."""
        if low == 0.0:
            low = high / SCAN_RATIO
            while not self._holds(problem, low):
                low /= SCAN_RATIO
        while high / low > BISECTION:
            middle = float(np.sqrt(low * high))
            if self._holds(problem, middle):
                low = middle
            else:
                high = middle
        return Bracket(low, high, problem)

    def fill_below(self) -> None:
        """Look at the binding wave at the full scan ratio over the factor two below the limit.

        With few unknowns, as far below it as slow terms are not small.
        """
        assert self.best is not None
        limit, problem = self.best.low, self.best.problem
        first = limit / 2
        if problem.slow_rate > 0 and problem.size <= MANY_UNKNOWNS:
            first = min(first, max(NOT_SMALL / problem.slow_rate, limit / FILL_REACH))
        k = int(np.ceil(np.log(first / self._start) / np.log(SCAN_RATIO)))
        while (step := self._start * SCAN_RATIO**k) < limit:
            if not self._holds(problem, step):
                self._note(problem, self._close_in(problem, 0.0, step))
                return
            k += 1

    def recheck(self, problems: Iterable[WaveProblem]) -> None:
        """Check every wave again at the answer."""
        assert self.best is not None
        for problem in problems:
            if not self._holds(problem, self.best.low):
                self._note(problem, self._first_failure(problem, self.best.low))


def _looks(problem: WaveProblem, start: float, cap: float) -> list[float]:
    """Steps at which one wave is looked at, ascending, ending with ``cap``.

    Where the step is short for every rate of the operator, growth is a power of the step and needs
    few looks; where it is short for all that is not implicit, growth varies over factors of the
    step; elsewhere the scan is dense. Every wave looks at steps of its own, so that those of
    neighbouring waves, which lose stability at nearly the same steps, lie between. Steps at which
    a frozen layer grows by itself are added.
    """
    looks = [float(dt) for dt in problem.suspects if start < dt < cap]
    thinning = _thinning(problem.size)
    turn = (SPREAD * np.log(problem.kappa)) % 1.0
    short, small = _ends(problem)
    step = start * SCAN_RATIO ** (turn * STRIDE_DENSE)
    while step < cap:
        looks.append(step)
        # a stride ends where the next regime begins
        if step < short:
            first = short * SCAN_RATIO ** (turn * STRIDE_STIFF * thinning)
            step = min(step * SCAN_RATIO**STRIDE_SHORT, first)
        elif step < small:
            first = small * SCAN_RATIO ** (turn * STRIDE_DENSE * thinning)
            step = min(step * SCAN_RATIO ** (STRIDE_STIFF * thinning), first)
        else:
            step *= SCAN_RATIO ** (STRIDE_DENSE * thinning)
    return [*sorted(looks), cap]


def _ends(problem: WaveProblem) -> tuple[float, float]:
    """Steps up to which all rates, and those of slow terms, are small in one step [s]."""
    fastest, slow = problem.facts.largest_eigenvalue, problem.slow_rate
    return SHORT / fastest if fastest else np.inf, NOT_SMALL / slow if slow else np.inf


def _thinning(size: int) -> float:
    """How many times longer the strides are with so many unknowns; half where looks cost little."""
    if size <= FEW_UNKNOWNS:
        return 0.5
    return THINNING if size > MANY_UNKNOWNS else 1.0
