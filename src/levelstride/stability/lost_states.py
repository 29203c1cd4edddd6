"""Which states lose stability at the limit or a little beyond it, each with its own limit."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import partial
from typing import Any

import numpy as np
from numpy.typing import NDArray

from levelstride.errors import CalculationError
from levelstride.stability.step_limit import Bracket
from levelstride.stability.tolerance import Tolerance
from levelstride.stability.wave_problem import WaveProblem

CLOSE = 1e-4
"""Relative width to which the limit of a wave is bisected."""

SHARP = 1e-7
"""Relative width to which the limit of a state is bisected by dense eigenvalues."""

SHARP_TRANSIENT = 1e-6
"""The same by exact norms of powers, which take longer."""

MOST_STATES = 6
"""States of one wave that are followed, at most."""

CONJUGATE = 1e-8
"""Eigenvalues of R this close to the conjugate of another are one state seen twice."""


@dataclass(frozen=True, eq=False)
class LostState:
    """One state of one wave that loses stability near the limit.

    Attributes
    ----------
    problem : WaveProblem
    criterion : str
        ``spectrum`` or ``transient``.
    rank : int
        How many states of the wave grow faster at this step; 0 for the transient criterion.
    step_s : float
        Its own limit: the longest step at which it does not grow too fast [s].
    """

    problem: WaveProblem
    criterion: str
    rank: int
    step_s: float


def lost_states(
    problems: Sequence[WaveProblem],
    tolerance: Tolerance,
    step: float,
    reach: float,
    binding: Bracket | None = None,
) -> list[LostState]:
    """Find the states that are lost between the limit and somewhat beyond.

    Of neighbouring waves of one air state only those count whose limit is a minimum over the
    waves: the others are the same state seen beside its worst wave.

    Parameters
    ----------
    problems : sequence of WaveProblem
        All waves.
    tolerance : Tolerance
    step : float
        Longest step that every wave carries [s].
    reach : float
        How far beyond it states are sought, as a factor above one.
    binding : Bracket, optional
        Where the first wave is lost, which may be stable again a little beyond.

    Returns
    -------
    list of LostState
        By ascending limit.
    """
    found: list[LostState] = []
    for air in dict.fromkeys(id(problem.air) for problem in problems):
        waves = sorted((p for p in problems if id(p.air) == air), key=lambda p: p.kappa)
        brackets = [
            (binding.low, binding.high)
            if binding is not None and wave is binding.problem
            else _bracket(wave, tolerance, step, reach)
            for wave in waves
        ]
        limits = [np.inf if bracket is None else bracket[0] for bracket in brackets]
        for i in _minima(limits):
            bracket = brackets[i]
            if bracket is not None:
                found += _states_of(waves[i], tolerance, bracket, step * reach)
    return sorted(found, key=lambda state: state.step_s)


def _minima(values: Sequence[float]) -> list[int]:
    """Places of local minima; of a run of equal values the last one."""
    ends = [i for i in range(len(values)) if i + 1 == len(values) or values[i + 1] != values[i]]
    runs = [values[i] for i in ends]
    return [
        end
        for i, end in enumerate(ends)
        if all(runs[i] < beside for beside in [*runs[max(i - 1, 0) : i], *runs[i + 1 : i + 2]])
    ]


def _bracket(
    problem: WaveProblem, tolerance: Tolerance, step: float, reach: float
) -> tuple[float, float] | None:
    """Stable and unstable step of one wave; None if it is stable at the end of the reach."""
    if problem.stable(step * reach, tolerance):
        return None
    holds = partial(problem.stable, tolerance=tolerance)
    return _bisected(holds, step, step * reach, CLOSE)


def _states_of(
    problem: WaveProblem, tolerance: Tolerance, bracket: tuple[float, float], far: float
) -> list[LostState]:
    low, high = _bisected(partial(problem.stable, tolerance=tolerance), *bracket, CLOSE)
    rate = problem.rate(tolerance)
    if problem.growth(high) <= rate:
        transient = _bisected(
            lambda dt: not problem.transient_broken(dt, tolerance), low, high, SHARP_TRANSIENT
        )
        return [LostState(problem, "transient", 0, transient[0])]
    known: dict[float, NDArray[np.float64]] = {}

    def growth(dt: float) -> NDArray[np.float64]:
        if dt not in known:
            try:
                known[dt] = growth_rates(problem, dt)
            except CalculationError:
                known[dt] = np.full(MOST_STATES, np.inf)
        return known[dt]

    states: list[LostState] = []
    rates = growth(far)
    growing = max(1, int(np.count_nonzero(rates > rate)))
    for rank in range(min(growing, MOST_STATES)):

        def kept(dt: float, rank: int = rank) -> bool:
            rates = growth(dt)
            return rank >= rates.size or bool(rates[rank] <= rate)

        first, last = (low, high) if rank == 0 else (states[-1].step_s, far)
        if kept(last):
            break
        step = _bisected(kept, first, last, SHARP)[0] if kept(first) else first
        states.append(LostState(problem, "spectrum", rank, step))
    return states


def growth_rates(problem: WaveProblem, dt: float) -> NDArray[np.float64]:
    """Growth rates of all states of one wave, of conjugate ones only one, descending [1/s]."""
    values = np.linalg.eigvals(problem.matrix(dt))
    values = values[unpaired(values)]
    with np.errstate(divide="ignore"):
        rates: NDArray[np.float64] = np.sort(np.log(np.abs(values)) / dt)[::-1]
    return rates


def unpaired(values: NDArray[Any]) -> NDArray[np.intp]:
    """Places of the values that are left when of conjugate ones that below the axis is dropped."""
    below = np.flatnonzero(values.imag < 0)
    distance = np.abs(values[below, None] - values[None, :].conj())
    distance[np.arange(below.size), below] = np.inf
    dropped = below[distance.min(axis=1, initial=np.inf) < CONJUGATE]
    return np.setdiff1d(np.arange(values.size), dropped)


def _bisected(
    holds: Callable[[float], bool], low: float, high: float, width: float
) -> tuple[float, float]:
    """Narrow a bracket to a relative width."""
    while high / low > 1 + width:
        middle = float(np.sqrt(low * high))
        if holds(middle):
            low = middle
        else:
            high = middle
    return low, high
