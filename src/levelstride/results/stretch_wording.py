"""The words of a stretch: what binds, where, and the answer in one sentence."""

from .biting import Bites
from .stretching import Binding, StretchPoint
from .wording import number, step, wave


def thickness(value: float | None) -> str:
    """Write a height or thickness with four digits, in km from 1000 m on.

    Examples
    --------
    >>> thickness(12.3456), thickness(0.5), thickness(20100.0), thickness(None)
    ('12.35 m', '0.5 m', '20.1 km', '-')
    """
    if value is None:
        return "-"
    return f"{number(value)} m" if value < 999.95 else f"{number(value / 1000.0)} km"


def span(one: float, other: float) -> str:
    """Write a range of heights or thicknesses, the smaller first.

    Examples
    --------
    >>> span(12.9, 12.3456), span(999.0, 1050.0)
    ('12.35-12.9 m', '999 m-1.05 km')
    """
    low, high = thickness(min(one, other)), thickness(max(one, other))
    if low == high:
        return low
    (value, unit), last = low.split(), high.split()[1]
    return f"{value}-{high}" if unit == last else f"{low}-{high}"


def binding_words(binding: Binding, *, criterion: bool = True, air: bool = False) -> str:
    """Say what binds.

    Parameters
    ----------
    binding : Binding
        What binds.
    criterion, air : bool
        Whether to name the criterion and the air state.

    Examples
    --------
    >>> binding_words(Binding(criterion="spectrum", air="winter", kind="sound",
    ...     wavenumber_per_m=1e-3, wavelength_m=6283.2, layer_lowest=0, layer_highest=3,
    ...     bottom_m=0.0, top_m=140.0), air=True)
    'spectrum: sound wave of 6.3 km, layers 0-3 (0-140 m), air "winter"'
    """
    named = wave(
        Bites(
            wavenumber_per_m=binding.wavenumber_per_m,
            growth_per_s=0.0,
            kind=binding.kind,
            layer_lowest=binding.layer_lowest,
            layer_highest=binding.layer_highest,
            bottom_m=binding.bottom_m,
            top_m=binding.top_m,
            wavelength_m=binding.wavelength_m,
        )
    )
    named = f"{binding.criterion}: {named}" if criterion else named
    return f'{named}, air "{binding.air}"' if air else named


def member(point: StretchPoint, *, by_lid: bool) -> str:
    """Name a level set of a family by what sets it apart."""
    if by_lid:
        return f"a lid at {thickness(point.lid_m)}"
    return f"a lowest layer of {thickness(point.lowest_layer_m)}"


def limited_by(point: StretchPoint, *, air: bool) -> str:
    """Say what limits the step of a level set, and to what."""
    if point.unbounded:
        return "nothing bites at any step that was scanned"
    if point.binds is None:
        return "no step is stable, however short"
    return f"{step(point.stable_step_s)} s by {binding_words(point.binds, air=air)}"


def verdict_of(
    target_s: float,
    last: StretchPoint | None,
    lost: StretchPoint | None,
    longest: StretchPoint,
    *,
    by_lid: bool,
    air: bool,
) -> str:
    """Put the answer for one tableau and splitting into one sentence.

    Parameters
    ----------
    target_s : float
        The target [s].
    last, lost : StretchPoint or None
        The most stretched set that carries it, and the next one that does not.
    longest : StretchPoint
        The set with the longest step of all.
    by_lid : bool
        Whether the lid tells the sets apart.
    air : bool
        Whether to name air states.
    """
    target = f"{step(target_s)} s"
    if last is None:
        return (
            f"no set of the family carries {target}; the longest stable step is that of "
            f"{member(longest, by_lid=by_lid)}: {limited_by(longest, air=air)}"
        )
    where = f"{member(last, by_lid=by_lid)} (largest ratio {number(last.ratio)})"
    if lost is None:
        return (
            f"{target} is carried over the whole range, to {where}: the stretching does not limit "
            f"the step; there the limit is {limited_by(last, air=air)}"
        )
    return (
        f"{target} is carried to {where}; at {member(lost, by_lid=by_lid)} the limit is "
        f"{limited_by(lost, air=air)}"
    )
