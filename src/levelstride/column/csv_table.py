"""Read a CSV file of numbers with named columns, and say which line is wrong."""

import csv
from dataclasses import dataclass
from pathlib import Path
from typing import Final

from .arrays import Array, read_only
from .problems import Problems

LARGEST_FILE: Final = 64_000_000
"""Files larger than this [bytes] are taken for something else."""


@dataclass(frozen=True, slots=True, eq=False)
class CsvTable:
    """Columns of numbers.

    Parameters
    ----------
    file : str
        The file as the user named it.
    columns : dict
        Column name (lower case) -> values, shape (nrow,); missing entries are NaN.
    lines : tuple of int
        Line of the file for each row.
    entries : dict
        Column name -> the entries as written, for messages.
    """

    file: str
    columns: dict[str, Array]
    lines: tuple[int, ...]
    entries: dict[str, tuple[str, ...]]


def read_text(path: Path) -> str:
    """Read a text file, with or without a byte order mark.

    Raises
    ------
    OSError
        If it cannot be read.
    ValueError
        If it is no plain file, too large, or not UTF-8; the message says which.
    """
    if path.exists() and not path.is_file():
        raise ValueError("this is not a file; name a plain text file")
    if path.exists() and path.stat().st_size > LARGEST_FILE:
        raise ValueError(f"larger than {LARGEST_FILE // 1_000_000} MB; is it the right file?")
    try:
        return path.read_text(encoding="utf-8-sig")
    except UnicodeDecodeError as error:
        raise ValueError(
            f"not UTF-8 text (byte {error.start}); save it as UTF-8 plain text"
        ) from None


def _number(entry: str) -> float:
    try:
        return float(entry)
    except ValueError:
        return float("nan")


def _rows(text: str) -> list[tuple[int, list[str]]]:
    lines = text.splitlines()
    kept = [
        (i + 1, line) for i, line in enumerate(lines) if line.strip() and line.strip()[0] != "#"
    ]
    head = kept[0][1] if kept else ""
    delimiter = next((mark for mark in (";", "\t", ",") if mark in head), ",")
    found = []
    for number, line in kept:
        entries = next(csv.reader([line], delimiter=delimiter), [])
        found.append((number, [entry.strip() for entry in entries]))
    return found


def read_csv(
    path: Path, problems: Problems, where: str, *, bare: str | None = None
) -> CsvTable | None:
    """Read a CSV file; separators are comma, semicolon or tab, lines starting with # are remarks.

    Parameters
    ----------
    path : Path
        The file.
    problems : Problems
        Where mistakes are added.
    where : str
        Key path that names the file, for messages.
    bare : str, optional
        Name to give the only column of a file without a header.

    Returns
    -------
    CsvTable or None
        None where the file could not be read as a table.
    """
    try:
        rows = _rows(read_text(path))
    except (OSError, ValueError, csv.Error) as error:
        reason = (isinstance(error, OSError) and error.strerror) or str(error)
        problems.add(where, f"cannot read {path}: {reason}; check the path", path.name)
        return None
    if not rows:
        problems.add("", "this file is empty; it needs rows of numbers", file=str(path))
        return None
    header = [entry.lower() for entry in rows[0][1]]
    if bare is not None and len(header) == 1 and _number(header[0]) == _number(header[0]):
        header = [bare]
    else:
        rows = rows[1:]
    ragged = [(number, entries) for number, entries in rows if len(entries) != len(header)]
    sound = not ragged
    if ragged:
        problems.add_many(
            [f"line {number}" for number, _ in ragged],
            f"has {len(ragged[0][1])} entries where the header has {len(header)} columns; fill or "
            "remove the row",
            file=str(path),
        )
    if len(set(header)) != len(header):
        sound = False
        problems.add("line 1", "two columns have one name; rename one", file=str(path))
    if not sound:
        return None
    entries_of = {name: tuple(row[i] for _, row in rows) for i, name in enumerate(header)}
    columns = {name: read_only([_number(e) for e in row]) for name, row in entries_of.items()}
    return CsvTable(str(path), columns, tuple(number for number, _ in rows), entries_of)
