"""What bites: the critical state taken apart by field, kind of wave and layer."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from levelstride.column.column import Horizontal
from levelstride.column.read import build
from levelstride.operator.state import FIELDS, Layout
from levelstride.operator.wave_basis import KINDS, wave_basis
from levelstride.splitting import resolve
from levelstride.stability.bites import anatomy, critical_state, layers_holding
from levelstride.stability.tolerance import Tolerance
from levelstride.stability.verdict import ColumnVerdict
from levelstride.stability.wave_problem import WaveProblem
from levelstride.tableaux.lookup import find
from oracles.columns import STAGGERINGS, isothermal_column

TOLERANCE = Tolerance(86400.0, 1000.0)
COARSE, FINE = Horizontal(1e5, "staggered", 1), Horizontal(3e3, "staggered", 1)
BUOYANCY_FREQUENCY = 9.80665 / np.sqrt(3.5 * 287.05307 * 250.0)
HORIZONTAL_PAIR = "horizontal-pressure-gradient+horizontal-divergence"


def critical(tableau, split, horizontal=FINE, staggering="charney-phillips", **changes):
    """Wave, step, critical state and anatomy at the limit of an isothermal column."""
    column = isothermal_column(
        5, 20e3, 250.0, horizontal=horizontal, staggering=staggering, **changes
    )
    bracket = ColumnVerdict(column, resolve(split), find(tableau)).stable_step(TOLERANCE).bracket
    assert bracket is not None
    state = critical_state(bracket.problem, bracket.low, TOLERANCE)
    return bracket, state, anatomy(bracket.problem, state.basis)


@pytest.mark.parametrize("staggering", STAGGERINGS)
@pytest.mark.parametrize(
    ("tableau", "split", "horizontal", "kind"),
    [
        ("SSPRK(3,3)", "all-explicit", FINE, "sound"),
        ("ARS(2,3,3)", "sound", FINE, "sound"),
        ("ARS(2,3,2)", "sound", FINE, "Lamb"),
        ("ARS(2,3,2)", "sound+buoyancy+divergence", COARSE, "Lamb"),
        ("ARS(2,3,3)", f"sound+{HORIZONTAL_PAIR}", FINE, "gravity"),
        ("ARS(2,3,3)", "sound", COARSE, "gravity"),
    ],
)
def test_the_kind_of_wave_is_named(staggering, tableau, split, horizontal, kind):
    """Explicit buoyancy lets gravity waves grow; explicit sound lets sound grow."""
    _, state, where = critical(tableau, split, horizontal, staggering)
    assert where.kind_share[kind] > 0.9
    assert sum(where.kind_share.values()) == pytest.approx(1.0)
    assert sum(where.energy_share.values()) == pytest.approx(1.0)
    assert set(where.energy_share) == set(FIELDS) - {"v"}
    if kind == "Lamb":
        assert where.energy_share["w"] < 1e-12
        assert where.energy_share["theta"] < 1e-12
    if kind == "gravity":
        assert state.period_s > 2 * np.pi / BUOYANCY_FREQUENCY


def problem_on(horizontal, layers, staggering, split="all-explicit", tableau="RK4"):
    column = isothermal_column(
        layers, 500.0 * layers, 250.0, horizontal=horizontal, staggering=staggering
    )
    kappa = np.pi / horizontal.grid_spacing_m
    return WaveProblem(column, column.airs[0], resolve(split), find(tableau), kappa)


@pytest.mark.parametrize("staggering", STAGGERINGS)
def test_each_wave_is_recognised_for_what_it_is(staggering):
    problem = problem_on(FINE, 5, staggering)
    waves = wave_basis(problem.wave_terms.terms, problem.parts.layout, problem.wave_terms.weights)
    for mode, kind in zip(waves.vectors.T, waves.kind, strict=True):
        where = anatomy(problem, mode[:, None])
        assert where.kind_share[kind] == pytest.approx(1.0)
        assert sum(where.energy_share.values()) == pytest.approx(1.0)
    assert set(where.kind_share) <= set(KINDS)


@pytest.mark.parametrize("field", ["u", "pi", "w"])
@pytest.mark.parametrize("period", [2, 4])
def test_the_wavelength_in_layers(field, period):
    problem = problem_on(FINE, 24, "charney-phillips")
    layout = problem.parts.layout
    state = np.zeros((layout.size, 1), dtype=complex)
    places = layout.places(field)
    state[places, 0] = np.exp(2j * np.pi / period * np.arange(places.size))
    where = anatomy(problem, state / np.linalg.norm(state))
    assert where.wavelength_layers == pytest.approx(period, rel=0.03)
    assert where.alternates == (period == 2)
    assert where.energy_by_layer.shape == (24,)
    assert where.energy_by_layer.sum() == pytest.approx(1.0)
    assert where.energy_share[field] == pytest.approx(1.0)


def test_a_state_in_one_layer_is_found_there():
    problem = problem_on(FINE, 10, "lorenz")
    layout = problem.parts.layout
    state = np.zeros((layout.size, 1))
    state[layout.theta[7], 0] = 1.0
    where = anatomy(problem, state)
    assert (where.layer_lowest, where.layer_highest) == (7, 7)
    assert where.energy_share == {"u": 0.0, "w": 0.0, "theta": 1.0, "pi": 0.0}


energies = st.lists(st.floats(0.0, 1e3), min_size=1, max_size=30).filter(lambda e: sum(e) > 1e-3)


@given(energies, st.floats(0.1, 0.99))
@settings(max_examples=200)
def test_no_shorter_run_of_layers_holds_the_share(energy, share):
    energy = np.array(energy)
    low, high = layers_holding(energy, share)
    assert 0 <= low <= high < energy.size
    need = share * energy.sum() * (1 - 1e-9)
    assert energy[low : high + 1].sum() >= need
    length = high - low + 1
    sums = [energy[k : k + length].sum() for k in range(energy.size - length + 1)]
    assert energy[low : high + 1].sum() >= max(sums) - 1e-9 * energy.sum()
    if length > 1:
        shorter = [energy[k : k + length - 1].sum() for k in range(energy.size - length + 2)]
        assert max(shorter) < share * energy.sum() * (1 + 1e-9)


@pytest.mark.parametrize("staggering", STAGGERINGS)
def test_the_critical_state_is_invariant_and_grows_at_the_rate_it_says(staggering):
    bracket, state, _ = critical("ARS(2,3,3)", "sound", FINE, staggering)
    problem, dt = bracket.problem, 1.001 * bracket.low
    gram = state.basis.conj().T @ state.basis
    np.testing.assert_allclose(gram, np.eye(gram.shape[0]), atol=1e-10)
    image = problem.matrix(dt) @ state.basis
    outside = image - state.basis @ (state.basis.conj().T @ image)
    assert np.linalg.norm(outside) < 1e-8
    assert state.growth_per_s == pytest.approx(problem.growth(dt), rel=1e-9)
    assert state.growth_per_s > problem.rate(TOLERANCE)
    # the state that is drawn is one of them, and grows fastest
    assert np.linalg.norm(state.vector) == pytest.approx(1.0)
    inside = state.basis @ (state.basis.conj().T @ state.vector)
    np.testing.assert_allclose(inside, state.vector, atol=1e-8)
    stepped = problem.matrix(dt) @ state.vector
    assert np.log(np.linalg.norm(stepped)) / dt == pytest.approx(state.growth_per_s, rel=1e-6)


def test_where_only_a_transient_breaks_the_most_amplified_state_is_taken():
    """Upwind transport at twice its Courant limit: no eigenvalue grows, powers do."""
    column = _rising_air()
    split = resolve({"name": "all-implicit", "vertical-advection": "explicit"})
    problem = WaveProblem(column, column.airs[0], split, find("ARS(1,1,1)"), np.pi / 3000.0)
    step = 10.0
    while problem.stable(step, TOLERANCE):
        step *= 1.01
    assert problem.violated(step, TOLERANCE) == ("transient",)
    state = critical_state(problem, step, TOLERANCE)
    assert state.basis.shape == (problem.parts.layout.size, 1)
    assert np.linalg.norm(state.basis) == pytest.approx(1.0)
    np.testing.assert_array_equal(state.vector, state.basis[:, 0])
    assert state.growth_per_s > problem.rate(TOLERANCE)
    where = anatomy(problem, state.basis)
    assert sum(where.energy_share.values()) == pytest.approx(1.0)


def _rising_air():
    return build(
        {
            "levels": {"kind": "uniform", "layers": 10, "top_m": 100.0},
            "air": {
                "kind": "constant-n",
                "surface_temperature_k": 300.0,
                "buoyancy_frequency_per_s": 0.0,
            },
            "horizontal": {"grid_spacing_m": 3000.0, "directions": 1},
            "updraft": {
                "heights_m": [0.0, 5.0, 95.0, 100.0],
                "speeds_m_per_s": [0.0, 1.0, 1.0, 0.0],
                "scheme": "upwind-1",
            },
        }
    )


def test_the_layout_of_a_rotating_column_shares_energy_with_v():
    _, _, where = critical("SSPRK(3,3)", "all-explicit", coriolis_per_s=1e-4)
    assert set(where.energy_share) == set(FIELDS)
    assert Layout(4, "charney-phillips", rotation=True).places("v").size == 4
