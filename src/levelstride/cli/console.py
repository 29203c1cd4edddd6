"""Tables and progress on the terminal; the only module that knows what draws them."""

import os
import sys
from collections.abc import Callable, Iterator, Sequence
from contextlib import contextmanager
from dataclasses import dataclass

from rich import box
from rich.console import Console, RenderableType
from rich.progress import BarColumn, MofNCompleteColumn, Progress, TextColumn, TimeRemainingColumn
from rich.table import Table
from rich.text import Text

WIDTH_OF_A_FILE = 100
"""Width of the output where it does not go to a terminal and COLUMNS is not set."""


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
    sys.stdout.write("".join(f"{line.rstrip()}\n" for line in captured.get().splitlines()))


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


def show_pairs(pairs: Sequence[tuple[str, str]]) -> None:
    """Print names and values side by side."""
    table = Table(box=None, pad_edge=False, padding=(0, 2, 0, 0), show_header=False)
    table.add_column(no_wrap=True)
    table.add_column(overflow="fold")
    for name, value in pairs:
        table.add_row(Text(name), Text(value))
    _print(table)


@contextmanager
def progress(what: str) -> Iterator[Callable[[int, int], None] | None]:
    """Show how much is done on standard error, if that is a terminal.

    Parameters
    ----------
    what : str
        What is counted.

    Yields
    ------
    callable or None
        To be called with the numbers done and of all, from any thread.
    """
    if not sys.stderr.isatty():
        yield None
        return
    columns = (TextColumn("{task.description}"), BarColumn(), MofNCompleteColumn())
    with Progress(
        *columns, TimeRemainingColumn(), console=_console(errors=True), transient=True
    ) as bar:
        task = bar.add_task(what, total=None)
        yield lambda done, total: bar.update(task, completed=done, total=total)
