import json
import os
import signal
import subprocess
import sys
import time

import pytest

import levelstride.studies.advise
import levelstride.studies.limit
from examples import records
from levelstride.cli.cells import in_lines
from levelstride.studies.plan import CurrentConfiguration


@pytest.fixture(name="asked")
def _asked(monkeypatch):
    """Make the study answer at once with a made-up record; returns what it was asked."""
    asked = {}

    def advise_plan(plan, **options):
        asked.update(options, plan=plan)
        options["progress"](1, 1, "something")
        current = records.advice().current if plan.current is not None else None
        return records.advice(current=current)

    monkeypatch.setattr(levelstride.studies.advise, "advise_plan", advise_plan)
    return asked


class TestAdvise:
    def test_shows_a_table_and_writes_four_files(self, run, tiny, asked, tmp_path):
        code, out, err = run("advise", tiny, "--workers", 1)
        assert (code, err) == (0, "")
        for words in (
            "ARS(2,3,2)",
            "sound+buoyancy",
            "no limit",
            "no wind was given",
            "Written to advice: advice.json, advice.csv, advice.txt, advice.h5",
            "Caution: Linear theory on a single column",
        ):
            assert words in out
        assert sorted(path.name for path in (tmp_path / "here" / "advice").iterdir()) == [
            "advice.csv",
            "advice.h5",
            "advice.json",
            "advice.txt",
        ]
        assert len(asked["plan"].pairs) == 4
        assert asked["plan"].current is None

    def test_json_is_the_only_thing_on_standard_output(self, run, tiny, asked, tmp_path):
        code, out, _ = run("advise", tiny, "--json", "--workers", 1, "--out", tmp_path / "out")
        assert code == 0
        assert json.loads(out)["best"] == 0
        assert (tmp_path / "out" / "advice.json").read_text() == out

    def test_passes_on_what_to_try(self, run, tiny, asked):
        run(
            "advise", tiny, "--workers", 1, "--tableaux", "ars232", "--tableaux", "ars343",
            "--splits", "sound",
        )  # fmt: skip
        assert [planned.what for planned in asked["plan"].items] == [
            "ARS(2,3,2) with sound",
            "ARS(3,4,3) with sound",
        ]

    def test_passes_on_that_limits_are_certified(self, run, tiny, asked):
        run("advise", tiny, "--workers", 1)
        assert asked["plan"].certify is False
        run("advise", tiny, "--workers", 1, "--certify")
        assert asked["plan"].certify is True
        assert all(planned.item.certify for planned in asked["plan"].items)

    def test_judges_the_current_step(self, run, tiny, asked):
        words = ("--current", "22.9", "--tableau", "ars232", "--split", "sound+buoyancy")
        code, out, _ = run("advise", tiny, "--workers", 1, *words)
        assert code == 0
        assert asked["plan"].current == CurrentConfiguration(22.9, "ars232", "sound+buoyancy")
        assert "Today: your step is at 83 % of the limit." in out

    @pytest.mark.parametrize(
        ("words", "named"),
        [
            (("--current", "20"), ["--tableau", "--split"]),
            (("--current", "20", "--tableau", "ars232"), ["--split"]),
            (("--tableau", "ars232"), ["--tableaux"]),
            (("--split", "sound"), ["--splits"]),
            (("--workers", "0"), ["--workers 0"]),
            (("--out", "missing/advice"), ["missing"]),
            (("--tableaux", "ars322"), ["ars322"]),
            (("--tableaux", "ars322", "--splits", "sond"), ["ars322", "sond"]),
        ],
    )
    def test_bad_options_write_nothing(self, run, tiny, asked, tmp_path, words, named):
        code, out, err = run("advise", tiny, *words)
        assert (code, out) == (2, "")
        assert len(err.splitlines()) == len(named)
        for line, name in zip(err.splitlines(), named, strict=True):
            assert name in line
        assert not asked
        assert not list((tmp_path / "here").iterdir())

    @pytest.mark.parametrize("width", [80, 100, 140])
    def test_the_table_keeps_to_the_width(self, run, tiny, asked, monkeypatch, width):
        monkeypatch.setenv("COLUMNS", str(width))
        out = run("advise", tiny, "--workers", 1)[1]
        assert max(map(len, out.splitlines())) <= width
        assert "27.5" in out
        assert ("3600 s" in out) == (width >= 100)
        assert ("amplitude" in out) == (width >= 130)


def test_splittings_break_behind_a_group():
    assert in_lines("sound") == "sound"
    assert in_lines("sound+buoyancy+divergence") == "sound+buoyancy+\ndivergence"
    assert in_lines("vertical-pressure-gradient+slope") == "vertical-pressure-gradient+\nslope"


class TestLimit:
    @pytest.fixture(name="asked")
    def _asked(self, monkeypatch):
        asked = {}

        def limit(column, **options):
            options.pop("progress")(1, 8, "strict step")
            asked.update(options)
            if options["split"] == "all-implicit":
                return records.unbounded()
            return records.limit(certificate=records.certificate() if options["certify"] else None)

        monkeypatch.setattr(levelstride.studies.limit, "limit", limit)
        return asked

    def test_shows_everything_about_a_limit(self, run, tiny, asked):
        words = ("--tableau", "ars232", "--split", "sound+buoyancy", "--efolding", "3600")
        code, out, err = run("limit", tiny, *words)
        assert (code, err) == (0, "")
        assert asked == {
            "tableau": "ars232",
            "split": "sound+buoyancy",
            "efolding_s": 3600.0,
            "certify": False,
            "what_if": True,
        }
        for text in (
            "27.5 s",
            "strict step",
            "26.25 s",
            "sound wave of 6.0 km, layers 0-3 (0-140 m)",
            "u 40 %",
            "40 times the step of all-explicit",
            "30 to 31.5 s",
            "cause: shear",
            "dense eigenvalues",
            "explicit horizontal divergence, layers 0-3 (0-140 m), wave of 6.0 km",
            "standard binds, hot by itself above 550 s",
            "horizontal divergence 55 -",
            "horizontal sound terms - > 550",
            "0 10 60 % 0.5 0.02",
            "2 90 10 % 0.12 -",
        ):
            assert text in " ".join(out.split())

    def test_certifies_at_every_wave(self, run, tiny, asked):
        words = ("limit", tiny, "--tableau", "ars232", "--split", "sound+buoyancy", "--certify")
        code, out, err = run(*words)
        assert (code, err) == (0, "")
        assert asked["certify"] is True
        table = [line.split() for line in out.splitlines()]
        assert ["0.001047", "6.0", "km", "8e-06", "0.00017", "1.2e-05", "dense", "eigenvalues"] in (
            table
        )
        assert ["0.0005", "12.6", "km", "-", "2e-07", "1.2e-05", "dense", "eigenvalues"] in table
        assert "at 27.52 s [1/s]" in out
        plain = json.loads(run(*words, "--json")[1])["certificate"]
        assert plain["breaks_above"] == "spectrum"
        assert plain["waves"][1]["growth_below_per_s"] is None
        assert "certificate" not in run(*words[:-1])[1]

    def test_what_if_can_be_left_out(self, run, tiny, asked):
        words = ("--tableau", "ars232", "--split", "sound", "--no-what-if")
        assert run("limit", tiny, *words)[0] == 0
        assert asked["what_if"] is False

    def test_a_limit_that_never_bites(self, run, tiny, asked):
        words = ("limit", tiny, "--tableau", "ars232", "--split", "all-implicit")
        assert "no limit" in run(*words)[1]
        plain = json.loads(run(*words, "--json")[1])
        assert (plain["stable_step_s"], plain["unbounded"]) == (None, True)

    def test_a_splitting_is_needed_from_somewhere(self, run, tiny, asked):
        code, _, err = run("limit", tiny, "--tableau", "ars232")
        assert code == 2
        assert "[split]" in err
        tiny.write_text(tiny.read_text() + '[split]\nname = "sound"\n')
        assert run("limit", tiny, "--tableau", "ars232")[0] == 0
        assert asked["split"] is None

    def test_a_time_must_be_positive(self, run, tiny, asked):
        words = ("--tableau", "ars232", "--split", "sound", "--efolding", "0")
        assert run("limit", tiny, *words)[0] == 2


def test_a_first_run_says_that_it_compiles(run, tiny, asked_nothing):
    code, out, err = run("limit", tiny, "--tableau", "ars232", "--split", "sound")
    assert code == 0
    assert "compiling" in err
    assert "compiling" not in out
    assert asked_nothing == ["real", "complex"]


@pytest.fixture(name="asked_nothing")
def _asked_nothing(monkeypatch):
    """Pretend that nothing is compiled; returns which kernels were."""
    import levelstride.stepper.imex
    import levelstride.stepper.kernels

    compiled = []
    monkeypatch.setattr(levelstride.stepper.kernels, "is_compiled", lambda: False)
    monkeypatch.setattr(
        levelstride.stepper.imex,
        "warm_up",
        lambda *, real: compiled.append("real" if real else "complex"),
    )
    monkeypatch.setattr(levelstride.studies.limit, "limit", lambda column, **_: records.limit())
    return compiled


@pytest.mark.parametrize("seconds", [0.6, 5.0])
def test_control_c_ends_all_processes_without_a_traceback(tiny, tmp_path, seconds):
    code = "import sys; from levelstride.cli import main; sys.exit(main())"
    command = [sys.executable, "-c", code, "advise", str(tiny), "--workers", "2"]
    process = subprocess.Popen(
        command, cwd=tmp_path, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True,
        start_new_session=True,
    )  # fmt: skip
    time.sleep(seconds)
    os.killpg(process.pid, signal.SIGINT)
    out, err = process.communicate(timeout=30)
    assert process.returncode == 130, err
    assert "Traceback" not in err
    assert out == ""
    assert not (tmp_path / "advice" / "advice.json").exists()
