"""A step equals its slow twin, whatever the splitting, the tableau and the path."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from levelstride import tableaux
from levelstride.operator.terms import CATALOGUE
from levelstride.splitting.groups import TREATMENTS
from levelstride.stepper import Stepper
from oracles.columns import STAGGERINGS, random_column, seeds
from oracles.dense_step import dense_step
from oracles.stepping import SPLITTINGS, parts_of, small_column

TOLERANCE = 1e-11


def step_for(parts):
    """A step some way beyond the explicit limit of the fastest wave [s]."""
    return 3.0 / np.linalg.norm(parts.whole.to_dense(), 2)


def assert_same(parts, tableau, dt, path="auto", seed=0):
    rng = np.random.default_rng(seed)
    states = rng.normal(size=(parts.layout.size, 3)) + 1j * rng.normal(size=(parts.layout.size, 3))
    expected = dense_step(parts, tableau, dt) @ states
    error = Stepper(parts, tableau, dt, path=path).step(states) - expected
    assert np.linalg.norm(error) <= TOLERANCE * np.linalg.norm(expected)


@pytest.mark.parametrize("splitting", SPLITTINGS)
@pytest.mark.parametrize("staggering", STAGGERINGS)
@pytest.mark.parametrize("kind", ["flat", "slope", "everything"])
def test_step_equals_dense_twin_for_every_tableau(kind, staggering, splitting):
    parts = parts_of(splitting, small_column(kind, staggering))
    dt = step_for(parts)
    for name in tableaux.names():
        assert_same(parts, tableaux.find(name), dt)


@pytest.mark.parametrize("staggering", STAGGERINGS)
def test_named_splittings_take_the_path_they_allow(staggering):
    tableau = tableaux.find("ARS(2,3,2)")
    expected = {
        "all-explicit": "explicit",
        "sound+slope": "banded",
        "sound+buoyancy+slope": "banded",
        "sound+transport": "banded",
        "sound+buoyancy+divergence+slope+transport+mixing": "banded",
        "all-implicit": "banded",
    }
    for splitting in SPLITTINGS:
        parts = parts_of(splitting, small_column("everything", staggering))
        path = Stepper(parts, tableau, step_for(parts)).path
        assert path == expected.get(splitting, "tridiagonal"), splitting


@pytest.mark.parametrize("staggering", STAGGERINGS)
@pytest.mark.parametrize("kind", ["flat", "slope", "everything"])
def test_forced_band_equals_tridiagonal(kind, staggering):
    for splitting in SPLITTINGS[1:5]:
        parts = parts_of(splitting, small_column(kind, staggering))
        tableau, dt = tableaux.find("ARS(3,4,3)"), step_for(parts)
        fast = Stepper(parts, tableau, dt, path="tridiagonal")
        slow = Stepper(parts, tableau, dt, path="banded")
        assert (fast.path, slow.path) == ("tridiagonal", "banded")
        np.testing.assert_allclose(
            fast.matrix(), slow.matrix(), rtol=0, atol=TOLERANCE * np.abs(slow.matrix()).max()
        )


@settings(deadline=None, max_examples=40)
@given(
    seed=seeds,
    treatments=st.lists(
        st.sampled_from(TREATMENTS), min_size=len(CATALOGUE), max_size=len(CATALOGUE)
    ),
    tableau=st.sampled_from(tableaux.names()),
    reference=st.booleans(),
)
def test_any_treatments_and_reference_state(seed, treatments, tableau, reference):
    column = random_column(seed, everything=True, reference=reference)
    parts = parts_of(dict(zip(CATALOGUE, treatments, strict=True)), column)
    dt = 1.0 / np.linalg.norm(parts.whole.to_dense(), 2)
    assert_same(parts, tableaux.find(tableau), dt, seed=seed)


@settings(deadline=None, max_examples=40)
@given(
    seed=seeds,
    chosen=st.sets(
        st.sampled_from(
            [
                "vertical-pressure-gradient",
                "vertical-divergence",
                "buoyancy",
                "stratification",
                "upper-damping",
                "horizontal-pressure-gradient",
                "horizontal-divergence",
            ]
        ),
        min_size=1,
    ),
)
def test_half_pairs_are_eliminated_too(seed, chosen):
    parts = parts_of(dict.fromkeys(sorted(chosen), "implicit"), random_column(seed))
    dt = 1.0 / np.linalg.norm(parts.whole.to_dense(), 2)
    tableau = tableaux.find("SSP3(4,3,3)")
    assert Stepper(parts, tableau, dt).path in ("tridiagonal", "explicit")
    assert_same(parts, tableau, dt, seed=seed)
