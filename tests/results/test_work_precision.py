"""Reading a work-precision diagram: error at a cost, cost of an error."""

import pytest

from levelstride.results.work_precision import WorkPoint, WorkPrecision


def point(step_s, error):
    return WorkPoint(
        step_s=step_s, steps_per_hour=3600.0 / step_s, error=error, vertical_courant=1.0,
        cost_per_hour=100.0 / step_s, explicit_evaluations_per_hour=0.0, solves_per_hour=0.0,
        exchanges_per_hour=0.0, measured_s_per_hour=0.0, round_off=1e-12,
    )  # fmt: skip


def diagram(*errors):
    return WorkPrecision(
        tableau="t", split="s", hours=1.0, stable_step_s=8.0,
        points=tuple(point(8.0 / 2**k, error) for k, error in enumerate(errors)),
        linear_order=2, declared_order=2, packets=(),
    )  # fmt: skip


def test_errors_lie_between_points_on_logarithmic_axes():
    found = diagram(1e-2, 2.5e-3, 6.25e-4)
    assert found.error_at_cost(12.5) == pytest.approx(1e-2)
    assert found.error_at_cost(50.0) == pytest.approx(6.25e-4)
    assert found.error_at_cost(12.5 * 2**0.5) == pytest.approx(5e-3)
    assert found.error_at_step(8.0 / 2**1.5) == pytest.approx(1.25e-3)


@pytest.mark.parametrize("cost", [12.4, 50.1, 0.0, -1.0])
def test_outside_the_points_there_is_no_error(cost):
    assert diagram(1e-2, 2.5e-3, 6.25e-4).error_at_cost(cost) is None


def test_a_cost_keeps_the_error_from_there_on():
    found = diagram(1e-2, 2.5e-3, 6.25e-4)
    assert found.cost_at_error(5e-3) == pytest.approx(12.5 * 2**0.5)
    assert found.cost_at_error(0.1) == pytest.approx(12.5)
    assert found.cost_at_error(1e-4) is None
    bumpy = diagram(1e-3, 1e-2, 1e-4)
    assert bumpy.cost_at_error(1e-3) == pytest.approx(25 * 2**0.5)


def test_errors_of_zero_and_single_points_do_no_harm():
    found = diagram(1e-2, 0.0)
    assert found.error_at_cost(25.0) == 0.0
    assert found.error_at_cost(20.0) == 1e-2
    assert found.cost_at_error(1e-3) == pytest.approx(25.0)
    assert diagram(1e-2).error_at_cost(12.5) == 1e-2
    assert diagram(1e-2).error_at_cost(13.0) is None


def test_points_at_round_off_are_told():
    assert point(1.0, 1e-12).at_round_off
    assert not point(1.0, 2e-12).at_round_off
