"""The nearest level set under linear bounds: closed forms, and rules that are kept."""

import numpy as np
import pytest

from levelstride.studies.least_change import Cuts, Rules, kept_to, propose


def cuts_of(at, *pairs):
    return Cuts(
        np.array([at for _ in pairs]),
        np.array([value for value, _ in pairs]),
        np.array([slope for _, slope in pairs], dtype=float),
    )


def test_one_bound_without_rules_moves_along_its_slope():
    start = np.log([100.0, 200.0, 300.0])
    slope = np.array([0.5, 0.1, -0.2])
    cuts = cuts_of(start, (0.0, slope))
    x = propose(Rules(start, lid_kept=False), cuts, start, 0.05, 0.5)
    np.testing.assert_allclose(x - start, 0.05 * slope / (slope @ slope), rtol=1e-4)


def test_two_bounds_both_hold():
    start = np.log([100.0, 200.0, 300.0])
    cuts = cuts_of(start, (0.0, [0.5, 0, 0]), (-0.02, [0, 0.5, 0]))
    x = propose(Rules(start, lid_kept=False), cuts, start, 0.05, 0.5)
    np.testing.assert_allclose(x - start, [0.1, 0.14, 0.0], atol=1e-5)


@pytest.mark.parametrize("lowest_kept", [False, True])
def test_lid_lowest_layer_and_ratios_are_kept(lowest_kept):
    thickness = np.array([100.0, 120.0, 140.0, 150.0, 160.0])
    start = np.log(thickness)
    log_ratio = np.full(4, np.log(1.3))
    rules = Rules(start, lid_kept=True, lowest_kept=lowest_kept, log_ratio=log_ratio)
    cuts = cuts_of(start, (0.0, [0, 1.0, 0, 0, 0]))
    x = propose(rules, cuts, start, 0.06, 0.5)
    made = np.exp(x)
    assert made.sum() == pytest.approx(thickness.sum(), rel=1e-12)
    assert (abs(made[0] - 100.0) < 1e-9) == lowest_kept
    assert np.abs(np.diff(x)).max() <= np.log(1.3) + 1e-7
    assert x[1] - start[1] == pytest.approx(0.06, rel=1e-3)


def test_what_cannot_be_reached_is_approached_as_far_as_the_rules_allow():
    start = np.log([100.0, 100.0, 100.0])
    rules = Rules(start, log_ratio=np.full(2, np.log(1.2)))
    x = propose(rules, cuts_of(start, (0.0, [1.0, 0, 0])), start, 1.0, 0.5)
    assert x[0] - x[1] == pytest.approx(np.log(1.2), abs=2e-2)
    assert np.exp(x).sum() == pytest.approx(300.0)
    near = propose(rules, cuts_of(start, (0.0, [1.0, 0, 0])), start, 1.0, 0.01)
    assert np.abs(near - start).max() <= 0.0101


def test_equal_layers_under_a_ratio_of_one_cannot_move():
    start = np.log([100.0, 100.0, 100.0])
    rules = Rules(start, log_ratio=np.zeros(2))
    x = propose(rules, cuts_of(start, (0.0, [1.0, 0, 0])), start, 1.0, 0.5)
    np.testing.assert_allclose(x, start, atol=1e-6)


def test_models_that_deny_what_was_found_are_dropped():
    start = np.zeros(2)
    cuts = cuts_of(start, (0.0, [1.0, 0.0]), (0.0, [0.0, 1.0]))
    x = np.array([0.1, -0.1])
    assert cuts.lowest(x) == pytest.approx(-0.1)
    assert cuts.allowing(x, -0.1).value.size == 2
    assert cuts.allowing(x, 0.05).slope.tolist() == [[1.0, 0.0]]
    assert (cuts + cuts).value.size == 4


def test_round_off_in_lid_and_lowest_layer_is_removed():
    start = np.log([100.0, 200.0, 300.0])
    rules = Rules(start, lowest_kept=True)
    x = np.exp(kept_to(rules, start + 1e-7))
    assert x[0] == pytest.approx(100.0, rel=1e-15)
    assert x.sum() == pytest.approx(600.0, rel=1e-15)
