"""The sentence that names the cause of a limit."""

import pytest

from examples import records
from levelstride.results.biting import Counterfactual
from levelstride.results.cause import cause, to_blame

SLOPE = ("slope-pressure-gradient", "slope-divergence")
HORIZONTAL = ("horizontal-pressure-gradient", "horizontal-divergence")
WHERE = "layers 0-3 (0-140 m), shortest wave along the grid diagonal"
BITES = records.bites(shortest_horizontal=True, along_diagonal=True)


def what_if(terms, change, gain):
    terms = terms if isinstance(terms, tuple) else (terms,)
    return Counterfactual(
        terms=terms,
        change=change,
        stable_step_s=5.0 * gain if gain else None,
        unbounded=gain is None,
        gain=gain or None,
        scanned_to_s=100.0,
    )


def said(*counterfactuals, **changes):
    return cause(
        records.limit(
            stable_step_s=5.0, **{"bites": BITES} | changes, counterfactuals=counterfactuals
        )
    )


def test_the_pair_that_gains_most_is_to_blame():
    asked = (
        what_if("shear", "implicit", 1.2),
        what_if(SLOPE[0], "implicit", 1.0),
        what_if(SLOPE[1], "implicit", 1.0),
        what_if(SLOPE, "implicit", 1.58),
        what_if(SLOPE, "absent", 1.7),
    )
    assert to_blame(records.limit(counterfactuals=asked)) == SLOPE
    assert said(*asked) == (
        f"explicit slope terms, {WHERE}; with the slope terms implicit the step would be 7.9 s"
    )


def test_what_one_partner_does_by_itself_is_told():
    assert said(
        what_if(HORIZONTAL[0], "implicit", 1.0),
        what_if(HORIZONTAL[1], "implicit", 1.8),
        what_if(HORIZONTAL, "implicit", None),
    ) == (
        f"explicit horizontal sound terms, {WHERE}; with the horizontal sound terms implicit the "
        "step would be above 100 s (a solve that couples columns), with the "
        "horizontal divergence alone implicit 9 s"
    )


def test_where_implicit_does_not_help_the_step_without_the_terms_is_told():
    assert said(
        what_if("vertical-advection", "implicit", 0.9), what_if("vertical-advection", "absent", 2.0)
    ).endswith("; without the vertical advection the step would be 10 s")


def test_where_nothing_helps_nothing_is_blamed():
    asked = (what_if("shear", "implicit", 1.0), what_if("shear", "absent", 0.0))
    assert to_blame(records.limit(counterfactuals=asked)) is None
    assert said(*asked).startswith(f"no explicit term by itself, {WHERE}; ")


def test_the_reference_state_can_be_the_cause():
    text = said(what_if("reference-state", "absent", 3.0), what_if("buoyancy", "absent", 1.1))
    assert text.startswith("air that differs from the reference state, ")
    assert text.endswith("with the implicit part built on the air itself the step would be 15 s")


@pytest.mark.parametrize(
    ("bites", "text"),
    [
        ({}, "sound wave, layers 0-3 (0-140 m), wave of 6.0 km"),
        ({"steepest_horizontal": True}, "sound wave, layers 0-3 (0-140 m), steepest wave of "
         "6.0 km"),
        ({"shortest_vertical": True, "kind": "Lamb"}, "Lamb wave, layers 0-3 (0-140 m), wave of "
         "6.0 km, alternating from layer to layer"),
        ({"wavelength_m": None, "kind": "mixing"}, "mixing, layers 0-3 (0-140 m), every "
         "horizontal wave"),
    ],
)  # fmt: skip
def test_where_nothing_was_asked_the_wave_stands_for_the_cause(bites, text):
    assert said(bites=records.bites(**bites)) == text


def test_what_never_bites_has_no_cause():
    assert cause(records.unbounded()) is None
