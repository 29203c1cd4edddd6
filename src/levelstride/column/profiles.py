"""Hydrostatic air as a function of altitude, in closed form.

Every profile answers three questions: temperature and pressure at an altitude, and the altitude of
a pressure. Altitudes are geopotential, above sea level [m].
"""

from dataclasses import dataclass
from typing import Protocol

import numpy as np

from ..constants import GAS_CONSTANT, GRAVITY, HEAT_CAPACITY, REFERENCE_PRESSURE
from .arrays import Array

KAPPA = GAS_CONSTANT / HEAT_CAPACITY


class Profile(Protocol):
    """Air in hydrostatic balance."""

    @property
    def ceiling_m(self) -> float:
        """Altitude above which the profile does not exist [m]; infinite where there is none."""
        ...

    def temperature(self, altitude: Array) -> Array:
        """Temperature [K] at ``altitude`` [m], same shape."""
        ...

    def pressure(self, altitude: Array) -> Array:
        """Pressure [Pa] at ``altitude`` [m], same shape."""
        ...

    def altitude_of(self, pressure: Array) -> Array:
        """Altitude [m] of ``pressure`` [Pa], same shape."""
        ...


def _log1p_over(x: Array) -> Array:
    """log(1 + x)/x, 1 at x = 0."""
    return np.where(x == 0.0, 1.0, np.log1p(x) / np.where(x == 0.0, 1.0, x))


def _expm1_over(x: Array) -> Array:
    """(exp(x) - 1)/x, 1 at x = 0."""
    return np.where(x == 0.0, 1.0, np.expm1(x) / np.where(x == 0.0, 1.0, x))


@dataclass(frozen=True, slots=True, eq=False)
class PiecewiseLinearAir:
    """Temperature linear in altitude between nodes; pressure by closed-form integration.

    In a segment with gradient G above a node (z_k, T_k): T = T_k + G (z - z_k) and
    ln(p/p_k) = -(g/R) ln(1 + G (z - z_k)/T_k)/G, which tends to -(g/R) (z - z_k)/T_k as G -> 0.

    Parameters
    ----------
    nodes_m : (nnode,) array
        Altitudes of the nodes [m], increasing; one node alone is allowed.
    temperatures_k : (nnode,) array
        Temperatures at the nodes [K].
    anchor_m, anchor_pa : float
        An altitude [m] and the pressure there [Pa].
    gradient_below, gradient_above : float
        Temperature gradient below the first and above the last node [K/m].
    ceiling_m : float
        Altitude above which the profile does not exist [m].
    """

    nodes_m: Array
    temperatures_k: Array
    anchor_m: float
    anchor_pa: float
    gradient_below: float = 0.0
    gradient_above: float = 0.0
    ceiling_m: float = np.inf

    def _gradients(self) -> Array:
        inner = np.diff(self.temperatures_k) / np.diff(self.nodes_m)
        return np.concatenate([[self.gradient_below], inner, [self.gradient_above]])

    def _segment(self, altitude: Array) -> tuple[Array, Array, Array]:
        """Base temperature, gradient and height above the base node for each altitude."""
        above = np.searchsorted(self.nodes_m, altitude, side="right")
        node = np.maximum(above - 1, 0)
        return self.temperatures_k[node], self._gradients()[above], altitude - self.nodes_m[node]

    def _log_at_nodes(self) -> Array:
        """Ln p at the nodes relative to the first node, shape (nnode,)."""
        rise = np.diff(self.nodes_m)
        base = self.temperatures_k[:-1]
        steps = -(GRAVITY / GAS_CONSTANT) * rise / base
        steps = steps * _log1p_over(np.diff(self.temperatures_k) / base)
        return np.concatenate([[0.0], np.cumsum(steps)])

    def _relative_log(self, altitude: Array) -> Array:
        base, gradient, rise = self._segment(altitude)
        node = np.maximum(np.searchsorted(self.nodes_m, altitude, side="right") - 1, 0)
        within = -(GRAVITY / GAS_CONSTANT) * rise / base * _log1p_over(gradient * rise / base)
        return self._log_at_nodes()[node] + within

    def _log_offset(self) -> float:
        anchor = float(self._relative_log(np.array([self.anchor_m]))[0])
        return float(np.log(self.anchor_pa)) - anchor

    def temperature(self, altitude: Array) -> Array:
        """Temperature [K] at ``altitude`` [m], same shape."""
        base, gradient, rise = self._segment(altitude)
        return base + gradient * rise

    def pressure(self, altitude: Array) -> Array:
        """Pressure [Pa] at ``altitude`` [m], same shape."""
        return np.exp(self._log_offset() + self._relative_log(altitude))

    def altitude_of(self, pressure: Array) -> Array:
        """Altitude [m] of ``pressure`` [Pa], same shape."""
        log_nodes = self._log_at_nodes() + self._log_offset()
        wanted = np.log(pressure)
        above = np.searchsorted(-log_nodes, -wanted, side="right")
        node = np.maximum(above - 1, 0)
        depth = (GAS_CONSTANT / GRAVITY) * (log_nodes[node] - wanted)
        return self.nodes_m[node] + self.temperatures_k[node] * depth * _expm1_over(
            self._gradients()[above] * depth
        )


@dataclass(frozen=True, slots=True, eq=False)
class ConstantNAir:
    """Constant Brunt-Vaisala frequency N: theta = theta_s exp(N^2 z/g), z above the ground.

    Exner pressure in closed form: pi = pi_s - g z/(cp theta_s) (1 - exp(-y))/y with y = N^2 z/g.

    Parameters
    ----------
    ground_m, ground_pa, ground_k : float
        Altitude [m], pressure [Pa] and temperature [K] of the ground.
    frequency_per_s : float
        N [1/s], may be 0.
    """

    ground_m: float
    ground_pa: float
    ground_k: float
    frequency_per_s: float

    @property
    def ceiling_m(self) -> float:
        """Altitude at which the temperature reaches zero [m]; infinite where it never does."""
        limit = HEAT_CAPACITY * self.ground_k / GRAVITY
        growth = self.frequency_per_s**2 / GRAVITY
        if limit * growth >= 1.0:
            return np.inf
        shrink = float(_log1p_over(np.array(-limit * growth)))
        return self.ground_m + limit * shrink

    def _theta(self, altitude: Array) -> Array:
        exner = (self.ground_pa / REFERENCE_PRESSURE) ** KAPPA
        growth = self.frequency_per_s**2 / GRAVITY
        theta: Array = self.ground_k / exner * np.exp(growth * (altitude - self.ground_m))
        return theta

    def _exner(self, altitude: Array) -> Array:
        ground = (self.ground_pa / REFERENCE_PRESSURE) ** KAPPA
        height = altitude - self.ground_m
        fall = GRAVITY * height / (HEAT_CAPACITY * self.ground_k / ground)
        exner: Array = ground - fall * _expm1_over(-(self.frequency_per_s**2) / GRAVITY * height)
        return exner

    def temperature(self, altitude: Array) -> Array:
        """Temperature [K] at ``altitude`` [m], same shape."""
        return self._theta(altitude) * self._exner(altitude)

    def pressure(self, altitude: Array) -> Array:
        """Pressure [Pa] at ``altitude`` [m], same shape; 0 at and above the ceiling."""
        return REFERENCE_PRESSURE * np.maximum(self._exner(altitude), 0.0) ** (1.0 / KAPPA)

    def altitude_of(self, pressure: Array) -> Array:
        """Altitude [m] of ``pressure`` [Pa], same shape."""
        ground = (self.ground_pa / REFERENCE_PRESSURE) ** KAPPA
        fall = ground - (pressure / REFERENCE_PRESSURE) ** KAPPA
        reach = fall * (HEAT_CAPACITY * self.ground_k / ground) / GRAVITY
        growth = self.frequency_per_s**2 / GRAVITY
        altitude: Array = self.ground_m + reach * _log1p_over(-growth * reach)
        return altitude
