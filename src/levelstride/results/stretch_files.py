"""The files of a stretch."""

import csv
import io
from collections.abc import Mapping
from pathlib import Path
from typing import Any, Final

from .atomic import write_folder
from .export import cell, to_json
from .stretch_wording import thickness
from .stretching import Stretch, StretchPoint, StretchRow
from .wording import number, step

_COLUMNS: Final = (
    "lowest_layer_m", "ratio", "stable_step_s", "unbounded", "carries", "own", "layers", "lid_m",
    "whole_search",
)  # fmt: skip
_BINDS: Final = (
    "criterion", "air", "kind", "wavenumber_per_m", "wavelength_m", "layer_lowest",
    "layer_highest", "bottom_m", "top_m",
)  # fmt: skip

KEPT: Final[Mapping[str, str]] = {
    "layers-and-lid": "the number of layers and the lid",
    "ratio": "the stretching ratio at every height and the lid",
    "lowest-layers": "the lowest {lowest} layers and the number of layers",
    "upper-levels": "the levels above the lowest {lowest} layers",
}
"""What the families keep, in words."""


def kept(found: Stretch) -> str:
    """Say what the family keeps."""
    return KEPT[found.keep].format(lowest=found.lowest)


def stretch_csv(found: Stretch) -> str:
    """Write all curves as CSV, one line per level set, tableau and splitting."""
    text = io.StringIO()
    headings = ["tableau", "split", "target_step_s", *_COLUMNS, *(f"binds_{n}" for n in _BINDS)]
    writer = csv.DictWriter(text, headings, restval="", lineterminator="\n")
    writer.writeheader()
    for row in found.rows:
        writer.writerows(_cells(row, point) for point in row.curve)
    return text.getvalue()


def _cells(row: StretchRow, point: StretchPoint) -> dict[str, str]:
    cells: dict[str, Any] = {
        "tableau": row.tableau,
        "split": row.split,
        "target_step_s": row.target_step_s,
        "carries": carried(row, point),
    }
    cells |= {name: getattr(point, name) for name in _COLUMNS if name not in cells}
    if point.binds is not None:
        cells |= {f"binds_{name}": getattr(point.binds, name) for name in _BINDS}
    return {name: cell(value) for name, value in cells.items()}


def carried(row: StretchRow, point: StretchPoint) -> bool | None:
    """Whether a point of a row carries its target; None without a target."""
    if row.target_step_s is None:
        return None
    return point.unbounded or (point.stable_step_s or 0.0) >= row.target_step_s


def stretch_text(found: Stretch) -> str:
    """Write the answer as plain lines to paste beside a configuration."""
    provenance = found.provenance
    lowest = [point.lowest_layer_m for point in found.curve]
    lids = [point.lid_m for point in found.curve]
    lines = [
        ("stretch", f"levelstride {provenance.version}, {provenance.created_utc}"),
        ("column", " ".join(found.title.split())),
        ("kept", kept(found)),
        (
            "range",
            f"lowest layer {thickness(lowest[0])} to {thickness(lowest[-1])}, lid "
            f"{thickness(lids[0])} to {thickness(lids[-1])}, {len(lowest)} sets",
        ),
    ]
    for row in found.rows:
        lines += _row_lines(row)
    lines += [("note", note) for note in found.notes]
    lines += [
        ("hash", f"sha256 {provenance.column_sha256}"),
        ("caution", found.caution),
    ]
    return "".join(f"{name + ':':<11}{text}\n" for name, text in lines)


def _row_lines(row: StretchRow) -> list[tuple[str, str]]:
    lines = [
        ("scheme", f"{row.tableau} with {row.split}"),
        ("target", f"{step(row.target_step_s)} s ({row.target_reason})"),
        (
            "thinnest",
            f"lowest layer {thickness(row.thinnest_lowest_layer_m)}, largest ratio "
            f"{number(row.largest_ratio)}",
        ),
        ("verdict", row.verdict),
    ]
    lines += [("crossing", crossing.sentence) for crossing in row.crossings]
    if row.mended is not None:
        lines.append(("mended", row.mended.verdict))
    return lines


def write_stretch(
    found: Stretch, folder: Path, more: Mapping[str, str] | None = None
) -> tuple[Path, ...]:
    """Write ``stretch.json``, ``stretch.csv``, ``stretch.txt`` and further files into a folder.

    Parameters
    ----------
    found : Stretch
        The answer.
    folder : Path
        The folder; made if it is missing and its parent exists.
    more : mapping of str to str, optional
        Further files by name, such as mended level sets.

    Returns
    -------
    tuple of Path
        The files written.

    Raises
    ------
    InputError
        If they cannot be written; then none is.
    """
    files = {
        "stretch.json": to_json(found),
        "stretch.csv": stretch_csv(found),
        "stretch.txt": stretch_text(found),
        **(more or {}),
    }
    return write_folder(folder, {name: text.encode() for name, text in files.items()})
