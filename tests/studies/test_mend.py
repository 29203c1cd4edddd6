"""The nearest level set that carries a step, and what stands in the way of one."""

import json

import numpy as np
import pytest

from levelstride.column.column_file import to_toml
from levelstride.column.read import build, load
from levelstride.column.variants import with_levels
from levelstride.errors import InputError
from levelstride.results.export import to_json
from levelstride.splitting import resolve
from levelstride.stability.tolerance import Tolerance
from levelstride.stability.verdict import ColumnVerdict
from levelstride.studies.mend import mend
from levelstride.tableaux.lookup import find

THIN = [0.0, 300.0, 700.0, 1200.0, 1800.0, 2500.0, 2600.0, 3500.0, 5000.0, 8000.0]
HOW = {"tableau": "ARS(2,3,2)", "split": "all-explicit"}


def column_of(**tables):
    return build(
        {
            "title": "nine layers",
            "levels": {"kind": "table", "heights_m": THIN},
            "air": {"kind": "standard"},
            "horizontal": {"grid_spacing_m": 3000.0},
        }
        | tables
    )


GEOMETRIC = {"kind": "geometric", "layers": 8, "top_m": 12000.0, "lowest_layer_m": 100.0}


def step_of(column):
    verdict = ColumnVerdict(column, resolve("all-explicit"), find("ARS(2,3,2)"))
    return verdict.stable_step(Tolerance(86400.0, 1000.0)).step_s


@pytest.fixture(scope="module")
def mended():
    told = []
    answer = mend(column_of(), target_step_s=1.1, progress=lambda *args: told.append(args), **HOW)
    return answer, told


def test_the_thin_layer_aloft_is_thickened_and_the_target_just_carried(mended):
    found, _ = mended
    assert found.carried
    assert not found.unchanged
    assert found.obstacle is None
    assert max(found.changes, key=lambda change: change.factor).layer == 5
    assert found.changes[5].before_m == pytest.approx(100.0)
    assert found.changes[5].after_m == pytest.approx(found.thickness_m[5])
    assert 1.1 <= found.verified_step_s <= 1.005 * 1.1
    assert found.stable_step_before_s == pytest.approx(step_of(column_of()))
    # layers far from the thin one hardly move
    assert abs(found.changes[0].factor - 1) < 0.05
    factors = [np.log(change.factor) for change in found.changes]
    assert found.distance == pytest.approx(np.linalg.norm(factors))


def test_the_full_search_carries_it_and_the_file_has_the_same_levels(mended, tmp_path):
    found, _ = mended
    column = with_levels(column_of(), found.interfaces_m)
    assert step_of(column) == found.verified_step_s
    written = tmp_path / "mended.toml"
    written.write_text(to_toml(column, found.verdict), encoding="utf-8")
    assert load(written).levels.interfaces_m.tolist() == list(found.interfaces_m)


def test_lid_number_of_layers_and_ratios_are_kept(mended):
    found, _ = mended
    assert found.interfaces_m[0] == 0.0
    assert found.interfaces_m[-1] == THIN[-1]
    assert len(found.thickness_m) == 9
    own = np.abs(np.diff(np.log(np.diff(THIN))))
    assert found.largest_ratio == pytest.approx(np.exp(own.max()))
    assert np.abs(np.diff(np.log(found.thickness_m))).max() <= own.max() + 1e-6


def test_no_smaller_change_of_the_same_kind_carries_it(mended):
    """Nine tenths of the way fall short: the change is no larger than it must be."""
    found, _ = mended
    less = 0.1 * np.array(THIN) + 0.9 * np.array(found.interfaces_m)
    assert step_of(with_levels(column_of(), less)) < 1.1


def test_no_neighbour_that_carries_it_is_nearer(mended):
    """Random sets around, brought as near as the answer, carry less or as good as nothing more."""
    found, _ = mended
    rng = np.random.default_rng(3)
    start, best = np.log(np.diff(THIN)), np.log(found.thickness_m)
    for _ in range(6):
        x = best + 0.05 * rng.standard_normal(9)
        x = start + (x - start) * 0.97 * found.distance / np.linalg.norm(x - start)
        thickness = np.exp(x)
        thickness *= THIN[-1] / thickness.sum()
        if np.linalg.norm(np.log(thickness) - start) < 0.98 * found.distance:
            heights = np.concatenate([[0.0], np.cumsum(thickness)])
            assert step_of(with_levels(column_of(), heights)) < 1.1


def test_it_tells_how_far_it_is(mended):
    found, told = mended
    assert [done for done, _, _ in told] == list(range(found.searches))
    assert len({most for _, most, _ in told}) == 1
    assert all(what == "nearest level set" for _, _, what in told)
    assert "1.1 s is carried" in found.verdict
    assert "layer 5: 100 m becomes" in found.verdict
    assert json.loads(to_json(found))["verified_step_s"] == found.verified_step_s


def test_a_set_that_carries_the_target_comes_back_as_it_is():
    column = column_of()
    found = mend(column, target_step_s=0.7, **HOW)
    assert found.carried
    assert found.unchanged
    assert found.interfaces_m == tuple(column.levels.interfaces_m.tolist())
    assert found.distance == 0.0
    assert found.searches == 1
    assert "nothing needs to change" in found.verdict


def test_where_nothing_bites_nothing_needs_to_change():
    found = mend(column_of(), tableau="ARS(2,3,2)", split="all-implicit", target_step_s=60.0)
    assert found.unchanged
    assert found.verified_step_s is None
    assert found.criterion == "none"


def test_the_lowest_layer_stays_if_asked():
    column = column_of(levels=GEOMETRIC)
    how = HOW | {"target_step_s": 1.2 * step_of(column), "largest_ratio": 3.0}
    free, kept = mend(column, **how), mend(column, keep_lowest=True, **how)
    assert free.carried
    assert kept.carried
    assert free.changes[0].factor > 1.02
    assert kept.changes[0].factor == 1.0
    assert kept.lowest_kept
    assert kept.distance > free.distance


def test_a_bound_on_ratios_holds_but_where_the_set_itself_is_rougher():
    column = column_of()
    found = mend(column, target_step_s=1.0, largest_ratio=1.5, **HOW)
    own = np.abs(np.diff(np.log(np.diff(THIN))))
    allowed = np.maximum(own, np.log(1.5))
    assert found.carried
    assert found.largest_ratio == 1.5
    assert (np.abs(np.diff(np.log(found.thickness_m))) <= allowed + 1e-6).all()


def test_it_says_which_constraint_stands_in_the_way():
    """Every ratio of a geometric set is at its bound, so above a kept layer none gets thicker."""
    column = column_of(levels=GEOMETRIC)
    target = 1.3 * step_of(column)
    found = mend(column, target_step_s=target, keep_lowest=True, **HOW)
    assert not found.carried
    tried = {release.constraint: release.carries for release in found.releases}
    assert tried == {"lowest layer": True, "ratio": True, "lid": False}
    assert "the lowest layer, kept at 100 m" in found.obstacle
    assert "ratio of neighbouring layers" in found.obstacle
    assert found.obstacle in found.verdict
    assert found.verified_step_s < target
    assert all(release.largest_step_s <= target for release in found.releases)


def test_equal_layers_need_a_larger_ratio_or_another_lid():
    column = column_of(
        levels={"kind": "uniform", "layers": 8, "top_m": 3200.0},
        updraft={
            "heights_m": [0.0, 1000.0, 1200.0, 1400.0, 3200.0],
            "speeds_m_per_s": [0.0, 0.0, 60.0, 0.0, 0.0],
            "scheme": "upwind-1",
        },
    )
    split = {"name": "all-implicit", "vertical-advection": "explicit"}
    before = mend(column, tableau="ARS(3,4,3)", split=split, target_step_s=1e-3)
    target = 1.05 * before.verified_step_s
    found = mend(column, tableau="ARS(3,4,3)", split=split, target_step_s=target)
    assert not found.carried
    assert found.releases[0].constraint == "ratio"
    assert found.releases[0].carries
    wider = mend(column, tableau="ARS(3,4,3)", split=split, target_step_s=target, largest_ratio=1.5)
    assert wider.carried
    assert "courant" in wider.criterion


def test_a_step_that_no_level_set_carries():
    """Sound along the grid does not care about layers."""
    column = column_of(levels={"kind": "uniform", "layers": 4, "top_m": 12000.0})
    found = mend(column, target_step_s=60.0, **HOW)
    assert not found.carried
    assert not any(release.carries for release in found.releases)
    assert {release.constraint for release in found.releases} == {"ratio", "lid", "all"}
    assert found.obstacle.startswith("none of the constraints: the step")
    assert "change the splitting, the tableau or the grid spacing" in found.obstacle
    assert found.verified_step_s >= found.stable_step_before_s


def test_over_slopes_and_for_two_air_states_at_once():
    airs = [
        {"kind": "isothermal", "name": name, "temperature_k": kelvin}
        for name, kelvin in (("cold", 230.0), ("hot", 300.0))
    ]
    column = column_of(
        levels=GEOMETRIC,
        air=airs,
        terrain={"slope": 0.3},
        horizontal={"grid_spacing_m": 500.0},
    )
    how = {"tableau": "ARS(2,3,2)", "split": "sound+buoyancy"}
    before = mend(column, target_step_s=1e-3, **how)
    target = 1.03 * before.verified_step_s
    found = mend(column, target_step_s=target, **how)
    assert found.carried
    assert target <= found.verified_step_s <= 1.005 * target
    # the slope binds near the ground
    assert max(found.changes, key=lambda change: change.factor).layer <= 2


def test_numbers_that_make_no_sense_are_told_together():
    with pytest.raises(InputError) as caught:
        mend(column_of(), target_step_s=-1.0, largest_ratio=0.5, **HOW)
    assert len(caught.value.problems) == 2
