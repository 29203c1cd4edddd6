"""A file of observations: steps that a real model survived or lost, on which columns."""

import tomllib
from collections.abc import Mapping
from dataclasses import dataclass
from math import isfinite
from pathlib import Path
from typing import Any, Final

from ..errors import InputError
from .csv_table import read_text
from .problems import Problems, nearest

KEYS: Final = ("column", "held_s", "failed_s", "note")
EXAMPLE: Final = "[[observation]] with held_s and failed_s, e.g. held_s = [4.0, 4.5]"


@dataclass(frozen=True, slots=True)
class Observation:
    """One entry of the file.

    Parameters
    ----------
    column : str or None
        Its column file; None means that of the command.
    held_s, failed_s : tuple of float
        Steps that the model survived and lost [s].
    """

    column: str | None
    held_s: tuple[float, ...]
    failed_s: tuple[float, ...]


def read_observations(path: Path) -> tuple[Observation, ...]:
    """Read a file of observations.

    Parameters
    ----------
    path : Path
        A TOML file of ``[[observation]]`` tables; column files are looked for beside it.

    Returns
    -------
    tuple of Observation
        In the order of the file.

    Raises
    ------
    InputError
        With one line for every mistake.
    """
    problems = Problems(str(path))
    try:
        raw = tomllib.loads(read_text(path))
    except OSError as error:
        raise InputError(
            f"{path}: cannot read the observations: {error.strerror}; check the path"
        ) from None
    except (ValueError, RecursionError) as error:
        raise InputError(f"{path}: not valid TOML: {error}; write {EXAMPLE}") from None
    for key in raw:
        if key != "observation":
            problems.add(key, f"unknown key; {nearest(key, ['observation'])}")
    entries = raw.get("observation", [])
    if not isinstance(entries, list) or not all(isinstance(one, dict) for one in entries):
        problems.add("observation", f"must be a list of tables: write {EXAMPLE}")
        entries = []
    elif not entries:
        problems.add("observation", f"there is none; write {EXAMPLE}")
    found = [_entry(one, f"observation[{i}]", path, problems) for i, one in enumerate(entries)]
    problems.raise_if_any()
    return tuple(found)


def _entry(table: Mapping[str, Any], where: str, path: Path, problems: Problems) -> Observation:
    for key in table:
        if key not in KEYS:
            problems.add(f"{where}.{key}", f"unknown key; {nearest(key, KEYS)}")
    column = table.get("column")
    if column is not None and (not isinstance(column, str) or not column):
        problems.add(f"{where}.column", "must be the name of a column file, in quotes", column)
        column = None
    held, failed = (_steps(table.get(key), f"{where}.{key}", problems) for key in KEYS[1:3])
    if "held_s" not in table and "failed_s" not in table:
        problems.add(where, "has neither held_s nor failed_s; give at least one step")
    return Observation(None if column is None else str(path.parent / column), held, failed)


def _steps(value: Any, where: str, problems: Problems) -> tuple[float, ...]:
    given = [] if value is None else value if isinstance(value, list) else [value]
    steps = []
    for i, step in enumerate(given):
        place = f"{where}[{i}]" if isinstance(value, list) else where
        number = isinstance(step, int | float) and not isinstance(step, bool)
        if not number or not isfinite(step) or not 0.0 < step < 1e6:
            problems.add(place, "must be a step in s, above 0 and below 1e6", step)
        else:
            steps.append(float(step))
    return tuple(steps)
