"""Every answer as frozen plain data: these names, units and nothing else go into the files.

Numbers that do not exist are ``None``. Lengths are in m, times in s, wavenumbers along one axis in
1/m; layers are counted from the ground, beginning with 0. Field names are the keys of the JSON.
"""

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Final, Literal, TypeAlias

from .biting import Bites, Counterfactual, StepOfAir
from .certificate import Certificate
from .headroom import Headroom

FORMAT_VERSION: Final = 1
"""Version of the names and dimensions below; raised when one changes its meaning."""

LowestSlopeGradient: TypeAlias = Literal["half", "full"]


@dataclass(frozen=True, slots=True, kw_only=True)
class StepAtTolerance:
    """Stable step for one tolerated e-folding time.

    Parameters
    ----------
    efolding_s : float
        Tolerated e-folding time [s].
    stable_step_s : float or None
        Stable step [s]; None where it never bites or none was found.
    """

    efolding_s: float
    stable_step_s: float | None


@dataclass(frozen=True, slots=True, kw_only=True)
class OwnGrowth:
    """Growth of the semi-discrete operator itself, whatever the time scheme.

    Parameters
    ----------
    air : str
        Air state.
    wavenumber_per_m : float
        Wavenumber along one axis [1/m].
    growth_per_s : float
        Growth rate [1/s].
    cause : str
        Convection, shear or formulation, in plain words.
    """

    air: str
    wavenumber_per_m: float
    growth_per_s: float
    cause: str


@dataclass(frozen=True, slots=True, kw_only=True)
class Window:
    """Steps beyond the first loss that are stable again; reported, never recommended."""

    from_s: float
    to_s: float


@dataclass(frozen=True, slots=True, kw_only=True)
class Limit:
    """How long a step one tableau and splitting carry on a column, and what bites first.

    Parameters
    ----------
    tableau, split : str
        Names in standard spelling.
    stable_step_s : float or None
        Stable step [s]; None with ``unbounded`` if nothing bites up to ``scanned_to_s``, None
        without it if no step is stable.
    unbounded : bool
        Whether nothing bites.
    scanned_to_s : float
        Longest step scanned [s].
    strict_step_s : float or None
        Step up to which the spectral radius stays below 1 + 1e-8 [s].
    stable_step_by_efolding : tuple of StepAtTolerance
        Stable step for one day, one hour and ten minutes.
    criterion : str
        Criteria that bind: spectrum, transient, courant, joined by ``+``; ``none`` if unbounded.
    explicit_share : float or None
        Stable step over the step that the explicit part alone allows [1].
    gain : float or None
        Stable step over that of ``all-explicit`` [1].
    bites : Bites or None
        What grows beyond the limit.
    certified : str
        How the answer was checked.
    efolding_s : float or None
        Tolerated e-folding time [s].
    growth_per_step : float or None
        Growth per step at the limit [1].
    air : str
        Air state that binds.
    lowest_slope_gradient : str or None
        ``half`` or ``full`` over a slope, else None.
    own_growth : tuple of OwnGrowth
        Growth of the semi-discrete operator itself.
    windows : tuple of Window
        Stability beyond the first loss.
    path : str
        How the step is solved: explicit, tridiagonal or banded.
    couples_columns : bool
        Whether the implicit solve couples neighbouring columns.
    wind_note : str or None
        What was assumed about the wind, if none was given.
    certificate : Certificate or None
        The check of both sides at every sampled wave, if it was asked for.
    cause : str or None
        What limits the step, where, and what would help, in one sentence; None if nothing bites.
    stable_step_by_air : tuple of StepOfAir
        Stable step of each of several air states by itself; empty where it was not asked for.
    counterfactuals : tuple of Counterfactual
        Stable step if explicit terms were implicit or absent; empty where it was not asked for.
    """

    tableau: str
    split: str
    stable_step_s: float | None
    unbounded: bool
    scanned_to_s: float
    strict_step_s: float | None = None
    stable_step_by_efolding: tuple[StepAtTolerance, ...] = ()
    criterion: str
    explicit_share: float | None = None
    gain: float | None = None
    bites: Bites | None = None
    certified: str = ""
    efolding_s: float | None = None
    growth_per_step: float | None = None
    air: str = ""
    lowest_slope_gradient: LowestSlopeGradient | None = None
    own_growth: tuple[OwnGrowth, ...] = ()
    windows: tuple[Window, ...] = ()
    path: str = ""
    couples_columns: bool = False
    wind_note: str | None = None
    certificate: Certificate | None = None
    cause: str | None = None
    stable_step_by_air: tuple[StepOfAir, ...] = ()
    counterfactuals: tuple[Counterfactual, ...] = ()


@dataclass(frozen=True, slots=True, kw_only=True)
class AdviceRow(Limit):
    """One tableau and splitting of an advice: its limit, the advised step and what that costs.

    Parameters
    ----------
    advised_step_s : float or None
        Advised step [s]; None if no step can be advised.
    advised_step_fraction : str or None
        The same as an exact fraction of a second, where it divides intervals.
    steps_per_interval : tuple of int
        Whole steps in each of the advice's intervals.
    steps_per_hour : float or None
        Steps in one simulated hour [1/h].
    cost_per_hour : float or None
        Weighted cost of one simulated hour [1/h].
    explicit_evaluations_per_hour, solves_per_hour, exchanges_per_hour : float or None
        What the cost is made of [1/h].
    measured_s_per_hour : float or None
        Measured time of the steps of this column and one wave for one simulated hour [s/h].
    binding : str
        What binds the advised step, in plain words.
    frequency_error : float or None
        Worst relative frequency error of a resolved gravity wave at the advised step [1].
    amplitude_change_per_period : float or None
        Worst change of amplitude per period of such a wave at the advised step [1].
    ambiguous_waves : int
        Such waves that belong to no eigenvalue of the step decisively; for them one step projected
        back on the wave stands in.
    safety : float or None
        Share of the stable step that was to be advised at most [1].
    headroom : Headroom or None
        How far the column may change under the advised step; of the best row of an advice only.
    """

    advised_step_s: float | None = None
    advised_step_fraction: str | None = None
    steps_per_interval: tuple[int, ...] = ()
    steps_per_hour: float | None = None
    cost_per_hour: float | None = None
    explicit_evaluations_per_hour: float | None = None
    solves_per_hour: float | None = None
    exchanges_per_hour: float | None = None
    measured_s_per_hour: float | None = None
    binding: str = ""
    frequency_error: float | None = None
    amplitude_change_per_period: float | None = None
    ambiguous_waves: int = 0
    safety: float | None = None
    headroom: Headroom | None = None


@dataclass(frozen=True, slots=True, kw_only=True)
class CurrentStep:
    """The step a user runs today, judged.

    Parameters
    ----------
    step_s : float
        The step [s].
    share_of_limit : float or None
        Step over stable step [1]; None if nothing bites or no step is stable.
    stable : bool
        Whether the step is within the limit and stable at that very step.
    verdict : str
        One sentence.
    frequency_error, amplitude_change_per_period : float or None
        Worst of the resolved gravity waves at this step [1].
    limit : Limit
        The limit of its tableau and splitting.
    ambiguous_waves : int
        Such waves that belong to no eigenvalue of the step decisively.
    """

    step_s: float
    share_of_limit: float | None
    stable: bool
    verdict: str
    frequency_error: float | None
    amplitude_change_per_period: float | None
    limit: Limit
    ambiguous_waves: int = 0


@dataclass(frozen=True, slots=True, kw_only=True)
class ColumnSummary:
    """The level set in a few numbers.

    Parameters
    ----------
    layers : int
        Number of layers.
    lowest_layer_m, thickest_layer_m : float
        Thickness of the lowest and of the thickest layer [m].
    largest_ratio : float
        Largest ratio of the thicknesses of two neighbouring layers [1].
    top_m : float
        Height of the lid above the ground [m].
    interfaces_m : tuple of float
        Heights of the interfaces above the ground [m].
    """

    layers: int
    lowest_layer_m: float
    thickest_layer_m: float
    largest_ratio: float
    top_m: float
    interfaces_m: tuple[float, ...]


@dataclass(frozen=True, slots=True, kw_only=True)
class Provenance:
    """Where an answer comes from.

    Parameters
    ----------
    version : str
        Version of the program.
    format_version : int
        Version of these records.
    column_source : str
        The column file as it was named.
    column_sha256 : str
        Hash of the resolved column, contents of referenced files included.
    created_utc : str
        When, ISO 8601.
    constants : mapping of str to float
        Physical constants, units in the keys.
    tolerances : mapping of str to float
        Tolerances, units in the keys.
    certified : str
        How the limits were checked.
    """

    version: str
    format_version: int
    column_source: str
    column_sha256: str
    created_utc: str
    constants: Mapping[str, float]
    tolerances: Mapping[str, float]
    certified: str


@dataclass(frozen=True, slots=True, kw_only=True)
class Advice:
    """Every tableau and splitting that was asked for, the most simulated time per cost first.

    Parameters
    ----------
    title : str
        Title of the column file.
    column : ColumnSummary
        The level set.
    intervals_s : tuple of float
        Intervals that the step divides into whole steps [s].
    rows : tuple of AdviceRow
        One per tableau and splitting.
    best : int or None
        Index of the best row; None if no row has an advised step.
    current : CurrentStep or None
        The step in use today, if it was given.
    wind_note : str or None
        What was assumed about the wind, if none was given.
    caution : str
        What the advice does not promise.
    provenance : Provenance
        Where it comes from.
    """

    title: str
    column: ColumnSummary
    intervals_s: tuple[float, ...]
    rows: tuple[AdviceRow, ...]
    best: int | None
    current: CurrentStep | None
    wind_note: str | None
    caution: str
    provenance: Provenance


@dataclass(frozen=True, slots=True, kw_only=True)
class ColumnOutcome:
    """One of many columns: the best row of its advice, or what is wrong with it.

    Parameters
    ----------
    name : str
        Name of the column among the others, and of its folder.
    source : str
        Its file.
    title : str or None
        Its title.
    layers : int or None
        Number of layers.
    lowest_layer_m, top_m : float or None
        Thickness of the lowest layer and height of the lid [m].
    tableau, split : str or None
        Those of the best row.
    advised_step_s, stable_step_s : float or None
        Its steps [s].
    advised_step_fraction : str or None
        The advised step as an exact fraction, where it divides intervals.
    cost_per_hour : float or None
        Its cost [1/h].
    binding : str or None
        What binds.
    current_share_of_limit : float or None
        Step in use today over its stable step [1], if it was given.
    column_sha256 : str or None
        Hash of the resolved column.
    problem : str or None
        What went wrong, if something did.
    """

    name: str
    source: str
    title: str | None = None
    layers: int | None = None
    lowest_layer_m: float | None = None
    top_m: float | None = None
    tableau: str | None = None
    split: str | None = None
    advised_step_s: float | None = None
    advised_step_fraction: str | None = None
    stable_step_s: float | None = None
    cost_per_hour: float | None = None
    binding: str | None = None
    current_share_of_limit: float | None = None
    column_sha256: str | None = None
    problem: str | None = None
