import io
import os
import pty
import subprocess
import sys
import time

from levelstride.cli import console

SHOW = """\
import sys, time
from levelstride.cli.console import progress
with progress("starting") as report:
    report(10, 20, "Tiny: ARS(2,3,2) with sound")
    for done in range(11, 11 + int(sys.argv[1])):
        time.sleep(0.3)
        report(done, 20, "Tiny: ARS(3,4,3) with sound")
"""


def seen_on_a_terminal(steps):
    """Run it with standard error on a terminal; returns what appears there and elsewhere."""
    ours, theirs = pty.openpty()
    environment = {**os.environ, "TERM": "xterm", "COLUMNS": "110"}
    process = subprocess.Popen(
        [sys.executable, "-c", SHOW, str(steps)], stdout=subprocess.PIPE, stderr=theirs,
        env=environment,
    )  # fmt: skip
    os.close(theirs)
    shown = b""
    while True:
        try:
            part = os.read(ours, 4096)
        except OSError:
            break
        if not part:
            break
        shown += part
    os.close(ours)
    out = process.communicate()[0]
    assert process.returncode == 0
    return shown.decode(), out.decode()


def test_after_two_seconds_a_terminal_shows_what_how_much_and_how_long():
    shown, out = seen_on_a_terminal(9)
    for words in ("ARS(3,4,3) with sound", "/20", "about ", " s left"):
        assert words in shown
    assert "starting" not in shown
    assert out == ""


def test_what_takes_less_shows_nothing():
    shown, out = seen_on_a_terminal(1)
    assert "with sound" not in shown
    assert shown.strip() == ""
    assert out == ""


def test_where_there_is_no_terminal_nothing_is_shown(monkeypatch):
    stream = io.StringIO()
    monkeypatch.setattr(sys, "stderr", stream)
    monkeypatch.setattr(console, "SHOWN_AFTER_S", 0.0)
    with console.progress("starting") as report:
        report(1, 2, "something")
        time.sleep(0.05)
    assert stream.getvalue() == ""
