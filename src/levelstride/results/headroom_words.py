"""Headroom in plain words, the same on the terminal and in every file."""

from collections.abc import Mapping
from math import ceil, log10
from typing import Final

from .headroom import Headroom, Room
from .wording import number, step

DIGITS: Final = 3

_NAMES: Final[Mapping[str, tuple[str, str]]] = {
    "slope": ("slope", ""),
    "wind_m_per_s": ("wind", " m/s"),
    "updraft_m_per_s": ("updraft", " m/s"),
    "vertical_diffusion_m2_per_s": ("vertical diffusion", " m2/s"),
    "grid_spacing_m": ("grid spacing", " m"),
    "lowest_layer_m": ("lowest layer", " m"),
}
_SMALLER: Final = ("grid_spacing_m", "lowest_layer_m")
"""Quantities of which smaller values are harder."""


def carried(headroom: Headroom) -> str:
    """Say how far every quantity may go.

    Examples
    --------
    >>> print(carried(Headroom(
    ...     tableau="ARS(2,3,2)", split="sound", step_s=3.0, efolding_s=86400.0, certified="",
    ...     rooms=(
    ...         Room(quantity="slope", present=0.2, carried=0.2443, lost=0.2457),
    ...         Room(quantity="wind_m_per_s", present=0.0, unbounded=True, tried_to=200.0),
    ...         Room(quantity="grid_spacing_m", present=2000.0, carried=1261.97, lost=1252.8),
    ...     ),
    ... )))
    slope to 0.244 (now 0.2), wind beyond 200 m/s (now 0), grid spacing to 1270 m (now 2000)
    """
    return ", ".join(map(_room, headroom.rooms))


def _room(room: Room) -> str:
    name, unit = _NAMES[room.quantity]
    now = f"(now {number(room.present, DIGITS + 1)})"
    if room.unbounded:
        beyond = "below" if room.quantity in _SMALLER else "beyond"
        return f"{name} {beyond} {number(room.tried_to, DIGITS)}{unit} {now}"
    if room.carried is None:
        return f"{name} unknown {now}"
    rounded = _upward if room.quantity in _SMALLER else step
    return f"{name} to {rounded(room.carried, DIGITS)}{unit} {now}"


def _upward(value: float, digits: int) -> str:
    """Write a number with so many digits, never smaller than it is."""
    places = digits - ceil(log10(value))
    return number(ceil(value * 10.0**places * (1.0 - 1e-12)) / 10.0**places, digits + 1)
