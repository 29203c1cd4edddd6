"""Write a column in the format of the column file, and its levels as CSV."""

import json
from collections.abc import Mapping, Sequence
from itertools import pairwise
from typing import Any

from .column import Column

WIDTH = 100
"""Characters in a line of a list."""


def to_toml(column: Column, remark: str = "") -> str:
    """Write a column file that loads as the same column.

    Parameters
    ----------
    column : Column
        The column; files that its own file referred to are listed with their contents.
    remark : str
        Lines to put at the head, without their marks.

    Returns
    -------
    str
        TOML.

    Examples
    --------
    >>> from levelstride.column.read import build
    >>> column = build({
    ...     "title": "two layers",
    ...     "levels": {"kind": "uniform", "layers": 2, "top_m": 4000.0},
    ...     "air": {"kind": "standard"},
    ...     "horizontal": {"grid_spacing_m": 1000.0},
    ... })
    >>> print(to_toml(column, "Two layers."), end="")  # doctest: +ELLIPSIS
    # Two layers.
    <BLANKLINE>
    title = "two layers"
    <BLANKLINE>
    [levels]
    kind = "uniform"
    layers = 2
    top_m = 4000.0
    ...
    """
    plain = column.definition
    lines = [f"# {line}".rstrip() for line in remark.splitlines()]
    lines += [""] if lines else []
    lines += [f"{_key(key)} = {_value(value)}" for key, value in plain.items() if _is_value(value)]
    for key, value in plain.items():
        if isinstance(value, Mapping):
            lines += ["", f"[{_key(key)}]", *_pairs(value)]
        elif not _is_value(value):
            for table in value:
                lines += ["", f"[[{_key(key)}]]", *_pairs(table)]
    return "\n".join(lines) + "\n"


def levels_csv(interfaces_m: Sequence[float], before_m: Sequence[float] | None = None) -> str:
    """Write interfaces as CSV, which a column file reads with ``kind = "file"``.

    Parameters
    ----------
    interfaces_m : sequence of float, length nlev+1
        Heights above the ground [m].
    before_m : sequence of float, length nlev+1, optional
        Those of another set, to stand beside them [m].

    Returns
    -------
    str
        One line per interface from the ground up: its number, its height, the thickness of the
        layer above it (nothing at the lid), and its height before.

    Examples
    --------
    >>> print(levels_csv([0.0, 20.0, 50.0]), end="")
    interface,height_m,layer_above_m
    0,0.0,20.0
    1,20.0,30.0
    2,50.0,
    """
    heights = [float(z) for z in interfaces_m]
    above = [repr(top - base) for base, top in pairwise(heights)] + [""]
    columns: list[tuple[str, list[str]]] = [
        ("interface", [str(i) for i in range(len(heights))]),
        ("height_m", [repr(z) for z in heights]),
        ("layer_above_m", above),
    ]
    if before_m is not None:
        columns.append(("height_before_m", [repr(float(z)) for z in before_m]))
    rows = zip(*(cells for _, cells in columns), strict=True)
    return "".join(f"{','.join(row)}\n" for row in ([name for name, _ in columns], *rows))


def _is_value(value: Any) -> bool:
    """Whether something fits behind an equals sign, and needs no table of its own."""
    if isinstance(value, Mapping):
        return False
    listed = isinstance(value, Sequence) and not isinstance(value, str)
    return not (listed and value and all(isinstance(one, Mapping) for one in value))


def _pairs(table: Mapping[str, Any]) -> list[str]:
    return [f"{_key(key)} = {_value(value)}" for key, value in table.items()]


def _key(key: str) -> str:
    bare = key and all(c.isascii() and (c.isalnum() or c in "-_") for c in key)
    return key if bare else _text(key)


def _text(text: str) -> str:
    return json.dumps(text, ensure_ascii=False).replace("\x7f", "\\u007f")


def _value(value: Any) -> str:
    if isinstance(value, str):
        return _text(value)
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, Sequence):
        return _list([_value(one) for one in value])
    return repr(value)


def _list(entries: list[str]) -> str:
    if len(", ".join(entries)) < WIDTH - 20:
        return f"[{', '.join(entries)}]"
    lines = ["  "]
    for entry in entries:
        if len(lines[-1]) + len(entry) + 2 > WIDTH and lines[-1].strip():
            lines[-1] = lines[-1].rstrip()
            lines.append("  ")
        lines[-1] += f"{entry}, "
    return "\n".join(["[", *(line.rstrip() for line in lines), "]"])
