"""All criteria together: windows, strict steps, tolerances, rates."""

from types import SimpleNamespace

import numpy as np
import pytest

from levelstride.operator.wave import Wave
from levelstride.splitting import resolve
from levelstride.stability.step_limit import Bracket
from levelstride.stability.tolerance import STANDARD_EFOLDINGS_S, Tolerance
from levelstride.stability.verdict import ColumnVerdict, StableStep
from levelstride.tableaux.lookup import find
from oracles.columns import STAGGERINGS, isothermal_column

TOLERANCE = Tolerance(86400.0, 1000.0)


def column_of(staggering="charney-phillips", slope=0.2, **changes):
    return isothermal_column(
        4,
        10e3,
        250.0,
        ratio=1.5,
        staggering=staggering,
        slope_f=slope * np.array([1.0, 0.75, 0.5, 0.25, 0.0]),
        **changes,
    )


def verdict_of(tableau, split, staggering="charney-phillips", **changes):
    return ColumnVerdict(column_of(staggering, **changes), resolve(split), find(tableau))


def test_the_tolerances_stand_for_a_day_an_hour_and_ten_minutes():
    assert STANDARD_EFOLDINGS_S == (86400.0, 3600.0, 600.0)
    assert TOLERANCE.rate == 1 / 86400.0
    assert TOLERANCE.horizon == 864000.0


@pytest.mark.parametrize("staggering", STAGGERINGS)
@pytest.mark.parametrize("tableau", ["ARS(2,2,2)", "ARS(2,3,2)", "IMKG242b"])
def test_more_tolerance_never_shortens_the_step(tableau, staggering):
    verdict = verdict_of(tableau, "sound+buoyancy", staggering)
    found = [
        verdict.stable_step(Tolerance(efolding_s, 1000.0))
        for efolding_s in (86400.0, 3600.0, 600.0)
    ]
    steps = [one.step_s for one in found]
    for step_s in [verdict.strict_step(found[0]), *steps]:
        assert step_s <= steps[-1] * 1.001  # the width of the bisection
    assert steps[0] <= steps[1] * 1.001


@pytest.mark.parametrize("tableau", ["ARS(2,2,2)", "ARK2(2,3,2), a32 = 1/2"])
def test_a_weakly_unstable_tableau_gets_an_honest_finite_step(tableau):
    """Growth per step goes as the fourth power of it: a day allows more than round-off does."""
    verdict = verdict_of(tableau, "sound+buoyancy")
    found = verdict.stable_step(TOLERANCE)
    strict_s = verdict.strict_step(found)
    assert 0 < strict_s < found.step_s
    growth = found.bracket.problem.growth(found.step_s)
    assert 0.9 * TOLERANCE.rate < growth <= TOLERANCE.rate
    radius = np.abs(np.linalg.eigvals(found.bracket.problem.matrix(found.step_s))).max()
    assert radius > 1 + 1e-8


def test_windows_of_stability_lie_beyond_the_limit_and_are_stable():
    verdict = verdict_of("ARK5(4)8L[2]SA2", "sound+buoyancy+divergence", "lorenz")
    found = verdict.stable_step(TOLERANCE)
    windows = verdict.windows(found, TOLERANCE)
    assert windows
    for low, high in windows:
        assert found.bracket.high < low <= high <= 4 * found.step_s
        for dt in (low, high):
            assert all(problem.stable(dt, TOLERANCE) for problem in verdict.search.problems())
    assert not found.bracket.problem.stable(found.bracket.high, TOLERANCE)


def test_windows_join_neighbouring_stable_steps_of_all_waves():
    def wave(*stable):
        return SimpleNamespace(
            stable=lambda dt, tolerance: any(low < dt < high for low, high in stable)
        )

    worst, other = wave((0, 1), (1.5, 2.0), (2.6, 9.0)), wave((0, 1.7), (2.1, 3.2), (3.5, 3.9))
    verdict = verdict_of("ARS(2,3,2)", "sound")
    verdict.search = SimpleNamespace(problems=lambda: [worst, other])
    windows = verdict.windows(StableStep(1.0, Bracket(1.0, 1.001, worst), None), TOLERANCE)
    edges = [(1.5, 1.7), (2.6, 3.2), (3.5, 3.9)]
    assert len(windows) == 3
    for (low, high), (first, last) in zip(windows, edges, strict=True):
        assert first <= low < first * 1.051
        assert last / 1.051 < high <= last


def test_no_windows_without_a_limit():
    verdict = verdict_of("ARS(2,3,2)", "all-implicit")
    found = verdict.stable_step(TOLERANCE)
    assert found.step_s is None
    assert not found.waves_bind
    assert not found.courant_binds
    assert verdict.windows(found, TOLERANCE) == []


@pytest.mark.parametrize("staggering", STAGGERINGS)
def test_the_explicit_rate_is_that_of_the_pairs_with_an_explicit_member(staggering):
    """Of ``sound+divergence`` everything but vertical sound has an explicit member."""
    verdict = verdict_of("ARS(2,3,2)", "sound+divergence", staggering)
    names = [
        "buoyancy",
        "stratification",
        "horizontal-pressure-gradient",
        "horizontal-divergence",
        "slope-pressure-gradient",
        "slope-divergence",
    ]
    largest = 0.0
    for problem in verdict.search.problems():
        operator = sum(problem.wave_terms.terms[name].to_dense() for name in names)
        largest = max(largest, np.abs(np.linalg.eigvals(operator)).max())
    assert verdict.explicit_rate() == pytest.approx(largest, rel=1e-9)
    assert verdict_of("ARS(2,3,2)", "all-implicit").explicit_rate() == 0.0


def test_the_explicit_rate_of_sound_is_sound_across_the_grid():
    """Flat ground: gradient and divergence along the grid, c times the largest |k_x|."""
    column = isothermal_column(4, 10e3, 250.0)
    verdict = ColumnVerdict(column, resolve("sound+buoyancy"), find("ARS(2,3,2)"))
    sound_m_per_s = np.sqrt(1.4 * 8314.32 / 28.9644 * 250.0)
    steepest = Wave(np.pi / 3000.0, column.horizontal).gradient
    assert verdict.explicit_rate() == pytest.approx(sound_m_per_s * steepest, rel=1e-9)


def test_damping_meets_the_pole_of_a_negative_diagonal_entry():
    """IMKG254b has one: mixing of the computational mode, which stands still, is met by it."""
    undamped = verdict_of("IMKG254b", "all-implicit", slope=0.0)
    assert undamped.stable_step(TOLERANCE).step_s is None
    mixing = {"diffusivity_c": np.full(4, 1e3), "diffusivity_f": np.full(5, 1e3)}
    verdict = verdict_of("IMKG254b", "all-implicit", "lorenz", slope=0.0, **mixing)
    found = verdict.stable_step(TOLERANCE)
    poles_s = [
        1 / (-0.5 * rate.real)
        for problem in verdict.search.problems()
        for rate in np.linalg.eigvals(problem.parts.fast.to_dense())
        if rate.real < 0 and abs(rate.imag) < 1e-9 * abs(rate)
    ]
    # unstable from somewhat below the first pole on
    assert 0.9 * min(poles_s) < found.step_s < min(poles_s)
