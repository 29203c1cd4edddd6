"""Stable steps alone, for many tableaux and splittings: a table while one waits."""

from __future__ import annotations

import pickle
from collections.abc import Sequence
from concurrent.futures import Executor
from dataclasses import dataclass
from functools import lru_cache

from levelstride.column.column import Column
from levelstride.errors import CalculationError
from levelstride.splitting.splitting import resolve
from levelstride.stability.blas import on_one_thread
from levelstride.stability.tolerance import Tolerance
from levelstride.stability.verdict import ColumnVerdict
from levelstride.studies.methods import tableau_of


@dataclass(frozen=True, slots=True)
class StepItem:
    """One tableau and splitting as plain data.

    Parameters
    ----------
    column : bytes
        The column, pickled.
    tableau, split : str
        Names.
    refine : bool
        Whether to add wavenumbers around the worst ones.
    """

    column: bytes
    tableau: str
    split: str
    refine: bool = True


@lru_cache(maxsize=2)
def _unpacked(column: bytes) -> Column:
    found: Column = pickle.loads(column)
    return found


@on_one_thread
def stable_step_of(item: StepItem) -> float | None:
    """Find the stable step of one item [s]; None if nothing bites, 0 if no step is stable."""
    column = _unpacked(item.column)
    tolerance = Tolerance(column.advice.efolding_s, column.advice.transient_limit)
    verdict = ColumnVerdict(column, resolve(item.split), tableau_of(column, item.tableau))
    try:
        return verdict.stable_step(tolerance, refine=item.refine).step_s
    except CalculationError:
        return 0.0


def step_table(
    column: Column,
    tableaux: Sequence[str],
    splits: Sequence[str],
    executor: Executor,
    *,
    refine: bool = True,
) -> dict[tuple[str, str], float | None]:
    """Find the stable steps of all pairs.

    Parameters
    ----------
    column : Column
    tableaux, splits : sequence of str
        Names.
    executor : Executor
        Whoever does the work.
    refine : bool
        Whether to add wavenumbers around the worst ones.

    Returns
    -------
    dict
        Stable step by tableau and splitting; see ``stable_step_of``.
    """
    packed = pickle.dumps(column)
    pairs = [(tableau, split) for split in splits for tableau in tableaux]
    items = [StepItem(packed, tableau, split, refine) for tableau, split in pairs]
    return dict(zip(pairs, executor.map(stable_step_of, items), strict=True))
