"""Waves of isothermal air at rest between ground and lid, in closed form."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from levelstride.column.air import Background
from levelstride.column.column import Column
from levelstride.constants import GAS_CONSTANT, GRAVITY, HEAT_CAPACITY, HEAT_CAPACITY_RATIO

SAME_TEMPERATURE = 1e-9
"""Relative differences of temperature up to this are none."""


@dataclass(frozen=True, slots=True)
class IsothermalWaves:
    """Frequencies of all waves of an isothermal column.

    Parameters
    ----------
    temperature_k : float
        [K]
    top_m : float
        Height D of the rigid lid [m].

    Notes
    -----
    With density rho0 proportional to exp(-z/H), H = R T/g, write sqrt(rho0) u = U,
    sqrt(rho0) w = W, p'/sqrt(rho0) = P and sqrt(rho0) g theta'/theta0 = B. With
    G = 1/(2 H) - g/c^2 and waves exp(i (k x + omega t)) the linear equations become

        i omega U = -i k P                  i omega B = -N^2 W
        i omega W = -(d/dz - G) P + B       i omega P = -c^2 (i k U + (d/dz + G) W).

    The two on the left eliminate U and B:

        i P (omega^2 - c^2 k^2) / omega = -c^2 (d/dz + G) W
        i W (omega^2 - N^2) / omega = -(d/dz - G) P

    and together (omega^2 - N^2)(omega^2 - c^2 k^2) W = -c^2 omega^2 (d^2/dz^2 - G^2) W. With
    W = 0 at ground and lid, W = sin(m z), m = j pi/D, j = 1, 2, ...:

        omega^4 - omega^2 (c^2 (k^2 + m^2 + G^2) + N^2) + N^2 c^2 k^2 = 0.

    The larger root is the sound wave of vertical order j, the smaller one the gravity wave. W = 0
    everywhere leaves omega = c |k| and P proportional to exp(G z), the Lamb wave. (Textbook: e.g.
    Gill 1982, Atmosphere-Ocean Dynamics, section 6.14, for the unbounded atmosphere; from memory.)

    k is the horizontal gradient symbol of the model, |k_x|, so that what differs is due to the
    levels alone; the horizontal scheme distorts k by itself.
    """

    temperature_k: float
    top_m: float

    @property
    def sound_speed_squared(self) -> float:
        """c^2 [m2/s2]."""
        return HEAT_CAPACITY_RATIO * GAS_CONSTANT * self.temperature_k

    @property
    def n_squared(self) -> float:
        """N^2 = g^2/(cp T) [1/s2]."""
        return GRAVITY**2 / (HEAT_CAPACITY * self.temperature_k)

    @property
    def decay_per_m(self) -> float:
        """G = 1/(2 H) - g/c^2 [1/m]; negative, as 1/gamma is more than one half."""
        half = GRAVITY / (2 * GAS_CONSTANT * self.temperature_k)
        return half - GRAVITY / self.sound_speed_squared

    def sound_and_gravity(self, gradient_per_m: float, order: int) -> tuple[float, float]:
        """Frequencies of the sound and the gravity wave of one vertical order [1/s].

        Parameters
        ----------
        gradient_per_m : float
            |k_x| along the wave [1/m].
        order : int
            1 for the gravest.
        """
        c2, n2 = self.sound_speed_squared, self.n_squared
        vertical = (order * np.pi / self.top_m) ** 2 + self.decay_per_m**2
        middle, last = c2 * (gradient_per_m**2 + vertical) + n2, n2 * c2 * gradient_per_m**2
        high = (middle + np.sqrt(middle**2 - 4 * last)) / 2
        return float(np.sqrt(high)), float(np.sqrt(last / high))

    def frequency(self, kind: str, order: int, gradient_per_m: float) -> float | None:
        """Frequency of a wave by its kind [1/s]; None for kinds that stand still."""
        match kind:
            case "sound":
                return self.sound_and_gravity(gradient_per_m, order)[0]
            case "gravity":
                return self.sound_and_gravity(gradient_per_m, order)[1]
            case "Lamb":
                return float(np.sqrt(self.sound_speed_squared)) * abs(gradient_per_m)
            case _:
                return None


def isothermal_waves(column: Column, air: Background) -> IsothermalWaves | None:
    """Return the closed form where it applies, None elsewhere.

    It applies to isothermal air; wind, slope, rotation and damping, which the column may have as
    well, are not in it: it is that of the column at rest on flat ground.
    """
    temperature = np.concatenate([air.temperature_c, air.temperature_f])
    mean = float(temperature.mean())
    if np.abs(temperature - mean).max() > SAME_TEMPERATURE * mean:
        return None
    return IsothermalWaves(mean, column.levels.top_m)
