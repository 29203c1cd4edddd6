"""What a stepper takes, gives back and refuses."""

import numpy as np
import pytest

from levelstride import tableaux
from levelstride.errors import CalculationError, InputError
from levelstride.operator.bands import Banded
from levelstride.operator.state import Layout
from levelstride.operator.wave import Wave
from levelstride.splitting.parts import Parts, split_operator
from levelstride.splitting.splitting import resolve
from levelstride.stepper import Counts, Stepper, imex, warm_up
from oracles.columns import STAGGERINGS
from oracles.dense_step import dense_step
from oracles.schemes import backward_euler
from oracles.stepping import parts_of, small_column, tall_column


@pytest.fixture(params=["sound+buoyancy", "all-implicit", "all-explicit"])
def stepper(request):
    parts = parts_of(request.param, small_column("everything", "lorenz"))
    return Stepper(parts, tableaux.find("ARS(2,3,3)"), 0.2)


def test_matrix_is_the_step_of_the_identity(stepper):
    size = stepper.layout.size
    np.testing.assert_array_equal(stepper.matrix(), stepper.step(np.eye(size)))
    state = np.random.default_rng(1).normal(size=size)
    np.testing.assert_allclose(stepper.step(state), stepper.matrix() @ state, rtol=0, atol=1e-12)


def test_real_where_the_operator_is():
    parts = parts_of("sound+buoyancy+divergence", small_column("flat", "lorenz"))
    stepper = Stepper(parts, tableaux.find("ARS(2,3,2)"), 10.0)
    rng = np.random.default_rng(2)
    real, imaginary = rng.normal(size=(2, parts.layout.size, 5))
    assert stepper.dtype == stepper.matrix().dtype == stepper.step(real).dtype == np.float64
    both = stepper.step(real + 1j * imaginary)
    np.testing.assert_array_equal(both, stepper.step(real) + 1j * stepper.step(imaginary))
    assert stepper.step(real[:, 0] + 0j).shape == (parts.layout.size,)


def test_complex_with_slope_or_wind():
    for kind in ("slope", "everything"):
        parts = parts_of("sound+divergence", small_column(kind, "charney-phillips"))
        stepper = Stepper(parts, tableaux.find("ARS(2,3,2)"), 0.1)
        assert stepper.dtype == stepper.step(np.ones(parts.layout.size)).dtype == np.complex128


def test_lanes_do_not_know_of_each_other():
    parts = parts_of("sound+buoyancy", tall_column(40, "charney-phillips"))
    stepper = Stepper(parts, tableaux.find("SSP3(4,3,3)"), 5.0)
    states = np.random.default_rng(3).normal(size=(parts.layout.size, 2 * imex.MOST_LANES + 3))
    together = stepper.step(states)
    for lane in (0, imex.MOST_LANES, 2 * imex.MOST_LANES + 2):
        np.testing.assert_array_equal(together[:, lane], stepper.step(states[:, lane]))
    np.testing.assert_array_equal(together[:, ::2], stepper.step(states[:, ::2]))
    assert stepper.step(states[:, :0]).shape == (parts.layout.size, 0)


def test_another_step_reuses_the_operator():
    parts = parts_of("sound+divergence", small_column("slope", "lorenz"))
    tableau = tableaux.find("ARK2(2,3,2)")
    again = Stepper(parts, tableau, 5.0).at_step(7.0)
    np.testing.assert_array_equal(again.matrix(), Stepper(parts, tableau, 7.0).matrix())


def test_counts():
    parts = parts_of("sound+buoyancy", small_column("flat", "lorenz"))
    assert Stepper(parts, tableaux.find("ARS(3,4,3)"), 1.0).counts == Counts(4, 0, 3)
    assert Stepper(parts, tableaux.find("RK4"), 1.0).counts == Counts(4, 0, 0)


@pytest.mark.parametrize("path", ["auto", "banded", "tridiagonal"])
def test_explicit_tableau_ignores_the_splitting(path):
    column = small_column("everything", "lorenz")
    tableau = tableaux.find("SSPRK(3,3)")
    split, whole = parts_of("sound+buoyancy", column), parts_of("all-explicit", column)
    stepper = Stepper(split, tableau, 0.01, path=path)
    assert stepper.path == "explicit"
    np.testing.assert_allclose(
        stepper.matrix(), Stepper(whole, tableau, 0.01).matrix(), rtol=0, atol=1e-14
    )


def test_tridiagonal_path_names_what_forbids_it():
    parts = parts_of("sound+slope", small_column("slope", "lorenz"))
    with pytest.raises(InputError, match="slope-divergence, slope-pressure-gradient do not allow"):
        Stepper(parts, tableaux.find("ARS(2,3,2)"), 1.0, path="tridiagonal")


@pytest.mark.parametrize("dt", [0.0, -1.0, np.nan, np.inf])
def test_step_must_be_positive(dt):
    parts = parts_of("sound", small_column("flat", "lorenz"))
    with pytest.raises(InputError, match="must be positive and finite"):
        Stepper(parts, tableaux.find("ARS(2,3,2)"), dt)


def test_state_of_another_size_is_refused(stepper):
    with pytest.raises(ValueError, match="expected"):
        stepper.step(np.ones(stepper.layout.size + 1))


@pytest.mark.parametrize("path", ["auto", "tridiagonal", "banded"])
def test_singular_stage_is_named(path):
    """Damping at rate r meets the pole 1 + a dt r = 0 of a negative diagonal entry a."""
    at = Layout(5, "charney-phillips")
    rates = np.array([0.0, 0.0, 0.0, 0.02])
    fast = Banded.from_entries(at.size, [(at.w, at.w, -rates)])
    none = Banded.zeros(at.size)
    parts = Parts(none, fast, none, none, at, frozenset({"upper-damping"}))
    tableau = backward_euler(-0.5, "spoilt")
    message = r"spoilt, stage 2 \(implicit diagonal -0.5\).*singular at layer 4 .* step of 100 s"
    with pytest.raises(CalculationError, match=message):
        Stepper(parts, tableau, 100.0, path=path)
    assert np.all(np.isfinite(Stepper(parts, tableau, 90.0, path=path).matrix()))


@pytest.mark.parametrize("path", ["auto", "banded"])
def test_unsafe_elimination_goes_through_the_band(path):
    """1 - h^2 H P = 0 stops the elimination of pi' although the stage has a solution."""
    at = Layout(3, "lorenz")
    middle = np.array([0.0, 1.0, 0.0])
    fast = Banded.from_entries(
        at.size,
        [
            (at.u, at.pi, middle),
            (at.pi, at.u, 0.25 * middle),
            (at.w, at.pi[1:], -1.0),
            (at.w, at.pi[:-1], 2.0),
            (at.pi[1:], at.w, 1.0),
            (at.pi[:-1], at.w, -0.5),
            (at.w, at.theta[1:], 1.0),
            (at.theta[1:], at.w, -0.3),
        ],
    )
    slow = Banded((0, 1), np.ones((2, at.size)) * (np.arange(at.size) < at.size - 1))
    names = frozenset({"horizontal-pressure-gradient", "horizontal-divergence"})
    parts = Parts(slow, fast, slow, slow, at, names)
    tableau, dt = backward_euler(), 2.0
    stepper = Stepper(parts, tableau, dt, path=path)
    assert stepper.path == "banded"
    with pytest.raises(ValueError, match="no tridiagonal system"):
        stepper.residual_ratio(np.ones((at.size, 1)))
    expected = dense_step(parts, tableau, dt)
    np.testing.assert_allclose(stepper.matrix(), expected, rtol=0, atol=1e-11 * abs(expected).max())
    with pytest.raises(CalculationError, match="stage 2"):
        Stepper(parts, tableau, dt, path="tridiagonal")


def test_singular_after_step_is_named():
    at = Layout(4, "lorenz")
    none = Banded.zeros(at.size)
    growing = Banded.from_entries(at.size, [(at.theta[2], at.theta[2], 0.1)])
    parts = Parts(none, none, none, growing, at, frozenset())
    with pytest.raises(CalculationError, match=r"after-step-implicit.*layer 3 .* step of 10 s"):
        Stepper(parts, tableaux.find("RK4"), 10.0)


@pytest.mark.parametrize("path", ["auto", "banded"])
def test_overflow_passes_quietly(path):
    parts = parts_of("sound", small_column("flat", "lorenz"))
    stepper = Stepper(parts, tableaux.find("ARS(2,3,3)"), 1e9, path=path)
    state = np.ones(parts.layout.size)
    for _ in range(40):
        state = stepper.step(state)
    assert not np.all(np.isfinite(state))


@pytest.mark.parametrize("staggering", STAGGERINGS)
@pytest.mark.parametrize("nlev", [40, 137])
@pytest.mark.parametrize("splitting", ["sound", "sound+buoyancy", "sound+divergence", "flat waves"])
def test_residual_of_the_tridiagonal_solve(splitting, nlev, staggering):
    if splitting == "flat waves":
        splitting = "sound+buoyancy+horizontal-pressure-gradient+horizontal-divergence"
    parts = parts_of(splitting, tall_column(nlev, staggering))
    rhs = np.random.default_rng(4).normal(size=(parts.layout.size, 8))
    first = Stepper(parts, tableaux.find("ARK4(3)7L[2]SA1"), 0.1)
    for dt in np.geomspace(0.1, 1e4, 11):
        assert first.at_step(dt).residual_ratio(rhs) < 30.0


@pytest.mark.parametrize("staggering", STAGGERINGS)
@pytest.mark.parametrize("name", ["SSP2(3,3,2)", "SSP3(4,3,3)", "ARS(2,3,2)", "Trap2(2,3,2)"])
def test_no_spurious_growth_at_a_large_step(name, staggering):
    """Nothing grows where everything is implicit; a tendency by multiplying would show 3e-11."""
    column = tall_column(40, staggering)
    wave = Wave(0.5 * np.pi / column.horizontal.grid_spacing_m, column.horizontal)
    parts = split_operator(resolve("all-implicit"), column, column.airs[0], wave)
    for dt in (1e3, 1e4):
        for path in ("tridiagonal", "banded"):
            stepper = Stepper(parts, tableaux.find(name), dt, path=path)
            assert np.abs(np.linalg.eigvals(stepper.matrix())).max() <= 1.0 + 1e-13


@pytest.mark.parametrize("real", [True, False])
def test_warm_up(real):
    warm_up(real=real)
