"""A state as profiles: physical units, energy of 1 J/m2, phases."""

import numpy as np
import pytest

from levelstride.column.column import Horizontal
from levelstride.operator.energy import energy_weights
from levelstride.operator.state import FIELDS
from levelstride.operator.wave_basis import wave_basis
from levelstride.splitting import resolve
from levelstride.stability.portrait import portrait
from levelstride.stability.wave_problem import WaveProblem
from levelstride.tableaux.lookup import find
from oracles.columns import STAGGERINGS, isothermal_column

SOUND_M_PER_S = np.sqrt(1.4 * 287.05307 * 250.0)
HEAT_CAPACITY = 3.5 * 287.05307


def on(staggering, **changes):
    horizontal = Horizontal(3e3, "staggered", 1)
    column = isothermal_column(
        6, 6e3, 250.0, ratio=1.2, horizontal=horizontal, staggering=staggering, **changes
    )
    problem = WaveProblem(column, column.airs[0], resolve("sound"), find("ARS(2,3,2)"), np.pi / 6e3)
    return column, problem


@pytest.mark.parametrize("staggering", STAGGERINGS)
@pytest.mark.parametrize("coriolis_per_s", [0.0, 1e-4])
def test_every_state_has_an_energy_of_one_joule(staggering, coriolis_per_s):
    column, problem = on(staggering, coriolis_per_s=coriolis_per_s)
    layout = problem.parts.layout
    vector = np.random.default_rng(3).normal(size=(layout.size, 2)) @ [1, 1j]
    profiles = portrait(column, problem, vector / np.linalg.norm(vector))
    weights = energy_weights(column, column.airs[0], layout)
    energy = sum(weights[layout.places(one.field)] @ one.amplitude**2 / 2 for one in profiles)
    assert energy == pytest.approx(1.0)
    assert [one.field for one in profiles] == [f for f in FIELDS if f != "v" or coriolis_per_s]
    for one in profiles:
        in_layers = one.field in ("u", "v", "pi") or (
            one.field == "theta" and staggering == "lorenz"
        )
        faces = column.levels.interfaces_m
        heights = (faces[1:] + faces[:-1]) / 2 if in_layers else faces[1:-1]
        np.testing.assert_allclose(one.heights_m, heights)
        assert np.all(np.abs(one.phase) <= np.pi)


@pytest.mark.parametrize("staggering", STAGGERINGS)
def test_the_lamb_wave_is_the_textbook_one(staggering):
    """u and cp theta0 pi'/c in phase and of one size in every layer, nothing else moves."""
    column, problem = on(staggering)
    found = problem.wave_terms
    waves = wave_basis(found.terms, problem.parts.layout, found.weights)
    for mode in np.flatnonzero(waves.kind == "Lamb"):
        profiles = {p.field: p for p in portrait(column, problem, waves.vectors[:, mode])}
        wind, pressure = profiles["u"], profiles["pi"]
        scale = HEAT_CAPACITY * column.airs[0].theta_c / SOUND_M_PER_S
        np.testing.assert_allclose(pressure.amplitude * scale, wind.amplitude, rtol=1e-7)
        assert np.ptp(wind.phase) == pytest.approx(0.0, abs=1e-6)
        apart = abs(wind.phase[0] - pressure.phase[0]) % np.pi
        assert min(apart, np.pi - apart) < 1e-6
        assert profiles["w"].amplitude.max() < 1e-9 * wind.amplitude.max()
        np.testing.assert_array_equal(profiles["w"].phase, 0.0)


def test_phases_are_against_the_point_with_most_energy():
    column, problem = on("charney-phillips")
    layout = problem.parts.layout
    vector = np.zeros(layout.size, dtype=complex)
    vector[layout.w] = np.exp(0.4j * np.arange(layout.w.size)) * [1, 2, 5, 2, 1] * np.exp(2j)
    (w,) = (p for p in portrait(column, problem, vector) if p.field == "w")
    np.testing.assert_allclose(w.phase, 0.4 * (np.arange(5) - 2), atol=1e-12)
