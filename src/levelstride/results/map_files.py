"""The files of a map: tables, and data from which figures are drawn."""

import csv
import io
import re
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import Any, Final

from .atomic import write_folder
from .export import cell, to_json
from .knob_map import Knob, KnobMap, MapPoint, MapRow
from .store import hdf5_image, origin
from .variables import Variable
from .wording import number, percent, step

_POINT: Final = (
    ("stable_step_s", "s", "stable step", "float"),
    ("unbounded", "1", "whether nothing bites", "flag"),
    ("binds", "", "what binds the stable step", "text"),
    ("step_s", "s", "step at which errors are found", "float"),
    ("stable", "1", "whether that step is within the stable one", "flag"),
    ("frequency_error", "1", "largest frequency error of a resolved gravity wave", "float"),
    (
        "amplitude_change_per_period", "1",
        "largest change of amplitude of such a wave per period", "float",
    ),
    (
        "amplitude_change_per_hour", "1",
        "largest change of amplitude of such a wave per hour", "float",
    ),
    ("ambiguous", "1", "such waves that are not judged", "int"),
    ("problem", "", "why something is missing", "text"),
)  # fmt: skip

QUANTITIES: Final = (
    ("stable_step_s", "stable step", "s"),
    ("frequency_error", "frequency error of resolved gravity waves", "1"),
    ("amplitude_change_per_period", "amplitude change of resolved gravity waves per period", "1"),
    ("amplitude_change_per_hour", "amplitude change of resolved gravity waves per hour", "1"),
)
"""What is mapped: field, words, unit."""

_UNITS: Final = (
    ("_m2_per_s", "m2 s-1"), ("_m_per_s", "m s-1"), ("_per_m", "m-1"), ("_per_s", "s-1"),
    ("_pa", "Pa"), ("_deg", "degree"), ("_k", "K"), ("_m", "m"), ("_s", "s"),
)  # fmt: skip


def unit_of(key: str) -> str:
    """Read the unit of a key off the end of its name; 1 for plain numbers.

    Examples
    --------
    >>> unit_of("levels.top_m"), unit_of("wind.speed_m_per_s"), unit_of("terrain.slope")
    ('m', 'm s-1', '1')
    """
    return next((unit for end, unit in _UNITS if key.endswith(end)), "1")


@dataclass(frozen=True, slots=True, kw_only=True)
class Axis:
    """An axis of a figure: what it says, its unit, whether it is logarithmic, and its values."""

    label: str
    unit: str
    logarithmic: bool
    values: tuple[float, ...] = ()


@dataclass(frozen=True, slots=True, kw_only=True)
class Series:
    """One line of a figure."""

    label: str
    values: tuple[float | None, ...]


@dataclass(frozen=True, slots=True, kw_only=True)
class Figure:
    """A figure as data: lines over one knob, or a surface over two.

    Parameters
    ----------
    kind : str
        ``lines`` or ``surface``.
    title : str
        Heading.
    x : Axis
        The first knob.
    y : Axis
        What is mapped, or the second knob of a surface.
    z : Axis or None
        What is mapped, of a surface.
    series : tuple of Series
        The lines, one per tableau and splitting.
    surface : tuple of tuple of float or None
        By value of y, then of x.
    """

    kind: str
    title: str
    x: Axis
    y: Axis
    z: Axis | None = None
    series: tuple[Series, ...] = ()
    surface: tuple[tuple[float | None, ...], ...] = ()


def write_map(found: KnobMap, folder: Path) -> tuple[Path, ...]:
    """Write ``map.json``, ``map.csv``, ``map.txt``, ``map.h5`` and ``map_figures.json``.

    Parameters
    ----------
    found : KnobMap
        The answer.
    folder : Path
        The folder; made if it is missing and its parent exists.

    Returns
    -------
    tuple of Path
        The files written.

    Raises
    ------
    InputError
        If they cannot be written; then none is.
    """
    return write_folder(
        folder,
        {
            "map.json": to_json(found).encode(),
            "map.csv": map_csv(found).encode(),
            "map.txt": map_text(found).encode(),
            "map.h5": map_hdf5(found),
            "map_figures.json": to_json({"figures": figures(found)}).encode(),
        },
    )


def errors_at(found: KnobMap) -> str:
    """Say at which steps errors are found."""
    if found.step_s is not None:
        return f"a step of {number(found.step_s, 6)} s"
    return f"{percent(found.share_of_stable, 3)} of the stable step of each point"


def map_csv(found: KnobMap) -> str:
    """Write the map as CSV, one line per point, tableau and splitting."""
    text = io.StringIO()
    keys = [knob.key for knob in found.knobs]
    names = [name for name, *_ in _POINT]
    writer = csv.DictWriter(text, ["tableau", "split", *keys, *names], lineterminator="\n")
    writer.writeheader()
    for row in found.rows:
        for point in row.points:
            cells: dict[str, Any] = {"tableau": row.tableau, "split": row.split}
            cells |= dict(zip(keys, point.values, strict=True))
            cells |= {name: getattr(point, name) for name in names}
            writer.writerow({name: cell(value) for name, value in cells.items()})
    return text.getvalue()


def map_text(found: KnobMap) -> str:
    """Write the extent of the map and the range of its steps as plain lines."""
    provenance = found.provenance
    lines = [
        ("map", f"levelstride {provenance.version}, {provenance.created_utc}"),
        ("column", " ".join(found.title.split())),
        *(("varied", _extent(knob)) for knob in found.knobs),
        ("errors at", errors_at(found)),
        *(("row", _row_line(row, found)) for row in found.rows),
        *(("note", note) for note in found.notes),
        ("hash", f"sha256 {provenance.column_sha256}"),
        ("caution", found.caution),
    ]
    return "".join(f"{name + ':':<11}{text}\n" for name, text in lines)


def _extent(knob: Knob) -> str:
    spaced = "equal ratios" if knob.logarithmic else "equal steps"
    now = "left out" if knob.present is None else number(knob.present, 6)
    return (
        f"{knob.key} from {number(knob.values[0], 6)} to {number(knob.values[-1], 6)}, "
        f"{len(knob.values)} values in {spaced} (now {now})"
    )


def _row_line(row: MapRow, found: KnobMap) -> str:
    bitten = [point for point in row.points if point.stable_step_s is not None]
    told = f"{row.tableau} with {row.split}: "
    if not bitten:
        return told + "no point has a limit"
    least = min(bitten, key=lambda point: point.stable_step_s or 0.0)
    most = max(bitten, key=lambda point: point.stable_step_s or 0.0)
    told += (
        f"stable step {step(least.stable_step_s)} s at {_place(found, least)} "
        f"to {step(most.stable_step_s)} s at {_place(found, most)}"
    )
    free = sum(point.unbounded for point in row.points)
    return f"{told}; no limit at {free} points" if free else told


def _place(found: KnobMap, point: MapPoint) -> str:
    return ", ".join(
        f"{knob.key} {number(value)}" for knob, value in zip(found.knobs, point.values, strict=True)
    )


def map_hdf5(found: KnobMap) -> bytes:
    """Write a map as an HDF5 file image: by row and knobs, every knob a coordinate."""
    names = [re.sub(r"\W+", "_", knob.key).strip("_") for knob in found.knobs]
    dimensions = ("row", *names)
    variables = [
        Variable("row", ("row",), "1", "tableau and splitting", range(len(found.rows)), "int"),
        *(
            Variable(name, (name,), unit_of(knob.key), knob.key, knob.values, "float")
            for name, knob in zip(names, found.knobs, strict=True)
        ),
        *(
            Variable(name, ("row",), "", text, [getattr(row, name) for row in found.rows], "text")
            for name, text in (("tableau", "IMEX tableau"), ("split", "terms treated implicitly"))
        ),
        *(
            Variable(name, dimensions, units, text, _grid(found, _reader(name, kind)), kind)
            for name, units, text, kind in _POINT
        ),
    ]
    attributes = {
        **origin(found.title, found.column, found.provenance),
        "errors_at": errors_at(found),
        "lowest_slope_gradient": found.lowest_slope_gradient,
        "notes": "; ".join(found.notes),
        "caution": found.caution,
    }
    return hdf5_image(attributes, variables)


def _reader(name: str, kind: str) -> Callable[[MapPoint], Any]:
    """How a variable reads a point; text that does not exist is empty."""
    if kind == "text":
        return lambda point: getattr(point, name) or ""
    return lambda point: getattr(point, name)


def _grid(found: KnobMap, read: Callable[[MapPoint], Any]) -> list[Any]:
    """Values by row and knobs."""
    return [surface(found, row, read) if len(found.knobs) == 2 else _line(row, read)
            for row in found.rows]  # fmt: skip


def _line(row: MapRow, read: Callable[[MapPoint], Any]) -> list[Any]:
    return [read(point) for point in row.points]


def surface(found: KnobMap, row: MapRow, read: Callable[[MapPoint], Any]) -> list[list[Any]]:
    """Values of a row over two knobs, by value of the first, then of the second."""
    width = len(found.knobs[1].values)
    line = _line(row, read)
    return [line[k : k + width] for k in range(0, len(line), width)]


def figures(found: KnobMap) -> tuple[Figure, ...]:
    """Make the data of figures: one per quantity, and with two knobs per row as well."""
    axes = [
        Axis(label=k.key, unit=unit_of(k.key), logarithmic=k.logarithmic, values=k.values)
        for k in found.knobs
    ]
    made = []
    for name, words, unit in QUANTITIES:
        read = _reader(name, "float")
        mapped = Axis(label=words, unit=unit, logarithmic=False)
        at = "" if name == "stable_step_s" else f" at {errors_at(found)}"
        title = f"{found.title}: {words}{at}"
        if len(axes) == 1:
            lines = tuple(
                Series(label=f"{row.tableau} with {row.split}", values=tuple(_line(row, read)))
                for row in found.rows
            )
            made.append(Figure(kind="lines", title=title, x=axes[0], y=mapped, series=lines))
            continue
        for row in found.rows:
            columns = surface(found, row, read)
            made.append(
                Figure(
                    kind="surface",
                    title=f"{title}, {row.tableau} with {row.split}",
                    x=axes[0],
                    y=axes[1],
                    z=mapped,
                    surface=tuple(zip(*columns, strict=True)),
                )
            )
    return tuple(made)
