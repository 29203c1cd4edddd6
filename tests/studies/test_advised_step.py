from fractions import Fraction

import pytest
from hypothesis import given
from hypothesis import strategies as st

from examples import records
from levelstride.studies.advised_step import (
    StepCheck,
    choose_step,
    common_divisor,
    exact_interval,
    whole_steps,
)

FINE = StepCheck(None, 0.001, -0.01)


def accept(step_s):
    return FINE


def only(condition, reason="amplitude of gravity waves"):
    return lambda step_s: FINE if condition(step_s) else StepCheck(f"{reason} at {step_s:g}")


def choose(of, intervals=(), check=accept, safety=0.9):
    return choose_step(of, safety=safety, intervals_s=intervals, check=check)


def test_without_intervals_it_is_safety_times_the_stable_step():
    choice = choose(records.limit(stable_step_s=27.5))
    assert choice.step_s == pytest.approx(24.75, rel=1e-15)
    assert choice.fraction is None
    assert choice.binding == "spectrum: sound wave of 6.0 km, layers 0-3 (0-140 m)"


def test_with_intervals_it_divides_all_of_them():
    choice = choose(records.limit(stable_step_s=27.5), (600.0, 900.0))
    assert choice.fraction == Fraction(300, 13)  # 300/12 = 25 is above 24.75
    assert choice.step_s == 300 / 13
    assert whole_steps((600.0, 900.0), choice.fraction) == (26, 39)
    assert choice.binding.startswith("spectrum")


def test_a_step_equal_to_the_safe_one_is_taken():
    choice = choose(records.limit(stable_step_s=48.0), (600.0,), safety=0.5)
    assert choice.fraction == 24


def test_the_interval_binds_when_it_is_shorter_than_the_safe_step():
    choice = choose(records.limit(stable_step_s=27.5), (20.0, 15.0))
    assert choice.fraction == 5
    assert choice.binding.startswith("interval")


def test_accuracy_that_is_not_monotone_is_asked_at_every_candidate():
    asked = []

    def check(step_s):
        asked.append(step_s)
        return FINE if abs(step_s - 300 / 14) < 1e-9 or step_s < 10 else StepCheck("amplitude")

    choice = choose(records.limit(stable_step_s=27.5), (300.0,), check)
    assert choice.fraction == Fraction(300, 14)
    assert asked == [300 / 13, 300 / 14]
    assert choice.binding == "amplitude"


def test_candidates_close_together_are_searched_to_the_longest_that_passes():
    choice = choose(records.limit(stable_step_s=1.0), (3600.0,), only(lambda s: s < 0.85))
    k = int(3600 / choice.fraction)
    assert 3600 / k < 0.85
    assert 3600 / k > 0.85 * (1 - 0.002)
    assert choice.binding.startswith("amplitude")


def test_without_intervals_accuracy_shortens_the_step_by_little_steps():
    choice = choose(records.limit(stable_step_s=27.5), check=only(lambda s: s < 20))
    assert 20 * 0.997 <= choice.step_s < 20
    assert choice.binding.startswith("amplitude")


def test_nothing_is_advised_where_no_step_is_accurate():
    for intervals in ((), (600.0,)):
        choice = choose(records.limit(), intervals, only(lambda s: False))
        assert choice.step_s is None
        assert "amplitude" in choice.binding


def test_nothing_is_advised_where_no_step_is_stable():
    choice = choose(records.limit(stable_step_s=None), (600.0,))
    assert (choice.step_s, choice.fraction, choice.check) == (None, None, None)
    assert choice.binding.startswith("no step is stable")


def test_where_nothing_bites_the_longest_step_scanned_is_the_start():
    choice = choose(records.unbounded(scanned_to_s=110.0))
    assert choice.step_s == 110.0
    assert choice.binding == "nothing bites up to 110 s"
    choice = choose(records.unbounded(scanned_to_s=110.0), (600.0,), only(lambda s: s < 50))
    assert choice.fraction == Fraction(600, 13)
    assert choice.binding.startswith("amplitude")


def test_intervals_are_what_the_user_meant():
    assert exact_interval(0.3) == Fraction(3, 10)
    assert exact_interval(1e9) == 10**9
    assert common_divisor([0.3, 0.2]) == Fraction(1, 10)
    assert common_divisor([400 / 3, 200.0]) == Fraction(200, 3)


intervals = st.lists(
    st.fractions(min_value=Fraction(1, 2), max_value=7200, max_denominator=60).map(float),
    min_size=1,
    max_size=3,
)


@given(intervals, st.floats(0.01, 500.0), st.floats(0.3, 1.0), st.floats(0.2, 1.0))
def test_every_interval_holds_whole_steps_and_the_step_is_safe_and_accurate(
    intervals_s, stable_s, safety, accurate_share
):
    of = records.limit(stable_step_s=stable_s)
    bound = accurate_share * stable_s
    choice = choose(of, intervals_s, only(lambda s: s <= bound), safety)
    assert choice.step_s <= min(bound, safety * stable_s * (1 + 1e-15))
    counts = whole_steps(intervals_s, choice.fraction)
    for interval, count in zip(intervals_s, counts, strict=True):
        assert count * choice.fraction == exact_interval(interval)
        assert count * choice.step_s == pytest.approx(interval, rel=1e-14)
