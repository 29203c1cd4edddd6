"""Stability limits known from textbooks and papers, found again by the search.

- Forward Euler with upwind differences, |lambda|^2 = 1 + 2 nu (nu - 1)(1 - cos k): stable for
  0 <= nu <= 1. Diffusion with forward Euler: K dt/dz^2 <= 1/2. Forward-backward stepping of waves:
  k c dt <= 2. (Durran 2010, Numerical Methods for Fluid Dynamics, chapters 2 to 4.)
- Limits on the imaginary axis: sqrt 3 for three stages of order 3, 2 sqrt 2 for RK4 (Hairer and
  Wanner 1996, Solving Ordinary Differential Equations II, section IV.2), 4 and sqrt 15 for five
  stages of order 2 and 3 (Kinnmark and Gray 1984, Mathematics and Computers in Simulation 26,
  181-188).
- Wicker and Skamarock 2002, Monthly Weather Review 130, 2088-2097, table 1: largest Courant numbers
  of RK3 with upwind-3, centred-4, upwind-5 and centred-6 advection 1.61, 1.26, 1.42, 1.08; their
  numbers are rounded down.
"""

import numpy as np
import pytest
from scipy.optimize import brentq

from levelstride.column.column import Horizontal
from levelstride.column.read import build
from levelstride.operator.setting import layout_of
from levelstride.splitting import resolve
from levelstride.stability.amplification import explicit_polynomial, spectral_radius
from levelstride.stability.courant import courant_limit
from levelstride.stability.powers import power_peak
from levelstride.stability.tolerance import Tolerance
from levelstride.stability.verdict import ColumnVerdict
from levelstride.stability.wave_problem import WaveProblem, wave_terms
from levelstride.studies.limit import limit
from levelstride.tableaux.lookup import find
from oracles.columns import isothermal_column

TEMPERATURE_K = 250.0
SOUND_M_PER_S = np.sqrt(1.4 * 8314.32 / 28.9644 * TEMPERATURE_K)
TOLERANCE = Tolerance(86400.0, 1000.0)


def transport_column(layers, dz=10.0, updraft_m_per_s=1.0):
    """Neutral air rising at one speed from the lowest layer to the highest, upwind-1."""
    top = layers * dz
    return build(
        {
            "levels": {"kind": "uniform", "layers": layers, "top_m": top},
            "air": {
                "kind": "constant-n",
                "surface_temperature_k": 300.0,
                "buoyancy_frequency_per_s": 0.0,
            },
            "horizontal": {"grid_spacing_m": 3000.0, "directions": 1},
            "updraft": {
                "heights_m": [0.0, dz / 2, top - dz / 2, top],
                "speeds_m_per_s": [0.0, updraft_m_per_s, updraft_m_per_s, 0.0],
                "scheme": "upwind-1",
            },
        }
    )


def explicit_only(term):
    return {"name": "all-implicit", term: "explicit"}


def test_upwind_amplification_is_the_textbook_one():
    polynomial = explicit_polynomial(find("forward Euler"))
    for nu in (0.3, 1.0, 1.2):
        phase = np.linspace(0, np.pi, 50)
        factor = np.polynomial.polynomial.polyval(nu * (np.exp(-1j * phase) - 1), polynomial)
        textbook = 1 + 2 * nu * (nu - 1) * (1 - np.cos(phase))
        np.testing.assert_allclose(np.abs(factor) ** 2, textbook, atol=1e-13)


@pytest.mark.parametrize("updraft_m_per_s", [1.0, -2.0])
def test_explicit_upwind_transport_carries_the_courant_limit(updraft_m_per_s):
    column = transport_column(6, updraft_m_per_s=updraft_m_per_s)
    found = limit(
        column, tableau="ARS(1,1,1)", split=explicit_only("vertical-advection"), what_if=False
    )
    assert found.stable_step_s * abs(updraft_m_per_s) / 10.0 == pytest.approx(1.0, rel=1e-3)
    assert found.criterion == "courant"
    assert found.bites.kind == "transport"
    assert found.air == "constant-n"


def theta_transport(column):
    """Transport of theta' alone, in energy coordinates."""
    kappa = np.pi / column.horizontal.grid_spacing_m
    terms = wave_terms(column, column.airs[0], float(kappa)).terms
    theta = layout_of(column).theta
    return terms["vertical-advection"].to_dense()[np.ix_(theta, theta)]


def test_the_transient_criterion_tends_to_the_courant_limit():
    """Eigenvalues know nothing of it: on 40 layers at 1.5 times the limit the radius is 0.5."""
    limits = []
    for layers in (25, 100, 200):
        transport = theta_transport(transport_column(layers))
        one = np.eye(transport.shape[0])

        def excess(dt, transport=transport, one=one):
            peak = power_peak(one + dt * transport, dt, TOLERANCE.rate, TOLERANCE.horizon)
            return peak.log_value - np.log(TOLERANCE.transient_limit)

        limits.append(brentq(excess, 9.0, 30.0, xtol=1e-3) / 10.0)
    assert np.all(np.diff(limits) < 0)
    assert limits[0] > 1.1
    assert 1.0 <= limits[-1] < 1.03
    transport = theta_transport(transport_column(40))[1:, 1:]  # the lowest one only feeds
    beyond = np.eye(transport.shape[0]) + 15.0 * transport
    assert spectral_radius(beyond) == pytest.approx(0.5, abs=1e-6)
    assert power_peak(beyond, 15.0, 0.0, 15.0 * 128).log_value > np.log(1e12)


def test_the_whole_column_breaks_the_transient_criterion_later_than_the_courant_one():
    column = transport_column(10)
    splitting = resolve(explicit_only("vertical-advection"))
    verdict = ColumnVerdict(column, splitting, find("ARS(1,1,1)"))
    bracket = verdict.search.run(lambda problem, dt: problem.stable(dt, TOLERANCE))
    assert bracket.problem.violated(bracket.high, TOLERANCE) == ("transient",)
    assert 1.2 < bracket.low / 10.0 < 2.0


@pytest.mark.parametrize(
    ("tableau", "reach"),
    [("ARS(1,1,1)", 2.0), ("ARS(2,3,3)", 2.5127453266), ("ARK3(2)4L[2]SA", None)],
)
def test_explicit_vertical_diffusion(tableau, reach):
    """K dt/dz^2 at the limit is a quarter of the reach along the negative real axis."""
    diffusivity, dz = 50.0, 100.0
    column = build(
        {
            "levels": {"kind": "uniform", "layers": 10, "top_m": 10 * dz},
            "air": {"kind": "isothermal", "temperature_k": TEMPERATURE_K},
            "horizontal": {"grid_spacing_m": 3000.0},
            "diffusion": {"vertical_m2_per_s": diffusivity},
        }
    )
    if reach is None:
        polynomial = explicit_polynomial(find(tableau))

        def beyond(x):
            return abs(np.polynomial.polynomial.polyval(-x, polynomial)) - 1

        reach = brentq(beyond, 1.5, 6.0)
    splitting = resolve(explicit_only("vertical-diffusion"))
    found = courant_limit(column, column.airs[0], splitting, find(tableau), 1 / 86400.0, 1e4)
    assert found.step_s * diffusivity / dz**2 == pytest.approx(reach / 4, rel=1e-3)
    assert found.kind == "mixing"
    after = courant_limit(
        column,
        column.airs[0],
        resolve({"name": "sound", "vertical-diffusion": "after-step"}),
        find(tableau),
        1 / 86400.0,
        1e4,
    )
    assert after.step_s * diffusivity / dz**2 == pytest.approx(0.5, rel=1e-3)


ADVECTION = [
    ("upwind-3", 1.626, 1.61),
    ("centred-4", 1.262, 1.26),
    ("upwind-5", 1.435, 1.42),
    ("centred-6", 1.092, 1.08),
]


@pytest.mark.parametrize(("scheme", "exact", "printed"), ADVECTION)
def test_horizontal_advection_with_runge_kutta_3(scheme, exact, printed):
    spacing_m, wind_m_per_s = 1000.0, 20.0
    column = build(
        {
            "levels": {"kind": "uniform", "layers": 4, "top_m": 8e3},
            "air": {"kind": "isothermal", "temperature_k": TEMPERATURE_K},
            "horizontal": {"grid_spacing_m": spacing_m, "directions": 1},
            "wind": {"kind": "uniform", "speed_m_per_s": wind_m_per_s, "advection": scheme},
        }
    )
    for tableau, split in [
        ("Wicker-Skamarock RK3", "all-explicit"),
        ("ARS(2,3,3)", explicit_only("horizontal-advection")),
    ]:
        found = courant_limit(
            column, column.airs[0], resolve(split), find(tableau), 1 / 86400.0, 1e4
        )
        courant_number = found.step_s * wind_m_per_s / spacing_m
        assert courant_number == pytest.approx(exact, abs=2e-3)
        assert 0 <= courant_number - printed < 0.02
        assert found.kind == "transport"


def test_two_directions_share_the_wind_and_add_their_courant_numbers():
    steps = {}
    for directions in (1, 2):
        column = build(
            {
                "levels": {"kind": "uniform", "layers": 4, "top_m": 8e3},
                "air": {"kind": "isothermal", "temperature_k": TEMPERATURE_K},
                "horizontal": {"grid_spacing_m": 1000.0, "directions": directions},
                "wind": {"kind": "uniform", "speed_m_per_s": 20.0, "advection": "upwind-3"},
            }
        )
        rk3 = find("Wicker-Skamarock RK3")
        splitting = resolve("all-explicit")
        steps[directions] = courant_limit(
            column, column.airs[0], splitting, rk3, 1 / 86400.0, 1e4
        ).step_s
    assert steps[1] / steps[2] == pytest.approx(np.sqrt(2), rel=2e-3)


@pytest.mark.parametrize("staggering", ["charney-phillips", "lorenz"])
def test_forward_backward_has_its_classical_limit(staggering):
    """The explicit pressure gradient acts first, so that the implicit divergence sees the new u.

    Stage two of IMEX Euler is u = u0 - dt i kx cp theta0 pi0, pi = pi0 + dt F(u): Mesinger's
    forward-backward order on every wave without vertical motion, the Lamb wave of isothermal air.
    """
    column = isothermal_column(5, 20e3, TEMPERATURE_K, staggering=staggering)
    found = limit(column, tableau="ARS(1,1,1)", split="sound+buoyancy+divergence", what_if=False)
    largest_gradient = 2 / column.horizontal.grid_spacing_m
    assert largest_gradient * SOUND_M_PER_S * found.stable_step_s == pytest.approx(2.0, rel=2e-3)
    assert found.bites.kind == "Lamb"
    assert found.bites.wavenumber_per_m == pytest.approx(np.pi / 3000.0)
    assert found.strict_step_s == pytest.approx(found.stable_step_s, rel=2e-3)


@pytest.mark.parametrize(
    ("tableau", "reach"),
    [
        ("SSPRK(3,3)", np.sqrt(3)),
        ("RK4", 2 * np.sqrt(2)),
        ("Kinnmark-Gray 5-stage, order 2", 4.0),
        ("Kinnmark-Gray 5-stage, order 3", np.sqrt(15)),
    ],
)
def test_explicit_methods_reach_their_imaginary_axis_limit(tableau, reach):
    column = isothermal_column(4, 10e3, TEMPERATURE_K, ratio=1.3)
    found = limit(column, tableau=tableau, split="all-explicit", what_if=False)
    kappa = np.pi / 3000.0
    fastest = wave_terms(column, column.airs[0], kappa).facts.largest_eigenvalue
    assert found.stable_step_s * fastest == pytest.approx(reach, rel=1e-2)
    assert found.explicit_share == pytest.approx(1.0, rel=1e-2)
    assert found.gain == 1.0


@pytest.mark.parametrize("tableau", ["ARS(1,1,1)", "ARS(2,2,2)", "ARK3(2)4L[2]SA"])
def test_all_implicit_never_bites_with_an_a_stable_tableau(tableau):
    column = isothermal_column(5, 20e3, TEMPERATURE_K, ratio=1.5)
    found = limit(column, tableau=tableau, split="all-implicit", what_if=False)
    assert found.stable_step_s is None
    assert found.unbounded
    assert found.criterion == "none"
    assert found.scanned_to_s == 1e4
    assert found.bites is None
    assert [at.stable_step_s for at in found.stable_step_by_efolding] == [None] * 3


def problem_of(column, split, tableau, kappa):
    return WaveProblem(column, column.airs[0], resolve(split), find(tableau), float(kappa))


def test_a_radius_that_a_krylov_method_misses():
    """Half the spectrum lies within 1e-3 of the circle: a converged-looking ARPACK says 0.99999."""
    column = isothermal_column(100, 20e3, TEMPERATURE_K, horizontal=Horizontal(1000.0, "exact", 1))
    kappa = 2 * np.pi / 10e3
    dt = 1.2 / (kappa * SOUND_M_PER_S)
    problem = problem_of(column, "sound+buoyancy", "ARS(2,3,2)", kappa)
    assert spectral_radius(problem.matrix(dt)) - 1 == pytest.approx(1.3e-8, abs=0.2e-8)
    assert not problem.strict(dt)
    assert problem.stable(dt, TOLERANCE)
    norms = problem.norms(dt)
    # the norms of powers close in on it from above
    assert norms.log_norm(32) / 2.0**32 == pytest.approx(1.3e-8, abs=0.2e-8)


def test_a_verdict_depends_on_its_tolerance():
    """ARS(3,4,3), sound implicit: Courant limit 0.1 at 1e-7 growth a step, 1.4 at 1e-3."""
    column = isothermal_column(
        20, 20e3, TEMPERATURE_K, ratio=1.3, horizontal=Horizontal(3000.0, "exact", 1)
    )
    kappa = np.pi / 3000.0
    problem = problem_of(column, "sound", "ARS(3,4,3)", kappa)

    def first_beyond(growth_per_step):
        courant = 0.03
        while True:
            dt = courant / (kappa * SOUND_M_PER_S)
            if np.expm1(problem.growth(dt) * dt) > growth_per_step:
                return courant
            courant *= 1.05

    assert 0.08 < first_beyond(1e-7) < 0.14
    assert 1.2 < first_beyond(1e-3) < 1.7
