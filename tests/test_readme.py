"""What README.md shows is there, runs, and is all there is."""

import contextlib
import inspect
import io
import re
import shlex
import tomllib
from importlib import import_module
from pathlib import Path

import pytest

from levelstride.cli.commands import COMMANDS
from levelstride.column.read import build, load, schema
from levelstride.operator.terms import CATALOGUE
from levelstride.results.wording import CAUTION
from levelstride.splitting import resolve
from levelstride.splitting.groups import GROUPS, TREATMENTS, WHOLE
from levelstride.tableaux import find, names, read_file

ROOT = Path(__file__).parents[1]
README = (ROOT / "README.md").read_text(encoding="utf-8")
DEVELOPERS = (ROOT / "DEVELOPERS.md").read_text(encoding="utf-8")
PAGES = {"README.md": README, "DEVELOPERS.md": DEVELOPERS}
TABLES = {
    "[levels]": "Levels",
    "[air]": "Air",
    "[horizontal]": "HorizontalTable",
    "[column]": "ColumnTable",
    "[wind]": "Wind",
    "[updraft]": "UpdraftTable",
    "[terrain]": "TerrainTable",
    "[upper_damping]": "UpperDampingTable",
    "[diffusion]": "DiffusionTable",
    "[divergence_damping]": "DivergenceDampingTable",
    "[rotation]": "RotationTable",
    "[scheme]": "SchemeTable",
    "[advice]": "AdviceTable",
}
"""Tables of a column file, and how the names of their models end."""


def blocks(page, language):
    return re.findall(rf"^```{language}\n(.*?)^```$", page, re.MULTILINE | re.DOTALL)


def rows_below(heading):
    """First cells of the table below the heading that begins with a table's name."""
    section = re.search(rf"^#### `{re.escape(heading)}`.*?\n(.*?)^#", README, re.M | re.S)
    assert section, heading
    return [line.split("|")[1:-1] for line in section[1].splitlines() if line.startswith("| `")]


def test_python_examples_run(tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    found = blocks(README, "python")
    assert len(found) == 2
    printed, namespace = io.StringIO(), {}
    with contextlib.redirect_stdout(printed):
        for number, block in enumerate(found, start=1):
            exec(compile(block, f"README.md, example {number}", "exec"), namespace)
    assert "your step is at" in printed.getvalue()
    assert CAUTION in printed.getvalue()


@pytest.mark.parametrize("page", PAGES)
def test_shell_commands_exist(page):
    lines = [line for block in blocks(PAGES[page], "sh") for line in block.splitlines()]
    assert lines
    for line in lines:
        program, *words = shlex.split(line, comments=True)
        if program != "levelstride":
            assert (ROOT / program).is_file(), line
            assert (ROOT / program).stat().st_mode & 0o100, line
            continue
        check_command(line, *words)


def check_command(line, command, *words):
    assert command in COMMANDS, line
    known = inspect.signature(
        getattr(import_module(f"levelstride.cli.{command}"), command)
    ).parameters
    for word in words:
        if word.startswith("--"):
            assert word[2:].replace("-", "_") in known, line
        elif word.endswith(".toml"):
            load(ROOT / word)


def test_every_command_and_column_is_told():
    shown = "\n".join(blocks(README, "sh"))
    for command in COMMANDS:
        assert f"levelstride {command}" in shown
    for path in (ROOT / "columns").glob("*.toml"):
        assert path.name in README
    for script in ("demo", "test", "check", "bench"):
        assert f"scripts/{script}" in README


def test_column_files_are_read():
    files = [text for text in blocks(README, "toml") if "[levels]" in text]
    assert len(files) == 2
    for text in files:
        build(tomllib.loads(text))


def test_tableau_file_is_read(tmp_path):
    (text,) = (text for text in blocks(README, "toml") if "[[tableau]]" in text)
    (tmp_path / "own.toml").write_text(text)
    assert len(read_file(tmp_path / "own.toml")) == 2


def test_splitting_by_terms_is_understood():
    (text,) = (text for text in blocks(README, "toml") if text.startswith("[split]"))
    resolve(tomllib.loads(text)["split"])


@pytest.mark.parametrize("heading", TABLES)
def test_key_list_is_complete(heading):
    models = {name: m for name, m in schema()["$defs"].items() if name.endswith(TABLES[heading])}
    keys = {key for model in models.values() for key in model["properties"]}
    listed = [row[0].strip().strip("`") for row in rows_below(heading)]
    assert len(set(listed)) == len(listed)
    assert set(listed) == keys
    for row in rows_below(heading):
        key, text = row[0].strip().strip("`"), "|".join(row[1:])
        for described in (m["properties"][key] for m in models.values() if key in m["properties"]):
            for value in [*described.get("enum", []), described.get("const", "kind")]:
                assert value == "kind" or f"`{value}`" in text, (key, value)


def test_numbers_that_are_defaults_are_those_of_the_schema():
    advice = schema()["$defs"]["AdviceTable"]["properties"]
    for row in rows_below("[advice]"):
        key, shown = row[0].strip().strip("`"), row[2].strip()
        default = advice[key]["default"]
        if isinstance(default, float):
            assert float(shown) == default, key
    for split in advice["splits"]["default"]:
        assert f"`{split}`" in README


def test_top_level_tables_are_all_told():
    told = {heading.strip("[]") for heading in TABLES} | {"title", "reference", "split"}
    assert told == set(schema()["properties"])


def test_groups_terms_and_treatments_are_all_told():
    section = README.partition("\n## Splittings\n")[2].partition("\n## ")[0]
    for group, terms in GROUPS.items():
        row = re.search(rf"^\| `{group}` \| (.*) \|$", section, re.MULTILINE)
        assert row, group
        assert row[1].partition(":")[0].split(", ") == list(terms)
    for name in (*WHOLE, *TREATMENTS):
        assert f"`{name}`" in section
    for term in CATALOGUE:
        assert term in section


def test_counts_of_tableaux():
    kinds = [find(name).kind for name in names()]
    said = f"{kinds.count('additive')} IMEX pairs and {kinds.count('explicit')} explicit methods"
    assert said in " ".join(README.split())


def test_paths_named_by_developers_exist():
    for path in re.findall(r"`((?:src|tests|scripts|columns)/[\w./-]+)`", DEVELOPERS):
        assert (ROOT / path).exists(), path
    for path in re.findall(r"`(\w+/\w+\.(?:py|toml))`", DEVELOPERS):
        assert (ROOT / "src" / "levelstride" / path).exists() or (ROOT / path).exists(), path
