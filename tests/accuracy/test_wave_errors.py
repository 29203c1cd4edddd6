"""What one step does to exact modes, against closed forms and a dense twin."""

from dataclasses import replace

import numpy as np
import pytest

from levelstride.accuracy import (
    StepErrors,
    WaveErrors,
    mode_errors,
    normal_modes,
    resolved_gravity_errors,
    resolved_waves,
    worst_of,
)
from levelstride.accuracy.modes import mode_weights, modes_of
from levelstride.column.background import Motion
from levelstride.column.column import Horizontal
from levelstride.operator.setting import layout_of
from levelstride.operator.terms import assemble
from levelstride.operator.wave import Wave
from levelstride.splitting import resolve
from levelstride.splitting.parts import sort_terms
from levelstride.stepper.imex import Stepper
from levelstride.tableaux import find
from oracles.columns import STAGGERINGS, column_of, isothermal_air, isothermal_column

DX = 2000.0
WAVES = [
    Wave(kappa, Horizontal(DX, "staggered", 2)) for kappa in np.geomspace(np.pi / 64, np.pi, 7) / DX
]


def column_for(staggering="charney-phillips", nlev=16, **changes):
    return isothermal_column(
        nlev, staggering=staggering, horizontal=Horizontal(DX, "staggered", 2), **changes
    )


def energy_terms(column, air, wave):
    weights = mode_weights(column, air)
    terms = assemble(column, air, wave)
    return {name: t.similar(np.sqrt(weights)) for name, t in terms.items()}, weights


def all_modes(column, split, tableau, dt, wave=WAVES[2]):
    """Modes and their errors by one step, for every kind of wave."""
    air, layout = column.airs[0], layout_of(column)
    terms, weights = energy_terms(column, air, wave)
    modes = modes_of(terms, layout, weights)
    parts = sort_terms(resolve(split), terms, terms, layout)
    stepped = Stepper(parts, find(tableau), dt).step(modes.vectors)
    return modes, mode_errors(modes, stepped, dt)


def stability_function(a, b, z):
    stages = np.eye(len(b)) - z[:, None, None] * a
    return 1 + z * (np.linalg.solve(stages, np.ones((z.size, len(b), 1)))[..., 0] @ b)


@pytest.mark.parametrize("staggering", STAGGERINGS)
@pytest.mark.parametrize("dt", [0.01, 2.0, 300.0])
def test_backward_euler_damps_as_its_closed_form(staggering, dt):
    modes, errors = all_modes(column_for(staggering), "all-implicit", "ARS(1,1,1)", dt)
    turn = np.abs(modes.frequency) * dt
    assert np.all(errors.frequency_error[turn == 0] == 0.0)
    np.testing.assert_allclose(np.abs(errors.factor), 1 / np.sqrt(1 + turn**2), rtol=1e-9)
    moving = turn > 1e-9 * turn.max()
    turn, error = turn[moving], errors.frequency_error[moving]
    expected = np.abs(np.arctan(turn) / turn - 1)
    within = turn < np.pi
    np.testing.assert_allclose(error[within], expected[within], rtol=1e-6, atol=1e-8)
    assert np.all(error[~within] >= 1.0)
    change = errors.amplitude_change_per_period[moving]
    np.testing.assert_allclose(change, (1 + turn**2) ** (-np.pi / turn) - 1, rtol=1e-6, atol=1e-8)


@pytest.mark.parametrize("staggering", STAGGERINGS)
@pytest.mark.parametrize("dt", [0.01, 2.0, 300.0])
def test_trapezoidal_rule_is_neutral_and_slow_as_its_closed_form(staggering, dt):
    modes, errors = all_modes(column_for(staggering), "all-implicit", "H-CN(2,2,2)", dt)
    np.testing.assert_allclose(np.abs(errors.factor), 1.0, rtol=1e-10)
    turn = np.abs(modes.frequency) * dt
    waves = (turn > 1e-9 * turn.max()) & (turn < np.pi)
    expected = np.abs(2 * np.arctan(turn[waves] / 2) / turn[waves] - 1)
    np.testing.assert_allclose(errors.frequency_error[waves], expected, rtol=1e-6, atol=1e-8)
    assert np.abs(errors.amplitude_change_per_period[waves]).max() < 1e-5


@pytest.mark.parametrize(
    "name", ["ARS(2,3,2)", "ARS(3,4,3)", "SSP2(3,3,2)", "ARK2(2,3,2)", "IMKG343a"]
)
def test_all_implicit_factor_is_the_stability_function(name):
    tableau = find(name)
    modes, errors = all_modes(column_for(), "all-implicit", name, 40.0)
    z = 1j * modes.frequency * 40.0
    expected = stability_function(tableau.a_implicit, tableau.b_implicit, z)
    np.testing.assert_allclose(errors.factor, expected, rtol=1e-8, atol=1e-9)


@pytest.mark.parametrize(
    "name", ["RK4", "SSPRK(3,3)", "Kinnmark-Gray 5-stage, order 2", "ARS(3,4,3)"]
)
def test_all_explicit_factor_is_the_polynomial(name):
    tableau = find(name)
    modes, errors = all_modes(column_for(), "all-explicit", name, 0.3)
    z = 1j * modes.frequency * 0.3
    power, expected, column = np.ones_like(z), np.ones_like(z), np.ones(tableau.nstage)
    for _ in range(tableau.nstage):
        power = power * z
        expected = expected + power * (tableau.b_explicit @ column)
        column = tableau.a_explicit @ column
    np.testing.assert_allclose(errors.factor, expected, rtol=1e-9)


def test_rk4_errors_shrink_at_their_order():
    column, found = column_for(), []
    for dt in (1.0, 0.5):
        modes, errors = all_modes(column, "all-explicit", "RK4", dt, WAVES[1])
        fastest = (modes.kind == "gravity") & (modes.vertical_order == 1)
        found.append((errors.frequency_error[fastest].max(), modes.frequency[fastest].max() * dt))
    for error, turn in found:
        assert error == pytest.approx(turn**4 / 120, rel=1e-2, abs=1e-13)


@pytest.mark.parametrize("staggering", STAGGERINGS)
@pytest.mark.parametrize("split", ["sound", "sound+buoyancy", "sound+buoyancy+divergence"])
@pytest.mark.parametrize("with_slope", [False, True])
def test_worst_errors_equal_the_dense_twin(staggering, split, with_slope):
    column = column_for(staggering)
    if with_slope:
        column = replace(column, slope_f=np.linspace(0.2, 0.0, 17))
    air, layout, dt, tableau = column.airs[0], layout_of(column), 4.0, find("ARS(2,3,2)")
    worst = resolved_gravity_errors(column, air, resolve(split), tableau, dt, WAVES)
    frequency_error, change, count = 0.0, 0.0, 0
    for wave in WAVES:
        if 2 * np.pi / wave.kappa < 8 * DX:
            continue
        terms, _ = energy_terms(column, air, wave)
        omega, x = np.linalg.eigh(-1j * sum(t.to_dense() for t in terms.values()))
        step = Stepper(sort_terms(resolve(split), terms, terms, layout), tableau, dt).matrix()
        for sign in (1, -1):
            ranked = np.argsort(-sign * omega)
            for k in ranked[16 : 16 + 4]:  # after 15 sound waves and the Lamb wave
                factor = np.vdot(x[:, k], step @ x[:, k])
                turn = abs(omega[k]) * dt
                count += 1
                phase = abs(np.angle(factor * np.exp(-1j * omega[k] * dt)))
                frequency_error = max(frequency_error, phase / turn)
                change = max(change, np.abs(abs(factor) ** (2 * np.pi / turn) - 1))
    assert worst.nwave == (count if with_slope else count // 2)
    assert worst.frequency_error == pytest.approx(frequency_error, rel=1e-6)
    assert abs(worst.amplitude_change_per_period) == pytest.approx(change, rel=1e-6)


def sheared_column(staggering):
    column = column_for(staggering)
    levels = column.levels
    motion = Motion(
        8 + 5e-4 * levels.centres_m, 8 + 5e-4 * levels.interfaces_m, np.zeros(16), np.zeros(17)
    )
    air = isothermal_air(levels, 250.0, motion)
    return column_of(
        levels,
        [air],
        staggering=staggering,
        horizontal=column.horizontal,
        diffusivity_c=np.full(16, 2.0),
        diffusivity_f=np.full(17, 2.0),
        wind_given=True,
    )


@pytest.mark.parametrize("staggering", STAGGERINGS)
def test_modes_of_a_sheared_column_are_projected_by_their_duals(staggering):
    dt = 60.0
    modes, errors = all_modes(sheared_column(staggering), "all-implicit", "ARS(1,1,1)", dt)
    assert not modes.is_normal
    z = (modes.growth + 1j * modes.frequency) * dt
    wave = (modes.kind == "gravity") & (modes.vertical_order <= 4)
    np.testing.assert_allclose(errors.factor[wave], (1 / (1 - z))[wave], rtol=1e-8)
    own = np.exp(modes.growth * dt)[wave]
    turn = np.maximum(np.abs(modes.frequency), np.abs(modes.intrinsic_frequency))[wave] * dt
    expected = (np.abs(1 / (1 - z))[wave] / own) ** (2 * np.pi / turn) - 1
    np.testing.assert_allclose(errors.amplitude_change_per_period[wave], expected, rtol=1e-6)


def test_wave_that_stands_still_in_the_wind_has_a_finite_error():
    column = column_for()
    wave, air = WAVES[2], column.airs[0]
    modes = normal_modes(column, air, wave)
    upstream = modes.frequency[(modes.kind == "gravity") & (modes.vertical_order == 2)].min()
    centred = replace(column.horizontal, advection="centred-2")
    per_speed = Wave(wave.kappa, centred).advection(np.array([1.0]))[0].imag
    wind = np.full(17, -upstream / per_speed)
    air = replace(air, wind_c=wind[1:], wind_f=wind)
    standing = replace(column, horizontal=centred, airs=(air,))
    errors = StepErrors(
        resolved_waves(standing, air, [Wave(wave.kappa, centred)]),
        resolve("all-implicit"),
        find("ARS(1,1,1)"),
    ).at(1.0)
    assert errors.frequency_error < 1.0
    assert abs(errors.amplitude_change_per_period) < 1.0


def test_phase_beyond_half_a_period_is_an_error_beyond_any_limit():
    column = column_for()
    errors = resolved_gravity_errors(
        column, column.airs[0], resolve("all-implicit"), find("H-CN(2,2,2)"), 400.0, WAVES
    )
    assert errors.frequency_error >= 1.0
    assert abs(errors.amplitude_change_per_period) < 1e-6


def test_growth_without_bound_stays_a_number():
    column = column_for()
    errors = resolved_gravity_errors(
        column, column.airs[0], resolve("all-explicit"), find("RK4"), 1e9, WAVES
    )
    assert np.isfinite(errors.amplitude_change_per_period)
    modes, rough = all_modes(column, "all-explicit", "RK4", 20.0)
    assert np.all(np.isfinite(rough.amplitude_change_per_period))
    assert rough.amplitude_change_per_period.max() > 10
    huge = mode_errors(modes, 1e300 * modes.vectors, 1e-3)
    assert np.all(np.isfinite(huge.amplitude_change_per_period))
    assert huge.amplitude_change_per_period.max() > 1e300
    gone = mode_errors(modes, 0 * modes.vectors, 1e-3)
    assert np.all(gone.frequency_error == 1.0)
    assert np.all(gone.amplitude_change_per_period == -1.0)


def test_waves_are_found_once_and_stepped_often():
    column = column_for()
    air = column.airs[0]
    waves = resolved_waves(column, air, WAVES)
    assert [w.kappa for w in waves] == [w.kappa for w in WAVES if 2 * np.pi / w.kappa >= 8 * DX]
    judge = StepErrors(waves, resolve("sound+buoyancy"), find("ARS(2,3,2)"))
    for dt in (3.0, 1.0, 5.0):
        alone = resolved_gravity_errors(
            column, air, resolve("sound+buoyancy"), find("ARS(2,3,2)"), dt, WAVES
        )
        assert judge.at(dt) == alone


def test_columns_without_resolved_gravity_waves_give_no_number():
    few = column_for(nlev=3)
    arguments = (resolve("sound"), find("ARS(2,3,2)"), 1.0)
    assert resolved_gravity_errors(few, few.airs[0], *arguments, WAVES) == WaveErrors()
    column = column_for()
    assert resolved_gravity_errors(column, column.airs[0], *arguments, WAVES[-1:]) == WaveErrors()
    air = column.airs[0]
    neutral = replace(air, dtheta_dz_f=0 * air.dtheta_dz_f, dtheta_dz_c=0 * air.dtheta_dz_c)
    assert resolved_gravity_errors(column, neutral, *arguments, WAVES) == WaveErrors()


def test_worst_of_several_takes_each_error_from_its_own_wave():
    a = WaveErrors(0.02, 1.0, 1, -0.01, 2.0, 2, 5)
    b = WaveErrors(0.01, 3.0, 3, 0.04, 4.0, 4, 6)
    assert worst_of([a, WaveErrors(), b]) == WaveErrors(0.02, 1.0, 1, 0.04, 4.0, 4, 11)
    assert worst_of([]) == WaveErrors()


def test_reference_state_is_stepped_with():
    column = column_for()
    colder = isothermal_air(column.levels, 220.0)
    with_reference = replace(column, reference=colder)
    arguments = (resolve("sound+buoyancy"), find("ARS(2,3,2)"), 5.0, WAVES)
    plain = resolved_gravity_errors(column, column.airs[0], *arguments)
    other = resolved_gravity_errors(with_reference, column.airs[0], *arguments)
    assert plain.frequency_error != other.frequency_error
