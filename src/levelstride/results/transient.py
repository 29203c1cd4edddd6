"""The largest transient growth of a step, as frozen plain data."""

from collections.abc import Mapping
from dataclasses import dataclass


@dataclass(frozen=True, slots=True, kw_only=True)
class TransientFound:
    """The largest energy norm of a power of the step over all air states and sampled waves.

    Parameters
    ----------
    step_s : float
        The step [s].
    largest_norm : float
        Largest norm of R^m, growth that is tolerated or the column's own taken out [1]; at least 1.
    steps : int
        m: after how many steps it is reached; 0 where no state ever gains energy.
    time_s : float
        The same as simulated time [s].
    exponential_norm : float
        What the semi-discrete column reaches by itself, the same growth taken out [1].
    beyond_exponential : float
        The first over the second: what the step adds [1].
    rising : bool
        Whether the norm is largest at the end of the time looked at.
    air : str
        Air state.
    wavenumber_per_m : float
        Along one axis [1/m].
    wavelength_m : float
        2 pi over it [m].
    kind : str
        Kind of wave that holds most of the energy of the state that is amplified; ``none`` where no
        state gains energy, and the layers are then all.
    kind_share, energy_share : mapping of str to float
        Its energy by kind of wave, and by field [1].
    layer_lowest, layer_highest : int
        Layers that hold 90 % of it, counted from 0 at the ground.
    bottom_m, top_m : float
        Heights of these layers above the ground [m].
    """

    step_s: float
    largest_norm: float
    steps: int
    time_s: float
    exponential_norm: float
    beyond_exponential: float
    rising: bool
    air: str
    wavenumber_per_m: float
    wavelength_m: float
    kind: str
    kind_share: Mapping[str, float]
    energy_share: Mapping[str, float]
    layer_lowest: int
    layer_highest: int
    bottom_m: float
    top_m: float
