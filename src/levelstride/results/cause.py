"""The cause of a limit in one sentence: which terms, where, which wave, and what would help."""

from math import inf
from typing import Final

from .biting import Bites, Change, Counterfactual, StepOfAir
from .dataset import AdviceRow, Limit
from .wording import kind_name, layers, metres, step

MATTERS: Final = 1.01
"""Gain from which a change of terms counts as one."""

_PAIRS: Final[dict[tuple[str, ...], str]] = {
    ("vertical-pressure-gradient", "vertical-divergence"): "vertical sound terms",
    ("buoyancy", "stratification"): "buoyancy terms",
    ("horizontal-pressure-gradient", "horizontal-divergence"): "horizontal sound terms",
    ("slope-pressure-gradient", "slope-divergence"): "slope terms",
}
_COUPLING: Final = ("horizontal-pressure-gradient", "horizontal-divergence")
_REFERENCE: Final = ("reference-state",)


def cause(limit: Limit) -> str | None:
    """Say what limits the step, where, and what would help.

    To blame is the term or the pair of partners with which most is gained by one of the
    counterfactuals. Where none were asked for, the wave stands for it.

    Parameters
    ----------
    limit : Limit
        The limit with its counterfactuals.

    Returns
    -------
    str or None
        None if nothing bites.

    Examples
    --------
    >>> bites = Bites(
    ...     wavenumber_per_m=6e-3, growth_per_s=1e-4, kind="sound", layer_lowest=0,
    ...     layer_highest=3, bottom_m=0.0, top_m=140.0, shortest_horizontal=True,
    ...     along_diagonal=True,
    ... )
    >>> slope = ("slope-pressure-gradient", "slope-divergence")
    >>> implicit = Counterfactual(
    ...     terms=slope, change="implicit", stable_step_s=7.9, unbounded=False, gain=1.6,
    ...     scanned_to_s=100.0,
    ... )
    >>> cause(Limit(
    ...     tableau="ARS(2,3,2)", split="sound", stable_step_s=5.0, unbounded=False,
    ...     scanned_to_s=1e4, criterion="spectrum", bites=bites, counterfactuals=(implicit,),
    ... ))
    'explicit slope terms, layers 0-3 (0-140 m), shortest wave along the grid diagonal; with the \
slope terms implicit the step would be 7.9 s'
    """
    if limit.bites is None:
        return None
    where = f"{layers(limit.bites)}, {wave_on_grid(limit.bites)}"
    if not limit.counterfactuals:
        return f"{kind_name(limit.bites.kind)}, {where}"
    blamed = to_blame(limit)
    if blamed is None:
        return (
            f"no explicit term by itself, {where}; with any of them implicit or left out the step "
            "would be no longer"
        )
    return f"{_subject(blamed)}, {where}; {_remedy(limit, blamed)}"


def to_blame(limit: Limit) -> tuple[str, ...] | None:
    """Find the term, or the pair of partners, with which most is gained; None if with none.

    Parameters
    ----------
    limit : Limit
        The limit with its counterfactuals.

    Returns
    -------
    tuple of str or None
        Names of the terms.
    """
    groups: dict[tuple[str, ...], list[Counterfactual]] = {}
    pairs = {
        term: one.terms for one in limit.counterfactuals for term in one.terms if one.terms[1:]
    }
    for one in limit.counterfactuals:
        groups.setdefault(pairs.get(one.terms[0], one.terms), []).append(one)

    def rank(terms: tuple[str, ...]) -> tuple[float, float]:
        implicit = [_gain(one) for one in groups[terms] if one.change == "implicit"]
        return max(_gain(one) for one in groups[terms]), max(implicit, default=0.0)

    best = max(groups, key=rank, default=None)
    return best if best is not None and rank(best)[0] >= MATTERS else None


def name_of_terms(terms: tuple[str, ...]) -> str:
    """Name one term or a pair of partners.

    Examples
    --------
    >>> name_of_terms(("buoyancy", "stratification")), name_of_terms(("vertical-advection",))
    ('buoyancy terms', 'vertical advection')
    """
    return _PAIRS.get(terms) or " and ".join(term.replace("-", " ") for term in terms)


def would_be(one: Counterfactual | StepOfAir) -> str:
    """Say what the step would be.

    Examples
    --------
    >>> would_be(StepOfAir(air="", stable_step_s=4.56789, unbounded=False, scanned_to_s=91.0))
    '4.56 s'
    >>> would_be(StepOfAir(air="", stable_step_s=None, unbounded=True, scanned_to_s=91.0))
    'above 91 s'
    """
    if one.unbounded:
        return f"above {step(one.scanned_to_s, 3)} s"
    return "nil" if one.stable_step_s is None else f"{step(one.stable_step_s, 3)} s"


def airs(limit: Limit) -> str:
    """Say which of several air states binds, and what the others carry by themselves.

    Parameters
    ----------
    limit : Limit
        The limit.

    Returns
    -------
    str
        Just the name of an only one; empty if none binds.
    """
    others = [
        f"{one.air} by itself {would_be(one)}"
        for one in limit.stable_step_by_air
        if one.air != limit.air
    ]
    return ", ".join([f"{limit.air} binds", *others]) if others and limit.air else limit.air


def reason_and_cause(row: AdviceRow) -> str:
    """Say what binds the advised step, what causes the limit, and which of several airs binds.

    Parameters
    ----------
    row : AdviceRow
        The row.

    Returns
    -------
    str
        One line.
    """
    parts = [row.binding]
    if row.cause is not None:
        parts.append(f"cause of the limit: {row.cause}")
    if row.stable_step_by_air:
        parts.append(f"air: {airs(row)}")
    return "; ".join(parts)


def step_in_table(one: Counterfactual | StepOfAir) -> str:
    """Write a step for a table [s]."""
    return f"> {step(one.scanned_to_s, 3)}" if one.unbounded else step(one.stable_step_s)


def wave_on_grid(bites: Bites) -> str:
    """Say how the wave lies on the grid.

    Examples
    --------
    >>> wave_on_grid(Bites(
    ...     wavenumber_per_m=1e-3, growth_per_s=1e-4, kind="sound", layer_lowest=0,
    ...     layer_highest=3, bottom_m=0.0, top_m=140.0, wavelength_m=6283.2,
    ...     shortest_vertical=True,
    ... ))
    'wave of 6.3 km, alternating from layer to layer'
    """
    if bites.shortest_horizontal:
        text = "shortest wave"
    elif bites.wavelength_m is not None:
        steepest = "steepest " if bites.steepest_horizontal else ""
        text = f"{steepest}wave of {metres(bites.wavelength_m)}"
    else:
        text = "every horizontal wave"
    if bites.along_diagonal:
        text += " along the grid diagonal"
    if bites.shortest_vertical:
        text += ", alternating from layer to layer"
    return text


def _gain(one: Counterfactual) -> float:
    return inf if one.unbounded else one.gain or 0.0


def _subject(terms: tuple[str, ...]) -> str:
    if terms == _REFERENCE:
        return "air that differs from the reference state"
    return f"explicit {name_of_terms(terms)}"


def _remedy(limit: Limit, terms: tuple[str, ...]) -> str:
    def then(terms: tuple[str, ...], change: Change, most: float = 0.0) -> str:
        """What the step would be; nothing where that was not asked or gains no more."""
        found = (c for c in limit.counterfactuals if c.terms == terms and c.change == change)
        one = next((c for c in found if _gain(c) >= most), None)
        return "" if one is None else would_be(one)

    named = name_of_terms(terms)
    if terms == _REFERENCE:
        built = "with the implicit part built on the air itself"
        return f"{built} the step would be {then(terms, 'absent')}"
    parts = []
    if implicit := then(terms, "implicit", MATTERS):
        coupled = " (a solve that couples columns)" if terms == _COUPLING else ""
        parts.append(f"with the {named} implicit the step would be {implicit}{coupled}")
    single = [c for c in limit.counterfactuals if c.change == "implicit" and c.terms[0] in terms]
    best = max((c for c in single if len(c.terms) < len(terms)), key=_gain, default=None)
    if best is not None and _gain(best) >= MATTERS:
        reached = would_be(best)
        parts.append(f"with the {name_of_terms(best.terms)} alone implicit {reached}")
    if not parts:
        parts.append(f"without the {named} the step would be {then(terms, 'absent')}")
    return ", ".join(parts)
