"""Error of a gravity-wave packet after an hour, against what the hour costs."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace
from math import ceil, inf, isfinite
from typing import Final

import numpy as np

from levelstride.accuracy.carried_packet import ExactPacket, exact_packets, march
from levelstride.column.column import Column
from levelstride.errors import CalculationError, InputError
from levelstride.results.wording import number
from levelstride.results.work_precision import WorkPoint, WorkPrecision
from levelstride.schemes.scheme import TimeScheme
from levelstride.splitting.splitting import Splitting, resolve
from levelstride.stability.blas import on_one_thread
from levelstride.stability.tolerance import Tolerance
from levelstride.stability.verdict import ColumnVerdict
from levelstride.stepper.any_scheme import AnyStepper, stepper_of
from levelstride.studies.convergence import linear_order, notes, shorter_steps, with_orders
from levelstride.studies.cost import HOUR_S, StepCost, step_cost
from levelstride.studies.methods import tableau_of
from levelstride.studies.timing import step_time

PER_STEP: Final = float(np.finfo(np.float64).eps) / 4
"""About what round-off adds to the error with every step [1]."""

STEPS_PER_PERIOD: Final = 4
"""Steps in a period of the packet, and in the whole time, at least: longer ones tell nothing."""


@on_one_thread
def work_precision(
    column: Column,
    *,
    tableau: str,
    split: str | Mapping[str, str],
    hours: float = 1.0,
    points: int = 8,
    smallest_fraction: float = 1 / 64,
    stable_step_s: float | None = None,
) -> WorkPrecision:
    """Compare a packet of gravity waves with the exact one, from the stable step downwards.

    The packet (`accuracy.packet`) is carried by steps of one length and by the exponential of the
    semi-discrete operator (`accuracy.exponential`).

    Parameters
    ----------
    column : Column
    tableau : str
        Published name, alias or bare form.
    split : str or mapping
        Groups and terms joined by ``+``, or term to treatment.
    hours : float
        Simulated time [h].
    points : int
        Number of steps, from the stable one downwards geometrically; each divides the time.
    smallest_fraction : float
        The shortest of them over the longest [1].
    stable_step_s : float, optional
        Stable step, if it is known: it takes most of the time to find [s]; ``math.inf`` if nothing
        bites.

    Returns
    -------
    WorkPrecision

    Raises
    ------
    InputError
        If a name is unknown or a number makes no sense.
    CalculationError
        If no gravity wave is resolved or no step is stable.

    Examples
    --------
    >>> import levelstride
    >>> column = levelstride.build({
    ...     "levels": {"kind": "uniform", "layers": 8, "top_m": 12000.0},
    ...     "air": {"kind": "isothermal", "temperature_k": 250.0},
    ...     "horizontal": {"grid_spacing_m": 3000.0},
    ... })
    >>> found = levelstride.work_precision(column, tableau="ARS(2,3,2)", split="sound")
    >>> found.linear_order, found.settled, round(found.observed_order, 1)
    (2, True, 2.0)
    """
    _sensible(hours, points, smallest_fraction, stable_step_s)
    splitting, method = resolve(split), tableau_of(column, tableau)
    if method.kind == "explicit":
        splitting = splitting.without_implicit()
    if stable_step_s is None:
        stable_step_s = _stable_step(column, splitting, method)
    runs, left_out = exact_packets(column, hours * HOUR_S)
    study = _Study(column, splitting, method, hours, runs)
    period_s = min(hours * HOUR_S, *(run.summary.period_s for run in runs))
    longest_s = min(stable_step_s, period_s / STEPS_PER_PERIOD)
    counts = _step_counts(hours * HOUR_S, longest_s, points, smallest_fraction)
    found = [point for n in counts if (point := study.at(n)) is not None]
    if not found:
        raise CalculationError(f"{method.name} with {splitting.name}: {study.problems[0]}")
    expected = linear_order(method, [run.packet.parts(splitting) for run in runs])
    answer = WorkPrecision(
        tableau=method.name,
        split=splitting.name,
        hours=hours,
        stable_step_s=stable_step_s if isfinite(stable_step_s) else None,
        points=tuple(found),
        shorter=tuple(shorter_steps(study.at, counts[-1], found, expected)),
        linear_order=expected,
        declared_order=method.order,
        packets=tuple(run.summary for run in runs),
    )
    answer = with_orders(answer)
    said = [] if longest_s == stable_step_s else [_cut(stable_step_s, longest_s, period_s)]
    return replace(answer, notes=(*said, *notes(answer), *left_out, *study.problems))


class _Study:
    """One tableau and splitting on the packets of a column."""

    def __init__(
        self,
        column: Column,
        splitting: Splitting,
        tableau: TimeScheme,
        hours: float,
        runs: Sequence[ExactPacket],
    ) -> None:
        self.hours, self._runs, self._tableau = hours, runs, tableau
        self._parts = [run.packet.parts(splitting) for run in runs]
        self._cost = step_cost(
            tableau, splitting, column.advice, reference=column.reference is not None
        )
        self._timed = (column, splitting)
        self._step_time: float | None = None
        self._steppers: list[AnyStepper] = []
        self._courant_per_s = max(
            float((np.sqrt(air.sound_speed_squared_c) / column.levels.thickness_m).max())
            for air in column.airs
        )
        self._round_off = max(run.round_off for run in runs)
        self.problems: list[str] = []
        """Steps that could not be taken, and why."""

    def at(self, steps: int) -> WorkPoint | None:
        """Take so many equal steps; None if a step of that length cannot be taken."""
        time_s = self.hours * HOUR_S
        dt = time_s / steps
        try:
            errors = [self._error(k, dt, steps) for k in range(len(self._runs))]
            per_step = self._time_of_step(dt)
        except CalculationError as error:
            self.problems.append(str(error))
            return None
        worst = int(np.argmax(errors))
        if not isfinite(errors[worst]):
            self.problems.append(f"a step of {number(dt)} s grows beyond all numbers")
            return None
        return self._point(dt, errors[worst], self._runs[worst].summary.air, self._cost, per_step)

    def _point(
        self, dt: float, error: float, air: str, cost: StepCost, per_step: float
    ) -> WorkPoint:
        hourly = HOUR_S / dt
        return WorkPoint(
            step_s=dt,
            steps_per_hour=hourly,
            error=error,
            vertical_courant=self._courant_per_s * dt,
            cost_per_hour=cost.weighted * hourly,
            explicit_evaluations_per_hour=cost.evaluations * hourly,
            solves_per_hour=cost.solves * hourly,
            exchanges_per_hour=cost.exchanges * hourly,
            measured_s_per_hour=per_step * hourly,
            round_off=self._round_off + PER_STEP * self.hours * hourly,
            air=air,
        )

    def _error(self, k: int, dt: float, steps: int) -> float:
        if len(self._steppers) <= k:
            self._steppers.append(stepper_of(self._parts[k], self._tableau, dt))
        else:
            self._steppers[k] = self._steppers[k].at_step(dt)
        run = self._runs[k]
        end = march(self._steppers[k], run.packet.state, steps)
        with np.errstate(over="ignore", invalid="ignore"):
            return float(np.linalg.norm(end - run.end) / np.linalg.norm(run.end))

    def _time_of_step(self, dt: float) -> float:
        if self._step_time is None:
            column, splitting = self._timed
            self._step_time = step_time(column, splitting, self._tableau, dt)
        return self._step_time


def _sensible(
    hours: float, points: int, smallest_fraction: float, stable_step_s: float | None
) -> None:
    problems = []
    if not (isfinite(hours) and hours > 0.0):
        problems.append(f"hours: {hours!r}; must be positive")
    if points < 2:
        problems.append(f"points: {points!r}; must be at least 2")
    if not 0.0 < smallest_fraction < 1.0:
        problems.append(f"smallest_fraction: {smallest_fraction!r}; must be between 0 and 1")
    if stable_step_s is not None and not stable_step_s > 0.0:
        problems.append(f"stable_step_s: {stable_step_s!r}; must be positive")
    if problems:
        raise InputError(*problems)


def _stable_step(column: Column, splitting: Splitting, tableau: TimeScheme) -> float:
    tolerance = Tolerance(column.advice.efolding_s, column.advice.transient_limit)
    step = ColumnVerdict(column, splitting, tableau).stable_step(tolerance).step_s
    return inf if step is None else step


def _step_counts(time_s: float, longest_s: float, points: int, smallest: float) -> list[int]:
    """Numbers of steps that make up the time, ascending: whole, none longer than the longest.

    Examples
    --------
    >>> _step_counts(3600.0, 10.0, 4, 1 / 8)
    [360, 720, 1440, 2880]
    >>> _step_counts(3600.0, 7.0, 3, 1 / 2)
    [515, 728, 1029]
    """
    fewest = time_s / longest_s
    wanted = (fewest * smallest ** (-k / (points - 1)) for k in range(points))
    return sorted({ceil(n * (1 - 1e-12)) for n in wanted})


def _cut(stable_step_s: float, longest_s: float, period_s: float) -> str:
    stable = f"{number(stable_step_s)} s is" if isfinite(stable_step_s) else "any step is"
    return (
        f"{stable} stable; steps begin at {number(longest_s)} s, a quarter of {number(period_s)} s "
        "(the packet's period or the whole time), since longer ones cannot carry it"
    )
