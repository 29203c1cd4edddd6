import pytest

from examples.comparisons import row, unusable
from levelstride.studies.dominance import dominators, equal_cost, most_accurate, with_equal_cost


def beaten(*rows):
    return [[found.row for found in by] for by in dominators(rows)]


def test_a_cheaper_row_that_is_less_accurate_leaves_the_choice():
    assert beaten(row(cost=1000.0, error=0.01), row(cost=4000.0, error=1e-4)) == [[], []]


def test_a_cheaper_and_more_accurate_row_beats_another():
    found = dominators([row(cost=1000.0, error=0.01), row(cost=1500.0, error=0.02)])
    assert [by.row for by in found[1]] == [0]
    assert found[0] == ()


def test_a_shorter_step_of_a_cheap_row_may_beat_a_dear_one():
    (_, (by,)) = dominators([row(cost=1000.0, error=0.01), row(cost=4000.0, error=0.005)])
    assert (by.row, by.step_s, by.cost_per_hour) == (0, 2.0, 4000.0)
    assert by.error == pytest.approx(0.01 / 16)


def test_between_the_points_of_a_curve_it_is_interpolated():
    cost = 1000.0 * 2**0.5
    (_, (by,)) = dominators([row(cost=1000.0, error=0.01), row(cost=cost, error=0.0051)])
    assert by.error == pytest.approx(0.005)
    assert by.step_s == pytest.approx(8.0 / 2**0.5)


def test_an_error_that_does_not_fall_with_the_step_counts_where_it_is_least():
    worse_below = row(cost=1000.0, error=0.01, order=-1)
    (_, (by,)) = dominators([worse_below, row(cost=4000.0, error=0.015)])
    assert (by.step_s, by.error) == (8.0, 0.01)


def test_equal_rows_beat_each_other_neither_way():
    assert beaten(row(), row()) == [[], []]


def test_a_row_that_costs_more_than_is_counted_beats_its_own_kind_only():
    coupled = row(cost=500.0, error=0.001, couples_columns=True)
    other = row(cost=900.0, error=0.005, couples_columns=True)
    assert beaten(coupled, other, row()) == [[], [0], []]


def test_rows_without_a_usable_step_take_no_part():
    assert beaten(row(), unusable(), row(errors=None, step_s=None)) == [[], [], []]


def test_without_packets_single_waves_tell():
    plain = row(cost=1000.0, error=None)
    dearer = row(cost=1500.0, error=None)
    (first, (by,)) = dominators([plain, dearer])
    assert first == ()
    assert (by.row, by.error, by.step_s) == (0, None, 8.0)


def test_the_equal_cost_is_that_of_the_dearest_row_of_sensible_cost():
    rows = [row(cost=1000.0), row(cost=3900.0), row(cost=30000.0), unusable()]
    cost, reason = equal_cost(rows)
    assert cost == 3900.0
    assert reason == "what row 2 costs at its step, the dearest of those up to 4 times the cheapest"
    assert equal_cost(rows[:2])[1] == "what row 2 costs at its step, the dearest"
    assert equal_cost(rows, 77.0) == (77.0, "given")
    assert equal_cost([unusable()])[0] is None


def test_what_a_cost_buys_is_told_within_the_curve_only():
    bought = with_equal_cost(row(cost=1000.0, error=0.01), 2000.0)
    assert bought.error_at_equal_cost == pytest.approx(0.0025)
    assert bought.step_at_equal_cost_s == pytest.approx(4.0)
    for cost in (900.0, 1e6, None):
        assert with_equal_cost(row(cost=1000.0), cost).error_at_equal_cost is None


def test_the_most_accurate_is_looked_for_at_the_equal_cost():
    rows = [with_equal_cost(row(cost=c, error=e), 4000.0) for c, e in ((1e3, 0.1), (2e3, 0.01))]
    assert most_accurate(rows) == 1
    assert most_accurate([row(error=None), row(error=None, couples_columns=True)]) == 0
    assert most_accurate([unusable()]) is None
