import json

import pytest

import levelstride.studies.advise
import levelstride.studies.calibrate as study
from examples import records
from levelstride.column.observations import read_observations
from levelstride.errors import InputError
from levelstride.results.wording import CAUTION


@pytest.fixture(name="limits", autouse=True)
def _limits(monkeypatch):
    """Let every stable step be 4 s; returns what was asked."""
    asked = []

    def stable_step(item):
        asked.append(item)
        return 4.0

    monkeypatch.setattr(study, "stable_step", stable_step)
    return asked


@pytest.fixture(name="other")
def _other(tiny, tmp_path):
    path = tmp_path / "other.toml"
    path.write_text(tiny.read_text().replace("600.0", "500.0"))
    return path


METHOD = ("--tableau", "ars232", "--split", "sound", "--workers", 1)


class TestCalibrate:
    def test_shows_what_agrees_and_the_factor(self, run, tiny):
        code, out, err = run("calibrate", tiny, "--held", "3.0", "--failed", "5.0", *METHOD)
        assert (code, err) == (0, "")
        shown = " ".join(out.split())
        for words in (
            "Tiny [test] column: ARS(2,3,2) with sound",
            "growth-tolerance",
            "all of it",
            "no gap to explain",
            "from 75 % (longest held) to 125 % (shortest failed) of the stable step",
            "no wind was given",
            CAUTION,
        ):
            assert words in shown

    def test_json_is_the_only_thing_on_standard_output(self, run, tiny):
        words = ("--held", "4.5", "--failed", "5.0", "--vary", "slope", "--json")
        code, out, err = run("calibrate", tiny, *words, *METHOD)
        assert (code, err) == (0, "")
        plain = json.loads(out)
        assert plain["agrees"] is False
        assert [one["name"] for one in plain["assumptions"]] == ["slope"]
        assert plain["assumptions"][0]["explains"] is False
        assert "contradict every assumption" in plain["verdict"]
        assert plain["columns"][0]["held_s"] == [4.5]
        assert plain["caution"] == CAUTION

    def test_steps_of_several_columns_and_a_file(self, run, tiny, other, tmp_path):
        file = tmp_path / "seen.toml"
        file.write_text(
            '[[observation]]\ncolumn = "other.toml"\nheld_s = [2.0, 3.0]\nnote = "winter"\n'
            "[[observation]]\nfailed_s = 6\n"
        )
        code, out, _ = run(
            "calibrate", tiny, "--held", "3.5", "--failed", f"5.5={other}", "--observations", file,
            "--vary", "slope", "--json", *METHOD,
        )  # fmt: skip
        assert code == 0
        mine, others = json.loads(out)["columns"]
        assert (mine["held_s"], mine["failed_s"]) == ([3.5], [6.0])
        assert (others["held_s"], others["failed_s"]) == ([2.0, 3.0], [5.5])

    def test_writes_a_file_that_advise_takes(self, run, tiny, tmp_path):
        out = tmp_path / "seen.json"
        words = ("--held", "3.0", "--vary", "slope", "--out", out)
        code, shown, _ = run("calibrate", tiny, *words, *METHOD)
        assert code == 0
        assert "uses it" in " ".join(shown.split())
        assert json.loads(out.read_text())["safety_factor"]["lower"] == 0.75

    def test_without_a_factor_it_says_that_nothing_is_written(self, run, tiny, tmp_path):
        words = ("--held", "5.0", "--failed", "4.0", "--out", tmp_path / "seen.json")
        code, out, err = run("calibrate", tiny, *words, *METHOD)
        assert code == 3
        assert "The observations contradict one another" in out
        assert "not written" in err
        assert not (tmp_path / "seen.json").exists()

    @pytest.mark.parametrize(
        ("words", "named"),
        [
            ((), ["no step was observed"]),
            (("--held", "long"), ["--held long"]),
            (("--held", "-1", "--failed", "3="), ["--held -1", "--failed 3="]),
            (("--held", "nan"), ["--held nan"]),
            (("--held", "3=missing.toml"), ["missing.toml"]),
            (("--held", "3", "--observations", "missing.toml"), ["missing.toml"]),
            (("--held", "3", "--vary", "winds"), ["'winds'"]),
            (("--held", "3", "--efolding", "0"), ["--efolding 0"]),
            (("--held", "3", "--out", "missing/x.json"), ["missing"]),
            (("--held", "3", "--out", "."), ["is a folder"]),
        ],
    )
    def test_bad_options_are_one_line_each(self, run, tiny, limits, words, named):
        code, out, err = run("calibrate", tiny, *METHOD, *words)
        assert (code, out) == (2, "")
        assert len(err.splitlines()) == len(named)
        for line, name in zip(err.splitlines(), named, strict=True):
            assert name in line
        assert not limits

    def test_unknown_names_and_impossible_numbers(self, run, tiny, limits):
        for words, name in (
            (("--tableau", "ars322", "--split", "sound"), "ars322"),
            (("--tableau", "ars232", "--split", "sond"), "sond"),
            (("--tableau", "ars232", "--split", "sound", "--workers", 0), "--workers 0"),
        ):
            code, out, err = run("calibrate", tiny, "--held", 3, *words)
            assert (code, out, len(err.splitlines())) == (2, "", 1)
            assert name in err
        assert not limits

    def test_a_splitting_is_needed_from_somewhere(self, run, tiny):
        code, _, err = run("calibrate", tiny, "--held", "3", "--tableau", "ars232")
        assert code == 2
        assert "[split]" in err


class TestAdviseByCalibration:
    @pytest.fixture(name="asked")
    def _asked(self, monkeypatch):
        asked = []

        def advise_plan(plan, **_):
            asked.append(plan)
            return records.advice()

        monkeypatch.setattr(levelstride.studies.advise, "advise_plan", advise_plan)
        return asked

    @pytest.fixture(name="seen")
    def _seen(self, run, tiny, tmp_path):
        seen = tmp_path / "seen.json"
        run("calibrate", tiny, "--held", 3, "--vary", "slope", "--out", seen, *METHOD)
        return seen

    def test_the_factor_takes_the_place_of_safety(self, run, tiny, seen, asked):
        code, out, err = run("advise", tiny, "--calibration", seen, "--workers", 1)
        assert (code, err) == (0, "")
        assert "Its step carries, each by itself: slope to 0.25 (now 0.1)" in " ".join(out.split())
        (plan,) = asked
        assert plan.safety("ARS(2,3,2)", "sound") == 0.75
        assert plan.safety("ARS(2,3,3)", "sound+buoyancy") == 0.75

    def test_other_tolerances_are_refused(self, run, tiny, seen, asked):
        tiny.write_text(tiny.read_text().replace("[advice]", "[advice]\nefolding_s = 3600.0"))
        code, _, err = run("advise", tiny, "--calibration", seen)
        assert (code, len(err.splitlines())) == (2, 1)
        assert "efolding_s = 86400" in err
        assert not asked

    def test_a_file_that_is_none_is_refused(self, run, tiny, asked):
        for path, words in ((tiny, "is no calibration file"), ("none.json", "cannot be read")):
            code, _, err = run("advise", tiny, "--calibration", path)
            assert (code, len(err.splitlines())) == (2, 1)
            assert words in err
        assert not asked


@pytest.mark.parametrize(
    ("text", "named"),
    [
        ("", ["there is none"]),
        ("observation = 3", ["must be a list of tables"]),
        ("[[observation]]\nheld = 3.0", ["unknown key", "neither held_s nor failed_s"]),
        ("[[observation]]\nheld_s = [1.0, -2.0, true]", ["held_s[1]", "held_s[2]"]),
        ("[[observation]]\nheld_s = 'x'\ncolumn = 3", ["column = 3", 'held_s = "x"']),
        ("[[observations]]\nheld_s = 3.0", ["did you mean observation", "there is none"]),
        ("[[observation", ["not valid TOML"]),
    ],
)
def test_a_file_of_observations_names_its_mistakes(tmp_path, text, named):
    path = tmp_path / "seen.toml"
    path.write_text(text)
    with pytest.raises(InputError) as caught:
        read_observations(path)
    assert len(caught.value.problems) == len(named)
    for line, name in zip(caught.value.problems, named, strict=True):
        assert name in line
        assert line.startswith(str(path))
