"""Eigenvalues of a step by its written-out system, against those of the full matrix."""

import numpy as np
import pytest

from levelstride.stability.shift_invert import Eigenpair, ShiftInvert
from levelstride.stepper.imex import Stepper
from levelstride.tableaux.lookup import find
from oracles.columns import STAGGERINGS
from oracles.stepping import parts_of, small_column

SPLITS = (
    "all-explicit",
    "sound+buoyancy",
    "sound+slope",
    "sound+buoyancy+divergence+slope+transport+mixing",
    {
        "vertical-pressure-gradient": "implicit",
        "vertical-divergence": "implicit",
        "vertical-diffusion": "after-step-implicit",
        "upper-damping": "after-step-implicit",
        "divergence-damping": "after-step",
        "horizontal-diffusion": "after-step",
    },
)
TABLEAUX = ("ARS(2,3,2)", "ARS(3,4,3)", "ARS(1,1,1)", "UJ3(1,3,2)", "SSP2(3,3,2)", "IMKG242b")


@pytest.fixture(params=SPLITS, ids=str, name="split")
def _split(request):
    return request.param


def sensitivity(matrix):
    """How much eigenvalues move with the entries: condition of the eigenvectors."""
    return np.linalg.cond(np.linalg.eig(matrix)[1])


@pytest.mark.parametrize("staggering", STAGGERINGS)
@pytest.mark.parametrize("kind", ["flat", "slope", "everything"])
@pytest.mark.parametrize("tableau", TABLEAUX)
def test_solves_with_the_shifted_matrix(tableau, kind, staggering, split):
    parts, dt = parts_of(split, small_column(kind, staggering)), 0.3
    matrix = Stepper(parts, find(tableau), dt).matrix()
    shift = 0.4 + 1.1j
    solve = ShiftInvert(parts, find(tableau), dt).solve_at(shift)
    b = np.linspace(1.0, 2.0, matrix.shape[0]) * 1j
    x = solve.matvec(b)
    expected = np.linalg.solve(matrix - shift * np.eye(matrix.shape[0]), b)
    assert np.linalg.norm(x - expected) <= 1e-10 * np.linalg.norm(expected)


@pytest.mark.parametrize("tableau", ["ARS(2,3,2)", "UJ3(1,3,2)", "RK4"])
@pytest.mark.parametrize("kind", ["flat", "slope", "everything"])
def test_the_nearest_eigenvalues_are_those_of_the_full_matrix(tableau, kind, split):
    parts = parts_of(split, small_column(kind, "lorenz"))
    dt = 0.3 if kind == "everything" else 2.0
    matrix = Stepper(parts, find(tableau), dt).matrix()
    dense = np.linalg.eigvals(matrix)
    fastest = dense[np.abs(dense).argmax()]
    shift = fastest * (1 + 1e-3)
    found = ShiftInvert(parts, find(tableau), dt).nearest(shift, 4)
    assert len(found) >= 3  # those of a dense cluster far away may not converge
    size = np.linalg.norm(matrix, 2)
    values = np.array([pair.value for pair in found])
    assert all(pair.residual <= 1e-12 * size for pair in found)
    allowed = max(1e-10 * size, 1e-14 * size * sensitivity(matrix))
    assert np.abs(np.subtract.outer(values, dense)).min(axis=1).max() <= allowed
    # complex pairs are equally far from a real shift
    farness = np.abs(values - shift) - np.sort(np.abs(dense - shift))[: len(found)]
    assert np.abs(farness).max() <= allowed
    assert abs(found[0].value - fastest) <= allowed


def test_a_long_stiff_step_loses_no_digits():
    """F Y would multiply what the solve has made small by a large number."""
    parts = parts_of("sound+buoyancy", small_column("flat", "charney-phillips"), fraction=1e-3)
    dt = 300.0
    found = ShiftInvert(parts, find("ARS(2,3,2)"), dt).nearest(1.0, 3)
    dense = np.linalg.eigvals(Stepper(parts, find("ARS(2,3,2)"), dt).matrix())
    for pair in found:
        assert pair.residual < 1e-13
        assert np.abs(dense - pair.value).min() < 1e-12


def test_a_shift_on_an_eigenvalue_is_no_obstacle():
    parts = parts_of("sound+buoyancy", small_column("flat", "lorenz"))
    finder = ShiftInvert(parts, find("ARS(2,3,2)"), 2.0)
    first = finder.nearest(1.0, 1)[0]
    again = finder.nearest(first.value, 1)[0]
    assert abs(first.value - again.value) < 1e-12


def test_refining_starts_from_a_neighbouring_step():
    parts = parts_of("sound+buoyancy", small_column("slope", "lorenz"))
    scheme = find("ARS(2,3,2)")
    matrix = Stepper(parts, scheme, 2.0).matrix()
    values, vectors = np.linalg.eig(matrix)
    chosen = int(values.imag.argmax())
    start = Eigenpair(values[chosen], vectors[:, chosen], 0.0)
    pair = ShiftInvert(parts, scheme, 2.01).refine(start)
    assert 1e-6 < abs(pair.value - values[chosen]) < 0.1
    dense = np.linalg.eigvals(Stepper(parts, scheme, 2.01).matrix())
    assert np.abs(dense - pair.value).min() < 1e-11
    assert pair.residual < 1e-12
