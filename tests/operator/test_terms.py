"""Every term against its slow twin, and the energy the partner pairs must keep."""

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings

from levelstride.operator.energy import energy_weights
from levelstride.operator.setting import layout_of
from levelstride.operator.terms import CATALOGUE, assemble
from oracles.columns import random_column, random_wave, seeds
from oracles.dense_terms import Twin

PAIRS = sorted({tuple(sorted((t.name, t.partner))) for t in CATALOGUE.values() if t.partner})


def in_energy(column, air, matrix):
    weights = energy_weights(column, air, layout_of(column), floor_n_squared=0.0)
    return matrix.similar(np.sqrt(weights)).to_dense()


@settings(max_examples=60, deadline=None)
@given(seed=seeds)
def test_every_term_equals_the_printed_equation(seed):
    column = random_column(seed, everything=True, stable=False)
    air, wave, layout = column.airs[0], random_wave(seed, column), layout_of(column)
    twin = Twin(column, air, wave.kappa)
    for name, matrix in assemble(column, air, wave).items():
        expected = twin.matrix(name, layout)
        scale = np.abs(expected).max()
        # differences of heights 5 m apart at 20 km lose four digits
        assert np.abs(matrix.to_dense() - expected).max() <= 2e-11 * scale, name
        assert scale > 0 or matrix.is_zero, name


@settings(max_examples=60, deadline=None)
@given(seed=seeds)
def test_partner_pairs_are_skew_in_the_energy(seed):
    column = random_column(seed)
    air = column.airs[0]
    terms = assemble(column, air, random_wave(seed, column))
    for first, second in PAIRS:
        pair = terms[first] if first == second else terms[first] + terms[second]
        matrix = in_energy(column, air, pair)
        assert np.abs(matrix + matrix.conj().T).max() <= 1e-12 * np.abs(matrix).max(), (
            first,
            second,
        )


@settings(max_examples=30, deadline=None)
@given(seed=seeds)
def test_undamped_windless_operator_conserves_the_energy(seed):
    column = random_column(seed)
    air, layout = column.airs[0], layout_of(column)
    terms = assemble(column, air, random_wave(seed, column))
    rng = np.random.default_rng(seed)
    weights = energy_weights(column, air, layout, floor_n_squared=0.0)
    state = (rng.normal(size=layout.size) + 1j * rng.normal(size=layout.size)) / np.sqrt(weights)
    twin = Twin(column, air, 0.0)
    assert 0.5 * weights @ np.abs(state) ** 2 == pytest.approx(
        twin.energy(state, layout), rel=1e-12
    )
    tendency = sum(term.apply(state) for term in terms.values())
    change = np.vdot(weights * state, tendency).real
    size = np.sqrt(weights) @ np.abs(tendency) * np.sqrt(weights @ np.abs(state) ** 2)
    assert abs(change) <= 1e-13 * size


def test_terms_that_are_left_out_are_zero_and_the_others_stay():
    column = random_column(5, everything=True)
    air, wave, gone = column.airs[0], random_wave(5, column), {"buoyancy", "slope-divergence"}
    whole = assemble(column, air, wave)
    parts = assemble(replace(column, left_out=frozenset(gone)), air, wave)
    assert list(parts) == list(CATALOGUE)
    for name, matrix in parts.items():
        expected = 0.0 if name in gone else 1.0
        np.testing.assert_array_equal(matrix.to_dense(), expected * whole[name].to_dense())


def test_pairs_of_the_catalogue_name_each_other():
    for term in CATALOGUE.values():
        if term.partner:
            assert CATALOGUE[term.partner].partner == term.name


@settings(max_examples=30, deadline=None)
@given(seed=seeds)
def test_resting_column_on_flat_ground_is_real(seed):
    column = random_column(seed)
    flat = random_column(seed, slope_f=np.zeros(column.levels.nlev + 1))
    terms = assemble(flat, flat.airs[0], random_wave(seed, flat))
    assert all(term.is_real and term.diagonals.dtype == np.float64 for term in terms.values())


@settings(max_examples=20, deadline=None)
@given(seed=seeds)
def test_weights_take_the_floor_where_the_air_is_less_stable(seed):
    column = random_column(seed, stable=False)
    air, layout = column.airs[0], layout_of(column)
    weights = energy_weights(column, air, layout)
    assert np.all(weights > 0)
    n_squared = air.n_squared_c if layout.theta_in_layers else air.n_squared_f
    higher = energy_weights(column, air, layout, floor_n_squared=2e-6)
    ratio = (weights / higher)[layout.theta]
    assert np.all(ratio[n_squared <= 1e-6] == pytest.approx(2.0))
    assert np.all(ratio[n_squared >= 2e-6] == 1.0)
