"""Steps at which a stage is singular."""

import numpy as np
import pytest

from levelstride.stability.poles import pole_steps
from levelstride.tableaux.lookup import find


def test_a_negative_diagonal_entry_meets_damping():
    tableau = find("IMKG254b")
    assert tableau.distinct_diagonals == (-0.5, 1.0)
    rates = np.array([-0.01, -0.002, 0.004, 1j, -1e-5 + 2j], dtype=complex)
    np.testing.assert_allclose(pole_steps(rates, tableau), [200.0, 250.0, 1000.0])


def test_a_nearly_real_rate_is_met_where_the_stage_is_nearest_to_singular():
    rate = -0.01 + 0.002j
    [step] = pole_steps(np.array([rate]), find("IMKG254b"))
    steps = np.linspace(0.9, 1.1, 2001) * step
    distance = np.abs(1 + 0.5 * steps * rate)
    assert steps[np.argmin(distance)] == pytest.approx(step, rel=1e-3)


def test_positive_entries_meet_growth_alone():
    assert pole_steps(np.array([-0.01 + 0j, 2j]), find("ARS(2,3,2)")).size == 0
    [step] = pole_steps(np.array([0.01 + 0j]), find("ARS(2,3,2)"))
    assert step == pytest.approx(100 / (1 - np.sqrt(0.5)))


def test_explicit_tableaux_have_none():
    assert pole_steps(np.array([0.01 + 0j]), find("RK4")).size == 0
