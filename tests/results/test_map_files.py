import csv
import io
import json

import numpy as np
import pytest
import xarray

from examples import comparisons
from examples.comparisons import SLOPE, SPACING
from levelstride.results.export import to_json
from levelstride.results.knob_map import KnobMap
from levelstride.results.map_files import figures, map_csv, map_hdf5, map_text, unit_of, write_map
from levelstride.results.round_trip import from_plain_exact, to_plain_exact
from levelstride.results.wording import CAUTION

MAPS = {
    "one knob": comparisons.knob_map(SLOPE),
    "two knobs": comparisons.knob_map(SLOPE, SPACING),
    "at a share": comparisons.knob_map(SPACING, step_s=None, share_of_stable=0.9),
}


@pytest.fixture(params=MAPS, name="found")
def _found(request):
    return MAPS[request.param]


def test_records_come_back(found):
    assert from_plain_exact(KnobMap, to_plain_exact(found)) == found
    assert json.loads(to_json(found))["rows"][0]["points"][-1]["stable_step_s"] is None


def test_a_line_of_csv_for_every_point(found):
    lines = list(csv.DictReader(io.StringIO(map_csv(found))))
    assert len(lines) == len(found.rows[0].points)
    for line, point in zip(lines, found.rows[0].points, strict=True):
        at = tuple(float(line[knob.key]) for knob in found.knobs)
        assert at == point.values
        assert (line["stable_step_s"] == "") == (point.stable_step_s is None)
    assert lines[-1]["unbounded"] == "true"


def test_text_tells_extent_and_range():
    text = map_text(MAPS["two knobs"])
    assert text.count(CAUTION) == 1
    assert "terrain.slope from 0 to 0.1, 2 values in equal steps (now 0.1)" in text
    assert "from 1000 to 4000, 3 values in equal ratios (now 3000)" in text
    assert (
        "stable step 5 s at terrain.slope 0.1, horizontal.grid_spacing_m 2000 to 9 s at "
        "terrain.slope 0, horizontal.grid_spacing_m 1000; no limit at 1 points"
    ) in text
    assert "errors at: a step of 8 s" in text
    assert "errors at: 90 % of the stable step of each point" in map_text(MAPS["at a share"])


def test_hdf5_has_a_coordinate_for_every_knob(tmp_path):
    path = tmp_path / "map.h5"
    path.write_bytes(map_hdf5(MAPS["two knobs"]))
    with xarray.open_dataset(path, engine="h5netcdf") as data:
        data.load()
        stable = data["stable_step_s"]
        assert stable.dims == ("row", "terrain_slope", "horizontal_grid_spacing_m")
        assert float(stable.sel(row=0, terrain_slope=0.1, horizontal_grid_spacing_m=2000.0)) == 5.0
        assert np.isnan(stable.values[0, -1, -1])
        assert data["horizontal_grid_spacing_m"].attrs["units"] == "m"
        assert data["terrain_slope"].attrs["long_name"] == "terrain.slope"
        assert data["binds"].values[0, 0, 0].startswith("spectrum")


def test_figures_are_lines_over_one_knob_and_surfaces_over_two():
    lines = figures(MAPS["one knob"])
    assert [figure.kind for figure in lines] == ["lines"] * 4
    assert lines[0].x.values == SLOPE.values
    assert lines[0].series[0].label == "ARS(2,3,2) with sound"
    assert lines[0].series[0].values == (9.0, None)
    assert (lines[0].y.label, lines[0].y.unit) == ("stable step", "s")
    assert "at a step of 8 s" in lines[1].title
    surfaces = figures(MAPS["two knobs"])
    assert [figure.kind for figure in surfaces] == ["surface"] * 4
    assert surfaces[0].surface == ((9.0, 6.0), (8.0, 5.0), (7.0, None))
    assert (surfaces[0].x.label, surfaces[0].y.label) == (SLOPE.key, SPACING.key)
    assert surfaces[0].y.logarithmic is True


def test_all_files_are_written(found, tmp_path):
    written = write_map(found, tmp_path / "out")
    names = ["map.json", "map.csv", "map.txt", "map.h5", "map_figures.json"]
    assert [path.name for path in written] == names
    assert json.loads(written[-1].read_text())["figures"][0]["x"]["label"] == found.knobs[0].key


@pytest.mark.parametrize(
    ("key", "unit"),
    [
        ("air[1].temperature_k", "K"),
        ("rotation.coriolis_per_s", "s-1"),
        ("diffusion.vertical_m2_per_s", "m2 s-1"),
        ("horizontal.largest_gradient_per_m", "m-1"),
        ("advice.efolding_s", "s"),
        ("air.surface_pressure_pa", "Pa"),
        ("levels.layers", "1"),
    ],
)
def test_units_are_read_off_the_key(key, unit):
    assert unit_of(key) == unit
