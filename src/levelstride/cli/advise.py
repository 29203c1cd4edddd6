"""``levelstride advise``: which step, with which tableau and splitting?"""

import os
import re
import sys
from contextlib import AbstractContextManager
from pathlib import Path
from typing import TYPE_CHECKING, Annotated

from cyclopts import Parameter

from levelstride.cli.console import Heading, progress, say, show_table, width
from levelstride.cli.kernels import prepare_kernels
from levelstride.cli.options import ColumnFile, Json

WIDTH_OF_SPLITTING = 18
"""Characters in a line of the table's column of splittings."""

WIDTH_FOR_COUNTS = 100
"""Width of the terminal from which the table has a column of steps for every interval."""

WIDTH_FOR_ACCURACY = 130
"""Width from which it has columns of what the step does to resolved gravity waves."""

if TYPE_CHECKING:
    from concurrent.futures import Executor

    from levelstride.column.column import Column
    from levelstride.results.dataset import Advice, AdviceRow
    from levelstride.studies.advise import CurrentConfiguration


def advise(
    column: ColumnFile,
    /,
    *,
    tableaux: Annotated[
        list[str] | None,
        Parameter(help="Tableau to try, may be repeated; those of the column file by default."),
    ] = None,
    splits: Annotated[
        list[str] | None,
        Parameter(help="Splitting to try, may be repeated; those of the column file by default."),
    ] = None,
    current: Annotated[
        float | None,
        Parameter(help="Step you run today [s], to be judged; needs --tableau and --split."),
    ] = None,
    tableau: Annotated[str | None, Parameter(help="Tableau of the step you run today.")] = None,
    split: Annotated[
        str | None,
        Parameter(help="Splitting of the step you run today; that of the column file by default."),
    ] = None,
    out: Annotated[Path, Parameter(help="Folder for the files; made if missing.")] = Path("advice"),
    workers: Annotated[
        int | None, Parameter(help="Processes to share the work; one per core by default.")
    ] = None,
    json: Json = False,
) -> None:
    """Try tableaux and splittings and advise a step for each, the cheapest first."""
    from levelstride.column.read import load
    from levelstride.results.atomic import check_folder
    from levelstride.results.export import to_json
    from levelstride.results.files import write_advice
    from levelstride.studies.advise import advise as find_advice
    from levelstride.studies.methods import pairs_of

    read = load(column)
    judged = _current(read, column, current, tableau, split)
    pairs = pairs_of(read, tableaux, splits)
    number = _workers(workers, len(pairs) + (judged is not None))
    check_folder(out)
    prepare_kernels()
    with progress("tableaux and splittings") as report, _executor(number) as executor:
        found = find_advice(
            read, tableaux=tableaux, splits=splits, executor=executor, current=judged,
            progress=report,
        )  # fmt: skip
    written = write_advice(found, out)
    if json:
        sys.stdout.write(to_json(found))
    else:
        _show(found, written)


def _current(
    read: "Column", source: str, step_s: float | None, tableau: str | None, split: str | None
) -> "CurrentConfiguration | None":
    from levelstride.errors import InputError
    from levelstride.studies.advise import CurrentConfiguration

    if step_s is None:
        if tableau is not None or split is not None:
            raise InputError(
                "--tableau and --split describe the step given by --current; to try only some, "
                "write --tableaux and --splits"
            )
        return None
    named = read.split if split is None else split
    missing = []
    if tableau is None:
        missing.append("--tableau: name the tableau of the step given by --current")
    if named is None:
        missing.append(
            f"--split: name the splitting of the step given by --current; {source} has no [split]"
        )
    if tableau is None or named is None:
        raise InputError(*missing)
    return CurrentConfiguration(step_s, tableau, named)


def _workers(wanted: int | None, work: int) -> int:
    from levelstride.errors import InputError

    if wanted is None:
        usable = getattr(os, "sched_getaffinity", None)
        wanted = len(usable(0)) if usable else os.cpu_count() or 1
    if wanted < 1:
        raise InputError(f"--workers {wanted}: must be at least 1")
    return min(wanted, work, 61)


def _executor(workers: int) -> "AbstractContextManager[Executor]":
    from levelstride.execution.processes import processes
    from levelstride.execution.serial import serial

    return serial() if workers == 1 else processes(workers)


def _show(found: "Advice", written: tuple[Path, ...]) -> None:
    from levelstride.results.wording import metres, number

    column = found.column
    say(found.title, strong=True)
    say(
        f"{column.layers} layers, lowest {metres(column.lowest_layer_m)}, thickest "
        f"{metres(column.thickest_layer_m)}, largest ratio {number(column.largest_ratio)}, lid at "
        f"{metres(column.top_m)}"
    )
    intervals_s = found.intervals_s if width() >= WIDTH_FOR_COUNTS else ()
    show_table(
        _headings(intervals_s),
        [_cells(i + 1, row, intervals_s) for i, row in enumerate(found.rows)],
        marked=found.best,
    )
    say(_best_sentence(found), strong=True)
    if found.current is not None:
        say(f"Today: {found.current.verdict}.")
    for note in _notes(found):
        say(note)
    if found.wind_note:
        say(f"Note: {found.wind_note}.")
    say(f"Written to {written[0].parent}: {', '.join(path.name for path in written)}")
    say(f"Caution: {found.caution}")


_ACCURACY = (
    Heading("frequency", "error [%]", number=True),
    Heading("amplitude", "[%/period]", number=True),
)


def _headings(intervals_s: tuple[float, ...]) -> list[Heading]:
    from levelstride.results.wording import number

    return [
        Heading("", number=True),
        Heading("tableau", whole=True),
        Heading("implicit", whole=True),
        Heading("advised", "step [s]", number=True),
        Heading("stable", "step [s]", number=True),
        *(Heading("steps in", f"{number(i, 6)} s", number=True) for i in intervals_s),
        Heading("cost", "[1/h]", number=True),
        *(_ACCURACY if width() >= WIDTH_FOR_ACCURACY else ()),
        Heading("what binds", "the advised step"),
    ]


def _cells(place: int, row: "AdviceRow", intervals_s: tuple[float, ...]) -> list[str]:
    from levelstride.results.wording import in_short, number, step

    errors = (row.frequency_error, row.amplitude_change_per_period)
    accuracy = ["-" if error is None else number(100.0 * error, 2) for error in errors]
    stable = "no limit" if row.unbounded else step(row.stable_step_s)
    counts = [str(count) for count in row.steps_per_interval] or ["-"] * len(intervals_s)
    return [
        str(place),
        row.tableau,
        in_lines(row.split),
        step(row.advised_step_s),
        stable,
        *counts[: len(intervals_s)],
        number(row.cost_per_hour),
        *(accuracy if width() >= WIDTH_FOR_ACCURACY else ()),
        in_short(row.binding),
    ]


def in_lines(split: str) -> str:
    """Break a splitting behind its groups into lines that leave room for the rest.

    Examples
    --------
    >>> in_lines("sound+buoyancy+divergence").splitlines()
    ['sound+buoyancy+', 'divergence']
    """
    lines = [""]
    for group in re.findall(r"[^+]*\+?", split):
        if len(lines[-1]) + len(group) > WIDTH_OF_SPLITTING and lines[-1]:
            lines.append("")
        lines[-1] += group
    return "\n".join(lines)


def _notes(found: "Advice") -> list[str]:
    """What a reader of the table must know besides: coupled columns and growth by itself."""
    from levelstride.results.wording import own_growth

    notes = []
    coupled = [str(i + 1) for i, row in enumerate(found.rows) if row.couples_columns]
    if coupled:
        notes.append(
            f"Beware: with both horizontal terms implicit the solve couples neighbouring columns "
            f"(row {', '.join(coupled)}), which costs more than is counted here."
        )
    growths = [own for row in found.rows for own in row.own_growth]
    worst = {own.air: own for own in sorted(growths, key=lambda own: own.growth_per_s)}
    return notes + [own_growth(own) for own in worst.values()]


def _best_sentence(found: "Advice") -> str:
    from levelstride.results.wording import headroom, step

    if found.best is None:
        return "No step can be advised; the table says why."
    row = found.rows[found.best]
    coupled = "; its solve couples neighbouring columns" if row.couples_columns else ""
    return (
        f"Most simulated time per cost: {row.tableau} with {row.split}, step "
        f"{step(row.advised_step_s)} s, {headroom(row)}{coupled}. It is bound by {row.binding}."
    )
