"""The model of a calibration as its column files have it, and the limits that are searched."""

from __future__ import annotations

import pickle
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from math import inf

from levelstride.column.column import Column
from levelstride.column.knobs import lowest_slope_gradients
from levelstride.errors import CalculationError
from levelstride.splitting.splitting import Splitting, resolve
from levelstride.stability.blas import on_one_thread
from levelstride.stability.tolerance import Tolerance
from levelstride.stability.verdict import ColumnVerdict
from levelstride.studies.methods import tableau_of
from levelstride.tableaux.tableau import Tableau


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
    """

    column: bytes
    tableau: str
    treatment: Mapping[str, str]
    efolding_s: float


@on_one_thread
def stable_step(item: LimitItem) -> float:
    """Find a stable step, over a slope the smaller of both treatments of its lowest gradient.

    Parameters
    ----------
    item : LimitItem
        What is asked.

    Returns
    -------
    float
        The step [s]; inf where nothing bites, 0 where no step is stable.
    """
    column: Column = pickle.loads(item.column)
    tableau, splitting = tableau_of(column, item.tableau), resolve(item.treatment)
    tolerance = Tolerance(item.efolding_s, column.advice.transient_limit)
    least = inf
    for one in lowest_slope_gradients(column):
        try:
            found = ColumnVerdict(one, splitting, tableau).stable_step(tolerance).step_s
        except CalculationError:
            return 0.0
        least = min(least, inf if found is None else found)
    return least


@dataclass(frozen=True, slots=True, eq=False)
class Setup:
    """The model as the column files have it.

    Parameters
    ----------
    columns : tuple of Column
        The observed columns, all different.
    tableau : Tableau
    splitting : Splitting
    efolding_s : float
        Tolerated e-folding time [s].
    """

    columns: tuple[Column, ...]
    tableau: Tableau
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
