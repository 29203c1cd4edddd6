"""The level set: interfaces between the ground and a rigid lid."""

from dataclasses import dataclass

from .arrays import Array, read_only


@dataclass(frozen=True, slots=True, eq=False)
class Levels:
    """Interfaces of a column, heights above the ground.

    Layer ``j`` lies between the interfaces ``j`` and ``j + 1``; interior interface ``f`` lies
    between the layers ``f - 1`` and ``f``.

    Parameters
    ----------
    interfaces_m : (nlev+1,) array
        Heights of the interfaces above the ground [m], increasing, the first is 0.
    surface_altitude_m : float
        Geopotential altitude of the ground [m].
    """

    interfaces_m: Array
    surface_altitude_m: float = 0.0

    def __post_init__(self) -> None:
        object.__setattr__(self, "interfaces_m", read_only(self.interfaces_m))

    @property
    def nlev(self) -> int:
        """Number of layers."""
        return self.interfaces_m.size - 1

    @property
    def top_m(self) -> float:
        """Height of the lid above the ground [m]."""
        return float(self.interfaces_m[-1])

    @property
    def centres_m(self) -> Array:
        """Heights of the layer centres above the ground, shape (nlev,) [m]."""
        return read_only(0.5 * (self.interfaces_m[1:] + self.interfaces_m[:-1]))

    @property
    def thickness_m(self) -> Array:
        """Thickness of the layers, shape (nlev,) [m]."""
        return read_only(self.interfaces_m[1:] - self.interfaces_m[:-1])

    @property
    def spacing_m(self) -> Array:
        """Distance of layer centres at the interior interfaces 1..nlev-1, shape (nlev-1,) [m]."""
        return read_only(0.5 * (self.interfaces_m[2:] - self.interfaces_m[:-2]))
