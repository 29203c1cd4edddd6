"""Error of a packet against cost: dense twins, round steps, orders, and what is said of them."""

import json
import math
from dataclasses import fields, replace

import numpy as np
import pytest
from scipy.linalg import expm

import levelstride
from levelstride.accuracy.packet import gravity_packet
from levelstride.column.read import build
from levelstride.errors import CalculationError, InputError
from levelstride.results.export import to_json
from levelstride.results.work_precision import WorkPoint, WorkPrecision
from levelstride.splitting import resolve
from levelstride.studies.convergence import notes, shorter_steps, with_orders
from levelstride.studies.cost import step_cost
from levelstride.studies.work_precision import work_precision
from levelstride.tableaux.lookup import find
from oracles.dense_step import dense_step

PLAIN = {
    "title": "Test",
    "levels": {"kind": "uniform", "layers": 8, "top_m": 12000.0},
    "air": {"kind": "isothermal", "temperature_k": 250.0},
    "horizontal": {"grid_spacing_m": 3000.0, "directions": 1},
}
THIN = {"kind": "geometric", "layers": 16, "top_m": 16000.0, "lowest_layer_m": 20.0}
TWO_AIRS = [
    {"kind": "isothermal", "temperature_k": 250.0, "name": "cold"},
    {"kind": "isothermal", "temperature_k": 300.0, "name": "warm"},
]


def column_of(**tables):
    return build({k: v for k, v in (PLAIN | tables).items() if v is not None})


@pytest.fixture(scope="module")
def found():
    return work_precision(column_of(), tableau="ars232", split=" Sound ", stable_step_s=5.0)


def test_the_public_name_is_the_study(found):
    assert levelstride.work_precision is work_precision
    assert isinstance(found, levelstride.WorkPrecision)
    assert (found.tableau, found.split, found.hours) == ("ARS(2,3,2)", "sound", 1.0)


def test_every_number_is_finite_and_in_the_json(found):
    plain = json.loads(to_json(found))
    assert set(plain) == {field.name for field in fields(WorkPrecision)}
    assert set(plain["points"][0]) == {field.name for field in fields(WorkPoint)}
    numbers = [v for p in plain["points"] for v in p.values() if isinstance(v, float)]
    assert numbers
    assert all(math.isfinite(value) for value in numbers)


def test_steps_divide_the_hour_and_fall_geometrically_from_the_stable_one(found):
    assert len(found.points) == 8
    counts = [3600.0 / point.step_s for point in found.points]
    np.testing.assert_allclose(counts, np.round(counts), rtol=1e-12)
    assert found.points[0].step_s == pytest.approx(5.0)
    assert found.points[-1].step_s == pytest.approx(5.0 / 64, rel=1e-3)
    ratios = np.diff(np.log(counts))
    np.testing.assert_allclose(ratios, math.log(64) / 7, rtol=1e-2)
    unround = work_precision(
        column_of(), tableau="ars232", split="sound", stable_step_s=5.3, hours=0.5, points=3
    )
    assert unround.points[0].step_s == 1800.0 / 340
    assert len(unround.points) == 3


def test_costs_are_those_of_a_step_times_the_steps(found):
    column = column_of()
    cost = step_cost(find("ARS(2,3,2)"), resolve("sound"), column.advice)
    for point in found.points:
        assert point.steps_per_hour == pytest.approx(3600.0 / point.step_s)
        assert point.cost_per_hour == pytest.approx(cost.weighted * point.steps_per_hour)
        assert point.solves_per_hour == pytest.approx(cost.solves * point.steps_per_hour)
        assert point.measured_s_per_hour > 0
    sound = math.sqrt(1.4 * 8314.32 / 28.9644 * 250.0)
    assert found.points[0].vertical_courant == pytest.approx(sound * 5.0 / 1500.0)


def dense_error(column, air, split, tableau, dt, steps):
    """The same with full matrices, one step after the other, scipy's expm for the exact end."""
    packet = gravity_packet(column, air)
    step = dense_step(packet.parts(resolve(split)), find(tableau), dt)
    state = packet.state
    for _ in range(steps):
        state = step @ state
    exact = expm(dt * steps * packet.operator.to_dense()) @ packet.state
    return np.linalg.norm(state - exact) / np.linalg.norm(exact)


@pytest.mark.parametrize("staggering", ["charney-phillips", "lorenz"])
@pytest.mark.parametrize("tableau", ["ARS(2,3,3)", "Trap2(2,3,2)", "SSPRK(3,3)"])
def test_errors_equal_the_dense_twin(staggering, tableau):
    column = column_of(column={"staggering": staggering}, upper_damping=None)
    found = work_precision(
        column, tableau=tableau, split="sound+buoyancy", stable_step_s=2.0, hours=0.2, points=3
    )
    for point in found.points[:2]:
        steps = round(720.0 / point.step_s)
        expected = dense_error(
            column, column.airs[0], "sound+buoyancy", tableau, point.step_s, steps
        )
        assert point.error == pytest.approx(expected, rel=1e-5, abs=1e-12)


def test_the_worst_of_several_air_states_counts_also_on_a_reference_in_a_wind():
    column = column_of(
        air=TWO_AIRS,
        reference={"kind": "isothermal", "temperature_k": 270.0},
        wind={"kind": "uniform", "speed_m_per_s": 10.0},
    )
    found = work_precision(
        column, tableau="ARS(2,3,2)", split="sound", stable_step_s=3.0, hours=0.2
    )
    point = found.points[0]
    errors = {
        air.name: dense_error(column, air, "sound", "ARS(2,3,2)", point.step_s, 240)
        for air in column.airs
    }
    assert point.air == max(errors, key=errors.get)
    assert point.error == pytest.approx(errors[point.air], rel=1e-6)
    assert [packet.air for packet in found.packets] == ["cold", "warm"]
    cost = step_cost(find("ARS(2,3,2)"), resolve("sound"), column.advice, reference=True)
    assert point.cost_per_hour == pytest.approx(cost.weighted * point.steps_per_hour)


@pytest.mark.parametrize(
    ("tableau", "split", "declared", "linear"),
    [
        ("ARS(1,1,1)", "sound", 1, 1),
        ("ARS(2,3,2)", "sound+buoyancy", 2, 2),
        ("ARS(3,4,3)", "sound+divergence", 3, 3),
        ("UJ3(1,3,2)", "all-explicit", 2, 3),
        ("UJ3(1,3,2)", "sound+buoyancy+divergence", 2, 2),
        ("Kinnmark-Gray 5-stage, linear order 3", "sound", 2, 3),
        ("ARS(2,3,3)", {"name": "sound", "upper-damping": "after-step"}, 3, 1),
    ],
)
def test_orders_are_found(tableau, split, declared, linear):
    column = column_of(upper_damping={"base_m": 6000.0, "rate_per_s": 0.02})
    found = work_precision(column, tableau=tableau, split=split, stable_step_s=2.0, hours=0.5)
    assert (found.declared_order, found.linear_order) == (declared, linear)
    assert found.settled
    assert found.observed_order == pytest.approx(linear, abs=0.1)
    assert found.order_from_s > found.order_to_s


def test_stiff_vertical_sound_reduces_the_order_at_large_steps():
    """Shown point by point with the vertical acoustic Courant number, and told in a note."""
    found = work_precision(
        column_of(levels=THIN), tableau="ARS(2,3,3)", split="sound", stable_step_s=6.0
    )
    first, middle = found.points[0], found.points[4]
    assert first.vertical_courant > 50
    assert first.local_order < 2.75
    assert middle.local_order == pytest.approx(3.0, abs=0.1)
    assert found.largest_steps_order < found.observed_order - 0.1
    assert any("order reduction" in note and "Courant number" in note for note in found.notes)


def test_round_off_is_told_and_gives_no_order():
    found = work_precision(column_of(), tableau="RK4", split="sound", stable_step_s=0.2)
    assert found.observed_order is None
    assert not found.settled
    assert found.largest_steps_order is None
    assert all(point.error < 1e-10 for point in found.points)
    assert found.notes == (
        f"the error is round-off (about {found.points[0].round_off:.0e}) at every step: no order",
    )


def test_the_stable_step_is_found_where_it_is_not_given():
    column = column_of(levels={"kind": "uniform", "layers": 4, "top_m": 8000.0})
    found = work_precision(column, tableau="ARS(2,3,2)", split="sound", points=2)
    limit = levelstride.limit(column, tableau="ARS(2,3,2)", split="sound", what_if=False)
    assert found.stable_step_s == pytest.approx(limit.stable_step_s, rel=1e-2)
    assert found.points[0].step_s <= found.stable_step_s


def test_without_a_limit_steps_begin_at_a_quarter_of_the_period():
    found = work_precision(
        column_of(), tableau="ARS(1,1,1)", split="all-implicit", stable_step_s=math.inf
    )
    assert found.stable_step_s is None
    assert found.points[0].step_s <= min(900.0, found.packets[0].period_s / 4)
    assert found.notes[0].startswith("any step is stable; steps begin at ")
    long = work_precision(
        column_of(), tableau="ARS(1,1,1)", split="all-implicit", stable_step_s=2000.0
    )
    assert long.notes[0].startswith("2000 s is stable; steps begin at ")


def test_own_growth_of_the_air_is_told(found):
    grown = replace(found, packets=(replace(found.packets[0], air="warm", kept=3.0),))
    assert notes(grown)[0] == (
        "air 'warm' itself carries the packet to 3 times its norm: it is no gravity wave any more"
    )
    assert notes(found) == []


def test_a_step_that_cannot_be_taken_is_left_out_and_told():
    """Far beyond any limit the packet outgrows all numbers; shorter steps remain."""
    column = column_of(levels=THIN)
    found = work_precision(
        column, tableau="RK4", split="all-explicit", stable_step_s=20.0, points=10,
        smallest_fraction=1 / 1024,
    )  # fmt: skip
    assert 0 < len(found.points) < 10
    assert any("grows beyond all numbers" in note for note in found.notes)
    with pytest.raises(CalculationError, match="grows beyond all numbers"):
        work_precision(
            column, tableau="RK4", split="all-explicit", stable_step_s=20.0, points=2,
            smallest_fraction=1 / 2,
        )  # fmt: skip


def test_a_column_without_gravity_waves_is_refused():
    column = column_of(levels={"kind": "uniform", "layers": 3, "top_m": 12000.0})
    with pytest.raises(CalculationError, match="no gravity wave is resolved") as refused:
        work_precision(column, tableau="ARS(2,3,2)", split="sound", stable_step_s=2.0)
    assert "\n" not in str(refused.value)


def test_senseless_numbers_are_named_all_at_once():
    with pytest.raises(InputError) as refused:
        work_precision(
            column_of(), tableau="ARS(2,3,2)", split="sound", hours=0.0, points=1,
            smallest_fraction=2.0, stable_step_s=-1.0,
        )  # fmt: skip
    assert [problem.split(":")[0] for problem in refused.value.problems] == [
        "hours",
        "points",
        "smallest_fraction",
        "stable_step_s",
    ]
    with pytest.raises(InputError, match="unknown"):
        work_precision(column_of(), tableau="ARS(2,3,2)", split="noise")


def point(step_s, error, courant=0.5):
    return WorkPoint(
        step_s=step_s, steps_per_hour=3600.0 / step_s, error=error, vertical_courant=courant,
        cost_per_hour=100.0 / step_s, explicit_evaluations_per_hour=0.0, solves_per_hour=0.0,
        exchanges_per_hour=0.0, measured_s_per_hour=0.0, round_off=1e-12,
    )  # fmt: skip


def answer(points, shorter=(), order=2):
    return with_orders(
        WorkPrecision(
            tableau="t", split="s", hours=1.0, stable_step_s=8.0, points=tuple(points),
            shorter=tuple(shorter), linear_order=order, declared_order=order,
            packets=(),
        )
    )  # fmt: skip


def test_orders_of_made_up_points():
    clean = answer([point(8.0 / 2**k, 1e-3 / 4**k) for k in range(4)])
    assert [p.local_order for p in clean.points] == [2.0, 2.0, 2.0, None]
    assert (clean.observed_order, clean.settled, clean.largest_steps_order) == (2.0, True, 2.0)
    assert (clean.order_from_s, clean.order_to_s) == (2.0, 1.0)
    assert notes(clean) == []
    floored = answer([point(8.0, 1e-8), point(4.0, 2.5e-9), point(2.0, 2e-12), point(1.0, 1e-12)])
    assert [p.local_order for p in floored.points] == [2.0, None, None, None]
    assert (floored.observed_order, floored.settled) == (2.0, False)
    assert notes(floored) == [
        "round-off (about 1e-12) hides the order from 2 s downwards",
        "order 2.00 between 8 s and 4 s has not settled",
    ]


def test_a_reduced_order_that_stands_has_not_settled_while_sound_is_stiff():
    plateau = [point(8.0 / 2**k, 1e-3 / 2**k, courant=80.0 / 2**k) for k in range(4)]
    reduced = answer(plateau)
    assert (reduced.observed_order, reduced.settled) == (1.0, False)
    assert notes(reduced)[-1] == (
        "order reduction: 1.00 instead of 2 at 8 s, "
        "where the vertical acoustic Courant number is 80"
    )
    out_of_phase = answer([point(8.0, 1.1), point(4.0, 1.0), point(2.0, 0.9)])
    assert not any("order reduction" in note for note in notes(out_of_phase))
    unsettled = answer([point(8.0 / 2**k, 1e-3 / 4**k, courant=80.0) for k in range(4)])
    assert unsettled.settled


def test_steps_are_halved_until_the_order_settles_or_round_off_is_reached():
    asked = []

    def at(steps, order=2):
        asked.append(steps)
        dt = 8.0 / steps
        return point(dt, 1e-3 * (dt / 8.0) ** order, courant=10.0 * dt)

    line = shorter_steps(at, 1, [point(8.0, 1e-3, courant=80.0)], 2)
    assert asked == [2, 4]
    assert [p.step_s for p in line] == [4.0, 2.0]
    asked.clear()
    line = shorter_steps(lambda n: at(n, 1), 1, [point(8.0, 1e-3, courant=80.0)], 2)
    assert asked == [2, 4, 8, 16, 32, 64, 128]
    assert line[-1].vertical_courant <= 1.0
    asked.clear()
    shorter_steps(lambda n: at(n, 9), 1, [point(8.0, 1e-3, courant=80.0)], 2)
    assert asked == [2, 4, 8]
    assert shorter_steps(lambda n: None, 1, [point(8.0, 1e-3, courant=80.0)], 2) == []
