"""The catalogue: every term of the linear equations under its name."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from types import MappingProxyType
from typing import Final

from levelstride.column.air import Background
from levelstride.column.column import Column
from levelstride.operator import buoyancy, mixing, pressure, slope, transport
from levelstride.operator.bands import Banded, total
from levelstride.operator.setting import Setting, layout_of
from levelstride.operator.wave import Wave


@dataclass(frozen=True, slots=True)
class Term:
    """One named entry of the linear equations.

    Attributes
    ----------
    name : str
        Key in the catalogue, in column files and on the command line.
    build : callable
        Setting to matrix in physical unknowns.
    partner : str or None
        The term that takes from the energy what this one gives; its own name if it needs none.
    one_way : bool
        Advection or diffusion: judged by its frozen-coefficient symbol as well.
    """

    name: str
    build: Callable[[Setting], Banded]
    partner: str | None = None
    one_way: bool = False


_TERMS: Final = (
    Term("vertical-pressure-gradient", pressure.vertical_pressure_gradient, "vertical-divergence"),
    Term("vertical-divergence", pressure.vertical_divergence, "vertical-pressure-gradient"),
    Term("buoyancy", buoyancy.buoyancy, "stratification"),
    Term("stratification", buoyancy.stratification, "buoyancy"),
    Term(
        "horizontal-pressure-gradient",
        pressure.horizontal_pressure_gradient,
        "horizontal-divergence",
    ),
    Term("horizontal-divergence", pressure.horizontal_divergence, "horizontal-pressure-gradient"),
    Term("slope-pressure-gradient", slope.slope_pressure_gradient, "slope-divergence"),
    Term("slope-divergence", slope.slope_divergence, "slope-pressure-gradient"),
    Term("horizontal-advection", transport.horizontal_advection, one_way=True),
    Term("shear", transport.shear),
    Term("vertical-advection", transport.vertical_advection, one_way=True),
    Term("vertical-diffusion", mixing.vertical_diffusion, one_way=True),
    Term("upper-damping", mixing.upper_damping),
    Term("divergence-damping", mixing.divergence_damping),
    Term("horizontal-diffusion", mixing.horizontal_diffusion, one_way=True),
    Term("rotation", buoyancy.rotation, "rotation"),
)

CATALOGUE: Final[Mapping[str, Term]] = MappingProxyType({term.name: term for term in _TERMS})

Terms = Mapping[str, Banded]


def assemble(column: Column, air: Background, wave: Wave) -> dict[str, Banded]:
    """Build every term of the catalogue for one air state and one wave.

    Parameters
    ----------
    column : Column
    air : Background
        One of ``column.airs`` or ``column.reference``.
    wave : Wave

    Returns
    -------
    dict of str to Banded
        In stored unknowns (see ``Layout``), real where the term allows it. Terms the column does
        not have, or that are left out of it, are zero matrices.
    """
    setting = Setting(column, air, wave, layout_of(column))
    to_stored = 1.0 / setting.layout.phase
    built = {}
    for name, term in CATALOGUE.items():
        if name in column.left_out:
            built[name] = total(setting.layout.size, ())
            continue
        matrix = term.build(setting).trimmed().similar(to_stored)
        built[name] = matrix.real() if matrix.is_real else matrix
    return built
