"""How the error of a wave packet falls with the step, and what that costs: frozen plain data."""

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise
from math import exp, log


@dataclass(frozen=True, slots=True, kw_only=True)
class WorkPoint:
    """One step length.

    Parameters
    ----------
    step_s : float
        The step, a whole number of which make up the time [s].
    steps_per_hour : float
        Steps in one simulated hour [1/h].
    error : float
        Energy norm of the difference of the packet from the exact one, relative to the norm of the
        exact one, at the end of the time [1]. The worst of several air states.
    local_order : float or None
        Slope of the error between this step and the next shorter one, on logarithmic axes [1]; None
        for the shortest and where round-off hides it.
    vertical_courant : float
        Vertical acoustic Courant number c dt/dz, largest of all layers and air states [1].
    cost_per_hour : float
        Weighted cost of one simulated hour [1/h].
    explicit_evaluations_per_hour, solves_per_hour, exchanges_per_hour : float
        What the cost is made of [1/h].
    measured_s_per_hour : float
        Measured time of the steps of this column and one wave for one simulated hour [s/h].
    round_off : float
        Error that round-off may make within the time in steps of this length [1].
    air : str
        Air state of the error.
    """

    step_s: float
    steps_per_hour: float
    error: float
    local_order: float | None = None
    vertical_courant: float
    cost_per_hour: float
    explicit_evaluations_per_hour: float
    solves_per_hour: float
    exchanges_per_hour: float
    measured_s_per_hour: float
    round_off: float
    air: str = ""

    @property
    def at_round_off(self) -> bool:
        """Whether the error is no larger than what round-off may make."""
        return self.error <= self.round_off


@dataclass(frozen=True, slots=True, kw_only=True)
class PacketSummary:
    """The packet of gravity waves that is carried, on one air state.

    Parameters
    ----------
    air : str
        The air state.
    wavelength_m : float
        Horizontal wavelength along an axis [m].
    centre_m, half_width_m, vertical_wavelength_m : float
        Height above the ground, half width and vertical wavelength of its envelope [m].
    period_s : float
        Period of its mean frequency [s].
    modes : int
        Number of gravity modes it is made of.
    kept : float
        Energy norm of the exact packet at the end of the time, 1 at the start [1].
    """

    air: str
    wavelength_m: float
    centre_m: float
    half_width_m: float
    vertical_wavelength_m: float
    period_s: float
    modes: int
    kept: float


@dataclass(frozen=True, slots=True, kw_only=True)
class WorkPrecision:
    """Error of a gravity-wave packet against the exact one, over steps and what they cost.

    Parameters
    ----------
    tableau, split : str
        The scheme and the splitting, in standard spelling.
    hours : float
        Simulated time after which the packets are compared [h].
    stable_step_s : float or None
        Longest stable step [s]; None if nothing bites.
    points : tuple of WorkPoint
        From the longest step to the shortest.
    shorter : tuple of WorkPoint
        Still shorter steps, looked at for the order only.
    observed_order : float or None
        Order of convergence at the shortest steps that round-off does not reach [1].
    settled : bool
        Whether that order no longer changes with the step and is measured at a vertical acoustic
        Courant number below one: only then is it the asymptotic one.
    order_from_s, order_to_s : float or None
        Steps between which it was measured [s].
    largest_steps_order : float or None
        Order over the factor four below the longest step [1], or as much of it as round-off leaves.
        Below the asymptotic one where stiff vertical sound reduces it.
    linear_order : int
        Order that the coefficients give on linear equations with this splitting on this column.
    declared_order : int
        Order that the source of the tableau claims.
    packets : tuple of PacketSummary
        What was carried, one per air state.
    notes : tuple of str
        What a reader must know, in plain words.
    """

    tableau: str
    split: str
    hours: float
    stable_step_s: float | None
    points: tuple[WorkPoint, ...]
    shorter: tuple[WorkPoint, ...] = ()
    observed_order: float | None = None
    settled: bool = False
    order_from_s: float | None = None
    order_to_s: float | None = None
    largest_steps_order: float | None = None
    linear_order: int
    declared_order: int
    packets: tuple[PacketSummary, ...]
    notes: tuple[str, ...] = ()

    def error_at_cost(self, cost: float) -> float | None:
        """Error that a weighted cost per simulated hour buys, between points on logarithmic axes.

        Parameters
        ----------
        cost : float
            Weighted cost [1/h].

        Returns
        -------
        float or None
            None outside the range of the points.
        """
        return _between([(p.cost_per_hour, p.error) for p in self.points], cost)

    def error_at_step(self, step_s: float) -> float | None:
        """Error at a step [s], between points on logarithmic axes; None outside their range."""
        return _between([(p.step_s, p.error) for p in reversed(self.points)], step_s)

    def cost_at_error(self, error: float) -> float | None:
        """Smallest weighted cost per simulated hour from which on the error is kept.

        Parameters
        ----------
        error : float
            Error wanted [1].

        Returns
        -------
        float or None
            That of the longest step if it is good enough; None if no step is.
        """
        if not self.points or self.points[-1].error > error:
            return None
        for longer, shorter in reversed(list(pairwise(self.points))):
            if longer.error > error:
                ends = [
                    (shorter.error, shorter.cost_per_hour),
                    (longer.error, longer.cost_per_hour),
                ]
                return _between(ends, error)
        return self.points[0].cost_per_hour


def _between(points: Sequence[tuple[float, float]], x: float) -> float | None:
    """Interpolate on logarithmic axes over points of ascending x; None outside.

    Examples
    --------
    >>> round(_between([(1.0, 1e-2), (4.0, 1e-4)], 2.0), 6), _between([(1.0, 0.1)], 2.0)
    (0.001, None)
    """
    for left, right in pairwise(points):
        if left[0] <= x <= right[0]:
            if min(left[1], right[1], left[0]) <= 0.0 or left[0] == right[0]:
                return right[1] if x == right[0] else left[1]
            share = log(x / left[0]) / log(right[0] / left[0])
            return exp(log(left[1]) + share * log(right[1] / left[1]))
    return points[0][1] if len(points) == 1 and points[0][0] == x else None
