"""The model of a column file: which keys there are, their types, ranges, units and meaning.

This is the only module that knows pydantic. It checks shapes and ranges of single values; what
several values mean together is checked where they are used.
"""

from collections.abc import Mapping
from typing import Annotated, Any, Final, Literal, TypeAlias

from pydantic import (
    BaseModel,
    BeforeValidator,
    ConfigDict,
    Field,
    GetJsonSchemaHandler,
    ValidationError,
)
from pydantic_core import CoreSchema

from .column import (
    DEFAULT_SPLITS,
    DEFAULT_TABLEAUX,
    Advection,
    DampingForm,
    Gradient,
    LowestSlopeGradient,
    Staggering,
    VerticalAdvection,
)
from .explain import explain, keys_of
from .glossary import meaning
from .problems import Problems

Fraction: TypeAlias = Annotated[float, Field(gt=0.0, le=1.0)]
Height: TypeAlias = Annotated[float, Field(ge=-1e3, le=1e6)]
Kelvin: TypeAlias = Annotated[float, Field(ge=100.0, le=1500.0)]
Pascal: TypeAlias = Annotated[float, Field(ge=2000.0, le=2e5)]
Speed: TypeAlias = Annotated[float, Field(ge=-500.0, le=500.0)]
Thickness: TypeAlias = Annotated[float, Field(ge=1e-3, le=1e6)]
Interval: TypeAlias = Annotated[float, Field(ge=1e-3, le=1e9)]
Diffusivity: TypeAlias = Annotated[float, Field(ge=0.0, le=1e7)]
Coefficient: TypeAlias = Annotated[float, Field(ge=0.0, le=1e30)]


class Table(BaseModel):
    """A table of the file: no unknown keys, no silent conversions, no NaN or infinity."""

    model_config = ConfigDict(extra="forbid", strict=True, allow_inf_nan=False, frozen=True)

    @classmethod
    def __get_pydantic_json_schema__(
        cls, core_schema: CoreSchema, handler: GetJsonSchemaHandler
    ) -> dict[str, Any]:
        """Add what every key means to the JSON Schema."""
        made = handler(core_schema)
        for key, described in handler.resolve_ref_schema(made).get("properties", {}).items():
            described["description"] = meaning(cls.__name__, key)
        return made


# --- levels ---------------------------------------------------------------------------------------

At: TypeAlias = Literal["interfaces", "centres"]
Order: TypeAlias = Literal["bottom-up", "top-down"]
Layers: TypeAlias = Annotated[int, Field(ge=2)]


class TableLevels(Table):
    """Heights above the ground, listed in the column file."""

    kind: Literal["table"]
    heights_m: list[Height]
    at: At = "interfaces"
    order: Order = "bottom-up"


class FileLevels(Table):
    """Heights above the ground in a CSV file: one column, or the column height_m of several."""

    kind: Literal["file"]
    file: str = Field(min_length=1)
    at: At = "interfaces"
    order: Order = "bottom-up"


class UniformLevels(Table):
    """Layers of one thickness."""

    kind: Literal["uniform"]
    layers: Layers
    top_m: Thickness


class GeometricLevels(Table):
    """Layers that grow by one ratio, found so that their sum is top_m."""

    kind: Literal["geometric"]
    layers: Layers
    top_m: Thickness
    lowest_layer_m: Thickness


class TanhLevels(Table):
    """Interfaces top_m [1 + tanh(a (f/n - 1))/tanh(a)], a found from lowest_layer_m."""

    kind: Literal["tanh"]
    layers: Layers
    top_m: Thickness
    lowest_layer_m: Thickness


class HybridPressureLevels(Table):
    """Interfaces at p = a reference_pressure_pa + b p_s, or p = ap + b p_s.

    p_s is the surface pressure of the first air state, and heights are those of the first air
    state.
    """

    kind: Literal["hybrid-pressure"]
    a: list[Annotated[float, Field(ge=-1.0, le=2.0)]] | None = None
    ap: list[Annotated[float, Field(ge=-1e5, le=2e5)]] | None = None
    b: list[Annotated[float, Field(ge=-1.0, le=2.0)]]
    reference_pressure_pa: Pascal = 1e5
    order: Order = "bottom-up"


LevelsTable: TypeAlias = Annotated[
    TableLevels | FileLevels | UniformLevels | GeometricLevels | TanhLevels | HybridPressureLevels,
    Field(discriminator="kind"),
]

# --- air ------------------------------------------------------------------------------------------

Name: TypeAlias = Annotated[str, Field(min_length=1, max_length=80)]


class StandardAir(Table):
    """U.S. Standard Atmosphere 1976, to 84.852 km geopotential altitude."""

    kind: Literal["standard"]
    name: Name | None = None
    surface_pressure_pa: Pascal | None = None


class GroundedAir(Table):
    """What every air state but the standard one has."""

    name: Name | None = None
    surface_pressure_pa: Pascal = 101325.0


class IsothermalAir(GroundedAir):
    """One temperature at every height."""

    kind: Literal["isothermal"]
    temperature_k: Kelvin


class ConstantNAir(GroundedAir):
    """Constant Brunt-Vaisala frequency from the ground up."""

    kind: Literal["constant-n"]
    surface_temperature_k: Kelvin
    buoyancy_frequency_per_s: float = Field(ge=0.0, le=0.5)


class SoundingAir(Table):
    """A measured ascent, from a CSV file or listed here; rows run upward.

    Between rows temperature is linear in height; below the first and above the last row it keeps
    the value of that row. Given by pressure alone, heights follow from hydrostatic balance with the
    ground at surface_pressure_pa.
    """

    kind: Literal["sounding"]
    name: Name | None = None
    surface_pressure_pa: Pascal | None = None
    file: str | None = Field(default=None, min_length=1)
    heights_m: list[float] | None = None
    pressures_pa: list[float] | None = None
    temperatures_k: list[float] | None = None
    winds_m_per_s: list[float] | None = None


OneAir: TypeAlias = Annotated[
    StandardAir | IsothermalAir | ConstantNAir | SoundingAir, Field(discriminator="kind")
]


def _as_list(value: object) -> object:
    return [value] if isinstance(value, Mapping) else value


Airs: TypeAlias = Annotated[
    list[OneAir], Field(min_length=1, max_length=100), BeforeValidator(_as_list)
]


class Wind(Table):
    """What every wind has."""

    advection: Advection = "upwind-3"


class UniformWind(Wind):
    """One wind at every height."""

    kind: Literal["uniform"]
    speed_m_per_s: Speed


class LinearWind(Wind):
    """Wind that changes linearly with height."""

    kind: Literal["linear"]
    surface_m_per_s: Speed = 0.0
    shear_per_s: float = Field(ge=-10.0, le=10.0)


class TableWind(Wind):
    """Wind linear between listed heights above the ground, constant beyond them."""

    kind: Literal["table"]
    heights_m: list[Height] = Field(min_length=1)
    speeds_m_per_s: list[Speed] = Field(min_length=1)


class SoundingWind(Wind):
    """The wind of the air's own sounding."""

    kind: Literal["sounding"]


WindTable: TypeAlias = Annotated[
    UniformWind | LinearWind | TableWind | SoundingWind, Field(discriminator="kind")
]


class UpdraftTable(Table):
    """Frozen vertical wind, 0 at ground and lid: a peak speed (sine between them) or a table."""

    speed_m_per_s: Speed | None = None
    heights_m: list[Height] | None = None
    speeds_m_per_s: list[Speed] | None = None
    scheme: VerticalAdvection = "upwind-3"


class HorizontalTable(Table):
    """The horizontal grid."""

    grid_spacing_m: float = Field(ge=1e-3, le=1e8)
    gradient: Gradient = "staggered"
    directions: int = Field(default=2, ge=1, le=2)
    largest_gradient_per_m: float | None = Field(default=None, ge=1e-9, le=1e4)


class ColumnTable(Table):
    """How the unknowns are staggered."""

    staggering: Staggering = "charney-phillips"


class TerrainTable(Table):
    """Terrain below the column and the slope of the coordinate surfaces over it."""

    slope: float = Field(default=0.0, ge=-100.0, le=100.0)
    decay: Literal["linear", "exponential"] = "linear"
    decay_height_m: Thickness | None = None
    lowest_slope_gradient: LowestSlopeGradient = "half"
    surface_altitude_m: float = Field(default=0.0, ge=-1000.0, le=20000.0)
    compression: Literal["linear", "none"] = "linear"


class UpperDampingTable(Table):
    """Absorbing layer for w below the lid: r = rate sin^2(pi/2 (z - base)/(top - base))."""

    rate_per_s: float = Field(ge=0.0, le=1e3)
    base_m: float = Field(ge=0.0, le=1e6)


class DiffusionTable(Table):
    """Vertical and horizontal diffusion."""

    vertical_m2_per_s: Diffusivity | None = None
    heights_m: list[Height] | None = None
    values_m2_per_s: list[Diffusivity] | None = None
    horizontal_coefficient: Coefficient = 0.0
    horizontal_order: int = Field(default=1, ge=1, le=3)


class DivergenceDampingTable(Table):
    """Damping of divergence in the equation of u."""

    coefficient_m2_per_s: Coefficient
    form: DampingForm = "horizontal"


class RotationTable(Table):
    """Rotation, by the Coriolis parameter or the latitude."""

    coriolis_per_s: float | None = Field(default=None, ge=-1e-2, le=1e-2)
    latitude_deg: float | None = Field(default=None, ge=-90.0, le=90.0)


def _whole(value: object) -> object:
    return int(value) if isinstance(value, float) and value.is_integer() else value


class SchemeTable(Table):
    """Knobs of the baselines; each has those that it names."""

    substeps: Annotated[int, BeforeValidator(_whole), Field(ge=1, le=60)] | None = None
    off_centring: float | None = Field(default=None, ge=0.0, le=1.0)
    divergence_damping: float | None = Field(default=None, ge=0.0, le=1.0)
    filter: float | None = Field(default=None, ge=0.0, le=0.5)
    filter_share: float | None = Field(default=None, ge=0.0, le=1.0)


class AdviceTable(Table):
    """What is asked of the advice."""

    tableaux: list[str] = Field(default=list(DEFAULT_TABLEAUX), min_length=1)
    splits: list[str] = Field(default=list(DEFAULT_SPLITS), min_length=1)
    tableau_file: str | None = Field(default=None, min_length=1)
    safety: Fraction = 0.9
    divides_s: list[Interval] = []
    efolding_s: Interval = 86400.0
    transient_limit: float = Field(default=1000.0, ge=1.0, le=1e12)
    frequency_error: Fraction = 0.01
    amplitude_loss_per_period: Fraction = 0.05
    cost_explicit: float = Field(default=1.0, ge=0.0, le=1e9)
    cost_solve: float = Field(default=1.0, ge=0.0, le=1e9)
    cost_exchange: float = Field(default=0.5, ge=0.0, le=1e9)


def _as_named(value: object) -> object:
    return {"name": value} if isinstance(value, str) else value


SplitTable: TypeAlias = Annotated[dict[str, str], Field(min_length=1), BeforeValidator(_as_named)]


class Definition(Table):
    """A column file for Levelstride. All units are SI and stand in the keys."""

    title: str = Field(default="untitled column", max_length=200)
    levels: LevelsTable
    air: Airs
    horizontal: HorizontalTable
    column: ColumnTable = ColumnTable()
    wind: WindTable | None = None
    updraft: UpdraftTable | None = None
    terrain: TerrainTable = TerrainTable()
    upper_damping: UpperDampingTable | None = None
    diffusion: DiffusionTable | None = None
    divergence_damping: DivergenceDampingTable | None = None
    rotation: RotationTable | None = None
    reference: OneAir | None = None
    split: SplitTable | None = None
    scheme: SchemeTable | None = None
    advice: AdviceTable = AdviceTable()


_STAND_INS: Final[dict[str, Any]] = {
    "levels": {"kind": "uniform", "layers": 2, "top_m": 1000.0},
    "air": [{"kind": "standard"}],
    "horizontal": {"grid_spacing_m": 1000.0},
}


def parse(raw: dict[str, Any], problems: Problems) -> tuple[Definition, frozenset[str]]:
    """Check the shape of a column file.

    A mistake in one table must not hide those in the next: a stand-in takes its place.

    Parameters
    ----------
    raw : dict
        The file as plain data.
    problems : Problems
        Where mistakes are added.

    Returns
    -------
    definition : Definition
        The model of the file, stand-ins included.
    broken : frozenset of str
        Names of the tables that are stand-ins.
    """
    try:
        return Definition.model_validate(raw), frozenset()
    except ValidationError as error:
        details = error.errors(include_url=False)
    known, single_air = keys_of(Definition), isinstance(raw.get("air"), Mapping)
    for detail in details:
        explain(detail, known, problems, single_air=single_air)
    broken = frozenset(str(detail["loc"][0]) for detail in details)
    rest = {key: value for key, value in raw.items() if key not in broken}
    stand_ins = {key: value for key, value in _STAND_INS.items() if key in broken}
    return Definition.model_validate(rest | stand_ins), broken
