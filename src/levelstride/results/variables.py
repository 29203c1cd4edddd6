"""The variables of the stored advice: name, dimensions, units, long name and values."""

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from itertools import pairwise
from typing import Any, Final, TypeAlias

from .dataset import Advice, AdviceRow, ColumnSummary
from .headroom import UNITS

Values: TypeAlias = Sequence[Any]


@dataclass(frozen=True, slots=True)
class Variable:
    """One variable of the file.

    Parameters
    ----------
    name : str
        Name; a variable named like its only dimension is that dimension's coordinate.
    dimensions : tuple of str
        Dimensions, slowest first.
    units : str
        Units as netCDF software reads them; 1 for plain numbers, empty for text.
    long_name : str
        What it is.
    values : sequence
        Values; None where there is none. Numbers, truth values or text, nested by dimension.
    kind : str
        float, int, flag or text.
    """

    name: str
    dimensions: tuple[str, ...]
    units: str
    long_name: str
    values: Values
    kind: str


_ROW: Final = (
    ("tableau", "", "name of the IMEX tableau", "text"),
    ("split", "", "terms treated implicitly", "text"),
    ("advised_step_s", "s", "advised step", "float"),
    ("advised_step_fraction", "", "advised step as an exact fraction of a second", "text"),
    ("binding", "", "what binds the advised step", "text"),
    ("stable_step_s", "s", "stable step", "float"),
    ("unbounded", "1", "whether nothing bites up to the longest step scanned", "flag"),
    ("scanned_to_s", "s", "longest step scanned", "float"),
    ("strict_step_s", "s", "step with a spectral radius up to 1 + 1e-8", "float"),
    ("criterion", "", "criteria that bind the stable step", "text"),
    ("explicit_share", "1", "stable step over that of the explicit part alone", "float"),
    ("gain", "1", "stable step over that of all-explicit", "float"),
    ("efolding_s", "s", "tolerated e-folding time", "float"),
    ("growth_per_step", "1", "growth per step at the stable step", "float"),
    ("air", "", "air state that binds", "text"),
    ("lowest_slope_gradient", "", "slope gradient of the lowest layer that binds", "text"),
    ("path", "", "how the implicit part is solved", "text"),
    ("couples_columns", "1", "whether the implicit solve couples columns", "flag"),
    ("certified", "", "how the limit was checked", "text"),
    ("cause", "", "what limits the step, where, and what would help", "text"),
    ("steps_per_hour", "h-1", "steps per simulated hour", "float"),
    ("cost_per_hour", "h-1", "weighted cost per simulated hour", "float"),
    ("explicit_evaluations_per_hour", "h-1", "explicit evaluations per simulated hour", "float"),
    ("solves_per_hour", "h-1", "implicit solves per simulated hour", "float"),
    ("exchanges_per_hour", "h-1", "exchanges with neighbours per simulated hour", "float"),
    ("measured_s_per_hour", "s h-1", "measured time per simulated hour, one wave", "float"),
    ("frequency_error", "1", "worst frequency error of resolved gravity waves", "float"),
    ("amplitude_change_per_period", "1", "worst amplitude change of these per period", "float"),
    ("ambiguous_waves", "1", "such waves that belong to no eigenvalue decisively", "int"),
    ("safety", "1", "share of the stable step that was to be advised at most", "float"),
)
_BITES: Final = (
    ("kind", "", "kind of wave that bites", "text"),
    ("wavenumber_per_m", "m-1", "wavenumber along one axis of what bites", "float"),
    ("wavelength_m", "m", "horizontal wavelength of what bites", "float"),
    ("growth_per_s", "s-1", "growth rate of what bites at 1.001 times the stable step", "float"),
    ("period_s", "s", "period of what bites", "float"),
    ("layer_lowest", "1", "lowest layer of what bites, -1 if nothing does", "int"),
    ("layer_highest", "1", "highest layer of what bites, -1 if nothing does", "int"),
    ("bottom_m", "m", "height above ground of the bottom of what bites", "float"),
    ("top_m", "m", "height above ground of the top of what bites", "float"),
    ("wavelength_layers", "1", "vertical wavelength in layers of what bites", "float"),
    ("shortest_horizontal", "1", "whether what bites is the shortest horizontal wave", "flag"),
    ("steepest_horizontal", "1", "whether what bites has the largest gradient", "flag"),
    ("shortest_vertical", "1", "whether what bites alternates from layer to layer", "flag"),
    ("along_diagonal", "1", "whether what bites lies along the diagonal of the grid", "flag"),
)
_WORST: Final = (
    ("wavenumber_per_m", "m-1", "wavenumber along one axis of the worst wave certified", "float"),
    ("growth_below_per_s", "s-1", "growth rate of that wave at the stable step", "float"),
    ("tolerated_per_s", "s-1", "growth rate tolerated at that wave", "float"),
)
_FLAGS: Final = (
    "shortest_horizontal",
    "steepest_horizontal",
    "shortest_vertical",
    "along_diagonal",
)
_FIELD_UNITS: Final = {"theta": "K", "pi": "1"}
_INDEX_OF: Final = "row that this {} belongs to"


def variables(advice: Advice) -> tuple[Variable, ...]:
    """List the variables of an advice, coordinates first.

    Parameters
    ----------
    advice : Advice
        The advice.

    Returns
    -------
    tuple of Variable
        Every variable that has at least one value.
    """
    rows = advice.rows
    found = (
        *_coordinates(advice),
        *(Variable(n, ("row",), u, t, [getattr(r, n) for r in rows], k) for n, u, t, k in _ROW),
        *(
            Variable(f"bites_{n}", ("row",), u, t, [_of_bites(r, n) for r in rows], k)
            for n, u, t, k in _BITES
        ),
        *_certified(rows),
        _shares(rows, "energy_share", "field", "share of the energy of what bites by field"),
        _shares(rows, "kind_share", "wave_kind", "share of the energy of what bites by kind"),
        *_profiles(rows, advice.column.layers),
        *_headroom(rows),
        _by_efolding(rows),
        _per_interval(advice),
        *_ragged(rows),
    )
    return tuple(variable for variable in found if len(variable.values))


def efoldings(rows: Sequence[AdviceRow]) -> list[float]:
    """List the e-folding times for which any row has a stable step, longest first [s]."""
    return sorted({at.efolding_s for r in rows for at in r.stable_step_by_efolding}, reverse=True)


def _coordinates(advice: Advice) -> list[Variable]:
    rows, column = advice.rows, advice.column

    def coordinate(name: str, units: str, text: str, values: Values, kind: str) -> Variable:
        return Variable(name, (name,), units, text, values, kind)

    return [
        coordinate("row", "1", "row, most simulated time per cost first", range(len(rows)), "int"),
        coordinate("efolding", "s", "tolerated e-folding time", efoldings(rows), "float"),
        coordinate("interval", "s", "interval to divide", advice.intervals_s, "float"),
        coordinate("field", "", "field of the column", _names(rows, "energy_share"), "text"),
        coordinate("wave_kind", "", "kind of wave", _names(rows, "kind_share"), "text"),
        coordinate(
            "interface_height",
            "m",
            "height of interface",
            column.interfaces_m,
            "float",
        ),
        coordinate("layer", "m", "height of the centre of a layer", _centres(column), "float"),
        coordinate(
            "interior_interface", "m", "height of interface", column.interfaces_m[1:-1], "float"
        ),
    ]


def _centres(column: ColumnSummary) -> list[float]:
    faces = column.interfaces_m
    return [(low + high) / 2 for low, high in pairwise(faces)]


def _of_bites(row: AdviceRow, name: str) -> Any:
    missing = -1 if name.startswith("layer_") else False if name in _FLAGS else None
    return missing if row.bites is None else getattr(row.bites, name)


def _certified(rows: Sequence[AdviceRow]) -> list[Variable]:
    worst = [None if r.certificate is None else r.certificate.worst_wave for r in rows]
    checked = "whether the limit was checked on both sides at every sampled wave"
    flags = [wave is not None for wave in worst]
    return [
        Variable("certified_at_every_wave", ("row",), "1", checked, flags, "flag"),
        *(
            Variable(
                f"certified_worst_{name}", ("row",), units, text,
                [getattr(wave, name, None) for wave in worst], kind,
            )
            for name, units, text, kind in _WORST
        ),
    ]  # fmt: skip


def _names(rows: Sequence[AdviceRow], share: str) -> list[str]:
    return sorted({name for row in rows if row.bites for name in getattr(row.bites, share)})


def _shares(rows: Sequence[AdviceRow], share: str, dimension: str, text: str) -> Variable:
    names = _names(rows, share)
    values = [
        [getattr(row.bites, share).get(name, 0.0) if row.bites else None for name in names]
        for row in rows
    ]
    return Variable(
        f"bites_{share}", ("row", dimension), "1", text, values if names else [], "float"
    )


def _profiles(rows: Sequence[AdviceRow], layers: int) -> Iterator[Variable]:
    """Energy by layer and the profile of every field of what bites; missing where nothing does."""
    energies = [row.bites.energy_by_layer if row.bites else () for row in rows]
    text = "share of the energy of what bites by layer"
    yield _by_height("bites_energy_by_layer", "1", text, energies, layers, layers)
    found = [{p.field: p for p in row.bites.profiles} if row.bites else {} for row in rows]
    for field in sorted({field for profiles in found for field in profiles}):
        length = next(len(p[field].heights_m) for p in found if field in p)
        for name, units, text in (
            ("amplitude", _FIELD_UNITS.get(field, "m s-1"), "amplitude at an energy of 1 J m-2"),
            ("phase_rad", "rad", "phase against the point with most energy"),
        ):
            values = [getattr(p[field], name) if field in p else () for p in found]
            long_name = f"{field} of what bites, {text}"
            yield _by_height(f"bites_{field}_{name}", units, long_name, values, length, layers)


def _headroom(rows: Sequence[AdviceRow]) -> Iterator[Variable]:
    """How far the column may change under the advised step; missing but for the best row."""
    if not any(row.headroom for row in rows):
        return
    for quantity, units in UNITS.items():
        rooms = [row.headroom.of(quantity) if row.headroom else None for row in rows]
        what = quantity.partition("_m")[0].replace("_", " ")
        for name, of, text in (
            ("", "carried", f"{what} up to which the advised step holds"),
            ("_tried_to", "tried_to", f"{what} up to which it was tried, where nothing bites"),
        ):
            values = [None if room is None else getattr(room, of) for room in rooms]
            yield Variable(f"headroom_{quantity}{name}", ("row",), units, text, values, "float")


def _by_height(
    name: str, units: str, text: str, values: Sequence[Values], length: int, layers: int
) -> Variable:
    dimension = "layer" if length == layers else "interior_interface"
    filled = [list(one) or [None] * length for one in values] if any(values) else []
    return Variable(name, ("row", dimension), units, text, filled, "float")


def _by_efolding(rows: Sequence[AdviceRow]) -> Variable:
    times = efoldings(rows)
    found = [{a.efolding_s: a.stable_step_s for a in row.stable_step_by_efolding} for row in rows]
    values = [[steps.get(time) for time in times] for steps in found] if times else []
    text = "stable step by tolerated e-folding time"
    return Variable("stable_step_by_efolding_s", ("row", "efolding"), "s", text, values, "float")


def _per_interval(advice: Advice) -> Variable:
    width = len(advice.intervals_s)
    values = [list(row.steps_per_interval) or [0] * width for row in advice.rows] if width else []
    text = "whole steps per interval, 0 where no step is advised"
    return Variable("steps_per_interval", ("row", "interval"), "1", text, values, "int")


def _ragged(rows: Sequence[AdviceRow]) -> list[Variable]:
    """Lists of different lengths per row, one after the other with the row that each belongs to."""
    windows = [(i, w) for i, row in enumerate(rows) for w in row.windows]
    growths = [(i, g) for i, row in enumerate(rows) for g in row.own_growth]
    airs = [(i, a) for i, row in enumerate(rows) for a in row.stable_step_by_air]
    changes = [(i, c) for i, row in enumerate(rows) for c in row.counterfactuals]
    lists: tuple[tuple[str, list[tuple[int, Any]], tuple[tuple[str, str, str, str], ...]], ...] = (
        (
            "window",
            windows,
            (
                ("from_s", "s", "shortest step stable again beyond the stable step", "float"),
                ("to_s", "s", "longest step of this window", "float"),
            ),
        ),
        (
            "own_growth",
            growths,
            (
                ("air", "", "air state of this growth", "text"),
                ("wavenumber_per_m", "m-1", "wavenumber along one axis", "float"),
                ("growth_per_s", "s-1", "growth of the semi-discrete operator itself", "float"),
                ("cause", "", "cause of this growth", "text"),
            ),
        ),
        (
            "by_air",
            airs,
            (
                ("air", "", "air state by itself", "text"),
                ("stable_step_s", "s", "stable step of this air state", "float"),
                ("unbounded", "1", "whether nothing bites in this air state", "flag"),
                ("scanned_to_s", "s", "longest step scanned in this air state", "float"),
            ),
        ),
        (
            "what_if",
            changes,
            (
                ("terms", "", "explicit terms that are changed", "text"),
                ("change", "", "what they are changed to: implicit or absent", "text"),
                ("stable_step_s", "s", "stable step then", "float"),
                ("unbounded", "1", "whether nothing bites then", "flag"),
                ("gain", "1", "stable step then over the stable step", "float"),
                ("scanned_to_s", "s", "longest step scanned then", "float"),
            ),
        ),
    )
    found: list[Variable] = []
    for name, items, columns in lists:
        index = [i for i, _ in items]
        found.append(Variable(f"{name}_row", (name,), "1", _INDEX_OF.format(name), index, "int"))
        found += [
            Variable(f"{name}_{n}", (name,), u, t, [_plain(item, n) for _, item in items], k)
            for n, u, t, k in columns
        ]
    return found


def _plain(item: Any, name: str) -> Any:
    value = getattr(item, name)
    return "+".join(value) if isinstance(value, tuple) else value
