import pytest

from levelstride.column.column import Advice
from levelstride.splitting.splitting import resolve
from levelstride.studies.cost import step_cost
from levelstride.tableaux.lookup import find


def cost(tableau, split, **weights):
    return step_cost(find(tableau), resolve(split), Advice(**weights))


def test_each_evaluation_needs_one_exchange():
    found = cost("ARS(2,3,2)", "sound+buoyancy")
    assert (found.evaluations, found.solves, found.exchanges) == (3, 2, 3)
    assert found.weighted == 3 * 1.0 + 2 * 1.0 + 3 * 0.5


def test_a_solve_with_the_divergence_in_it_needs_one_more():
    found = cost("ARS(2,3,2)", "sound+buoyancy+divergence")
    assert (found.evaluations, found.solves, found.exchanges) == (3, 2, 5)


def test_without_implicit_terms_nothing_is_solved():
    for tableau, split in (("ARS(2,3,2)", "all-explicit"), ("RK4", "sound")):
        assert cost(tableau, split).solves == 0
    assert cost("RK4", "sound").evaluations == 4


def test_without_explicit_terms_nothing_is_evaluated():
    found = cost("ARS(2,3,2)", "all-implicit")
    assert (found.evaluations, found.solves, found.exchanges) == (0, 2, 2)


def test_with_a_reference_state_what_the_implicit_terms_miss_is_evaluated():
    found = step_cost(find("ARS(2,3,2)"), resolve("all-implicit"), Advice(), reference=True)
    assert (found.evaluations, found.solves, found.exchanges) == (3, 2, 5)


def test_weights_are_the_users():
    found = cost("ars343", "sound", cost_explicit=2.0, cost_solve=3.0, cost_exchange=0.0)
    assert found.weighted == pytest.approx(4 * 2.0 + 3 * 3.0)
