"""Tableaux and splittings by the names that a column file or a user gives."""

from collections.abc import Sequence
from functools import lru_cache

from levelstride.column.column import Column
from levelstride.errors import InputError
from levelstride.schemes.lookup import find_scheme
from levelstride.schemes.scheme import TimeScheme
from levelstride.splitting.splitting import Splitting, resolve
from levelstride.tableaux.tableau import Tableau
from levelstride.tableaux.user_file import read_file


def tableau_of(column: Column, name: str) -> TimeScheme:
    """Find a tableau, a baseline or a composition; baselines with the knobs of the column.

    Parameters
    ----------
    column : Column
        The column.
    name : str
        Published name, alias or bare form.

    Returns
    -------
    TimeScheme
        The time scheme.

    Raises
    ------
    InputError
        If the name is unknown or the tableau file is at fault.
    """
    path = column.advice.tableau_file
    own = _own_tableaux(path) if path else ()
    return find_scheme(name, column.definition.get("scheme"), own)


@lru_cache(maxsize=8)
def _own_tableaux(path: str) -> tuple[Tableau, ...]:
    return read_file(path)


def pairs_of(
    column: Column, tableaux: Sequence[str] | None, splits: Sequence[str] | None
) -> list[tuple[TimeScheme, Splitting]]:
    """Pair every tableau with every splitting, each once.

    Parameters
    ----------
    column : Column
        The column, whose file names what is not given here.
    tableaux, splits : sequence of str, optional
        Names.

    Returns
    -------
    list of (TimeScheme, Splitting)
        Splitting by splitting: workers that start together then work on different tableaux, and
        what they learn of one serves its other splittings. An explicit method steps every term
        alike, so it comes once, with ``all-explicit``.

    Raises
    ------
    InputError
        With one line for every unknown name.
    """
    problems: list[str] = []
    schemes: dict[str, TimeScheme] = {}
    for name in column.advice.tableaux if tableaux is None else tableaux:
        try:
            scheme = tableau_of(column, name)
            schemes[scheme.name] = scheme
        except InputError as error:
            problems += [line for line in error.problems if line not in problems]
    splittings: dict[str, Splitting] = {}
    for name in column.advice.splits if splits is None else splits:
        try:
            splitting = resolve(name)
            splittings[splitting.name] = splitting
        except InputError as error:
            problems += error.problems
    if problems:
        raise InputError(*problems)
    if not schemes or not splittings:
        raise InputError("advise: nothing to try; name at least one tableau and one splitting")
    unsplit = resolve("all-explicit")
    explicit = [(scheme, unsplit) for scheme in schemes.values() if scheme.kind == "explicit"]
    return explicit + [
        (scheme, splitting)
        for splitting in splittings.values()
        for scheme in schemes.values()
        if scheme.kind == "additive"
    ]
