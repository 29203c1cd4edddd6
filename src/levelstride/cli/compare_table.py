"""A comparison on the terminal."""

from collections.abc import Callable, Sequence
from pathlib import Path
from typing import TYPE_CHECKING

from levelstride.cli.cells import in_lines
from levelstride.cli.console import Heading, lined_up, say, show_table, width

if TYPE_CHECKING:
    from levelstride.results.comparison import ComparedRow, Comparison

WIDTH_FOR_COUNTS = 130
"""Width from which evaluations, solves and exchanges have columns of their own."""


def show_comparison(found: "Comparison", written: Sequence[Path]) -> None:
    """Print a comparison.

    Parameters
    ----------
    found : Comparison
        The answer.
    written : sequence of Path
        The files that it was written to.
    """
    from levelstride.results.comparison_wording import compared_at
    from levelstride.results.wording import metres, number

    column = found.column
    say(found.title, strong=True)
    say(
        f"{column.layers} layers, lowest {metres(column.lowest_layer_m)}, thickest "
        f"{metres(column.thickest_layer_m)}, largest ratio {number(column.largest_ratio)}, lid at "
        f"{metres(column.top_m)}"
    )
    _show_steps(found)
    say(f"At {compared_at(found)}:")
    _show_errors(found)
    if found.equal_cost_per_hour is not None:
        say(
            f"Equal cost is {number(found.equal_cost_per_hour)} per simulated hour: "
            f"{found.equal_cost_reason}."
        )
    say(f"{found.verdict[0].upper()}{found.verdict[1:]}.", strong=True)
    for note in (*_row_notes(found), *found.notes):
        say(f"Note: {note}.")
    say(f"Written to {written[0].parent}: {', '.join(path.name for path in written)}")
    say(f"Caution: {found.caution}")


def _show_steps(found: "Comparison") -> None:
    """How long a step each row carries, stable and accurate, and what that costs."""
    from levelstride.results.wording import in_short, step

    rows = found.rows
    stable = ["no limit" if row.unbounded else step(row.stable_step_s) for row in rows]
    columns: list[tuple[Heading, list[str]]] = [
        (Heading("stable", "step [s]", number=True), stable),
        (Heading("accurate", "step [s]", number=True), [step(r.accurate_step_s) for r in rows]),
        (
            Heading("advised" if found.step_s is None else "given", "step [s]", number=True),
            [_step(row) for row in rows],
        ),
    ]
    for text, name in _COUNTS if width() >= WIDTH_FOR_COUNTS else _COUNTS[-1:]:
        cells = [_whole(getattr(row, name)) for row in rows]
        columns.append((Heading(text, "[1/h]", number=True), cells))
    lined = [lined_up(cells) for _, cells in columns]
    show_table(
        [
            Heading("", number=True),
            Heading("tableau", whole=True),
            Heading("implicit", whole=True),
            *(heading for heading, _ in columns),
            Heading("what binds", "the accurate step"),
        ],
        [
            (
                str(i + 1),
                row.tableau,
                in_lines(row.split),
                *(cells[i] for cells in lined),
                in_short(row.accurate_reason),
            )
            for i, row in enumerate(rows)
        ],
        marked=found.cheapest,
    )


_COUNTS = (
    ("evaluations", "explicit_evaluations_per_hour"),
    ("solves", "solves_per_hour"),
    ("exchanges", "exchanges_per_hour"),
    ("cost", "cost_per_hour"),
)


def _whole(value: float | None) -> str:
    return "-" if value is None else f"{value:.0f}"


def _step(row: "ComparedRow") -> str:
    from levelstride.results.wording import step

    if row.errors is None:
        return "none"
    return step(row.step_s) if row.usable else "unstable"


def _show_errors(found: "Comparison") -> None:
    """What the step of each row does, how long it takes, and which rows beat it."""
    rows = found.rows
    columns = [
        (Heading(text, unit, number=True), lined_up([write(row) for row in rows]))
        for text, unit, write in _ERRORS
    ]
    show_table(
        [
            Heading("", number=True),
            Heading("tableau", whole=True),
            *(heading for heading, _ in columns),
            Heading("beaten", "by rows"),
        ],
        [
            (
                str(i + 1),
                row.tableau,
                *(cells[i] for _, cells in columns),
                ", ".join(str(place + 1) for place in sorted(by.row for by in row.dominated_by)),
            )
            for i, row in enumerate(rows)
        ],
        marked=found.cheapest,
    )


def _of_errors(name: str) -> Callable[["ComparedRow"], str]:
    return lambda row: in_percent(getattr(row.errors, name, None))


def _sound(row: "ComparedRow") -> str:
    sound = None if row.errors is None else row.errors.sound
    return in_percent(None if sound is None else sound.mean_change_per_period)


def _measured(row: "ComparedRow") -> str:
    from levelstride.results.wording import number

    taken_s = row.measured_s_per_hour
    return number(None if taken_s is None else 1e3 * taken_s, 3)


_ERRORS = (
    ("frequency", "error [%]", _of_errors("frequency_error")),
    ("amplitude", "[%/period]", _of_errors("amplitude_change_per_period")),
    ("", "[%/h]", _of_errors("amplitude_change_per_hour")),
    ("sound", "[%/period]", _sound),
    ("measured", "[ms/h]", _measured),
    ("equal-cost", "error [%]", lambda row: in_percent(row.error_at_equal_cost)),
)
"""Headings, units, and how each number is written."""


NOTHING = 1e-6
"""Changes smaller than this count as none in a table [1]."""


def in_percent(value: float | None) -> str:
    """Write a share in percent for a table: two digits, nothing finer than a millionth.

    Examples
    --------
    >>> in_percent(-0.012345), in_percent(1e-12), in_percent(None), in_percent(0.000123)
    ('-1.2', '0', '-', '0.012')
    """
    from levelstride.results.wording import number

    if value is None:
        return "-"
    return "0" if abs(value) < NOTHING else number(100.0 * value, 2)


def _row_notes(found: "Comparison") -> list[str]:
    """What a reader of the table must know of single rows."""
    from levelstride.results.comparison_wording import numbered

    notes = []
    coupled = [i for i, row in enumerate(found.rows) if row.couples_columns]
    if coupled:
        notes.append(
            f"with both horizontal terms implicit the solve couples neighbouring columns "
            f"({numbered(coupled)}), which costs more than is counted here"
        )
    doubtful = [i for i, row in enumerate(found.rows) if row.errors and row.errors.ambiguous]
    if doubtful:
        notes.append(
            "some resolved gravity waves belong to no eigenvalue of the step decisively and are "
            f"not judged ({numbered(doubtful)})"
        )
    for i, row in enumerate(found.rows):
        if row.errors is not None and row.errors.problem is not None:
            notes.append(f"{numbered([i])}: {row.errors.problem}")
    return notes
