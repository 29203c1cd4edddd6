"""Only what a later stage or the result uses is evaluated."""

import numpy as np
import pytest

from levelstride import tableaux
from levelstride.stepper.plan import NONE, Plan
from oracles.schemes import Handmade, backward_euler


@pytest.mark.parametrize("name", tableaux.names())
def test_counts_never_exceed_those_of_the_tableau(name):
    tableau = tableaux.find(name)
    plan = Plan(tableau, has_slow=True, has_fast=True)
    assert plan.explicit_evaluations == tableau.explicit_evaluations
    assert plan.solves <= tableau.implicit_solves
    if tableau.kind == "explicit":
        assert plan.solves == plan.fast_evaluations == 0


def test_stage_that_nothing_uses_is_left_out():
    a_explicit = np.array([[0.0, 0, 0], [1, 0, 0], [0.5, 0, 0]])
    a_implicit = np.array([[0.0, 0, 0], [0, 1, 0], [0, 0, 0.5]])
    scheme = Handmade(a_explicit, a_implicit, np.array([1.0, 0, 0]), np.array([0.0, 0, 1]))
    plan = Plan(scheme, has_slow=True, has_fast=True)
    assert plan.used.tolist() == [True, False, True]
    assert plan.diagonals.tolist() == [0.5]
    assert plan.slow_slot.tolist() == [0, NONE, NONE]
    assert plan.fast_slot.tolist() == [NONE, NONE, 1]


def test_last_stage_is_the_result_where_both_tables_end_on_it():
    plan = Plan(backward_euler(), has_slow=True, has_fast=True)
    assert plan.result_stage == 1
    assert plan.fast_slot.tolist() == [NONE, NONE]
    assert plan.solves == 1


def test_absent_parts_cost_nothing():
    tableau = tableaux.find("ARS(3,4,3)")
    without_fast = Plan(tableau, has_slow=True, has_fast=False)
    assert without_fast.solves == without_fast.fast_evaluations == 0
    without_slow = Plan(tableau, has_slow=False, has_fast=True)
    assert without_slow.explicit_evaluations == 0
    assert without_slow.solves == 3


def test_equal_diagonal_entries_share_a_factorisation():
    plan = Plan(tableaux.find("ARS(3,4,3)"), has_slow=True, has_fast=True)
    assert plan.diagonals.size == 1
    assert plan.solver.tolist() == [NONE, 0, 0, 0]


def test_weights_of_a_solved_stage_carry_no_step():
    scheme = Handmade(
        np.array([[0.0, 0], [1, 0]]),
        np.array([[0.25, 0], [0.5, 0.25]]),
        np.array([0.5, 0.5]),
        np.array([0.5, 0.5]),
    )
    schedule = Plan(scheme, has_slow=True, has_fast=True).schedule(10.0)
    assert schedule.first.tolist() == [0, 0, 2, 6]
    assert schedule.weight.tolist() == [10.0, 2.0, 5.0, 5.0, 2.0, 2.0]
