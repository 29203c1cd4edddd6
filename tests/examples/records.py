"""Made-up records for tests of everything that reads them: complete, small, meaningless."""

from dataclasses import asdict, fields

from levelstride.results.biting import Bites, Counterfactual, FieldProfile, StepOfAir
from levelstride.results.calibration import SafetyFactor
from levelstride.results.certificate import Certificate, CertifiedWave, RefutedStep
from levelstride.results.dataset import (
    Advice,
    AdviceRow,
    ColumnSummary,
    CurrentStep,
    Limit,
    OwnGrowth,
    Provenance,
    StepAtTolerance,
    Window,
)
from levelstride.results.headroom import UNITS, Headroom, Room
from levelstride.results.wording import CAUTION


def bites(**changes):
    values = {
        "wavenumber_per_m": 1.0471975511965976e-3,
        "growth_per_s": 1.2e-5,
        "kind": "sound",
        "layer_lowest": 0,
        "layer_highest": 3,
        "bottom_m": 0.0,
        "top_m": 140.0,
        "energy_share": {"u": 0.4, "pi": 0.35, "w": 0.2, "theta": 0.05},
        "kind_share": {"sound": 0.9, "gravity": 0.1},
        "wavelength_layers": 2.5,
        "wavelength_m": 6000.0,
        "period_s": 12.5,
        "energy_by_layer": (0.6, 0.3, 0.1),
        "profiles": (
            FieldProfile(
                field="u",
                heights_m=(10.0, 40.0, 90.0),
                amplitude=(0.5, 0.25, 0.125),
                phase_rad=(0.0, 1.5, -1.5),
            ),
            FieldProfile(
                field="theta", heights_m=(20.0, 60.0), amplitude=(0.02, 0.01), phase_rad=(0.5, 0.25)
            ),
        ),
    }
    return Bites(**{**values, **changes})


def certificate(**changes):
    waves = tuple(
        CertifiedWave(
            air="standard",
            wavenumber_per_m=wavenumber,
            growth_below_per_s=below,
            growth_above_per_s=above,
            tolerated_per_s=1.2e-5,
            method="dense eigenvalues",
        )
        for wavenumber, below, above in ((1.0471975511965976e-3, 8e-6, 1.7e-4), (5e-4, None, 2e-7))
    )
    values = {
        "below_s": 27.5,
        "above_s": 27.52,
        "breaks_above": "spectrum",
        "waves": waves,
        "worst": 0,
        "refuted": (
            RefutedStep(
                step_s=29.0, air="standard", wavenumber_per_m=5e-4, criterion="spectrum+transient"
            ),
        ),
    }
    return Certificate(**{**values, **changes})


def limit(**changes):
    values = {
        "tableau": "ARS(2,3,2)",
        "split": "sound+buoyancy",
        "stable_step_s": 27.5,
        "unbounded": False,
        "scanned_to_s": 110.0,
        "strict_step_s": 26.25,
        "stable_step_by_efolding": tuple(
            StepAtTolerance(efolding_s=e, stable_step_s=s)
            for e, s in ((86400.0, 27.5), (3600.0, 28.0), (600.0, None))
        ),
        "criterion": "spectrum",
        "explicit_share": 0.95,
        "gain": 40.0,
        "bites": bites(),
        "certified": "dense eigenvalues on both sides of the limit",
        "efolding_s": 86400.0,
        "growth_per_step": 3.2e-4,
        "air": "standard",
        "own_growth": (
            OwnGrowth(air="standard", wavenumber_per_m=1e-4, growth_per_s=1e-6, cause="shear"),
        ),
        "windows": (Window(from_s=30.0, to_s=31.5),),
        "path": "tridiagonal",
        "cause": "explicit horizontal divergence, layers 0-3 (0-140 m), wave of 6.0 km",
        "stable_step_by_air": tuple(
            StepOfAir(air=name, stable_step_s=step_s, unbounded=step_s is None, scanned_to_s=550.0)
            for name, step_s in (("standard", 27.5), ("hot", None))
        ),
        "counterfactuals": (
            Counterfactual(
                terms=("horizontal-divergence",),
                change="implicit",
                stable_step_s=55.0,
                unbounded=False,
                gain=2.0,
                scanned_to_s=550.0,
            ),
            Counterfactual(
                terms=("horizontal-pressure-gradient", "horizontal-divergence"),
                change="absent",
                stable_step_s=None,
                unbounded=True,
                gain=None,
                scanned_to_s=550.0,
            ),
        ),
    }
    return Limit(**{**values, **changes})


def unbounded(**changes):
    return limit(
        **{
            "stable_step_s": None,
            "unbounded": True,
            "strict_step_s": None,
            "criterion": "none",
            "bites": None,
            "stable_step_by_efolding": (),
            "growth_per_step": None,
            "explicit_share": None,
            "windows": (),
            "cause": None,
            "counterfactuals": (),
            **changes,
        }
    )


def room(column=None, quantity="slope", **_):
    values = {"present": 0.1, "carried": 0.25, "lost": 0.2512, "criterion": "spectrum"}
    if quantity == "wind_m_per_s":
        values = {"present": 0.0, "unbounded": True, "tried_to": 200.0}
    if quantity == "updraft_m_per_s":
        values = {"present": 0.0, "reason": "made up"}
    return Room(quantity=quantity, **values)


def headroom(**changes):
    values = {
        "tableau": "ARS(2,3,2)",
        "split": "sound+buoyancy",
        "step_s": 24.0,
        "efolding_s": 86400.0,
        "rooms": tuple(room(quantity=quantity) for quantity in UNITS),
        "certified": "made up",
    }
    return Headroom(**{**values, **changes})


def safety_factor(**changes):
    values = {
        "tableau": "ARS(2,3,2)",
        "split": "sound",
        "efolding_s": 86400.0,
        "transient_limit": 1000.0,
        "lower": 0.8,
        "upper": None,
    }
    return SafetyFactor(**{**values, **changes})


def row(of=None, **changes):
    of = of or limit()
    values = {
        "advised_step_s": 24.0,
        "advised_step_fraction": "24",
        "steps_per_interval": (25, 150),
        "steps_per_hour": 150.0,
        "cost_per_hour": 1125.0,
        "explicit_evaluations_per_hour": 450.0,
        "solves_per_hour": 300.0,
        "exchanges_per_hour": 450.0,
        "measured_s_per_hour": 0.012,
        "binding": "spectrum: sound wave of 6.0 km, layers 0-3 (0-140 m)",
        "frequency_error": 0.002,
        "amplitude_change_per_period": -0.011,
        "safety": 0.9,
    }
    inherited = {field.name: getattr(of, field.name) for field in fields(Limit)}
    return AdviceRow(**{**inherited, **values, **changes})


def without_step(**changes):
    nothing = dict.fromkeys(
        [field.name for field in fields(AdviceRow) if field.name not in asdict(limit())]
    )
    nothing |= {
        "steps_per_interval": (),
        "binding": "unstable at every step",
        "ambiguous_waves": 0,
    }
    return row(limit(stable_step_s=None, split="sound"), **{**nothing, **changes})


def advice(**changes):
    values = {
        "title": "Brackwater coast, 3 layers",
        "column": ColumnSummary(
            layers=3,
            lowest_layer_m=20.0,
            thickest_layer_m=60.0,
            largest_ratio=2.0,
            top_m=120.0,
            interfaces_m=(0.0, 20.0, 60.0, 120.0),
        ),
        "intervals_s": (600.0, 3600.0),
        "rows": (row(headroom=headroom()), row(unbounded(split="all-implicit")), without_step()),
        "best": 0,
        "current": CurrentStep(
            step_s=22.9,
            share_of_limit=0.8327272727272728,
            stable=True,
            verdict="your step is at 83 % of the limit",
            frequency_error=0.001,
            amplitude_change_per_period=-0.01,
            limit=limit(),
        ),
        "wind_note": "no wind was given, the limit is for air at rest",
        "caution": CAUTION,
        "provenance": Provenance(
            version="0.1.0",
            format_version=1,
            column_source="columns/brackwater_coast.toml",
            column_sha256="ab" * 32,
            created_utc="2031-05-17T08:30:00Z",
            constants={"gravity_m_per_s2": 9.80665},
            tolerances={"efolding_s": 86400.0},
            certified="dense eigenvalues on both sides of the limit",
        ),
    }
    return Advice(**{**values, **changes})
