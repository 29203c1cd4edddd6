"""The whole answer for one tableau and splitting: what is in it, and what it says."""

import json
import math
from dataclasses import fields, replace

import numpy as np
import pytest

import levelstride
from levelstride.column.read import build
from levelstride.errors import CalculationError, InputError
from levelstride.results.dataset import Limit
from levelstride.results.export import to_json
from levelstride.stability.step_limit import Bracket
from levelstride.stability.tolerance import Tolerance
from levelstride.stability.verdict import ColumnVerdict
from levelstride.studies.limit import NO_WIND, all_explicit_step, limit
from levelstride.tableaux.lookup import find

PLAIN = {
    "title": "Test",
    "levels": {"kind": "geometric", "layers": 4, "top_m": 8000.0, "lowest_layer_m": 1000.0},
    "air": {"kind": "isothermal", "temperature_k": 250.0},
    "horizontal": {"grid_spacing_m": 3000.0, "directions": 1},
}
KEYS = {
    "tableau", "split", "stable_step_s", "strict_step_s", "stable_step_by_efolding", "criterion",
    "explicit_share", "gain", "bites", "certified",
}  # fmt: skip
BITES = {"wavenumber_per_m", "growth_per_s", "kind", "layer_lowest", "layer_highest"}


def column_of(**tables):
    return build(PLAIN | tables)


@pytest.fixture(scope="module")
def found():
    return limit(column_of(), tableau="ars232", split="sound")


def test_every_promised_key_is_there_and_every_number_is_finite(found):
    plain = json.loads(to_json(found))
    assert set(plain) >= KEYS
    assert set(plain["bites"]) >= BITES
    assert [set(step) for step in plain["stable_step_by_efolding"]] == [
        {"efolding_s", "stable_step_s"}
    ] * 3
    assert set(plain) == {field.name for field in fields(Limit)}
    for value in plain.values():
        assert not isinstance(value, float) or math.isfinite(value)


def test_names_come_back_in_standard_spelling(found):
    assert (found.tableau, found.split) == ("ARS(2,3,2)", "sound")
    again = limit(column_of(), tableau="ARS 2,3,2", split=" Sound ", what_if=False)
    assert replace(found, counterfactuals=(), cause=again.cause) == again


def test_the_numbers_hang_together(found):
    assert not found.unbounded
    assert found.stable_step_s == found.stable_step_by_efolding[0].stable_step_s
    steps = [at.stable_step_s for at in found.stable_step_by_efolding]
    assert max(steps) <= 1.001 * steps[-1]
    assert found.strict_step_s <= 1.001 * found.stable_step_s
    assert found.efolding_s == 86400.0
    assert found.growth_per_step == pytest.approx(np.expm1(found.stable_step_s / 86400.0))
    assert set(found.criterion.split("+")) <= {"spectrum", "transient", "courant"}
    assert found.bites.growth_per_s > 1 / 86400.0
    assert found.bites.wavelength_m == pytest.approx(2 * np.pi / found.bites.wavenumber_per_m)
    interfaces_m = column_of().levels.interfaces_m
    assert found.bites.bottom_m == interfaces_m[found.bites.layer_lowest]
    assert found.bites.top_m == interfaces_m[found.bites.layer_highest + 1]
    assert found.air == "isothermal"
    assert found.path == "tridiagonal"
    assert not found.couples_columns
    assert found.own_growth == ()


def test_what_bites_is_told_in_full(found):
    bites, column = found.bites, column_of()
    assert bites.shortest_horizontal
    assert bites.steepest_horizontal
    assert not bites.along_diagonal
    assert sum(bites.energy_by_layer) == pytest.approx(1.0, abs=1e-6)
    held = bites.energy_by_layer[bites.layer_lowest : bites.layer_highest + 1]
    assert sum(held) >= 0.9
    assert [profile.field for profile in bites.profiles] == ["u", "w", "theta", "pi"]
    for profile in bites.profiles:
        centred = profile.field in ("u", "pi")
        heights = column.levels.centres_m if centred else column.levels.interfaces_m[1:-1]
        np.testing.assert_allclose(profile.heights_m, heights)
        assert len(profile.amplitude) == len(profile.phase_rad) == heights.size
    assert found.stable_step_by_air == ()
    assert found.cause.startswith("explicit horizontal sound terms, layers ")
    blamed = [c for c in found.counterfactuals if c.terms == ("horizontal-divergence",)]
    assert [c.change for c in blamed] == ["implicit", "absent"]
    assert min(c.gain for c in blamed) > 1.5


def test_it_says_how_it_was_checked(found):
    assert "dense eigenvalues" in found.certified
    assert "narrower windows of instability can be missed" in found.certified
    assert f"{found.stable_step_s:.6g} s" in found.certified


def test_the_gain_is_over_the_explicit_step(found):
    column = column_of()
    explicit = limit(column, tableau="ARS(2,3,2)", split="all-explicit", what_if=False)
    assert explicit.gain == 1.0
    assert found.gain == pytest.approx(found.stable_step_s / explicit.stable_step_s, rel=2e-3)
    assert found.gain > 1.0
    baseline = all_explicit_step(column, find("ARS(2,3,2)"), Tolerance(86400.0, 1000.0))
    assert baseline == pytest.approx(explicit.stable_step_s, rel=2e-3)


def test_the_explicit_share_compares_with_the_reach_of_the_explicit_part(found):
    """Sound across the grid and buoyancy are explicit; the Lamb wave has c times |k_x| of it."""
    sound_m_per_s = np.sqrt(1.4 * 287.05307 * 250.0)
    largest_rate = sound_m_per_s * 2 / 3000.0
    assert found.explicit_share == pytest.approx(
        found.stable_step_s * largest_rate / np.sqrt(3), rel=1e-2
    )


def test_a_tableau_without_reach_has_no_explicit_share():
    """ARS(2,2,2) grows at every point of the imaginary axis."""
    found = limit(column_of(), tableau="ARS(2,2,2)", split="sound", what_if=False)
    assert found.stable_step_s > 0
    assert found.explicit_share is None


def test_wind_given_or_not(found):
    assert found.wind_note == NO_WIND
    windy = column_of(wind={"kind": "uniform", "speed_m_per_s": 10.0})
    assert limit(windy, tableau="ARS(2,3,2)", split="sound", what_if=False).wind_note is None


def test_the_slope_gradient_of_the_lowest_layer():
    column = column_of(terrain={"slope": 0.3}, horizontal={"grid_spacing_m": 500.0})
    asked = {"tableau": "ARS(2,3,2)", "split": "sound+buoyancy", "what_if": False}
    half = limit(column, **asked)
    full = limit(column, **asked, lowest_slope_gradient="full")
    assert (half.lowest_slope_gradient, full.lowest_slope_gradient) == ("half", "full")
    assert full.stable_step_s <= half.stable_step_s * 1.001
    assert (
        limit(column_of(), tableau="ARS(2,3,2)", split="sound", what_if=False).lowest_slope_gradient
        is None
    )


def test_both_horizontal_terms_implicit_couple_columns():
    pair = "horizontal-pressure-gradient+horizontal-divergence"
    found = limit(column_of(), tableau="ARS(2,3,2)", split=f"sound+buoyancy+{pair}")
    assert found.couples_columns
    assert found.unbounded
    assert found.stable_step_s is None
    assert found.criterion == "none"
    assert found.bites is None
    assert found.gain is None
    assert found.growth_per_step is None
    assert found.scanned_to_s == 1e4


def test_own_growth_is_reported_with_its_cause_and_leaves_no_strict_step():
    column = column_of(
        air={
            "kind": "sounding",
            "name": "hot afternoon",
            "heights_m": [0.0, 5000.0, 8000.0],
            "temperatures_k": [310.0, 250.0, 240.0],
        }
    )
    found = limit(column, tableau="ARS(2,3,2)", split="sound+buoyancy", what_if=False)
    assert [(own.air, own.cause) for own in found.own_growth] == [("hot afternoon", "convection")]
    assert found.own_growth[0].growth_per_s > 1e-4
    assert found.strict_step_s is None
    assert found.stable_step_s > 1.0


def test_several_air_states_give_the_step_of_the_worst():
    airs = [
        {"kind": "isothermal", "name": name, "temperature_k": kelvin}
        for name, kelvin in (("cold", 210.0), ("hot", 310.0))
    ]
    asked = {"tableau": "ARS(2,3,2)", "split": "sound", "what_if": False}
    both = limit(column_of(air=airs), **asked)
    hot = limit(column_of(air=airs[1]), **asked)
    assert both.air == "hot"
    assert both.stable_step_s == pytest.approx(hot.stable_step_s, rel=2e-3)


def test_mixing_that_binds_is_told_as_a_row():
    """K dt/dz^2 = 1/2 in the layers of 100 m."""
    column = column_of(
        levels={"kind": "uniform", "layers": 5, "top_m": 500.0},
        diffusion={"vertical_m2_per_s": 100.0},
    )
    split = {"name": "all-implicit", "vertical-diffusion": "explicit"}
    found = limit(column, tableau="ARS(1,1,1)", split=split)
    assert found.criterion == "courant"
    assert found.stable_step_s == pytest.approx(0.5 * 100.0**2 / 100.0, rel=2e-3)
    bites = found.bites
    assert bites.kind == "mixing"
    assert list(bites.energy_share.values()) == [1.0]
    assert bites.layer_lowest == bites.layer_highest
    assert bites.top_m - bites.bottom_m == pytest.approx(100.0)
    assert bites.growth_per_s > 1 / 86400.0
    assert found.certified.startswith("symbols of every frozen row on both sides")
    assert found.windows == ()


def test_the_columns_own_split_and_tolerance_are_the_defaults():
    column = column_of(split="sound+buoyancy", advice={"efolding_s": 3600.0})
    found = limit(column, tableau="IMKG242b", what_if=False)
    assert (found.split, found.efolding_s) == ("sound+buoyancy", 3600.0)
    assert found.stable_step_s == found.stable_step_by_efolding[1].stable_step_s
    longer = limit(column, tableau="IMKG242b", efolding_s=600.0, what_if=False)
    assert longer.efolding_s == 600.0
    assert longer.stable_step_s > found.stable_step_s


def test_a_mapping_of_terms_to_treatments():
    column = column_of(upper_damping={"rate_per_s": 0.1, "base_m": 4000.0})
    split = {"name": "sound", "upper-damping": "after-step-implicit"}
    found = limit(column, tableau="ARS(2,3,2)", split=split, what_if=False)
    assert found.split == "sound, upper-damping after-step-implicit"


def test_unknown_names_are_errors_that_name_the_nearest():
    with pytest.raises(InputError, match="ARS"):
        limit(column_of(), tableau="ARS(2,3,4)", split="sound")
    with pytest.raises(InputError, match="sound"):
        limit(column_of(), tableau="ARS(2,3,2)", split="sonud")


def test_no_stable_step_at_all_is_an_error_that_says_why():
    """Forward Euler on sound of a millimetre grid grows faster than a day at any step."""
    column = column_of(
        levels={"kind": "uniform", "layers": 2, "top_m": 0.01},
        horizontal={"grid_spacing_m": 1e-3, "directions": 1},
    )
    with pytest.raises(CalculationError, match="no step down to"):
        limit(column, tableau="forward Euler", split="all-explicit")


def test_it_is_the_public_function():
    assert levelstride.limit is limit


def test_a_certified_limit_says_so_wave_by_wave(found):
    certified = limit(column_of(), tableau="ars232", split="sound", certify=True)
    assert found.certificate is None
    of = certified.certificate
    assert of.below_s == certified.stable_step_s == found.stable_step_s
    assert of.breaks_above == certified.criterion
    assert of.refuted == ()
    assert len({wave.wavenumber_per_m for wave in of.waves}) == len(of.waves) >= 17
    assert of.worst_wave.wavenumber_per_m == certified.bites.wavenumber_per_m
    assert of.worst_wave.growth_above_per_s > of.worst_wave.tolerated_per_s
    for wave in of.waves:
        assert wave.growth_below_per_s <= wave.tolerated_per_s
    assert certified.certified.startswith(
        f"certified at all {len(of.waves)} sampled waves by dense"
    )
    assert certified.certified.endswith(found.certified)
    assert replace(certified, certificate=None, certified=found.certified) == found


def test_what_does_not_bite_is_certified_where_the_scan_ends():
    found = limit(column_of(), tableau="ARS(2,3,2)", split="all-implicit", certify=True)
    assert found.unbounded
    assert found.certificate.below_s == found.scanned_to_s
    assert found.certificate.above_s is None
    assert "none of them binds" in found.certified


def test_the_courant_limit_is_certified_at_that_step():
    windy = column_of(wind={"kind": "uniform", "speed_m_per_s": 60.0, "advection": "upwind-3"})
    found = limit(windy, tableau="ARS(1,1,1)", split="sound+buoyancy+divergence", certify=True)
    assert "courant" in found.criterion or found.certificate.breaks_above
    assert found.certificate.below_s >= found.stable_step_s


def test_a_refuted_limit_is_replaced_and_named(monkeypatch, found):
    search = ColumnVerdict.stable_step

    def too_long(self, tolerance, **options):
        right = search(self, tolerance, **options)
        bracket = right.bracket
        wrong = Bracket(1.2 * bracket.low, 1.2 * bracket.high, bracket.problem)
        return replace(right, step_s=1.2 * right.step_s, bracket=wrong)

    monkeypatch.setattr(ColumnVerdict, "stable_step", too_long)
    mended = limit(column_of(), tableau="ars232", split="sound", certify=True)
    assert mended.stable_step_s == pytest.approx(found.stable_step_s, rel=5e-3)
    (refuted,) = mended.certificate.refuted
    assert refuted.step_s == 1.2 * found.stable_step_s
    assert f"{refuted.step_s:.6g} s, found first, is refuted by the wave" in mended.certified


def test_whoever_watches_is_told_what_is_worked_on():
    told = []
    column = build(
        {
            "levels": {"kind": "uniform", "layers": 3, "top_m": 6000.0},
            "air": {"kind": "isothermal", "temperature_k": 250.0},
            "horizontal": {"grid_spacing_m": 2000.0},
        }
    )
    limit(
        column,
        tableau="ARS(2,3,2)",
        split="sound+buoyancy",
        certify=True,
        what_if=False,
        progress=lambda done, total, on: told.append((done, total, on)),
    )
    done = [part for part, _, _ in told]
    assert done == sorted(done)
    assert {total for _, total, _ in told} == {9}
    assert set(done) == set(range(9))
    assert told[0][2] == "stable step"
    assert any(on.startswith("stable step: wave ") for _, _, on in told)
    assert told[-1][2] == "what bites"
