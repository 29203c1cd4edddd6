"""Symbols of the horizontal schemes and weights of the vertical derivatives."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from levelstride.column.column import Horizontal
from levelstride.operator.transport import derivative
from levelstride.operator.wave import Wave
from oracles.columns import ADVECTIONS, GRADIENTS, VERTICAL_ADVECTIONS, seeds

# weights on the points i-3 .. i+3 for wind from low to high, times dx
STENCILS = {
    "centred-2": np.array([0, 0, -1, 0, 1, 0, 0]) / 2,
    "centred-4": np.array([0, 1, -8, 0, 8, -1, 0]) / 12,
    "centred-6": np.array([-1, 9, -45, 0, 45, -9, 1]) / 60,
    "upwind-3": np.array([0, 1, -6, 3, 2, 0, 0]) / 6,
    "upwind-5": np.array([-2, 15, -60, 20, 30, -3, 0]) / 60,
}
ORDERS = {"centred-2": 2, "centred-4": 4, "centred-6": 6, "upwind-3": 3, "upwind-5": 5}
angles = st.floats(0.01, np.pi)


@given(angle=angles, wind=st.floats(-60, 60), directions=st.sampled_from([1, 2]))
@pytest.mark.parametrize("scheme", ADVECTIONS)
def test_advection_symbol_is_the_sum_over_the_stencil(scheme, angle, wind, directions):
    dx = 2500.0
    wave = Wave(angle / dx, Horizontal(dx, "exact", directions, None, scheme))
    component = wind / np.sqrt(directions)
    points = np.arange(-3, 4)
    stencil = STENCILS[scheme] if wind >= 0 else -STENCILS[scheme][::-1]
    along = -directions * component * (stencil @ np.exp(1j * points * angle)) / dx
    assert wave.advection(np.array([wind]))[0] == pytest.approx(along, abs=1e-15, rel=1e-11)
    assert wave.advection(np.array([wind]))[0].real <= 1e-16


@pytest.mark.parametrize("scheme", ADVECTIONS)
def test_advection_has_the_order_of_its_name(scheme):
    errors = []
    for angle in (0.4, 0.2):
        symbol = Wave(angle, Horizontal(1.0, "exact", 1, None, scheme)).advection(np.array([1.0]))[
            0
        ]
        errors.append(abs(symbol + 1j * angle))
    assert np.log2(errors[0] / errors[1]) == pytest.approx(ORDERS[scheme] + 1, abs=0.1)


@given(angle=angles, directions=st.sampled_from([1, 2]))
@pytest.mark.parametrize("gradient", GRADIENTS)
def test_gradient_symbol_is_the_difference_of_neighbours(gradient, angle, directions):
    dx, at = 400.0, lambda points: np.exp(1j * points * angle)
    largest = 6e-3 if gradient == "given" else None
    wave = Wave(angle / dx, Horizontal(dx, gradient, directions, largest))
    expected = {
        "staggered": (at(0.5) - at(-0.5)) / dx,
        "centred-2": (at(1) - at(-1)) / (2 * dx),
        "centred-4": (8 * (at(1) - at(-1)) - (at(2) - at(-2))) / (12 * dx),
        "exact": 1j * angle / dx,
        "given": 6e-3j * angle / np.pi,
    }[gradient]
    assert 1j * wave.gradient == pytest.approx(np.sqrt(directions) * expected, abs=1e-16)
    average = (at(0.5) + at(-0.5)).real / 2 if gradient == "staggered" else 1.0
    assert wave.slope_average == pytest.approx(average, abs=1e-15)
    second = (angle / dx) ** 2 if gradient == "exact" else (2 - at(1) - at(-1)).real / dx**2
    assert wave.laplacian == pytest.approx(directions * second, rel=1e-9)


@settings(deadline=None)
@given(seed=seeds, scheme=st.sampled_from(VERTICAL_ADVECTIONS))
def test_derivative_is_exact_for_polynomials_of_its_degree(seed, scheme):
    rng = np.random.default_rng(seed)
    n = int(rng.integers(5, 14))
    points = np.cumsum(np.exp(rng.uniform(np.log(0.1), np.log(3), n)))
    speed = rng.normal(size=n)
    rows, columns, weights = derivative(points, speed, scheme, (1.0, 2.0))
    full = np.zeros((n, n))
    np.add.at(full, (rows, columns), weights)
    inner = slice(1, n - 1)
    assert np.abs(full.sum(axis=1)).max() <= 1e-11 * np.abs(full).max()
    tested = []
    for i in range(n):
        towards_wall = (i < 2) if speed[i] >= 0 else (i > n - 3)
        at_wall = i in (0, n - 1)
        if scheme == "upwind-3" and not (towards_wall or at_wall):
            tested.append((i, 3))
        elif scheme == "centred" and not at_wall:
            tested.append((i, 2))
        elif not (at_wall and towards_wall):
            tested.append((i, 1 if scheme != "centred" else 0))
    for i, degree in tested:
        for power in range(degree + 1):
            values = (points - points[i]) ** power
            expected = 1.0 if power == 1 else 0.0
            scale = np.abs(full[i]) @ np.abs(values)
            assert full[i] @ values == pytest.approx(expected, abs=1e-12 * max(scale, 1.0))
    assert np.all(np.isfinite(full[inner]))


def test_outermost_value_goes_on_beyond_the_ends():
    points = np.array([1.0, 2.0, 4.0])
    for scheme in ("upwind-1", "upwind-3"):
        rows, columns, weights = derivative(points, np.array([1.0, 1, 1]), scheme, (0.5, 0.5))
        assert weights[rows == 0].sum() == 0.0
        assert set(columns[rows == 0]) == {0}
    rows, columns, weights = derivative(points, np.zeros(3), "centred", (0.5, 0.5))
    full = np.zeros((3, 3))
    np.add.at(full, (rows, columns), weights)
    # parabola through (0.5, q0), (1, q0), (2, q1): slope at 1 by its divided differences
    assert full[0] == pytest.approx([-1 / 3, 1 / 3, 0])
