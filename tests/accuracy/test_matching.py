"""Modes followed into eigenvalues of a step: closed forms, marches, what must not be guessed."""

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from levelstride.accuracy.matching import FAINT, Follower, Pairs
from levelstride.accuracy.modes import mode_weights, modes_of
from levelstride.accuracy.wave_errors import mode_errors
from levelstride.column.column import Horizontal
from levelstride.operator.setting import layout_of
from levelstride.operator.terms import assemble
from levelstride.operator.wave import Wave
from levelstride.splitting import resolve
from levelstride.splitting.parts import sort_terms
from levelstride.stepper.imex import Stepper
from levelstride.tableaux import find
from oracles.columns import STAGGERINGS, isothermal_column, random_column, seeds

DX = 2000.0
HORIZONTAL = Horizontal(DX, "staggered", 2)


def column_for(staggering="charney-phillips", nlev=12, **changes):
    return isothermal_column(nlev, staggering=staggering, horizontal=HORIZONTAL, **changes)


class Case:
    """One wave of a column under a splitting and tableau."""

    def __init__(self, column, split, tableau, cells=16):
        air, wave = column.airs[0], Wave(2 * np.pi / (cells * DX), column.horizontal)
        self.layout, weights = layout_of(column), mode_weights(column, air)
        terms = {
            name: term.similar(np.sqrt(weights))
            for name, term in assemble(column, air, wave).items()
        }
        modes = modes_of(terms, self.layout, weights)
        moving = np.abs(modes.frequency) > 1e-9 * np.abs(modes.frequency).max()
        self.modes = modes.select(moving)
        self.parts = sort_terms(resolve(split), terms, terms, self.layout)
        self.tableau = find(tableau)
        self.follower = Follower(self.parts, self.tableau)

    def followed(self, dt):
        modes = self.modes
        exponent = modes.growth + 1j * modes.frequency
        return self.follower.follow(exponent, modes.vectors, modes.duals, dt)

    def projected(self, dt):
        stepped = Stepper(self.parts, self.tableau, dt).step(self.modes.vectors)
        return mode_errors(self.modes, stepped, dt)

    def matrix(self, dt):
        return Stepper(self.parts, self.tableau, dt).matrix()


@pytest.mark.parametrize("staggering", STAGGERINGS)
@pytest.mark.parametrize("dt", [0.5, 20.0, 4000.0])
def test_trapezoidal_phase_stays_right_beyond_half_a_turn(staggering, dt):
    case = Case(column_for(staggering), "all-implicit", "H-CN(2,2,2)")
    found = case.followed(dt)
    assert found.matched.all()
    expected = 2 * np.arctan(case.modes.frequency * dt / 2)
    np.testing.assert_allclose(found.turn, expected, rtol=1e-8, atol=1e-9)
    np.testing.assert_allclose(np.abs(found.factor), 1.0, rtol=1e-9)


def test_exact_scheme_of_high_order_turns_several_times():
    """RK4 at its limit turns the fastest wave by almost a radian and a half, others by less."""
    case = Case(column_for(nlev=4), "all-explicit", "RK4")
    dt = 2.7 / np.abs(case.modes.frequency).max()
    found = case.followed(dt)
    z = 1j * case.modes.frequency * dt
    expected = 1 + z + z**2 / 2 + z**3 / 6 + z**4 / 24
    assert found.matched.all()
    np.testing.assert_allclose(found.factor, expected, rtol=1e-9)
    phases = np.unwrap(
        np.angle(np.stack([1 + s * z + (s * z) ** 2 / 2 + (s * z) ** 3 / 6 + (s * z) ** 4 / 24
                           for s in np.linspace(0, 1, 200)])),
        axis=0,
    )  # fmt: skip
    np.testing.assert_allclose(found.turn, phases[-1], rtol=1e-7, atol=1e-9)


@pytest.mark.parametrize("dt", [0.5, 20.0, 4000.0])
def test_backward_euler_loses_fast_waves_and_says_so(dt):
    case = Case(column_for(), "all-implicit", "ARS(1,1,1)")
    found = case.followed(dt)
    turn = case.modes.frequency * dt
    size = 1 / np.sqrt(1 + turn**2)
    assert found.matched.all()
    np.testing.assert_allclose(np.abs(found.factor), size, rtol=1e-8)
    assert np.array_equal(np.isnan(found.turn), size < FAINT)
    held = size >= FAINT
    np.testing.assert_allclose(found.turn[held], np.arctan(turn[held]), rtol=1e-8)


@pytest.mark.parametrize("split", ["sound", "sound+buoyancy", "sound+buoyancy+divergence"])
@pytest.mark.parametrize("staggering", STAGGERINGS)
def test_matched_values_are_eigenvalues_each_taken_once(split, staggering):
    case, dt = Case(column_for(staggering), split, "ARS(2,3,2)"), 3.0
    found = case.followed(dt)
    assert found.matched.mean() > 0.9
    eigenvalues = np.linalg.eigvals(case.matrix(dt))
    assert found.radius == pytest.approx(np.abs(eigenvalues).max(), rel=1e-9)
    distance = np.abs(found.factor[found.matched][:, None] - eigenvalues)
    assert distance.min(axis=1).max() < 1e-8
    nearest = distance.argmin(axis=1)
    assert np.unique(nearest).size == nearest.size


@pytest.mark.parametrize("split", ["sound", "sound+buoyancy+divergence"])
def test_matching_and_projection_agree_at_short_steps(split):
    case = Case(column_for(), split, "ARS(2,3,2)")
    gravity = (case.modes.kind == "gravity") & (case.modes.vertical_order <= 3)
    apart = []
    for dt in (0.8, 0.4):
        found, projected = case.followed(dt), case.projected(dt)
        turn = case.modes.frequency * dt
        error = np.abs(found.turn - turn) / np.abs(turn)
        np.testing.assert_allclose(
            error[gravity], projected.frequency_error[gravity], rtol=0.05, atol=1e-9
        )
        apart.append(np.abs(found.factor - projected.factor)[gravity].max())
    assert apart[1] < apart[0] / 2**3.5


def test_where_they_differ_many_steps_prove_the_matching_right():
    """A wave is carried through half an hour; what is left of it is what its eigenvalue says."""
    case, dt, steps = Case(column_for(nlev=20), "sound+buoyancy", "UJ3(1,3,2)", cells=8), 3.0, 400
    found, projected = case.followed(dt), case.projected(dt)
    gravity = np.flatnonzero((case.modes.kind == "gravity") & (case.modes.frequency > 0))
    gravity = gravity[found.matched[gravity]]
    gap = np.abs(np.abs(found.factor) - np.abs(projected.factor.ravel()))
    worst = gravity[np.argmax(gap[gravity])]
    mode, dual = case.modes.vectors[:, worst], case.modes.duals[:, worst]
    state = np.linalg.matrix_power(case.matrix(dt), steps) @ mode
    left = abs(np.vdot(dual, state))
    by_match = abs(found.factor[worst]) ** steps
    by_projection = abs(projected.factor[worst]) ** steps
    assert abs(np.log(by_match / by_projection)) > 0.05
    assert abs(np.log(left / by_match)) < 0.2 * abs(np.log(left / by_projection))


def test_pairs_that_have_met_are_ambiguous_and_not_guessed():
    case = Case(column_for(ratio=1.2), "sound", "ARS(3,4,3)", cells=3)
    assert case.followed(0.5).matched.all()
    found = case.followed(5.0)
    assert found.radius > 1.4
    assert 0 < np.sum(~found.matched) < found.matched.size / 2
    assert np.all(np.isnan(found.factor[~found.matched]))
    assert np.all(np.isnan(found.turn[~found.matched]))
    assert found.looks > 1


def test_pairs_of_a_defective_matrix_are_finite():
    jordan = np.eye(4) + np.diag(np.ones(3), 1)
    found = Pairs.of(jordan)
    assert np.all(np.isfinite(found.right))
    assert np.all(np.isfinite(found.left))


@settings(max_examples=8, deadline=None)
@given(seed=seeds, turn=st.floats(0.01, 0.4))
def test_any_column_is_followed_at_steps_short_for_all_its_rates(seed, turn):
    column = replace(random_column(seed), horizontal=HORIZONTAL)
    case = Case(column, "all-explicit", "RK4")
    rates = np.abs(case.modes.frequency + 1j * case.modes.growth)
    dt = turn / rates.max()
    found = case.followed(dt)
    z = (case.modes.growth + 1j * case.modes.frequency) * dt
    apart = np.abs(found.factor - (1 + z + z**2 / 2 + z**3 / 6 + z**4 / 24))
    assert found.matched.all()
    assert apart.max() < 1e-7
