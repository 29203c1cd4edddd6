"""Schemes of every family by name: baselines, compositions and tableaux."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from functools import lru_cache
from typing import Final, TypeAlias

from levelstride.errors import InputError
from levelstride.schemes.compositions import HALVES, halves_of, strang
from levelstride.schemes.leapfrog_stages import NAME as LEAPFROG_SYNC
from levelstride.schemes.leapfrog_stages import leapfrog_stages
from levelstride.schemes.multistep import EULER_NOTE, leapfrog, multistep, starting
from levelstride.schemes.scheme import ProgramScheme, TimeScheme
from levelstride.schemes.time_split import time_split
from levelstride.tableaux.lookup import bare, find
from levelstride.tableaux.tableau import Tableau

Knobs: TypeAlias = Mapping[str, float]

ARW = "Ascher, Ruuth, Wetton (1995), SIAM J. Numer. Anal. 32, 797-823, doi:10.1137/0732037"
DB = (
    "Durran, Blossey (2012), Mon. Weather Rev. 140, 1307-1325, doi:10.1175/MWR-D-11-00088.1, "
    "coefficients from memory"
)


@dataclass(frozen=True, slots=True)
class _Entry:
    """A baseline: how it is made of its knobs, and what these are where nobody sets them."""

    make: Callable[[Knobs], TimeScheme]
    knobs: tuple[tuple[str, float], ...] = ()
    aliases: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class Pair:
    """Coefficients of a linear multistep pair; see ``multistep``."""

    old: tuple[float, ...]
    slow: tuple[float, ...]
    fast: tuple[float, ...]
    source: str


PAIRS: Final[Mapping[str, Pair]] = {
    "SBDF2": Pair((4 / 3, -1 / 3), (4 / 3, -2 / 3), (2 / 3,), ARW),
    "CNAB": Pair((1.0,), (3 / 2, -1 / 2), (1 / 2, 1 / 2), ARW),
    "MCNAB": Pair((1.0,), (3 / 2, -1 / 2), (9 / 16, 3 / 8, 1 / 16), ARW),
    "AM2*/AX2*": Pair((1.0,), (7 / 4, -1.0, 1 / 4), (3 / 4, 0.0, 1 / 4), DB),
    "AI2*/AB3": Pair((1.0,), (23 / 12, -16 / 12, 5 / 12), (5 / 4, -1.0, 3 / 4), DB),
    "BDF2/BX2*": Pair((4 / 3, -1 / 3), (16 / 9, -14 / 9, 4 / 9), (2 / 3,), DB),
}
"""Pairs of order two of the fast-wave slow-wave literature."""

_ALIASES: Final[Mapping[str, tuple[str, ...]]] = {
    "SBDF2": ("BDF2 extrapolated", "BDF2/BX2"),
    "CNAB": ("trapezoid/AB2",),
}


def _pair(name: str) -> Callable[[Knobs], ProgramScheme]:
    def make(_: Knobs) -> ProgramScheme:
        pair = PAIRS[name]
        program = multistep(pair.old, pair.slow, pair.fast)
        two = PAIRS["SBDF2" if pair.old != (1.0,) else "CNAB"]
        again = "; second step: SBDF2" if pair.old != (1.0,) else "; second step: CNAB"
        return ProgramScheme(
            name=name,
            program=program,
            order=2,
            start=starting(multistep(two.old, two.slow, two.fast), program.levels),
            start_note=EULER_NOTE + (again if program.levels == 3 else ""),
            aliases=_ALIASES.get(name, ()),
            source=pair.source,
            note="computational modes are carried from step to step",
        )

    return make


def _leapfrog(name: str, source: str, aliases: tuple[str, ...]) -> Callable[[Knobs], ProgramScheme]:
    def make(knobs: Knobs) -> ProgramScheme:
        b, f, s = knobs["off_centring"], knobs["filter"], knobs["filter_share"]
        program = leapfrog(b, f, s)
        return ProgramScheme(
            name=name,
            program=program,
            order=2 if b == 0.0 and (f == 0.0 or s == 0.5) else 1,
            start=starting(program, 2),
            start_note=f"{EULER_NOTE}, unfiltered",
            aliases=aliases,
            source=source,
            note=f"filter {f:g}, share {s:g}, off-centring {b:g}; its computational mode is damped "
            "by the filter alone",
            knobs=dict(knobs),
        )

    return make


def _time_split(knobs: Knobs) -> ProgramScheme:
    n, b, d = int(knobs["substeps"]), knobs["off_centring"], knobs["divergence_damping"]
    return ProgramScheme(
        name="Time-split RK3",
        program=time_split(n, b, d),
        order=1,
        aliases=("split-explicit RK3",),
        source="Wicker, Skamarock (2002), Mon. Weather Rev. 130, 2088-2097",
        note=f"{n} substeps, off-centring {b:g}, divergence damping {d:g}; vertically implicit "
        "substeps of sound, slow terms frozen over them",
        knobs=dict(knobs),
        substeps=True,
    )


def _leapfrog_stages(knobs: Knobs) -> Tableau:
    return leapfrog_stages(int(knobs["substeps"]), knobs["off_centring"])


_RA = ("Robert (1966), J. Meteor. Soc. Japan 44, 237-245; Asselin (1972), Mon. Weather Rev. 100, "
       "487-490")  # fmt: skip
_RAW = "Williams (2009), Mon. Weather Rev. 137, 2538-2546, doi:10.1175/2009MWR2724.1"

BASELINES: Final[Mapping[str, _Entry]] = {
    "Time-split RK3": _Entry(
        _time_split,
        (("substeps", 6), ("off_centring", 0.1), ("divergence_damping", 0.1)),
        ("split-explicit RK3",),
    ),
    "Leapfrog-trapezoid RA": _Entry(
        _leapfrog("Leapfrog-trapezoid RA", _RA, ("CNLF", "leapfrog")),
        (("off_centring", 0.1), ("filter", 0.1), ("filter_share", 1.0)),
        ("CNLF", "leapfrog"),
    ),
    "Leapfrog-trapezoid RAW": _Entry(
        _leapfrog("Leapfrog-trapezoid RAW", _RAW, ()),
        (("off_centring", 0.1), ("filter", 0.1), ("filter_share", 0.53)),
    ),
    **{name: _Entry(_pair(name), (), _ALIASES.get(name, ())) for name in PAIRS},
    LEAPFROG_SYNC: _Entry(_leapfrog_stages, (("substeps", 4), ("off_centring", 0.2))),
}
"""By name; compositions are named ``Strang(HALVES, METHOD)``."""


def scheme_names() -> tuple[str, ...]:
    """Names of the baselines; compositions come besides, of any two methods."""
    return tuple(BASELINES)


def knobs_of(name: str) -> dict[str, float]:
    """Knobs of a baseline with the values they have where nobody sets them."""
    return dict(BASELINES[name].knobs)


def find_scheme(name: str, knobs: Knobs | None = None, among: Sequence[Tableau] = ()) -> TimeScheme:
    """Scheme of that name: a tableau, a baseline, or a composition.

    Parameters
    ----------
    name : str
        Published name, alias, or bare form; ``Strang(HALVES, METHOD)`` with HALVES
        ``backward-euler``, ``trapezoid``, ``carried`` or any tableau.
    knobs : mapping of str to float, optional
        Values of knobs, as in ``[scheme]`` of a column file; those that a scheme does not have are
        passed over.
    among : sequence of Tableau, optional
        Tableaux that a user brought.

    Raises
    ------
    InputError
        If nothing has the name.

    Examples
    --------
    >>> find_scheme("time-split rk3", {"substeps": 4}).implicit_solves
    7
    >>> find_scheme("Strang(trapezoid, RK4)").order
    2
    """
    published = _baseline(name)
    if published is not None and all(name not in (t.name, *t.aliases) for t in among):
        given = dict(knobs or {})
        chosen = tuple((key, given.get(key, usual)) for key, usual in BASELINES[published].knobs)
        return _made(published, chosen)
    parts = _composed(name)
    if parts is not None:
        return _composition(*parts, tuple(among))
    try:
        return find(name, among)
    except InputError as error:
        extra = "; baselines: " + ", ".join(BASELINES) + ", Strang(HALVES, METHOD)"
        raise InputError(*error.problems[:-1], error.problems[-1] + extra) from None


def _baseline(name: str) -> str | None:
    for published, entry in BASELINES.items():
        if bare(name) in map(bare, (published, *entry.aliases)):
            return published
    return None


@lru_cache(maxsize=256)
def _made(published: str, knobs: tuple[tuple[str, float], ...]) -> TimeScheme:
    return BASELINES[published].make(dict(knobs))


def _composed(name: str) -> tuple[str, str] | None:
    """Both names of a composition; None if the name is none."""
    text = name.strip()
    if not (text.lower().startswith("strang(") and text.endswith(")")):
        return None
    inside, depth = text[len("strang(") : -1], 0
    for i, sign in enumerate(inside):
        depth += (sign == "(") - (sign == ")")
        if sign == "," and depth == 0:
            return inside[:i].strip(), inside[i + 1 :].strip()
    raise InputError(
        f"tableau: received {name[:80]!r}; a composition is written Strang(HALVES, METHOD), as "
        "Strang(trapezoid, RK4)"
    )


@lru_cache(maxsize=64)
def _composition(halves: str, method: str, among: tuple[Tableau, ...]) -> Tableau:
    inner = find(method, among)
    named = {bare(key): key for key in HALVES}.get(bare(halves))
    if named is not None:
        return strang(f"Strang({named}, {inner.name})", HALVES[named], inner)
    outer = find(halves, among)
    return strang(f"Strang({outer.name}, {inner.name})", halves_of(outer), inner)
