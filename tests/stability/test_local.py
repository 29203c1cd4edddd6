"""The per-layer screen: its symbols, its steps by a slow twin, and what dense eigenvalues say."""

import numpy as np
import pytest

from levelstride import tableaux
from levelstride.operator.bands import Banded
from levelstride.splitting.parts import Parts
from levelstride.splitting.splitting import resolve
from levelstride.stability.local import LocalScreen, inverse, log_radius_bound
from levelstride.stability.symbols import (
    chosen_layers,
    distinct,
    frozen_symbols,
    larger,
    phase_angles,
    turned_real,
)
from levelstride.stability.wave_problem import WaveProblem
from oracles.columns import STAGGERINGS, isothermal_column
from oracles.dense_step import dense_step
from oracles.stepping import parts_of, small_column, tall_column

WEAK = ("ARS(2,2,2)", "SSP2(3,3,2)", "ARS(1,1,1)", "ARK2(2,3,2), a32 = 1/2")
ROBUST = ("ARS(2,3,2)", "Trap2(2,3,2)", "UJ3(1,3,2)")
COLUMN = isothermal_column(40, 15e3)
KAPPA = 1.0e-3


def screen(tableau, split, column=COLUMN, kappa=KAPPA, **changes):
    of = WaveProblem(column, column.airs[0], resolve(split), tableaux.find(tableau), kappa)
    return LocalScreen(of.parts, of.tableau, **changes), of


def dense(matrix):
    """A small full matrix kept by its diagonals."""
    rows, columns = np.indices(matrix.shape)
    return Banded.from_entries(len(matrix), [(rows.ravel(), columns.ravel(), matrix.ravel())])


def stepped_by_twin(of_screen, layout, tableau, dt):
    """Growth of every lane by the stage loop written out."""
    rates = []
    for lane, own in enumerate(of_screen.own):
        parts = Parts(*(dense(part[:, :, lane]) for part in of_screen.symbols), layout, frozenset())
        radius = np.abs(np.linalg.eigvals(dense_step(parts, tableau, dt))).max()
        rates.append(np.log(radius) / dt - own)
    return np.array(rates)


@pytest.mark.parametrize("staggering", STAGGERINGS)
@pytest.mark.parametrize("name", ["ARS(2,2,2)", "IMKG343a", "BHR(5,5,3)*", "SSPRK(3,3)"])
@pytest.mark.parametrize("kind", ["flat", "slope", "everything"])
def test_growth_is_that_of_the_stage_loop_written_out(kind, name, staggering):
    column, tableau = small_column(kind, staggering), tableaux.find(name)
    parts = parts_of("sound+buoyancy", column)
    local = LocalScreen(parts, tableau, layers=3, angles=3)
    dts = np.array([0.3, 3.0, 40.0])
    expected = [stepped_by_twin(local, parts.layout, tableau, dt).max() for dt in dts]
    np.testing.assert_allclose(local.growth(dts), expected, rtol=1e-6, atol=2e-6)


def test_terms_after_the_step_are_taken_after_the_step():
    column, tableau = small_column("everything", "lorenz"), tableaux.find("ARS(2,3,2)")
    treatment = {
        "vertical-pressure-gradient": "implicit",
        "vertical-divergence": "implicit",
        "divergence-damping": "after-step",
        "vertical-diffusion": "after-step-implicit",
    }
    parts = parts_of(treatment, column)
    local = LocalScreen(parts, tableau, layers=3, angles=3)
    assert all(np.any(part) for part in local.symbols)
    for dt in (0.5, 20.0):
        expected = stepped_by_twin(local, parts.layout, tableau, dt).max()
        assert local.growth(np.array([dt]))[0] == pytest.approx(expected, rel=1e-6, abs=2e-6)


@pytest.mark.parametrize("staggering", STAGGERINGS)
@pytest.mark.parametrize("gradient", ["half", "full"])
def test_symbols_of_partner_terms_are_skew_on_any_grid(staggering, gradient):
    column = isothermal_column(
        25,
        staggering=staggering,
        ratio=1.15,
        slope_f=np.linspace(0.4, 0.0, 26),
        lowest_slope_gradient=gradient,
        coriolis_per_s=1e-4,
    )
    parts = parts_of("sound", column)
    layers = chosen_layers(parts.whole, parts.layout, 10)
    angles = phase_angles(parts.whole, parts.layout, layers, 9)
    both = (parts.slow, parts.fast)
    for signed in (angles, -angles):
        for symbols in np.moveaxis(frozen_symbols(both, parts.layout, layers, signed), -1, 1):
            adjoint = symbols.conj().swapaxes(1, 2)
            assert np.abs(symbols + adjoint).max() < 1e-12 * np.abs(symbols).max()


def test_slope_has_no_gradient_without_a_change_from_layer_to_layer():
    column = isothermal_column(25, slope_f=np.linspace(0.4, 0.0, 26))
    parts = parts_of("sound", column)
    layers = np.arange(20)
    whole = frozen_symbols([parts.whole], parts.layout, layers, np.zeros((20, 0)))[0]
    flat = parts_of("sound", isothermal_column(25)).whole
    of_flat = frozen_symbols([flat], parts.layout, layers, np.zeros((20, 0)))[0]
    u, pi = parts.layout.u[0], parts.layout.pi[0]
    assert np.abs(whole[u, pi] - of_flat[u, pi]).max() < 0.1 * np.abs(of_flat[u, pi]).max()


@pytest.mark.parametrize("name", WEAK)
@pytest.mark.parametrize("split", ["sound", "sound+buoyancy"])
def test_weak_growth_on_equal_layers_is_that_of_dense_eigenvalues(name, split):
    local, of = screen(name, split, layers=20, angles=18)
    dts = np.array([0.3, 1.0, 2.0])
    expected = np.array([of.growth(dt) for dt in dts])
    assert (expected > 1e-6).all()
    np.testing.assert_allclose(local.growth(dts), expected, rtol=0.1)


@pytest.mark.parametrize("name", ROBUST)
@pytest.mark.parametrize("split", ["sound", "sound+buoyancy"])
def test_robust_schemes_show_no_growth_at_short_steps(name, split):
    local, of = screen(name, split)
    dts = 0.05 / of.slow_rate * np.array([0.1, 0.3, 1.0])
    assert (local.growth(dts) < 1e-12 / dts).all()


@pytest.mark.parametrize("name", ["ARS(2,3,2)", "UJ3(1,3,2)", "IMKG343a"])
def test_limit_of_a_stretched_column_is_seen(name):
    column = tall_column(40, "charney-phillips")
    local, of = screen(name, "sound+buoyancy", column, 2.0e-4)
    dts = np.geomspace(1.0, 100.0, 25)
    expected = np.array([of.growth(dt) for dt in dts])
    unstable = expected > 1e-4
    assert unstable.any()
    seen = local.growth(dts) > 1e-5
    # seen where it is, but for a step next to the limit
    assert np.abs(np.argmax(seen) - np.argmax(unstable)) <= 1
    assert seen[np.argmax(unstable) + 1 :].all()


@pytest.mark.parametrize("staggering", STAGGERINGS)
@pytest.mark.parametrize("kind", ["flat", "slope", "everything"])
@pytest.mark.parametrize("split", ["all-explicit", "sound+slope", "all-implicit"])
def test_every_kind_of_column_can_be_screened(kind, split, staggering):
    parts = parts_of(split, small_column(kind, staggering))
    local = LocalScreen(parts, tableaux.find("ARS(3,4,3)"))
    dts = np.geomspace(1e-3, 1e4, 40)
    rates = local.growth(dts)
    assert rates.shape == dts.shape
    assert not np.isnan(rates).any()
    assert np.iscomplexobj(local.symbols) == (not parts.is_real and np.any(local.symbols.imag))


@pytest.mark.parametrize("nlev", [1, 2, 3])
def test_columns_of_few_layers_can_be_screened(nlev):
    local, _ = screen("ARS(2,3,2)", "sound", isothermal_column(nlev, 3e3))
    assert np.isfinite(local.growth(np.array([1.0, 10.0]))).all()


def test_order_and_number_of_steps_do_not_matter():
    local, _ = screen("ARS(2,2,2)", "sound", tall_column(137, "lorenz"))
    dts = np.geomspace(0.1, 50.0, 60)
    rates = local.growth(dts)
    np.testing.assert_allclose(local.growth(dts[::-1])[::-1], rates, rtol=1e-6, atol=2e-6)
    np.testing.assert_allclose(local.growth(dts[7:8]), rates[7:8], rtol=1e-6, atol=2e-6)
    assert local.growth(np.zeros(0)).shape == (0,)


def test_layers_hold_the_ground_and_the_extremes_in_any_column():
    column = tall_column(40, "charney-phillips", slope_f=np.linspace(0.3, 0, 41))
    parts = parts_of("sound", column)
    layers = chosen_layers(parts.whole, parts.layout, 10)
    assert layers.size == 10
    assert {0, 1} <= set(layers.tolist())
    assert layers[-1] >= 35
    assert (np.diff(layers) > 0).all()
    alike = isothermal_column(40)
    few = chosen_layers(parts_of("sound", alike).whole, parts.layout, 10)
    assert few.size <= 4


def test_angles_reach_from_the_gravest_mode_to_pi():
    parts = parts_of("sound", isothermal_column(40))
    angles = phase_angles(parts.whole, parts.layout, np.array([0, 20]), 6)
    assert angles.shape == (2, 6)
    np.testing.assert_allclose(angles[:, 0], np.pi / 39, rtol=0.01)
    np.testing.assert_allclose(angles[:, -1], np.pi)


def test_turning_phases_keeps_eigenvalues_and_makes_resting_waves_real():
    rng = np.random.default_rng(3)
    stack = rng.standard_normal((4, 5, 5, 7)) + 1j * rng.standard_normal((4, 5, 5, 7))
    turned = turned_real(stack)
    assert np.iscomplexobj(turned)
    for before, after in zip(stack.sum(0).T, turned.sum(0).T, strict=True):
        expected = np.sort_complex(np.linalg.eigvals(before))
        np.testing.assert_allclose(np.sort_complex(np.linalg.eigvals(after)), expected, atol=1e-12)
    for staggering in STAGGERINGS:
        local, _ = screen("ARS(2,3,2)", "sound", isothermal_column(20, staggering=staggering))
        assert local.symbols.dtype == np.float64


def test_only_lanes_that_differ_are_kept():
    base = np.random.default_rng(5).standard_normal((4, 4, 4, 1))
    stack = np.concatenate([base, 1.01 * base, 3.0 * base, 0.99 * base], axis=-1)
    np.testing.assert_array_equal(distinct(stack), stack[..., [1, 2]])


def test_of_mirrored_lanes_the_larger_is_kept():
    one = np.ones((4, 4, 4, 1))
    first, second = np.concatenate([one, 3 * one], -1), np.concatenate([2 * one, one], -1)
    np.testing.assert_array_equal(larger(first, second)[0, 0, 0], [2.0, 3.0])


@pytest.mark.parametrize("kind", ["real", "complex"])
def test_radius_is_bounded_by_norms_of_powers(kind):
    rng = np.random.default_rng(7)
    matrices = rng.standard_normal((4, 4, 20))
    if kind == "complex":
        matrices = matrices + 1j * rng.standard_normal((4, 4, 20))
    matrices[:, :, 0] = np.diag([1.0, 2.0, 3.0], 1)
    radius = np.abs(np.linalg.eigvals(np.moveaxis(matrices[:, :, 1:], -1, 0))).max(-1)
    with np.errstate(divide="ignore"):
        bound = log_radius_bound(matrices, 30)
    assert bound[0] == -np.inf
    np.testing.assert_allclose(bound[1:], np.log(radius), atol=1e-7)


def test_matrices_are_inverted_or_marked():
    rng = np.random.default_rng(11)
    matrices = rng.standard_normal((5, 5, 8))
    matrices = matrices - matrices.swapaxes(0, 1) + np.eye(5)[:, :, None]
    expected = np.linalg.inv(np.moveaxis(matrices, -1, 0))
    found = np.moveaxis(inverse(matrices.copy()), -1, 0)
    np.testing.assert_allclose(found, expected, atol=1e-13)
    matrices[:, :, 3] = np.diag([1.0, 1.0, 0.0, 1.0, 1.0])
    with np.errstate(divide="ignore", invalid="ignore"):
        found = inverse(matrices)
    lost = ~np.isfinite(found).all(axis=(0, 1))
    np.testing.assert_array_equal(lost, np.arange(8) == 3)


def test_a_stage_without_solution_counts_as_growth():
    # a negative diagonal entry meets the decay rate of the upper damping
    column = isothermal_column(12, upper_damping_f=np.full(13, 0.125))
    parts = parts_of({"upper-damping": "implicit"}, column)
    tableau = tableaux.find("IMKG343a")
    assert tableau.negative_diagonals
    diagonal = min(tableau.distinct_diagonals)
    dt = np.array([-1.0 / (0.125 * diagonal)])
    rates = LocalScreen(parts, tableau).growth(dt * (1 + np.arange(-2, 3) * 1e-16))
    assert (rates > 0.1).all()
