"""Published figures of time schemes against what the coefficients give."""

from math import inf, sqrt

import numpy as np
import pytest

from levelstride.tableaux import find, names
from levelstride.tableaux.coefficients import evaluate


@pytest.mark.parametrize("name", names())
def test_figures_stated_beside_the_source(name):
    """Every figure of the library file, whose `source` names the paper."""
    tableau = find(name)
    claims = tableau.declared
    limits = ("imaginary_axis_limit", "value_at_infinity")
    for key in limits:
        if key in claims:
            stated = inf if claims[key] == "inf" else float(evaluate(claims[key]))
            assert getattr(tableau, key) == pytest.approx(stated, rel=1e-13, abs=1e-13)
    for key in ("implicit_solves", "explicit_evaluations", "stiffly_accurate",
                "globally_stiffly_accurate", "a_stable", "l_stable"):  # fmt: skip
        if key in claims:
            assert getattr(tableau, key) == claims[key], key
    assert tableau.nstage == claims["stages"]
    assert "imaginary_axis_limit" in claims
    if tableau.kind == "additive":
        assert (len(tableau.distinct_diagonals) == 1) == claims["singly_diagonal"]
        assert {"implicit_solves", "explicit_evaluations", "value_at_infinity"} <= set(claims)


@pytest.mark.parametrize(
    ("name", "limit"),
    [
        ("SSPRK(3,3)", sqrt(3.0)),
        ("RK4", 2.0 * sqrt(2.0)),
        ("Kinnmark-Gray 5-stage, order 3", sqrt(15.0)),
        ("Kinnmark-Gray 5-stage, linear order 3", sqrt(15.0)),
        ("Kinnmark-Gray 5-stage, order 2", 4.0),
        ("Kinnmark-Gray 3-stage, order 2", 2.0),
        ("forward Euler", 0.0),
        ("Heun RK2", 0.0),
        ("ARS(2,2,2)", 0.0),
        ("ARS(2,3,2)", sqrt(3.0)),
        ("ARS(3,4,3)", 2.0 * sqrt(2.0)),
    ],
)
def test_imaginary_axis_limits_of_the_textbooks(name, limit):
    """Kinnmark and Gray (1984), Math. Comput. Simulation 26, 84-92 and 181-188: S - 1 for order 2
    with S odd, sqrt((S - 1)^2 - 1) for order 3. RK3, RK4: Hairer and Wanner (1996), section IV.2.
    """
    assert find(name).imaginary_axis_limit == pytest.approx(limit, rel=1e-14)


@pytest.mark.parametrize(
    ("name", "limit"),
    [("forward Euler", 2.0), ("Heun RK2", 2.0), ("SSPRK(3,3)", 2.512745), ("RK4", 2.785294)],
)
def test_real_axis_limits_of_the_textbooks(name, limit):
    """Hairer and Wanner (1996), Solving Ordinary Differential Equations II, section IV.2."""
    assert find(name).real_axis_limit == pytest.approx(limit, abs=5e-7)


def test_digits_printed_for_the_four_stage_third_order_pair():
    """Ascher, Ruuth, Spiteri (1997), Appl. Numer. Math. 25, 151-167, section 2.7: ten digits."""
    tableau = find("ARS(3,4,3)")
    explicit = [
        [0.0, 0.0, 0.0, 0.0],
        [0.4358665215, 0.0, 0.0, 0.0],
        [0.3212788860, 0.3966543747, 0.0, 0.0],
        [-0.105858296, 0.5529291479, 0.5529291479, 0.0],
    ]
    weights = [0.0, 1.208496649, -0.644363171, 0.4358665215]
    assert np.allclose(tableau.a_explicit, explicit, rtol=0.0, atol=2e-9)
    assert np.allclose(tableau.b_explicit, weights, rtol=0.0, atol=1e-9)
    assert tableau.c_implicit[2] == pytest.approx(0.7179332608, abs=1e-10)
    assert tableau.value_at_infinity == 0.0


def test_diagonal_of_the_two_stage_second_order_pair():
    """Ascher, Ruuth, Spiteri (1997), section 2.6: gamma = (2 - sqrt 2)/2, delta = 1 - 1/2gamma."""
    tableau = find("ARS(2,2,2)")
    gamma = (2.0 - sqrt(2.0)) / 2.0
    assert tableau.distinct_diagonals == (pytest.approx(gamma, rel=1e-15),)
    assert tableau.b_explicit[0] == pytest.approx(1.0 - 1.0 / (2.0 * gamma), rel=1e-14)


def test_diagonal_of_the_fourth_order_pair():
    """Kennedy, Carpenter (2003), Appl. Numer. Math. 44, 139-181: gamma = 1/4, stiffly accurate."""
    tableau = find("ARK4(3)6L[2]SA")
    assert tableau.distinct_diagonals == (0.25,)
    assert tableau.stiffly_accurate
    assert tableau.l_stable
