"""One wave of one air state under one splitting and tableau: is this step bounded?"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property, lru_cache, partial
from typing import Any

import numpy as np
from numpy.typing import NDArray

from levelstride.column.air import Background
from levelstride.column.column import Column
from levelstride.errors import CalculationError, InternalError
from levelstride.operator.bands import Banded, total
from levelstride.operator.energy import energy_weights
from levelstride.operator.setting import layout_of
from levelstride.operator.terms import CATALOGUE, assemble
from levelstride.operator.wave import Wave
from levelstride.schemes.scheme import TimeScheme
from levelstride.splitting.parts import Parts, sort_terms
from levelstride.splitting.splitting import Splitting
from levelstride.stability.amplification import step_matrix
from levelstride.stability.extremes import is_skew, only_damps
from levelstride.stability.local import LocalScreen
from levelstride.stability.own_growth import ROUND_OFF, OperatorFacts
from levelstride.stability.poles import pole_steps
from levelstride.stability.powers import (
    LOG_CONDITION,
    PowerNorms,
    bounded,
    peak_exceeds,
    radius_within,
)
from levelstride.stability.tolerance import LOG_STRICT, STANDARD_EFOLDINGS_S, Tolerance
from levelstride.tableaux.tableau import Tableau

Matrix = NDArray[Any]


SCREEN_FROM, SCREEN_TO_S, SCREEN_RATIO = 0.1, 1.0e4, 1.1
"""Steps at which layers are screened: from this share of the inverse of the fastest rate on."""

FEW_UNKNOWNS = 100
"""Up to so many unknowns a dense look costs less than asking the frozen layers."""

SHORT_RUN, CLOSE = 3, 0.02
"""Steps of the screen in a run that counts as short; ln of the ratio of looks around it."""

SUSPICIOUS_SHARE = 0.5
"""Share of the strictest tolerated growth above which a frozen layer is worth a dense look."""


@dataclass(frozen=True, eq=False)
class WaveTerms:
    """Everything about one wave that does not depend on the splitting.

    Attributes
    ----------
    kappa : float
        Wavenumber along one axis [1/m].
    terms, on_reference : dict of str to Banded
        Terms on the air and on the reference, in energy coordinates.
    facts : OperatorFacts
    weights : ndarray, shape (nstate,)
        Energy weights.
    """

    kappa: float
    terms: dict[str, Banded]
    on_reference: dict[str, Banded]
    facts: OperatorFacts
    weights: NDArray[np.float64]


@lru_cache(maxsize=256)
def wave_terms(column: Column, air: Background, kappa: float) -> WaveTerms:
    """Assemble the terms of one wave and examine the operator they add up to."""
    wave = Wave(kappa, column.horizontal)
    layout = layout_of(column)
    weights = energy_weights(column, air, layout)
    scale = np.sqrt(weights)
    terms = assemble(column, air, wave)
    scaled = {name: matrix.similar(scale) for name, matrix in terms.items()}
    on_reference = scaled
    if column.reference is not None:
        built = assemble(column, column.reference, wave)
        on_reference = {name: matrix.similar(scale) for name, matrix in built.items()}
    longest = 10 * max(column.advice.efolding_s, Tolerance.LONGEST_EFOLDING_S)
    facts = OperatorFacts(total(layout.size, scaled.values()), longest)
    return WaveTerms(kappa, scaled, on_reference, facts, weights)


@lru_cache(maxsize=256)
def fast_eigenvalues(
    found: WaveTerms, implicit: frozenset[str], *, damped: bool
) -> NDArray[np.complex128]:
    """Eigenvalues of the fast part of one wave that a stage can meet [1/s].

    None where all are imaginary, and where all that are not are damped unless ``damped`` ones are
    asked for.
    """
    names = sorted(implicit & found.on_reference.keys())
    fast = total(found.weights.size, (found.on_reference[name] for name in names))
    if is_skew(fast, ROUND_OFF):
        return np.zeros(0, dtype=complex)
    if not damped and only_damps(fast, ROUND_OFF * fast.norm_bound):
        return np.zeros(0, dtype=complex)
    return np.linalg.eigvals(fast.to_dense()).astype(complex)


def lowest_log_limit(tolerance: Tolerance) -> float:
    """Logarithm of the power norm tolerated where exp(t L) does not grow."""
    return float(np.log(tolerance.transient_limit))


class WaveProblem:
    """One wave of one air state, with everything learnt about its steps kept.

    Parameters
    ----------
    column : Column
    air : Background
        The air state.
    splitting : Splitting
    tableau : TimeScheme
    kappa : float
        Wavenumber along one axis [1/m].
    """

    def __init__(
        self,
        column: Column,
        air: Background,
        splitting: Splitting,
        tableau: TimeScheme,
        kappa: float,
    ) -> None:
        self.air, self.tableau, self.splitting, self.kappa = air, tableau, splitting, kappa
        self.wave_terms = wave_terms(column, air, kappa)
        self.parts: Parts = sort_terms(
            splitting, self.wave_terms.terms, self.wave_terms.on_reference, layout_of(column)
        )
        self._norms: dict[float, PowerNorms | None] = {}
        self._dominant: dict[float, complex] = {}
        self._stable: dict[tuple[float, Tolerance], bool] = {}
        self._peaks: dict[tuple[float, Tolerance], bool] = {}

    @property
    def size(self) -> int:
        """Number of unknowns, nstate times the time levels of the scheme."""
        return self.parts.layout.size * self.tableau.levels

    def newest(self, states: Matrix) -> Matrix:
        """Rows of the newest time level of states, shape (nstate, ...)."""
        return states[: self.parts.layout.size]

    @property
    def table(self) -> Tableau:
        """The scheme where only a tableau will do: marches and shift-and-invert."""
        if not isinstance(self.tableau, Tableau):
            raise InternalError(f"{self.tableau.name} is no tableau, it cannot be marched")
        return self.tableau

    @property
    def facts(self) -> OperatorFacts:
        """Growth and size of the semi-discrete operator."""
        return self.wave_terms.facts

    @cached_property
    def slow_rate(self) -> float:
        """Bound on the rates of what is not implicit in the stages [1/s]."""
        return (self.parts.slow + self.parts.after).norm_bound

    @cached_property
    def suspects(self) -> NDArray[np.float64]:
        """Steps at which frozen layers grow by themselves or a stage is singular, ascending [s].

        Of every run of steps that grow the first and the worst one, and of short runs what lies
        closely around: the column's own window is elsewhere than that of the frozen layer. They
        say where to look, not what is there.
        """
        diagonals = self.tableau.distinct_diagonals
        met = fast_eigenvalues(
            self.wave_terms, self.splitting.implicit, damped=min(diagonals, default=0.0) < 0
        )
        poles = pole_steps(met, self.tableau)
        poles = poles[poles < SCREEN_TO_S]
        return poles if self.size <= FEW_UNKNOWNS else np.union1d(self._grows_frozen(), poles)

    def _grows_frozen(self) -> NDArray[np.float64]:
        if self.facts.largest_eigenvalue == 0.0:
            return np.zeros(0)
        first = SCREEN_FROM / self.facts.largest_eigenvalue
        steps = np.geomspace(
            first, SCREEN_TO_S, 1 + int(np.log(SCREEN_TO_S / first) / np.log(SCREEN_RATIO))
        )
        growth = self.local_screen.growth(steps)
        flagged = np.flatnonzero(growth > SUSPICIOUS_SHARE / STANDARD_EFOLDINGS_S[0])
        runs = np.split(flagged, np.flatnonzero(np.diff(flagged) > 1) + 1)
        looks = []
        for run in runs if flagged.size else ():
            looks += [steps[run[0]], steps[run[np.argmax(growth[run])]]]
            if run.size <= SHORT_RUN:
                low, high = steps[run[0]] / SCREEN_RATIO, steps[run[-1]] * SCREEN_RATIO
                looks += np.geomspace(low, high, 1 + round(np.log(high / low) / CLOSE)).tolist()
        return np.unique(looks)

    @cached_property
    def local_screen(self) -> LocalScreen:
        """Growth of the frozen layers of this wave."""
        return LocalScreen(self.parts, self.tableau)

    def matrix(self, dt: float) -> Matrix:
        """R(dt) in energy coordinates, shape (size, size)."""
        return step_matrix(self.parts, self.tableau, dt)

    def rate(self, tolerance: Tolerance) -> float:
        """Growth rate tolerated at this wave, own growth included [1/s]."""
        return tolerance.rate + self.facts.own_growth

    def log_limit(self, tolerance: Tolerance) -> float:
        """Logarithm of the largest power norm tolerated at this wave."""
        peak = self.facts.log_exponential_peak(self.rate(tolerance))
        return lowest_log_limit(tolerance) + peak

    def norms(self, dt: float) -> PowerNorms | None:
        """Power norms at this step; None where a stage has no solution."""
        if dt not in self._norms:
            try:
                self._norms[dt] = PowerNorms(partial(self.matrix, dt))
            except CalculationError:
                self._norms[dt] = None
        return self._norms[dt]

    def growth(self, dt: float) -> float:
        """Growth rate by dense eigenvalues [1/s]; inf where a stage has no solution."""
        radius = abs(self.dominant(dt))
        return float(np.log(radius) / dt) if radius > 0 else -np.inf

    def dominant(self, dt: float) -> complex:
        """Eigenvalue of R of largest modulus; inf where a stage has no solution."""
        if dt not in self._dominant:
            try:
                eigenvalues = np.linalg.eigvals(self.matrix(dt))
                self._dominant[dt] = complex(eigenvalues[np.argmax(np.abs(eigenvalues))])
            except CalculationError:
                self._dominant[dt] = complex(np.inf)
        return self._dominant[dt]

    def growth_is_known(self, dt: float) -> bool:
        """Whether dense eigenvalues have been asked at this step."""
        return dt in self._dominant

    def stable(self, dt: float, tolerance: Tolerance) -> bool:
        """Whether the step keeps both the spectrum and the transient criterion.

        Power norms decide where they can, being rigorous; dense eigenvalues and exact power norms
        where they cannot.
        """
        key = (dt, tolerance)
        if key not in self._stable:
            self._stable[key] = self._decide(dt, tolerance)
        return self._stable[key]

    def _decide(self, dt: float, tolerance: Tolerance) -> bool:
        norms = self.norms(dt)
        if norms is None:
            return False
        decided = self._bounded(norms, dt, tolerance, lowest_log_limit(tolerance))
        if decided is not True:
            # exp(t L) only raises the limit: no need to follow it where growth is beyond doubt
            beyond_doubt = lowest_log_limit(tolerance) + LOG_CONDITION
            decided = self._bounded(norms, dt, tolerance, beyond_doubt)
            if decided is not False:
                decided = self._bounded(norms, dt, tolerance, self.log_limit(tolerance))
        norms.forget()
        if decided is None:
            decided = self.growth(dt) <= self.rate(tolerance)
            decided = decided and not self.transient_broken(dt, tolerance)
        return decided

    def _bounded(
        self, norms: PowerNorms, dt: float, tolerance: Tolerance, log_limit: float
    ) -> bool | None:
        size, rate = self.size, self.rate(tolerance)
        return bounded(norms, size, dt, rate, log_limit, tolerance.horizon)

    def strict(self, dt: float) -> bool:
        """Whether the spectral radius is at most one, but for round-off."""
        norms = self.norms(dt)
        if norms is None:
            return False
        decided = radius_within(norms, LOG_STRICT)
        norms.forget()
        return decided if decided is not None else self.growth(dt) * dt <= LOG_STRICT

    def violated(self, dt: float, tolerance: Tolerance) -> tuple[str, ...]:
        """Criteria that the step breaks, by dense eigenvalues and exact power norms."""
        broken = ["spectrum"] if self.growth(dt) > self.rate(tolerance) else []
        if self.transient_broken(dt, tolerance):
            broken.append("transient")
        return tuple(broken)

    def transient_broken(self, dt: float, tolerance: Tolerance) -> bool:
        """Whether a power of R exceeds the tolerated norm, by exact norms."""
        key = (dt, tolerance)
        if key not in self._peaks:
            try:
                matrix = self.matrix(dt)
            except CalculationError:
                return True
            self._peaks[key] = peak_exceeds(
                matrix, dt, self.rate(tolerance), tolerance.horizon, self.log_limit(tolerance)
            )
        return self._peaks[key]

    def explicit_pairs(self) -> Banded:
        """The operator made of all partner pairs with an explicit member."""
        chosen = set()
        for name, term in CATALOGUE.items():
            if term.partner and self.splitting.treatment[name] == "explicit":
                chosen |= {name, term.partner}
        return total(
            self.parts.layout.size, (self.wave_terms.terms[name] for name in sorted(chosen))
        )
