from dataclasses import replace

import numpy as np
import pytest

from levelstride.column import knobs
from levelstride.column.read import build
from levelstride.errors import InputError

PLAIN = {
    "levels": {"kind": "geometric", "layers": 5, "top_m": 9000.0, "lowest_layer_m": 600.0},
    "air": {"kind": "isothermal", "temperature_k": 260.0},
    "horizontal": {"grid_spacing_m": 3000.0},
}


def column(**tables):
    return build(PLAIN | tables)


def test_one_number_is_changed_and_everything_else_stays():
    before = column(terrain={"slope": 0.1})
    after = knobs.with_value(before, "terrain.slope", 0.3)
    assert after.slope_f[0] == 0.3
    assert after.definition["terrain"] | {"slope": 0.1} == before.definition["terrain"]
    assert build(after.definition).digest == after.digest
    assert before.slope_f[0] == 0.1


def test_the_lowest_slope_gradient_of_a_column_stays():
    full = replace(column(terrain={"slope": 0.1}), lowest_slope_gradient="full")
    assert knobs.with_value(full, "terrain.slope", 0.3).lowest_slope_gradient == "full"


def test_terms_that_are_left_out_stay_left_out():
    without = replace(column(terrain={"slope": 0.1}), left_out=frozenset({"slope-divergence"}))
    assert knobs.with_value(without, "terrain.slope", 0.3).left_out == without.left_out


def test_a_second_air_state_is_named_by_its_place():
    airs = [{"kind": "isothermal", "temperature_k": t, "name": f"{t:g}"} for t in (250.0, 270.0)]
    changed = knobs.with_value(column(air=airs), "air[1].temperature_k", 280.0)
    assert [float(air.temperature_c[0]) for air in changed.airs] == [250.0, 280.0]


@pytest.mark.parametrize(
    ("key", "named"),
    [
        ("terrain.slop", "slop"),
        ("levels.kind", "is no number"),
        ("air[3].temperature_k", "there are 1"),
        ("air temperature.x", "no key path"),
        ("terrain.slope", "must be"),
    ],
)
def test_a_key_that_is_none_is_the_callers_to_mend(key, named):
    with pytest.raises(InputError, match=named):
        knobs.with_value(column(), key, 1e9)


@pytest.mark.parametrize(
    "wind",
    [
        {"kind": "uniform", "speed_m_per_s": -8.0},
        {"kind": "linear", "surface_m_per_s": 2.0, "shear_per_s": 0.001},
        {"kind": "table", "heights_m": [0.0, 5000.0], "speeds_m_per_s": [-3.0, 12.0]},
    ],
)
def test_a_wind_is_scaled_as_a_whole(wind):
    before = column(wind=wind | {"advection": "centred-4"})
    after = knobs.with_largest_wind(before, 30.0)
    assert knobs.largest_wind(after) == pytest.approx(30.0)
    factor = 30.0 / knobs.largest_wind(before)
    np.testing.assert_allclose(after.airs[0].wind_c, factor * before.airs[0].wind_c, rtol=1e-12)
    assert after.horizontal.advection == "centred-4"


def test_the_winds_of_soundings_are_scaled_together():
    airs = [
        {
            "kind": "sounding",
            "name": name,
            "heights_m": [0.0, 12000.0],
            "temperatures_k": [290.0, 220.0],
            "winds_m_per_s": [0.0, top],
        }
        for name, top in (("calm", 5.0), ("gale", 40.0))
    ]
    before = column(air=airs, wind={"kind": "sounding"})
    after = knobs.with_largest_wind(before, 2 * knobs.largest_wind(before))
    for old, new in zip(before.airs, after.airs, strict=True):
        np.testing.assert_allclose(new.wind_f, 2 * old.wind_f)


def test_where_there_is_none_something_is_put_there():
    bare = column()
    assert knobs.largest_wind(knobs.with_largest_wind(bare, 7.0)) == 7.0
    assert knobs.largest_updraft(knobs.with_largest_updraft(bare, 0.5)) == 0.5
    mixed = knobs.with_largest_diffusivity(bare, 3.0)
    assert set(mixed.diffusivity_f) == {3.0}
    assert knobs.with_largest_slope(bare, 0.2).slope_f[0] == 0.2


def test_tables_are_scaled_and_signs_kept():
    updraft = {"heights_m": [1000.0, 2000.0], "speeds_m_per_s": [0.5, -1.0]}
    diffusion = {"heights_m": [0.0, 500.0], "values_m2_per_s": [1.0, 4.0]}
    before = column(updraft=updraft, diffusion=diffusion, terrain={"slope": -0.1})
    lifted = knobs.with_largest_updraft(before, 3.0)
    assert lifted.definition["updraft"]["speeds_m_per_s"] == [1.5, -3.0]
    mixed = knobs.with_largest_diffusivity(before, 8.0)
    assert mixed.definition["diffusion"]["values_m2_per_s"] == [2.0, 8.0]
    assert knobs.with_largest_slope(before, 0.3).slope_f[0] == -0.3
    assert knobs.largest_slope(before) == 0.1
    sinking = column(updraft={"speed_m_per_s": -0.5})
    assert knobs.with_largest_updraft(sinking, 2.0).definition["updraft"]["speed_m_per_s"] == -2.0


def test_an_operator_of_the_users_own_goes_with_the_grid_spacing():
    horizontal = {"grid_spacing_m": 2000.0, "gradient": "given", "largest_gradient_per_m": 0.001}
    finer = knobs.with_grid_spacing(column(horizontal=horizontal), 500.0)
    assert finer.horizontal.grid_spacing_m == 500.0
    assert finer.horizontal.largest_gradient_per_m == pytest.approx(0.004)


def test_a_reference_is_put_in_and_taken_out():
    table = {"kind": "isothermal", "temperature_k": 240.0}
    on_reference = knobs.with_reference(column(), table)
    assert on_reference.reference.temperature_c[0] == 240.0
    assert knobs.with_reference(on_reference, None).reference is None


def test_over_a_slope_there_are_two_treatments():
    assert len(knobs.lowest_slope_gradients(column())) == 1
    both = knobs.lowest_slope_gradients(column(terrain={"slope": 0.1}))
    assert [one.lowest_slope_gradient for one in both] == ["half", "full"]
