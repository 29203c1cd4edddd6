import csv
import json

import pytest

import levelstride.studies.compare
import levelstride.studies.knob_map
from examples import comparisons
from levelstride.results.comparison import Dominator, Weights

WORDS = ("--workers", "1")


@pytest.fixture(name="asked")
def _asked(monkeypatch):
    """Make the study answer at once with a made-up record; returns what it was asked."""
    asked = {
        "answer": comparisons.comparison(),
        "map": comparisons.knob_map(comparisons.SLOPE, comparisons.SPACING),
    }
    plan_comparison = levelstride.studies.compare.plan_comparison
    plan_map = levelstride.studies.knob_map.plan_map

    def planned(plan):
        def with_notes(column, *words, **options):
            asked.update(options, column=column, words=words)
            return plan(column, *words, **options)

        return with_notes

    def found(which):
        def carried_out(plan, *, executor, kept, progress):
            asked["plan"] = plan
            progress(0, len(plan.tasks), "something")
            return asked[which]

        return carried_out

    monkeypatch.setattr(levelstride.studies.compare, "plan_comparison", planned(plan_comparison))
    monkeypatch.setattr(levelstride.studies.compare, "carry_out_comparison", found("answer"))
    monkeypatch.setattr(levelstride.studies.knob_map, "plan_map", planned(plan_map))
    monkeypatch.setattr(levelstride.studies.knob_map, "carry_out_map", found("map"))
    return asked


def test_shows_tables_and_writes_files(run, tiny, asked, tmp_path):
    beaten = comparisons.row(
        cost=2000.0,
        tableau="ARS(3,4,3)",
        dominated_by=(Dominator(row=0, step_s=6.0, cost_per_hour=1400.0, error=0.002),),
    )
    asked["answer"] = comparisons.comparison(
        comparisons.row(error_at_equal_cost=0.0025), beaten, comparisons.unusable()
    )
    code, out, err = run("compare", tiny, *WORDS)
    assert (code, err) == (0, "")
    assert max(len(line) for line in out.splitlines()) <= 100
    for words in (
        "stable accurate advised cost what binds",
        "step [s] step [s] step [s] [1/h] the accurate step",
        "1 ARS(2,3,2) sound+buoyancy 9 8.5 8 1000 amplitude of gravity waves",
        "3 UJ3(1,3,2) sound+buoyancy 9 8.5 unstable - amplitude of gravity waves",
        "At the step advised for each row:",
        "1 ARS(2,3,2) 0.025 -1.2 -5 -25 32.5 0.25",
        "2 ARS(3,4,3) 0.025 -1.2 -5 -25 32.5 - 1",
        "Equal cost is 2000 per simulated hour: what row 2 costs at its step, the dearest.",
        "Cheapest is row 1, made up.",
        "Note: no wind was given",
        "Written to compare: compare.json, compare.csv, compare.txt, compare.h5",
        "Caution: Linear theory on a single column",
    ):
        assert words in " ".join(out.split()), words
    folder = tmp_path / "here" / "compare"
    lines = list(csv.DictReader((folder / "compare.csv").read_text().splitlines()))
    assert [line["tableau"] for line in lines] == ["ARS(2,3,2)", "ARS(3,4,3)", "UJ3(1,3,2)"]


def test_a_wide_terminal_shows_the_counts(run, tiny, asked, monkeypatch):
    monkeypatch.setenv("COLUMNS", "140")
    _, out, _ = run("compare", tiny, *WORDS)
    assert "evaluations solves exchanges cost" in " ".join(out.split())
    assert "8 1350 900 1350 1000" in " ".join(out.split())


def test_numbers_stand_with_their_points_below_one_another(run, tiny, asked):
    rows = [comparisons.row(stable_step_s=step) for step in (9.25, 10.0, 0.125)]
    asked["answer"] = comparisons.comparison(*rows)
    _, out, _ = run("compare", tiny, *WORDS)
    lines = [line for line in out.splitlines() if "sound+buoyancy" in line]
    start = out.splitlines()[3].index("stable")
    assert lines[0][start - 3 : start + 8].rstrip().endswith("9.25")
    places = [line.index(text) for line, text in zip(lines, (".25 ", " 8.5", ".125"), strict=True)]
    assert places[0] == places[2]


def test_rows_that_need_a_word_get_one(run, tiny, asked):
    asked["answer"] = comparisons.comparison(
        comparisons.row(couples_columns=True),
        comparisons.row(errors=comparisons.errors(ambiguous=2)),
        comparisons.unusable(
            errors=comparisons.errors(stable=False, problem="a stage has no solution")
        ),
        lowest_slope_gradient="half",
    )
    _, out, _ = run("compare", tiny, *WORDS)
    flat = " ".join(out.split())
    assert "the solve couples neighbouring columns (row 1)" in flat
    assert "belong to no eigenvalue of the step decisively and are not judged (row 2)" in flat
    assert "row 3: a stage has no solution" in flat


def test_json_is_the_only_thing_on_standard_output(run, tiny, asked, tmp_path):
    for words in ((), ("--vary", "terrain.slope=0:0.1:2")):
        code, out, _ = run("compare", tiny, "--json", *WORDS, *words, "--out", tmp_path / "out")
        assert code == 0
        name = "map.json" if words else "compare.json"
        assert (tmp_path / "out" / name).read_text() == out
        assert json.loads(out)["title"] == "Brackwater coast, 3 layers"


def test_passes_on_what_is_asked(run, tiny, asked):
    run(
        "compare", tiny, *WORDS, "--tableaux", "ars232", "--splits", "sound", "--step", "2.5",
        "--weights", "1/2/0.25", "--equal-cost", "5000", "--no-work-precision",
        "--lowest-slope-gradient", "full",
    )  # fmt: skip
    assert asked["words"] == (["ars232"], ["sound"])
    assert asked["step_s"] == 2.5
    assert asked["weights"] == Weights(explicit=1.0, solve=2.0, exchange=0.25)
    assert asked["equal_cost"] == 5000.0
    assert asked["work_precision"] is False
    assert asked["column"].lowest_slope_gradient == "full"
    assert len(asked["plan"].tasks) == 1


def test_without_options_the_column_file_decides(run, tiny, asked):
    run("compare", tiny, *WORDS)
    assert asked["step_s"] is None
    assert asked["weights"] is None
    assert asked["work_precision"] is True
    assert len(asked["plan"].tasks) == 4


def test_maps_are_shown_and_written(run, tiny, asked, tmp_path):
    code, out, _ = run(
        "compare", tiny, *WORDS, "--vary", "terrain.slope=0:0.1:2",
        "--vary", "horizontal.grid_spacing_m=1000:4000:3:log", "--step", "8",
    )  # fmt: skip
    assert code == 0
    assert asked["words"][0] == {
        "terrain.slope": "0:0.1:2", "horizontal.grid_spacing_m": "1000:4000:3:log",
    }  # fmt: skip
    flat = " ".join(out.split())
    for words in (
        "ARS(2,3,2) with sound, errors at a step of 8 s:",
        "Stable step [s], horizontal.grid_spacing_m [m] across",
        "1000 2000 4000",
        "0.1 6 5 no limit",
        "Written to compare: map.json, map.csv, map.txt, map.h5, map_figures.json",
    ):
        assert words in flat, words
    assert (tmp_path / "here" / "compare" / "map_figures.json").is_file()


def test_a_map_over_one_number_is_one_table(run, tiny, asked):
    asked["map"] = comparisons.knob_map(comparisons.SLOPE, step_s=None, share_of_stable=0.9)
    _, out, _ = run("compare", tiny, *WORDS, "--vary", "terrain.slope=0:0.1:2")
    flat = " ".join(out.split())
    assert "errors at 90 % of the stable step of each point:" in flat
    assert "terrain stable at step frequency amplitude what binds" in flat
    assert "slope [1] step [s] [s] error [%] [%/period] [%/h] the stable step" in flat
    assert "0.1 no limit 8 0.025 -1.2 -5 spectrum: sound 6.0 km, layers 0-3" in flat


def test_a_wide_map_is_thinned_on_the_terminal(run, tiny, asked):
    many = comparisons.Knob(
        key="horizontal.grid_spacing_m",
        values=tuple(1000.0 + 100.0 * k for k in range(40)),
        logarithmic=False,
        present=3000.0,
    )
    asked["map"] = comparisons.knob_map(comparisons.SLOPE, many)
    _, out, _ = run("compare", tiny, *WORDS, "--vary", "terrain.slope=0:0.1:2")
    assert "some values of it only" in out
    assert "4900" in out
    assert max(len(line) for line in out.splitlines()) <= 100


@pytest.mark.parametrize(
    ("words", "told"),
    [
        (("--weights", "1/2"), "--weights 1/2: write the costs"),
        (("--weights", "a/b/c"), "--weights a/b/c: write the costs"),
        (("--weights", "0/0/0"), "weights: received 0/0/0"),
        (("--step", "0"), "step: received 0.0 s"),
        (("--equal-cost", "-3"), "equal cost: received -3.0"),
        (("--vary", "terrain.slope"), "--vary terrain.slope: write KEY=FROM:TO:COUNT"),
        (("--vary", "terrain.slop=0:1:3"), "did you mean slope"),
        (("--vary", "levels.kind=0:1:3"), "is no number"),
        (("--vary", "terrain.slope=0:1:1"), "COUNT is 1"),
        (("--vary", "terrain.slope=0:1:3", "--weights", "1/1/1"), "--weights: a map by --vary"),
        (("--tableaux", "ars999"), "ars999"),
        (("--workers", "0"), "--workers 0: must be at least 1"),
        (("--out", "no/such/folder"), "--out no/such/folder"),
    ],
)
def test_bad_input_is_one_line_and_writes_nothing(run, tiny, tmp_path, words, told):
    code, out, err = run("compare", tiny, *words)
    assert code == 2
    assert out == ""
    assert told in err
    assert len(err.strip().splitlines()) == 1
    assert not list((tmp_path / "here").iterdir())


def test_a_real_comparison_and_what_is_kept_of_it(run, tiny, tmp_path):
    words = ("compare", tiny, *WORDS, "--tableaux", "ars232", "--splits", "sound", "--json")
    code, out, _ = run(*words)
    assert code == 0
    (row,) = json.loads(out)["rows"]
    assert row["errors"]["stable"] is True
    assert row["step_s"] == row["advised_step_s"] <= 0.9 * row["stable_step_s"]
    kept = sorted((tmp_path / "here" / "compare" / "kept").iterdir())
    assert len(kept) == 2
    code, out, _ = run(*words)
    (again,) = json.loads(out)["rows"]
    assert again | {"measured_s_per_hour": 0} == row | {"measured_s_per_hour": 0}
    assert sorted((tmp_path / "here" / "compare" / "kept").iterdir()) == kept
