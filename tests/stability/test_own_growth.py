"""Growth of the air itself: found, taken out of the verdict, and its cause named."""

import numpy as np
import pytest
from scipy.linalg import expm

from levelstride.column.read import build
from levelstride.operator.bands import Banded
from levelstride.splitting import resolve
from levelstride.stability.own_growth import OperatorFacts, cause_of_growth
from levelstride.stability.spectrum import sampled_wavenumbers
from levelstride.stability.tolerance import Tolerance
from levelstride.stability.verdict import ColumnVerdict
from levelstride.stability.wave_problem import wave_terms
from levelstride.tableaux.lookup import find

TOLERANCE = Tolerance(86400.0, 1000.0)


def column_of(layers=6, top_m=10e3, grid_spacing_m=3000.0, **tables):
    return build(
        {
            "levels": {"kind": "uniform", "layers": layers, "top_m": top_m},
            "air": {"kind": "isothermal", "temperature_k": 250.0},
            "horizontal": {"grid_spacing_m": grid_spacing_m, "directions": 1},
        }
        | tables
    )


def banded(matrix):
    rows, columns = np.indices(matrix.shape)
    return Banded.from_entries(len(matrix), [(rows.ravel(), columns.ravel(), matrix.ravel())])


def convection():
    """Temperature falls by 12 K/km, more than the 9.8 K/km of dry air turned over."""
    return column_of(
        air={
            "kind": "sounding",
            "heights_m": [0.0, 5000.0, 10000.0],
            "temperatures_k": [310.0, 250.0, 230.0],
        }
    )


def shear():
    """A shear layer of 40 m/s over 400 m in isothermal air: Ri = 0.04."""
    return column_of(
        layers=10,
        top_m=2000.0,
        grid_spacing_m=300.0,
        wind={
            "kind": "table",
            "heights_m": [0.0, 800.0, 1200.0, 2000.0],
            "speeds_m_per_s": [-20.0, -20.0, 20.0, 20.0],
            "advection": "centred-2",
        },
    )


def updraft():
    """A vertical wind without the convergence that would feed it."""
    return column_of(updraft={"speed_m_per_s": 5.0, "scheme": "centred"})


def slope_and_shear():
    """Shear of Ri = 11 along slopes of 0.3."""
    return column_of(
        layers=8,
        top_m=3000.0,
        grid_spacing_m=1000.0,
        terrain={"slope": 0.3},
        wind={"kind": "linear", "shear_per_s": 0.006, "advection": "centred-2"},
    )


CAUSES = [
    (convection, "convection"),
    (shear, "shear"),
    (updraft, "formulation (frozen updraft)"),
    (slope_and_shear, "formulation (shear along slopes)"),
]


@pytest.mark.parametrize(("make", "cause"), CAUSES)
def test_the_cause_is_named_and_there_is_no_strict_step(make, cause):
    column = make()
    verdict = ColumnVerdict(column, resolve("sound+buoyancy"), find("ARS(2,3,2)"))
    worst = max(verdict.search.problems(), key=lambda problem: problem.facts.own_growth)
    assert verdict.grows_by_itself(worst)
    terms = worst.wave_terms.terms
    assert cause_of_growth(terms, column, worst.air) == cause
    whole = sum(term.to_dense() for term in terms.values())
    growth = np.linalg.eigvals(whole).real.max()
    assert worst.facts.own_growth == pytest.approx(growth, rel=1e-9)
    assert verdict.strict_step(verdict.stable_step(TOLERANCE)) is None


def test_growth_of_the_air_is_not_held_against_the_step():
    """Convection grows tenfold in an hour, yet the step is what sound waves allow."""
    growing = ColumnVerdict(convection(), resolve("sound+buoyancy"), find("ARS(2,3,2)"))
    fastest = max(problem.facts.own_growth for problem in growing.search.problems())
    assert fastest > 50 * TOLERANCE.rate
    stable = ColumnVerdict(column_of(), resolve("sound+buoyancy"), find("ARS(2,3,2)"))
    step_s = growing.stable_step(TOLERANCE).step_s
    warmer = np.sqrt(310.0 / 250.0)  # the ground is warmer, so sound is faster there
    assert stable.stable_step(TOLERANCE).step_s / warmer < step_s
    assert step_s < stable.stable_step(TOLERANCE).step_s


def test_air_at_rest_grows_nothing_and_keeps_its_energy():
    column = column_of(terrain={"slope": 0.3})
    for kappa in sampled_wavenumbers(column.horizontal):
        facts = wave_terms(column, column.airs[0], float(kappa)).facts
        assert facts.own_growth == 0.0
        assert facts.log_exponential_peak(0.0) == 0.0


def test_the_exponential_is_followed_to_its_peak():
    operator = np.array([[-1.0, 100.0], [0.0, -2.0]])
    facts = OperatorFacts(banded(operator), 1e3)
    times = np.geomspace(1e-4, 10, 4000)
    direct = max(np.log(np.linalg.norm(expm(t * operator), 2)) for t in times)
    assert facts.own_growth == 0.0
    assert facts.largest_eigenvalue == pytest.approx(2.0)
    # looked at from factor to factor 1.5, so a little of the peak is missed
    assert direct - 0.1 < facts.log_exponential_peak(0.0) <= direct + 1e-6
    assert facts.log_exponential_peak(1e4) == 0.0


def test_growth_is_measured_beside_the_transient():
    facts = OperatorFacts(banded(np.array([[0.01, 5.0], [0.0, -1.0]])), 1e4)
    assert facts.own_growth == pytest.approx(0.01)
    assert facts.log_exponential_peak(0.01) == pytest.approx(np.log(np.hypot(1, 5 / 1.01)), abs=0.1)
