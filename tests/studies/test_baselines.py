"""Baselines in the studies: they stand in the same tables as tableaux, by name."""

import json

import numpy as np
import pytest

import levelstride
from examples.quick import DEFINITION
from levelstride.accuracy.carried_packet import march
from levelstride.errors import CalculationError, InputError
from levelstride.results.export import to_json
from levelstride.schemes import find_scheme, scheme_names
from levelstride.splitting import resolve
from levelstride.stability.spectrum import sampled_wavenumbers
from levelstride.stability.time_modes import mode_in_time
from levelstride.stability.tolerance import Tolerance
from levelstride.stability.verdict import ColumnVerdict
from levelstride.stability.wave_problem import WaveProblem
from levelstride.stepper.any_scheme import stepper_of
from levelstride.studies.cost import step_cost
from levelstride.studies.keys import limit_key
from levelstride.studies.methods import tableau_of
from levelstride.studies.timing import step_time

THREE = ["Time-split RK3", "Leapfrog-trapezoid RA", "BDF2/BX2*"]
DAY = Tolerance(86400.0, 1000.0)


def column(layers=4, **tables):
    return levelstride.build(
        {
            "levels": {"kind": "uniform", "layers": layers, "top_m": 2000.0 * layers},
            "air": {"kind": "isothermal", "temperature_k": 250.0},
            "horizontal": {"grid_spacing_m": 2000.0},
            **tables,
        }
    )


@pytest.fixture(scope="module")
def still():
    return column()


@pytest.mark.parametrize("name", [*scheme_names(), "Strang(trapezoid, RK4)"])
def test_limit_is_where_dense_eigenvalues_say(still, name):
    found = levelstride.limit(still, tableau=name, split="sound+buoyancy", brief=True)
    assert found.tableau == name
    assert found.criterion.startswith("spectrum")
    scheme, splitting = tableau_of(still, name), resolve("sound+buoyancy")
    if scheme.kind == "explicit":
        splitting = splitting.without_implicit()
    waves = [
        WaveProblem(still, still.airs[0], splitting, scheme, float(kappa))
        for kappa in sampled_wavenumbers(still.horizontal)
    ]
    at = [max(wave.growth(share * found.stable_step_s) for wave in waves) for share in (0.99, 1.02)]
    assert at[0] <= DAY.rate < at[1]
    plain = json.loads(to_json(found))
    assert plain["bites"]["time_mode"] in {None, "physical", "computational", "merged"}


def test_leapfrog_stands_at_its_textbook_limit(still):
    """Two-frequency oscillator: unfiltered, explicit terms by themselves up to |slow dt| = 1."""
    still = column(scheme={"filter": 0.0, "off_centring": 0.0})
    found = levelstride.limit(still, tableau="leapfrog", split="all-explicit", brief=True)
    assert found.explicit_share == pytest.approx(1.0, rel=2e-3)
    assert found.bites.time_mode == "merged"


def test_knobs_of_the_column_file_are_turned(still):
    other = column(scheme={"substeps": 4, "off_centring": 0.2})
    scheme = tableau_of(other, "time-split rk3")
    assert (scheme.knobs["substeps"], scheme.knobs["off_centring"]) == (4, 0.2)
    assert scheme.knobs["divergence_damping"] == 0.1
    assert tableau_of(other, "ars343").name == "ARS(3,4,3)"
    splitting = resolve("sound")
    keys = {limit_key(c, tableau_of(c, "timesplitrk3"), splitting) for c in (still, other)}
    assert len(keys) == 2
    with pytest.raises(InputError, match="substeps"):
        column(scheme={"substeps": 2.5})
    with pytest.raises(InputError, match="filter"):
        column(scheme={"filter": 2.0})


def test_a_knob_map_varies_substeps(still):
    found = levelstride.knob_map(
        still,
        vary={"scheme.substeps": "1:4:2", "scheme.divergence_damping": [0.0, 0.1]},
        tableaux=["Time-split RK3"],
        splits=["sound+buoyancy"],
    )
    (row,) = found.rows
    steps = {point.values: point.stable_step_s for point in row.points}
    assert steps[4.0, 0.1] > 2 * steps[1.0, 0.1]


def test_an_advice_has_baselines_in_its_rows():
    names = ["Leapfrog-trapezoid RA", "ARS(2,3,2)"]
    quick = levelstride.build(DEFINITION)
    advice = levelstride.advise(quick, tableaux=names, splits=["sound+buoyancy"])
    assert {row.tableau for row in advice.rows} == set(names)
    assert all(row.advised_step_s for row in advice.rows)
    assert all(row.measured_s_per_hour > 0 for row in advice.rows)


def test_a_comparison_has_baselines_in_its_rows(still):
    compared = levelstride.compare(still, tableaux=THREE, splits=["sound+buoyancy"])
    for row in compared.rows:
        assert row.errors.stable
        assert row.errors.ambiguous == 0
        assert row.errors.packet_error < 0.2


def test_a_stretched_curve_of_a_baseline(still):
    found = levelstride.stretch(
        still, tableaux=["SBDF2"], splits=["sound+buoyancy"], target_step_s=0.05, points=4
    )
    (row,) = found.rows
    assert row.tableau == "SBDF2"
    assert all(point.stable_step_s for point in row.curve)


def test_marching_finds_what_full_matrices_find():
    wide = column(14, wind={"kind": "uniform", "speed_m_per_s": 20.0})
    for name in ("Leapfrog-trapezoid RA", "Time-split RK3"):
        verdict = ColumnVerdict(wide, resolve("sound+buoyancy"), tableau_of(wide, name))
        assert verdict.marches
        marched = verdict.stable_step(DAY, refine=False).step_s
        verdict.marches = False
        dense = verdict.stable_step(DAY, refine=False).step_s
        assert marched == pytest.approx(dense, rel=3e-3)


def test_costs_count_substeps(still):
    weights = still.advice
    split = step_cost(find_scheme("time-split rk3"), resolve("sound+buoyancy"), weights)
    assert (split.evaluations, split.solves, split.exchanges) == (3, 11, 3 + 22)
    same = step_cost(find_scheme("time-split rk3"), resolve("sound+buoyancy+divergence"), weights)
    assert same.exchanges == split.exchanges
    leapfrog = step_cost(find_scheme("leapfrog"), resolve("sound"), weights)
    assert (leapfrog.evaluations, leapfrog.solves, leapfrog.exchanges) == (1, 1, 1)
    assert step_time(still, resolve("sound"), find_scheme("leapfrog"), 1.0) > 0.0


def test_a_computational_mode_is_named_as_such(still):
    scheme, splitting = find_scheme("leapfrog", {"filter": 0.0}), resolve("sound+buoyancy")
    kappa = float(sampled_wavenumbers(still.horizontal)[3])
    problem = WaveProblem(still, still.airs[0], splitting, scheme, kappa)
    dt = 0.3
    values, vectors = np.linalg.eig(problem.matrix(dt))
    named = [
        mode_in_time(problem.parts, scheme, dt, complex(value), problem.newest(vector))
        for value, vector in zip(values, vectors.T, strict=True)
    ]
    # of slow modes the physical factor is near one, the computational one near minus one
    slow = np.abs(values.imag) < 0.3
    assert slow.sum() >= 4
    wanted = np.where(values.real > 0, "physical", "computational")
    assert np.array_equal(np.array(named)[slow], wanted[slow])
    one_level = find_scheme("time-split rk3")
    assert mode_in_time(problem.parts, one_level, dt, 1.0 + 0j, vectors[:, 0]) is None


def test_too_few_steps_for_a_start_are_refused(still):
    problem = WaveProblem(
        still, still.airs[0], resolve("sound"), find_scheme("am2star/ax2star"), 1e-3
    )
    stepper = stepper_of(problem.parts, problem.tableau, 1.0)
    with pytest.raises(CalculationError, match="start"):
        march(stepper, np.ones(problem.parts.layout.size), 1)
