"""The background state: one hydrostatic air column evaluated on the levels."""

from dataclasses import dataclass, fields

from ..constants import GRAVITY
from .arrays import Array, read_only


@dataclass(frozen=True, slots=True, eq=False)
class Background:
    """One air state on a level set.

    The ending ``_c`` marks values at layer centres, shape (nlev,); ``_f`` values at interfaces,
    shape (nlev+1,), ground and lid included. ``dtheta_dz_f`` alone is kept at the interior
    interfaces 1..nlev-1.

    Parameters
    ----------
    name : str
        The name of the air state in the column file.
    temperature_c, temperature_f : array
        Temperature T [K].
    pressure_c, pressure_f : array
        Hydrostatic pressure p [Pa].
    theta_c, theta_f : array
        Potential temperature theta0 = T (1e5 / p)^(R/cp) [K].
    density_c, density_f : array
        Density rho0 = p / (R T) [kg/m3].
    sound_speed_squared_c, sound_speed_squared_f : array
        c^2 = gamma R T [m2/s2].
    dtheta_dz_c : (nlev,) array
        Stratification of the layers, (theta_f[j+1] - theta_f[j]) / dz_j [K/m].
    dtheta_dz_f : (nlev-1,) array
        Stratification at interior interfaces, (theta_c[f] - theta_c[f-1]) / dzf_f [K/m].
    wind_c, wind_f : array
        Horizontal wind U along the wave [m/s].
    updraft_c, updraft_f : array
        Frozen vertical wind W [m/s], zero at ground and lid.
    """

    name: str
    temperature_c: Array
    temperature_f: Array
    pressure_c: Array
    pressure_f: Array
    theta_c: Array
    theta_f: Array
    density_c: Array
    density_f: Array
    sound_speed_squared_c: Array
    sound_speed_squared_f: Array
    dtheta_dz_c: Array
    dtheta_dz_f: Array
    wind_c: Array
    wind_f: Array
    updraft_c: Array
    updraft_f: Array

    def __post_init__(self) -> None:
        for field in fields(self):
            if field.name != "name":
                object.__setattr__(self, field.name, read_only(getattr(self, field.name)))

    @property
    def n_squared_c(self) -> Array:
        """Brunt-Vaisala frequency squared of the layers, shape (nlev,) [1/s2]."""
        return read_only(GRAVITY * self.dtheta_dz_c / self.theta_c)

    @property
    def n_squared_f(self) -> Array:
        """Brunt-Vaisala frequency squared at interior interfaces, shape (nlev-1,) [1/s2]."""
        return read_only(GRAVITY * self.dtheta_dz_f / self.theta_f[1:-1])
