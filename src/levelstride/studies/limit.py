"""How long a step one tableau and splitting carry on a column, and what bites."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import replace
from functools import lru_cache
from typing import Any

import numpy as np

from levelstride.column.column import Column, LowestSlopeGradient
from levelstride.errors import CalculationError
from levelstride.results.cause import cause
from levelstride.results.dataset import Limit, OwnGrowth, StepAtTolerance, Window
from levelstride.results.wording import number
from levelstride.schemes.scheme import ProgramScheme, TimeScheme
from levelstride.splitting.splitting import Splitting, resolve
from levelstride.stability.amplification import explicit_polynomial
from levelstride.stability.blas import on_one_thread
from levelstride.stability.march_bounds import CERTAIN_UNKNOWNS
from levelstride.stability.own_growth import cause_of_growth
from levelstride.stability.step_limit import SCAN_RATIO, Watch
from levelstride.stability.tolerance import STANDARD_EFOLDINGS_S, Tolerance
from levelstride.stability.verdict import ColumnVerdict, StableStep
from levelstride.stability.wave_problem import WaveProblem
from levelstride.stepper.any_scheme import stepper_of
from levelstride.studies.certified import in_words, record
from levelstride.studies.counterfactuals import ask_what_if
from levelstride.studies.methods import tableau_of
from levelstride.studies.what_bites import binding_air, what_bites
from levelstride.tableaux.lookup import find, names

Progress = Callable[[int, int, str], None]

NO_WIND = "no wind was given, the limit is for air at rest"
DEFAULT_SPLIT = "sound"
TOLD_APART = 1.002
"""Factor up to which two bisections of one limit may differ."""

SCAN = (
    f"scan ratio {SCAN_RATIO} at the binding wave at least over the factor two below the limit, "
    "wider ones elsewhere but where frozen layers grow, every sampled wave again at the limit; "
    "narrower windows of instability can be missed"
)
"""How the steps of a scan were chosen, for the reader of an answer."""

MARCHED = "waves that do not bind were marched, which growth below about 1e-4 a step can escape"

PARTS = 5 + len(STANDARD_EFOLDINGS_S)
"""Parts of the work that are told to whoever watches."""


@on_one_thread
def limit(
    column: Column,
    *,
    tableau: str,
    split: str | Mapping[str, str] | None = None,
    efolding_s: float | None = None,
    lowest_slope_gradient: LowestSlopeGradient | None = None,
    what_if: bool = True,
    certify: bool = False,
    brief: bool = False,
    progress: Progress | None = None,
) -> Limit:
    """Find the stable step of one tableau and splitting on a column.

    Parameters
    ----------
    column : Column
    tableau : str
        Published name, alias or bare form.
    split : str or mapping, optional
        Groups and terms joined by ``+``, or term to treatment; by default what the column file
        says, else ``sound``.
    efolding_s : float, optional
        Tolerated e-folding time [s]; by default the column's own.
    lowest_slope_gradient : {"half", "full"}, optional
        By default the column's own.
    what_if : bool
        Whether to search as well the step with every explicit term changed in turn and the step of
        every air state, which takes several times as long.
    progress : callable, optional
        Told how many parts of the work are done, of how many, and what is being worked on.
    certify : bool
        Whether to ask every sampled wave about both sides of the limit, and to find it again below
        where one refutes it. Steps for other tolerances and the strict step are not certified.
    brief : bool
        Whether to leave out what else a limit tells besides the stable step and what bites: strict
        step, steps for other tolerances, gain, windows and what if.

    Returns
    -------
    Limit

    Raises
    ------
    InputError
        If a name is unknown.
    CalculationError
        If no step is stable, however short.

    Examples
    --------
    >>> import levelstride
    >>> column = levelstride.build({
    ...     "levels": {"kind": "uniform", "layers": 8, "top_m": 8000.0},
    ...     "air": {"kind": "isothermal", "temperature_k": 250.0},
    ...     "horizontal": {"grid_spacing_m": 2000.0},
    ... })
    >>> found = levelstride.limit(
    ...     column, tableau="ARS(2,3,2)", split="sound+buoyancy", what_if=False
    ... )
    >>> found.stable_step_s > 1.0, found.path
    (True, 'tridiagonal')
    """
    if lowest_slope_gradient is not None:
        column = replace(column, lowest_slope_gradient=lowest_slope_gradient)
    splitting = resolve(split if split is not None else column.split or DEFAULT_SPLIT)
    method = tableau_of(column, tableau)
    tolerance = Tolerance(efolding_s or column.advice.efolding_s, column.advice.transient_limit)
    verdict = ColumnVerdict(column, splitting, method)
    what_if = what_if and not brief
    parts = _Parts(progress, (2 if brief else PARTS) + certify + what_if)
    found, certificate = verdict.stable_step(tolerance, watch=parts.begin("stable step")), None
    if certify:
        parts.begin("both sides of the limit at every wave")
        found, certificate = verdict.certified_step(found, tolerance)
    more = {} if brief else _more(verdict, tolerance, found, parts)
    parts.begin("what bites")
    certified = _certified(found, tolerance, verdict)
    if certificate is not None:
        certified = f"{in_words(certificate, tolerance)}; found by {certified}"
    answer = Limit(
        tableau=method.name,
        split=splitting.name,
        stable_step_s=found.step_s,
        unbounded=found.step_s is None,
        scanned_to_s=verdict.largest_s,
        criterion=_criterion(found, tolerance),
        explicit_share=_explicit_share(verdict, found),
        bites=what_bites(column, found, tolerance),
        certified=certified,
        efolding_s=tolerance.efolding_s,
        growth_per_step=float(np.expm1(found.step_s * tolerance.rate)) if found.step_s else None,
        air=binding_air(found),
        lowest_slope_gradient=column.lowest_slope_gradient if np.any(column.slope_f) else None,
        own_growth=_own_growth(verdict),
        path=_path(verdict),
        couples_columns={"horizontal-pressure-gradient", "horizontal-divergence"}
        <= verdict.splitting.implicit,
        wind_note=None if column.wind_given else NO_WIND,
        certificate=None if certificate is None else record(certificate),
        **more,
    )
    if what_if:
        parts.begin("steps with other terms")
        return ask_what_if(column, answer, splitting, method, tolerance)
    return replace(answer, cause=cause(answer))


class _Parts:
    """Counts the parts of the work for whoever watches."""

    def __init__(self, progress: Progress | None, total: int) -> None:
        self._progress, self._total, self._done = progress, total, -1

    def begin(self, what: str) -> Watch:
        """Say that a part begins; what is returned tells more of it."""
        self._done += 1

        def more(detail: str) -> None:
            if self._progress is not None:
                named = f"{what}: {detail}" if detail else what
                self._progress(self._done, self._total, named)

        more("")
        return more


def _more(
    verdict: ColumnVerdict, tolerance: Tolerance, found: StableStep, parts: _Parts
) -> dict[str, Any]:
    """What a limit tells besides the stable step and what bites."""
    parts.begin("strict step")
    strict = verdict.strict_step(found)
    if found.waves_bind and strict is not None:
        # no longer than the stable step, but found by a bisection of its own
        strict = found.step_s if _not_below(found.step_s, [strict]) == strict else strict
    by_efolding = _by_efolding(verdict, tolerance, found, parts)
    parts.begin("step of all-explicit")
    gain = _gain(verdict.column, verdict.splitting, verdict.tableau, tolerance, found)
    parts.begin("windows beyond the limit")
    windows = verdict.windows(found, tolerance)
    return {
        "strict_step_s": strict,
        "stable_step_by_efolding": by_efolding,
        "gain": gain,
        "windows": tuple(Window(from_s=low, to_s=high) for low, high in windows),
    }


def _by_efolding(
    verdict: ColumnVerdict, tolerance: Tolerance, found: StableStep, parts: _Parts
) -> tuple[StepAtTolerance, ...]:
    steps: list[StepAtTolerance] = []
    for efolding_s in STANDARD_EFOLDINGS_S:
        step = found.step_s
        watch = parts.begin(f"step that e-folds in {number(efolding_s)} s")
        if efolding_s != tolerance.efolding_s:
            looser = replace(tolerance, efolding_s=efolding_s)
            longest = found.step_s or verdict.largest_s
            known_s = longest if efolding_s < tolerance.efolding_s else 0.0
            step = verdict.stable_step(looser, refine=False, known_s=known_s, watch=watch).step_s
            carried = [one.stable_step_s for one in steps if one.efolding_s > efolding_s]
            step = _not_below(step, [known_s, *carried])
        steps.append(StepAtTolerance(efolding_s=efolding_s, stable_step_s=step))
    return tuple(steps)


def _not_below(step: float | None, carried: Sequence[float | None]) -> float | None:
    """Lift a step to one that is carried on stricter terms where bisection alone parts them."""
    near = [other for other in carried if other and step and step < other <= TOLD_APART * step]
    return max(near, default=step)


def _criterion(found: StableStep, tolerance: Tolerance) -> str:
    named: list[str] = []
    if found.waves_bind and found.bracket is not None:
        named += found.bracket.problem.violated(found.bracket.high, tolerance)
    if found.courant_binds:
        named.append("courant")
    return "+".join(named) or "none"


def _explicit_share(verdict: ColumnVerdict, found: StableStep) -> float | None:
    if isinstance(verdict.tableau, ProgramScheme) and verdict.tableau.substeps:
        return None  # its slow terms are not what these pairs are made of
    rate, reach = verdict.explicit_rate(), verdict.tableau.imaginary_axis_limit
    if found.step_s is None or rate == 0.0 or reach == 0.0:
        return None
    return found.step_s * rate / reach


def _gain(
    column: Column,
    splitting: Splitting,
    tableau: TimeScheme,
    tolerance: Tolerance,
    found: StableStep,
) -> float | None:
    if found.step_s is None:
        return None
    if not splitting.implicit or tableau.kind == "explicit":
        return 1.0
    baseline = all_explicit_step(column, tableau, tolerance)
    return found.step_s / baseline if baseline else None


def all_explicit_step(column: Column, tableau: TimeScheme, tolerance: Tolerance) -> float | None:
    """Stable step of the tableau's explicit part on the whole operator [s]; None if none.

    Explicit parts that share a stability polynomial take the same steps, so one stands for all.
    """
    return _baseline(column, _representative(tableau), tolerance)


@lru_cache(maxsize=64)
def _baseline(column: Column, tableau: TimeScheme, tolerance: Tolerance) -> float | None:
    try:
        verdict = ColumnVerdict(column, resolve("all-explicit"), tableau)
        return verdict.stable_step(tolerance).step_s
    except CalculationError:
        return None


@lru_cache(maxsize=256)
def _representative(tableau: TimeScheme) -> TimeScheme:
    """The first tableau of the library with the same explicit polynomial, else the given one."""
    if isinstance(tableau, ProgramScheme):
        return tableau
    wanted = explicit_polynomial(tableau)
    for name in names():
        other = find(name)
        difference = np.polynomial.polynomial.polysub(explicit_polynomial(other), wanted)
        if np.abs(difference).max() < 1e-13:
            return other
    return tableau


def _certified(found: StableStep, tolerance: Tolerance, verdict: ColumnVerdict) -> str:
    size = verdict.search.problems()[0].size
    scan = f"{SCAN}; {MARCHED}" if verdict.marches and size > CERTAIN_UNKNOWNS else SCAN
    if found.step_s is None:
        means = "marches" if verdict.marches else "power norms"
        return f"{means} of every sampled wave up to {number(verdict.largest_s)} s; {scan}"
    if not found.waves_bind or found.bracket is None:
        return f"symbols of every frozen row on both sides of the limit; {scan}"
    low, high, problem = found.bracket.low, found.bracket.high, found.bracket.problem
    rate, wave = problem.rate(tolerance), f"at wavenumber {problem.kappa:.4g} 1/m"
    below, above = problem.growth(low), problem.growth(high)
    if below <= rate < above:
        return (
            f"dense eigenvalues {wave}: growth {below:.3g} 1/s at {low:.6g} s, {above:.3g} 1/s at "
            f"{high:.6g} s, {rate:.3g} 1/s tolerated; {scan}"
        )
    return f"energy norms of powers of R {wave}, at {low:.6g} s and {high:.6g} s; {scan}"


def _own_growth(verdict: ColumnVerdict) -> tuple[OwnGrowth, ...]:
    """The fastest own growth of each air state, if any, with its cause."""
    worst: dict[str, WaveProblem] = {}
    for problem in verdict.search.problems():
        air = problem.air.name
        grows = verdict.grows_by_itself(problem)
        if grows and (air not in worst or problem.facts.own_growth > worst[air].facts.own_growth):
            worst[air] = problem
    return tuple(
        OwnGrowth(
            air=air,
            wavenumber_per_m=problem.kappa,
            growth_per_s=problem.facts.own_growth,
            cause=cause_of_growth(problem.wave_terms.terms, verdict.column, problem.air),
        )
        for air, problem in worst.items()
    )


def _path(verdict: ColumnVerdict) -> str:
    problem = verdict.search.problems()[0]
    return str(stepper_of(problem.parts, verdict.tableau, 1.0).path)
