"""Which step to advise under a limit: whole steps in every interval, accurate and stable itself."""

from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass
from fractions import Fraction
from math import ceil, gcd, lcm
from typing import Final, TypeAlias

from levelstride.results.dataset import Limit
from levelstride.results.wording import limit_reason, number

STRIDE: Final = 0.02
"""Candidates lie at most this share apart [1], those of the first passing gap closer."""

SHORTEST: Final = 1e-5
"""Share of the longest candidate below which the search is given up [1]."""

_LARGEST_DENOMINATOR: Final = 1_000_000


@dataclass(frozen=True, slots=True)
class StepCheck:
    """What one step does to a column.

    Parameters
    ----------
    failure : str or None
        What speaks against the step, in plain words; None if nothing does.
    frequency_error, amplitude_change_per_period : float or None
        Worst of the resolved gravity waves [1]; with a failure only of the waves looked at.
    ambiguous_waves : int
        Of these waves those that belong to no eigenvalue of the step decisively.
    """

    failure: str | None
    frequency_error: float | None = None
    amplitude_change_per_period: float | None = None
    ambiguous_waves: int = 0


Check: TypeAlias = Callable[[float], StepCheck]


@dataclass(frozen=True, slots=True)
class Choice:
    """The step to advise.

    Parameters
    ----------
    step_s : float or None
        The step [s]; None if none can be advised.
    fraction : Fraction or None
        The same exactly, where it divides intervals.
    binding : str
        What binds it.
    check : StepCheck or None
        What it does to the column.
    """

    step_s: float | None
    fraction: Fraction | None
    binding: str
    check: StepCheck | None


def choose_step(
    limit: Limit, *, safety: float, intervals_s: Sequence[float], check: Check
) -> Choice:
    """Find the longest step that is safe, accurate and divides all intervals.

    Parameters
    ----------
    limit : Limit
        The limit; if nothing bites the search starts from the longest step scanned.
    safety : float
        Share of the stable step to use at most [1].
    intervals_s : sequence of float
        Intervals that hold whole steps [s].
    check : callable
        Examines one step, given in s; accuracy need not get better with shorter steps, so
        every candidate is examined itself.

    Returns
    -------
    Choice
        With the reason that binds.
    """
    if limit.unbounded:
        ceiling = Fraction(limit.scanned_to_s)
    elif limit.stable_step_s is None:
        return Choice(None, None, f"no step is stable ({limit_reason(limit)})", None)
    else:
        ceiling = Fraction(safety) * Fraction(limit.stable_step_s)
    if intervals_s:
        return _dividing(limit, common_divisor(intervals_s), ceiling, intervals_s, check)
    return _undivided(limit, float(ceiling), check)


def exact_interval(interval_s: float) -> Fraction:
    """Turn an interval as a user wrote it into the fraction that was meant.

    Examples
    --------
    >>> exact_interval(0.1), exact_interval(1000 / 3), exact_interval(600.0)
    (Fraction(1, 10), Fraction(1000, 3), Fraction(600, 1))
    """
    meant = Fraction(repr(float(interval_s)))
    near = meant.limit_denominator(_LARGEST_DENOMINATOR)
    return near if abs(near - meant) <= meant / 10**14 else meant


def common_divisor(intervals_s: Sequence[float]) -> Fraction:
    """Find the longest step that divides every interval.

    Examples
    --------
    >>> common_divisor([600.0, 900.0]), common_divisor([0.3, 0.2])
    (Fraction(300, 1), Fraction(1, 10))
    """
    exact = [exact_interval(interval) for interval in intervals_s]
    return Fraction(
        gcd(*(interval.numerator for interval in exact)),
        lcm(*(interval.denominator for interval in exact)),
    )


def whole_steps(intervals_s: Sequence[float], step: Fraction | None) -> tuple[int, ...]:
    """Count the steps in every interval.

    Examples
    --------
    >>> whole_steps([600.0, 3600.0], Fraction(12, 5))
    (250, 1500)
    """
    if step is None:
        return ()
    return tuple(int(exact_interval(interval) / step) for interval in intervals_s)


def _dividing(
    limit: Limit, divisor: Fraction, ceiling: Fraction, intervals_s: Sequence[float], check: Check
) -> Choice:
    first = max(1, ceil(divisor / ceiling))
    failure: str | None = None
    before = first - 1
    for k in _growing(first, first / SHORTEST):
        found = check(float(divisor / k))
        if found.failure is None:
            return _best_of_gap(limit, divisor, before, k, found, failure, ceiling, check)
        before, failure = k, found.failure
    named = ", ".join(f"{number(interval, 6)} s" for interval in intervals_s)
    return Choice(None, None, f"no step that divides {named} will do: {failure}", None)


def _growing(first: int, last: float) -> Iterator[int]:
    k = first
    while k <= last:
        yield k
        k = max(k + 1, int(k * (1 + STRIDE)))


def _best_of_gap(
    limit: Limit,
    divisor: Fraction,
    before: int,
    passed: int,
    found: StepCheck,
    failure: str | None,
    ceiling: Fraction,
    check: Check,
) -> Choice:
    """Try what was stepped over between the last failing and the first passing candidate."""
    for k in range(before + 1, passed, max(1, (passed - before) // 20)):
        closer = check(float(divisor / k))
        if closer.failure is None:
            passed, found = k, closer
            break
        failure = closer.failure
    step = divisor / passed
    if failure is not None:
        binding = failure
    elif passed == 1 and step < ceiling:
        binding = f"interval: no longer step divides all of them than {number(float(step), 6)} s"
    else:
        binding = limit_reason(limit)
    return Choice(float(step), step, binding, found)


def _undivided(limit: Limit, ceiling: float, check: Check) -> Choice:
    step, failure = ceiling, None
    while step > SHORTEST * ceiling:
        found = check(step)
        if found.failure is None:
            break
        failure = found.failure
        step *= 1 - STRIDE
    else:
        return Choice(None, None, f"no step will do: {failure}", None)
    if failure is None:
        return Choice(step, None, limit_reason(limit), found)
    for tenths in range(9, 0, -1):
        closer = check(step * (1 + tenths * STRIDE / 10))
        if closer.failure is None:
            step, found = step * (1 + tenths * STRIDE / 10), closer
            break
        failure = closer.failure
    return Choice(step, None, failure, found)
