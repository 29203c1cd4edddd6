"""The model of a column file: which keys there are, their types, ranges, units and meaning.

This is the only module that knows pydantic. It checks shapes and ranges of single values; what several
values mean together is checked where they are used.
"""

from collections.abc import Mapping
from typing import Annotated, Any, Final, Literal, TypeAlias

from pydantic import (
    BaseModel,
    BeforeValidator,
    ConfigDict,
    Field,
    ValidationError,
)
from pydantic_core import ErrorDetails

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
from .problems import Problems, nearest

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


# --- levels ---------------------------------------------------------------------------------------

At: TypeAlias = Literal["interfaces", "centres"]
Order: TypeAlias = Literal["bottom-up", "top-down"]
_AT = "Whether the heights are those of the interfaces (ground and lid included) or layer centres"
_ORDER = "Direction in which the values are listed"
_LOWEST = "Thickness of the lowest layer [m]"
_TOP = "Height of the lid above the ground [m], before any compression by the terrain"
_LAYERS = "Number of layers"
Layers: TypeAlias = Annotated[int, Field(ge=2, description=_LAYERS)]


class TableLevels(Table):
    """Heights above the ground, listed in the column file."""

    kind: Literal["table"]
    heights_m: list[Height] = Field(description="Heights above the ground [m]")
    at: At = Field(default="interfaces", description=_AT)
    order: Order = Field(default="bottom-up", description=_ORDER)


class FileLevels(Table):
    """Heights above the ground in a CSV file: one column, or the column height_m of several."""

    kind: Literal["file"]
    file: str = Field(min_length=1, description="CSV file, relative to the column file")
    at: At = Field(default="interfaces", description=_AT)
    order: Order = Field(default="bottom-up", description=_ORDER)


class UniformLevels(Table):
    """Layers of one thickness."""

    kind: Literal["uniform"]
    layers: Layers
    top_m: Thickness = Field(description=_TOP)


class GeometricLevels(Table):
    """Layers that grow by one ratio, found so that their sum is top_m."""

    kind: Literal["geometric"]
    layers: Layers
    top_m: Thickness = Field(description=_TOP)
    lowest_layer_m: Thickness = Field(description=_LOWEST)


class TanhLevels(Table):
    """Interfaces top_m [1 + tanh(a (f/n - 1))/tanh(a)], a found from lowest_layer_m."""

    kind: Literal["tanh"]
    layers: Layers
    top_m: Thickness = Field(description=_TOP)
    lowest_layer_m: Thickness = Field(description=_LOWEST)


class HybridPressureLevels(Table):
    """Interfaces at p = a reference_pressure_pa + b p_s, or p = ap + b p_s.

    p_s is the surface pressure of the first air state, and heights are those of the first air state.
    """

    kind: Literal["hybrid-pressure"]
    a: list[Annotated[float, Field(ge=-1.0, le=2.0)]] | None = Field(
        default=None, description="Coefficients a at the interfaces [1]; this or ap"
    )
    ap: list[Annotated[float, Field(ge=-1e5, le=2e5)]] | None = Field(
        default=None, description="Coefficients a at the interfaces as pressures [Pa]; this or a"
    )
    b: list[Annotated[float, Field(ge=-1.0, le=2.0)]] = Field(
        description="Coefficients b at the interfaces [1]"
    )
    reference_pressure_pa: Pascal = Field(
        default=1e5, description="Pressure that multiplies a [Pa]"
    )
    order: Order = Field(default="bottom-up", description=_ORDER)


LevelsTable: TypeAlias = Annotated[
    TableLevels | FileLevels | UniformLevels | GeometricLevels | TanhLevels | HybridPressureLevels,
    Field(discriminator="kind", description="The level set"),
]

# --- air ------------------------------------------------------------------------------------------

_NAME = "Name of the air state, for the answers"
Name: TypeAlias = Annotated[str, Field(min_length=1, max_length=80)]


class StandardAir(Table):
    """U.S. Standard Atmosphere 1976, to 84.852 km geopotential altitude."""

    kind: Literal["standard"]
    name: Name | None = Field(default=None, description=_NAME)
    surface_pressure_pa: Pascal | None = Field(
        default=None,
        description="Pressure at the ground [Pa]; by default that of the standard at the altitude",
    )


class GroundedAir(Table):
    """What every air state but the standard one has."""

    name: Name | None = Field(default=None, description=_NAME)
    surface_pressure_pa: Pascal = Field(default=101325.0, description="Pressure at the ground [Pa]")


class IsothermalAir(GroundedAir):
    """One temperature at every height."""

    kind: Literal["isothermal"]
    temperature_k: Kelvin = Field(description="Temperature [K]")


class ConstantNAir(GroundedAir):
    """Constant Brunt-Vaisala frequency from the ground up."""

    kind: Literal["constant-n"]
    surface_temperature_k: Kelvin = Field(description="Temperature at the ground [K]")
    buoyancy_frequency_per_s: float = Field(
        ge=0.0, le=0.5, description="Brunt-Vaisala frequency N [1/s]"
    )


class SoundingAir(Table):
    """A measured ascent, from a CSV file or listed here; rows run upward.

    Between rows temperature is linear in height; below the first and above the last row it keeps the
    value of that row. Given by pressure alone, heights follow from hydrostatic balance with the ground
    at surface_pressure_pa.
    """

    kind: Literal["sounding"]
    name: Name | None = Field(default=None, description=_NAME)
    surface_pressure_pa: Pascal | None = Field(
        default=None,
        description="Pressure at the ground [Pa]; by default that of the ascent where it has heights "
        "and pressures, otherwise 101325",
    )
    file: str | None = Field(
        default=None,
        min_length=1,
        description="CSV file, relative to the column file, with columns height_m or pressure_pa, "
        "temperature_k and optionally wind_m_per_s",
    )
    heights_m: list[float] | None = Field(
        default=None, description="Altitudes above sea level [m], instead of a file"
    )
    pressures_pa: list[float] | None = Field(
        default=None, description="Pressures [Pa], instead of a file"
    )
    temperatures_k: list[float] | None = Field(
        default=None, description="Temperatures [K], instead of a file"
    )
    winds_m_per_s: list[float] | None = Field(
        default=None, description="Wind along the wave [m/s], instead of a file"
    )


OneAir: TypeAlias = Annotated[
    StandardAir | IsothermalAir | ConstantNAir | SoundingAir, Field(discriminator="kind")
]


def _as_list(value: object) -> object:
    return [value] if isinstance(value, Mapping) else value


Airs: TypeAlias = Annotated[
    list[OneAir],
    BeforeValidator(_as_list),
    Field(
        min_length=1, max_length=100, description="Air states; [air] for one, [[air]] for several"
    ),
]

# --- wind and updraft -----------------------------------------------------------------------------


class Wind(Table):
    """What every wind has."""

    advection: Advection = Field(default="upwind-3", description="Horizontal advection scheme")


class UniformWind(Wind):
    """One wind at every height."""

    kind: Literal["uniform"]
    speed_m_per_s: Speed = Field(description="Wind along the wave [m/s]")


class LinearWind(Wind):
    """Wind that changes linearly with height."""

    kind: Literal["linear"]
    surface_m_per_s: Speed = Field(default=0.0, description="Wind at the ground [m/s]")
    shear_per_s: float = Field(ge=-10.0, le=10.0, description="Change of wind with height [1/s]")


class TableWind(Wind):
    """Wind linear between listed heights above the ground, constant beyond them."""

    kind: Literal["table"]
    heights_m: list[Height] = Field(min_length=1, description="Heights above the ground [m]")
    speeds_m_per_s: list[Speed] = Field(min_length=1, description="Wind at these heights [m/s]")


class SoundingWind(Wind):
    """The wind of the air's own sounding."""

    kind: Literal["sounding"]


WindTable: TypeAlias = Annotated[
    UniformWind | LinearWind | TableWind | SoundingWind,
    Field(discriminator="kind", description="Horizontal wind along the wave"),
]


class UpdraftTable(Table):
    """Frozen vertical wind: a peak speed (sine between ground and lid) or a table; 0 at ground and lid."""

    speed_m_per_s: Speed | None = Field(
        default=None, description="Peak W of W(z) = speed sin(pi z/top) [m/s]"
    )
    heights_m: list[Height] | None = Field(
        default=None, description="Heights above the ground [m], instead of speed_m_per_s"
    )
    speeds_m_per_s: list[Speed] | None = Field(default=None, description="W at these heights [m/s]")
    scheme: VerticalAdvection = Field(default="upwind-3", description="Vertical advection scheme")


# --- the other tables -----------------------------------------------------------------------------


class HorizontalTable(Table):
    """The horizontal grid."""

    grid_spacing_m: float = Field(ge=1e-3, le=1e8, description="Horizontal grid spacing dx [m]")
    gradient: Gradient = Field(default="staggered", description="Horizontal gradient scheme")
    directions: int = Field(
        default=2,
        ge=1,
        le=2,
        description="Horizontal directions; with 2 (default) the wave is diagonal",
    )
    largest_gradient_per_m: float | None = Field(
        default=None,
        ge=1e-9,
        le=1e4,
        description='Largest |kx| of your own operator [1/m]; with gradient = "given" only',
    )


class ColumnTable(Table):
    """How the unknowns are staggered."""

    staggering: Staggering = Field(
        default="charney-phillips", description="Where theta' lives: interfaces or layers (lorenz)"
    )


class TerrainTable(Table):
    """Terrain below the column and the slope of the coordinate surfaces over it."""

    slope: float = Field(default=0.0, ge=-100.0, le=100.0, description="Slope at the ground [1]")
    decay: Literal["linear", "exponential"] = Field(
        default="linear",
        description="How the slope decays with height: to 0 at the lid, or exp(-z/h)",
    )
    decay_height_m: Thickness | None = Field(
        default=None, description='Decay height h [m]; with decay = "exponential" only'
    )
    lowest_slope_gradient: LowestSlopeGradient = Field(
        default="half", description="Whether the slope gradient of the lowest layer is halved"
    )
    surface_altitude_m: float = Field(
        default=0.0, ge=-1000.0, le=20000.0, description="Geopotential altitude of the ground [m]"
    )
    compression: Literal["linear", "none"] = Field(
        default="linear",
        description="linear: heights are multiplied by (top - altitude)/top; none: taken as given. "
        "hybrid-pressure levels are never compressed",
    )


class UpperDampingTable(Table):
    """Absorbing layer for w below the lid: r = rate sin^2(pi/2 (z - base)/(top - base))."""

    rate_per_s: float = Field(ge=0.0, le=1e3, description="Rate at the lid [1/s]")
    base_m: float = Field(ge=0.0, le=1e6, description="Height of its base above the ground [m]")


class DiffusionTable(Table):
    """Vertical and horizontal diffusion."""

    vertical_m2_per_s: Diffusivity | None = Field(
        default=None, description="Vertical diffusivity K, constant with height [m2/s]"
    )
    heights_m: list[Height] | None = Field(
        default=None, description="Heights above the ground [m], instead of a constant K"
    )
    values_m2_per_s: list[Diffusivity] | None = Field(
        default=None, description="K at these heights, linear between, constant beyond [m2/s]"
    )
    horizontal_coefficient: Coefficient = Field(
        default=0.0, description="Horizontal diffusion coefficient nu [m^(2 order)/s]"
    )
    horizontal_order: int = Field(
        default=1, ge=1, le=3, description="Order m of horizontal diffusion: nu (Laplacian)^m"
    )


class DivergenceDampingTable(Table):
    """Damping of divergence in the equation of u."""

    coefficient_m2_per_s: Coefficient = Field(description="Coefficient alpha [m2/s]")
    form: DampingForm = Field(default="horizontal", description="Which divergence is damped")


class RotationTable(Table):
    """Rotation, by the Coriolis parameter or the latitude."""

    coriolis_per_s: float | None = Field(
        default=None, ge=-1e-2, le=1e-2, description="Coriolis parameter f [1/s]; this or latitude"
    )
    latitude_deg: float | None = Field(
        default=None, ge=-90.0, le=90.0, description="Latitude [degrees]; this or coriolis_per_s"
    )


class AdviceTable(Table):
    """What is asked of the advice."""

    tableaux: list[str] = Field(
        default=list(DEFAULT_TABLEAUX), min_length=1, description="IMEX tableaux to try"
    )
    splits: list[str] = Field(
        default=list(DEFAULT_SPLITS), min_length=1, description="Splittings to try"
    )
    tableau_file: str | None = Field(
        default=None, min_length=1, description="TOML file of your own tableaux"
    )
    safety: Fraction = Field(default=0.9, description="Share of the stable step to use [1]")
    divides_s: list[Interval] = Field(
        default=[], description="Intervals that the step must divide into whole steps [s]"
    )
    efolding_s: Interval = Field(default=86400.0, description="Tolerated e-folding time [s]")
    transient_limit: float = Field(
        default=1000.0, ge=1.0, le=1e12, description="Tolerated transient amplification [1]"
    )
    frequency_error: Fraction = Field(
        default=0.01, description="Tolerated frequency error of resolved gravity waves [1]"
    )
    amplitude_loss_per_period: Fraction = Field(
        default=0.05, description="Tolerated amplitude change per period of these waves [1]"
    )
    cost_explicit: float = Field(
        default=1.0, ge=0.0, le=1e9, description="Cost of an evaluation [1]"
    )
    cost_solve: float = Field(default=1.0, ge=0.0, le=1e9, description="Cost of a solve [1]")
    cost_exchange: float = Field(default=0.5, ge=0.0, le=1e9, description="Cost of an exchange [1]")


def _as_named(value: object) -> object:
    return {"name": value} if isinstance(value, str) else value


SplitTable: TypeAlias = Annotated[
    dict[str, str],
    BeforeValidator(_as_named),
    Field(min_length=1, description="name = a splitting, or a table term = treatment"),
]


class Definition(Table):
    """A column file for Levelstride. All units are SI and stand in the keys."""

    title: str = Field(default="untitled column", max_length=200, description="Title of the column")
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
    reference: OneAir | None = Field(
        default=None, description="Reference state of the implicit part"
    )
    split: SplitTable | None = None
    advice: AdviceTable = AdviceTable()


# --- reading, with every mistake in our own words ---------------------------------------------------

_TAG_DEPTH: Final = {"levels": 1, "wind": 1, "reference": 1, "air": 2}
_STAND_INS: Final[dict[str, Any]] = {
    "levels": {"kind": "uniform", "layers": 2, "top_m": 1000.0},
    "air": [{"kind": "standard"}],
    "horizontal": {"grid_spacing_m": 1000.0},
}
_WHAT: Final = {
    "float_type": "must be a number",
    "int_type": "must be a whole number, written without a point",
    "int_from_float": "must be a whole number",
    "string_type": "must be a text in quotes",
    "list_type": "must be a list in square brackets",
    "dict_type": "must be a table",
    "model_type": "must be a table",
    "model_attributes_type": "must be a table",
    "finite_number": "must be a finite number",
    "string_too_short": "must not be empty",
    "string_too_long": "must be shorter",
    "greater_than": "must be greater than {gt:g}",
    "greater_than_equal": "must be at least {ge:g}",
    "less_than": "must be less than {lt:g}",
    "less_than_equal": "must be at most {le:g}",
    "too_short": "must have at least {min_length} entries",
    "too_long": "must have at most {max_length} entries",
    "literal_error": "must be one of {expected}",
}


def _field_of(name: str) -> Any:
    return Definition.model_fields[name].annotation


def _variants(annotation: Any) -> list[type[Table]]:
    """Every table model that an annotation of the file's model may hold."""
    if isinstance(annotation, type) and issubclass(annotation, Table):
        return [annotation]
    inner = getattr(annotation, "__args__", ())
    return [model for part in inner for model in _variants(part)]


def _kinds(name: str) -> dict[str, type[Table]]:
    """Table models of a top-level table by their kind; the empty kind where there is but one."""
    found: dict[str, type[Table]] = {}
    for model in _variants(_field_of(name)):
        kind = model.model_fields.get("kind")
        found[kind.annotation.__args__[0] if kind is not None else ""] = model  # type: ignore[union-attr]
    return found


def _path(location: tuple[int | str, ...], single_air: bool) -> tuple[str, str]:
    """Key path as a user writes it, and the kind of its table ("" where it has none)."""
    depth = _TAG_DEPTH.get(str(location[0]), 0)
    kind = str(location[depth]) if depth and len(location) > depth else ""
    parts = [part for i, part in enumerate(location) if not (kind and i == depth)]
    if single_air and parts[0] == "air" and len(parts) > 1:
        del parts[1]
    text = ""
    for part in parts:
        text += f"[{part}]" if isinstance(part, int) else f".{part}" if text else part
    return text, kind


def _hint(key: str, value: object) -> str:
    """Suggest the conversion where a value tells that it is in another unit."""
    if isinstance(value, bool) or not isinstance(value, int | float):
        return ""
    if key.endswith("_k") and -130.0 < value < 70.0:
        return f"; it looks like degrees Celsius: write {value + 273.15:.2f}"
    if key.endswith("_pa") and 20.0 <= value < 2000.0:
        return f"; it looks like hPa: write {value * 100.0:.1f}"
    return ""


def _describe(top: str, kind: str, key: str) -> str:
    model = _kinds(top).get(kind) if top in Definition.model_fields else None
    info = model.model_fields.get(key) if model is not None else None
    return f" ({info.description})" if info is not None and info.description else ""


def _wrong_key(top: str, kind: str, key: str) -> str:
    if not top:
        return f"unknown key; {nearest(key, Definition.model_fields)}"
    kinds = _kinds(top)
    known = kinds[kind].model_fields if kind in kinds else {}
    others = [
        other for other, model in kinds.items() if key in model.model_fields and other != kind
    ]
    if others:
        return f'not a key of kind "{kind}" but of "{others[0]}"; remove it or change the kind'
    return f"unknown key; {nearest(key, known)}"


def _explain(error: ErrorDetails, problems: Problems, single_air: bool) -> None:
    location = error["loc"]
    path, kind = _path(location, single_air)
    top, kinds = str(location[0]), error["type"]
    key = next((str(part) for part in reversed(location) if isinstance(part, str)), "")
    value = error["input"]
    if kinds == "missing":
        if len(location) == 1:
            problems.add(path, f"this table is missing; add [{top}]")
        else:
            problems.add(path, f"this key is missing; add it{_describe(top, kind, key)}")
    elif kinds == "extra_forbidden":
        problems.add(path, _wrong_key(top if len(location) > 1 else "", kind, key))
    elif kinds == "union_tag_not_found":
        choices = ", ".join(f'"{name}"' for name in _kinds(top))
        problems.add(f"{path}.kind", f"this key is missing; it must be one of {choices}")
    elif kinds == "union_tag_invalid":
        choices = ", ".join(f'"{name}"' for name in _kinds(top))
        given = value.get("kind") if isinstance(value, Mapping) else value
        near = nearest(str(given), _kinds(top)) if isinstance(given, str) else ""
        near = f"; {near}" if near.startswith("did") else ""
        problems.add(f"{path}.kind", f"must be one of {choices}{near}", given)
    else:
        text = _WHAT.get(kinds, error["msg"]).format(**error.get("ctx", {}))
        near = f"; {nearest(value, _choices(error))}" if _is_choice(error) else ""
        near = near if near.startswith("; did") else ""
        described = "" if _is_choice(error) else _describe(top, kind, key)
        problems.add(path, f"{text}{near}{_hint(key, value)}{described}", value)


def _is_choice(error: ErrorDetails) -> bool:
    return error["type"] == "literal_error" and isinstance(error["input"], str)


def _choices(error: ErrorDetails) -> list[str]:
    expected = str(error.get("ctx", {}).get("expected", ""))
    return [word.strip("'") for word in expected.replace(" or ", ", ").split(", ")]


def parse(raw: dict[str, Any], problems: Problems) -> tuple[Definition, frozenset[str]]:
    """Check the shape of a column file.

    A mistake in one table must not hide those in the next: a broken table is reported and replaced by a
    stand-in, so that whatever does not depend on it can still be checked.

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
    single_air = isinstance(raw.get("air"), Mapping)
    for detail in details:
        _explain(detail, problems, single_air)
    broken = frozenset(str(detail["loc"][0]) for detail in details)
    rest = {key: value for key, value in raw.items() if key not in broken}
    stand_ins = {key: value for key, value in _STAND_INS.items() if key in broken}
    return Definition.model_validate(rest | stand_ins), broken


def schema() -> dict[str, Any]:
    """Make the JSON Schema of the column file, for editors."""
    made = Definition.model_json_schema()
    many = made["properties"]["air"]
    described = many.pop("description")
    made["properties"]["air"] = {"anyOf": [many["items"], many], "description": described}
    named = made["properties"]["split"]
    named.setdefault("anyOf", []).append({"type": "string"})
    return {"$schema": "https://json-schema.org/draft/2020-12/schema", **made}
