"""What bites, and what the step would be if something were otherwise, as frozen plain data."""

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Literal, TypeAlias

Change: TypeAlias = Literal["implicit", "absent"]


@dataclass(frozen=True, slots=True, kw_only=True)
class FieldProfile:
    """One field of the disturbance that bites, as it varies with height.

    Parameters
    ----------
    field : str
        u, v, w, theta or pi.
    heights_m : tuple of float
        Heights above the ground of its points: centres of the layers, or interior interfaces [m].
    amplitude : tuple of float
        Amplitude there, of a disturbance whose energy is 1 J/m2 [m/s; K for theta, 1 for pi].
    phase_rad : tuple of float
        Phase against the point that holds most energy [rad].
    """

    field: str
    heights_m: tuple[float, ...]
    amplitude: tuple[float, ...]
    phase_rad: tuple[float, ...]


@dataclass(frozen=True, slots=True, kw_only=True)
class Bites:
    """The disturbance that grows first beyond the limit.

    Parameters
    ----------
    wavenumber_per_m : float
        Wavenumber along one axis [1/m].
    growth_per_s : float
        Growth rate at 1.001 times the limit [1/s].
    kind : str
        Kind of wave: sound, gravity, Lamb, computational or vortical; transport or mixing where a
        frozen row binds.
    layer_lowest, layer_highest : int
        Layers that hold 90 % of the energy, both included.
    bottom_m, top_m : float
        Heights of these layers above the ground [m].
    energy_share : mapping of str to float
        Share of the energy by field [1].
    kind_share : mapping of str to float
        Share of the energy by kind of wave [1].
    wavelength_layers : float or None
        Vertical wavelength in layers [1].
    wavelength_m : float or None
        Horizontal wavelength along one axis, 2 pi over the wavenumber [m].
    period_s : float or None
        Period as the step sees it [s]; None where it does not oscillate.
    time_mode : str or None
        Of a scheme of several time levels: ``physical``, ``computational``, or ``merged`` where
        both have the same factor; None for all others.
    shortest_horizontal : bool
        Whether it is the shortest wave that the grid carries, of two cells.
    steepest_horizontal : bool
        Whether it is the wave of largest horizontal gradient.
    shortest_vertical : bool
        Whether it alternates from layer to layer, the shortest vertical wave there is.
    along_diagonal : bool
        Whether it lies along the diagonal of the grid.
    energy_by_layer : tuple of float
        Share of the energy of every layer, from the ground up [1]; empty where a frozen row binds.
    profiles : tuple of FieldProfile
        The fastest growing or most amplified state itself, by field; empty where a frozen row
        binds.
    """

    wavenumber_per_m: float
    growth_per_s: float
    kind: str
    layer_lowest: int
    layer_highest: int
    bottom_m: float
    top_m: float
    energy_share: Mapping[str, float] = field(default_factory=dict)
    kind_share: Mapping[str, float] = field(default_factory=dict)
    wavelength_layers: float | None = None
    wavelength_m: float | None = None
    period_s: float | None = None
    time_mode: str | None = None
    shortest_horizontal: bool = False
    steepest_horizontal: bool = False
    shortest_vertical: bool = False
    along_diagonal: bool = False
    energy_by_layer: tuple[float, ...] = ()
    profiles: tuple[FieldProfile, ...] = ()


@dataclass(frozen=True, slots=True, kw_only=True)
class Counterfactual:
    """The stable step if explicit terms were implicit, or absent.

    Parameters
    ----------
    terms : tuple of str
        One explicit term, or two partner terms together; ``reference-state`` for the difference of
        the implicit terms on the air from those on the reference.
    change : str
        ``implicit`` or ``absent``.
    stable_step_s : float or None
        Stable step then [s]; None with ``unbounded`` if nothing bites, None without it if no step
        is stable.
    unbounded : bool
        Whether nothing bites then up to ``scanned_to_s``.
    gain : float or None
        That step over the stable step [1]; None where there is no such step.
    scanned_to_s : float
        Longest step scanned [s].
    """

    terms: tuple[str, ...]
    change: Change
    stable_step_s: float | None
    unbounded: bool
    gain: float | None
    scanned_to_s: float


@dataclass(frozen=True, slots=True, kw_only=True)
class StepOfAir:
    """Stable step of one air state by itself.

    Parameters
    ----------
    air : str
        Air state.
    stable_step_s : float or None
        Stable step [s]; None with ``unbounded`` if nothing bites, None without it if no step is
        stable.
    unbounded : bool
        Whether nothing bites up to ``scanned_to_s``.
    scanned_to_s : float
        Longest step scanned [s].
    """

    air: str
    stable_step_s: float | None
    unbounded: bool
    scanned_to_s: float
