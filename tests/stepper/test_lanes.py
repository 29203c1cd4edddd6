"""Lanes taken together step as each of them does alone."""

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from levelstride import tableaux
from levelstride.errors import CalculationError, InputError
from levelstride.operator.bands import Banded
from levelstride.operator.state import Layout
from levelstride.operator.terms import CATALOGUE
from levelstride.splitting.groups import TREATMENTS
from levelstride.splitting.parts import Parts
from levelstride.stepper import Stepper, lane_kernels
from levelstride.stepper.lanes import LaneStepper
from oracles.columns import STAGGERINGS, random_column, seeds
from oracles.schemes import backward_euler
from oracles.stepping import SPLITTINGS, parts_of, small_column, tall_column

TOLERANCE = 1e-12
KINDS = ("flat", "slope", "everything")


def waves(splitting, column, nlane):
    """As many waves of a column, longest first."""
    return [parts_of(splitting, column, share) for share in np.linspace(1.0, 0.1, nlane)[::-1]]


def step_for(lanes):
    """A step some way beyond the explicit limit of the fastest wave [s]."""
    return 3.0 / max(np.linalg.norm(parts.whole.to_dense(), 2) for parts in lanes)


def states_for(stepper, seed=0):
    rng = np.random.default_rng(seed)
    states = rng.normal(size=(stepper.layout.size, stepper.nlane)).astype(stepper.dtype)
    if stepper.dtype.kind == "c":
        states += 1j * rng.normal(size=states.shape)
    return states


def alone(lanes, tableau, dt, states, steps=1):
    """Every lane by its own stepper."""
    stepped = []
    for parts, state in zip(lanes, states.T, strict=True):
        stepper = Stepper(parts, tableau, dt)
        for _ in range(steps):
            state = stepper.step(state)
        stepped.append(state)
    return np.stack(stepped, axis=1)


def worst(lanes, tableau, dt, *, steps=1, seed=0, **how):
    """Largest difference of a lane over its own largest entry."""
    together = LaneStepper(lanes, tableau, dt, **how)
    states = states_for(together, seed)
    expected = alone(lanes, tableau, dt, states, steps)
    together.march(states, steps)
    return float((np.abs(states - expected).max(axis=0) / np.abs(expected).max(axis=0)).max())


@pytest.mark.parametrize("splitting", SPLITTINGS)
@pytest.mark.parametrize("staggering", STAGGERINGS)
@pytest.mark.parametrize("kind", KINDS)
def test_every_tableau_and_splitting(kind, staggering, splitting):
    """Every sixth tableau in turn, so that every kind of column and every splitting meets all."""
    lanes = waves(splitting, small_column(kind, staggering), 2)
    dt, turn = step_for(lanes), KINDS.index(kind) + 3 * STAGGERINGS.index(staggering)
    for name in tableaux.names()[(turn + SPLITTINGS.index(splitting)) % 6 :: 6]:
        assert worst(lanes, tableaux.find(name), dt) < TOLERANCE, name


@settings(deadline=None, max_examples=30)
@given(
    seed=seeds,
    treatments=st.lists(
        st.sampled_from(TREATMENTS), min_size=len(CATALOGUE), max_size=len(CATALOGUE)
    ),
    tableau=st.sampled_from(tableaux.names()),
    reference=st.booleans(),
    shares=st.lists(st.floats(0.01, 1.0), min_size=1, max_size=9),
)
def test_any_treatments_and_reference_state(seed, treatments, tableau, reference, shares):
    column = random_column(seed, everything=True, reference=reference)
    splitting = dict(zip(CATALOGUE, treatments, strict=True))
    lanes = [parts_of(splitting, column, share) for share in shares]
    dt = step_for(lanes) / 3.0
    assert worst(lanes, tableaux.find(tableau), dt, seed=seed) < TOLERANCE


@pytest.mark.parametrize("nlane", [1, 3, 16, 21])
@pytest.mark.parametrize("kind", ["flat", "everything"])
def test_any_number_of_lanes_over_several_steps(kind, nlane):
    tableau = tableaux.find("ARS(3,4,3)")
    lanes = waves("sound+buoyancy", small_column(kind, "charney-phillips"), nlane)
    assert worst(lanes, tableau, 0.3 * step_for(lanes), steps=5) < TOLERANCE


@pytest.mark.parametrize("splitting", ["sound+buoyancy", "all-implicit"])
def test_air_states_as_lanes(splitting):
    columns = [random_column(seed, everything=True, staggering="lorenz") for seed in range(60)]
    same = [c for c in columns if c.levels.nlev == 7 and not c.coriolis_per_s]
    assert len(same) > 1
    lanes = [parts_of(splitting, column) for column in same]
    assert worst(lanes, tableaux.find("ARS(2,3,2)"), step_for(lanes), steps=2) < TOLERANCE


@pytest.mark.parametrize("splitting", ["sound+buoyancy", "sound+divergence", "all-implicit"])
def test_a_spoilt_lane_differs_and_spoils_no_other(splitting):
    lanes = waves(splitting, small_column("slope", "lorenz"), 5)
    tableau, dt = tableaux.find("ARS(2,3,2)"), step_for(lanes)
    part = "fast" if splitting == "all-implicit" else "slow"
    entry = Banded.from_entries(lanes[0].layout.size, [(7, 7, 1e-6 / dt)])
    spoilt = list(lanes)
    spoilt[2] = replace(lanes[2], **{part: getattr(lanes[2], part) + entry})
    together = LaneStepper(spoilt, tableau, dt)
    states = states_for(together)
    expected = alone(lanes, tableau, dt, states)
    together.march(states, 1)
    difference = np.abs(states - expected).max(axis=0) / np.abs(expected).max()
    assert 1e-9 < difference[2] < 1e-5
    assert np.delete(difference, 2).max() < TOLERANCE


def test_lost_lanes_stay_alone():
    """A state that overflows does so in its own lane."""
    lanes = waves("sound", small_column("flat", "lorenz"), 4)
    tableau = tableaux.find("ARS(2,3,2)")
    stepper = LaneStepper(lanes, tableau, 0.1 * step_for(lanes))
    states = states_for(stepper)
    states[:, 1] = np.inf
    others = states[:, [0, 2, 3]].copy()
    expected = alone([lanes[0], *lanes[2:]], tableau, stepper.dt, others, 3)
    stepper.march(states, 3)
    np.testing.assert_allclose(states[:, [0, 2, 3]], expected, rtol=0, atol=TOLERANCE)
    assert not np.any(np.isfinite(states[:, 1]))


@pytest.mark.parametrize("name", ["ARS(2,3,2)", "Trap2(2,3,2)", "ARK5(4)8L[2]SA"])
def test_no_spurious_growth_at_a_large_step(name):
    """Nothing grows where everything is implicit, though no rows are interchanged."""
    column = tall_column(40, "lorenz")
    parts = parts_of("all-implicit", column)
    for dt in (1e3, 1e4):
        stepper = LaneStepper([parts] * parts.layout.size, tableaux.find(name), dt)
        matrix = np.eye(parts.layout.size)
        stepper.march(matrix, 1)
        assert np.abs(np.linalg.eigvals(matrix)).max() <= 1.0 + 1e-13


def test_another_step_is_the_same_as_a_new_stepper():
    lanes = waves(
        "sound+buoyancy+divergence+slope+transport+mixing", small_column("everything", "lorenz"), 3
    )
    tableau, dt = tableaux.find("ARS(2,3,3)"), step_for(lanes)
    again, new = (
        LaneStepper(lanes, tableau, dt).at_step(0.7 * dt),
        LaneStepper(lanes, tableau, 0.7 * dt),
    )
    states = states_for(new)
    other = states.copy()
    new.march(states, 2)
    again.march(other, 2)
    np.testing.assert_array_equal(states, other)
    assert again.moved == new.moved > new.working_set > states.nbytes


@pytest.mark.parametrize("kind", ["flat", "everything"])
def test_single_precision(kind):
    lanes = waves("sound+buoyancy", small_column(kind, "charney-phillips"), 9)
    tableau, dt = tableaux.find("ARS(3,4,3)"), 0.3 * step_for(lanes)
    assert 1e-9 < worst(lanes, tableau, dt, precision="single") < 1e-5
    stepper = LaneStepper(lanes, tableau, dt, precision="single")
    assert stepper.dtype == (np.float32 if kind == "flat" else np.complex64)


PLAIN = {
    "bare": lambda array: array,
    "fixed": lambda value: value,
    "load": lambda room, index, span: room[index : index + len(span)].copy(),
    "number": lambda room, index: room[index],
    "store": lambda room, index, row: room.__setitem__(slice(index, index + row.size), row),
    "nothing": lambda room, span: np.zeros(len(span)),
    "add_scaled": lambda total, factor, row: total + factor * row,
    "exchanged": lambda row: np.roll(row, row.size // 2),
}
KERNELS = (
    "simple_rows",
    "any_rows",
    "write_rows",
    "take_steps",
    "take_steps_in",
    "march",
    "factor_lanes",
)


@pytest.mark.parametrize("kind", ["flat", "everything"])
@pytest.mark.parametrize("splitting", ["sound+buoyancy", "sound+buoyancy+slope"])
def test_uncompiled_kernels_take_the_same_step(kind, splitting):
    lanes = waves(splitting, small_column(kind, "lorenz"), 3)
    stepper = LaneStepper(lanes, tableaux.find("SSP2(2,2,2)"), step_for(lanes))
    compiled = states_for(stepper)
    slow = compiled.copy()
    stepper.march(compiled, 1)
    with pytest.MonkeyPatch.context() as patch:
        for name in KERNELS:
            patch.setattr(lane_kernels, name, getattr(lane_kernels, name).py_func)
        for name, function in PLAIN.items():
            patch.setattr(lane_kernels, name, function)
        stepper.at_step(stepper.dt).march(slow, 1)
    np.testing.assert_allclose(slow, compiled, rtol=0, atol=1e-13 * np.abs(compiled).max())


def test_lost_pivot_is_named():
    """Damping at rate r meets the pole 1 + a dt r = 0 of a negative diagonal entry a."""
    at = Layout(5, "charney-phillips")
    rates = np.array([0.0, 0.0, 0.0, 0.02])
    fast = Banded.from_entries(at.size, [(at.w, at.w, -rates)])
    none = Banded.zeros(at.size)
    parts = Parts(none, fast, none, none, at, frozenset({"upper-damping"}))
    mild = replace(parts, fast=fast.scaled(0.5))
    tableau = backward_euler(-0.5, "spoilt")
    message = r"spoilt, stage 2 \(implicit diagonal -0.5\).*singular at layer 5 .* step of 100 s"
    with pytest.raises(CalculationError, match=message):
        LaneStepper([mild, parts], tableau, 100.0)
    assert worst([mild, parts], tableau, 90.0) < TOLERANCE
    after = replace(mild, after_implicit=fast.scaled(-0.5))
    with pytest.raises(CalculationError, match=r"after-step-implicit.* step of 100 s"):
        LaneStepper([mild, after], tableau, 100.0)


def test_what_is_refused():
    flat = waves("sound", small_column("flat", "lorenz"), 2)
    tableau = tableaux.find("RK4")
    assert LaneStepper.serves(flat[0], tableau)
    broken = replace(flat[0], slow=flat[0].slow.scaled(np.nan))
    assert not LaneStepper.serves(broken, tableau)
    for dt in (0.0, -1.0, np.nan, np.inf):
        with pytest.raises(InputError, match="must be positive and finite"):
            LaneStepper(flat, tableau, dt)
    with pytest.raises(ValueError, match="no lanes"):
        LaneStepper([], tableau, 1.0)
    other = waves("sound", small_column("flat", "charney-phillips"), 1)
    with pytest.raises(ValueError, match="different unknowns"):
        LaneStepper([*flat, *other], tableau, 1.0)
    stepper = LaneStepper(flat, tableau, 0.01)
    size = stepper.layout.size
    for states in (np.ones((size, 3)), np.ones((size, 2), complex), np.ones(size)):
        with pytest.raises(ValueError, match="expected"):
            stepper.march(states, 1)
    with pytest.raises(ValueError, match="contiguous"):
        stepper.march(np.ones((2, size)).T, 1)
