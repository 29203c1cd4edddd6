"""The level set nearest to a given one that carries a step."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from levelstride.column.column import Column
from levelstride.errors import InputError
from levelstride.results.mending import LayerChange, Mended, Release
from levelstride.results.mending_words import obstacle_words, verdict_words
from levelstride.splitting.splitting import resolve
from levelstride.stability.blas import on_one_thread
from levelstride.stability.tolerance import Tolerance
from levelstride.stability.verdict import StableStep
from levelstride.studies.gather import Progress
from levelstride.studies.least_change import Rules
from levelstride.studies.level_moves import (
    SHRINKINGS,
    LevelPoint,
    Workshop,
    approach,
    distance,
    just_carrying,
)
from levelstride.studies.limit import DEFAULT_SPLIT
from levelstride.studies.methods import tableau_of

Array = NDArray[np.float64]

MOVES, MOVES_RELEASED = 30, 12
"""Moves towards the target, and towards it with a constraint released, at most."""

WHAT = {
    "": "nearest level set",
    "lowest layer": "without keeping the lowest layer",
    "ratio": "without the bound on the ratio",
    "lid": "without the lid",
    "all": "without any constraint",
}
"""What is being worked on, by what is released."""


@on_one_thread
def mend(
    column: Column,
    *,
    tableau: str,
    split: str | Mapping[str, str] | None = None,
    target_step_s: float,
    keep_lowest: bool = False,
    largest_ratio: float | None = None,
    efolding_s: float | None = None,
    progress: Progress | None = None,
) -> Mended:
    """Find the level set nearest to the column's own that carries a step.

    Nearest is least in the sum over the layers of (change of ln thickness) squared. Number of
    layers and lid stay.

    Parameters
    ----------
    column : Column
    tableau : str
        Published name, alias or bare form.
    split : str or mapping, optional
        As for ``limit``.
    target_step_s : float
        Step that must be stable [s].
    keep_lowest : bool
        Whether the lowest layer keeps its thickness.
    largest_ratio : float, optional
        Largest ratio of neighbouring thicknesses, the thicker over the thinner, where the column
        has none that is larger; by default the largest that it has anywhere [1].
    efolding_s : float, optional
        Tolerated e-folding time [s]; by default the column's own.
    progress : callable, optional
        Told how many full searches are done, of how many at most, and what is being worked on.

    Returns
    -------
    Mended
        The level set, verified by the full search; where there is none, the one that carries the
        longest step found, and which constraint stands in the way.

    Raises
    ------
    InputError
        If a name is unknown or a number makes no sense.
    CalculationError
        If no step is stable on the column itself, however short.

    Examples
    --------
    >>> import levelstride
    >>> column = levelstride.build({
    ...     "levels": {"kind": "table", "heights_m": [0.0, 500.0, 600.0, 1100.0, 1600.0]},
    ...     "air": {"kind": "isothermal", "temperature_k": 250.0},
    ...     "horizontal": {"grid_spacing_m": 2000.0},
    ... })
    >>> mended = mend(column, tableau="ARS(2,3,2)", split="all-explicit", target_step_s=0.8)
    >>> mended.carried, max(mended.changes, key=lambda change: change.factor).layer
    (True, 1)
    """
    _check(target_step_s, largest_ratio)
    splitting = resolve(split if split is not None else column.split or DEFAULT_SPLIT)
    method = tableau_of(column, tableau)
    tolerance = Tolerance(efolding_s or column.advice.efolding_s, column.advice.transient_limit)
    most = 1 + MOVES + SHRINKINGS + 4 * MOVES_RELEASED
    doing = [WHAT[""]]

    def tell(searches: int) -> None:
        if progress is not None:
            progress(searches, most, doing[0])

    shop = Workshop(column, splitting, method, tolerance, tell)
    given = shop.given()
    rules, bound = _rules(given, keep_lowest, largest_ratio)
    log_target = float(np.log(target_step_s))
    releases: tuple[Release, ...] = ()
    proposed: LevelPoint | None = given if given.log_step >= log_target else None
    longest = given
    if proposed is None:
        came = approach(shop, rules, given, log_target, MOVES)
        longest = came.longest
        if came.nearest is not None:
            proposed = just_carrying(shop, rules, given, came.nearest, log_target)
        else:
            releases = tuple(_released(shop, rules, longest, log_target, doing))
    shown = proposed or longest
    answer = Mended(
        tableau=method.name,
        split=splitting.name,
        target_step_s=target_step_s,
        efolding_s=tolerance.efolding_s,
        stable_step_before_s=given.found.step_s,
        carried=proposed is not None,
        unchanged=shown is given,
        interfaces_m=tuple(shown.column.levels.interfaces_m.tolist()),
        thickness_m=tuple(shown.column.levels.thickness_m.tolist()),
        verified_step_s=shown.found.step_s,
        criterion=_criterion(shown.found, tolerance),
        changes=_changes(column, shown.column),
        distance=distance(rules, shown.x) if shown is not given else 0.0,
        largest_ratio=bound,
        lowest_kept=keep_lowest,
        obstacle=None,
        releases=releases,
        searches=shop.searches,
        verdict="",
    )
    if proposed is None:
        answer = replace(answer, obstacle=obstacle_words(answer))
    return replace(answer, verdict=verdict_words(answer))


def _check(target_step_s: float, largest_ratio: float | None) -> None:
    problems = []
    if not (np.isfinite(target_step_s) and target_step_s > 0):
        problems.append(f"target step {target_step_s!r} s: must be positive and finite")
    if largest_ratio is not None and not (np.isfinite(largest_ratio) and largest_ratio >= 1):
        problems.append(
            f"largest ratio {largest_ratio!r}: must be 1 or more, the thicker of two neighbouring "
            "layers over the thinner"
        )
    if problems:
        raise InputError(*problems)


def _rules(
    given: LevelPoint, keep_lowest: bool, largest_ratio: float | None
) -> tuple[Rules, float]:
    own = np.abs(np.diff(given.x))
    bound = float(np.exp(own.max())) if largest_ratio is None else largest_ratio
    log_ratio = np.maximum(own, np.log(bound))
    return Rules(given.x, lowest_kept=keep_lowest, log_ratio=log_ratio), bound


def _released(
    shop: Workshop, rules: Rules, start: LevelPoint, log_target: float, doing: list[str]
) -> Iterator[Release]:
    """Try to carry the target without each constraint in turn, and then without all of them."""
    single = {"ratio": replace(rules, log_ratio=None), "lid": replace(rules, lid_kept=False)}
    if rules.lowest_kept:
        single = {"lowest layer": replace(rules, lowest_kept=False), **single}
    free = replace(rules, log_ratio=None, lid_kept=False, lowest_kept=False)
    met = False
    for name, relaxed in {**single, "all": free}.items():
        if name == "all" and met:
            return
        doing[0] = WHAT[name]
        came = approach(shop, relaxed, start, log_target, MOVES_RELEASED, reach_only=True)
        met = met or came.nearest is not None
        step = min(came.longest.log_step, log_target)
        yield Release(
            constraint=name, largest_step_s=float(np.exp(step)), carries=came.nearest is not None
        )


def _criterion(found: StableStep, tolerance: Tolerance) -> str:
    named: list[str] = []
    if found.waves_bind and found.bracket is not None:
        named += found.bracket.problem.violated(found.bracket.high, tolerance)
    if found.courant_binds:
        named.append("courant")
    return "+".join(named) or "none"


def _changes(before: Column, after: Column) -> tuple[LayerChange, ...]:
    pairs = zip(before.levels.thickness_m, after.levels.thickness_m, strict=True)
    return tuple(
        LayerChange(layer=j, before_m=float(old), after_m=float(new), factor=float(new / old))
        for j, (old, new) in enumerate(pairs)
    )
