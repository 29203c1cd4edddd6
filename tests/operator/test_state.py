"""Order of the unknowns."""

import numpy as np
import pytest

from levelstride.operator.state import FIELDS, Layout
from oracles.columns import STAGGERINGS


@pytest.mark.parametrize("staggering", STAGGERINGS)
@pytest.mark.parametrize("rotation", [False, True])
@pytest.mark.parametrize("nlev", [2, 3, 7])
def test_every_place_is_taken_once(nlev, staggering, rotation):
    layout = Layout(nlev, staggering, rotation)
    places = np.concatenate([layout.places(field) for field in FIELDS])
    assert sorted(places) == list(range(layout.size))
    assert layout.u.size == layout.pi.size == nlev
    assert layout.v.size == (nlev if rotation else 0)
    assert layout.w.size == nlev - 1
    assert layout.theta.size == (nlev if staggering == "lorenz" else nlev - 1)


@pytest.mark.parametrize("staggering", STAGGERINGS)
def test_unknowns_are_stored_from_the_ground_up(staggering):
    layout = Layout(5, staggering, True)
    for field in FIELDS:
        places = layout.places(field)
        assert np.all(np.diff(places) == layout.stride)
        np.testing.assert_array_equal(layout.layer_of[places], np.arange(places.size))
    assert np.all(layout.w > layout.pi[:-1])
    assert np.all(layout.w < layout.pi[1:])


def test_horizontal_wind_is_stored_divided_by_the_imaginary_unit():
    layout = Layout(3, "lorenz", True)
    assert np.all(layout.phase[layout.u] == 1j)
    assert np.all(layout.phase[layout.v] == 1j)
    for field in ("w", "theta", "pi"):
        assert np.all(layout.phase[layout.places(field)] == 1)
