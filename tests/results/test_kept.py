import json
import os
import subprocess
import sys
from fractions import Fraction

import pytest

from examples import records
from levelstride.errors import InputError
from levelstride.results import atomic
from levelstride.results.atomic import sweep, write_file
from levelstride.results.dataset import AdviceRow, Limit
from levelstride.results.kept import KeptItems
from levelstride.results.round_trip import from_plain_exact, to_plain_exact
from levelstride.studies.advised_step import Choice, StepCheck
from levelstride.studies.work_item import Finding

KEY, OTHER = "ab" * 32, "cd" * 32


def names(folder):
    return sorted(path.name for path in folder.iterdir())


def test_an_item_comes_back_in_another_process(tmp_path):
    item = {"step": 0.1 + 0.2, "names": ["w", "π"], "none": None}
    KeptItems(tmp_path / "out").keep(KEY, item)
    later = KeptItems(tmp_path / "out")
    assert later.find(KEY) == item
    assert later.find(OTHER) is None
    assert names(tmp_path / "out" / "kept") == [f"{KEY}.json"]


def test_nothing_is_made_before_there_is_something(tmp_path):
    assert KeptItems(tmp_path / "out").find(KEY) is None
    assert names(tmp_path) == []


@pytest.mark.parametrize(
    "spoil",
    [
        lambda text: text[: len(text) // 2],
        lambda text: "",
        lambda text: "null",
        lambda text: "[" * 100_000,
        lambda text: text.replace("1.5", "1.25"),
        lambda text: text.replace(KEY, OTHER),
        lambda text: "\x00" * len(text),
    ],
)
def test_a_damaged_file_counts_as_missing_and_is_replaced(tmp_path, spoil):
    kept = KeptItems(tmp_path)
    kept.keep(KEY, {"step": 1.5})
    path = tmp_path / "kept" / f"{KEY}.json"
    path.write_text(spoil(path.read_text()))
    assert kept.find(KEY) is None
    kept.keep(KEY, {"step": 1.5})
    assert kept.find(KEY) == {"step": 1.5}


def test_a_file_under_another_key_counts_as_missing(tmp_path):
    kept = KeptItems(tmp_path)
    kept.keep(KEY, 1)
    (tmp_path / "kept" / f"{KEY}.json").rename(tmp_path / "kept" / f"{OTHER}.json")
    assert kept.find(OTHER) is None


def test_keys_are_no_paths(tmp_path):
    with pytest.raises(ValueError, match="hexadecimal"):
        KeptItems(tmp_path).find("../../etc/passwd")


def test_what_cannot_be_written_is_the_users_to_mend(tmp_path, monkeypatch):
    def full(file, content):
        raise OSError(28, os.strerror(28))

    monkeypatch.setattr(atomic, "_write_through", full)
    with pytest.raises(InputError, match="the disk is full"):
        KeptItems(tmp_path).keep(KEY, 1)
    assert names(tmp_path / "kept") == []


def test_files_of_killed_processes_are_swept_and_no_others(tmp_path):
    dead = subprocess.run(
        [sys.executable, "-c", "import os; print(os.getpid())"], capture_output=True, text=True,
        check=True,
    ).stdout.strip()  # fmt: skip
    own = atomic._own_prefix()
    left = own.replace(f"_{os.getpid()}-", f"_{dead}-")
    assert left != own
    (tmp_path / f"{left}abc").write_text("torn")
    (tmp_path / f"{left}folder").mkdir()
    (tmp_path / f"{left}folder" / "advice.json").write_text("torn")
    (tmp_path / f"{own}abc").write_text("being written")
    (tmp_path / ".levelstride-elsewhere_1-abc").write_text("another host")
    (tmp_path / "mine").write_text("mine")
    sweep(tmp_path)
    assert names(tmp_path) == sorted([f"{own}abc", ".levelstride-elsewhere_1-abc", "mine"])
    sweep(tmp_path / "missing")


def test_a_file_is_replaced_whole(tmp_path):
    write_file(tmp_path / "one", b"old")
    write_file(tmp_path / "one", b"new")
    assert (tmp_path / "one").read_bytes() == b"new"
    assert names(tmp_path) == ["one"]
    (tmp_path / "usual").touch()
    assert (tmp_path / "one").stat().st_mode == (tmp_path / "usual").stat().st_mode


FINDING = Finding(
    records.limit(lowest_slope_gradient="full"),
    Choice(2.4, Fraction(12, 5), "interval", StepCheck(None, 1e-17, float("inf"))),
    StepCheck("grows", None, -0.1),
    True,
)


@pytest.mark.parametrize(
    "record",
    [
        records.limit(), records.unbounded(), records.row(), records.without_step(), FINDING,
        Finding(records.unbounded(), Choice(None, None, "none", None)),
    ],
)  # fmt: skip
def test_records_come_back_equal(record):
    text = json.dumps(to_plain_exact(record), allow_nan=False)
    again = from_plain_exact(type(record), json.loads(text))
    assert again == record
    assert repr(again) == repr(record)


@pytest.mark.parametrize(
    "spoil",
    [
        {"unbounded": "no"},
        {"bites": {}},
        {"windows": 3},
        {"lowest_slope_gradient": "third"},
        {"stable_step_s": [1]},
    ],
)
def test_other_data_make_no_record(spoil):
    plain = to_plain_exact(records.limit()) | spoil
    with pytest.raises((TypeError, ValueError, KeyError)):
        from_plain_exact(Limit, plain)
    with pytest.raises(KeyError):
        from_plain_exact(AdviceRow, plain | {"unbounded": True, "bites": None, "windows": []}
                         | {"lowest_slope_gradient": None, "stable_step_s": None})  # fmt: skip
