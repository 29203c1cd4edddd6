"""Observed orders of convergence on a column equal those that the coefficients declare.

On linear equations with constant coefficients the order of a pair is that up to which the
conditions of the tall trees hold (Hairer, Noersett, Wanner 1993, Solving Ordinary Differential
Equations I, section II.15; Kennedy, Carpenter 2003, doi:10.1016/S0168-9274(02)00138-1): at least
the declared one, and more for schemes of higher linear order (Kinnmark-Gray). Their parts must not
commute, or a wrong coupling does not show; the reference is the exponential of the operator.
"""

import numpy as np
import pytest

from levelstride.accuracy.carried_packet import march
from levelstride.accuracy.exponential import Exponential
from levelstride.accuracy.packet import gravity_packet
from levelstride.column.column import Horizontal
from levelstride.splitting import resolve
from levelstride.stepper.imex import Stepper
from levelstride.studies.convergence import linear_order
from levelstride.tableaux import audit, find, names
from oracles.columns import STAGGERINGS, isothermal_column
from oracles.schemes import Handmade

TIME_S = 12.0
ROUND_OFF = 1e-13
SPLITS = ("sound", "sound+buoyancy+divergence")


class Case:
    """A small column over sloping ground, a state with a share in every mode, its exact end."""

    def __init__(self, staggering, split):
        self.split = split
        column = isothermal_column(
            8,
            8e3,
            ratio=1.1,
            staggering=staggering,
            horizontal=Horizontal(2000.0, "staggered", 2),
            slope_f=np.linspace(0.2, 0.0, 9),
        )
        self.packet = gravity_packet(column, column.airs[0])
        rng = np.random.default_rng(7)
        state = rng.standard_normal(self.packet.layout.size) + 0j
        self.state = state / np.linalg.norm(state)
        self.end = Exponential(self.packet.operator).apply(TIME_S, self.state)

    def error(self, parts, tableau, steps):
        end = march(Stepper(parts, tableau, TIME_S / steps), self.state, steps)
        return np.linalg.norm(end - self.end)

    def observed_order(self, tableau, split):
        """Slope between steps and half as long ones, as short as round-off allows."""
        splitting = resolve(split)
        if tableau.kind == "explicit":
            splitting = splitting.without_implicit()
        parts, steps = self.packet.parts(splitting), 32
        error = self.error(parts, tableau, steps)
        slope = np.nan
        while steps < 2048:
            finer = self.error(parts, tableau, 2 * steps)
            if finer < 100 * ROUND_OFF:
                break
            slope, steps, error = np.log2(error / finer), 2 * steps, finer
        return slope


@pytest.fixture(scope="module", params=zip(STAGGERINGS, SPLITS, strict=True), ids=STAGGERINGS)
def case(request):
    return Case(*request.param)


def test_the_parts_do_not_commute(case):
    parts = case.packet.parts(resolve(case.split))
    slow, fast = parts.slow.to_dense(), parts.fast.to_dense()
    mixed = np.linalg.norm(slow @ fast - fast @ slow, 2)
    assert mixed > 0.1 * np.linalg.norm(slow, 2) * np.linalg.norm(fast, 2)


@pytest.mark.parametrize("name", names())
def test_observed_orders_equal_declared_orders(case, name):
    tableau, split = find(name), case.split
    expected = audit(tableau).linear_order
    assert expected >= tableau.order
    assert linear_order(tableau, [case.packet.parts(resolve(split))]) == expected
    assert case.observed_order(tableau, split) == pytest.approx(expected, abs=0.1)


@pytest.mark.parametrize("name", ["UJ3(1,3,2)", "H-LDIRK3(2,2,2)", "CN/RKW3", "ARS(2,3,2)"])
@pytest.mark.parametrize("split", ["all-explicit", "all-implicit"])
def test_one_table_alone_has_its_own_order(case, name, split):
    tableau = find(name)
    expected = linear_order(tableau, [case.packet.parts(resolve(split))])
    single = "explicit_order" if split == "all-explicit" else "implicit_order"
    assert expected >= getattr(tableau, single)
    assert case.observed_order(tableau, split) == pytest.approx(expected, abs=0.1)


def test_terms_after_the_step_leave_first_order(case):
    split = {"name": "sound", "slope-divergence": "after-step"}
    tableau = find("ARS(2,3,3)")
    assert linear_order(tableau, [case.packet.parts(resolve(split))]) == 1
    assert case.observed_order(tableau, split) == pytest.approx(1.0, abs=0.1)


def test_a_spoilt_coupling_shows(case):
    """Each table alone keeps its order 2, the pair does not."""
    good = find("ARS(2,2,2)")
    heun = np.array([[0.0, 0.0, 0.0], [1.0, 0.0, 0.0], [0.0, 0.0, 0.0]])
    weights = np.array([0.5, 0.5, 0.0])
    spoilt = Handmade(heun, good.a_implicit, weights, good.b_implicit)
    assert case.observed_order(good, "sound") == pytest.approx(2.0, abs=0.1)
    assert case.observed_order(spoilt, "sound") == pytest.approx(1.0, abs=0.1)
