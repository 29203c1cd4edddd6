"""Limits asked again at every wave: right ones hold, wrong ones are refuted and found again."""

from dataclasses import replace

import numpy as np
import pytest

from levelstride.splitting import resolve
from levelstride.stability import certificate as certifying
from levelstride.stability.certificate import certify, settle
from levelstride.stability.step_limit import Bracket
from levelstride.stability.tolerance import Tolerance
from levelstride.stability.verdict import ColumnVerdict
from levelstride.tableaux.lookup import find
from oracles.columns import isothermal_column

TOLERANCE = Tolerance(86400.0, 1000.0)
HOUR = Tolerance(3600.0, 1000.0)
"""Marches of three hours are short."""
FIVE = {"slope_f": np.linspace(0.2, 0.0, 6)}


def verdict_of(tableau, split, **changes):
    column = isothermal_column(5, 10e3, 250.0, ratio=1.4, **changes)
    return ColumnVerdict(column, resolve(split), find(tableau))


@pytest.fixture(scope="module", name="searched")
def _searched():
    verdict = verdict_of("ARS(2,3,2)", "sound+buoyancy", **FIVE)
    return verdict, verdict.stable_step(TOLERANCE)


@pytest.fixture(name="never_dense")
def _never_dense(monkeypatch):
    monkeypatch.setattr(certifying, "DENSE_UNKNOWNS", 0)


def times(found, factor):
    bracket = found.bracket
    wrong = Bracket(factor * bracket.low, factor * bracket.high, bracket.problem)
    return replace(found, step_s=factor * found.step_s, bracket=wrong)


def test_a_right_limit_holds_at_every_sampled_wave(searched):
    verdict, found = searched
    again, certificate = verdict.certified_step(found, TOLERANCE)
    assert again is found
    assert certificate.holds
    assert (certificate.low, certificate.high) == (found.bracket.low, found.bracket.high)
    assert not certificate.refuted
    assert {wave.problem for wave in certificate.waves} == set(verdict.search.problems())
    assert certificate.worst.problem is found.bracket.problem
    for wave in certificate.waves:
        radius = np.abs(np.linalg.eigvals(wave.problem.matrix(certificate.low))).max()
        assert wave.growth_low == pytest.approx(np.log(radius) / certificate.low, abs=1e-12)
        assert wave.growth_low <= wave.tolerated
        assert wave.method == "dense eigenvalues"
    binding = certificate.worst
    assert certificate.breaks_high
    if "spectrum" in certificate.breaks_high:
        assert binding.growth_high > binding.tolerated


def test_a_limit_too_long_is_refuted_and_found_again(searched):
    verdict, found = searched
    again, certificate = verdict.certified_step(times(found, 1.2), TOLERANCE)
    assert certificate.refuted[0].step_s == 1.2 * found.step_s
    assert "spectrum" in certificate.refuted[0].broken
    assert certificate.holds
    assert certificate.breaks_high
    assert again.step_s == certificate.low == again.bracket.low
    assert again.step_s == pytest.approx(found.step_s, rel=5e-3)


def test_a_search_that_met_one_wave_alone_is_refuted_by_the_others():
    verdict = verdict_of("ARS(2,3,2)", "sound+buoyancy", **FIVE)
    right = verdict.stable_step(TOLERANCE)
    narrow = verdict_of("ARS(2,3,2)", "sound+buoyancy", **FIVE)
    narrow.search.kappas = [[1e-4]]
    wrong = narrow.stable_step(TOLERANCE, refine=False)
    assert wrong.step_s > 1.5 * right.step_s
    again, certificate = narrow.certified_step(wrong, TOLERANCE)
    assert len(certificate.waves) > 10
    assert certificate.refuted
    assert again.bracket.problem.kappa > 2e-4
    assert again.step_s == pytest.approx(right.step_s, rel=5e-3)


def test_a_limit_too_short_holds_and_is_said_to_be(searched):
    verdict, found = searched
    _, certificate = verdict.certified_step(times(found, 0.9), TOLERANCE)
    assert certificate.holds
    assert certificate.breaks_high == ()


@pytest.mark.usefixtures("never_dense")
@pytest.mark.parametrize(
    ("tableau", "split"), [("ARS(2,3,2)", "sound+buoyancy"), ("ARS(2,2,2)", "sound"), ("RK4", "")]
)
def test_both_methods_agree(monkeypatch, tableau, split):
    verdict = verdict_of(tableau, split or "all-explicit", **FIVE)
    found = verdict.stable_step(HOUR)
    problems = verdict.search.problems()
    marched = certify(problems, found.bracket.low, HOUR, found.bracket)
    monkeypatch.setattr(certifying, "DENSE_UNKNOWNS", 1000)
    dense = certify(problems, found.bracket.low, HOUR, found.bracket)
    assert marched.holds
    assert dense.holds
    assert marched.marched > 0 == dense.marched
    # the transient criterion beyond the limit is not asked where spectrum breaks
    assert set(marched.breaks_high) <= set(dense.breaks_high)
    assert marched.breaks_high
    for one, other in zip(marched.waves, dense.waves, strict=True):
        assert one.method.startswith("shift-and-invert, residual ")
        assert one.problem is other.problem
        assert one.growth_low <= other.growth_low + 1e-10
        assert one.growth_high <= other.growth_high + 1e-10
        if one.problem is found.bracket.problem and "spectrum" in dense.breaks_high:
            assert one.growth_low == pytest.approx(other.growth_low, abs=1e-9)
            assert one.growth_high == pytest.approx(other.growth_high, abs=1e-9)


@pytest.mark.usefixtures("never_dense")
@pytest.mark.parametrize("factor", [1.2, 1.01])
def test_marches_refute_a_limit_too_long_and_find_it_again(searched, factor):
    verdict, _ = searched
    found = verdict.stable_step(HOUR)
    again, certificate = verdict.certified_step(times(found, factor), HOUR)
    assert certificate.refuted
    assert certificate.holds
    assert certificate.breaks_high
    assert again.step_s == pytest.approx(found.step_s, rel=5e-3)


def test_slow_growth_is_refuted_as_well():
    """ARS(3,4,3) grows as a high power of the step: a day tolerates what ten days do not."""
    verdict = verdict_of("ARS(3,4,3)", "sound+buoyancy")
    day = verdict.stable_step(TOLERANCE)
    patient = Tolerance(864000.0, 1000.0)
    again, certificate = verdict.certified_step(day, patient)
    assert certificate.refuted
    assert again.step_s < 0.97 * day.step_s
    growth = [wave.growth_low for wave in certificate.waves]
    assert 0.5 * patient.rate < max(growth) <= patient.rate


def test_powers_are_asked_as_well():
    """Upwind transport has a harmless spectrum and powers of any size."""
    air_column = isothermal_column(30, 10e3, 250.0, vertical_advection="upwind-1")
    air = air_column.airs[0]
    updraft = replace(air, updraft_c=np.full(30, 5.0), updraft_f=np.r_[0.0, np.full(29, 5.0), 0.0])
    column = replace(air_column, airs=(updraft,))
    split = dict.fromkeys(("vertical-pressure-gradient", "vertical-divergence"), "implicit")
    verdict = ColumnVerdict(column, resolve(split), find("ARS(1,1,1)"))
    problem = verdict.search.problems()[-1]
    broken = [
        certify([problem], dt, TOLERANCE).waves[0].broken for dt in np.geomspace(1.0, 200.0, 12)
    ]
    expected = [problem.violated(dt, TOLERANCE) for dt in np.geomspace(1.0, 200.0, 12)]
    assert broken == expected
    assert any("transient" in one for one in broken)


def test_without_a_wave_that_binds_the_step_itself_is_asked():
    verdict = verdict_of("ARS(2,3,2)", "all-implicit")
    found = verdict.stable_step(TOLERANCE)
    assert found.step_s is None
    again, certificate = verdict.certified_step(found, TOLERANCE)
    assert again is found
    assert (certificate.low, certificate.high) == (verdict.largest_s, None)
    assert all(wave.growth_high is None for wave in certificate.waves)


def test_an_unlimited_answer_is_refuted_too():
    verdict = verdict_of("ARS(2,3,2)", "sound+buoyancy")
    right = verdict.stable_step(TOLERANCE)
    never = replace(right, step_s=None, bracket=None)
    again, certificate = verdict.certified_step(never, TOLERANCE)
    assert certificate.refuted[0].step_s == verdict.largest_s
    assert again.step_s is not None
    assert again.waves_bind
    assert certificate.holds


def test_settling_asks_again_until_nothing_is_broken(searched):
    verdict, found = searched
    problems = verdict.search.problems()
    certificate = settle(problems, 2 * found.step_s, TOLERANCE, None, verdict._keeps(TOLERANCE))
    steps = [refuted.step_s for refuted in certificate.refuted]
    assert steps == sorted(steps, reverse=True)
    assert certificate.low < steps[-1]
    assert certificate.holds
