"""What an answer depends on, as keys under which it can be kept and found again."""

import hashlib
import json
from collections.abc import Mapping
from typing import Any, Final, Protocol, TypeVar

from levelstride import __version__
from levelstride.column.column import Column
from levelstride.results.dataset import FORMAT_VERSION, Limit
from levelstride.results.round_trip import from_plain_exact, to_plain_exact
from levelstride.schemes.scheme import TimeScheme
from levelstride.splitting.splitting import Splitting
from levelstride.studies.work_item import Finding

Record = TypeVar("Record")

_NOT_THE_COLUMN: Final = ("title", "split", "advice")
"""Keys of a definition that no limit depends on, or only by way of the pair or a tolerance."""

_OF_THE_LIMIT: Final = ("efolding_s", "transient_limit")
_OF_THE_CHOICE: Final = ("safety", "divides_s", "frequency_error", "amplitude_loss_per_period")


class Kept(Protocol):
    """Where finished work is kept, by keys of hexadecimal digits."""

    def find(self, key: str) -> Any:
        """Look up plain data; None if there are none."""

    def keep(self, key: str, item: Any) -> None:
        """Keep plain data."""


def limit_key(
    column: Column, tableau: TimeScheme, splitting: Splitting, *, certify: bool = False
) -> str:
    """Make the key of a limit: column, coefficients, treatment of every term, tolerances, version.

    Parameters
    ----------
    column : Column
        The column; its title and what its ``[advice]`` table asks beyond tolerances do not matter.
    tableau : TimeScheme
        The time scheme; its coefficients and name matter.
    splitting : Splitting
        The splitting.
    certify : bool
        Whether it is certified at every sampled wave, which is another answer.

    Returns
    -------
    str
        Hexadecimal digits.
    """
    physics = {k: v for k, v in column.definition.items() if k not in _NOT_THE_COLUMN}
    return _digest(
        {
            "of": "limit",
            "version": [__version__, FORMAT_VERSION],
            "column": physics,
            "tableau": [tableau.name, tableau.kind, tableau.fingerprint],
            "splitting": [splitting.name, dict(splitting.treatment)],
            "settings": {name: getattr(column.advice, name) for name in _OF_THE_LIMIT},
            "certify": certify,
        }
    )


def finding_key(
    limit: str, column: Column, current_s: float | None, calibrated: float | None = None
) -> str:
    """Make the key of a finding: all of its limit, and how the step is chosen under it.

    Parameters
    ----------
    limit : str
        Key of the limit.
    column : Column
        The column, for its settings.
    current_s : float or None
        A step that is judged besides [s].
    calibrated : float or None
        Share of the stable step that takes the place of ``safety`` [1].

    Returns
    -------
    str
        Hexadecimal digits.
    """
    settings = {name: getattr(column.advice, name) for name in _OF_THE_CHOICE}
    if calibrated is not None:
        settings |= {"safety": calibrated, "calibrated": True}
    return _digest({"of": "finding", "limit": limit, "settings": settings, "current_s": current_s})


def closer_key(limit: str) -> str:
    """Make the key of a closer look at the row with a limit.

    Parameters
    ----------
    limit : str
        Key of the limit.

    Returns
    -------
    str
        Hexadecimal digits.
    """
    return _digest({"of": "closer look", "limit": limit})


def room_key(limit: str, step_s: float, quantity: str) -> str:
    """Make the key of the headroom of one quantity under a step.

    Parameters
    ----------
    limit : str
        Key of the limit of its tableau and splitting.
    step_s : float
        The step [s].
    quantity : str
        What is varied.

    Returns
    -------
    str
        Hexadecimal digits.
    """
    return _digest({"of": "headroom", "limit": limit, "step_s": step_s, "quantity": quantity})


def detail_key(limit: str, of: str, **asked: Any) -> str:
    """Make the key of something else that is found for the tableau and splitting of a limit.

    Parameters
    ----------
    limit : str
        Key of the limit.
    of : str
        What it is.
    **asked
        What it depends on besides, as plain data.

    Returns
    -------
    str
        Hexadecimal digits.
    """
    return _digest({"of": of, "limit": limit, "asked": asked})


def _digest(of: Mapping[str, Any]) -> str:
    text = json.dumps(to_plain_exact(of), sort_keys=True, separators=(",", ":"))
    return hashlib.sha256(text.encode()).hexdigest()


def find_finding(kept: Kept, key: str) -> Finding | None:
    """Look up a finding; None if there is none that can be read."""
    return find_record(kept, Finding, key)


def find_limit(kept: Kept, key: str) -> Limit | None:
    """Look up a limit; None if there is none that can be read."""
    return find_record(kept, Limit, key)


def keep_finding(kept: Kept, finding: Finding, key: str, of_limit: str) -> None:
    """Keep a finding and, by itself, its limit, which other settings may want again."""
    if kept.find(of_limit) is None:
        keep_record(kept, of_limit, finding.limit)
    keep_record(kept, key, finding)


def keep_record(kept: Kept, key: str, record: Any) -> None:
    """Keep a record of plain data."""
    kept.keep(key, to_plain_exact(record))


def find_record(kept: Kept, kind: type[Record], key: str) -> Record | None:
    """Look up a record of this kind; None if there is none that can be read."""
    plain = kept.find(key)
    if plain is None:
        return None
    try:
        return from_plain_exact(kind, plain)
    except (ValueError, TypeError, KeyError, AttributeError):
        return None
