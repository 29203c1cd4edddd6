"""First-order changes of limits, against differences of what they are derivatives of."""

import numpy as np
import pytest

from levelstride.column.read import build
from levelstride.column.variants import with_levels
from levelstride.splitting import resolve
from levelstride.stability.lost_rows import RowDerivative, lost_rows
from levelstride.stability.lost_states import lost_states, unpaired
from levelstride.stability.powers import power_peak
from levelstride.stability.sensitivity import inner, power_slope
from levelstride.stability.tolerance import Tolerance
from levelstride.stability.verdict import ColumnVerdict
from levelstride.tableaux.lookup import find

TOLERANCE = Tolerance(86400.0, 1000.0)


def column_of(**tables):
    return build(
        {
            "levels": {"kind": "geometric", "layers": 8, "top_m": 8000.0, "lowest_layer_m": 200.0},
            "air": {"kind": "isothermal", "temperature_k": 250.0},
            "horizontal": {"grid_spacing_m": 3000.0, "directions": 1},
        }
        | tables
    )


@pytest.mark.parametrize("dtype", [float, complex])
def test_the_slope_of_a_power_norm_is_its_derivative(dtype):
    rng = np.random.default_rng(7)

    def draw():
        real = rng.standard_normal((6, 6))
        return real if dtype is float else real + 1j * rng.standard_normal((6, 6))

    matrix, direction = 0.4 * draw(), draw()
    peak = power_peak(matrix, 1.0, -1.0, 10.0)
    assert peak.steps > 6

    def log_norm(h):
        power = np.linalg.matrix_power(matrix + h * direction, peak.steps)
        return np.log(np.linalg.norm(power, 2))

    h = 1e-6
    expected = (log_norm(h) - log_norm(-h)) / (2 * h)
    assert inner(power_slope(matrix, peak), direction) == pytest.approx(expected, rel=1e-6)


def test_of_conjugate_values_those_above_the_axis_are_left():
    values = np.array([1 + 1j, 1 - 1j, 2.0, 0.5 - 0.5j, 3.0])
    assert unpaired(values).tolist() == [0, 2, 3, 4]


@pytest.mark.parametrize(("tableau", "split"), [("UJ3(1,3,2)", "sound+buoyancy")])
def test_every_lost_state_is_lost_at_its_own_limit(tableau, split):
    verdict = ColumnVerdict(column_of(), resolve(split), find(tableau))
    found = verdict.stable_step(TOLERANCE)
    states = lost_states(verdict.search.problems(), TOLERANCE, found.step_s, 1.05)
    assert len(states) > 2
    steps = [state.step_s for state in states]
    assert steps == sorted(steps)
    assert found.step_s <= steps[0] <= found.bracket.high
    for state in states:
        values = np.linalg.eigvals(state.problem.matrix(state.step_s * (1 + 1e-6)))
        growing = np.log(np.abs(values)) / state.step_s > state.problem.rate(TOLERANCE)
        assert np.count_nonzero(growing & (values.imag >= 0)) == state.rank + 1


def test_neighbouring_waves_count_once():
    """Sound along the grid: the limit falls with the wavenumber, so only the shortest counts."""
    verdict = ColumnVerdict(column_of(), resolve("sound"), find("ARS(2,3,2)"))
    found = verdict.stable_step(TOLERANCE)
    states = lost_states(verdict.search.problems(), TOLERANCE, found.step_s, 1.3)
    assert {state.problem.kappa for state in states} == {found.bracket.problem.kappa}


@pytest.mark.parametrize(
    ("scheme", "tableau", "number"),
    [("upwind-1", "forward Euler", 1.0), ("upwind-3", "ARS(3,4,3)", None)],
)
def test_rows_know_the_courant_number_and_move_with_their_layers(scheme, tableau, number):
    column = column_of(
        updraft={
            "heights_m": [0.0, 2000.0, 3000.0, 8000.0],
            "speeds_m_per_s": [0.0, 1.0, 30.0, 0.0],
            "scheme": scheme,
        }
    )
    splitting = resolve("all-implicit").with_treatment("vertical-advection", "explicit")
    method = find(tableau)
    verdict = ColumnVerdict(column, splitting, method)
    courant = verdict.stable_step(TOLERANCE).courant
    rows = lost_rows(column, verdict.splitting, method, TOLERANCE.rate, courant.step_s, 1.01)
    assert rows[0].layer == courant.layer
    assert rows[0].step_s == pytest.approx(courant.step_s, rel=2e-3)
    if number is not None:
        speed = np.interp(column.levels.interfaces_m[1:-1], [0, 2e3, 3e3, 8e3], [0, 1, 30, 0])
        upwind = column.levels.thickness_m[:-1]
        centre = np.interp(column.levels.centres_m, [0, 2e3, 3e3, 8e3], [0, 1, 30, 0])
        spacing = np.concatenate([column.levels.thickness_m[:1], column.levels.spacing_m])
        textbook = number / max((speed / upwind).max(), (centre / spacing).max())
        assert rows[0].step_s == pytest.approx(textbook, rel=1e-3)
    derivative = RowDerivative(rows[0], column, verdict.splitting, method, TOLERANCE.rate)
    for f in range(1, column.levels.nlev):
        more, less = column.levels.interfaces_m.copy(), column.levels.interfaces_m.copy()
        more[f] += 2.0
        less[f] -= 2.0
        columns = with_levels(column, more), with_levels(column, less)
        limits = [
            next(
                row.step_s
                for row in lost_rows(
                    one, verdict.splitting, method, TOLERANCE.rate, rows[0].step_s / 1.02, 1.05
                )
                if row.index == rows[0].index
            )
            for one in columns
        ]
        expected = limits[0] - limits[1]
        assert derivative.between(*columns) == pytest.approx(expected, rel=1e-2, abs=1e-5)
