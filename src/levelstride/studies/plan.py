"""Which work items an advice needs."""

import pickle
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from math import inf

from levelstride.column.column import Column
from levelstride.errors import InputError
from levelstride.results.calibration import SafetyFactor
from levelstride.schemes.scheme import TimeScheme
from levelstride.splitting.splitting import Splitting, resolve
from levelstride.studies.keys import finding_key, limit_key
from levelstride.studies.methods import pairs_of, tableau_of
from levelstride.studies.work_item import WorkItem


@dataclass(frozen=True, slots=True)
class CurrentConfiguration:
    """The step that a user runs today.

    Parameters
    ----------
    step_s : float
        The step [s].
    tableau : str
        Name.
    split : str or mapping
        Name, or term to treatment.
    """

    step_s: float
    tableau: str
    split: str | Mapping[str, str]


@dataclass(frozen=True, slots=True)
class PlannedItem:
    """A work item with what it is called and kept by.

    Parameters
    ----------
    item : WorkItem
        The item.
    what : str
        What it is, for people.
    key, of_limit : str
        Keys of its finding and of its limit.
    """

    item: WorkItem
    what: str
    key: str
    of_limit: str


@dataclass(frozen=True, slots=True, eq=False)
class Plan:
    """What was asked about one column.

    Parameters
    ----------
    column : Column
        The column.
    pairs : tuple of (TimeScheme, Splitting)
        One per row.
    items : tuple of PlannedItem
        One per pair, in their order, and one more if the current step is of none of them.
    current : CurrentConfiguration or None
        A step to be judged as well.
    calibration : SafetyFactor or None
        What a model carries of the stable step, measured.
    certify : bool
        Whether limits are certified at every sampled wave.
    """

    column: Column
    pairs: tuple[tuple[TimeScheme, Splitting], ...]
    items: tuple[PlannedItem, ...]
    current: CurrentConfiguration | None
    calibration: SafetyFactor | None = None
    certify: bool = False

    def safety(self, tableau: str, split: str) -> float:
        """Share of the stable step of a pair to advise at most [1]."""
        safety = self.column.advice.safety
        if self.calibration is None:
            return safety
        return self.calibration.share(tableau, split, safety)


def plan_advice(
    column: Column,
    tableaux: Sequence[str] | None = None,
    splits: Sequence[str] | None = None,
    current: CurrentConfiguration | None = None,
    calibration: SafetyFactor | None = None,
    *,
    certify: bool = False,
) -> Plan:
    """Find out what is to be done for an advice.

    Parameters
    ----------
    column : Column
        The column.
    tableaux, splits : sequence of str, optional
        Names; those of the column file by default.
    current : CurrentConfiguration, optional
        A step in use today, to be judged as well.
    calibration : SafetyFactor, optional
        Takes the place of ``safety`` for its own tableau and splitting, and can only lower it for
        others.
    certify : bool
        Whether to certify limits at every sampled wave.

    Returns
    -------
    Plan
        With one work item per pair.

    Raises
    ------
    InputError
        If a name is unknown, the current step is not positive, or the calibration was made with
        other tolerances.
    """
    _check_calibration(column, calibration)
    pairs = pairs_of(column, tableaux, splits)
    judged = _judged_pair(column, current)
    names = [_names(pair) for pair in pairs]
    wanted = list(pairs)
    if judged is not None and _names(judged) not in names:
        wanted.append(judged)
    packed = pickle.dumps(column)
    items = []
    for tableau, splitting in wanted:
        item = WorkItem(packed, tableau.name, splitting.name, certify=certify)
        if current is not None and judged is not None and _names(judged) == (
            tableau.name, splitting.name,
        ):  # fmt: skip
            split = current.split if tableau.kind == "additive" else splitting.name
            item = replace(item, split=split, current_s=current.step_s)
        calibrated = None
        if calibration is not None:
            safety = column.advice.safety
            calibrated = calibration.share(tableau.name, splitting.name, safety)
            item = replace(item, calibrated=calibrated)
        of_limit = limit_key(column, tableau, splitting, certify=certify)
        key = finding_key(of_limit, column, item.current_s, calibrated)
        items.append(PlannedItem(item, f"{tableau.name} with {splitting.name}", key, of_limit))
    return Plan(column, tuple(pairs), tuple(items), current, calibration, certify)


def _check_calibration(column: Column, calibration: SafetyFactor | None) -> None:
    """Refuse shares of a stable step that tolerates another growth."""
    if calibration is None:
        return
    problems = []
    for name in ("efolding_s", "transient_limit"):
        measured, asked = getattr(calibration, name), getattr(column.advice, name)
        if measured != asked:
            problems.append(
                f"--calibration: was made with {name} = {measured:g}, but {column.source} has "
                f"advice.{name} = {asked:g}; make both the same"
            )
    if problems:
        raise InputError(*problems)


def _judged_pair(
    column: Column, current: CurrentConfiguration | None
) -> tuple[TimeScheme, Splitting] | None:
    if current is None:
        return None
    if not 0.0 < current.step_s < inf:
        raise InputError(f"current step: received {current.step_s!r} s, it must be above 0")
    tableau = tableau_of(column, current.tableau)
    split = "all-explicit" if tableau.kind == "explicit" else current.split
    return tableau, resolve(split)


def _names(pair: tuple[TimeScheme, Splitting]) -> tuple[str, str]:
    return pair[0].name, pair[1].name
