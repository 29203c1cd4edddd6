"""How far a column may change before a step no longer carries it, as frozen plain data."""

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Final

UNITS: Final[Mapping[str, str]] = {
    "slope": "1",
    "wind_m_per_s": "m s-1",
    "updraft_m_per_s": "m s-1",
    "vertical_diffusion_m2_per_s": "m2 s-1",
    "grid_spacing_m": "m",
    "lowest_layer_m": "m",
}
"""Units of the quantities that are varied, as netCDF software reads them."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Room:
    """How far one quantity may go by itself, everything else as it is.

    Parameters
    ----------
    quantity : str
        What is varied, one of ``UNITS``. Of profiles it is the largest value, the whole profile
        being scaled.
    present : float
        Its value in the column.
    carried : float or None
        The furthest value at which the step holds, within 1 % of ``lost``; None where nothing
        bites in the range, or for the reason given.
    lost : float or None
        A value at which it does not hold.
    unbounded : bool
        Whether the step holds up to ``tried_to``.
    tried_to : float or None
        End of the range, if it was reached.
    criterion : str or None
        Criteria that are broken at ``lost``, joined by ``+``.
    wavelength_m : float or None
        Horizontal wavelength along one axis of the wave that breaks them [m].
    reason : str or None
        Why there is no value, in plain words.
    """

    quantity: str
    present: float
    carried: float | None = None
    lost: float | None = None
    unbounded: bool = False
    tried_to: float | None = None
    criterion: str | None = None
    wavelength_m: float | None = None
    reason: str | None = None


@dataclass(frozen=True, slots=True, kw_only=True)
class Headroom:
    """How far a step carries a column that changes in one quantity at a time.

    Parameters
    ----------
    tableau, split : str
        Names in standard spelling.
    step_s : float
        The step [s]; it is asked whether it is stable, not whether it is accurate.
    efolding_s : float
        Tolerated e-folding time [s].
    rooms : tuple of Room
        One for each quantity.
    certified : str
        How the values were checked.
    """

    tableau: str
    split: str
    step_s: float
    efolding_s: float
    rooms: tuple[Room, ...]
    certified: str

    def of(self, quantity: str) -> Room | None:
        """Look up the room of one quantity."""
        return next((room for room in self.rooms if room.quantity == quantity), None)
