"""The search against its slow twin, and what its waves and tolerances promise."""

import numpy as np
import pytest

from levelstride.column.read import build
from levelstride.errors import CalculationError
from levelstride.splitting import resolve
from levelstride.stability.spectrum import sampled_wavenumbers
from levelstride.stability.step_limit import StepSearch
from levelstride.stability.tolerance import Tolerance
from levelstride.stability.verdict import ColumnVerdict
from levelstride.tableaux.lookup import find
from oracles.plain_search import PlainWave, plain_stable_step

HORIZONTAL_PAIR = "horizontal-pressure-gradient+horizontal-divergence"
DAY, LONGEST_S = 86400.0, 1e4

# tableau, splitting, staggering, air, what else the column has, e-folding time
CASES = [
    ("ARS(2,2,2)", "sound+buoyancy", "charney-phillips", "isothermal", (), DAY),
    ("ARS(1,1,1)", "sound", "lorenz", "standard", ("upper_damping",), DAY),
    ("ARK2(2,3,2), a32 = 1/2", "sound+buoyancy", "lorenz", "standard", ("terrain",), 3600.0),
    ("ARS(2,3,2)", "sound+slope", "charney-phillips", "constant-n", ("terrain",), DAY),
    ("ARS(3,4,3)", "sound", "lorenz", "standard", ("wind",), DAY),
    (
        "ARS(2,3,3)",
        f"sound+buoyancy+{HORIZONTAL_PAIR}",
        "charney-phillips",
        "standard",
        ("wind", "terrain", "rotation"),
        600.0,
    ),
    ("SSP3(3,3,2)", "sound+buoyancy+divergence", "lorenz", "isothermal", ("reference",), DAY),
    ("ARK3(2)4L[2]SA", "sound+divergence", "charney-phillips", "standard", ("reference",), DAY),
    ("IMKG343a", "sound+buoyancy", "lorenz", "unstable", (), DAY),
    ("Trap2(2,3,2)", "sound+buoyancy", "charney-phillips", "constant-n", ("updraft",), DAY),
    (
        "IMKG242b",
        {
            "name": "sound+buoyancy",
            "vertical-diffusion": "after-step-implicit",
            "upper-damping": "after-step",
            "horizontal-diffusion": "after-step",
            "horizontal-advection": "after-step",
        },
        "lorenz",
        "isothermal",
        ("wind", "upper_damping", "diffusion"),
        DAY,
    ),
    (
        "RK4",
        {"name": "all-explicit", "divergence-damping": "after-step", "rotation": "after-step"},
        "charney-phillips",
        "standard",
        ("divergence_damping", "rotation"),
        DAY,
    ),
]
FROM_THE_START = (1, 3)
"""Cases whose plain scan begins where the definition says; the others, a factor three below."""


def random_column(seed, staggering, air, extras):
    rng = np.random.default_rng(seed)
    layers, top_m = int(rng.integers(3, 6)), float(rng.uniform(3e3, 1.5e4))
    airs = {
        "isothermal": {"kind": "isothermal", "temperature_k": float(rng.uniform(220, 290))},
        "standard": {"kind": "standard"},
        "constant-n": {
            "kind": "constant-n",
            "surface_temperature_k": 290.0,
            "buoyancy_frequency_per_s": float(rng.uniform(0.008, 0.02)),
        },
        "unstable": {
            "kind": "sounding",
            "heights_m": [0.0, 4000.0, 10000.0],
            "temperatures_k": [300.0, 252.0, 220.0],
        },
    }
    grid_spacing_m = float(10 ** rng.uniform(2.5, 4.3))
    tables = {
        "terrain": {"slope": float(rng.uniform(0.05, 0.4))},
        "wind": {
            "kind": "linear",
            "surface_m_per_s": float(rng.uniform(-10, 10)),
            "shear_per_s": float(rng.uniform(-0.004, 0.004)),
        },
        "updraft": {"speed_m_per_s": float(rng.uniform(1, 5)), "scheme": "upwind-3"},
        "upper_damping": {"rate_per_s": 0.1, "base_m": 0.5 * top_m},
        "reference": {"kind": "isothermal", "temperature_k": 300.0},
        "rotation": {"coriolis_per_s": 1e-4},
        "diffusion": {"vertical_m2_per_s": 20.0, "horizontal_coefficient": 10.0},
        "divergence_damping": {"coefficient_m2_per_s": 10 * grid_spacing_m},
    }
    return build(
        {
            "levels": {
                "kind": "geometric",
                "layers": layers,
                "top_m": top_m,
                "lowest_layer_m": float(rng.uniform(0.3, 1.0)) * top_m / layers,
            },
            "air": airs[air],
            "horizontal": {
                "grid_spacing_m": grid_spacing_m,
                "directions": int(rng.integers(1, 3)),
                "gradient": str(rng.choice(["staggered", "centred-2", "centred-4", "exact"])),
            },
            "column": {"staggering": staggering},
        }
        | {name: tables[name] for name in extras}
    )


@pytest.mark.parametrize("number", range(len(CASES)))
def test_the_search_finds_what_the_plain_scan_finds(number):
    tableau, split, staggering, air, extras, efolding_s = CASES[number]
    column = random_column(400 + number, staggering, air, extras)
    tolerance = Tolerance(efolding_s, 1000.0)
    verdict = ColumnVerdict(column, resolve(split), find(tableau))
    bracket = verdict.search.run(lambda problem, dt: problem.stable(dt, tolerance))
    assert bracket is not None
    waves = [
        PlainWave(column, column.airs[0], resolve(split), find(tableau), kappa)
        for kappa in verdict.search.kappas[0]
    ]
    first_s = None if number in FROM_THE_START else bracket.low / 3
    plain_s = plain_stable_step(waves, efolding_s, 1000.0, LONGEST_S, first_s)
    assert bracket.low == pytest.approx(plain_s, rel=5e-3)
    assert bracket.high / bracket.low < 1.0011


def uniform_column(**tables):
    return build(
        {
            "levels": {"kind": "uniform", "layers": 4, "top_m": 8000.0},
            "air": {"kind": "standard"},
            "horizontal": {"grid_spacing_m": 2000.0, "directions": 1},
        }
        | tables
    )


@pytest.mark.parametrize(
    ("staggering", "tableau", "split"),
    [("lorenz", "ARS(2,3,2)", "sound"), ("charney-phillips", "ARS(2,2,2)", "buoyancy")],
)
def test_sixteen_waves_say_what_four_hundred_say(staggering, tableau, split):
    column = uniform_column(column={"staggering": staggering}, terrain={"slope": 0.2})
    tolerance = Tolerance(DAY, 1000.0)
    verdict = ColumnVerdict(column, resolve(split), find(tableau))
    few = verdict.stable_step(tolerance).step_s
    many = sampled_wavenumbers(column.horizontal, 400)
    stable = [verdict.problem(0, float(kappa)).stable(few / 1.005, tolerance) for kappa in many]
    assert all(stable)


def test_longer_waves_are_added_while_the_longest_is_the_worst():
    """Explicit buoyancy with everything else implicit is worst on the longest wave."""
    column = uniform_column(horizontal={"grid_spacing_m": 500.0, "directions": 1})
    tolerance = Tolerance(DAY, 1000.0)
    verdict = ColumnVerdict(column, resolve(f"sound+{HORIZONTAL_PAIR}"), find("ARS(2,3,2)"))
    found = verdict.stable_step(tolerance)
    longest_sampled = float(sampled_wavenumbers(column.horizontal)[0])
    assert verdict.search.kappas[0][0] <= longest_sampled / 2
    assert found.bracket.problem.kappa < longest_sampled * 1.001
    for kappa in (longest_sampled / 64, longest_sampled / 1024):
        assert verdict.problem(0, kappa).stable(found.step_s / 1.01, tolerance)


def test_every_air_state_is_searched_and_the_worst_one_named():
    column = uniform_column(
        air=[
            {"kind": "isothermal", "name": "cold", "temperature_k": 200.0},
            {"kind": "isothermal", "name": "hot", "temperature_k": 320.0},
        ]
    )
    verdict = ColumnVerdict(column, resolve("sound"), find("ARS(2,3,2)"))
    found = verdict.stable_step(Tolerance(DAY, 1000.0))
    assert found.bracket.problem.air.name == "hot"
    for air in (0, 1):
        for kappa in verdict.search.kappas[air]:
            assert verdict.problem(air, kappa).stable(found.step_s, Tolerance(DAY, 1000.0))


class FakeFacts:
    largest_eigenvalue = 1.0


class FakeProblem:
    """A wave whose unstable steps are written down."""

    facts, slow_rate, size = FakeFacts(), 1.0, 130

    def __init__(self, kappa, *unstable, suspects=()):
        self.kappa, self.unstable, self.suspects = kappa, unstable, suspects

    def holds(self, dt):
        return not any(low <= dt < high for low, high in self.unstable)


def fake_search(*problems, largest_s=100.0):
    """Search over these; waves added on the way are always stable."""
    by_kappa = {problem.kappa: problem for problem in problems}

    def make(air, kappa):
        return by_kappa.setdefault(kappa, FakeProblem(kappa))

    search = StepSearch(make, 1, sorted(by_kappa), largest_s)
    return search.run(lambda problem, dt: problem.holds(dt))


def test_the_first_loss_counts_and_not_the_last_return():
    found = fake_search(FakeProblem(1.0, (2.0, 2.5), (5.0, 1e9)))
    assert found.low < 2.0 <= found.high <= 2.0 * 1.0011


def test_a_short_window_is_found_where_a_frozen_layer_grows():
    """Strides step over it; the local screen announces it."""
    found = fake_search(FakeProblem(1.0, (2.0, 2.02), (5.0, 1e9), suspects=(1.7, 2.01)))
    assert found.low == pytest.approx(2.0, rel=2e-3)


def test_a_short_window_of_the_binding_wave_is_found_below_its_limit():
    """Strides step over it; the second look at the full scan ratio does not."""
    found = fake_search(FakeProblem(1.0, (3.0, 3.16), (5.0, 1e9)))
    assert found.low == pytest.approx(3.0, rel=2e-3)


def test_every_wave_is_asked_again_at_the_answer():
    """The second wave is stable at the first limit, but not at the one that refinement finds."""
    first, second = FakeProblem(1.0, (4.0, 1e9)), FakeProblem(2.0, (3.9, 1e9))
    third = FakeProblem(np.sqrt(2.0), (3.5, 1e9))
    assert fake_search(first, second, third).low == pytest.approx(3.5, rel=2e-3)


def test_nothing_bites():
    assert fake_search(FakeProblem(1.0)) is None


def test_the_first_step_is_lowered_while_it_fails():
    found = fake_search(FakeProblem(1.0, (2.5e-6, 1e9)))
    assert found.low == pytest.approx(2.5e-6, rel=2e-3)


def test_no_step_at_all_is_an_error_that_says_so():
    with pytest.raises(CalculationError, match=r"no step down to 1e-12 s keeps .* e-folding time"):
        fake_search(FakeProblem(1.0, (0.0, 1e9)))
