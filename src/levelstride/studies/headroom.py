"""How steep, windy, mixed, fine and thin a column may become before a step fails on it.

Each quantity is varied by itself. It is doubled, or halved, until the step no longer holds, and
the change is then bisected to 1 %. On the way a column is asked at the very step only, and only
about what refused another one before; at the value found, about the sampled waves and the frozen
rows. That value is proven by the full search over all shorter steps and the waves between; where
that refuses it, the wave that it found is searched over all shorter steps from then on.
"""

from __future__ import annotations

import pickle
from collections.abc import Mapping
from dataclasses import dataclass, replace
from math import sqrt
from typing import Final

import numpy as np

from levelstride.column.column import Column
from levelstride.errors import CalculationError, InputError
from levelstride.results.headroom import Headroom, Room
from levelstride.results.wording import number
from levelstride.splitting.splitting import resolve
from levelstride.stability.blas import on_one_thread
from levelstride.stability.tolerance import Tolerance
from levelstride.studies.holding import Objection, StepQuestion, Trial
from levelstride.studies.limit import SCAN
from levelstride.studies.methods import tableau_of
from levelstride.studies.quantities import QUANTITIES, Quantity
from levelstride.studies.stretched_levels import NoMemberError

BRACKET: Final = 1.01
"""Ratio of the value lost to the value carried, at most."""

PROOFS: Final = 8
"""Full searches of one quantity, at most; one where the first agrees with the sampled waves."""

LEAST: Final = 1000.0
"""The smallest value tried where the column has none, as a divisor of the first."""

COARSE: Final = 3
"""While values are doubled or halved, only one sampled wave in so many is asked."""

REMEMBERED: Final = 3
"""Columns that are kept for another look."""

CERTIFIED: Final = (
    f"value carried by a full search ({SCAN}); value lost by growth of a sampled wave or frozen "
    "row; doubled or halved up to there, so that a loss that is regained within a factor two can "
    "be missed"
)


@dataclass(frozen=True, slots=True)
class RoomItem:
    """The room of one quantity that is to be found, as plain data.

    Parameters
    ----------
    column : bytes
        The column, pickled.
    tableau : str
        Name.
    split : str or mapping
        Name, or term to treatment.
    step_s : float
        The step [s].
    quantity : str
        One of ``QUANTITIES``.
    """

    column: bytes
    tableau: str
    split: str | Mapping[str, str]
    step_s: float
    quantity: str


def find_room(item: RoomItem) -> Room:
    """Find the room of one quantity under an advised step, which holds on the column as it is.

    Returns
    -------
    Room
        The same in whatever process it is found.
    """
    column: Column = pickle.loads(item.column)
    try:
        return room(
            column,
            item.quantity,
            tableau=item.tableau,
            split=item.split,
            step_s=item.step_s,
            holds_now=True,
        )
    except CalculationError as error:
        return no_room(item, error)


def no_room(item: RoomItem, error: Exception) -> Room:
    """Stand in for a room that could not be found."""
    present = QUANTITIES[item.quantity].present(pickle.loads(item.column))
    return Room(quantity=item.quantity, present=present, reason=str(error))


@on_one_thread
def headroom(
    column: Column,
    *,
    tableau: str,
    split: str | Mapping[str, str],
    step_s: float,
    efolding_s: float | None = None,
) -> Headroom:
    """Find how far each quantity may go before a step no longer holds.

    Over a slope both treatments of the lowest slope gradient must hold, as in ``advise``.

    Parameters
    ----------
    column : Column
        The column.
    tableau : str
        Published name, alias or bare form.
    split : str or mapping
        Groups and terms joined by ``+``, or term to treatment.
    step_s : float
        The step [s].
    efolding_s : float, optional
        Tolerated e-folding time [s]; by default the column's own.

    Returns
    -------
    Headroom
        One room for each of ``QUANTITIES``.

    Raises
    ------
    InputError
        If a name is unknown or the step is not positive.

    Examples
    --------
    >>> import levelstride
    >>> column = levelstride.build({
    ...     "levels": {"kind": "uniform", "layers": 6, "top_m": 6000.0},
    ...     "air": {"kind": "isothermal", "temperature_k": 250.0},
    ...     "horizontal": {"grid_spacing_m": 2000.0},
    ... })
    >>> found = headroom(column, tableau="ARS(2,3,2)", split="sound+buoyancy", step_s=2.0)
    >>> found.rooms[4].quantity, 500.0 < found.rooms[4].carried < found.rooms[4].present
    ('grid_spacing_m', True)
    """
    holds_now = None
    rooms: list[Room] = []
    for name in QUANTITIES:
        found = room(
            column,
            name,
            tableau=tableau,
            split=split,
            step_s=step_s,
            efolding_s=efolding_s,
            holds_now=holds_now,
        )
        holds_now = found.reason is None or holds_now
        rooms.append(found)
    return assembled(column, tableau, split, step_s, efolding_s, tuple(rooms))


def assembled(
    column: Column,
    tableau: str,
    split: str | Mapping[str, str],
    step_s: float,
    efolding_s: float | None,
    rooms: tuple[Room, ...],
) -> Headroom:
    """Put rooms together that were found one by one."""
    return Headroom(
        tableau=tableau_of(column, tableau).name,
        split=resolve(split).name,
        step_s=step_s,
        efolding_s=efolding_s or column.advice.efolding_s,
        rooms=rooms,
        certified=CERTIFIED,
    )


@on_one_thread
def room(
    column: Column,
    quantity: str,
    *,
    tableau: str,
    split: str | Mapping[str, str],
    step_s: float,
    efolding_s: float | None = None,
    holds_now: bool | None = None,
) -> Room:
    """Find how far one quantity may go; parameters and errors are those of ``headroom``.

    Parameters
    ----------
    quantity : str
        One of ``QUANTITIES``.
    holds_now : bool, optional
        Whether the step holds on the column as it is, if that is known.
    """
    if not 0.0 < step_s < np.inf:
        raise InputError(f"step of the headroom: received {step_s!r} s, it must be above 0")
    tolerance = Tolerance(efolding_s or column.advice.efolding_s, column.advice.transient_limit)
    question = StepQuestion(resolve(split), tableau_of(column, tableau), tolerance, step_s)
    varied = QUANTITIES[quantity]
    present = varied.present(column)
    if holds_now is None:
        holds_now = question.holds(question.trial(column))
    if not holds_now:
        reason = f"the step of {number(step_s)} s does not hold at the present value already"
        return Room(quantity=quantity, present=present, reason=reason)
    return _Bracketing(column, quantity, varied, question).run()


class _Bracketing:
    """The search for the value of one quantity at which a step is lost."""

    def __init__(self, column: Column, name: str, varied: Quantity, question: StepQuestion) -> None:
        self._column, self._varied, self._question = column, varied, question
        self._present, self._end = varied.present(column), varied.end(column)
        self._empty = Room(quantity=name, present=self._present)
        self._trials: dict[float, Trial | None] = {}
        self._objections: dict[float, Objection | None] = {}
        self._last_problem = "the range ends there"

    def run(self) -> Room:
        """Bracket, bisect and prove; what the proof refuses is bisected again."""
        sure, lost = self._bracket()
        if lost is None and sure == self._present:
            return replace(self._empty, reason=f"no other value is possible: {self._last_problem}")
        low, high, near = sure, lost, False
        for _ in range(PROOFS):
            if high is not None:
                low, high = self._settled(low, high, near=near)
            if low == 0.0:
                return replace(self._empty, lost=high, reason=f"even {number(high)} is too much")
            objection = self._objection(low)
            if objection is None:
                return self._unbounded(low) if high is None else self._found(low, high)
            low, high, near = self._present, low, True
        reason = f"{PROOFS} full searches refused what sampled waves carry, the last {number(high)}"
        return replace(self._empty, lost=high, reason=reason)

    def _bracket(self) -> tuple[float, float | None]:
        """Double or halve until the step is lost: the last value that holds, the first lost."""
        sure = self._present
        while sure != self._end:
            value = self._next(sure)
            trial = self._trial(value)
            if trial is None:
                break
            if not self._question.holds(trial, every=COARSE):
                return sure, value
            sure = value
        return sure, None

    def _next(self, value: float) -> float:
        if value == 0.0:
            return self._varied.start
        if self._varied.smaller:
            return max(value / 2, self._end)
        return min(value * 2, self._end)

    def _settled(self, sure: float, lost: float, *, near: bool) -> tuple[float, float]:
        """Narrow a bracket by what refused before, and ask everything at the value found.

        Where something else refuses that, it is asked from then on. The lower end is 0 if there is
        nothing to be found above that.
        """
        while True:
            low, lost = self._bisected(sure, lost, near=near)
            if low in (0.0, sure) or self._holds(low):
                return low, lost
            lost, near = low, True

    def _bisected(self, sure: float, lost: float, *, near: bool) -> tuple[float, float]:
        """Narrow a bracket by what refused before; ``near`` if only its upper end is near."""
        low, high = self._from_above(sure, lost) if near else (sure, lost)
        if low == 0.0:
            low = high / 2
            while not self._not_refused(low):
                low, high = low / 2, low
                if low < self._varied.start / LEAST:
                    return 0.0, high
        while max(low / high, high / low) > BRACKET:
            middle = sqrt(low * high)
            if self._not_refused(middle):
                low = middle
            else:
                high = middle
        return low, high

    def _from_above(self, sure: float, lost: float) -> tuple[float, float]:
        """Go back from a value that is lost, ever further, until one is not refused."""
        away = 1 / BRACKET if lost > sure else BRACKET
        while True:
            value = lost * away
            passed = (value - sure) * (lost - sure) <= 0.0
            if passed or value < self._varied.start / LEAST:
                return sure, lost
            if self._not_refused(value):
                return value, lost
            lost, away = value, away**2

    def _holds(self, value: float) -> bool:
        trial = self._trial(value)
        return trial is not None and self._question.holds(trial)

    def _not_refused(self, value: float) -> bool:
        trial = self._trial(value)
        return trial is not None and self._question.refusal(trial) is None

    def _objection(self, value: float) -> Objection | None:
        trial = self._trial(value)
        if trial is not None:
            self._objections[value] = self._question.objection(trial)
        return self._objections[value]

    def _unbounded(self, value: float) -> Room:
        return replace(self._empty, unbounded=True, tried_to=value)

    def _trial(self, value: float) -> Trial | None:
        """A column with this value; None where the definition cannot take it."""
        if value not in self._trials:
            while len(self._trials) >= REMEMBERED:
                self._trials.pop(next(iter(self._trials)))
            self._trials[value] = self._made(value)
        return self._trials[value]

    def _made(self, value: float) -> Trial | None:
        if value == self._present:
            return self._question.trial(self._column)
        try:
            return self._question.trial(self._varied.changed(self._column, value))
        except (InputError, NoMemberError) as error:
            self._last_problem = str(error).splitlines()[0]
            return None

    def _found(self, carried: float, lost: float) -> Room:
        objection = self._objections.get(lost) or self._refusal(lost)
        found = replace(self._empty, carried=carried, lost=lost)
        if objection is None:
            return found
        return replace(found, criterion=objection.criterion, wavelength_m=objection.wavelength_m)

    def _refusal(self, value: float) -> Objection | None:
        question, trial = self._question, self._trial(value)
        look = None if trial is None else question.refusal(trial)
        if trial is None or look is None:
            return None
        at = trial.refused_at(look, question.step_s) or question.step_s
        return trial.objection(look, at)
