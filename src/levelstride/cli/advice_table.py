"""An advice on the terminal, and many of them side by side."""

from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING

from levelstride.cli.cells import METHOD, STABLE, in_lines, level_set, stable_step
from levelstride.cli.console import Heading, say, show_table, width

WIDTH_FOR_COUNTS = 100
"""Width of the terminal from which the table has a column of steps for every interval."""

WIDTH_FOR_ACCURACY = 130
"""Width from which it has columns of what the step does to resolved gravity waves."""

if TYPE_CHECKING:
    from levelstride.results.dataset import Advice, AdviceRow, ColumnOutcome


def show_advice(found: "Advice", written: tuple[Path, ...]) -> None:
    """Print an advice.

    Parameters
    ----------
    found : Advice
        The advice.
    written : tuple of Path
        The files that it was written to.
    """
    say(found.title, strong=True)
    say(level_set(found.column))
    intervals_s = found.intervals_s if width() >= WIDTH_FOR_COUNTS else ()
    show_table(
        _headings(intervals_s),
        [_cells(i + 1, row, intervals_s) for i, row in enumerate(found.rows)],
        marked=found.best,
    )
    say(_best_sentence(found), strong=True)
    for line in _best_details(found):
        say(line)
    if found.current is not None:
        say(f"Today: {found.current.verdict}.")
    for note in _notes(found):
        say(note)
    if found.wind_note:
        say(f"Note: {found.wind_note}.")
    say(f"Written to {written[0].parent}: {', '.join(path.name for path in written)}")
    say(f"Caution: {found.caution}")


_ADVISED = Heading("advised", "step [s]", number=True)
_COST = Heading("cost", "[1/h]", number=True)
_BINDS = Heading("what binds", "the advised step")
_ACCURACY = (
    Heading("frequency", "error [%]", number=True),
    Heading("amplitude", "[%/period]", number=True),
)


def _headings(intervals_s: tuple[float, ...]) -> list[Heading]:
    from levelstride.results.wording import number

    return [
        Heading("", number=True),
        *METHOD,
        _ADVISED,
        STABLE,
        *(Heading("steps in", f"{number(i, 6)} s", number=True) for i in intervals_s),
        _COST,
        *(_ACCURACY if width() >= WIDTH_FOR_ACCURACY else ()),
        _BINDS,
    ]


def _cells(place: int, row: "AdviceRow", intervals_s: tuple[float, ...]) -> list[str]:
    from levelstride.results.wording import in_short, number, step

    errors = (row.frequency_error, row.amplitude_change_per_period)
    accuracy = ["-" if error is None else number(100.0 * error, 2) for error in errors]
    counts = [str(count) for count in row.steps_per_interval] or ["-"] * len(intervals_s)
    return [
        str(place),
        row.tableau,
        in_lines(row.split),
        step(row.advised_step_s),
        stable_step(row.stable_step_s, unbounded=row.unbounded),
        *counts[: len(intervals_s)],
        number(row.cost_per_hour),
        *(accuracy if width() >= WIDTH_FOR_ACCURACY else ()),
        in_short(row.binding),
    ]


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


def _best_details(found: "Advice") -> list[str]:
    """What limits the stable step of the best row, and which of several air states binds it."""
    from levelstride.results.cause import airs
    from levelstride.results.headroom_words import carried

    if found.best is None:
        return []
    row = found.rows[found.best]
    lines = [] if row.cause is None else [f"Cause of its limit: {row.cause}."]
    if row.headroom is not None:
        lines.append(f"Its step carries, each by itself: {carried(row.headroom)}.")
    return lines + ([f"Air: {airs(row)}."] if row.stable_step_by_air else [])


def show_outcomes(outcomes: "Sequence[ColumnOutcome]", written: Path) -> None:
    """Print one line for every column.

    Parameters
    ----------
    outcomes : sequence of ColumnOutcome
        The columns.
    written : Path
        The summary that they were written to.
    """
    from levelstride.results.wording import CAUTION, in_short, number, step

    rows = [
        (
            one.name,
            "-" if one.layers is None else str(one.layers),
            number(one.lowest_layer_m),
            one.tableau or "-",
            in_lines(one.split or "-"),
            step(one.advised_step_s),
            step(one.stable_step_s),
            number(one.cost_per_hour),
            in_short(one.binding or "")
            if one.problem is None
            else f"failed: {one.problem.partition('; ')[0]}",
        )
        for one in outcomes
    ]
    show_table(
        [
            Heading("column", most=24),
            Heading("layers", number=True),
            Heading("lowest", "[m]", number=True),
            *METHOD,
            _ADVISED,
            STABLE,
            _COST,
            _BINDS,
        ],
        rows,
    )
    say(f"Written to {written.parent}: {written.name}, and a folder of files for every column")
    say(f"Caution: {CAUTION}")
