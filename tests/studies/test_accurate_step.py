import pytest

from examples import records
from levelstride.studies.accurate_step import EdgeCheck, accurate_and_advised
from levelstride.studies.advised_step import StepCheck, choose_step


class Until:
    """A check that fails beyond a step; counts how often it was asked."""

    def __init__(self, edge_s):
        self.edge_s, self.asked = edge_s, []

    def __call__(self, step_s):
        self.asked.append(step_s)
        failure = f"amplitude of gravity waves: {step_s}" if step_s > self.edge_s else None
        return StepCheck(failure, 0.001, -0.01)


def both(check, intervals_s=(), stable_s=10.0):
    limit = records.limit(stable_step_s=stable_s)
    return accurate_and_advised(limit, safety=0.9, intervals_s=intervals_s, check=check)


def test_where_accuracy_does_not_bind_the_stable_step_does():
    check = Until(20.0)
    accurate, advised = both(check)
    assert (accurate.step_s, advised.step_s) == (10.0, 9.0)
    assert accurate.binding.startswith("spectrum")
    assert len(check.asked) == 2


def test_accuracy_may_bind_between_the_advised_and_the_stable_step():
    accurate, advised = both(Until(9.5))
    assert 9.5 / 1.005 < accurate.step_s <= 9.5
    assert advised.step_s == 9.0
    assert accurate.binding.startswith("amplitude of gravity waves")


def test_far_below_the_limit_few_steps_are_looked_at_and_the_answer_is_that_of_advise():
    check = Until(0.613)
    accurate, advised = both(check)
    assert len(check.asked) < 30
    plain = choose_step(
        records.limit(stable_step_s=10.0), safety=0.9, intervals_s=(), check=Until(0.613)
    )
    assert accurate == advised
    assert advised.step_s == pytest.approx(plain.step_s, rel=1e-12)
    assert advised.binding.startswith("amplitude of gravity waves")


def test_with_intervals_the_accurate_step_divides_none():
    accurate, advised = both(Until(3.1), intervals_s=(60.0,))
    assert advised.step_s == 3.0
    assert 3.1 / 1.005 < accurate.step_s <= 3.1


def test_nothing_is_accurate():
    accurate, advised = both(Until(0.0))
    assert accurate.step_s is None
    assert advised.step_s is None
    assert "no step will do" in accurate.binding


def test_no_limit_and_no_stable_step():
    for limit in (records.unbounded(scanned_to_s=110.0), records.limit(stable_step_s=None)):
        accurate, advised = accurate_and_advised(
            limit, safety=0.9, intervals_s=(), check=Until(50.0)
        )
        assert accurate == advised
        assert (accurate.step_s is None) == (not limit.unbounded)


def test_an_edge_is_bisected_once_and_shorter_steps_are_examined_themselves():
    check = Until(1.0)
    edge = EdgeCheck(check)
    assert edge.examine(16.0).failure is not None
    asked = len(check.asked)
    assert edge.examine(8.0).failure is not None
    assert edge.examine(1.1).failure is not None
    assert len(check.asked) == asked
    assert edge.examine(0.77).failure is None
    assert len(check.asked) == asked + 1
