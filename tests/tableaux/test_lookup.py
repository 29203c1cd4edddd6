import contextlib
import pickle
from dataclasses import replace
from importlib import resources

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from levelstride.errors import InputError
from levelstride.tableaux import find, names
from levelstride.tableaux.lookup import bare


def test_library_is_complete():
    kinds = [find(name).kind for name in names()]
    assert kinds.count("additive") == 61
    assert kinds.count("explicit") == 13
    assert all(find(name).source for name in names())


def test_library_file_travels_with_the_package():
    assert resources.files("levelstride.tableaux").joinpath("library.toml").is_file()


@pytest.mark.parametrize("name", names())
def test_every_tableau_answers_to_name_alias_and_bare_form(name):
    tableau = find(name)
    assert tableau.name == name
    for form in (name, *tableau.aliases):
        assert find(form) is tableau
        assert find(bare(form)) is tableau


@pytest.mark.parametrize(
    ("form", "name"),
    [
        ("ars343", "ARS(3,4,3)"),
        ("ARS 343", "ARS(3,4,3)"),
        ("ssp2332", "SSP2(3,3,2)"),
        ("ssp2332b", "SSP2(3,3,2)b"),
        ("bhr553", "BHR(5,5,3)"),
        ("bhr553star", "BHR(5,5,3)*"),
        ("imex euler", "ARS(1,1,1)"),
        ("ssprk33", "SSPRK(3,3)"),
        ("ark436l2sa", "ARK4(3)6L[2]SA"),
    ],
)
def test_bare_forms(form, name):
    assert find(form).name == name


@pytest.mark.parametrize(
    ("wrong", "nearest"), [("ars344", "ARS(3,4,3)"), ("imkg252c", "IMKG252a"), ("rk5", "RK")]
)
def test_unknown_name_gives_the_nearest(wrong, nearest):
    with pytest.raises(InputError) as error:
        find(wrong)
    (line,) = error.value.problems
    assert repr(wrong) in line
    assert nearest in line


@given(st.text(max_size=200))
def test_any_name_is_found_or_refused(name):
    with contextlib.suppress(InputError):
        find(name)


def test_a_bare_form_that_fits_several_is_reported(user_pair):
    one, two = user_pair("Two(1)"), user_pair("two-1")
    assert find("Two(1)", among=(one, two)) is one
    with pytest.raises(InputError, match=r'fits several.*"Two\(1\)", "two-1"'):
        find("TWO1", among=(one, two))


@pytest.fixture
def user_pair():
    return lambda name: replace(find("ARS(1,1,1)"), name=name, aliases=())


def test_a_record_is_frozen_and_travels_to_other_processes():
    tableau = find("ARS(2,3,2)")
    with pytest.raises(AttributeError):
        tableau.order = 3
    with pytest.raises(ValueError, match="read-only"):
        tableau.a_explicit[0, 0] = 1.0
    again = pickle.loads(pickle.dumps(tableau))
    assert again.name == tableau.name
    assert np.array_equal(again.a_implicit, tableau.a_implicit)
    assert again.imaginary_axis_limit == tableau.imaginary_axis_limit


def test_explicit_methods_treat_both_parts_alike():
    tableau = find("RK4")
    assert tableau.implicit_solves == 0
    assert tableau.distinct_diagonals == ()
    assert np.array_equal(tableau.a_explicit, tableau.a_implicit)
    assert np.array_equal(tableau.b_explicit, tableau.b_implicit)


def test_distinct_diagonals():
    assert find("ARS(3,4,3)").distinct_diagonals == (pytest.approx(0.435866521508459),)
    assert find("ARS(1,1,1)").distinct_diagonals == (1.0,)
    assert find("SSP2(3,3,2)").distinct_diagonals == (0.25, 1 / 3)
