"""Names for the sets of terms that are made implicit together."""

from __future__ import annotations

from collections.abc import Mapping
from types import MappingProxyType
from typing import Final

from levelstride.operator.terms import CATALOGUE

GROUPS: Final[Mapping[str, tuple[str, ...]]] = MappingProxyType(
    {
        "sound": ("vertical-pressure-gradient", "vertical-divergence", "upper-damping"),
        "buoyancy": ("buoyancy", "stratification"),
        "divergence": ("horizontal-divergence", "slope-divergence"),
        "slope": ("slope-pressure-gradient", "slope-divergence"),
        "transport": ("vertical-advection",),
        "mixing": ("vertical-diffusion",),
    }
)
"""Fast terms by group. ``buoyancy`` is both a group and a term: the group wins in a name."""

WHOLE: Final[Mapping[str, tuple[str, ...]]] = MappingProxyType(
    {"all-explicit": (), "all-implicit": tuple(CATALOGUE)}
)
"""Names that stand alone: the baseline without any fast term and the one without any slow."""

TREATMENTS: Final = ("explicit", "implicit", "after-step", "after-step-implicit")
