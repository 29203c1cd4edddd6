"""Open a column file: the edge of this room."""

import tomllib
from collections.abc import Mapping
from pathlib import Path
from typing import Any

import numpy as np

from ..errors import InputError
from .assemble import assemble
from .column import Column
from .csv_table import read_text
from .definition import Definition, parse
from .embedding import embed
from .problems import Problems


def load(path: str | Path) -> Column:
    """Read a column file.

    Parameters
    ----------
    path : str or Path
        A TOML file; files that it names are looked for beside it.

    Returns
    -------
    Column
        The column with its air states, ready for the operator.

    Raises
    ------
    InputError
        With one line for every mistake in the file and the files that it names.
    """
    source = str(path)
    try:
        text = read_text(Path(path))
    except (OSError, ValueError) as error:
        reason = (isinstance(error, OSError) and error.strerror) or str(error)
        raise InputError(
            f"{source}: cannot read the column file: {reason}; check the path"
        ) from None
    try:
        raw = tomllib.loads(text)
    except (ValueError, RecursionError) as error:
        reason = "nested too deeply" if isinstance(error, RecursionError) else str(error)
        raise InputError(
            f"{source}: not valid TOML: {reason}; write key = value lines under [table] headings"
        ) from None
    return build(raw, source=source, folder=Path(path).parent)


def build(
    definition: Mapping[str, Any], *, source: str = "<memory>", folder: Path | None = None
) -> Column:
    """Make a column of plain data with the keys of a column file.

    Parameters
    ----------
    definition : mapping
        The keys of a column file, or ``Column.definition``, possibly changed.
    source : str
        What to call it in messages.
    folder : Path, optional
        Folder that file names in it start from; the current one by default.

    Returns
    -------
    Column
        The column.

    Raises
    ------
    InputError
        With one line for every mistake.

    Examples
    --------
    >>> column = build({
    ...     "levels": {"kind": "uniform", "layers": 10, "top_m": 10000.0},
    ...     "air": {"kind": "isothermal", "temperature_k": 250.0},
    ...     "horizontal": {"grid_spacing_m": 1000.0},
    ... })
    >>> column.levels.nlev
    10
    >>> build(column.definition).digest == column.digest
    True
    """
    problems = Problems(source)
    model, broken = parse(_plain(definition), problems)
    model, broken = embed(model, folder or Path(), problems, broken)
    return assemble(model, broken, source, problems)


def schema() -> dict[str, Any]:
    """Make the JSON Schema of the column file, with units and descriptions, for editors."""
    made = Definition.model_json_schema()
    many = made["properties"]["air"]
    described = many.pop("description", "")
    made["properties"]["air"] = {"anyOf": [many["items"], many], "description": described}
    made["properties"]["split"]["anyOf"].append({"type": "string"})
    return {"$schema": "https://json-schema.org/draft/2020-12/schema", **made}


def _plain(value: Any) -> Any:
    """Mappings, sequences and numpy numbers as plain dict, list and numbers."""
    if isinstance(value, Mapping):
        return {str(key): _plain(item) for key, item in value.items()}
    if isinstance(value, np.ndarray | np.generic):
        return value.tolist()
    if isinstance(value, list | tuple):
        return [_plain(item) for item in value]
    return value
