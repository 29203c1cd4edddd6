"""The tableaux and splittings that long studies try where nobody names any."""

from collections.abc import Mapping, Sequence
from typing import Any, Final

from levelstride.column.column import DEFAULT_SPLITS, DEFAULT_TABLEAUX, Column
from levelstride.schemes.scheme import TimeScheme
from levelstride.splitting.splitting import Splitting, resolve
from levelstride.studies.methods import pairs_of

SHORT_TABLEAUX: Final = ("ARS(2,3,2)", "ARS(3,4,3)", "UJ3(1,3,2)")
SHORT_SPLITS: Final = ("sound+buoyancy", "sound+buoyancy+divergence")
"""What is tried where neither the caller nor the column file names anything."""


def short_pairs(
    column: Column,
    tableaux: Sequence[str] | None,
    splits: Sequence[str] | None,
    short: Sequence[str] = SHORT_TABLEAUX,
) -> list[tuple[TimeScheme, Splitting, str | Mapping[str, str]]]:
    """Pair every tableau with every splitting: those given, of the column file, or a short list.

    Parameters
    ----------
    column : Column
        The column. Where its ``[advice]`` lists no splittings, its own ``[split]`` is taken.
    tableaux, splits : sequence of str, optional
        Names.
    short : sequence of str
        Tableaux of the short list.

    Returns
    -------
    list of (TimeScheme, Splitting, str or mapping)
        As ``pairs_of`` orders them, each with its splitting as plain data.

    Raises
    ------
    InputError
        With one line for every unknown name.
    """
    listed = column.advice
    if tableaux is None:
        tableaux = short if listed.tableaux == DEFAULT_TABLEAUX else listed.tableaux
    given: Sequence[Any] = splits if splits is not None else _splits(column)
    plain = {resolve(one).name: one for one in given if not isinstance(one, str)}
    return [
        (tableau, splitting, plain.get(splitting.name, splitting.name))
        for tableau, splitting in pairs_of(column, tableaux, given)
    ]


def _splits(column: Column) -> Sequence[Any]:
    if column.advice.splits != DEFAULT_SPLITS:
        return column.advice.splits
    return SHORT_SPLITS if column.split is None else (column.split,)
