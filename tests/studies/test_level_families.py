from pathlib import Path

import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from levelstride.column.grids import geometric
from levelstride.column.read import load
from levelstride.errors import InputError
from levelstride.studies.level_families import KEEPS, LARGEST_RATIO, Family
from levelstride.studies.stretched_levels import MOST_TIMES, NoMemberError, largest_ratio

SAMPLES = sorted((Path(__file__).parents[2] / "columns").glob("*.toml"))


@st.composite
def level_sets(draw, least=3, most=24):
    """Sets that get thicker upward on the whole, with some disorder."""
    layers = draw(st.integers(least, most))
    mean = draw(st.floats(-0.05, 0.3))
    ratios = [mean + draw(st.floats(-0.15, 0.15)) for _ in range(layers - 1)]
    thickness = draw(st.floats(5.0, 400.0)) * np.exp(np.concatenate([[0.0], np.cumsum(ratios)]))
    return np.concatenate([[0.0], np.cumsum(thickness)])


def thickness_ratios(heights):
    thickness = np.diff(heights)
    return thickness[1:] / thickness[:-1]


@pytest.mark.parametrize("keep", KEEPS)
@given(level_sets(), st.floats(0.3, 1.7))
def test_what_every_family_promises(keep, own, factor):
    family = Family(own, keep)
    assert family.at(family.own) is own
    assert family.at(family.own * (1.0 + 1e-14)) is own
    try:
        heights = family.at(family.own * factor)
    except NoMemberError:
        assume(False)
    assert np.all(np.diff(heights) > 0.0)
    assert heights[0] == 0.0
    if family.by_lid:
        assert heights[-1] == pytest.approx(family.own * factor, rel=1e-14)
        np.testing.assert_array_equal(heights[: family.lowest + 1], own[: family.lowest + 1])
    else:
        assert heights[1] == pytest.approx(family.own * factor, rel=1e-12)
        assert heights[-1] == own[-1]
    if keep in ("layers-and-lid", "lowest-layers"):
        assert heights.size == own.size
    if keep == "upper-levels":
        kept = own.size - 1 - family.lowest
        np.testing.assert_array_equal(heights[-kept - 1 :], own[-kept - 1 :])
    assert heights.size - 1 <= MOST_TIMES * (own.size - 1)


@given(level_sets(), st.floats(1e-7, 1e-5))
def test_the_own_set_lies_between_its_neighbours(own, little):
    for keep in KEEPS:
        family = Family(own, keep)
        for factor in (1.0 - little, 1.0 + little):
            try:
                heights = family.at(family.own * factor)
            except NoMemberError:
                continue
            if heights.size == own.size and keep != "upper-levels":
                np.testing.assert_allclose(heights, own, rtol=100.0 * little * own.size)


@given(level_sets(), st.floats(0.05, 0.9), st.floats(0.5, 0.99))
def test_ratios_grow_smoothly_towards_thin_lowest_layers(own, first, further):
    family = Family(own)
    try:
        one, other = family.at(family.own * first), family.at(family.own * first * further)
    except NoMemberError:
        assume(False)
    start = thickness_ratios(own)
    assert np.all(thickness_ratios(one) >= start * (1.0 - 1e-9))
    assert np.all(thickness_ratios(other) >= thickness_ratios(one) * (1.0 - 1e-9))
    power = np.log(thickness_ratios(one) / start) / np.maximum(np.log(start), np.log(1.01))
    np.testing.assert_allclose(power, power[0], rtol=1e-6, atol=1e-9)


@given(st.integers(4, 40), st.floats(1.02, 1.3), st.floats(0.1, 4.0))
def test_a_geometric_set_keeps_its_ratio(layers, ratio, factor):
    own = np.concatenate([[0.0], np.cumsum(30.0 * ratio ** np.arange(layers))])
    try:
        heights = Family(own, "ratio").at(30.0 * factor)
    except NoMemberError:
        assume(False)
    found = thickness_ratios(heights)
    np.testing.assert_allclose(found, found[0], rtol=1e-9)
    # the half layer at most that is missing or too much at the lid is shared out among all
    assume(heights.size > 6)
    thickness = np.diff(heights)
    moved = np.arange(thickness.size) @ thickness
    assert abs(np.log(found[0] / ratio)) < 0.75 * thickness[-1] / moved
    stretched = Family(own).at(30.0 * min(factor, 1.0))
    np.testing.assert_allclose(thickness_ratios(stretched), thickness_ratios(stretched)[0])


@settings(deadline=None, max_examples=30)
@given(level_sets(), st.integers(3, 30))
def test_the_curve_runs_from_coarse_to_thin_through_the_own_set(own, points):
    for keep in KEEPS:
        family = Family(own, keep)
        found = family.coordinates(points)
        assert len(found) in (1, points)
        assert family.own in found
        steps = np.diff(np.log(found)) * (1.0 if family.by_lid else -1.0)
        assert np.all(steps > 0.0)
        assert family.steepest >= LARGEST_RATIO
        assert largest_ratio(family.at(found[0])) <= family.steepest * (1.0 + 1e-9)
        assert largest_ratio(family.at(found[-1])) <= family.steepest * (1.0 + 1e-9)


@pytest.mark.parametrize("path", SAMPLES, ids=lambda path: path.stem)
def test_samples_are_stretched_to_a_metre(path):
    own = load(path).levels.interfaces_m
    family = Family(own)
    coordinates = family.coordinates(24)
    assert len(coordinates) == 24
    assert coordinates[-1] <= 1.0 + 1e-9
    np.testing.assert_allclose(coordinates[0], max(own[1], own[-1] / (own.size - 1)))
    equal = family.at(coordinates[0])
    if min(thickness_ratios(own)) > 1.01:
        np.testing.assert_allclose(np.diff(equal), np.diff(equal)[0], rtol=1e-9)


def test_a_range_ends_where_sets_are_of_no_use():
    family = Family(np.array([0.0, 100.0, 250.0, 475.0, 812.5]))
    found = family.coordinates(5, lambda heights: heights[1] > 40.0)
    assert found[-1] == pytest.approx(40.0, rel=2e-3)
    assert Family(np.array([0.0, 100.0, 250.0])).coordinates(5, lambda _: False) == (100.0,)


def test_equal_layers_can_be_stretched():
    own = np.linspace(0.0, 10e3, 51)
    family = Family(own)
    assert family.coordinates(4)[0] == 200.0
    np.testing.assert_allclose(family.at(20.0), geometric(50, 10e3, 20.0), rtol=1e-9)


@pytest.mark.parametrize(
    ("words", "options"),
    [
        ("unknown 'lid'", {"keep": "lid"}),
        ("received 3; with 3 layers it must be 1 to 2", {"lowest": 3}),
        ("received -1", {"lowest": -1}),
    ],
)
def test_families_that_do_not_exist(words, options):
    with pytest.raises(InputError, match=words):
        Family(np.array([0.0, 1.0, 2.0, 3.0]), **options)
