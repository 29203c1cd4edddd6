"""What a calibration found, in a sentence or two."""

from collections.abc import Sequence
from typing import Protocol

from levelstride.column.column import Column
from levelstride.results.calibration import Assumption, Calibration
from levelstride.results.wording import number, percent


class Seen(Protocol):
    """Steps seen on a column."""

    @property
    def column(self) -> Column:
        """The column."""

    @property
    def held_s(self) -> tuple[float, ...]:
        """Steps that held [s]."""

    @property
    def failed_s(self) -> tuple[float, ...]:
        """Steps that failed [s]."""


def contradictions(observed: Sequence[Seen]) -> tuple[str, ...]:
    """Name columns on which a step held that is not shorter than one that failed."""
    return tuple(
        f"{one.column.source}: {number(max(one.held_s))} s held and {number(min(one.failed_s))} s "
        "failed"
        for one in observed
        if one.held_s and one.failed_s and max(one.held_s) >= min(one.failed_s)
    )


def verdict(found: Calibration, told: Sequence[str]) -> str:
    """Say what a calibration comes to."""
    if told:
        return (
            f"the observations contradict one another ({'; '.join(told)}), so that no assumption "
            "explains them and there is no safety factor"
        )
    return f"{_gap(found)}; {_factor(found)}"


def consistent_values(one: Assumption) -> str:
    """List what agrees of an assumption, ranges where it is a number."""
    if one.trials and all(trial.consistent for trial in one.trials):
        return "all of it"
    if not one.ranges:
        return ", ".join(one.consistent)
    return ", ".join(
        f"{_shown(r.from_value)} {one.unit}".strip()
        if r.from_value == r.to_value
        else f"{_shown(r.from_value)} to {_shown(r.to_value)} {one.unit}".strip()
        for r in one.ranges
    )


def _shown(value: float) -> str:
    return number(value, 6 if value >= 1e4 else 4)


def _gap(found: Calibration) -> str:
    explaining = [one for one in found.assumptions if one.explains]
    named = "; ".join(f"{one.name} ({consistent_values(one)})" for one in explaining)
    if found.agrees:
        text = "linear theory agrees with every observation, there is no gap to explain"
        return f"{text}; it agrees as well with {named}" if explaining else text
    if not explaining:
        return "the observations contradict every assumption that was varied, each by itself"
    each = ", each by itself" if len(explaining) > 1 else ""
    return f"the gap is explained by {named}{each}"


def _factor(found: Calibration) -> str:
    lower, upper = found.factor_lower, found.factor_upper
    if lower is not None and upper is not None and lower >= upper:
        return (
            f"no one safety factor fits: {percent(lower, 3)} of the stable step held on one column "
            f"and {percent(upper, 3)} failed on another"
        )
    bounds = []
    if lower is not None:
        bounds.append(f"at least {percent(lower, 3)}")
    if upper is not None:
        bounds.append(f"below {percent(upper, 3)}")
    if not bounds:
        return "there is no safety factor, as no observed column has a stable step to compare with"
    return f"the model carries {' and '.join(bounds)} of the stable step"
