"""One entry of a tableau file turned into a `Tableau`, or into all its problems at once."""

from collections.abc import Mapping
from difflib import SequenceMatcher
from typing import Any, Final, Literal

from levelstride.errors import InputError
from levelstride.tableaux.coefficients import evaluate
from levelstride.tableaux.tableau import TOLERANCES, CoefficientText, Tableau, TextTable

Kind = Literal["additive", "explicit"]

MOST_STAGES: Final = 32
HIGHEST_ORDER: Final = 5

_WORDS: Final = ("name", "source", "note", "provenance", "precision")
_COUNTS: Final = ("stages", "implicit_solves", "explicit_evaluations", "copies_compared")
_ORDERS: Final = ("order", "explicit_order", "implicit_order", "linear_order")
_FLAGS: Final = (
    "a_stable",
    "l_stable",
    "stiffly_accurate",
    "globally_stiffly_accurate",
    "singly_diagonal",
)
_VALUES: Final = ("imaginary_axis_limit", "value_at_infinity")
_TABLES: Final[Mapping[Kind, tuple[str, ...]]] = {
    "additive": ("a_explicit", "a_implicit"),
    "explicit": ("a",),
}
_ROWS: Final[Mapping[Kind, tuple[str, ...]]] = {
    "additive": ("b_explicit", "b_implicit", "c_explicit", "c_implicit"),
    "explicit": ("b", "c"),
}
_REQUIRED: Final[Mapping[Kind, tuple[str, ...]]] = {
    "additive": ("name", "order", "a_explicit", "b_explicit", "a_implicit", "b_implicit"),
    "explicit": ("name", "order", "a", "b"),
}


class DecimalText(str):
    """A number that stood unquoted in the file with a decimal point, kept as its digits."""

    __slots__ = ()


def build(entry: Mapping[str, Any], kind: Kind, where: str) -> Tableau:
    """Make a tableau of one entry of a file.

    Parameters
    ----------
    entry : mapping
        The table as TOML gives it, decimals as `DecimalText`.
    kind : "additive" or "explicit"
        ``[[tableau]]`` or ``[[explicit]]``.
    where : str
        File and entry, put in front of every problem.

    Raises
    ------
    InputError
        One line for every problem of the entry.
    """
    problems = _Problems(where)
    _check_keys(entry, kind, problems)
    _check_figures(entry, problems)
    tables = {key: _table(entry[key], key, problems) for key in _TABLES[kind] if key in entry}
    rows = {key: _row(entry[key], key, problems) for key in _ROWS[kind] if key in entry}
    if not problems.lines:
        _check_shapes(tables, rows, problems)
    if problems.lines:
        raise InputError(*problems.lines)
    if kind == "explicit":
        text = CoefficientText(tables["a"], rows["b"], tables["a"], rows["b"])
    else:
        text = CoefficientText(
            tables["a_explicit"], rows["b_explicit"], tables["a_implicit"], rows["b_implicit"]
        )
    order = entry["order"]
    return Tableau(
        name=entry["name"].strip(),
        coefficient_text=text,
        order=order,
        explicit_order=entry.get("explicit_order", order),
        implicit_order=entry.get("implicit_order", order),
        kind=kind,
        aliases=tuple(entry.get("aliases", ())),
        source=entry.get("source", ""),
        note=entry.get("note", ""),
        precision=entry.get("precision", "decimal"),
        declared=_declared(entry),
    )


def nearest(word: str, known: tuple[str, ...]) -> str:
    """The known word that is closest to the given one; of equals the one that begins most alike."""

    def likeness(candidate: str) -> tuple[float, int]:
        alike = [a == b for a, b in zip(word, candidate, strict=False)]
        return SequenceMatcher(None, word, candidate).ratio(), [*alike, False].index(False)

    return max(known, key=likeness)


class _Problems:
    """Problem lines of one entry, each beginning with where it is."""

    def __init__(self, where: str) -> None:
        self.where = where
        self.lines: list[str] = []

    def add(self, key: str, what: str) -> None:
        self.lines.append(f"{self.where}: {key}: {what}")


def _declared(entry: Mapping[str, Any]) -> dict[str, Any]:
    claims = (*_COUNTS, *_ORDERS, *_FLAGS, *_VALUES, "provenance", "c", "c_explicit", "c_implicit")
    return {key: entry[key] for key in claims if key in entry}


def _check_keys(entry: Mapping[str, Any], kind: Kind, problems: _Problems) -> None:
    known = (
        *_WORDS, "aliases", *_COUNTS, *_ORDERS, *_FLAGS, *_VALUES, *_TABLES[kind], *_ROWS[kind],
    )  # fmt: skip
    for key in entry:
        if key not in known:
            problems.add(key, f"unknown key; the nearest known one is {nearest(key, known)!r}")
    for key in _REQUIRED[kind]:
        if key not in entry:
            problems.add(key, "is missing; add it")


def _check_figures(entry: Mapping[str, Any], problems: _Problems) -> None:
    for key in _WORDS:
        if key in entry and (type(entry[key]) is not str or not entry[key].strip()):
            problems.add(key, f"received {entry[key]!r}, a text that is not empty is allowed")
    if not isinstance(entry.get("aliases", []), list) or not all(
        type(alias) is str and alias.strip() for alias in entry.get("aliases", [])
    ):
        problems.add("aliases", f"received {entry['aliases']!r}, a list of texts is allowed")
    if entry.get("precision", "decimal") not in (*TOLERANCES,):
        allowed = ", ".join(f'"{key}"' for key in TOLERANCES)
        problems.add("precision", f"received {entry['precision']!r}, allowed are {allowed}")
    for key in (*_COUNTS, *_ORDERS):
        low, high = (1, HIGHEST_ORDER) if key in _ORDERS else (0, MOST_STAGES)
        value = entry.get(key, low)
        if type(value) is not int or not low <= value <= high:
            problems.add(key, f"received {value!r}, an integer from {low} to {high} is allowed")
    for key in _FLAGS:
        if key in entry and type(entry[key]) is not bool:
            problems.add(key, f"received {entry[key]!r}, true or false is allowed")
    for key in _VALUES:
        if key in entry and str(entry[key]) != "inf":
            _coefficient(entry[key], key, problems)


def _coefficient(value: object, key: str, problems: _Problems) -> str:
    if isinstance(value, bool) or not isinstance(value, str | int):
        problems.add(key, f'received {value!r}, a coefficient in quotes is allowed, like "1/2"')
        return "0"
    try:
        evaluate(str(value))
    except InputError as error:
        problems.add(key, error.problems[0])
    return str(value)


def _row(value: object, key: str, problems: _Problems) -> tuple[str, ...]:
    if not isinstance(value, list) or not 1 <= len(value) <= MOST_STAGES:
        problems.add(key, f"a list of 1 to {MOST_STAGES} coefficients is allowed")
        return ()
    return tuple(
        _coefficient(item, f"{key} entry {k}", problems) for k, item in enumerate(value, start=1)
    )


def _table(value: object, key: str, problems: _Problems) -> TextTable:
    if not isinstance(value, list) or not 1 <= len(value) <= MOST_STAGES:
        problems.add(key, f"a list of 1 to {MOST_STAGES} rows is allowed, one for every stage")
        return ()
    return tuple(_row(row, f"{key} row {i}", problems) for i, row in enumerate(value, start=1))


def _check_shapes(
    tables: Mapping[str, TextTable], rows: Mapping[str, tuple[str, ...]], problems: _Problems
) -> None:
    key_of_size = next(key for key in rows if key.startswith("b"))
    nstage = len(rows[key_of_size])
    for key, row in rows.items():
        if len(row) != nstage:
            problems.add(key, f"has {len(row)} entries, {key_of_size} has {nstage}; give {nstage}")
    for key, table in tables.items():
        if len(table) != nstage:
            problems.add(key, f"has {len(table)} rows, {key_of_size} has {nstage} entries")
        for i, row in enumerate(table, start=1):
            if len(row) != nstage:
                problems.add(
                    f"{key} row {i}", f"has {len(row)} entries; the table is square, give {nstage}"
                )
