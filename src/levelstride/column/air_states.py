"""From [air] tables to hydrostatic profiles, and whether they reach the lid."""

import numpy as np

from .arrays import read_only
from .definition import ConstantNAir, IsothermalAir, OneAir, SoundingAir, StandardAir
from .problems import Problems
from .profiles import ConstantNAir as ConstantNProfile
from .profiles import PiecewiseLinearAir, Profile
from .sounding import Ascent, ascent_air, check_ascent
from .standard_atmosphere import CEILING_M, standard_air

LEAST_PRESSURE = 1e-6
"""Air thinner than this at the lid is taken for a mistake [Pa]."""


def ascent_of(air: SoundingAir, where: str) -> Ascent:
    """Make an ascent of a sounding that is listed in the definition."""
    lists = {
        "heights_m": air.heights_m,
        "pressures_pa": air.pressures_pa,
        "temperatures_k": air.temperatures_k,
        "winds_m_per_s": air.winds_m_per_s,
    }
    values = {name: read_only(column) for name, column in lists.items() if column is not None}

    def label(quantity: str, row: int) -> str:
        return f"{where}.{quantity}" + (f"[{row}]" if row >= 0 else "")

    return Ascent(values, label)


def _sounding(
    air: SoundingAir, where: str, ground_m: float, problems: Problems
) -> PiecewiseLinearAir | None:
    if air.temperatures_k is None or (air.heights_m is None and air.pressures_pa is None):
        problems.add(
            where,
            "a sounding needs temperatures_k and heights_m or pressures_pa; add what is missing",
        )
        return None
    ascent = ascent_of(air, where)
    if not check_ascent(ascent, problems):
        return None
    return ascent_air(ascent, ground_m, air.surface_pressure_pa, where, problems)


def profile_of(air: OneAir, where: str, ground_m: float, problems: Problems) -> Profile | None:
    """Make the hydrostatic profile of one air state.

    Parameters
    ----------
    air : OneAir
        The table, files already embedded.
    where : str
        Its key path, for messages.
    ground_m : float
        Altitude of the ground [m].
    problems : Problems
        Where mistakes are added.

    Returns
    -------
    Profile or None
        None where there was a mistake.
    """
    if isinstance(air, SoundingAir):
        return _sounding(air, where, ground_m, problems)
    if isinstance(air, StandardAir):
        return standard_air(air.surface_pressure_pa, ground_m)
    if isinstance(air, IsothermalAir):
        return PiecewiseLinearAir(
            read_only([ground_m]), read_only([air.temperature_k]), ground_m, air.surface_pressure_pa
        )
    return ConstantNProfile(
        ground_m, air.surface_pressure_pa, air.surface_temperature_k, air.buoyancy_frequency_per_s
    )


def check_reach(
    air: OneAir, profile: Profile, where: str, lid_m: float, problems: Problems
) -> bool:
    """Check that the air exists, with sound temperature and pressure, up to the lid.

    Parameters
    ----------
    air : OneAir
        The table.
    profile : Profile
        Its profile.
    where : str
        Its key path, for messages.
    lid_m : float
        Altitude of the lid [m].
    problems : Problems
        Where mistakes are added.
    """
    if isinstance(air, StandardAir) and lid_m > CEILING_M:
        problems.add(
            f"{where}.kind",
            f"the lid lies at {lid_m:.6g} m above sea level, above the standard atmosphere's "
            f"{CEILING_M / 1000.0:g} km; lower the top or use another air",
            air.kind,
        )
        return False
    if isinstance(air, ConstantNAir) and lid_m >= profile.ceiling_m:
        problems.add(
            f"{where}.buoyancy_frequency_per_s",
            f"with this N the temperature falls to zero {profile.ceiling_m:.0f} m above sea "
            f"level, below the lid at {lid_m:.0f} m; lower the top or raise N",
            air.buoyancy_frequency_per_s,
        )
        return False
    with np.errstate(over="ignore", invalid="ignore"):
        temperature = float(profile.temperature(np.array([lid_m]))[0])
        pressure = float(profile.pressure(np.array([lid_m]))[0])
    if isinstance(air, ConstantNAir) and not 10.0 <= temperature <= 1500.0:
        problems.add(
            f"{where}.buoyancy_frequency_per_s",
            f"with this N the temperature at the lid would be {temperature:.4g} K; it must lie "
            "between 10 and 1500 K: lower the top or change N",
            air.buoyancy_frequency_per_s,
        )
        return False
    if not pressure >= LEAST_PRESSURE:
        problems.add(
            f"{where}.kind",
            f"the pressure at the lid, {lid_m:.6g} m above sea level, would be {pressure:.2g} Pa; "
            "that is no air to speak of: lower the top",
            air.kind,
        )
        return False
    return True
