"""Normal modes against general eigensolvers and known counts."""

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings

from levelstride.accuracy import normal_modes, resolved_gravity
from levelstride.accuracy.modes import mode_weights
from levelstride.column.background import Motion, evaluate
from levelstride.column.column import Horizontal
from levelstride.column.grids import geometric
from levelstride.column.levels import Levels
from levelstride.column.standard_atmosphere import standard_air
from levelstride.operator.setting import layout_of
from levelstride.operator.terms import assemble
from levelstride.operator.wave import Wave
from oracles.columns import (
    STAGGERINGS,
    column_of,
    isothermal_column,
    random_column,
    random_wave,
    seeds,
)


def dense(column, air, wave, weights):
    terms = assemble(column, air, wave)
    return sum(term.similar(np.sqrt(weights)).to_dense() for term in terms.values())


def standard_column(nlev, top_m, lowest_m, dx, *, wind=lambda z: 0 * z, **changes):
    levels = Levels(geometric(nlev, top_m, lowest_m))
    still_c, still_f = np.zeros(nlev), np.zeros(nlev + 1)
    motion = Motion(wind(levels.centres_m), wind(levels.interfaces_m), still_c, still_f)
    air = evaluate("standard", standard_air(), levels, motion)
    return column_of(levels, [air], horizontal=Horizontal(dx, "staggered", 2), **changes)


def check_modes(modes, operator, tolerance=1e-10):
    value = modes.growth + 1j * modes.frequency
    scale = np.abs(operator).max()
    assert np.abs(operator @ modes.vectors - modes.vectors * value).max() <= tolerance * scale
    np.testing.assert_allclose(np.linalg.norm(modes.vectors, axis=0), 1.0, rtol=1e-12)
    products = np.sum(modes.duals.conj() * modes.vectors, axis=0)
    np.testing.assert_allclose(products, 1.0, atol=1e-9)


@settings(max_examples=40, deadline=None)
@given(seed=seeds)
def test_modes_at_rest_are_the_hermitian_eigenvectors(seed):
    column = random_column(seed)
    air, wave, weights = (
        column.airs[0],
        random_wave(seed, column),
        mode_weights(column, column.airs[0]),
    )
    modes, operator = normal_modes(column, air, wave), dense(column, air, wave, weights)
    assert modes.is_normal
    check_modes(modes, operator)
    np.testing.assert_allclose(
        modes.vectors.conj().T @ modes.vectors, np.eye(operator.shape[0]), atol=1e-11
    )
    expected = np.linalg.eigvalsh(-1j * operator)
    scale = np.abs(expected).max()
    np.testing.assert_allclose(np.sort(modes.frequency), expected, atol=1e-12 * scale)
    assert np.all(modes.growth == 0.0)


@pytest.mark.parametrize("staggering", STAGGERINGS)
@pytest.mark.parametrize("coriolis", [0.0, 1e-4])
@pytest.mark.parametrize("nlev", [2, 9, 40])
def test_kinds_come_in_their_numbers(staggering, coriolis, nlev):
    column = isothermal_column(nlev, staggering=staggering, coriolis_per_s=coriolis)
    modes = normal_modes(column, column.airs[0], Wave(1e-4, column.horizontal))
    count = {kind: int(np.sum(modes.kind == kind)) for kind in np.unique(modes.kind)}
    expected = {"sound": 2 * (nlev - 1), "Lamb": 2, "gravity": 2 * (nlev - 1)}
    if staggering == "lorenz":
        expected["computational"] = 1
    if coriolis:
        expected["vortical"] = nlev
    assert count == expected
    for kind in ("sound", "gravity"):
        for sign in (1, -1):
            here = (modes.kind == kind) & (np.sign(modes.frequency) == sign)
            assert sorted(modes.vertical_order[here]) == list(range(1, nlev))
            by_order = np.abs(modes.frequency[here])[np.argsort(modes.vertical_order[here])]
            assert np.all(np.diff(by_order) * (1 if kind == "sound" else -1) > 0)
    slowest_sound = np.abs(modes.frequency[modes.kind == "sound"]).min()
    lamb = np.abs(modes.frequency[modes.kind == "Lamb"])
    assert np.all(
        (lamb < slowest_sound) & (lamb > np.abs(modes.frequency[modes.kind == "gravity"]).max())
    )


@pytest.mark.parametrize("coriolis", [0.0, 1e-4])
def test_zero_mode_of_lorenz_is_alternating_potential_temperature(coriolis):
    column = isothermal_column(12, staggering="lorenz", coriolis_per_s=coriolis)
    modes = normal_modes(column, column.airs[0], Wave(1e-4, column.horizontal))
    zero = modes.select(modes.kind == "computational").vectors[:, 0]
    theta = zero[modes.layout.theta]
    assert np.sum(np.abs(theta) ** 2) == pytest.approx(1.0, rel=1e-12)
    assert np.all((theta[1:] / theta[:-1]).real < 0)


def test_short_sound_in_a_cold_layer_does_not_take_the_name_of_the_lamb_wave():
    column = standard_column(137, 80e3, 10.0, 9000.0)
    modes = normal_modes(column, column.airs[0], Wave(np.pi / 9000.0, column.horizontal))
    lamb = modes.select(modes.kind == "Lamb").vectors[:, 0]
    weights = np.sqrt(modes.weights[modes.layout.pi])
    alike = np.abs(weights @ lamb[modes.layout.pi]) ** 2 / np.sum(weights**2)
    assert 2 * alike > 0.75
    sound = np.abs(modes.frequency[modes.kind == "sound"]).min()
    assert sound < np.abs(modes.frequency[modes.kind == "Lamb"]).min()


def test_uniform_wind_shifts_every_mode_alike():
    wind = 25.0
    still = standard_column(20, 30e3, 100.0, 3000.0)
    moving = standard_column(20, 30e3, 100.0, 3000.0, wind=lambda z: wind + 0 * z)
    wave = Wave(3e-4, still.horizontal)
    a, b = (normal_modes(c, c.airs[0], wave) for c in (still, moving))
    shift = wave.advection(np.array([wind]))[0]
    assert b.is_normal
    scale = np.abs(a.frequency).max()
    np.testing.assert_allclose(b.frequency, a.frequency + shift.imag, atol=1e-12 * scale)
    np.testing.assert_allclose(b.growth, shift.real, rtol=1e-9)
    np.testing.assert_allclose(b.intrinsic_frequency, a.frequency, atol=1e-12 * scale)
    assert list(b.kind) == list(a.kind)


@pytest.mark.parametrize("staggering", STAGGERINGS)
def test_sheared_and_damped_column_keeps_the_names_of_its_waves(staggering):
    nlev = 24
    still = standard_column(nlev, 30e3, 200.0, 3000.0, staggering=staggering)
    moving = standard_column(
        nlev, 30e3, 200.0, 3000.0, wind=lambda z: 2.0 + 1e-4 * z, staggering=staggering
    )
    moving = replace(moving, diffusivity_c=np.full(nlev, 1.0), diffusivity_f=np.full(nlev + 1, 1.0))
    wave = Wave(3e-4, still.horizontal)
    a, b = (normal_modes(c, c.airs[0], wave) for c in (still, moving))
    assert not b.is_normal
    check_modes(b, dense(moving, moving.airs[0], wave, b.weights), 1e-9)
    wanted_a, wanted_b = resolved_gravity(a), resolved_gravity(b)
    for sign in (1, -1):
        here_a = wanted_a & (np.sign(a.frequency) == sign)
        here_b = wanted_b & (np.sign(b.intrinsic_frequency) == sign)
        order_a, order_b = a.vertical_order[here_a], b.vertical_order[here_b]
        assert sorted(order_a) == sorted(order_b) == list(range(1, nlev // 4 + 1))
        intrinsic = b.intrinsic_frequency[here_b][np.argsort(order_b)]
        expected = a.frequency[here_a][np.argsort(order_a)]
        np.testing.assert_allclose(intrinsic, expected, rtol=0.05)


@settings(max_examples=15, deadline=None)
@given(seed=seeds)
def test_modes_of_unstable_air_solve_the_operator(seed):
    column = random_column(seed, everything=True, stable=False)
    air, wave = column.airs[0], random_wave(seed, column)
    modes = normal_modes(column, air, wave)
    operator = dense(column, air, wave, mode_weights(column, air))
    value = modes.growth + 1j * modes.frequency
    residual = np.abs(operator @ modes.vectors - modes.vectors * value).max()
    assert residual <= 1e-9 * np.abs(operator).max()
    assert modes.frequency.size == layout_of(column).size
    assert np.all((modes.kind_share > 0) & (modes.kind_share <= 1 + 1e-12))


def test_resolved_gravity_waves_are_the_lowest_quarter_of_orders():
    column = isothermal_column(21)
    modes = normal_modes(column, column.airs[0], Wave(1e-4, column.horizontal))
    wanted = resolved_gravity(modes)
    assert set(modes.kind[wanted]) == {"gravity"}
    assert sorted(modes.vertical_order[wanted]) == sorted([1, 2, 3, 4, 5] * 2)


def test_waves_of_a_jet_are_told_from_its_critical_layers():
    """Most slow modes of a jet follow the wind of one level; waves of low order run both ways."""
    wind = 40.0
    jet = standard_column(40, 20e3, 60.0, 6e3, wind=lambda z: wind * np.sin(np.pi * z / 20e3))
    wave = Wave(np.pi / 64 / 6e3, jet.horizontal)
    modes = normal_modes(jet, jet.airs[0], wave)
    wanted = modes.select(resolved_gravity(modes))
    for order in (1, 2, 3):
        both = wanted.intrinsic_frequency[wanted.vertical_order == order]
        assert sorted(np.sign(both)) == [-1, 1]
    carried = np.sqrt(2) * wave.kappa * wind
    riding = (modes.kind == "gravity") & (modes.frequency < 0) & (modes.frequency > -carried)
    assert np.sum(riding) > 40
    assert np.median(modes.vertical_order[riding]) > 10


def test_entangled_modes_are_not_taken_for_resolved_waves():
    column = isothermal_column(36, 18e3, staggering="lorenz", vertical_advection="upwind-3")
    air, levels = column.airs[0], column.levels
    updraft_c, updraft_f = (
        0.5 * np.sin(np.pi * z / levels.top_m) for z in (levels.centres_m, levels.interfaces_m)
    )
    rising = replace(air, updraft_c=updraft_c, updraft_f=updraft_f)
    modes = normal_modes(column, rising, Wave(3e-5, column.horizontal))
    assert modes.condition.max() > 100
    wanted = modes.select(resolved_gravity(modes))
    assert set(wanted.vertical_order) >= {1, 2}
    assert wanted.condition.max() <= 10


def test_weights_keep_pairs_skew_where_the_air_is_hardly_stable():
    column = isothermal_column(10)
    air = column.airs[0]
    gradient = air.dtheta_dz_f * np.where(np.arange(9) == 4, 1e-7, 1.0)
    column = replace(column, airs=(replace(air, dtheta_dz_f=gradient),))
    assert column.airs[0].n_squared_f.min() < 1e-6
    assert normal_modes(column, column.airs[0], Wave(1e-4, column.horizontal)).is_normal
    neutral = replace(air, dtheta_dz_f=gradient * np.where(np.arange(9) == 4, 0.0, 1.0))
    modes = normal_modes(column, neutral, Wave(1e-4, column.horizontal))
    assert not modes.is_normal
    assert np.all(np.isfinite(modes.frequency))
