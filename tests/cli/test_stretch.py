import csv
import json

import numpy as np
import pytest

import levelstride.studies.stretch
from examples import stretches
from levelstride.column.read import load
from levelstride.results.wording import CAUTION


@pytest.fixture(name="asked")
def _asked(monkeypatch):
    """Make the study answer at once with a made-up record; returns what it was asked."""
    asked = {"answer": stretches.stretch()}

    def stretch(column, **options):
        asked.update(options, column=column)
        options["progress"](1, 1, "something")
        return asked["answer"]

    monkeypatch.setattr(levelstride.studies.stretch, "stretch", stretch)
    return asked


@pytest.fixture(name="three")
def _three(tmp_path):
    path = tmp_path / "three.toml"
    path.write_text(
        'title = "Three layers"\n'
        '[levels]\nkind = "table"\nheights_m = [0.0, 600.0, 2000.0, 9000.0]\n'
        '[air]\nkind = "isothermal"\ntemperature_k = 250.0\n[horizontal]\ngrid_spacing_m = 1000.0\n'
    )
    return path


def test_shows_tables_and_writes_files(run, three, asked, tmp_path):
    code, out, err = run("stretch", three, "--workers", 1)
    assert (code, err) == (0, "")
    for words in (
        "what stays is the number of layers and the lid",
        "93.4",
        "no limit",
        "own set",
        "ARS(2,3,2) with sound+buoyancy: 24 s is carried to a lowest layer of 93.4 m.",
        "Crossing at a lowest layer of 77-80 m: gravity wave of 64.0 km",
        "Note: no wind was given",
        "Caution: Linear theory on a single column",
        "Written to stretch: stretch.json, stretch.csv, stretch.txt, stretched.toml, stretched.csv",
    ):
        assert words in " ".join(out.split()), words
    folder = tmp_path / "here" / "stretch"
    assert (folder / "stretch.txt").read_text().count(CAUTION) == 1
    again = load(folder / "stretched.toml")
    np.testing.assert_array_equal(again.levels.interfaces_m, stretches.row().interfaces_m)
    rows = list(csv.DictReader((folder / "stretch.csv").read_text().splitlines()))
    assert [row["carries"] for row in rows] == ["true", "true", "false"]
    assert [row["stable_step_s"] for row in rows] == ["", "27.5", "19.2"]
    assert rows[1]["binds_kind"] == "sound"
    assert json.loads((folder / "stretch.json").read_text())["rows"][0]["never_bites"] is False


def test_several_rows_share_one_table_of_curves(run, three, asked, tmp_path):
    other = stretches.row(
        tableau="UJ3(1,3,2)", never_bites=True, lost=None, mended=stretches.mended(),
        layer_costs=stretches.layer_costs(),
    )  # fmt: skip
    none = stretches.row(
        tableau="ARS(3,4,3)", target_step_s=None, thinnest_lowest_layer_m=None, lost=None,
        interfaces_m=(), largest_ratio=None, lid_m=None,
    )  # fmt: skip
    asked["answer"] = stretches.stretch(stretches.row(), other, none)
    code, out, _ = run("stretch", three, "--workers", 1)
    assert code == 0
    flat = " ".join(out.split())
    for words in (
        "of 3 [s]",
        "never lost in this range",
        "no target",
        "Mended: 30 s is carried with 1 of 3 layers changed.",
        "Which layers cost the step",
        "0.0456",
        "3 level sets as column files (.toml) and .csv",
    ):
        assert words in flat, words
    folder = tmp_path / "here" / "stretch"
    mended = load(folder / "mended_2_uj3132_sound-buoyancy.toml")
    np.testing.assert_array_equal(mended.levels.interfaces_m, stretches.mended().interfaces_m)
    table = (folder / "mended_2_uj3132_sound-buoyancy.csv").read_text().splitlines()
    assert table[0] == "interface,height_m,layer_above_m,height_before_m"
    assert table[2] == "1,700.0,1400.0,600.0"
    assert "mended:" in (folder / "stretch.txt").read_text()


def test_an_obstacle_is_told_and_no_set_written(run, three, asked, tmp_path):
    asked["answer"] = stretches.stretch(
        stretches.row(mended=stretches.mended(carried=False, obstacle="the lowest layer"))
    )
    code, out, _ = run("stretch", three, "--workers", 1, "--mend", "--keep-lowest")
    assert code == 0
    assert "Mended: 30 s" in out
    assert (asked["mend"], asked["keep_lowest"]) == (True, True)
    assert not list((tmp_path / "here" / "stretch").glob("mended*"))


def test_json_is_the_only_thing_on_standard_output(run, three, asked, tmp_path):
    code, out, _ = run("stretch", three, "--json", "--workers", 1, "--out", tmp_path / "out")
    assert code == 0
    found = json.loads(out)
    assert (tmp_path / "out" / "stretch.json").read_text() == out
    assert {
        "target_step_s", "tableau", "split", "thinnest_lowest_layer_m", "largest_ratio", "curve",
    } <= found.keys()  # fmt: skip
    assert found["curve"][1]["lowest_layer_m"] == 600.0


def test_passes_on_what_is_asked(run, three, asked):
    run(
        "stretch", three, "--workers", 1, "--target-step", "8.1", "--keep", "upper-levels",
        "--lowest", 2, "--tableaux", "ars232", "--tableaux", "ars343", "--splits", "sound",
        "--points", 12, "--efolding", 3600, "--lowest-slope-gradient", "full", "--layers",
        "--mend", "--largest-ratio", "1.3",
    )  # fmt: skip
    expected = {
        "target_step_s": 8.1,
        "keep": "upper-levels",
        "lowest": 2,
        "tableaux": ["ars232", "ars343"],
        "splits": ["sound"],
        "points": 12,
        "efolding_s": 3600.0,
        "layers": True,
        "mend": True,
        "keep_lowest": False,
        "largest_ratio": 1.3,
    }
    assert {name: asked[name] for name in expected} == expected
    assert asked["column"].lowest_slope_gradient == "full"


@pytest.mark.parametrize(
    ("words", "named"),
    [
        (("--keep-lowest",), ["--keep-lowest"]),
        (("--largest-ratio", "1.3"), ["--largest-ratio"]),
        (("--mend", "--largest-ratio", "0.5"), ["--largest-ratio 0.5"]),
        (("--workers", "0"), ["--workers 0"]),
        (("--out", "missing/stretch"), ["missing"]),
        (("--keep", "everything"), ["everything"]),
    ],
)
def test_bad_options_write_nothing(run, three, asked, tmp_path, words, named):
    code, out, err = run("stretch", three, *words)
    assert (code, out) == (2, "")
    assert len(err.splitlines()) == len(named)
    for line, name in zip(err.splitlines(), named, strict=True):
        assert name in line
    assert "column" not in asked
    assert not list((tmp_path / "here").iterdir())


@pytest.mark.parametrize(
    ("words", "named"),
    [
        (("--target-step", "-1"), "target step: received -1.0 s"),
        (("--points", "2"), "points: received 2"),
        (("--tableaux", "ars322"), "ars322"),
        (("--splits", "sond"), "sond"),
        (("--keep", "lowest-layers", "--lowest", "3"), "lowest: received 3"),
    ],
)
def test_bad_values_cost_one_line(run, three, tmp_path, words, named):
    code, out, err = run("stretch", three, "--workers", 1, *words)
    assert (code, out) == (2, "")
    (line,) = err.splitlines()
    assert named in line
    assert not list((tmp_path / "here").iterdir())


@pytest.mark.parametrize("width", [80, 100, 140])
def test_tables_keep_to_the_width(run, three, asked, monkeypatch, width):
    monkeypatch.setenv("COLUMNS", str(width))
    asked["answer"] = stretches.stretch(
        stretches.row(mended=stretches.mended(), layer_costs=stretches.layer_costs()),
        *[stretches.row()] * 3,
    )
    out = run("stretch", three, "--workers", 1)[1]
    assert max(map(len, out.splitlines())) <= width


def test_a_real_run_mends_a_column(run, three, tmp_path):
    code, out, _ = run(
        "stretch", three, "--workers", 1, "--tableaux", "ars232", "--splits", "all-explicit",
        "--target-step", "1.75", "--points", 3, "--mend", "--layers", "--json",
    )  # fmt: skip
    assert code == 0
    found = json.loads(out)
    assert found["rows"][0]["mended"]["carried"]
    assert found["rows"][0]["mended"]["verified_step_s"] >= 1.75
    assert len(found["rows"][0]["layer_costs"]["layers"]) == 3
    assert found["tableau"] == "ARS(2,3,2)"
    written = load(tmp_path / "here" / "stretch" / "mended.toml")
    np.testing.assert_array_equal(
        written.levels.interfaces_m, found["rows"][0]["mended"]["interfaces_m"]
    )
