"""What every answer says about its column and about where it comes from."""

from datetime import UTC, datetime

import numpy as np

from levelstride import __version__
from levelstride.column.column import Column
from levelstride.constants import (
    GAS_CONSTANT,
    GRAVITY,
    HEAT_CAPACITY,
    HEAT_CAPACITY_RATIO,
    REFERENCE_PRESSURE,
)
from levelstride.results.dataset import FORMAT_VERSION, ColumnSummary, Provenance
from levelstride.studies.limit import NO_WIND


def column_summary(column: Column) -> ColumnSummary:
    """Put the level set into a few numbers.

    Parameters
    ----------
    column : Column
        The column.

    Returns
    -------
    ColumnSummary
        Number of layers, thicknesses, largest ratio and interfaces.
    """
    thickness = column.levels.thickness_m
    ratio = thickness[1:] / thickness[:-1]
    return ColumnSummary(
        layers=column.levels.nlev,
        lowest_layer_m=float(thickness[0]),
        thickest_layer_m=float(thickness.max()),
        largest_ratio=float(np.maximum(ratio, 1 / ratio).max()),
        top_m=column.levels.top_m,
        interfaces_m=tuple(float(z) for z in column.levels.interfaces_m),
    )


def wind_note(column: Column) -> str | None:
    """Say that no wind was given, if none was."""
    return None if column.wind_given else NO_WIND


def provenance(column: Column, certified: str) -> Provenance:
    """Say where an answer comes from.

    Parameters
    ----------
    column : Column
        The column it is about.
    certified : str
        How it was checked.

    Returns
    -------
    Provenance
        Version, hash of the column, time, constants and tolerances.
    """
    asked = column.advice
    return Provenance(
        version=__version__,
        format_version=FORMAT_VERSION,
        column_source=column.source,
        column_sha256=column.digest,
        created_utc=datetime.now(UTC).strftime("%Y-%m-%dT%H:%M:%SZ"),
        constants={
            "gravity_m_per_s2": GRAVITY,
            "gas_constant_j_per_kg_k": GAS_CONSTANT,
            "heat_capacity_j_per_kg_k": HEAT_CAPACITY,
            "heat_capacity_ratio": HEAT_CAPACITY_RATIO,
            "reference_pressure_pa": REFERENCE_PRESSURE,
        },
        tolerances={
            "efolding_s": asked.efolding_s,
            "transient_limit": asked.transient_limit,
            "safety": asked.safety,
            "frequency_error": asked.frequency_error,
            "amplitude_loss_per_period": asked.amplitude_loss_per_period,
        },
        certified=certified,
    )
