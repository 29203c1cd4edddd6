"""What the horizontal direction of the model does to a wave exp(i kappa x)."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from levelstride.column.column import Horizontal


@dataclass(frozen=True)
class Wave:
    """One horizontal wave as the model's own horizontal scheme sees it.

    Parameters
    ----------
    kappa : float
        Wavenumber along one axis [1/m].
    horizontal : Horizontal
        Grid spacing, gradient, number of directions, advection scheme.

    Notes
    -----
    With two directions the wave lies along the diagonal of the grid, which is the worst one: the
    gradient is sqrt(2) times that along an axis, and wind and slope are taken along the diagonal.
    """

    kappa: float
    horizontal: Horizontal

    @property
    def _angle(self) -> float:
        return self.kappa * self.horizontal.grid_spacing_m

    @property
    def _diagonal(self) -> float:
        return float(np.sqrt(self.horizontal.directions))

    @property
    def gradient(self) -> float:
        """k_x, the gradient symbol divided by i [1/m]."""
        return self._diagonal * gradient_symbol(self._angle, self.horizontal)

    @property
    def slope_average(self) -> float:
        """Factor on the slope: pi' and u sit half a cell apart on the staggered grid [1]."""
        return float(np.cos(self._angle / 2)) if self.horizontal.gradient == "staggered" else 1.0

    def advection(self, wind: np.ndarray) -> np.ndarray:
        """Symbol of -U d/dx for winds ``wind`` [m/s], any shape; complex [1/s]."""
        along_axis = wind / self._diagonal
        centred, damping = advection_symbol(self._angle, self.horizontal)
        return -self.horizontal.directions * (
            1j * along_axis * centred + np.abs(along_axis) * damping
        )

    @property
    def laplacian(self) -> float:
        """K2, minus the symbol of the horizontal Laplacian, both directions summed [1/m2]."""
        if self.horizontal.gradient == "exact":
            along_axis = self.kappa**2
        else:
            along_axis = (2 * np.sin(self._angle / 2) / self.horizontal.grid_spacing_m) ** 2
        return float(self.horizontal.directions * along_axis)


def gradient_symbol(angle: float, horizontal: Horizontal) -> float:
    """Gradient symbol along one axis divided by i [1/m], at phase angle kappa dx [rad]."""
    dx = horizontal.grid_spacing_m
    match horizontal.gradient:
        case "staggered":
            return float(2 * np.sin(angle / 2) / dx)
        case "centred-2":
            return float(np.sin(angle) / dx)
        case "centred-4":
            return float((8 * np.sin(angle) - np.sin(2 * angle)) / (6 * dx))
        case "exact":
            return angle / dx
        case _:
            assert horizontal.largest_gradient_per_m is not None
            return float(horizontal.largest_gradient_per_m * angle / np.pi)


def advection_symbol(angle: float, horizontal: Horizontal) -> tuple[float, float]:
    """Symbol of d/dx along one axis, split in its imaginary part and its upwind damping [1/m].

    The odd-order upwind schemes are the next centred scheme plus the difference of even order that
    makes them one-sided: (2 - 2 cos)^2/12 for the third, (2 - 2 cos)^3/60 for the fifth order
    (Wicker and Skamarock 2002, Monthly Weather Review 130, 2088-2097, equations 4).
    """
    s1, s2, s3 = np.sin(angle), np.sin(2 * angle), np.sin(3 * angle)
    even = 2 - 2 * np.cos(angle)
    centred, damping = {
        "centred-2": (s1, 0.0),
        "centred-4": ((8 * s1 - s2) / 6, 0.0),
        "centred-6": ((45 * s1 - 9 * s2 + s3) / 30, 0.0),
        "upwind-3": ((8 * s1 - s2) / 6, even**2 / 12),
        "upwind-5": ((45 * s1 - 9 * s2 + s3) / 30, even**3 / 60),
    }[horizontal.advection]
    dx = horizontal.grid_spacing_m
    return float(centred / dx), float(damping / dx)
