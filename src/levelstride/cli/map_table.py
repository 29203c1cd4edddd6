"""A map over one or two numbers of the column file on the terminal."""

from collections.abc import Callable, Sequence
from pathlib import Path
from typing import TYPE_CHECKING

from levelstride.cli.compare_table import in_percent
from levelstride.cli.console import Heading, lined_up, say, show_table, width

if TYPE_CHECKING:
    from levelstride.results.knob_map import KnobMap, MapPoint, MapRow

CHARACTERS = 11
"""Room for one value of the second knob."""

Read = Callable[["MapPoint"], str]


def show_map(found: "KnobMap", written: Sequence[Path]) -> None:
    """Print a map.

    Parameters
    ----------
    found : KnobMap
        The answer.
    written : sequence of Path
        The files that it was written to.
    """
    from levelstride.results.map_files import errors_at

    say(found.title, strong=True)
    for row in found.rows:
        say(f"{row.tableau} with {row.split}, errors at {errors_at(found)}:", strong=True)
        if len(found.knobs) == 1:
            _show_line(found, row)
        else:
            _show_surfaces(found, row)
    for note in found.notes:
        say(f"Note: {note}.")
    say(f"Written to {written[0].parent}: {', '.join(path.name for path in written)}")
    say(f"Caution: {found.caution}")


def _stable(point: "MapPoint") -> str:
    from levelstride.results.wording import step

    if point.unbounded:
        return "no limit"
    return "none" if point.stable_step_s is None else step(point.stable_step_s)


def _turned(point: "MapPoint") -> str:
    return in_percent(point.frequency_error)


def _per_period(point: "MapPoint") -> str:
    return in_percent(point.amplitude_change_per_period)


def _per_hour(point: "MapPoint") -> str:
    return in_percent(point.amplitude_change_per_hour)


def _step(point: "MapPoint") -> str:
    from levelstride.results.wording import step

    return "-" if point.step_s is None else step(point.step_s) if point.stable else "unstable"


def _where_stable(read: Read) -> Read:
    """Errors of steps that grow anyway are of no use."""
    return lambda point: "unstable" if point.step_s and not point.stable else read(point)


def _show_line(found: "KnobMap", row: "MapRow") -> None:
    """One line per value of the only knob."""
    from levelstride.results.map_files import unit_of
    from levelstride.results.wording import in_short, number

    (knob,) = found.knobs
    table, _, name = knob.key.rpartition(".")
    reads: tuple[tuple[str, str, Read], ...] = (
        (table, f"{name} [{unit_of(knob.key)}]", lambda point: number(point.values[0], 6)),
        ("stable", "step [s]", _stable),
        ("at step", "[s]", _step),
        ("frequency", "error [%]", _turned),
        ("amplitude", "[%/period]", _per_period),
        ("", "[%/h]", _per_hour),
    )
    columns = [lined_up([read(point) for point in row.points]) for _, _, read in reads]
    show_table(
        [
            *(Heading(text, unit, number=True) for text, unit, _ in reads),
            Heading("what binds", "the stable step"),
        ],
        [
            (*(cells[i] for cells in columns), in_short(point.binds))
            for i, point in enumerate(row.points)
        ],
        marked=_present(knob.values, knob.present),
    )


def _present(values: Sequence[float], present: float | None) -> int | None:
    return next((i for i, value in enumerate(values) if value == present), None)


def _show_surfaces(found: "KnobMap", row: "MapRow") -> None:
    """One table per quantity, the first knob downwards and the second across."""
    from levelstride.results.map_files import surface, unit_of
    from levelstride.results.wording import number

    first, second = found.knobs
    fits = max(2, (width() - len(first.key) - 10) // CHARACTERS)
    shown = _thinned(len(second.values), fits)
    across = f"{second.key} [{unit_of(second.key)}]"
    for words, read in (
        ("Stable step [s]", _stable),
        ("Frequency error of resolved gravity waves [%]", _where_stable(_turned)),
        ("Amplitude change of resolved gravity waves [%/period]", _where_stable(_per_period)),
    ):
        cells = surface(found, row, read)
        columns = [lined_up([line[k] for line in cells]) for k in shown]
        part = "" if len(shown) == len(second.values) else ", some values of it only"
        say(f"{words}, {across} across{part}")
        downwards = lined_up([number(value, 6) for value in first.values])
        show_table(
            [
                Heading(first.key, f"[{unit_of(first.key)}]", number=True),
                *(Heading("", number(second.values[k], 6), number=True) for k in shown),
            ],
            [(downwards[i], *(column[i] for column in columns)) for i in range(len(first.values))],
            marked=_present(first.values, first.present),
        )


def _thinned(count: int, fits: int) -> list[int]:
    """Places that are shown, the first and the last among them.

    Examples
    --------
    >>> _thinned(5, 8), _thinned(9, 4)
    ([0, 1, 2, 3, 4], [0, 3, 5, 8])
    """
    if count <= fits:
        return list(range(count))
    return sorted({round(k * (count - 1) / (fits - 1)) for k in range(fits)})
