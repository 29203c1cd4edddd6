"""How far a level set can be stretched, as frozen plain data.

Lengths are in m, times in s; layers are counted from 0 at the ground. Field names are the keys of
the JSON.
"""

from dataclasses import dataclass

from .dataset import ColumnSummary, Provenance
from .mending import LayerSensitivity, Mended


@dataclass(frozen=True, slots=True, kw_only=True)
class Binding:
    """What binds a stable step, in short.

    Parameters
    ----------
    criterion : str
        ``spectrum`` where eigenvalues grow, ``transient`` where only powers do, or ``courant``.
    air : str
        Air state that binds.
    kind : str
        Kind of wave, or ``transport`` or ``mixing`` for the courant criterion.
    wavenumber_per_m : float
        Wavenumber along one axis [1/m].
    wavelength_m : float or None
        2 pi over it [m].
    layer_lowest, layer_highest : int
        Layers that hold 90 % of the energy, both included.
    bottom_m, top_m : float
        Heights of these layers above the ground [m].
    """

    criterion: str
    air: str
    kind: str
    wavenumber_per_m: float
    wavelength_m: float | None
    layer_lowest: int
    layer_highest: int
    bottom_m: float
    top_m: float


@dataclass(frozen=True, slots=True, kw_only=True)
class StretchPoint:
    """One level set of the family.

    Parameters
    ----------
    lowest_layer_m : float
        Thickness of the lowest layer [m].
    ratio : float
        Largest ratio of neighbouring thicknesses, thicker over thinner [1].
    stable_step_s : float or None
        Stable step [s]; None with ``unbounded`` if nothing bites, without it if no step is stable.
    unbounded : bool
        Whether nothing bites.
    layers : int
        Number of layers.
    lid_m : float
        Height of the lid [m].
    own : bool
        Whether it is the user's own set.
    binds : Binding or None
        What binds the step; None if nothing does, or no step is stable.
    whole_search : bool
        Whether all waves were refined and all shorter steps scanned for this set; if not, the limit
        was followed from its neighbours.
    """

    lowest_layer_m: float
    ratio: float
    stable_step_s: float | None
    unbounded: bool
    layers: int
    lid_m: float
    own: bool
    binds: Binding | None
    whole_search: bool = True


@dataclass(frozen=True, slots=True, kw_only=True)
class Crossing:
    """Where another wave, mechanism or air state takes over along the curve.

    Parameters
    ----------
    above_lowest_layer_m, below_lowest_layer_m : float
        Lowest layers between which it happens, the less stretched set first [m].
    above_lid_m, below_lid_m : float
        Lids of these two sets [m].
    stable_step_s : float or None
        Stable step of the less stretched of the two [s].
    before, after : Binding or None
        What binds on either side; None where nothing does.
    changes : tuple of str
        What is different: ``criterion``, ``air``, ``kind``, ``wavenumber``, ``layers``.
    sentence : str
        The same in words.
    """

    above_lowest_layer_m: float
    below_lowest_layer_m: float
    above_lid_m: float
    below_lid_m: float
    stable_step_s: float | None
    before: Binding | None
    after: Binding | None
    changes: tuple[str, ...]
    sentence: str


@dataclass(frozen=True, slots=True, kw_only=True)
class StretchRow:
    """One tableau and splitting along the family.

    Parameters
    ----------
    tableau, split : str
        Names in standard spelling.
    target_step_s : float or None
        Step to be carried [s]; None if no step can be advised for the user's own set.
    target_reason : str
        ``given``, or that it is the advised step and what binds that.
    own_stable_step_s : float or None
        Stable step of the user's own set [s].
    thinnest_lowest_layer_m : float or None
        Thinnest lowest layer that still carries the target [m]; None if no set does.
    largest_ratio : float or None
        Largest ratio of neighbouring thicknesses of that set [1].
    lid_m : float or None
        Its lid [m].
    interfaces_m : tuple of float
        Its interfaces, heights above the ground [m]; empty if there is no such set.
    lost : StretchPoint or None
        The next set, at most 1 % further, which carries it no more; None if none was met.
    never_bites : bool
        Whether the target is carried over the whole range.
    verdict : str
        The answer in one sentence; with ``never_bites`` it says what does limit the step.
    curve : tuple of StretchPoint
        From the least to the most stretched set.
    crossings : tuple of Crossing
        Where the binding wave or mechanism changes along the curve.
    layer_costs : LayerSensitivity or None
        Which layers of the user's own set cost the step, if asked for.
    mended : Mended or None
        The nearest level set that carries the target, if asked for.
    """

    tableau: str
    split: str
    target_step_s: float | None
    target_reason: str
    own_stable_step_s: float | None
    thinnest_lowest_layer_m: float | None
    largest_ratio: float | None
    lid_m: float | None
    interfaces_m: tuple[float, ...]
    lost: StretchPoint | None
    never_bites: bool
    verdict: str
    curve: tuple[StretchPoint, ...]
    crossings: tuple[Crossing, ...]
    layer_costs: LayerSensitivity | None = None
    mended: Mended | None = None


@dataclass(frozen=True, slots=True, kw_only=True)
class Stretch:
    """How far a level set can be stretched.

    The fields from ``target_step_s`` to ``curve`` are those of the row ``best``, which is the only
    one where one tableau and one splitting were asked for.

    Parameters
    ----------
    title : str
        Title of the column.
    target_step_s, tableau, split, thinnest_lowest_layer_m, largest_ratio, curve
        As in the row ``best``.
    best : int
        Index of the row with the thinnest lowest layer.
    rows : tuple of StretchRow
        One per tableau and splitting.
    keep : str
        What the family keeps.
    lowest : int or None
        How many of the lowest layers it keeps or makes anew, where it does.
    column : ColumnSummary
        The user's own level set.
    lowest_slope_gradient : str or None
        ``half`` or ``full`` over a slope, else None.
    notes : tuple of str
        What else a reader must know.
    caution : str
        What is not promised.
    provenance : Provenance
        Where it comes from.
    """

    title: str
    target_step_s: float | None
    tableau: str
    split: str
    thinnest_lowest_layer_m: float | None
    largest_ratio: float | None
    curve: tuple[StretchPoint, ...]
    best: int
    rows: tuple[StretchRow, ...]
    keep: str
    lowest: int | None
    column: ColumnSummary
    lowest_slope_gradient: str | None
    notes: tuple[str, ...]
    caution: str
    provenance: Provenance
