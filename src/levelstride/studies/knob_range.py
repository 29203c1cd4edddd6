"""Which values a number of the column file takes in a map."""

import re
from collections.abc import Mapping, Sequence
from typing import Final

import numpy as np

from levelstride.column.column import Column
from levelstride.column.knobs import with_value
from levelstride.errors import InputError
from levelstride.results.knob_map import Knob

MOST_VALUES: Final = 200
"""Values of one key."""

MOST_KEYS: Final = 2

_FORM: Final = re.compile(r"([^=]+)=([^:=]+):([^:=]+):([^:=]+)(:log)?")
_LOOKS: Final = "KEY=FROM:TO:COUNT or KEY=FROM:TO:COUNT:log, as terrain.slope=0:0.3:7"


def read_ranges(texts: Sequence[str]) -> dict[str, str | Sequence[float]]:
    """Sort ranges as they stand on a command line by their keys.

    Parameters
    ----------
    texts : sequence of str
        ``KEY=FROM:TO:COUNT``, with ``:log`` behind it for equal ratios.

    Returns
    -------
    dict of str to str
        What stands behind the equals sign, by key.

    Raises
    ------
    InputError
        If one has no equals sign, or a key comes twice.

    Examples
    --------
    >>> read_ranges(["terrain.slope=0:0.3:7"])
    {'terrain.slope': '0:0.3:7'}
    """
    found: dict[str, str | Sequence[float]] = {}
    problems = []
    for text in texts:
        key, equals, rest = text.partition("=")
        if not equals or not key.strip():
            problems.append(f"--vary {text}: write {_LOOKS}")
        elif key.strip() in found:
            problems.append(f"--vary {text}: {key.strip()} is varied already; give each key once")
        else:
            found[key.strip()] = rest
    if problems:
        raise InputError(*problems)
    return found


def knobs(column: Column, vary: Mapping[str, str | Sequence[float]]) -> tuple[Knob, ...]:
    """Find the values of every key.

    Parameters
    ----------
    column : Column
        The column, whose file has the keys.
    vary : mapping of str to str or sequence of float
        By key a range, ``FROM:TO:COUNT`` or ``FROM:TO:COUNT:log``, or the values themselves.

    Returns
    -------
    tuple of Knob
        In the order given.

    Raises
    ------
    InputError
        If there are none or more than two, a range makes no sense, or a key is none.
    """
    if not 1 <= len(vary) <= MOST_KEYS:
        raise InputError(f"--vary: {len(vary)} keys are given; a map has one or two")
    problems: list[str] = []
    found = []
    for key, given in vary.items():
        try:
            values, logarithmic = _values(key, given)
            found.append(_knob(column, key, values, logarithmic=logarithmic))
        except InputError as error:
            problems += error.problems
    if problems:
        raise InputError(*problems)
    return tuple(found)


def _values(key: str, given: str | Sequence[float]) -> tuple[tuple[float, ...], bool]:
    if not isinstance(given, str):
        values = tuple(float(value) for value in given)
        if not 2 <= len(set(values)) == len(values) <= MOST_VALUES or not np.all(
            np.isfinite(values)
        ):
            raise InputError(
                f"{key}: received {len(values)} values; give 2 to {MOST_VALUES} different numbers"
            )
        return values, False
    text = f"--vary {key}={given}"
    match = _FORM.fullmatch(f"{key}={given}")
    if match is None:
        raise InputError(f"{text}: write {_LOOKS}")
    try:
        first, last, count = float(match[2]), float(match[3]), int(match[4])
    except ValueError:
        raise InputError(f"{text}: FROM and TO must be numbers and COUNT whole") from None
    if not (np.isfinite(first) and np.isfinite(last)) or first == last:
        raise InputError(f"{text}: FROM and TO must be finite and differ")
    if not 2 <= count <= MOST_VALUES:
        raise InputError(f"{text}: COUNT is {count}; it must be 2 to {MOST_VALUES}")
    if match[5] is None:
        return _rounded(np.linspace(first, last, count)), False
    if first <= 0.0 or last <= 0.0:
        raise InputError(f"{text}: equal ratios need FROM and TO above 0; leave :log out")
    return _rounded(np.geomspace(first, last, count)), True


def _rounded(values: np.ndarray) -> tuple[float, ...]:
    """Twelve digits, so that 0.1 stays 0.1."""
    return tuple(float(f"{value:.12g}") for value in values)


def _knob(column: Column, key: str, values: tuple[float, ...], *, logarithmic: bool) -> Knob:
    """A knob; both ends are tried, whatever is wrong with the key shows there."""
    present = present_value(column, key)
    if isinstance(present, int):
        wrong = [value for value in values if not value.is_integer()]
        if wrong:
            raise InputError(
                f"--vary {key}: takes whole numbers only, and {wrong[0]:g} is none; choose FROM, "
                "TO and COUNT so that all are whole"
            )
    for value in (values[0], values[-1]):
        with_value(column, key, value)
    return Knob(
        key=key,
        values=values,
        logarithmic=logarithmic,
        present=None if present is None else float(present),
    )


def present_value(column: Column, key: str) -> float | None:
    """Number that a key of the column file has now; None where it is left out."""
    place: object = column.definition
    for name in key.split("."):
        if isinstance(place, list):
            place = place[0] if place else None
        table, _, index = name.partition("[")
        place = place.get(table) if isinstance(place, Mapping) else None
        if index and isinstance(place, list):
            number = index.rstrip("]")
            place = place[int(number)] if number.isdigit() and int(number) < len(place) else None
    is_number = isinstance(place, int | float) and not isinstance(place, bool)
    return place if is_number else None  # type: ignore[return-value]
