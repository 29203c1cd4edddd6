"""The whole column as frozen records: everything that a time step can depend on."""

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any, Literal, TypeAlias

from .air import Background
from .arrays import Array, read_only
from .levels import Levels

Gradient: TypeAlias = Literal["staggered", "centred-2", "centred-4", "exact", "given"]
Advection: TypeAlias = Literal["centred-2", "centred-4", "centred-6", "upwind-3", "upwind-5"]
VerticalAdvection: TypeAlias = Literal["centred", "upwind-1", "upwind-3"]
Staggering: TypeAlias = Literal["charney-phillips", "lorenz"]
LowestSlopeGradient: TypeAlias = Literal["half", "full"]
DampingForm: TypeAlias = Literal["horizontal", "three-dimensional"]

DEFAULT_TABLEAUX = (
    "ARS(2,3,2)",
    "ARS(2,3,3)",
    "ARS(3,4,3)",
    "SSP2(3,3,2)",
    "ARK2(2,3,2)",
    "IMKG343a",
    "Trap2(2,3,2)",
    "UJ3(1,3,2)",
)
DEFAULT_SPLITS = ("sound", "sound+buoyancy", "sound+divergence", "sound+buoyancy+divergence")


@dataclass(frozen=True, slots=True, eq=False)
class Horizontal:
    """The horizontal grid and its schemes.

    Parameters
    ----------
    grid_spacing_m : float
        Horizontal grid spacing dx [m].
    gradient : str
        Horizontal gradient scheme.
    directions : int
        1 or 2; with 2 the wave lies along the diagonal.
    largest_gradient_per_m : float or None
        Largest abs(kx) of the user's own operator [1/m], with ``gradient = "given"`` only.
    advection : str
        Horizontal advection scheme.
    """

    grid_spacing_m: float
    gradient: Gradient = "staggered"
    directions: int = 2
    largest_gradient_per_m: float | None = None
    advection: Advection = "upwind-3"


@dataclass(frozen=True, slots=True, eq=False)
class Advice:
    """What is asked of the advice: methods, tolerances, intervals and costs."""

    tableaux: tuple[str, ...] = DEFAULT_TABLEAUX
    splits: tuple[str, ...] = DEFAULT_SPLITS
    tableau_file: str | None = None
    safety: float = 0.9
    divides_s: tuple[float, ...] = ()
    efolding_s: float = 86400.0
    transient_limit: float = 1000.0
    frequency_error: float = 0.01
    amplitude_loss_per_period: float = 0.05
    cost_explicit: float = 1.0
    cost_solve: float = 1.0
    cost_exchange: float = 0.5


@dataclass(frozen=True, slots=True, eq=False)
class Column:
    """One column, ready for the operator.

    Parameters
    ----------
    title : str
        Title of the column file.
    source : str
        Path as given, or ``<memory>``.
    digest : str
        SHA-256 of the resolved definition as canonical JSON; referenced files enter with their
        contents.
    levels : Levels
        The interfaces.
    airs : tuple of Background
        The air states, at least one.
    reference : Background or None
        Reference state of the implicit operator.
    horizontal : Horizontal
        Horizontal grid and schemes.
    staggering : str
        ``charney-phillips`` or ``lorenz``.
    slope_f : (nlev+1,) array
        Slope of the coordinate surfaces at the interfaces [1]; zero without terrain.
    lowest_slope_gradient : str
        ``half`` or ``full``: how the slope gradient of the lowest layer is taken.
    vertical_advection : str
        Vertical advection scheme.
    diffusivity_c, diffusivity_f : (nlev,), (nlev+1,) array
        Vertical diffusivity K [m2/s].
    horizontal_diffusion : float
        Coefficient nu [m^(2m)/s].
    horizontal_diffusion_order : int
        Order m: 1, 2 or 3.
    divergence_damping : float
        Coefficient alpha [m2/s].
    divergence_damping_form : str
        ``horizontal`` or ``three-dimensional``.
    upper_damping_f : (nlev+1,) array
        Rate r(z) of the absorbing layer at the interfaces [1/s].
    coriolis_per_s : float
        Coriolis parameter f [1/s]; 0 means no rotation.
    wind_given : bool
        Whether the file has a ``[wind]`` table.
    split : mapping, str or None
        Splitting named by the file, or term -> treatment; names are checked where splittings are
        known.
    advice : Advice
        What is asked of the advice.
    definition : mapping
        The resolved file as plain data; building it again gives the same column.
    left_out : frozenset of str
        Terms that its equations lack, for asking what if; none as it is read.
    """

    title: str
    source: str
    digest: str
    levels: Levels
    airs: tuple[Background, ...]
    reference: Background | None
    horizontal: Horizontal
    staggering: Staggering
    slope_f: Array
    lowest_slope_gradient: LowestSlopeGradient
    vertical_advection: VerticalAdvection
    diffusivity_c: Array
    diffusivity_f: Array
    horizontal_diffusion: float
    horizontal_diffusion_order: int
    divergence_damping: float
    divergence_damping_form: DampingForm
    upper_damping_f: Array
    coriolis_per_s: float
    wind_given: bool
    split: Mapping[str, str] | str | None
    advice: Advice
    definition: Mapping[str, Any]
    left_out: frozenset[str] = frozenset()

    def __post_init__(self) -> None:
        for name in ("slope_f", "diffusivity_c", "diffusivity_f", "upper_damping_f"):
            object.__setattr__(self, name, read_only(getattr(self, name)))
