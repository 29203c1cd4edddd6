"""A user's own tableaux, read from a TOML file and audited before anyone can step with them."""

import tomllib
from collections.abc import Mapping
from pathlib import Path
from typing import Any, Final

from levelstride.errors import InputError
from levelstride.tableaux.audit import audit
from levelstride.tableaux.entry import DecimalText, Kind, build, nearest
from levelstride.tableaux.lookup import bare, find, names
from levelstride.tableaux.tableau import Tableau

_TABLES: Final[Mapping[str, Kind]] = {"tableau": "additive", "explicit": "explicit"}
_LONGEST: Final = 1_000_000


def read_file(path: str | Path) -> tuple[Tableau, ...]:
    """Read the tableaux of a file of the same form as the built-in library.

    Parameters
    ----------
    path : str or Path
        TOML file with ``[[tableau]]`` entries (``name``, ``order``, ``a_explicit``, ``b_explicit``,
        ``a_implicit``, ``b_implicit``) and ``[[explicit]]`` ones (``name``, ``order``, ``a``,
        ``b``).

    Returns
    -------
    tuple of Tableau
        Every one has passed its audit.

    Raises
    ------
    InputError
        One line for every problem of the file: what is wrong, where, what is allowed. A tableau
        that fails its audit is a problem, with the condition and by how much it is missed.
    """
    content = _content(Path(path))
    problems: list[str] = []
    known = ("format", *_TABLES)
    for key in content:
        if key not in known:
            hint = f"the nearest known one is {nearest(key, known)!r}"
            problems.append(f"{path}: {key}: unknown key; {hint}")
    if content.get("format", 1) != 1:
        problems.append(f"{path}: format: received {content['format']!r}, allowed is 1")
    tableaux: list[Tableau] = []
    for table, kind in _TABLES.items():
        entries = content.get(table, [])
        if not isinstance(entries, list) or not all(isinstance(e, dict) for e in entries):
            problems.append(f"{path}: {table}: write every tableau under its own [[{table}]]")
            continue
        for number, entry in enumerate(entries, start=1):
            where = f"{path}: {table} {number}"
            try:
                tableaux.append(_audited(entry, kind, where, tableaux))
            except InputError as error:
                problems.extend(error.problems)
    if not tableaux and not problems:
        problems.append(f"{path}: holds no tableau; write one under [[tableau]]")
    if problems:
        raise InputError(*problems)
    return tuple(tableaux)


def _content(path: Path) -> dict[str, Any]:
    try:
        with path.open("rb") as file:
            raw = file.read(_LONGEST + 1)
    except OSError as error:
        reason = error.strerror or str(error)
        raise InputError(f"{path}: cannot be read ({reason}); give a tableau file") from None
    except ValueError:
        raise InputError(f"{path!s:.80}: is no file name; give a tableau file") from None
    if len(raw) > _LONGEST:
        raise InputError(f"{path}: is longer than {_LONGEST} bytes; a tableau file is a short text")
    try:
        return tomllib.loads(raw.decode("utf-8-sig"), parse_float=DecimalText)
    except UnicodeDecodeError:
        raise InputError(f"{path}: is not UTF-8 text; save it as UTF-8") from None
    except (tomllib.TOMLDecodeError, RecursionError, ValueError) as error:
        raise InputError(f"{path}: is not TOML: {error}") from None


def _audited(entry: Mapping[str, Any], kind: Kind, where: str, before: list[Tableau]) -> Tableau:
    tableau = build(entry, kind, where)
    if problem := _name_taken(tableau, before):
        raise InputError(f"{where}: {problem}")
    report = audit(tableau)
    if not report.passed:
        failing = f"{where}: {tableau.name!r} fails its audit"
        mend = "mend the coefficients or the claim"
        raise InputError(*(f"{failing}: {line}; {mend}" for line in report.violations))
    return tableau


def _name_taken(tableau: Tableau, before: list[Tableau]) -> str | None:
    for form in (tableau.name, *tableau.aliases):
        if not bare(form):
            return f"name: received {form!r}, a name with letters or digits is allowed"
        taken = {bare(f): t.name for t in before for f in (t.name, *t.aliases)}
        if bare(form) in taken:
            return f"name: {form!r} is used by {taken[bare(form)]!r} of this file; choose another"
        if form in names() or _is_built_in(form):
            return f"name: {form!r} is the name of a built-in tableau; choose another"
    return None


def _is_built_in(form: str) -> bool:
    try:
        find(form)
    except InputError:
        return False
    return True
