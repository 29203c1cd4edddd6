from fractions import Fraction
from math import inf, isfinite, sqrt

import mpmath
import numpy as np
import pytest

from levelstride.tableaux import find, names
from levelstride.tableaux.polynomials import first_positive, square_on_axis

TOLERANCE = Fraction(1, 10**40)
PAIRS = [name for name in names() if find(name).kind == "additive"]


def polynomial(tableau):
    """Stability polynomial of the explicit part in doubles, constant first."""
    stages, coefficients = np.ones(tableau.nstage), [1.0]
    for _ in range(tableau.nstage):
        coefficients.append(tableau.b_explicit @ stages)
        stages = tableau.a_explicit @ stages
    return np.polynomial.Polynomial(coefficients)


@pytest.mark.parametrize("name", names())
def test_imaginary_axis_limit_against_a_scan(name):
    tableau = find(name)
    radius = polynomial(tableau)
    limit = tableau.imaginary_axis_limit
    if limit > 0.0:
        assert np.abs(radius(1j * np.linspace(0.0, limit, 2001))).max() <= 1.0 + 1e-12
        assert abs(radius(1j * limit * (1.0 + 1e-5))) > 1.0
    else:
        assert abs(radius(0.2j)) > 1.0 + 1e-8


@pytest.mark.parametrize("name", names())
def test_real_axis_limit_against_a_scan(name):
    tableau = find(name)
    radius = polynomial(tableau)
    limit = tableau.real_axis_limit
    assert limit > 0.0
    assert np.abs(radius(-np.linspace(0.0, limit, 2001))).max() <= 1.0 + 1e-12
    assert abs(radius(-limit * (1.0 + 1e-5))) > 1.0


@pytest.mark.parametrize("name", PAIRS)
def test_value_at_infinity_against_a_solve_far_out(name):
    tableau = find(name)
    far = implicit_function(tableau, mpmath.mpf(10) ** 25)
    if tableau.value_at_infinity == inf:
        assert abs(far) > 1e6
    else:
        assert float(far.real) == pytest.approx(tableau.value_at_infinity, abs=1e-11)


def implicit_function(tableau, z):
    """R(z) = 1 + z b (I - z A)^-1 1 by forward substitution with 120 digits."""
    with mpmath.workdps(120):
        exact = tableau.exact
        a = [[mpmath.mpf(str(x)) if x else mpmath.mpf(0) for x in map(decimal, r)]
             for r in exact.a_implicit]  # fmt: skip
        stages = []
        for i in range(tableau.nstage):
            known = 1 + z * sum((a[i][j] * stages[j] for j in range(i)), mpmath.mpf(0))
            stages.append(known / (1 - z * a[i][i]))
        weights = [mpmath.mpf(str(decimal(x))) for x in exact.b_implicit]
        return mpmath.mpc(1 + z * sum(b * y for b, y in zip(weights, stages, strict=True)))


def decimal(value):
    from levelstride.tableaux.coefficients import as_decimal

    return as_decimal(value)


@pytest.mark.parametrize("name", PAIRS)
def test_a_stability_against_a_scan_of_the_axis(name):
    tableau = find(name)
    eye, ones = np.eye(tableau.nstage), np.ones(tableau.nstage)
    worst = max(
        abs(1.0 + z * tableau.b_implicit @ np.linalg.solve(eye - z * tableau.a_implicit, ones))
        for z in 1j * np.geomspace(1e-2, 1e3, 2000)
    )
    poles_left = any(d < 0.0 for d in tableau.distinct_diagonals)
    assert tableau.a_stable == (worst <= 1.0 + 1e-9 and not poles_left)


def test_negative_diagonals_have_their_pole():
    for name, stage, value, pole in [
        ("IMKG343a", 2, -1 / 3, -3.0),
        ("IMKG254a", 2, -1 / 2, -2.0),
        ("IMKG254b", 2, -1 / 2, -2.0),
    ]:
        (found,) = find(name).negative_diagonals
        assert (found.stage, found.value, found.pole) == (stage, value, pole)
    assert sum(bool(find(name).negative_diagonals) for name in names()) == 3


def test_first_positive_tells_touching_from_crossing():
    def with_roots(sign, *roots):
        product = np.polynomial.Polynomial.fromroots(roots).coef
        return tuple(sign * Fraction(round(c)) for c in product)

    assert first_positive(with_roots(1, 1, 2), TOLERANCE) == 0.0
    assert first_positive(with_roots(-1, 1, 2), TOLERANCE) == pytest.approx(1.0, rel=1e-15)
    assert first_positive(with_roots(-1, 3, 3, 5, 5), TOLERANCE) == inf
    assert first_positive(with_roots(-1, 2, 2, -1), TOLERANCE) == inf
    assert first_positive(with_roots(1, 2, 2, 5), TOLERANCE) == pytest.approx(5.0, rel=1e-15)
    assert first_positive(with_roots(1, 2, 2, 2), TOLERANCE) == pytest.approx(2.0, rel=1e-12)
    assert first_positive((), TOLERANCE) == inf
    assert first_positive((Fraction(0), Fraction(-1)), TOLERANCE) == inf
    assert first_positive((Fraction(0), Fraction(1)), TOLERANCE) == 0.0


def test_square_on_axis_of_the_exponential_series():
    squared = square_on_axis((Fraction(1), Fraction(1), Fraction(1, 2)))
    assert squared == (1, 0, Fraction(1, 4))


def test_limits_are_as_sharp_as_doubles():
    assert find("ARS(2,2,2)").imaginary_axis_limit == 0.0
    assert find("ARS(2,3,2)").imaginary_axis_limit == pytest.approx(sqrt(3.0), rel=1e-15)
    assert find("RK4").imaginary_axis_limit == pytest.approx(sqrt(8.0), rel=1e-15)
    assert find("RK4").value_at_infinity == inf
    assert all(isfinite(find(name).imaginary_axis_limit) for name in names())
