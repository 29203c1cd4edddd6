"""Errors by kind of wave: what is counted, what is worst, and against single modes."""

from dataclasses import replace

import numpy as np
import pytest

from levelstride.accuracy import by_kind, column_waves, step_wave_errors
from levelstride.accuracy.by_kind import WaveErrorsAtStep
from levelstride.accuracy.wave_errors import StepErrors
from levelstride.column.background import Motion
from levelstride.column.column import Horizontal
from levelstride.column.levels import Levels
from levelstride.operator.sampled_waves import sampled_wavenumbers
from levelstride.splitting import resolve
from levelstride.tableaux import find
from oracles.columns import STAGGERINGS, column_of, isothermal_air, isothermal_column

HORIZONTAL = Horizontal(2000.0, "staggered", 1)
LONG_ENOUGH = int(np.sum(sampled_wavenumbers(HORIZONTAL) <= 2 * np.pi / 16000.0 * (1 + 1e-9)))


def column_for(staggering="charney-phillips", nlev=8, **changes):
    return isothermal_column(nlev, staggering=staggering, horizontal=HORIZONTAL, **changes)


def errors(column, split, tableau, dt, **options):
    return step_wave_errors(column, resolve(split), find(tableau), dt, **options)


@pytest.mark.parametrize("staggering", STAGGERINGS)
def test_every_mode_is_counted_by_kind(staggering):
    found = errors(column_for(staggering), "sound+buoyancy", "ARS(2,3,2)", 1.0)
    counts = {kind: of.modes for kind, of in found.kinds.items()}
    expected = {"gravity": 7, "sound": 7, "lamb": 1}
    expected |= {"computational": 1} if staggering == "lorenz" else {}
    assert counts == {kind: LONG_ENOUGH * count for kind, count in expected.items()}
    assert (found.ambiguous, found.entangled) == (0, 0)
    assert found.matched == sum(counts.values())
    assert found.resolved.modes == 2 * LONG_ENOUGH


@pytest.mark.parametrize("staggering", STAGGERINGS)
def test_backward_euler_damps_each_kind_as_its_closed_form(staggering):
    dt = 120.0
    found = errors(column_for(staggering), "all-implicit", "ARS(1,1,1)", dt)
    lamb = np.sqrt(1.4 * 287.05307 * 250.0) * np.array(
        [2 * np.sin(k * 1000.0) / 2000.0 for k in sampled_wavenumbers(HORIZONTAL)[:LONG_ENOUGH]]
    )
    rate = -np.log1p((lamb * dt) ** 2) / (2 * dt)
    per_period, per_hour = np.expm1(rate * 2 * np.pi / lamb), np.expm1(rate * 3600)
    of = found.kinds["lamb"]
    assert of.worst_change_per_period == pytest.approx(per_period.min(), rel=1e-5)
    assert of.mean_change_per_period == pytest.approx(per_period.mean(), rel=1e-5)
    assert of.worst_change_per_hour == pytest.approx(per_hour.min(), rel=1e-5)
    assert of.mean_change_per_hour == pytest.approx(per_hour.mean(), rel=1e-5)
    assert found.kinds["sound"].mean_change_per_hour < found.kinds["gravity"].mean_change_per_hour
    assert found.spurious_growth_per_s <= 1e-12
    assert found.faint > 0
    if staggering == "lorenz":
        assert abs(found.kinds["computational"].worst_change_per_hour) < 1e-9
        assert found.kinds["computational"].frequency_error is None


def test_resolved_only_is_what_the_whole_says_of_them():
    column = column_for()
    whole = errors(column, "sound+buoyancy", "ARS(2,3,2)", 4.0)
    alone = errors(column, "sound+buoyancy", "ARS(2,3,2)", 4.0, resolved_only=True)
    assert set(alone.kinds) == {"gravity"}
    assert alone.kinds["gravity"] == alone.resolved
    for name in ("frequency_error", "worst_change_per_period", "mean_change_per_hour"):
        assert getattr(alone.resolved, name) == pytest.approx(getattr(whole.resolved, name))
    assert alone.worst_resolved.vertical_order == whole.worst_resolved.vertical_order
    assert alone.spurious_growth_per_s == pytest.approx(whole.spurious_growth_per_s, abs=1e-12)


def test_worst_resolved_wave_is_measured_by_the_limits_of_the_column():
    column = column_for()
    by_phase = errors(column, "sound+buoyancy", "ARS(2,3,2)", 10.0, resolved_only=True)
    strict = replace(
        column, advice=replace(column.advice, amplitude_loss_per_period=1e-9, frequency_error=1.0)
    )
    by_loss = errors(strict, "sound+buoyancy", "ARS(2,3,2)", 10.0, resolved_only=True)
    assert by_phase.resolved == by_loss.resolved
    assert by_phase.worst_resolved.frequency_error == pytest.approx(
        by_phase.resolved.frequency_error
    )
    assert by_loss.worst_resolved.change_per_period == pytest.approx(
        by_loss.resolved.worst_change_per_period
    )


def test_small_steps_agree_with_the_projection():
    column = column_for()
    splitting, tableau = resolve("sound+buoyancy"), find("ARS(2,3,2)")
    projected = StepErrors(column_waves(column), splitting, tableau)
    for dt in (0.5, 0.25):
        matched = step_wave_errors(column, splitting, tableau, dt, resolved_only=True).resolved
        other = projected.at(dt)
        assert matched.frequency_error == pytest.approx(other.frequency_error, rel=0.02)
        assert matched.worst_change_per_period == pytest.approx(
            other.amplitude_change_per_period, rel=0.1, abs=1e-6
        )


def test_spurious_growth_is_what_the_step_adds():
    column = column_for()
    found = errors(column, "all-explicit", "RK4", 20.0)
    assert found.spurious_growth_per_s > 0.01


def sheared(levels):
    n = levels.nlev
    wind = 10.0 + 1e-3 * levels.interfaces_m
    return Motion(10.0 + 1e-3 * levels.centres_m, wind, np.zeros(n), np.zeros(n + 1))


def test_several_airs_wind_and_rotation():
    levels = Levels(np.linspace(0.0, 12e3, 9))
    airs = [
        replace(isothermal_air(levels, 250.0, sheared(levels)), name="windy"),
        replace(isothermal_air(levels, 230.0), name="calm"),
    ]
    column = column_of(levels, airs, horizontal=HORIZONTAL, coriolis_per_s=1e-4)
    found = errors(column, "sound+buoyancy", "ARS(2,3,2)", 2.0)
    assert found.kinds["computational"].modes > 0
    assert found.worst_resolved.air in ("windy", "calm")
    total = found.matched + found.ambiguous + found.entangled
    n = 5 * 8 - 2
    calm = LONG_ENOUGH * (n - 8) // 2 + LONG_ENOUGH * 8
    assert total == LONG_ENOUGH * n + calm
    assert found.ambiguous <= 0.05 * total


def test_columns_without_resolved_waves_give_an_empty_record():
    few = column_for(nlev=3)
    found = errors(few, "sound", "ARS(2,3,2)", 1.0, resolved_only=True)
    assert (found.matched, found.kinds, found.worst_resolved) == (0, {}, None)
    assert found.resolved == by_kind.KindErrors()


def test_an_explicit_method_is_one_whatever_the_splitting():
    column = column_for()
    tableau, waves = find("RK4"), column_waves(column)
    a, b = (
        WaveErrorsAtStep(waves, resolve(split), tableau, column.advice).at(1.0)
        for split in ("sound", "all-explicit")
    )
    assert a == b
