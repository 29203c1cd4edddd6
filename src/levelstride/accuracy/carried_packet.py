"""What steps make of a packet of gravity waves, and what the air itself makes of it."""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache
from typing import Any, Final

import numpy as np
from numpy.typing import NDArray

from levelstride.accuracy.exponential import Exponential
from levelstride.accuracy.packet import Packet, gravity_packet
from levelstride.column.column import Column
from levelstride.errors import CalculationError
from levelstride.results.wording import number
from levelstride.results.work_precision import PacketSummary
from levelstride.stepper.any_scheme import AnyStepper, first_steps, levels_of

Matrix = NDArray[Any]

SQUARING_S: Final = 1.3e-10
"""About the time of a real product of two square matrices, per cubed row [s]."""

APPLYING_S: Final = 1.3e-9
"""About the time of a real matrix times a state, per squared row [s]."""

STEPPING_S: Final = (6e-5, 1e-7)
"""About the time of one step of one state: at all, and per unknown [s]."""


@dataclass(frozen=True, slots=True, eq=False)
class ExactPacket:
    """A packet with what the air itself makes of it.

    Attributes
    ----------
    packet : Packet
        At the start.
    end : ndarray of complex, shape (nstate,)
        At the end, in energy coordinates.
    round_off : float
        What round-off may do within the time [1].
    summary : PacketSummary
    """

    packet: Packet
    end: NDArray[np.complex128]
    round_off: float
    summary: PacketSummary


@lru_cache(maxsize=8)
def exact_packets(column: Column, time_s: float) -> tuple[tuple[ExactPacket, ...], tuple[str, ...]]:
    """Carry the packet of every air state exactly; found once for all tableaux and splittings.

    Parameters
    ----------
    column : Column
    time_s : float
        Time [s].

    Returns
    -------
    tuple of ExactPacket
        At least one.
    tuple of str
        Why air states were left out, if any were.

    Raises
    ------
    CalculationError
        If no air state has a resolved gravity wave.
    """
    runs: list[ExactPacket] = []
    left_out: list[str] = []
    for air in column.airs:
        try:
            packet = gravity_packet(column, air)
        except CalculationError as error:
            left_out.append(str(error))
            continue
        flow = Exponential(packet.operator)
        end = flow.apply(time_s, packet.state)
        kept = float(np.linalg.norm(end))
        if kept == 0.0:
            raise CalculationError(
                f"air '{air.name}': nothing is left of the packet after {number(time_s)} s"
            )
        summary = PacketSummary(
            air=air.name,
            wavelength_m=packet.wavelength_m,
            centre_m=packet.centre_m,
            half_width_m=packet.half_width_m,
            vertical_wavelength_m=packet.vertical_wavelength_m,
            period_s=packet.period_s,
            modes=packet.nmode,
            kept=kept,
        )
        runs.append(ExactPacket(packet, end, flow.round_off(time_s) / min(kept, 1.0), summary))
    if not runs:
        raise CalculationError("\n".join(left_out))
    return tuple(runs), tuple(left_out)


def march(stepper: AnyStepper, state: Matrix, steps: int) -> Matrix:
    """Take many equal steps of one state.

    One by one where they are few for the number of unknowns; else the matrix of one step is squared
    some times over, and its power applied as often as is left.

    Parameters
    ----------
    stepper : AnyStepper
        One that needs more time levels takes its first steps by its own start.
    state : ndarray, shape (nstate,)
    steps : int

    Returns
    -------
    ndarray of complex, shape (nstate,)
        Not finite if it outgrows all numbers.
    """
    lanes = np.array(state, dtype=np.complex128)[:, None]
    if stepper.dtype.kind == "f":  # real and imaginary part are two states of a real operator
        lanes = lanes.view(np.float64)
    lanes, steps = first_steps(stepper, lanes, steps)
    squarings = _squarings(stepper, steps)
    with np.errstate(over="ignore", invalid="ignore", divide="ignore"):
        if squarings is None:
            for _ in range(steps):
                lanes = stepper.step(lanes)
        else:
            power = stepper.matrix()
            for _ in range(squarings):
                if steps % 2:
                    lanes = power @ lanes
                power, steps = power @ power, steps // 2
            for _ in range(steps):
                lanes = power @ lanes
    return np.ascontiguousarray(lanes).view(np.complex128)[: stepper.layout.size, 0]


def _squarings(stepper: AnyStepper, steps: int) -> int | None:
    """How often to square the matrix of a step, or None to take the steps one by one."""
    n = stepper.layout.size * levels_of(stepper)
    arithmetic = 3.5 if stepper.dtype.kind == "c" else 1.0
    step_s = STEPPING_S[0] + STEPPING_S[1] * arithmetic * n

    def cost(k: int) -> float:
        applied = arithmetic * APPLYING_S * n**2 * (steps / 2**k + k / 2)
        return float(n / 20 * step_s + arithmetic * SQUARING_S * n**3 * k + applied)

    best = min(range(steps.bit_length()), key=cost)
    return best if cost(best) < steps * step_s else None
