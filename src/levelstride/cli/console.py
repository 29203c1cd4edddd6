"""Tables and progress on the terminal; the only module that knows what draws them."""

import os
import sys
from collections.abc import Callable, Iterator, Sequence
from contextlib import contextmanager
from dataclasses import dataclass
from threading import Timer
from time import monotonic

from rich import box
from rich.console import Console, RenderableType
from rich.progress import (
    BarColumn,
    Progress,
    ProgressColumn,
    Task,
    TextColumn,
)
from rich.table import Table
from rich.text import Text

WIDTH_OF_A_FILE = 100
"""Width of the output where it does not go to a terminal and COLUMNS is not set."""

SHOWN_AFTER_S = 2.0
"""Time after which progress is shown [s]."""


_FILLER = "\N{BRAILLE PATTERN BLANK}"
"""Blank that stays where cells are aligned to the right."""


@dataclass(frozen=True, slots=True)
class Heading:
    """Heading of a column, its unit on a line of its own.

    Parameters
    ----------
    text : str
        Heading.
    unit : str
        Unit or a second line.
    number : bool
        Whether numbers stand below, aligned to the right.
    whole : bool
        Whether text below is never broken into lines.
    most : int or None
        Characters in a line at most.
    rest : bool
        Whether the column takes what is left of the width and cuts what is longer.
    """

    text: str
    unit: str = ""
    number: bool = False
    whole: bool = False
    rest: bool = False
    most: int | None = None


def _console(*, errors: bool = False) -> Console:
    stream = sys.stderr if errors else sys.stdout
    width = None if stream.isatty() or "COLUMNS" in os.environ else WIDTH_OF_A_FILE
    return Console(file=stream, markup=False, highlight=False, emoji=False, width=width)


def width() -> int:
    """Characters in a line of standard output."""
    return _console().width


def _print(drawn: RenderableType) -> None:
    """Print without the blanks that fill lines up to the width."""
    console = _console()
    with console.capture() as captured:
        console.print(drawn)
    text = captured.get().replace(_FILLER, " ")
    sys.stdout.write("".join(f"{line.rstrip()}\n" for line in text.splitlines()))


def say(text: str = "", *, strong: bool = False) -> None:
    """Print a line or paragraph, wrapped to the width."""
    _print(Text(text, style="bold" if strong else ""))


def say_errors(text: str) -> None:
    """Print a line to standard error."""
    print(text, file=sys.stderr, flush=True)


def show_table(
    headings: Sequence[Heading], rows: Sequence[Sequence[str]], *, marked: int | None = None
) -> None:
    """Print a table.

    Parameters
    ----------
    headings : sequence of Heading
        One per column.
    rows : sequence of sequence of str
        Cells.
    marked : int, optional
        Row to stand out.
    """
    table = Table(box=box.SIMPLE_HEAD, pad_edge=False, padding=(0, 1), collapse_padding=True)
    table.expand = any(heading.rest for heading in headings)
    for heading in headings:
        table.add_column(
            Text(f"{heading.text}\n{heading.unit}".rstrip("\n")),
            justify="right" if heading.number else "left",
            vertical="top",
            no_wrap=heading.number or heading.whole or heading.rest,
            overflow="ellipsis" if heading.rest else "fold",
            max_width=heading.most,
            ratio=1 if heading.rest else None,
        )
    for i, row in enumerate(rows):
        table.add_row(*map(Text, row), style="bold" if i == marked else "")
    _print(table)


def lined_up(cells: Sequence[str]) -> list[str]:
    """Fill up cells of a column of numbers so that decimal points stand below one another.

    Parameters
    ----------
    cells : sequence of str
        Numbers, or words in their place.

    Returns
    -------
    list of str
        For a heading of numbers, which are aligned to the right.

    Examples
    --------
    >>> [cell.replace(_FILLER, "_") for cell in lined_up(["12", "0.25", "3.5", "-"])]
    ['12___', '0.25', '3.5_', '-___']
    """
    after = [len(cell.partition(".")[2]) + ("." in cell) for cell in cells]
    room = max(after, default=0)
    return [cell + _FILLER * (room - n) for cell, n in zip(cells, after, strict=True)]


def show_pairs(pairs: Sequence[tuple[str, str]]) -> None:
    """Print names and values side by side."""
    table = Table(box=None, pad_edge=False, padding=(0, 2, 0, 0), show_header=False)
    table.add_column(no_wrap=True)
    table.add_column(overflow="fold")
    for name, value in pairs:
        table.add_row(Text(name), Text(value))
    _print(table)


class _TimeLeft(ProgressColumn):
    """Time left, by the time that the items done so far have taken; counted down in between."""

    def render(self, task: Task) -> Text:
        left_s, at = task.fields["left"]
        if left_s is None:
            return Text(f"{in_time(task.elapsed or 0.0)} so far")
        return Text(f"about {in_time(max(0.0, left_s - (monotonic() - at)))} left")


class _Count(ProgressColumn):
    """How many are done of how many, where that is known."""

    def render(self, task: Task) -> Text:
        return Text("" if task.total is None else f"{task.completed:.0f}/{task.total:.0f}")


def in_time(seconds: float) -> str:
    """Write a duration with two figures or so.

    Examples
    --------
    >>> in_time(8.2), in_time(200.0), in_time(9000.0)
    ('8 s', '3 min', '2.5 h')
    """
    if seconds < 100.0:
        return f"{seconds:.0f} s"
    return f"{seconds / 60:.0f} min" if seconds < 6000.0 else f"{seconds / 3600:.1f} h"


def time_left(first: tuple[float, int], now: float, done: int, total: int) -> float | None:
    """Estimate how long the rest takes.

    Parameters
    ----------
    first : tuple of (float, int)
        When counting began [s], and how many were done then already.
    now : float
        Time now [s].
    done, total : int
        Numbers of items.

    Returns
    -------
    float or None
        Time left [s]; None while nothing tells.

    Examples
    --------
    >>> time_left((100.0, 30), 110.0, 35, 40), time_left((100.0, 30), 110.0, 30, 40)
    (10.0, None)
    """
    begun, before = first
    return (now - begun) / (done - before) * (total - done) if done > before else None


@contextmanager
def progress(what: str) -> Iterator[Callable[[int, int, str], None]]:
    """Show how much is done on standard error, if that is a terminal and it takes a while.

    Parameters
    ----------
    what : str
        What is being worked on to begin with.

    Yields
    ------
    callable
        To be called with the numbers done and of all, and what is being worked on; the first call
        says what was done before.
    """
    if not sys.stderr.isatty():
        yield lambda done, total, on: None
        return
    bar = Progress(
        TextColumn("{task.description}"), BarColumn(bar_width=20), _Count(),
        _TimeLeft(), console=_console(errors=True), transient=True, refresh_per_second=4,
        redirect_stdout=False, redirect_stderr=False,
    )  # fmt: skip
    task = bar.add_task(what, total=None, left=(None, monotonic()))
    first: tuple[float, int] | None = None

    def report(done: int, total: int, on: str) -> None:
        nonlocal first
        now = monotonic()
        first = first or (now, done)
        left = (time_left(first, now, done, total), now)
        bar.update(task, completed=done, total=total, description=on or what, left=left)

    timer = Timer(SHOWN_AFTER_S, bar.start)
    timer.daemon = True
    timer.start()
    try:
        yield report
    finally:
        timer.cancel()
        timer.join()
        bar.stop()
