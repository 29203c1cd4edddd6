"""What is known about a limit from a column that hardly differs."""

from __future__ import annotations

from dataclasses import dataclass

from levelstride.stability.by_growth import first_growth
from levelstride.stability.step_limit import Bracket
from levelstride.stability.tolerance import Tolerance
from levelstride.stability.wave_problem import WaveProblem

NEARBY, EXPECTED = 1.3, 1.01
"""How far below the expected limit, as a factor, is looked at all; how well it is expected."""

WIDEST = 1.22
"""Largest factor from one look to the next."""


@dataclass(frozen=True, slots=True)
class Nearby:
    """Where the limit is expected, and which waves are expected to bind.

    Parameters
    ----------
    step_s : float
        A step near which the limit should lie [s].
    waves : tuple of (int, float)
        Air states by number and wavenumbers [1/m] of waves that bind the like of it.
    every, turn : int
        Which of the sampled waves are asked besides: each so many, from that one on.
    """

    step_s: float
    waves: tuple[tuple[int, float], ...] = ()
    every: int = 1
    turn: int = 0

    @property
    def first_s(self) -> float:
        """Step below which nothing is looked at [s]."""
        return self.step_s / NEARBY

    def thin(self, kappas: list[list[float]]) -> None:
        """Leave of the wavenumbers of every air state those to ask, the largest, and what binds."""
        for air, every in enumerate(kappas if self.every > 1 else ()):
            binding = [kappa for number, kappa in self.waves if number == air]
            kappas[air] = sorted({*every[self.turn :: self.every], *every[-2:], *binding})

    def upward(self, most: float) -> list[float]:
        """Steps up to ``most`` from where the limit is expected: closely at first, then wider."""
        found, stride = [], EXPECTED
        step = self.step_s * stride
        while step < min(most, NEARBY * self.step_s):
            found.append(step)
            stride = min(stride**2, WIDEST)
            step *= stride
        return [*found, most]

    def limit(self, problem: WaveProblem, tolerance: Tolerance, most: float) -> Bracket | None:
        """Limit of a wave that binds, by the growth that full matrices tell; None beyond reach."""
        for step in self.upward(most):
            if problem.growth(step) > problem.rate(tolerance):
                return first_growth(problem, step, tolerance)
        return None

    def looks(self, most: float) -> list[float]:
        """Steps up to ``most`` to look at: well below, where the limit is expected, and beyond."""
        if self.waves and most < self.step_s * WIDEST:
            return [*([self.first_s] if self.first_s < most else []), most]
        below = self.first_s, self.step_s / EXPECTED
        return [*(step for step in below if step < most), *self.upward(most)]
