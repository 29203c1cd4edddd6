"""Made-up comparisons and maps for tests of everything that reads them: small, meaningless."""

from dataclasses import replace

from examples import records
from levelstride.results.comparison import (
    ComparedRow,
    Comparison,
    CurvePoint,
    ErrorsAtStep,
    GravityWave,
    SoundDamping,
    Weights,
)
from levelstride.results.knob_map import Knob, KnobMap, MapPoint, MapRow
from levelstride.results.wording import CAUTION
from levelstride.results.work_precision import PacketSummary


def errors(**changes):
    values = {
        "step_s": 8.0,
        "stable": True,
        "frequency_error": 0.00025,
        "amplitude_change_per_period": -0.0125,
        "amplitude_change_per_hour": -0.05,
        "worst_wave": GravityWave(
            air="standard",
            wavenumber_per_m=2.6e-4,
            wavelength_m=24000.0,
            vertical_order=2,
            period_s=900.0,
            frequency_error=0.0002,
            amplitude_change_per_period=-0.0125,
            amplitude_change_per_hour=-0.05,
        ),
        "sound": SoundDamping(
            wavelength_m=24000.0,
            modes=14,
            mean_change_per_period=-0.25,
            mean_change_per_hour=-0.9,
            worst_change_per_period=-0.5,
        ),
        "matched": 20,
        "ambiguous": 0,
        "spurious_growth_per_s": -1e-6,
        "packet_error": 0.01,
    }
    return ErrorsAtStep(**{**values, **changes})


def curve(cost, error, order=2, points=4):
    """A curve from a cost and an error downwards, every step half of the one before."""
    return tuple(
        CurvePoint(step_s=8.0 / 2**k, error=error / 2 ** (order * k), cost_per_hour=cost * 2**k)
        for k in range(points)
    )


def row(cost=1000.0, error=0.01, order=2, **changes):
    values = {
        "tableau": "ARS(2,3,2)",
        "split": "sound+buoyancy",
        "stable_step_s": 9.0,
        "unbounded": False,
        "scanned_to_s": 10000.0,
        "criterion": "spectrum",
        "stable_reason": "spectrum: sound wave of 6.0 km, layers 0-3 (0-140 m)",
        "air": "standard",
        "couples_columns": False,
        "path": "tridiagonal",
        "certified": "made up",
        "accurate_step_s": 8.5,
        "accurate_reason": "amplitude of gravity waves: -5.1 % per period at 8.6 s, 5 % allowed",
        "advised_step_s": 8.0,
        "advised_step_fraction": "8",
        "advised_reason": "spectrum: sound wave of 6.0 km, layers 0-3 (0-140 m)",
        "step_s": 8.0,
        "errors": errors(packet_error=error),
        "steps_per_hour": 450.0,
        "explicit_evaluations_per_hour": 1350.0,
        "solves_per_hour": 900.0,
        "exchanges_per_hour": 1350.0,
        "cost_per_hour": cost,
        "measured_s_per_hour": 0.0325,
        "curve": () if error is None else curve(cost, error, order),
    }
    return ComparedRow(**{**values, **changes})


def unusable(**changes):
    return replace(
        row(),
        **{
            "tableau": "UJ3(1,3,2)",
            "errors": errors(stable=False, packet_error=None),
            "steps_per_hour": None,
            "explicit_evaluations_per_hour": None,
            "solves_per_hour": None,
            "exchanges_per_hour": None,
            "cost_per_hour": None,
            "measured_s_per_hour": None,
            "curve": (),
            **changes,
        },
    )


def comparison(*rows, **changes):
    advice = records.advice()
    values = {
        "title": "Brackwater coast, 3 layers",
        "column": advice.column,
        "step_s": None,
        "weights": Weights(explicit=1.0, solve=1.0, exchange=0.5),
        "equal_cost_per_hour": 2000.0,
        "equal_cost_reason": "what row 2 costs at its step, the dearest",
        "packets": (
            PacketSummary(
                air="standard",
                wavelength_m=36000.0,
                centre_m=6000.0,
                half_width_m=2000.0,
                vertical_wavelength_m=6000.0,
                period_s=900.0,
                modes=3,
                kept=1.0,
            ),
        ),
        "rows": rows or (row(error_at_equal_cost=0.0025, step_at_equal_cost_s=4.0),),
        "cheapest": 0,
        "most_accurate": 0,
        "undominated": (0,),
        "verdict": "cheapest is row 1, made up",
        "lowest_slope_gradient": None,
        "notes": ("no wind was given, the limit is for air at rest",),
        "caution": CAUTION,
        "provenance": advice.provenance,
    }
    return Comparison(**{**values, **changes})


def point(*values, **changes):
    found = {
        "values": values,
        "stable_step_s": 9.0,
        "unbounded": False,
        "binds": "spectrum: sound wave of 6.0 km, layers 0-3 (0-140 m)",
        "step_s": 8.0,
        "stable": True,
        "frequency_error": 0.00025,
        "amplitude_change_per_period": -0.0125,
        "amplitude_change_per_hour": -0.05,
    }
    return MapPoint(**{**found, **changes})


SLOPE = Knob(key="terrain.slope", values=(0.0, 0.1), logarithmic=False, present=0.1)
SPACING = Knob(
    key="horizontal.grid_spacing_m",
    values=(1000.0, 2000.0, 4000.0),
    logarithmic=True,
    present=3000.0,
)


def knob_map(*knobs, **changes):
    knobs = knobs or (SLOPE,)
    advice = records.advice()
    grid = [(x,) for x in knobs[0].values]
    if len(knobs) == 2:
        grid = [(x, y) for x in knobs[0].values for y in knobs[1].values]
    points = [
        point(*at, stable_step_s=9.0 - k, binds="none" if k == 1 else point().binds)
        for k, at in enumerate(grid)
    ]
    points[-1] = point(*grid[-1], stable_step_s=None, unbounded=True)
    values = {
        "title": "Brackwater coast, 3 layers",
        "column": advice.column,
        "knobs": knobs,
        "step_s": 8.0,
        "share_of_stable": None,
        "rows": (MapRow(tableau="ARS(2,3,2)", split="sound", points=tuple(points)),),
        "lowest_slope_gradient": "half",
        "notes": (),
        "caution": CAUTION,
        "provenance": advice.provenance,
    }
    return KnobMap(**{**values, **changes})
