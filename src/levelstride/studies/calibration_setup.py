"""The model of a calibration as its column files have it, and the limits that are searched."""

from __future__ import annotations

import pickle
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from functools import lru_cache
from math import inf
from typing import Final

from levelstride.column.column import Column
from levelstride.column.knobs import lowest_slope_gradients
from levelstride.errors import CalculationError
from levelstride.schemes.scheme import TimeScheme
from levelstride.splitting.splitting import Splitting, resolve
from levelstride.stability.blas import on_one_thread
from levelstride.stability.nearby import Nearby
from levelstride.stability.tolerance import Tolerance
from levelstride.stability.verdict import LONGEST_STEP_S, ColumnVerdict
from levelstride.studies.methods import tableau_of

REACH: Final = 1.05
"""Multiple of the limit of one slope gradient up to which the other is searched."""


@dataclass(frozen=True, slots=True)
class LimitItem:
    """A limit to be found, as plain data.

    Parameters
    ----------
    column : bytes
        The column, pickled.
    tableau : str
        Name.
    treatment : mapping of str to str
        Every term with its treatment.
    efolding_s : float
        Tolerated e-folding time [s].
    near_s : float or None
        A step near which the limit is known to lie, for a shorter search [s]; None for the full
        one.
    """

    column: bytes
    tableau: str
    treatment: Mapping[str, str]
    efolding_s: float
    near_s: float | None = None


@on_one_thread
def stable_step(item: LimitItem) -> float:
    """Find a stable step, over a slope the smaller of both treatments of its lowest gradient.

    The harder treatment comes first; the other one is searched no further than matters.

    Parameters
    ----------
    item : LimitItem
        What is asked.

    Returns
    -------
    float
        The step [s]; inf where nothing bites, 0 where no step is stable.
    """
    columns = _columns(item.column)
    tableau, splitting = tableau_of(columns[0], item.tableau), resolve(item.treatment)
    tolerance = Tolerance(item.efolding_s, columns[0].advice.transient_limit)
    least = inf
    for one in columns[::-1]:
        verdict = ColumnVerdict(one, splitting, tableau, min(LONGEST_STEP_S, REACH * least))
        try:
            near = None if item.near_s is None else Nearby(item.near_s)
            found = verdict.stable_step(tolerance, near=near).step_s
        except CalculationError:
            return 0.0
        least = min(least, inf if found is None else found)
    return least


@lru_cache(maxsize=4)
def _columns(pickled: bytes) -> tuple[Column, ...]:
    """Both treatments of the lowest slope gradient; the same objects each time.

    What is known of their waves is then known to the next search of the same column.
    """
    column: Column = pickle.loads(pickled)
    return lowest_slope_gradients(column)


@dataclass(frozen=True, slots=True, eq=False)
class Setup:
    """The model as the column files have it.

    Parameters
    ----------
    columns : tuple of Column
        The observed columns, all different.
    tableau : TimeScheme
    splitting : Splitting
    efolding_s : float
        Tolerated e-folding time [s].
    """

    columns: tuple[Column, ...]
    tableau: TimeScheme
    splitting: Splitting
    efolding_s: float

    def items(
        self,
        change: Callable[[Column], Column] = lambda column: column,
        splitting: Splitting | None = None,
        efolding_s: float | None = None,
    ) -> tuple[LimitItem, ...]:
        """The limits to be found, one per column, with something changed.

        Raises
        ------
        InputError
            If a column cannot be changed so.
        """
        treatment = dict((splitting or self.splitting).treatment)
        return tuple(
            LimitItem(
                pickle.dumps(change(column)),
                self.tableau.name,
                treatment,
                efolding_s or self.efolding_s,
            )
            for column in self.columns
        )
