"""Every shipped column is read, is what its comments say, and keeps its own promises."""

from pathlib import Path

import numpy as np
import pytest

from levelstride.column.level_report import level_report
from levelstride.column.read import load

COLUMNS = Path(__file__).parents[2] / "columns"


def column(name):
    return load(COLUMNS / f"{name}.toml")


def test_there_are_enough():
    assert len(list(COLUMNS.glob("*.toml"))) >= 6
    for path in COLUMNS.glob("*.toml"):
        assert path.read_text().startswith("# ")
        assert load(path).title.lower().startswith(path.stem.split("_")[0])


def test_flat_coast():
    made = column("brackwater_coast")
    assert made.levels.nlev == 40
    assert made.levels.thickness_m[0] == 20.0
    assert not made.slope_f.any()
    assert not made.wind_given


def test_steep_high_valley():
    made = column("greyspar_valley")
    assert made.levels.nlev == 60
    assert made.levels.surface_altitude_m == 1900.0
    assert made.levels.thickness_m[0] == pytest.approx(10.05)
    assert made.slope_f[0] == 0.3
    assert made.slope_f[-1] == 0.0
    assert level_report(made).steepness > 10.0


def test_deep():
    made = column("tallowmast_deep")
    assert made.levels.nlev == 137
    assert made.levels.top_m == 80000.0


def test_winter_plateau():
    lines = (COLUMNS / "wintermoor_ascent.csv").read_text().splitlines()
    rows = np.array([line.split(",") for line in lines[3:]], dtype=float)
    assert len(rows) > 300
    rises = np.diff(rows[:, 0])
    assert rises.max() > 5.0 * rises.min() > 0.0
    made = column("wintermoor_plateau")
    air = made.airs[0]
    inversion = air.temperature_c[made.levels.centres_m < 1000.0]
    assert inversion.max() - air.temperature_f[0] > 12.0
    assert air.pressure_f[0] == pytest.approx(rows[0, 1], rel=1e-3)
    assert made.levels.surface_altitude_m + made.levels.top_m > rows[-1, 0]
    assert air.wind_c.max() > 25.0


def test_hybrid_pressure():
    made = column("marlowick_strait")
    plain = made.definition["levels"]
    expected = np.array(plain["ap"][::-1]) + 99200.0 * np.array(plain["b"][::-1])
    np.testing.assert_allclose(made.airs[0].pressure_f, expected, rtol=1e-12)


def test_isothermal_reference_says_its_own_numbers():
    air = column("quietmarch_isothermal").airs[0]
    text = (COLUMNS / "quietmarch_isothermal.toml").read_text()
    assert f"{np.sqrt(air.sound_speed_squared_c[0]):.4f} m/s" in text
    height = -np.diff(np.log(air.pressure_f)) / 200.0
    assert f"{1.0 / height[0]:.3f} m" in text
    assert "= 0.0195675 1/s" in text
    assert np.sqrt(air.n_squared_c[0]) == pytest.approx(0.0195675, rel=1e-5)


def test_two_seasons_on_one_reference():
    made = column("harrowfen_basin")
    assert [air.name for air in made.airs] == ["summer", "winter"]
    assert made.reference is not None
    assert made.split == "sound+buoyancy"
    assert made.advice.divides_s == (600.0, 3600.0)
