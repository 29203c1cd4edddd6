"""The search for the longest stable step of large columns: marching finds, dense matrices judge.

The scan of ``step_limit`` asks full matrices about every step it looks at. Here groups of waves
march side by side instead, at a cost that grows with the number of unknowns alone; for shorter
steps, and growth too slow to show in a march, frozen layers say where to look. Full matrices are
asked where a march leaves it open, and at the answer.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence

import numpy as np

from levelstride.stability.by_growth import first_failure
from levelstride.stability.march import EFOLDINGS, QUIET, March, Seen
from levelstride.stability.march_bounds import (
    ASKED,
    CERTAIN_UNKNOWNS,
    CLOSE,
    DENSE_UNKNOWNS,
    DOUBTFUL,
    FILL,
    LADDER_UNKNOWNS,
    LONG_MARCH,
    MOST_HALVINGS,
    MOST_LONGER,
    MOST_SHORTER,
    NOT_SMALL,
    RANKED,
    SHORT,
    SLOW_STRIDE,
    STRIDE,
    STRIDE_STIFF,
    TOGETHER,
)
from levelstride.stability.nearby import Nearby
from levelstride.stability.step_limit import (
    BISECTION,
    NEAR_MINIMUM,
    RESOLVED,
    SCAN_RATIO,
    SMALLEST_FIRST_STEP,
    Bracket,
    StepSearch,
    Watch,
    between,
    no_step,
    silent,
)
from levelstride.stability.tolerance import Tolerance
from levelstride.stability.wave_problem import WaveProblem


class MarchSearch:
    """Longest step that keeps spectrum and transient criterion at every wave of every air state.

    Parameters
    ----------
    waves : StepSearch
    tolerance : Tolerance
    judge : bool
        Whether full matrices are asked about the binding wave in the end.
    near : Nearby or None
        What is known from a column that hardly differs: what is far below that step is not scanned,
        and full matrices are asked only about waves that bind there or whose frozen layers grow.
    watch : callable
        Told what is being looked at.
    """

    def __init__(
        self,
        waves: StepSearch,
        tolerance: Tolerance,
        *,
        judge: bool = True,
        near: Nearby | None = None,
        watch: Watch = silent,
    ) -> None:
        self._watch = watch
        self._waves, self._tolerance = waves, tolerance
        self._sparsely = waves.problem(0, waves.kappas[0][0]).size > CERTAIN_UNKNOWNS
        self._dense = waves.problem(0, waves.kappas[0][0]).size <= DENSE_UNKNOWNS
        self._march = March(tolerance) if self._dense else March(tolerance, LONG_MARCH)
        self._limits: dict[int, float] = {}
        self._filled: dict[int, float] = {}
        self._largest_s = waves.largest_s
        self._known_s, self._asks_judge, self._near = 0.0, judge, near
        self.best: Bracket | None = None

    def run(self, *, refine: bool = True, known_s: float = 0.0) -> Bracket | None:
        """Find the limit.

        Parameters
        ----------
        refine : bool
            Whether to add wavenumbers around the worst ones.
        known_s : float
            A step up to which every wave is known to be stable [s].

        Returns
        -------
        Bracket or None
            None if nothing bites up to the longest step scanned.

        Raises
        ------
        CalculationError
            If no step is stable, however short.
        """
        if self._near is not None:
            known_s = max(known_s, self._near.first_s)
            self._near.thin(self._waves.kappas)
            for air, kappa in self._near.waves:
                found = self._waves.problem(air, kappa) if self._dense else None
                if found and (at := self._near.limit(found, self._tolerance, self._cap())):
                    self._note(at)
        self._known_s = known_s
        problems = self._waves.problems()
        groups = -(-len(problems) // TOGETHER)
        for group in range(groups):
            self._scan(problems[group::groups], group / groups, known_s)
        self._settle(refine=refine)
        return self.best

    def keeps(self, problems: Sequence[WaveProblem], dt: float) -> bool:
        """Whether a step keeps waves stable, as far as marching tells."""
        return not any(self._fails(group, dt) for group in _groups(problems))

    def _fails(self, problems: Sequence[WaveProblem], dt: float) -> list[WaveProblem]:
        """Waves that a march refutes; what it leaves open is asked about and noted at once."""
        looks = self._march.look(problems, dt)
        told = {Seen.GROWS} if self._dense else {Seen.GROWS, Seen.UNCLEAR}
        failing = [p for p, look in zip(problems, looks, strict=True) if look.seen in told]
        unclear = [(look.rate, i) for i, look in enumerate(looks) if look.seen is Seen.UNCLEAR]
        for rate, i in [] if failing else sorted(unclear, reverse=True):
            self._ask(problems[i], dt, powers=rate <= QUIET * self._tolerance.rate)
        return failing

    def _ask(self, problem: WaveProblem, dt: float, *, powers: bool = False) -> None:
        """Ask full matrices about a wave where its answer may matter, and note what they say.

        About its growth, and about the norms of its powers too if these may be what is too large.
        """
        if dt > self._smallest() or not self._dense:
            return
        powers = powers or (self._near is None and problem.size <= CERTAIN_UNKNOWNS)
        grows = problem.growth(dt) > problem.rate(self._tolerance)
        if grows or (powers and not problem.stable(dt, self._tolerance)):
            self._note(first_failure(problem, dt, self._tolerance))

    def _ask_about_slow_growth(self, problems: Sequence[WaveProblem], dt: float) -> None:
        """Ask full matrices about waves whose growth may be too slow for a glance.

        About all waves where these cost little; elsewhere about those that a march as long as
        needed leaves unclear or, where that takes too many steps, whose frozen layers grow.
        """
        tolerance = self._tolerance
        if problems[0].size <= (CERTAIN_UNKNOWNS if dt == self._smallest() else LADDER_UNKNOWNS):
            slow = [problem for problem in problems if not self._stable(problem, dt)]
            for problem in sorted(slow, key=lambda problem: -problem.growth(dt)):
                self._ask(problem, min(dt, self._smallest()))
            return
        if self._near is None and EFOLDINGS * tolerance.efolding_s / dt <= LONG_MARCH:
            rates = [
                -np.inf if look.seen is Seen.QUIET else look.rate
                for look in self._march.look(problems, dt, None)
            ]
        else:
            steps_s = np.array([dt])
            rates = [float(problem.local_screen.growth(steps_s)[0]) for problem in problems]
        order: list[int] = np.argsort(rates)[::-1].tolist()
        for i in order:
            if rates[i] >= DOUBTFUL * tolerance.rate:
                self._ask(problems[i], min(dt, self._smallest()))

    def _stable(self, problem: WaveProblem, dt: float) -> bool:
        """What full matrices say; near a known limit of growth alone."""
        if self._near is None:
            return problem.stable(dt, self._tolerance)
        growth = problem.growth(dt)
        return growth <= self._tolerance.rate or growth <= problem.rate(self._tolerance)

    def _scan(self, problems: Sequence[WaveProblem], turn: float, first: float = 0.0) -> None:
        """Look at ever longer steps until one fails or the smallest limit known is passed."""
        if not problems:
            return
        low = 0.0
        for high in self._looks(problems, turn):
            if high < first:
                continue
            if high > self._cap():
                return
            self._watch(f"waves {len(problems)}, step {high:.3g} s")
            if failing := self._fails(problems, high):
                self._close_in(failing, low, high)
                return
            low = high
            for problem in problems:
                if "suspects" in vars(problem) and high in problem.suspects:
                    self._ask(problem, high)

    def _looks(self, problems: Sequence[WaveProblem], turn: float) -> list[float]:
        if self._near is not None:
            return self._near.looks(self._cap())
        fastest = max(problem.facts.largest_eigenvalue for problem in problems)
        slow = max(problem.slow_rate for problem in problems)
        short = SHORT / fastest if fastest else self._largest_s
        small = NOT_SMALL / slow if slow else np.inf
        cap = self._cap()
        asked = problems[:: max(1, len(problems) // ASKED)]
        looks = [float(dt) for problem in asked for dt in problem.suspects if dt < cap]
        if self._known_s > 0:
            looks.append(self._known_s)
        step = short * SCAN_RATIO ** (turn * STRIDE)
        while step < cap:
            looks.append(step)
            if step < small:
                first = small * SCAN_RATIO ** (turn * STRIDE)
                step = min(step * SCAN_RATIO**STRIDE_STIFF, first)
            else:
                step *= SCAN_RATIO**STRIDE
        return [*sorted(looks), cap]

    def _cap(self) -> float:
        reach = NEAR_MINIMUM if self._near is None else 1.0
        return float(min(self._largest_s, reach * self._smallest()))

    def _close_in(self, failing: Sequence[WaveProblem], low: float, high: float) -> None:
        """Bisect between a stable and an unstable step of some waves; keep the first to fail."""
        if low == 0.0:
            low = high / SCAN_RATIO
            while still := self._fails(failing, low):
                failing, high, low = still, low, low / 2
                if low < SMALLEST_FIRST_STEP:
                    raise no_step(failing[0].kappa)
        failing, low, high = self._bisect(failing, low, high)
        for _ in range(MOST_SHORTER):
            looks = self._march.look(failing, low, CLOSE)
            if all(look.seen is Seen.QUIET for look in looks):
                break
            low, high = low / BISECTION, low
        for problem in failing:
            self._note(Bracket(low, high, problem))

    def _bisect(
        self, failing: Sequence[WaveProblem], low: float, high: float
    ) -> tuple[Sequence[WaveProblem], float, float]:
        before = self._smallest()
        while high / low > BISECTION:
            if low >= self._smallest() < before:
                break  # slow growth was found below: nothing here matters any more
            middle = float(np.sqrt(low * high))
            still = self._fails(failing, middle)
            if still:
                failing, high = still, middle
            else:
                low = middle
        return failing, low, high

    def _note(self, bracket: Bracket) -> None:
        self._limits[id(bracket.problem)] = bracket.low
        if self.best is None or bracket.low < self.best.low:
            self.best = bracket

    def _settle(self, *, refine: bool) -> None:
        """Refine the waves and ask every wave again; then look closely below the limit, judge."""
        while self.best is not None:
            before = self.best
            self._watch(f"waves around the worst one, near {before.low:.3g} s")
            if refine:
                for air in range(self._waves.nair):
                    self._add_longer(air)
                    self._refine(air)
            self._recheck()
            if self.best is not before:
                continue
            self._fill_below()
            self._look_for_slow_growth()
            self._judge()
            if self.best is before:
                return

    def _add_longer(self, air: int) -> None:
        """Go on to longer waves while the longest one is the worst and the limit still falls."""
        for _ in range(MOST_LONGER):
            best, longest = self.best, self._waves.problem(air, self._waves.kappas[air][0])
            if best is None or best.problem is not longest:
                return
            self._try_waves(air, [longest.kappa / 2])
            if best.low / self._smallest() < RESOLVED:
                return

    def _refine(self, air: int) -> None:
        """Halve the spacing of the waves around every local minimum near the smallest limit."""
        for _ in range(MOST_HALVINGS):
            best = self.best
            assert best is not None
            kappas = self._waves.kappas[air]
            self._find_limits([self._waves.problem(air, kappa) for kappa in kappas])
            problems = [self._waves.problem(air, kappa) for kappa in kappas]
            limits = [self._limits.get(id(problem), np.inf) for problem in problems]
            added = between(kappas, limits, self._smallest())
            if not added:
                return
            self._try_waves(air, added)
            if best.low / self._smallest() < 1 + (RESOLVED - 1) / 4:
                return

    def _smallest(self) -> float:
        return np.inf if self.best is None else self.best.low

    def _find_limits(self, problems: list[WaveProblem]) -> None:
        """Find the limit of every wave that fails within what matters for refinement."""
        waiting = [problem for problem in problems if id(problem) not in self._limits]
        cap = self._cap()
        for group in _groups(waiting):
            self._rank(self._fails(group, cap), cap / NEAR_MINIMUM, cap)

    def _rank(self, failing: Sequence[WaveProblem], low: float, high: float) -> None:
        """Find side by side about where waves that fail at a step begin to."""
        if not failing:
            return
        if high / low <= RANKED:
            self._limits |= {id(problem): low for problem in failing}
            return
        middle = float(np.sqrt(low * high))
        still = self._fails(failing, middle)
        self._rank(still, low, middle)
        self._rank([problem for problem in failing if problem not in still], middle, high)

    def _try_waves(self, air: int, kappas: list[float]) -> None:
        self._waves.kappas[air] = sorted({*self._waves.kappas[air], *kappas})
        for group in _groups([self._waves.problem(air, kappa) for kappa in kappas]):
            assert self.best is not None
            self._scan(group, 0.0, self.best.low / FILL)

    def _fill_below(self) -> None:
        """Look at the binding wave at the full scan ratio over the factor two below the limit.

        Its neighbours look along: they cost nothing where a row of lanes would be empty.
        """
        assert self.best is not None
        limit, problem = self.best.low, self.best.problem
        step, low = limit / FILL, 0.0
        filled = self._filled.get(id(problem), np.inf) < limit * SCAN_RATIO
        if filled or self._near is not None:
            return
        self._filled[id(problem)] = limit
        near = sorted(self._waves.problems(), key=lambda p: abs(np.log(p.kappa / problem.kappa)))
        while step < limit:
            if failing := self._fails(near[:TOGETHER], step):
                self._close_in(failing, low, step)
                return
            low, step = step, step * SCAN_RATIO

    def _look_for_slow_growth(self) -> None:
        """Ask about growth too slow for a glance, at a few steps below the limit.

        Such growth comes and goes over factors of the step, not over percents, and neighbouring
        waves share it: with many unknowns every second one is asked.
        """
        if self._near is not None:
            return
        problems = self._waves.problems()
        slow = max(problem.slow_rate for problem in problems)
        first = max(NOT_SMALL / slow if slow else np.inf, self._known_s)
        step = self._smallest() / SLOW_STRIDE
        while step > first:
            for group in _groups(problems[:: 2 if self._sparsely else 1]):
                self._ask_about_slow_growth(group, step)
            step = min(step, self._smallest())
            step /= SLOW_STRIDE

    def _recheck(self) -> None:
        """Ask every wave again at the answer."""
        for group in _groups(self._waves.problems()):
            assert self.best is not None
            step = self.best.low
            if failing := self._fails(group, step):
                self._close_in(failing, 0.0, step)
            else:
                self._ask_about_slow_growth(group, step)

    def _judge(self) -> None:
        """Ask full matrices about the binding wave on the stable side of its limit."""
        assert self.best is not None
        problem, low = self.best.problem, self.best.low
        if not (self._dense and self._asks_judge):
            return
        certain = self._near is not None or problem.size > CERTAIN_UNKNOWNS
        if certain and problem.growth_is_known(low):
            return  # told already, and the powers of a step that marches quietly are small
        if not problem.stable(low, self._tolerance):
            self._note(first_failure(problem, low, self._tolerance))


def _groups(problems: Sequence[WaveProblem]) -> Iterator[Sequence[WaveProblem]]:
    for first in range(0, len(problems), TOGETHER):
        yield problems[first : first + TOGETHER]
