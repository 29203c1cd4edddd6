"""What may be different in a real model from what a column file says, and over which range.

Each assumption changes a column, a splitting or the tolerated growth into that of another model.
"""

from __future__ import annotations

from abc import ABC, abstractmethod
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from math import inf
from typing import Final

from levelstride.column import knobs
from levelstride.column.column import Column
from levelstride.errors import InputError
from levelstride.operator.setting import Setting, layout_of
from levelstride.operator.terms import CATALOGUE
from levelstride.operator.wave import Wave
from levelstride.results.wording import number
from levelstride.stability.spectrum import steepest_wavenumber
from levelstride.studies.calibration_setup import LimitItem, Setup

FACTORS: Final = (0.0, 0.25, 0.354, 0.5, 0.707, 1.0, 1.414, 2.0, 2.83, 4.0)
"""Multiples of what the column file says."""

WINDS: Final = (0.0, 5.0, 7.0, 10.0, 14.0, 20.0, 28.0, 40.0, 57.0, 80.0)
"""Winds where the column file has none [m/s]."""

SLOPES: Final = (0.0, 0.02, 0.03, 0.05, 0.07, 0.1, 0.14, 0.2, 0.28, 0.4, 0.57, 0.8)
"""Slopes where the column file has none [1]."""

TEMPERATURES: Final = (200.0, 220.0, 240.0, 260.0, 280.0, 300.0, 320.0)
"""Temperatures of an isothermal reference state [K]."""

EFOLDINGS: Final = (600.0, 1800.0, 3600.0, 10800.0, 21600.0, 43200.0, 86400.0, 259200.0, 864000.0)
"""Tolerated e-folding times, ten minutes to ten days [s]."""

STRONGEST_WIND, STEEPEST_SLOPE = 400.0, 3.0
"""Beyond these nothing is tried [m/s], [1]."""

ONCE: Final = ("after-step", "after-step-implicit")
IN_THE_STAGES: Final = ("explicit", "implicit")


@dataclass(frozen=True, slots=True)
class Value:
    """One value of an assumption.

    Parameters
    ----------
    label : str
        In words.
    number : float or None
        As a number; None where it is none.
    """

    label: str
    number: float | None = None


class Varied(ABC):
    """An assumption that can be varied.

    Parameters
    ----------
    setup : Setup
        The model as it is.
    """

    name = ""
    unit = ""

    def __init__(self, setup: Setup) -> None:
        self.setup = setup

    @property
    @abstractmethod
    def present(self) -> str:
        """What the column files assume, in words."""

    @property
    @abstractmethod
    def varied_over(self) -> str:
        """The range in words."""

    @abstractmethod
    def values(self) -> Sequence[Value]:
        """Values to try; numbers ascend."""

    @abstractmethod
    def items(self, value: Value) -> tuple[LimitItem, ...]:
        """The limits to be found under a value."""

    def why_not(self) -> str | None:
        """Why it need not be varied; None if it is to be."""
        return None

    def value(self, at: float) -> Value:
        """Make a value between those to try."""
        return Value(f"{number(at)} {self.unit}".strip(), at)


class ReferenceState(Varied):
    """The profile that the implicit operator is built on."""

    name = "reference"

    @property
    def present(self) -> str:
        """The names of the references of the columns."""
        names = [c.reference.name if c.reference is not None else None for c in self.setup.columns]
        return ", ".join(dict.fromkeys("none" if name is None else name for name in names))

    @property
    def varied_over(self) -> str:
        """None, and isothermal ones."""
        return (
            f"none, and isothermal from {TEMPERATURES[0]:g} to {TEMPERATURES[-1]:g} K in steps of "
            f"{TEMPERATURES[1] - TEMPERATURES[0]:g} K"
        )

    def values(self) -> Sequence[Value]:
        """None, and isothermal ones."""
        return [Value("none"), *(Value(f"isothermal {t:g} K") for t in TEMPERATURES)]

    def items(self, value: Value) -> tuple[LimitItem, ...]:
        """Columns on another reference."""
        table: dict[str, object] | None = None
        if value.label != "none":
            table = {"kind": "isothermal", "temperature_k": float(value.label.split()[1])}
        return self.setup.items(lambda column: knobs.with_reference(column, table))

    def why_not(self) -> str | None:
        """Nothing is built on it where nothing is implicit."""
        if self.setup.tableau.kind == "explicit" or not self.setup.splitting.implicit:
            return "nothing is implicit, so that nothing is built on a reference state"
        return None


class Scaled(Varied):
    """A quantity of the columns: its value where all agree on it, else a factor on each."""

    own_unit = ""
    without: tuple[float, ...] = ()
    most = inf

    def __init__(self, setup: Setup) -> None:
        super().__init__(setup)
        self._present = [self.of(column) for column in setup.columns]
        self._one = max(self._present) - min(self._present) <= 1e-9 * max(self._present)
        self.unit = self.own_unit if self._one else "times the file's"

    @staticmethod
    @abstractmethod
    def of(column: Column, /) -> float:
        """The quantity of a column."""

    @staticmethod
    @abstractmethod
    def changed(column: Column, to: float, /) -> Column:
        """A column with another value of it."""

    @property
    def present(self) -> str:
        """Its value, or its values."""
        shown = ", ".join(dict.fromkeys(number(present) for present in self._present))
        return f"{shown} {self.own_unit}".strip()

    @property
    def varied_over(self) -> str:
        """The range in words."""
        ends = [value.number or 0.0 for value in self.values()]
        return f"{number(min(ends))} to {number(max(ends))} {self.unit}".strip()

    def values(self) -> Sequence[Value]:
        """Multiples of what the files say, or a list where they say nothing."""
        largest = max(self._present)
        if largest == 0.0:
            return [self.value(at) for at in self.without]
        allowed = [factor for factor in FACTORS if factor * largest <= self.most]
        return [self.value(factor * largest if self._one else factor) for factor in allowed]

    def items(self, value: Value) -> tuple[LimitItem, ...]:
        """Columns with another value."""
        at = value.number or 0.0

        def change(column: Column) -> Column:
            return self.changed(column, at if self._one else at * self.of(column))

        return self.setup.items(change)


class WindSpeed(Scaled):
    """The wind, its profile scaled as a whole; the same at every height where there is none."""

    name, own_unit, without, most = "wind", "m/s", WINDS, STRONGEST_WIND
    of = staticmethod(knobs.largest_wind)
    changed = staticmethod(knobs.with_largest_wind)


class Slope(Scaled):
    """The slope at the ground."""

    name, own_unit, without, most = "slope", "", SLOPES, STEEPEST_SLOPE
    of = staticmethod(knobs.largest_slope)
    changed = staticmethod(knobs.with_largest_slope)


class OncePerStep(Varied):
    """Whether advection, mixing and damping are in the stages or once per step after them."""

    name = "once-per-step"

    @property
    def present(self) -> str:
        """The terms that are taken after the step."""
        named = [f"{term} {how}" for term, how in self.setup.splitting.treatment.items()
                 if how in ONCE and term in self._movable()]  # fmt: skip
        return ", ".join(named) or "every term is in the stages"

    @property
    def varied_over(self) -> str:
        """The terms that are moved."""
        return f"{', '.join(self._movable())}, each moved in or out of the stages; and all at once"

    def values(self) -> Sequence[Value]:
        """Every single move, and all together."""
        movable = self._movable()
        treatment = self.setup.splitting.treatment
        single = [
            Value(f"{term} {how}")
            for term in movable
            for how in (IN_THE_STAGES if treatment[term] in ONCE else ONCE)
        ]
        if len(movable) < 2:
            return single
        ways = (*IN_THE_STAGES, *ONCE)
        same = {how for how in ways if all(treatment[term] == how for term in movable)}
        return [*single, *(Value(f"all {how}") for how in ways if how not in same)]

    def items(self, value: Value) -> tuple[LimitItem, ...]:
        """Columns with terms treated in another way."""
        what, _, how = value.label.partition(" ")
        moved = self._movable() if what == "all" else [what]
        splitting = self.setup.splitting
        for term in moved:
            splitting = splitting.with_treatment(term, how)
        return self.setup.items(splitting=splitting)

    def why_not(self) -> str | None:
        """There is nothing to move in a column without wind, mixing and damping."""
        if self._movable():
            return None
        return "the columns have no advection, mixing or damping that could be moved"

    def _movable(self) -> list[str]:
        """Terms without partner that are not zero on some column."""
        lone = [name for name, term in CATALOGUE.items() if term.partner is None]
        return [name for name in lone if any(_acts(name, c) for c in self.setup.columns)]


class GrowthTolerance(Varied):
    """How fast a disturbance may grow before it is noticed."""

    name, unit = "growth-tolerance", "s"

    @property
    def present(self) -> str:
        """The tolerated e-folding time."""
        return f"e-folding in {number(self.setup.efolding_s)} s"

    @property
    def varied_over(self) -> str:
        """The range in words."""
        return f"e-folding in {EFOLDINGS[0]:g} to {EFOLDINGS[-1]:g} s"

    def values(self) -> Sequence[Value]:
        """E-folding times."""
        return [self.value(at) for at in EFOLDINGS]

    def items(self, value: Value) -> tuple[LimitItem, ...]:
        """The same columns under another tolerance."""
        return self.setup.items(efolding_s=value.number)


ASSUMPTIONS: Final[Mapping[str, type[Varied]]] = {
    one.name: one for one in (ReferenceState, WindSpeed, Slope, OncePerStep, GrowthTolerance)
}
"""What can be varied, by name."""


def chosen(names: Sequence[str] | None) -> list[type[Varied]]:
    """Find assumptions by name; all if none are given.

    Raises
    ------
    InputError
        With one line for every unknown name.
    """
    if names is None:
        return list(ASSUMPTIONS.values())
    unknown = [name for name in names if name not in ASSUMPTIONS]
    if unknown:
        known = ", ".join(ASSUMPTIONS)
        raise InputError(*(f"vary: unknown '{name}'; known are {known}" for name in unknown))
    return [ASSUMPTIONS[name] for name in dict.fromkeys(names)]


def _acts(term: str, column: Column) -> bool:
    """Whether a term is not zero on a column."""
    wave = Wave(steepest_wavenumber(column.horizontal) / 2, column.horizontal)
    layout = layout_of(column)
    build = CATALOGUE[term].build
    return not all(build(Setting(column, air, wave, layout)).is_zero for air in column.airs)
