"""The normal modes of a column, as frozen plain data.

Frequencies are angular, in 1/s; layers are counted from 0 at the ground. Field names are the keys
of the JSON.
"""

from dataclasses import dataclass

from .dataset import ColumnSummary, Provenance
from .transient import TransientFound
from .wave_errors import StepWaveErrors


@dataclass(frozen=True, slots=True, kw_only=True)
class OnGrid:
    """What the levels make of one wave under one staggering, the column at rest.

    Parameters
    ----------
    staggering : str
        ``charney-phillips`` or ``lorenz``.
    frequency_per_s : float
        Frequency on the levels as they are [1/s].
    to_finer : float or None
        That over the frequency of the wave of the same kind and vertical order on levels with every
        layer split [1]; None where nothing was compared or the wave stands still.
    to_isothermal : float or None
        That over the closed form of isothermal air [1]; None where the air is not isothermal.
    """

    staggering: str
    frequency_per_s: float
    to_finer: float | None
    to_isothermal: float | None


@dataclass(frozen=True, slots=True, kw_only=True)
class ModeFound:
    """One normal mode.

    Parameters
    ----------
    kind : str
        sound, Lamb, gravity, computational or vortical; the last two stand still but for wind,
        rotation and damping.
    vertical_order : int
        1 for the gravest sound and gravity wave, 0 for the rest.
    frequency_per_s : float
        The mode goes as exp(i (kappa x + frequency t)) [1/s].
    intrinsic_frequency_per_s : float
        What an observer carried by the wind sees [1/s].
    period_s : float or None
        2 pi over the size of the frequency [s]; None for modes that stand still.
    growth_per_s : float
        Growth rate of the mode in the column itself, negative for decay [1/s].
    entangled : bool
        Whether wind or damping make it part of a transient rather than a wave of its own.
    equivalent_depth_m : float or None
        Depth of shallow water whose waves are as fast: (intrinsic frequency/k_x)^2/g [m].
    vertical_wavelength_m, wavelength_layers : float or None
        Vertical wavelength of the field that holds most energy, by its mean squared slope [m], and
        in layers of the mean thickness there; None for the Lamb wave.
    layer_lowest, layer_highest : int
        Layers that hold 90 % of the energy, both included.
    bottom_m, top_m : float
        Heights of these layers above the ground [m].
    isothermal_per_s : float or None
        Frequency by the closed form of isothermal air at rest [1/s].
    grids : tuple of OnGrid
        What the levels do to the wave under both staggerings; empty if that was not asked for, and
        for modes that stand still.
    """

    kind: str
    vertical_order: int
    frequency_per_s: float
    intrinsic_frequency_per_s: float
    period_s: float | None
    growth_per_s: float
    entangled: bool
    equivalent_depth_m: float | None
    vertical_wavelength_m: float | None
    wavelength_layers: float | None
    layer_lowest: int
    layer_highest: int
    bottom_m: float
    top_m: float
    isothermal_per_s: float | None
    grids: tuple[OnGrid, ...] = ()


@dataclass(frozen=True, slots=True, kw_only=True)
class WaveModes:
    """The normal modes of one air state at one horizontal wave.

    Parameters
    ----------
    air : str
        Air state.
    wavenumber_per_m : float
        kappa, along one axis [1/m].
    wavelength_m : float
        2 pi over it [m].
    wavelength_cells : float
        The same in grid spacings [1].
    gradient_per_m : float
        |k_x|, the gradient of the horizontal scheme along the wave [1/m].
    gradient_to_exact : float
        That over the exact gradient: how far the horizontal scheme itself distorts [1].
    isothermal_k : float or None
        Temperature if the air is isothermal [K].
    energy_conserved : bool
        Whether the modes are orthogonal in the energy, as they are where nothing damps, shears or
        overturns.
    modes : tuple of ModeFound
        Fastest first. Where waves both ways are alike, those of positive frequency stand for both.
    """

    air: str
    wavenumber_per_m: float
    wavelength_m: float
    wavelength_cells: float
    gradient_per_m: float
    gradient_to_exact: float
    isothermal_k: float | None
    energy_conserved: bool
    modes: tuple[ModeFound, ...]


@dataclass(frozen=True, slots=True, kw_only=True)
class ModesAtStep:
    """What one step of a tableau and splitting does to the modes of all sampled waves.

    Parameters
    ----------
    tableau, split : str
        Names in standard spelling.
    errors : StepWaveErrors
        By kind of wave.
    transient : TransientFound
        The largest transient growth.
    """

    tableau: str
    split: str
    errors: StepWaveErrors
    transient: TransientFound


@dataclass(frozen=True, slots=True, kw_only=True)
class ColumnModes:
    """The normal modes of a column.

    Parameters
    ----------
    title : str
        Title of the column file.
    column : ColumnSummary
        The level set.
    staggering : str
        That of the column.
    split_into : int
        Layers that every layer is split into for the comparison with finer levels; 1 if nothing was
        compared.
    waves : tuple of WaveModes
        By air state, the longest wave first.
    at_step : ModesAtStep or None
        What a step does, if one was given.
    notes : tuple of str
        What the reader should know.
    provenance : Provenance
        Where all this comes from.
    """

    title: str
    column: ColumnSummary
    staggering: str
    split_into: int
    waves: tuple[WaveModes, ...]
    at_step: ModesAtStep | None
    notes: tuple[str, ...]
    provenance: Provenance
