"""Broken off, killed, taken up again: with real processes."""

import contextlib
import csv
import json
import os
import random
import signal
import subprocess
import sys
import time

import psutil
import pytest

from examples import quick
from levelstride.results.kept import KeptItems
from levelstride.studies.best_row import PARTS

CODE = "import sys; from levelstride.cli import main; sys.exit(main())"
KEEP = """\
import sys
from pathlib import Path
from levelstride.results.kept import KeptItems
kept = KeptItems(Path(sys.argv[1]))
for number in range(int(sys.argv[2]), 1_000_000):
    kept.keep(f"{number:08x}", {"number": number, "text": "x" * 20_000})
    print(number, flush=True)
"""


PATIENCE_S = 300.0
"""Time after which something is taken to hang [s]; machines are shared."""

KILLS = 2
"""Number of times that a whole command is killed; what keeps the items is killed more often."""


@pytest.fixture(name="columns")
def _columns(tmp_path):
    folder = tmp_path / "columns"
    folder.mkdir()
    for layers in (2, 3):
        text = quick.TEXT.replace("layers = 2", f"layers = {layers}")
        (folder / f"column_{layers}.toml").write_text(text.replace("2 layers", f"{layers} layers"))
    return folder


def begin(*words, folder):
    return subprocess.Popen(
        [sys.executable, "-c", CODE, *map(str, words)], cwd=folder, stdout=subprocess.PIPE,
        stderr=subprocess.PIPE, text=True, start_new_session=True,
        env={**os.environ, "OPENBLAS_NUM_THREADS": "1"},
    )  # fmt: skip


def kept_files(out):
    return {path.name for path in (out / "kept").glob("[0-9a-f]*.json")}


def check_readable(out):
    """Every file that has a name of its own is whole."""
    for path in out.rglob("*"):
        if path.is_file() and not any(part.startswith(".levelstride-") for part in path.parts):
            assert path.suffix in (".json", ".csv", ".txt", ".h5"), path
            assert path.stat().st_size > 0
            if path.suffix == ".json":
                json.loads(path.read_text())


def wait_until_gone(group):
    for _ in range(200):
        with contextlib.suppress(ProcessLookupError):
            os.killpg(group, 0)
            time.sleep(0.05)
            continue
        return
    raise AssertionError("processes outlive the one that started them")


def numbers(advice):
    """Everything in an advice but times."""
    plain = json.loads(advice.read_text())
    del plain["provenance"]["created_utc"], plain["provenance"]["column_source"]
    for row in plain["rows"]:
        del row["measured_s_per_hour"]
    return plain


def test_killed_again_and_again_it_loses_nothing_and_ends_with_the_same_answer(
    columns, run, tmp_path
):
    chance = random.Random(20)
    words = ("advise", columns)
    out, before, kills = tmp_path / "advice", set(), 0
    while kills < KILLS:
        process = begin(*words, "--workers", 1 if kills else 2, folder=tmp_path)
        already = len(before)
        deadline = time.monotonic() + 30.0
        while (
            process.poll() is None
            and len(kept_files(out)) <= already
            and time.monotonic() < deadline
        ):
            time.sleep(0.01)
        time.sleep(chance.uniform(0.0, 0.3))
        process.kill()
        process.communicate()
        wait_until_gone(process.pid)
        kills += 1
        now = kept_files(out)
        assert now >= before
        check_readable(out)
        before = now
    process = begin(*words, "--workers", 1, folder=tmp_path)
    _, complaints = process.communicate(timeout=PATIENCE_S)
    assert process.returncode == 0, complaints
    assert kept_files(out) >= before
    assert not list(out.rglob(".levelstride-*"))
    check_readable(out)
    run("advise", columns / "column_3.toml", "--workers", 1, "--out", tmp_path / "fresh")
    fresh = numbers(tmp_path / "fresh" / "advice.json")
    assert numbers(out / "column_3" / "advice.json") == fresh


def test_kept_files_survive_a_kill_at_any_moment(tmp_path):
    chance, first, out = random.Random(4), 0, tmp_path / "out"
    for _ in range(25):
        process = subprocess.Popen(
            [sys.executable, "-c", KEEP, str(out), str(first)], stdout=subprocess.PIPE, text=True
        )
        process.stdout.readline()
        time.sleep(chance.uniform(0.0, 0.03))
        process.kill()
        told = [int(line) for line in process.communicate()[0].split("\n") if line]
        first = max([first, *told]) + 1
        check_readable(out)
    kept = KeptItems(out)
    assert not list((out / "kept").glob(".levelstride-*"))
    for number in range(first):
        assert kept.find(f"{number:08x}")["number"] == number


def test_control_c_says_how_to_go_on_and_the_same_command_does(columns, tmp_path):
    process = begin("advise", columns, "--workers", 2, folder=tmp_path)
    out = tmp_path / "advice"
    deadline = time.monotonic() + PATIENCE_S
    while len(kept_files(out)) < 3 and time.monotonic() < deadline:
        time.sleep(0.01)
    os.killpg(process.pid, signal.SIGINT)
    shown, complaints = process.communicate(timeout=30)
    assert (process.returncode, shown) == (130, "")
    first, second = complaints.splitlines()
    assert first == "levelstride: interrupted"
    assert second.endswith("are kept in advice/kept; the same command goes on from there")
    assert f" of {2 * (quick.PAIRS + PARTS)} parts of the work " in second
    wait_until_gone(process.pid)
    check_readable(out)
    process = begin("advise", columns, "--workers", 2, "--json", folder=tmp_path)
    shown, complaints = process.communicate(timeout=PATIENCE_S)
    assert (process.returncode, complaints) == (0, "")
    assert [one["name"] for one in json.loads(shown)["columns"]] == ["column_2", "column_3"]


def test_a_killed_worker_is_survived(columns, tmp_path):
    process = begin("advise", columns / "column_2.toml", "--workers", 2, folder=tmp_path)
    worker = None
    deadline = time.monotonic() + PATIENCE_S
    while not kept_files(tmp_path / "advice") and time.monotonic() < deadline:
        time.sleep(0.01)
    for child in psutil.Process(process.pid).children():
        if "spawn_main" in " ".join(child.cmdline()):
            worker = child.pid
    assert worker is not None
    os.kill(worker, signal.SIGKILL)
    _, complaints = process.communicate(timeout=PATIENCE_S)
    assert (process.returncode, complaints) == (0, "")
    assert len(json.loads((tmp_path / "advice" / "advice.json").read_text())["rows"]) == quick.PAIRS


class TestManyColumns:
    def test_one_bad_column_does_not_stop_the_others(self, run, columns, tmp_path):
        (columns / "bad.toml").write_text("title = 3\n")
        (columns / "own_tableaux.toml").write_text("[[tableau]]\nname = 'no column'\n")
        out = tmp_path / "out"
        words = ("--workers", 1, "--out", out, "--splits", "sound+buoyancy+divergence")
        code, shown, complaints = run("advise", columns, *words)
        assert code == 2
        assert "levelstride: bad: " in complaints
        assert complaints.endswith("levelstride: 1 of 3 columns failed, the others are done\n")
        assert "own_tableaux" not in shown + complaints
        for name in ("column_2", "column_3"):
            assert name in shown
            assert json.loads((out / name / "advice.json").read_text())["best"] == 0
        with (out / "summary.csv").open(newline="") as file:
            table = {line["name"]: line for line in csv.DictReader(file)}
        assert list(table) == ["bad", "column_2", "column_3"]
        assert float(table["column_2"]["advised_step_s"]) > 0.0
        assert table["column_2"]["problem"] == ""
        assert "levels: this table is missing" in table["bad"]["problem"]

    def test_files_of_one_name_are_told_apart(self, run, columns, tmp_path):
        other = tmp_path / "other"
        other.mkdir()
        same = columns / "column_2.toml"
        (other / "column_2.toml").write_text(same.read_text())
        words = ("--workers", 1, "--splits", "sound+buoyancy+divergence", "--json")
        code, shown, _ = run("advise", same, other / "column_2.toml", *words)
        assert code == 0
        names = [one["name"] for one in json.loads(shown)["columns"]]
        assert names == ["columns-column_2", "other-column_2"]
        assert len(kept_files(tmp_path / "here" / "advice")) == 2 + PARTS

    def test_mistakes_of_the_command_come_once_and_write_nothing(self, run, columns, tmp_path):
        for words, line in (
            (("--tableaux", "ars999"), "ars999"),
            (("--workers", 2, "--cluster", "x:1"), "--workers and --cluster"),
            (("--tableau", "ars232"), "--current"),
        ):
            code, shown, complaints = run("advise", columns, *words)
            assert (code, shown) == (2, "")
            (complaint,) = complaints.splitlines()
            assert line in complaint
        assert not list((tmp_path / "here").iterdir())

    def test_a_column_is_needed(self, run, tmp_path):
        assert "no column file is given" in run("advise")[2]
        (tmp_path / "empty").mkdir()
        assert "has no column files" in run("advise", tmp_path / "empty")[2]
