"""Which layers cost the step, and a level set that carries a longer one, as frozen plain data."""

from dataclasses import dataclass


@dataclass(frozen=True, slots=True, kw_only=True)
class LayerCost:
    """How the stable step changes with the thickness of one layer.

    The layer becomes thicker and everything above it moves up by as much, the lid too. States that
    are lost within 0.5 % of the smallest limit count as lost together in the one-sided derivatives:
    a thicker layer brings what the one of them gains that gains least, a thinner one costs what the
    one loses that loses most.

    Parameters
    ----------
    layer : int
        Counted from 0 at the ground.
    bottom_m, top_m : float
        Its interfaces, heights above the ground [m].
    thickness_m : float
        [m]
    ratio_to_next : float or None
        Thickness of the layer above over its own [1]; None for the highest.
    step_per_m : float or None
        Derivative of the stable step with respect to the thickness, by the state that is lost first
        alone [s/m]; None if nothing bites.
    log_sensitivity : float or None
        The same of the logarithms, percent of the step per percent of the thickness [1].
    step_per_m_thicker, step_per_m_thinner : float or None
        One-sided derivatives [s/m].
    step_per_m_lid_kept : float or None
        Derivative if the lid stays and all other layers give way in proportion [s/m].
    """

    layer: int
    bottom_m: float
    top_m: float
    thickness_m: float
    ratio_to_next: float | None
    step_per_m: float | None
    log_sensitivity: float | None
    step_per_m_thicker: float | None
    step_per_m_thinner: float | None
    step_per_m_lid_kept: float | None


@dataclass(frozen=True, slots=True, kw_only=True)
class InterfaceCost:
    """How the stable step changes with the height of one interface, all others fixed.

    Parameters
    ----------
    interface : int
        Counted from 0 at the ground; the interior ones only.
    height_m : float
        Height above the ground [m].
    ratio : float
        Thickness of the layer above it over that of the layer below [1].
    step_per_m : float or None
        Derivative of the stable step with respect to the height [s/m]; None if nothing bites.
    step_per_m_raised, step_per_m_lowered : float or None
        One-sided derivatives [s/m].
    """

    interface: int
    height_m: float
    ratio: float
    step_per_m: float | None
    step_per_m_raised: float | None
    step_per_m_lowered: float | None


@dataclass(frozen=True, slots=True, kw_only=True)
class LostFirst:
    """A state that is lost at the limit or within 0.5 % of it.

    Parameters
    ----------
    criterion : str
        ``spectrum``, ``transient`` or ``courant``.
    air : str
        Air state.
    wavenumber_per_m : float
        Along one axis [1/m].
    step_s : float
        Longest step that it allows [s].
    layer : int or None
        Layer of the frozen row, for the courant criterion.
    """

    criterion: str
    air: str
    wavenumber_per_m: float
    step_s: float
    layer: int | None = None


@dataclass(frozen=True, slots=True, kw_only=True)
class LayerSensitivity:
    """Which layers cost the step.

    Parameters
    ----------
    tableau, split : str
        Names in standard spelling.
    stable_step_s : float or None
        Stable step [s]; None if nothing bites.
    efolding_s : float
        Tolerated e-folding time [s].
    layers : tuple of LayerCost
        From the ground up.
    interfaces : tuple of InterfaceCost
        The interior ones, from the ground up.
    lost_first : tuple of LostFirst
        What binds and what is within 0.5 % of it, the first first.
    method : str
        How the derivatives were found.
    """

    tableau: str
    split: str
    stable_step_s: float | None
    efolding_s: float
    layers: tuple[LayerCost, ...]
    interfaces: tuple[InterfaceCost, ...]
    lost_first: tuple[LostFirst, ...]
    method: str


@dataclass(frozen=True, slots=True, kw_only=True)
class LayerChange:
    """One layer before and after.

    Parameters
    ----------
    layer : int
        Counted from 0 at the ground.
    before_m, after_m : float
        Thickness [m].
    factor : float
        The one over the other [1].
    """

    layer: int
    before_m: float
    after_m: float
    factor: float


@dataclass(frozen=True, slots=True, kw_only=True)
class Release:
    """What would be possible without one of the constraints.

    Parameters
    ----------
    constraint : str
        ``lowest layer``, ``ratio``, ``lid`` or ``all``.
    largest_step_s : float
        Longest step found without it, no longer than what was asked for [s].
    carries : bool
        Whether the target can be carried without it.
    """

    constraint: str
    largest_step_s: float
    carries: bool


@dataclass(frozen=True, slots=True, kw_only=True)
class Mended:
    """The level set nearest to a given one that carries a step, or why there is none.

    Parameters
    ----------
    tableau, split : str
        Names in standard spelling.
    target_step_s : float
        What was asked for [s].
    efolding_s : float
        Tolerated e-folding time [s].
    stable_step_before_s : float or None
        Stable step of the given level set [s]; None if nothing bites.
    carried : bool
        Whether ``interfaces_m`` carries the target.
    unchanged : bool
        Whether the given level set carries it already, and is returned.
    interfaces_m : tuple of float
        The proposed interfaces, heights above the ground; without a solution those of the longest
        step found [m].
    thickness_m : tuple of float
        Their layers, from the ground up [m].
    verified_step_s : float or None
        Stable step of the proposed level set by the full search [s]; None if nothing bites.
    criterion : str
        What binds it there: spectrum, transient, courant, joined by ``+``; ``none`` if nothing.
    changes : tuple of LayerChange
        Layer by layer, from the ground up.
    distance : float
        Root of the sum over the layers of (ln of the factor) squared [1].
    largest_ratio : float
        Largest ratio of neighbouring thicknesses that was allowed where the given level set has
        none that is larger [1].
    lowest_kept : bool
        Whether the lowest layer was to keep its thickness.
    obstacle : str or None
        Which constraint stands in the way, in plain words; None if there is a solution.
    releases : tuple of Release
        What was tried to find that out.
    searches : int
        Full searches for a stable step that it took.
    verdict : str
        The answer in one sentence.
    """

    tableau: str
    split: str
    target_step_s: float
    efolding_s: float
    stable_step_before_s: float | None
    carried: bool
    unchanged: bool
    interfaces_m: tuple[float, ...]
    thickness_m: tuple[float, ...]
    verified_step_s: float | None
    criterion: str
    changes: tuple[LayerChange, ...]
    distance: float
    largest_ratio: float
    lowest_kept: bool
    obstacle: str | None
    releases: tuple[Release, ...]
    searches: int
    verdict: str
