import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from levelstride.column.column import Horizontal
from levelstride.splitting import resolve
from levelstride.stability.spectrum import sampled_wavenumbers
from levelstride.stability.tolerance import Tolerance
from levelstride.stability.transient_growth import largest_power, transient_growth
from levelstride.stability.wave_problem import WaveProblem
from levelstride.studies.transient import transient_at_step
from levelstride.tableaux import find
from oracles.columns import isothermal_column

DAY = Tolerance(86400.0, 1000.0)


def plain_peak(matrix, rate_per_step, most):
    """Every power one by one."""
    power, best = np.eye(len(matrix)), (1.0, 0)
    for steps in range(1, most + 1):
        power = power @ matrix * np.exp(-rate_per_step)
        best = max(best, (np.linalg.norm(power, 2), steps), key=lambda one: one[0])
    return best


@settings(max_examples=8, deadline=None)
@given(
    coupling=st.floats(0.1, 50.0),
    decay=st.floats(0.01, 0.5),
    seed=st.integers(0, 99),
)
def test_largest_power_is_that_of_all_powers_one_by_one(coupling, decay, seed):
    rng = np.random.default_rng(seed)
    matrix = np.diag(np.exp(-decay * rng.uniform(1, 3, 5))) + np.triu(
        coupling * decay * rng.uniform(0, 1, (5, 5)), 1
    )
    norm, steps = plain_peak(matrix, 0.0, 1024)
    found = largest_power(matrix, 1.0, rate=0.0, horizon_s=1024.0)
    assert found.largest_norm == pytest.approx(norm, rel=1e-9)
    assert abs(found.steps - steps) <= 1
    grown = np.linalg.matrix_power(matrix, found.steps) @ found.state
    assert np.linalg.norm(found.state) == pytest.approx(1.0)
    assert np.linalg.norm(grown) == pytest.approx(norm, rel=1e-9)
    assert abs(np.vdot(grown / norm, found.grown)) == pytest.approx(1.0, rel=1e-9)
    assert not found.rising


def test_a_jordan_block_peaks_where_calculus_says():
    """[[a, 1], [0, a]]^m is about m a^(m-1), largest near m = -1/ln a."""
    a = np.exp(-1 / 1000)
    found = largest_power(np.array([[a, 1.0], [0.0, a]]), 2.0, rate=0.0, horizon_s=1e5)
    assert abs(found.steps - 1000) <= 1
    assert found.largest_norm == pytest.approx(1000 * a**999, rel=1e-3)


def test_growth_that_is_tolerated_is_taken_out():
    matrix = np.array([[1.01]])
    found = largest_power(matrix, 1.0, rate=np.log(1.02), horizon_s=1e4)
    assert (found.steps, found.largest_norm, found.rising) == (0, 1.0, False)
    found = largest_power(matrix, 1.0, rate=0.0, horizon_s=1000.0)
    assert found.rising
    assert found.log_largest_norm == pytest.approx(found.steps * np.log(1.01))
    endless = largest_power(np.array([[3.0]]), 1.0, rate=0.0, horizon_s=1e6)
    assert np.isfinite(endless.log_largest_norm)


def test_a_step_that_conserves_energy_has_none():
    column = isothermal_column(6, horizontal=Horizontal(2000.0, "staggered", 2))
    found = transient_at_step(column, resolve("all-implicit"), find("H-CN(2,2,2)"), 30.0)
    assert found.largest_norm == pytest.approx(1.0, abs=1e-9)
    assert found.exponential_norm == 1.0


def test_where_nothing_gains_energy_no_state_is_named():
    column = isothermal_column(6, horizontal=Horizontal(2000.0, "staggered", 2))
    found = transient_at_step(column, resolve("all-implicit"), find("ARS(1,1,1)"), 30.0)
    assert (found.steps, found.kind, found.kind_share) == (0, "none", {})
    assert (found.layer_lowest, found.layer_highest) == (0, 5)


def test_the_column_is_asked_at_every_wave_and_the_worst_is_described():
    column = isothermal_column(8, horizontal=Horizontal(2000.0, "staggered", 2))
    splitting, tableau, dt = resolve("sound+buoyancy+divergence"), find("UJ3(1,3,2)"), 4.0
    found = transient_at_step(column, splitting, tableau, dt)
    each = [
        transient_growth(
            WaveProblem(column, column.airs[0], splitting, tableau, float(kappa)), dt, DAY
        )
        for kappa in sampled_wavenumbers(column.horizontal)
    ]
    largest = max(each, key=lambda one: one.log_largest_norm)
    assert found.largest_norm == pytest.approx(largest.largest_norm)
    assert found.steps == largest.steps
    assert found.largest_norm > 2
    assert sum(found.kind_share.values()) == pytest.approx(1.0)
    assert 0 <= found.layer_lowest <= found.layer_highest < 8
    matrix = WaveProblem(column, column.airs[0], splitting, tableau, found.wavenumber_per_m).matrix(
        dt
    )
    norm, _ = plain_peak(matrix, dt / 86400.0, 2 * found.steps + 50)
    assert found.largest_norm == pytest.approx(norm, rel=1e-6)
