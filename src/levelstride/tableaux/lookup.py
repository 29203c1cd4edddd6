"""The built-in tableaux: found by name, alias or bare form, built when first asked for."""

import tomllib
from collections.abc import Mapping, Sequence
from functools import cache
from pathlib import Path
from typing import Any, Final

from levelstride.errors import InputError
from levelstride.tableaux.entry import DecimalText, Kind, build, nearest
from levelstride.tableaux.tableau import Tableau

_FILE: Final = Path(__file__).with_name("library.toml")
_KINDS: Final[Mapping[str, Kind]] = {"tableau": "additive", "explicit": "explicit"}


def names() -> tuple[str, ...]:
    """Published names of all built-in tableaux: the pairs first, then the explicit methods."""
    return tuple(_entries())


def find(name: str, among: Sequence[Tableau] = ()) -> Tableau:
    """Tableau of that name.

    Parameters
    ----------
    name : str
        Published name (``"ARS(3,4,3)"``), alias, or bare form: lower case letters and digits only
        (``"ars343"``; a trailing asterisk is spelled ``star``).
    among : sequence of Tableau, optional
        Tableaux that a user brought; they answer beside the built-in ones.

    Raises
    ------
    InputError
        If no tableau has the name (the nearest one is given) or a bare form fits several.

    Examples
    --------
    >>> find("ars343").name
    'ARS(3,4,3)'
    """
    brought = {tableau.name: tableau for tableau in among}
    spoken = {t.name: (t.name, *t.aliases) for t in among} | _spoken()
    for published, forms in spoken.items():
        if name in forms:
            return brought.get(published) or _built(published)
    fitting = [p for p, forms in spoken.items() if bare(name) in map(bare, forms)]
    if len(fitting) == 1:
        return brought.get(fitting[0]) or _built(fitting[0])
    if fitting:
        choices = ", ".join(f'"{p}"' for p in fitting)
        raise InputError(f"tableau: {name!r} fits several; write the published name: {choices}")
    raise InputError(_unknown(name, spoken))


def bare(name: str) -> str:
    """Lower case letters and digits of a name, an asterisk as ``star``."""
    return "".join(c for c in name.lower().replace("*", "star") if c.isascii() and c.isalnum())


def _unknown(name: str, spoken: Mapping[str, tuple[str, ...]]) -> str:
    bare_forms = {bare(form): published for published, forms in spoken.items() for form in forms}
    closest = bare_forms[nearest(bare(name), tuple(bare_forms))]
    return (
        f"tableau: received {name[:80]!r}, which is unknown; the nearest is {closest!r}; "
        "the command 'levelstride tableaux' lists all"
    )


@cache
def _entries() -> dict[str, tuple[Kind, dict[str, Any]]]:
    content = tomllib.loads(_FILE.read_text(encoding="utf-8"), parse_float=DecimalText)
    return {
        entry["name"]: (kind, entry) for table, kind in _KINDS.items() for entry in content[table]
    }


@cache
def _spoken() -> dict[str, tuple[str, ...]]:
    return {name: (name, *entry.get("aliases", ())) for name, (_, entry) in _entries().items()}


@cache
def _built(name: str) -> Tableau:
    kind, entry = _entries()[name]
    return build(entry, kind, f"library.toml: {name}")
