"""What is known about a limit from a column that hardly differs."""

from __future__ import annotations

from dataclasses import dataclass

NEARBY, EXPECTED = 1.5, 1.01
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
    """

    step_s: float
    waves: tuple[tuple[int, float], ...] = ()

    @property
    def first_s(self) -> float:
        """Step below which nothing is looked at [s]."""
        return self.step_s / NEARBY

    def looks(self, most: float) -> list[float]:
        """Steps to look at up to ``most``: closely where the limit is expected, then ever wider."""
        looks = [self.first_s, self.step_s / NEARBY**0.5, self.step_s / EXPECTED]
        step, stride = self.step_s * EXPECTED, EXPECTED
        while step < most:
            looks.append(step)
            stride = min(stride**2, WIDEST)
            step *= stride
        return [*(look for look in looks if look < most), most]
