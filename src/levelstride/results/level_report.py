"""What ``check`` finds in a column: the levels and the air on them."""

from dataclasses import dataclass

from .dataset import ColumnSummary


@dataclass(frozen=True, slots=True, kw_only=True)
class RatioJump:
    """Two neighbouring layers whose thicknesses differ by more than a factor of 1.2.

    Parameters
    ----------
    layer : int
        The lower of the two layers.
    height_m : float
        Height above the ground of the interface between them [m].
    ratio : float
        Thicker over thinner [1].
    """

    layer: int
    height_m: float
    ratio: float


@dataclass(frozen=True, slots=True, kw_only=True)
class Span:
    """Smallest and largest value."""

    least: float
    largest: float


@dataclass(frozen=True, slots=True, kw_only=True)
class AirReport:
    """One air state on the levels.

    Parameters
    ----------
    name : str
        Name of the air state.
    surface_pressure_pa, lid_pressure_pa : float
        Pressure at ground and lid [Pa].
    sound_speed_m_per_s : Span
        Speed of sound [m/s].
    buoyancy_frequency_per_s : Span
        Brunt-Vaisala frequency [1/s], negative where the square is: -sqrt(-N^2).
    wind_m_per_s : Span
        Wind along the wave [m/s].
    unstable_layers : tuple of int
        Layers with N^2 below zero.
    low_richardson_interfaces : tuple of int
        Interior interfaces with a Richardson number below 1/4.
    lowest_richardson : float or None
        Smallest Richardson number of an interior interface [1]; None without shear.
    """

    name: str
    surface_pressure_pa: float
    lid_pressure_pa: float
    sound_speed_m_per_s: Span
    buoyancy_frequency_per_s: Span
    wind_m_per_s: Span
    unstable_layers: tuple[int, ...]
    low_richardson_interfaces: tuple[int, ...]
    lowest_richardson: float | None


@dataclass(frozen=True, slots=True, kw_only=True)
class LevelReport:
    """The column as ``check`` shows it.

    Parameters
    ----------
    title : str
        Title of the column file.
    source : str
        The column file as it was named.
    column_sha256 : str
        Hash of the resolved column.
    sound : bool
        Whether the file can be used; a file with mistakes never gets a report.
    column : ColumnSummary
        The level set.
    surface_altitude_m : float
        Altitude of the ground [m].
    jumps : tuple of RatioJump
        Jumps of the thickness ratio above 1.2, from the ground up.
    slope : float
        Slope of the coordinate surfaces at the ground [1].
    steepness : float
        s_0 dx/dz_0: how many lowest layers the surface climbs across one grid spacing [1].
    airs : tuple of AirReport
        The air states.
    remarks : tuple of str
        What a user should look at, one sentence each.
    """

    title: str
    source: str
    column_sha256: str
    sound: bool
    column: ColumnSummary
    surface_altitude_m: float
    jumps: tuple[RatioJump, ...]
    slope: float
    steepness: float
    airs: tuple[AirReport, ...]
    remarks: tuple[str, ...]
