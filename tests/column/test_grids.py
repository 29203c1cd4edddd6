import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.optimize import bisect

from levelstride.column import grids

LAYERS = st.integers(2, 300)
TOP = st.floats(500.0, 90000.0)


@given(LAYERS, TOP, st.floats(0.02, 1.5))
def test_geometric_levels_reach_the_top_with_one_ratio(layers, top, share):
    lowest = share * top / layers
    if lowest >= top:
        return
    try:
        heights = grids.geometric(layers, top, lowest)
    except ValueError as error:
        assert "cannot reach the top" in str(error)  # noqa: PT017
        return
    thickness = np.diff(heights)
    assert heights[0] == 0.0
    assert heights[-1] == top
    assert thickness[0] == pytest.approx(lowest, rel=1e-12)
    ratios = thickness[1:] / thickness[:-1]
    np.testing.assert_allclose(ratios, ratios[0], rtol=1e-7)


@pytest.mark.parametrize("share", [1.0, 1.2, 0.999999999, 1.000000001])
def test_geometric_ratio_may_be_one_or_less(share):
    thickness = np.diff(grids.geometric(20, 10000.0, share * 500.0))
    assert np.all(thickness > 0.0)
    assert (thickness[-1] < thickness[0]) == (share > 1.0)


def test_geometric_sum_against_a_loop():
    heights = grids.geometric(40, 30000.0, 20.0)
    ratio = (heights[2] - heights[1]) / heights[1]
    total, thickness = 0.0, 20.0
    for _ in range(40):
        total += thickness
        thickness *= ratio
    assert total == pytest.approx(30000.0, rel=1e-11)


@pytest.mark.parametrize(
    ("layers", "top", "lowest", "why"),
    [
        (10, 1000.0, 1000.0, "reaches the top"),
        (10, 1000.0, 2000.0, "reaches the top"),
        (2, 30000.0, 10.0, "cannot reach the top"),
    ],
)
def test_geometric_without_a_ratio(layers, top, lowest, why):
    with pytest.raises(ValueError, match=why):
        grids.geometric(layers, top, lowest)


@given(LAYERS, TOP, st.floats(0.02, 1.0))
def test_tanh_levels_follow_their_formula(layers, top, share):
    lowest = share * top / layers
    heights = grids.tanh(layers, top, lowest)
    assert heights[0] == 0.0
    assert heights[-1] == pytest.approx(top, rel=1e-14)
    assert np.all(np.diff(heights) > 0.0)
    assert heights[1] == pytest.approx(lowest, rel=1e-8)


def test_tanh_as_printed():
    heights = grids.tanh(12, 20000.0, 400.0)
    share = np.arange(13) / 12.0

    def printed(a):
        return 20000.0 * (1.0 + np.tanh(a * (share - 1.0)) / np.tanh(a))

    a = bisect(lambda a: printed(a)[1] - 400.0, 0.01, 10.0, xtol=1e-14)
    np.testing.assert_allclose(heights, printed(a), rtol=1e-9)


@pytest.mark.parametrize("lowest", [101.0, 1e-30])
def test_tanh_without_a_solution(lowest):
    with pytest.raises(ValueError, match="lowest layer"):
        grids.tanh(10, 1000.0, lowest)


@given(st.lists(st.floats(1.0, 2000.0), min_size=2, max_size=60))
def test_interfaces_come_back_from_their_centres(thickness):
    heights = np.concatenate([[0.0], np.cumsum(thickness)])
    centres = 0.5 * (heights[1:] + heights[:-1])
    np.testing.assert_allclose(grids.interfaces_from_centres(centres), heights, atol=1e-6)


def test_centres_that_are_no_middles():
    with pytest.raises(ValueError, match="give the interfaces instead"):
        grids.interfaces_from_centres(np.array([100.0, 150.0, 500.0]))
