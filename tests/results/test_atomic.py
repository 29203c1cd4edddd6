import errno
import os
import stat
from pathlib import Path

import pytest

from levelstride.errors import InputError
from levelstride.results import atomic
from levelstride.results.atomic import check_folder, write_folder

FILES = {"one.txt": b"1\n", "two.bin": bytes(range(256))}


def tree(folder):
    return sorted(str(path.relative_to(folder)) for path in folder.rglob("*"))


def test_missing_folder_is_made_with_the_usual_permissions(tmp_path):
    target = tmp_path / "out"
    (tmp_path / "usual").mkdir()
    written = write_folder(target, FILES)
    assert written == (target / "one.txt", target / "two.bin")
    assert (target / "two.bin").read_bytes() == FILES["two.bin"]
    assert tree(tmp_path) == ["out", "out/one.txt", "out/two.bin", "usual"]
    assert stat.S_IMODE(target.stat().st_mode) == stat.S_IMODE((tmp_path / "usual").stat().st_mode)


def test_existing_folder_keeps_its_other_files(tmp_path):
    (tmp_path / "mine.txt").write_text("mine")
    (tmp_path / "one.txt").write_text("old")
    write_folder(tmp_path, FILES)
    assert tree(tmp_path) == ["mine.txt", "one.txt", "two.bin"]
    assert (tmp_path / "one.txt").read_bytes() == b"1\n"
    assert (tmp_path / "mine.txt").read_text() == "mine"


def test_a_relative_folder_lies_in_the_working_folder(tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    check_folder(Path("out"))
    write_folder(Path("out"), FILES)
    assert tree(tmp_path) == ["out", "out/one.txt", "out/two.bin"]


@pytest.mark.parametrize("act", [check_folder, lambda folder: write_folder(folder, FILES)])
class TestRefusal:
    def test_missing_parent(self, tmp_path, act):
        with pytest.raises(InputError, match=r"a does not exist; create it"):
            act(tmp_path / "a" / "b")
        assert tree(tmp_path) == []

    def test_a_file_in_the_way(self, tmp_path, act):
        (tmp_path / "out").write_text("a file")
        with pytest.raises(InputError, match="is not a folder"):
            act(tmp_path / "out")
        assert (tmp_path / "out").read_text() == "a file"

    def test_a_link_that_leads_nowhere(self, tmp_path, act):
        (tmp_path / "out").symlink_to(tmp_path / "gone")
        with pytest.raises(InputError, match="is not a folder"):
            act(tmp_path / "out")


def test_a_folder_that_cannot_be_written_is_found_before_the_calculation(tmp_path, monkeypatch):
    monkeypatch.setattr(os, "access", lambda path, mode: False)
    with pytest.raises(InputError, match="writing there is not allowed"):
        check_folder(tmp_path)


@pytest.mark.parametrize("exists", [True, False])
@pytest.mark.parametrize(
    ("code", "words"),
    [
        (errno.ENOSPC, "the disk is full"),
        (errno.EDQUOT, "quota is used up"),
        (errno.EACCES, "not allowed"),
        (errno.EIO, "Input/output error"),
    ],
)
def test_nothing_is_left_when_the_second_file_cannot_be_written(
    tmp_path, monkeypatch, code, words, exists
):
    target = tmp_path / "out"
    if exists:
        target.mkdir()
        (target / "one.txt").write_text("old")
    before = tree(tmp_path)
    whole = atomic._write_synced

    def fail(path, content):
        if path.name == "two.bin":
            path.write_bytes(content[:10])
            raise OSError(code, os.strerror(code))
        whole(path, content)

    monkeypatch.setattr(atomic, "_write_synced", fail)
    with pytest.raises(InputError, match=words) as caught:
        write_folder(target, FILES)
    assert str(target) in str(caught.value)
    assert len(caught.value.problems) == 1
    assert tree(tmp_path) == before
    if exists:
        assert (target / "one.txt").read_text() == "old"


def test_an_interruption_leaves_nothing(tmp_path, monkeypatch):
    def interrupt(path, content):
        raise KeyboardInterrupt

    monkeypatch.setattr(atomic, "_write_synced", interrupt)
    with pytest.raises(KeyboardInterrupt):
        write_folder(tmp_path / "out", FILES)
    assert tree(tmp_path) == []


def test_a_folder_named_like_a_file_stops_before_any_is_replaced(tmp_path):
    (tmp_path / "one.txt").write_text("old")
    (tmp_path / "two.bin").mkdir()
    with pytest.raises(InputError, match=r"two[.]bin in it is a folder"):
        write_folder(tmp_path, FILES)
    assert (tmp_path / "one.txt").read_text() == "old"
    assert tree(tmp_path) == ["one.txt", "two.bin"]
