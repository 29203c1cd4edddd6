import csv
import io
import json
from dataclasses import fields

import h5py
import numpy as np
import pytest
import xarray

from examples import comparisons
from levelstride.results.comparison import ComparedRow, Comparison, Dominator
from levelstride.results.comparison_files import (
    comparison_csv,
    comparison_hdf5,
    comparison_text,
    write_comparison,
)
from levelstride.results.comparison_wording import numbered, verdict
from levelstride.results.export import to_json
from levelstride.results.round_trip import from_plain_exact, to_plain_exact
from levelstride.results.wording import CAUTION

BEATEN = comparisons.row(
    cost=1500.0,
    tableau="ARS(3,4,3)",
    dominated_by=(Dominator(row=0, step_s=6.0, cost_per_hour=1400.0, error=0.002),),
)
COMPARISONS = {
    "one row": comparisons.comparison(),
    "a row beaten and one of no use": comparisons.comparison(
        comparisons.row(error_at_equal_cost=0.0025, step_at_equal_cost_s=4.0),
        BEATEN,
        comparisons.unusable(),
        comparisons.row(errors=None, step_s=None, cost_per_hour=None, curve=()),
    ),
    "nothing of use": comparisons.comparison(
        comparisons.unusable(),
        cheapest=None,
        most_accurate=None,
        undominated=(),
        equal_cost_per_hour=None,
        packets=(),
    ),
}


@pytest.fixture(params=COMPARISONS, name="found")
def _found(request):
    return COMPARISONS[request.param]


def test_json_keys_are_the_field_names_and_come_back():
    found = COMPARISONS["a row beaten and one of no use"]
    plain = json.loads(to_json(found))
    assert list(plain) == [field.name for field in fields(Comparison)]
    assert list(plain["rows"][0]) == [field.name for field in fields(ComparedRow)]
    assert plain["rows"][1]["dominated_by"][0]["row"] == 0
    assert from_plain_exact(Comparison, to_plain_exact(found)) == found


def test_one_line_of_csv_for_every_row(found):
    lines = list(csv.DictReader(io.StringIO(comparison_csv(found))))
    assert len(lines) == len(found.rows)
    assert not {"None", "nan"} & {value for line in lines for value in line.values()}
    for line, row in zip(lines, found.rows, strict=True):
        assert line["tableau"] == row.tableau
        assert (line["cost_per_hour"] == "") == (row.cost_per_hour is None)


def test_csv_names_what_beats_a_row():
    lines = csv.DictReader(
        io.StringIO(comparison_csv(COMPARISONS["a row beaten and one of no use"]))
    )
    first, second, third, last = lines
    assert first["dominated_by"] == ""
    assert second["dominated_by"] == "ARS(2,3,2) with sound+buoyancy at 6 s"
    assert first["sound_change_per_period"] == "-0.25"
    assert first["worst_wavelength_m"] == "24000.0"
    assert (third["step_is_stable"], last["step_is_stable"]) == ("false", "")


def test_text_has_a_line_per_row_and_one_caution(found):
    text = comparison_text(found)
    assert text.count(CAUTION) == 1
    assert text.count("\nrow ") == len(found.rows)
    assert "weights:   1 an explicit evaluation, 1 a solve, 0.5 an exchange" in text
    assert max(len(line.partition(":")[0]) for line in text.splitlines()) <= 11


def test_text_says_what_came_of_each_row():
    text = comparison_text(COMPARISONS["a row beaten and one of no use"])
    assert "error 0.25 % at 2000 per hour" in text
    assert "beaten by ARS(2,3,2) with sound+buoyancy at 6 s" in text
    assert "at 8 s: unstable" in text
    assert "not compared" in text


def test_hdf5_opens_in_xarray(found, tmp_path):
    path = tmp_path / "compare.h5"
    path.write_bytes(comparison_hdf5(found))
    with xarray.open_dataset(path, engine="h5netcdf") as data:
        data.load()
        assert not [name for name in data.dims if str(name).startswith("phony")]
        assert data.attrs["verdict"] == found.verdict
        assert data.attrs["cheapest"] == (-1 if found.cheapest is None else found.cheapest)
        assert list(data["tableau"].values) == [row.tableau for row in found.rows]
        assert data["cost_per_hour"].attrs["units"] == "h-1"
        assert np.isnan(data["cost_per_hour"].values).tolist() == [
            row.cost_per_hour is None for row in found.rows
        ]
    with h5py.File(path) as file:
        for name, dataset in file.items():
            assert dataset.attrs["units"], name
            assert dataset.attrs["long_name"], name


def test_curves_and_dominators_stand_beside_the_rows_they_belong_to(tmp_path):
    path = tmp_path / "compare.h5"
    path.write_bytes(comparison_hdf5(COMPARISONS["a row beaten and one of no use"]))
    with xarray.open_dataset(path, engine="h5netcdf") as data:
        assert list(data["curve_of"].values) == [0] * 4 + [1] * 4
        assert list(data["curve_step_s"].values[:4]) == [8.0, 4.0, 2.0, 1.0]
        assert list(data["dominated_by_of"].values) == [1]
        assert list(data["dominated_by_row"].values) == [0]


def test_all_four_files_are_written(found, tmp_path):
    written = write_comparison(found, tmp_path / "out")
    names = ["compare.json", "compare.csv", "compare.txt", "compare.h5"]
    assert [path.name for path in written] == names
    assert all(path.stat().st_size > 100 for path in written)


def test_the_verdict_names_the_rows_that_are_left():
    rows = [
        comparisons.row(cost=cost, error_at_equal_cost=error, step_at_equal_cost_s=4.0)
        for cost, error in ((1000.0, 0.02), (2000.0, 0.01), (50000.0, None))
    ]

    def told(*undominated, **changes):
        return verdict(
            comparisons.comparison(*rows, undominated=undominated, most_accurate=1, **changes)
        )

    assert told(0, 1).endswith(
        "most accurate at 2000 per hour is row 2, ARS(2,3,2) with sound+buoyancy: 1 % at 4 s; "
        "the choice lies between rows 1 and 2"
    )
    assert told(0, 1, 2).endswith("rows 1 and 2, and row 3 at more than 4 times the cost")
    assert told(0, 2).endswith(
        "nothing of such cost is more accurate than row 1, and row 3 at more than 4 times the cost"
    )
    assert told(1).endswith("it beats every other row: row 2")
    assert told(0, 1, equal_cost_per_hour=None).count("least frequency error has row 2") == 1
    assert told(cheapest=None) == "no row can be used; the table says why"


def test_rows_are_counted_from_one_for_people():
    assert numbered((0, 1, 4)) == "rows 1, 2 and 5"
