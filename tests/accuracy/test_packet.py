"""The packet of gravity waves: what it is made of, where it sits and where it goes."""

from dataclasses import replace

import numpy as np
import pytest

from levelstride.accuracy.carried_packet import exact_packets, march
from levelstride.accuracy.exponential import Exponential
from levelstride.accuracy.modes import normal_modes
from levelstride.accuracy.packet import CENTRE_M, WAVELENGTH_CELLS, gravity_packet
from levelstride.column.column import Horizontal
from levelstride.errors import CalculationError
from levelstride.splitting import resolve
from levelstride.stepper.imex import Stepper
from levelstride.tableaux.lookup import find
from oracles.columns import STAGGERINGS, isothermal_air, isothermal_column

DX = 1000.0


def column_for(staggering="charney-phillips", nlev=32, top_m=16e3, **changes):
    return isothermal_column(
        nlev, top_m, staggering=staggering, horizontal=Horizontal(DX, "staggered", 1), **changes
    )


def packet_of(column):
    return gravity_packet(column, column.airs[0])


def heights(column, packet, state):
    """Mean height and spread of the energy [m]."""
    energy = np.abs(state) ** 2
    at = column.levels.centres_m[packet.layout.layer_of]
    mean = np.sum(energy * at) / energy.sum()
    return mean, np.sqrt(np.sum(energy * (at - mean) ** 2) / energy.sum())


@pytest.mark.parametrize("staggering", STAGGERINGS)
def test_it_is_resolved_gravity_waves_one_way_and_nothing_else(staggering):
    column = column_for(staggering)
    packet = packet_of(column)
    assert np.linalg.norm(packet.state) == pytest.approx(1.0, rel=1e-13)
    assert packet.wavelength_m == pytest.approx(WAVELENGTH_CELLS * DX)
    modes = normal_modes(column, column.airs[0], packet.wave)
    energy = np.abs(modes.duals.conj().T @ packet.state) ** 2
    ours = (modes.kind == "gravity") & (modes.frequency > 0) & (4 * modes.vertical_order <= 32)
    assert np.count_nonzero(ours) == packet.nmode == 8
    assert energy[ours].sum() == pytest.approx(1.0, rel=1e-12)
    assert energy[~ours].max() < 1e-24
    mean = np.sum(energy[ours] * modes.frequency[ours])
    assert packet.period_s == pytest.approx(2 * np.pi / mean)


@pytest.mark.parametrize("staggering", STAGGERINGS)
def test_it_sits_in_the_middle_of_the_troposphere_and_its_energy_goes_up(staggering):
    column = column_for(staggering)
    packet = packet_of(column)
    start, spread = heights(column, packet, packet.state)
    assert packet.centre_m == CENTRE_M
    assert start == pytest.approx(CENTRE_M, abs=500.0)
    assert spread < 1.2 * packet.half_width_m
    flow = Exponential(packet.operator)
    later = [heights(column, packet, flow.apply(t, packet.state))[0] for t in (300.0, 600.0)]
    assert start + 100 < later[0] < later[1]


def test_in_a_low_column_it_sits_in_the_middle():
    column = column_for(top_m=4000.0)
    packet = packet_of(column)
    assert packet.centre_m == 2000.0
    assert heights(column, packet, packet.state)[0] == pytest.approx(2000.0, abs=300.0)


def test_the_same_column_gives_the_same_packet():
    one, other = packet_of(column_for()), packet_of(column_for())
    np.testing.assert_array_equal(one.state, other.state)


def test_a_uniform_wind_carries_the_same_packet():
    column = column_for()
    air = replace(column.airs[0], wind_c=np.full(32, 9.0), wind_f=np.full(33, 9.0))
    np.testing.assert_allclose(gravity_packet(column, air).state, packet_of(column).state)


@pytest.mark.parametrize("change", ["neutral", "layers"])
def test_without_resolved_gravity_waves_it_says_so(change):
    column = column_for(nlev=3 if change == "layers" else 32)
    air = column.airs[0]
    if change == "neutral":
        air = replace(air, dtheta_dz_f=0 * air.dtheta_dz_f, dtheta_dz_c=0 * air.dtheta_dz_c)
    with pytest.raises(CalculationError, match="air 'isothermal': no gravity wave is resolved"):
        gravity_packet(column, air)


def test_a_mixed_layer_leaves_the_waves_above_it():
    column = column_for()
    air = column.airs[0]
    convective_f, convective_c = air.dtheta_dz_f.copy(), air.dtheta_dz_c.copy()
    convective_f[:1], convective_c[:1] = -1e-5, -1e-5
    packet = gravity_packet(
        column, replace(air, dtheta_dz_f=convective_f, dtheta_dz_c=convective_c)
    )
    assert 4 <= packet.nmode <= 8


@pytest.mark.parametrize("staggering", STAGGERINGS)
def test_in_a_sheared_wind_it_holds_no_sound(staggering):
    """What is left of it after an hour is the sum of its own modes, to round-off."""
    column = column_for(staggering)
    wind = 3 + 1e-3 * column.levels.interfaces_m
    air = replace(column.airs[0], wind_c=(wind[1:] + wind[:-1]) / 2, wind_f=wind)
    packet = gravity_packet(column, air)
    modes = normal_modes(column, air, packet.wave)
    assert not modes.is_normal
    content = np.abs(modes.duals.conj().T @ packet.state) / np.maximum(modes.condition, 1.0)
    assert content[modes.kind == "sound"].max() < 1e-10
    assert content[modes.intrinsic_frequency < 0].max() < 1e-10
    assert content[modes.kind == "gravity"].max() > 0.1


def test_air_states_without_gravity_waves_are_named_and_left_out():
    column = column_for()
    air = column.airs[0]
    neutral = replace(
        air, name="mixed", dtheta_dz_f=0 * air.dtheta_dz_f, dtheta_dz_c=0 * air.dtheta_dz_c
    )
    runs, left_out = exact_packets(replace(column, airs=(neutral, air)), 600.0)
    assert [run.summary.air for run in runs] == ["isothermal"]
    assert len(left_out) == 1
    assert "air 'mixed'" in left_out[0]
    with pytest.raises(CalculationError, match="no gravity wave is resolved"):
        exact_packets(replace(column, airs=(neutral,)), 600.0)


@pytest.mark.parametrize("reference", [False, True])
@pytest.mark.parametrize("windy", [False, True])
@pytest.mark.parametrize("steps", [1, 2, 37, 64, 1000])
def test_powers_by_squaring_are_step_after_step(steps, windy, reference):
    column = column_for(nlev=8)
    air = column.airs[0]
    if windy:
        air = replace(air, wind_c=np.linspace(1, 9, 8), wind_f=np.linspace(0, 10, 9))
    if reference:
        column = replace(column, reference=isothermal_air(column.levels, 230.0))
    packet = gravity_packet(column, air)
    stepper = Stepper(packet.parts(resolve("sound")), find("ARS(2,3,2)"), 0.5)
    assert stepper.dtype.kind == ("c" if windy else "f")
    state = packet.state
    for _ in range(steps):
        state = stepper.step(state)
    np.testing.assert_allclose(march(stepper, packet.state, steps), state, atol=1e-12, rtol=0)


def test_few_steps_of_many_layers_are_taken_one_by_one():
    column = column_for(nlev=120)
    packet = packet_of(column)
    stepper = Stepper(packet.parts(resolve("sound")), find("ARS(2,3,2)"), 0.1)
    expected = np.linalg.matrix_power(stepper.matrix(), 5) @ packet.state
    np.testing.assert_allclose(march(stepper, packet.state, 5), expected, atol=1e-13, rtol=0)
