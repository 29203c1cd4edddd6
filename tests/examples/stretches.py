"""Made-up answers to how far levels can be stretched, for tests of what reads them."""

from dataclasses import asdict

from examples import records
from levelstride.results.mending import (
    InterfaceCost,
    LayerChange,
    LayerCost,
    LayerSensitivity,
    LostFirst,
    Mended,
)
from levelstride.results.stretching import Binding, Crossing, Stretch, StretchPoint, StretchRow
from levelstride.results.wording import CAUTION

LEVELS = (0.0, 600.0, 2000.0, 9000.0)


def binding(**changes):
    values = {
        "criterion": "spectrum",
        "air": "standard",
        "kind": "sound",
        "wavenumber_per_m": 1.0471975511965976e-3,
        "wavelength_m": 6000.0,
        "layer_lowest": 0,
        "layer_highest": 1,
        "bottom_m": 0.0,
        "top_m": 140.0,
    }
    return Binding(**{**values, **changes})


def point(lowest_layer_m, stable_step_s, **changes):
    values = {
        "lowest_layer_m": lowest_layer_m,
        "ratio": 1.5,
        "stable_step_s": stable_step_s,
        "unbounded": stable_step_s is None,
        "layers": 3,
        "lid_m": 9000.0,
        "own": lowest_layer_m == 600.0,
        "binds": None if stable_step_s is None else binding(),
    }
    return StretchPoint(**{**values, **changes})


def crossing():
    return Crossing(
        above_lowest_layer_m=80.0,
        below_lowest_layer_m=77.0,
        above_lid_m=9000.0,
        below_lid_m=9000.0,
        stable_step_s=20.0,
        before=binding(),
        after=binding(kind="gravity", wavelength_m=64e3),
        changes=("kind", "wavenumber"),
        sentence="lowest layer of 77-80 m: gravity wave of 64.0 km, layers 0-1 (0-140 m) takes "
        "over from sound wave of 6.0 km, layers 0-1 (0-140 m)",
    )


def layer_costs():
    cost = LayerCost(
        layer=0,
        bottom_m=0.0,
        top_m=600.0,
        thickness_m=600.0,
        ratio_to_next=2.333,
        step_per_m=0.0123,
        log_sensitivity=0.4,
        step_per_m_thicker=0.0123,
        step_per_m_thinner=0.0456,
        step_per_m_lid_kept=0.01,
    )
    interface = InterfaceCost(
        interface=1,
        height_m=600.0,
        ratio=2.333,
        step_per_m=0.01,
        step_per_m_raised=0.01,
        step_per_m_lowered=0.01,
    )
    lost = LostFirst(criterion="spectrum", air="standard", wavenumber_per_m=1e-3, step_s=27.5)
    return LayerSensitivity(
        tableau="ARS(2,3,2)",
        split="sound+buoyancy",
        stable_step_s=27.5,
        efolding_s=86400.0,
        layers=(cost,),
        interfaces=(interface,),
        lost_first=(lost,),
        method="made up",
    )


def mended(**changes):
    values = {
        "tableau": "ARS(2,3,2)",
        "split": "sound+buoyancy",
        "target_step_s": 30.0,
        "efolding_s": 86400.0,
        "stable_step_before_s": 27.5,
        "carried": True,
        "unchanged": False,
        "interfaces_m": (0.0, 700.0, 2100.0, 9000.0),
        "thickness_m": (700.0, 1400.0, 6900.0),
        "verified_step_s": 30.1,
        "criterion": "spectrum",
        "changes": (LayerChange(layer=0, before_m=600.0, after_m=700.0, factor=1.1667),),
        "distance": 0.2,
        "largest_ratio": 5.0,
        "lowest_kept": False,
        "obstacle": None,
        "releases": (),
        "searches": 7,
        "verdict": "30 s is carried with 1 of 3 layers changed.",
    }
    return Mended(**{**values, **changes})


def row(**changes):
    values = {
        "tableau": "ARS(2,3,2)",
        "split": "sound+buoyancy",
        "target_step_s": 24.0,
        "target_reason": "given",
        "own_stable_step_s": 27.5,
        "thinnest_lowest_layer_m": 93.4,
        "largest_ratio": 2.1,
        "lid_m": 9000.0,
        "interfaces_m": (0.0, 93.4, 500.0, 9000.0),
        "lost": point(92.9, 23.9),
        "never_bites": False,
        "verdict": "24 s is carried to a lowest layer of 93.4 m",
        "curve": (point(3000.0, None), point(600.0, 27.5), point(75.0, 19.2)),
        "crossings": (crossing(),),
    }
    return StretchRow(**{**values, **changes})


def stretch(*rows, **changes):
    rows = rows or (row(),)
    shown = ("target_step_s", "tableau", "split", "thinnest_lowest_layer_m", "largest_ratio")
    advice = records.advice()
    values = {
        "title": "Tiny column",
        **{name: getattr(rows[0], name) for name in (*shown, "curve")},
        "best": 0,
        "rows": rows,
        "keep": "layers-and-lid",
        "lowest": None,
        "column": advice.column,
        "lowest_slope_gradient": None,
        "notes": ("no wind was given, the limit is for air at rest",),
        "caution": CAUTION,
        "provenance": type(advice.provenance)(**asdict(advice.provenance)),
    }
    return Stretch(**{**values, **changes})
