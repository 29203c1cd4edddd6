"""Baselines on oscillations of one unknown, against textbook formulas written out here.

Sources, with y = omega dt:

- leapfrog with the filter of Robert and Asselin, coefficient f:
  A = f + iy +- sqrt((1 - f)^2 - y^2), stable up to y = sqrt((1 - f)/(1 + f)); textbook (Durran
  2010, Numerical Methods for Fluid Dynamics, chapter 2; the second follows from the first);
- leapfrog with trapezoidal fast terms, frequencies s (slow) and h (fast), unfiltered:
  A^2 (1 - ih) - 2is A - (1 + ih) = 0, hence |A| = 1 exactly where s^2 <= 1 + h^2; textbook. Neutral
  thus for |s| <= 1, and for |s| <= |h| whatever the step;
- trapezoid off-centred by b over 2 dt: |A|^2 = (1 + (1-b)^2 y^2)/(1 + (1+b)^2 y^2); textbook;
- second-order backward difference on the negative real axis: A-stable, factors
  (2 +- sqrt(1 - 2x))/(3 + 2x) for q' = -(x/dt) q; textbook (Hairer, Wanner 1996, section V.1);
- forward-backward on a sound wave: stable up to omega h = 2; textbook (Durran 2010, chapter 3);
- order conditions of linear multistep pairs: textbook (Hairer, Norsett, Wanner 1993, III.2).
"""

import numpy as np
import pytest
from scipy.linalg import expm

from levelstride.operator.bands import Banded
from levelstride.operator.state import Layout
from levelstride.schemes import find_scheme
from levelstride.schemes.lookup import PAIRS
from levelstride.schemes.program import run, scalar_factors
from levelstride.splitting.parts import Parts
from levelstride.stepper.imex import Stepper
from oracles.written_steps import time_split

Y = np.linspace(0.01, 0.99, 30)


def leapfrog(b=0.0, f=0.0, s=1.0):
    return find_scheme("leapfrog", {"off_centring": b, "filter": f, "filter_share": s}).program


def sorted_factors(program, **rates):
    found = scalar_factors(program, **rates)
    return np.take_along_axis(found, np.argsort(-found.real, axis=-1), axis=-1)


@pytest.mark.parametrize("f", [0.0, 0.05, 0.1, 0.2])
def test_filtered_leapfrog_has_the_textbook_amplification(f):
    y = Y[(1 - f) > Y]
    root = np.sqrt((1 - f) ** 2 - y**2)
    found = sorted_factors(leapfrog(f=f), slow=1j * y)
    assert np.abs(found[:, 0] - (f + 1j * y + root)).max() < 1e-12
    assert np.abs(found[:, 1] - (f + 1j * y - root)).max() < 1e-12
    limit = find_scheme("leapfrog", {"filter": f, "off_centring": 0.0}).imaginary_axis_limit
    assert limit == pytest.approx(np.sqrt((1 - f) / (1 + f)), rel=1e-6)


def test_two_frequencies_are_neutral_where_the_textbook_says():
    s, h = (grid.ravel() for grid in np.meshgrid(np.linspace(-3, 3, 61), np.linspace(-4, 4, 41)))
    found = sorted_factors(leapfrog(), slow=1j * s, fast=1j * h)
    root = np.sqrt((1 + h**2 - s**2).astype(complex))
    for sign in (1, -1):
        closed = (1j * s + sign * root) / (1 - 1j * h)
        assert np.abs(found - closed[:, None]).min(axis=1).max() < 1e-7
    inside = (np.abs(s) <= 1) | (np.abs(s) <= np.abs(h))
    assert np.abs(np.abs(found[inside]) - 1).max() < 1e-7
    beyond = s**2 > 1.01 + h**2
    assert np.abs(found[beyond]).max(axis=1).min() > 1.05


@pytest.mark.parametrize("b", [0.0, 0.1, 0.5, 1.0])
def test_off_centring_damps_as_the_closed_form_says(b):
    y = np.geomspace(1e-2, 1e3, 40)
    found = np.abs(scalar_factors(leapfrog(b=b), slow=0 * y, fast=1j * y))
    # over 2 dt, the same for the physical and the computational mode
    squared = (1 + (1 - b) ** 2 * y**2) / (1 + (1 + b) ** 2 * y**2)
    assert np.abs(found**4 / squared[:, None] - 1).max() < 1e-9


@pytest.mark.parametrize("f", [0.05, 0.2])
def test_the_filter_with_equal_shares_conserves_the_mean_of_three_levels(f):
    # Williams (2009): with share 1/2 the three levels q_n-1, q_n, q_n+1 keep their sum
    program = leapfrog(f=f, s=0.5)
    plain = leapfrog()

    def tendency(part, y):
        return 0.3j * y if part == "slow" else None

    for vector in np.eye(2):
        start = [np.array([v], dtype=complex) for v in vector]
        sums = []
        for one in (plain, program):
            new = run(one, start, tendency, lambda a, y: y.copy())
            sums.append(sum(new)[0])
        assert abs(sums[0] - sums[1]) < 1e-14


def test_backward_difference_on_the_real_axis():
    x = np.geomspace(1e-3, 1e6, 50)
    found = sorted_factors(find_scheme("sbdf2").program, slow=0 * x, fast=-x)
    root = np.sqrt((1 - 2 * x).astype(complex))
    closed = np.stack([2 + root, 2 - root], axis=1) / (3 + 2 * x)[:, None]
    for k in (0, 1):
        assert np.abs(found - closed[:, [k]]).min(axis=1).max() < 1e-7
    assert np.abs(found).max() < 1
    assert np.abs(found[-1]).max() < 2e-3


@pytest.mark.parametrize("name", PAIRS)
def test_pairs_keep_their_order_conditions(name):
    pair = PAIRS[name]
    old = np.array(pair.old)
    assert old.sum() == pytest.approx(1, abs=1e-14)
    for table, first in ((pair.slow, 0), (pair.fast, 1)):
        weights = np.array(table)
        at = first - np.arange(weights.size)
        for k in (1, 2):
            # sum old_j (-j)^k + k sum weights at^(k-1) = 1
            of_old = (old * (-np.arange(old.size)) ** k).sum()
            found = of_old + k * (weights * at.astype(float) ** (k - 1)).sum()
            assert found == pytest.approx(1, abs=1e-13), (name, k)


@pytest.mark.parametrize("name", PAIRS)
def test_implicit_parts_of_the_pairs_are_a_stable(name):
    rng = np.random.default_rng(0)
    z = -rng.exponential(3.0, 200) + 1j * rng.normal(0, 5.0, 200)
    z = np.concatenate([z, 1j * np.geomspace(1e-2, 1e3, 60)])
    assert np.abs(scalar_factors(find_scheme(name).program, fast=z)).max() < 1 + 1e-9


def test_computational_modes():
    assert find_scheme("leapfrog", {"filter": 0.0}).computational_factors == pytest.approx((1.0,))
    assert find_scheme("leapfrog", {"filter": 0.1}).computational_factors == pytest.approx((0.8,))
    assert find_scheme("sbdf2").computational_factors == pytest.approx((1 / 3,))
    assert find_scheme("cnab").computational_factors == pytest.approx((0.0,))


def sound(omega):
    """One unknown of wind and one of pressure: gradient, divergence."""
    return np.array([[0.0, -omega], [0.0, 0.0]]), np.array([[0.0, 0.0], [omega, 0.0]])


def test_forward_backward_substeps_have_the_textbook_courant_limit():
    none = np.zeros((2, 2))
    gradient, divergence = sound(1.0)
    for h, stable in ((1.99, True), (2.01, False)):
        # the last stage alone: n substeps of h from q
        matrix = time_split(none, gradient, divergence, none, np.eye(2), 8 * h, 8, 0.0, 0.0)
        radius = np.abs(np.linalg.eigvals(matrix)).max()
        assert (radius < 1 + 1e-9) == stable


def test_time_split_tends_to_stages_with_exact_fast_integration():
    rng = np.random.default_rng(4)
    slow = rng.standard_normal((4, 4))
    gradient, divergence = np.zeros((4, 4)), np.zeros((4, 4))
    gradient[:2, 2:], divergence[2:, :2] = rng.standard_normal((2, 2, 2))
    acoustic, none, dt = 3 * (gradient + divergence), np.zeros((4, 4)), 0.6
    stage = np.eye(4)
    for share in (1 / 3, 1 / 2, 1.0):
        # y' = A y + S stage from the identity: both integrals from one exponential
        big = np.zeros((8, 8))
        big[:4, :4], big[:4, 4:] = acoustic * share * dt, np.eye(4) * share * dt
        whole = expm(big)
        stage = whole[:4, :4] + whole[:4, 4:] @ slow @ stage
    errors = [
        np.abs(
            time_split(slow, 3 * gradient, 3 * divergence, none, np.eye(4), dt, n, 0.0, 0.0) - stage
        ).max()
        for n in (240, 480, 960)
    ]
    assert errors[2] < 2e-3 * np.abs(stage).max()
    assert errors[0] / errors[1] == pytest.approx(2, abs=0.05)
    assert errors[1] / errors[2] == pytest.approx(2, abs=0.05)


def test_one_substep_equals_the_unsplit_stages():
    # three stages of the classical (1/3, 1/2, 1) scheme where everything is slow
    z = 1j * np.linspace(0.0, 2.0, 21)
    found = scalar_factors(find_scheme("time-split rk3", {"substeps": 1}).program, slow=z)[:, 0]
    assert np.abs(found - (1 + z + z**2 / 2 + z**3 / 6)).max() < 1e-14
    # and an off-centred trapezoid over each stage where everything is fast
    program = find_scheme("time-split rk3", {"substeps": 1, "off_centring": 0.2}).program
    found = scalar_factors(program, slow=0 * z, fast=z)[:, 0]
    assert np.abs(found - (1 + 0.4 * z) / (1 - 0.6 * z)).max() < 1e-14


@pytest.mark.parametrize("stages", [1, 2, 3, 6])
@pytest.mark.parametrize("b", [0.1, 0.2, 0.5, 1.0])
def test_leapfrog_stages_are_stable_where_the_derivation_says(stages, b):
    # with sin(phi) = h omega the step is a sum of exp(i N phi) and (-1)^N exp(-i N phi), whose
    # weights have moduli that add up to one as long as (1 + b) cos(phi) >= 1 - b
    scheme = find_scheme("Leapfrog-sync", {"substeps": stages, "off_centring": b})
    limit = stages * np.sqrt(1 - ((1 - b) / (1 + b)) ** 2)
    assert scheme.imaginary_axis_limit > limit * (1 - 1e-9)
    assert scheme.imaginary_axis_limit < 1.3 * limit + 0.5


def test_a_composition_of_commuting_parts_is_the_product_of_its_factors():
    at = Layout(2, "charney-phillips")
    none = Banded.zeros(at.size)
    slow = Banded((0,), np.full((1, at.size), 0.7j))
    fast = Banded((0,), np.full((1, at.size), -0.3 + 2.0j))
    parts = Parts(slow, fast, none, none, at, frozenset({"vertical-diffusion"}))
    z, w, dt = 0.7j * 0.5, (-0.3 + 2.0j) * 0.5, 0.5
    explicit = 1 + z + z**2 / 2 + z**3 / 6 + z**4 / 24
    for halves, factor in (
        ("trapezoid", ((1 + w / 4) / (1 - w / 4)) ** 2),
        ("backward-euler", 1 / (1 - w / 2) ** 2),
        ("carried", (1 + w / 2) / (1 - w / 2)),
    ):
        found = Stepper(parts, find_scheme(f"Strang({halves}, RK4)"), dt).matrix()
        assert np.abs(found - explicit * factor * np.eye(at.size)).max() < 1e-13
