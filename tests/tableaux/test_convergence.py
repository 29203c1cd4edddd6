import pytest

from levelstride.tableaux import audit, find, names
from oracles.stage_loop import linear_pair, measured_order, nonlinear_pair


@pytest.fixture(scope="module")
def linear():
    return linear_pair()


@pytest.fixture(scope="module")
def nonlinear():
    return nonlinear_pair()


@pytest.mark.parametrize("name", names())
def test_errors_fall_with_the_audited_orders(name, linear, nonlinear):
    """Measured slopes of a hand-written stage loop on parts that do not commute."""
    tableau = find(name)
    report = audit(tableau)
    steps = 16 if tableau.order >= 4 else 32
    assert measured_order(tableau, linear, steps) == pytest.approx(report.linear_order, abs=0.25)
    slope = measured_order(tableau, nonlinear, steps)
    assert slope == pytest.approx(report.nonlinear_order, abs=0.25)
