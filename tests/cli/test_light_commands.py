import json
import re
import subprocess
import sys
import tomllib
from pathlib import Path

import jsonschema
import pytest

import levelstride.cli
from levelstride import __version__
from levelstride.cli.commands import COMMANDS

COLUMNS = sorted((Path(__file__).parents[2] / "columns").glob("*.toml"))
HEAVY = {"numpy", "scipy", "numba", "h5py", "pydantic", "rich", "cyclopts"}


@pytest.mark.parametrize("words", [(), ("--help",), ("-h",)])
def test_help_lists_every_command(run, words):
    code, out, err = run(*words)
    assert (code, err) == (0, "")
    for name in COMMANDS:
        assert f"  {name} " in out


def test_help_and_version_import_nothing_heavy(start):
    for word in ("--help", "--version"):
        found = start(word, flags=("-X", "importtime"))
        assert found.returncode == 0
        imported = re.findall(r"\|\s+([\w.]+)$", found.stderr, re.MULTILINE)
        assert "levelstride.cli" in imported
        assert not HEAVY & {name.split(".")[0] for name in imported}
    assert found.stdout.strip() == __version__


@pytest.mark.parametrize("command", COMMANDS)
def test_every_command_has_help_and_json(run, command):
    code, out, _ = run(command, "--help")
    assert code == 0
    assert "--json" in out
    assert COMMANDS[command].split(",")[0] in " ".join(out.split())


@pytest.mark.parametrize("command", ["check", "limit", "advise"])
def test_help_of_a_command_imports_no_solver(start, command):
    found = start(command, "--help", flags=("-X", "importtime"))
    assert found.returncode == 0
    assert not re.search(r"\b(numba|scipy|pydantic|h5py)\b", found.stderr)


@pytest.mark.parametrize(
    ("words", "named"),
    [
        (("frob",), "frob"),
        (("check",), "COLUMN"),
        (("check", "a.toml", "b.toml"), "b.toml"),
        (("advise", "a.toml", "--splitt", "sound"), "--splitt"),
        (("advise", "a.toml", "--workers", "many"), "many"),
        (("limit", "a.toml"), "--tableau"),
    ],
)
def test_words_that_make_no_command_get_one_line_and_code_2(run, words, named):
    code, out, err = run(*words)
    assert (code, out) == (2, "")
    assert len(err.splitlines()) == 1
    assert err.startswith("levelstride: ")
    assert named in err
    assert "--help" in err


def test_schema_is_a_schema_that_the_shipped_columns_keep(run):
    code, out, err = run("schema")
    assert (code, err) == (0, "")
    schema = json.loads(out)
    validator = jsonschema.validators.validator_for(schema)
    validator.check_schema(schema)
    for path in COLUMNS:
        validator(schema).validate(tomllib.loads(path.read_text()))
    assert run("schema", "--json")[1] == out


def test_check_reports_on_a_column(run, tiny):
    code, out, err = run("check", tiny)
    assert (code, err) == (0, "")
    assert "Tiny [test] column" in out
    assert "largest ratio" in out
    assert "The file is sound" in out
    assert not any(line.endswith(" ") for line in out.splitlines())
    plain = json.loads(run("check", tiny, "--json")[1])
    assert plain["layers"] == 6
    assert plain["sound"] is True
    assert plain["airs"][0]["unstable_layers"] == []


@pytest.mark.parametrize("path", COLUMNS, ids=lambda path: path.stem)
def test_check_reads_every_shipped_column(run, path):
    assert run("check", path)[0] == 0


def test_all_mistakes_of_a_file_come_at_once_one_line_each(run, tiny):
    tiny.write_text(tiny.read_text().replace("layers = 6", "layers = 0").replace("title", "titel"))
    code, out, err = run("check", tiny)
    assert (code, out) == (2, "")
    assert len(err.splitlines()) == 2
    assert all(str(tiny) in line for line in err.splitlines())


def test_a_missing_file_is_named(run):
    code, out, err = run("check", "nowhere.toml")
    assert (code, out) == (2, "")
    assert "nowhere.toml" in err


def test_tableaux_are_listed(run):
    code, out, err = run("tableaux")
    assert (code, err) == (0, "")
    assert "ARS(3,4,3)" in out
    assert all(len(line) <= 100 for line in out.splitlines())
    plain = json.loads(run("tableaux", "--json")[1])
    assert len(plain) >= 61
    ars = next(t for t in plain if t["name"] == "ARS(3,4,3)")
    assert (ars["order"], ars["implicit_solves"], ars["explicit_evaluations"]) == (3, 3, 4)


def test_one_tableau_is_shown_with_its_audit(run):
    code, out, err = run("tableaux", "ars343")
    assert (code, err) == (0, "")
    for words in ("linear order", "nonlinear order", "coupling order", "The audit is passed."):
        assert words in out
    plain = json.loads(run("tableaux", "ars343", "--json")[1])
    assert plain["audit"]["passed"] is True
    assert plain["coefficients"]["a_implicit"][1][1].startswith("0.43586652150845899")
    assert "coupling" not in run("tableaux", "RK4")[1]
    assert "negative diagonal" in run("tableaux", "imkg343a")[1]


def test_a_tableau_of_the_users_own_is_shown_and_an_unknown_one_refused(run, tmp_path):
    own = tmp_path / "own.toml"
    own.write_text(
        '[[explicit]]\nname = "My Euler"\norder = 1\na = [["0"]]\nb = ["1"]\n', encoding="utf-8"
    )
    assert "My Euler" in run("tableaux", "--file", own)[1]
    assert "My Euler" in run("tableaux", "myeuler", "--file", own)[1]
    own.write_text(own.read_text().replace('b = ["1"]', 'b = ["1/2"]'))
    code, _, err = run("tableaux", "--file", own)
    assert code == 2
    assert "missed by -0.5" in err
    code, out, err = run("tableaux", "ars344")
    assert (code, out) == (2, "")
    assert "ARS(3,4,3)" in err


def test_a_reader_that_leaves_gets_no_complaint():
    code = "import sys; from levelstride.cli import main; sys.exit(main())"
    command = [sys.executable, "-c", code, "schema"]
    with subprocess.Popen(command, stdout=subprocess.PIPE, stderr=subprocess.PIPE) as process:
        process.stdout.close()
        complaint = process.stderr.read()
    assert process.returncode == 1
    assert complaint == b""


class TestFaults:
    def test_a_fault_of_the_program_has_no_traceback_without_debug(self, run, tiny, monkeypatch):
        monkeypatch.setattr(levelstride.cli, "_run", self.fail(ZeroDivisionError("boom")))
        code, out, err = run("check", tiny)
        assert (code, out) == (1, "")
        assert len(err.splitlines()) == 1
        assert "boom" in err
        assert "--debug" in err
        with pytest.raises(ZeroDivisionError):
            run("check", tiny, "--debug")

    def test_a_calculation_that_cannot_be_finished_has_code_3(self, run, monkeypatch):
        monkeypatch.setattr(
            levelstride.cli, "_run", self.fail(levelstride.CalculationError("no answer"))
        )
        assert run("check", "x") == (3, "", "levelstride: no answer\n")
        monkeypatch.setattr(levelstride.cli, "_run", self.fail(MemoryError()))
        assert run("check", "x")[0] == 3

    def test_an_interruption_ends_cleanly(self, run, monkeypatch):
        monkeypatch.setattr(levelstride.cli, "_run", self.fail(KeyboardInterrupt()))
        code, out, err = run("check", "x")
        assert (code, out) == (130, "")
        assert "interrupted" in err

    @staticmethod
    def fail(error):
        def run(words):
            raise error

        return run
