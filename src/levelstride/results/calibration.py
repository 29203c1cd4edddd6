"""Steps that a real model survived or lost, held against the linear limit: frozen plain data."""

from dataclasses import dataclass
from typing import Final

from .dataset import Provenance

BEYOND: Final = 1.0
"""Share of the stable step above which nothing is advised, whatever a model survived [1]."""


@dataclass(frozen=True, slots=True, kw_only=True)
class ObservedColumn:
    """What was seen of one column, and what linear theory says about it.

    Parameters
    ----------
    title, source : str
        Title and file of the column.
    column_sha256 : str
        Hash of the resolved column.
    held_s, failed_s : tuple of float
        Steps that the model survived and lost, ascending [s].
    stable_step_s : float or None
        Stable step [s]; None where nothing bites, 0 where no step is stable.
    factor_lower, factor_upper : float or None
        Longest held and shortest failed step over the stable step [1]; None without one.
    """

    title: str
    source: str
    column_sha256: str
    held_s: tuple[float, ...]
    failed_s: tuple[float, ...]
    stable_step_s: float | None
    factor_lower: float | None
    factor_upper: float | None


@dataclass(frozen=True, slots=True, kw_only=True)
class AssumptionTrial:
    """One value of an assumption.

    Parameters
    ----------
    label : str
        What was assumed, in words.
    value : float or None
        The same as a number, where it is one; its unit is that of the assumption.
    stable_steps_s : tuple of float or None
        Stable step of every observed column then [s]; None where nothing bites, 0 where no step is
        stable.
    consistent : bool
        Whether each lies between the longest held and the shortest failed step of its column.
    """

    label: str
    value: float | None
    stable_steps_s: tuple[float | None, ...]
    consistent: bool


@dataclass(frozen=True, slots=True, kw_only=True)
class ConsistentRange:
    """Values that agree with every observation, both ends included."""

    from_value: float
    to_value: float


@dataclass(frozen=True, slots=True, kw_only=True)
class Assumption:
    """One assumption varied, the others held at the values of the column file.

    Parameters
    ----------
    name : str
        reference, wind, slope, once-per-step or growth-tolerance.
    unit : str
        Unit of the values; ``times the file's`` for factors; empty where they are no numbers.
    present : str
        What the column file assumes.
    varied_over : str
        The range or list that was tried, in words.
    trials : tuple of AssumptionTrial
        What was tried, in ascending order where it is a number.
    ranges : tuple of ConsistentRange
        Where it is a number: runs of values that agree with every observation, their ends found
        to 1 %.
    consistent : tuple of str
        The labels of what agrees with every observation.
    explains : bool
        Whether anything does.
    note : str or None
        Why it was not varied, if it was not.
    """

    name: str
    unit: str
    present: str
    varied_over: str
    trials: tuple[AssumptionTrial, ...] = ()
    ranges: tuple[ConsistentRange, ...] = ()
    consistent: tuple[str, ...] = ()
    explains: bool = False
    note: str | None = None


@dataclass(frozen=True, slots=True, kw_only=True)
class SafetyFactor:
    """The steps that a model carries, over the stable step of linear theory.

    Parameters
    ----------
    tableau, split : str
        Those of the model.
    efolding_s, transient_limit : float
        Growth tolerated by the stable step [s], [1].
    lower, upper : float or None
        Longest held and shortest failed step over the stable step, over all columns [1]; None where
        nothing held or failed.
    """

    tableau: str
    split: str
    efolding_s: float
    transient_limit: float
    lower: float | None
    upper: float | None

    def share(self, tableau: str, split: str, safety: float) -> float:
        """Share of the stable step to advise at most.

        For the model's own tableau and splitting this replaces ``safety``: the longest share that
        was seen to hold or, where only failures are known, ``safety`` of the shortest that failed;
        never more than the stable step itself. For others it can only lower ``safety``.

        Examples
        --------
        >>> seen = SafetyFactor(tableau="ARS(2,3,2)", split="sound", efolding_s=86400.0,
        ...                     transient_limit=1000.0, lower=0.95, upper=1.1)
        >>> seen.share("ARS(2,3,2)", "sound", 0.9), seen.share("ARS(3,4,3)", "sound", 0.9)
        (0.95, 0.9)
        """
        own = safety * (1.0 if self.upper is None else self.upper)
        own = min(BEYOND, own if self.lower is None else self.lower)
        if (tableau, split) == (self.tableau, self.split):
            return own
        return min(safety, own)


@dataclass(frozen=True, slots=True, kw_only=True)
class Calibration:
    """Which assumptions explain the gap between a model and the linear limit.

    Parameters
    ----------
    tableau, split : str
        Names in standard spelling.
    efolding_s : float
        Tolerated e-folding time [s].
    columns : tuple of ObservedColumn
        What was observed, by column.
    contradictions : tuple of str
        Observations that no assumption can explain together.
    agrees : bool
        Whether the column files as they are agree with every observation.
    assumptions : tuple of Assumption
        Each varied by itself.
    factor_lower, factor_upper : float or None
        Bounds of the safety factor over all observations [1]: the longest held and the shortest
        failed step over the stable step.
    safety_factor : SafetyFactor or None
        What an advice can use; None where one factor does not fit all observations, or there is
        none.
    verdict : str
        The answer in a sentence or two.
    wind_note : str or None
        What was assumed about the wind, if none was given.
    caution : str
        What this does not promise.
    provenance : Provenance
        Where it comes from.
    """

    tableau: str
    split: str
    efolding_s: float
    columns: tuple[ObservedColumn, ...]
    contradictions: tuple[str, ...]
    agrees: bool
    assumptions: tuple[Assumption, ...]
    factor_lower: float | None
    factor_upper: float | None
    safety_factor: SafetyFactor | None
    verdict: str
    wind_note: str | None
    caution: str
    provenance: Provenance
