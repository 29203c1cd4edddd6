"""The marching search against full matrices, which it asks as little as it can."""

import numpy as np
import pytest

from levelstride.column.read import build
from levelstride.errors import CalculationError
from levelstride.splitting import resolve
from levelstride.stability import march_search
from levelstride.stability.march import March, Seen
from levelstride.stability.march_search import MarchSearch
from levelstride.stability.tolerance import Tolerance
from levelstride.stability.verdict import ColumnVerdict
from levelstride.tableaux.lookup import find
from oracles.plain_search import PlainWave, plain_stable_step
from oracles.random_cases import random_case

TOLERANCE = Tolerance(86400.0, 1000.0)
AGREES = 5e-3
LONGEST_S = 1e4


def tower(staggering="charney-phillips", **tables):
    return build(
        {
            "levels": {"kind": "geometric", "layers": 14, "top_m": 16e3, "lowest_layer_m": 200.0},
            "air": {"kind": "standard"},
            "horizontal": {"grid_spacing_m": 2000.0},
            "column": {"staggering": staggering},
        }
        | tables
    )


def both(column, tableau, splitting, *, refine=True):
    """Limits by marching and by full matrices at every look."""
    marching = ColumnVerdict(column, splitting, tableau)
    dense = ColumnVerdict(column, splitting, tableau)
    return (
        MarchSearch(marching.search, TOLERANCE).run(refine=refine),
        dense.search.run(lambda problem, dt: problem.stable(dt, TOLERANCE), refine=refine),
        marching,
    )


def breaks(verdict, dt):
    """Waves that break a criterion at a step, by dense eigenvalues and exact norms of powers."""
    return [p.kappa for p in verdict.search.problems() if p.violated(dt, TOLERANCE)]


@pytest.mark.parametrize("tableau", ["ARS(2,3,2)", "ARS(2,2,2)", "ARS(1,1,1)", "SSP2(3,3,2)",
                                     "ARK2(2,3,2), a32 = 1/2", "IMKG343a"])  # fmt: skip
@pytest.mark.parametrize("split", ["sound", "sound+buoyancy", "all-explicit"])
def test_the_answer_is_that_of_full_matrices(tableau, split, monkeypatch):
    monkeypatch.setattr(march_search, "CERTAIN_UNKNOWNS", 0)
    found, dense, verdict = both(tower(), find(tableau), resolve(split))
    assert found.low == pytest.approx(dense.low, rel=AGREES)
    assert breaks(verdict, found.low) == []


@pytest.mark.parametrize("staggering", ["lorenz"])
def test_over_slopes_and_in_wind(staggering, monkeypatch):
    monkeypatch.setattr(march_search, "CERTAIN_UNKNOWNS", 0)
    column = tower(
        staggering,
        terrain={"slope": 0.3},
        wind={"kind": "table", "heights_m": [0.0, 9000.0], "speeds_m_per_s": [2.0, 30.0]},
        upper_damping={"rate_per_s": 0.1, "base_m": 11e3},
    )
    for split in ("sound", "sound+slope"):
        found, dense, verdict = both(column, find("ARS(3,4,3)"), resolve(split))
        assert found.low == pytest.approx(dense.low, rel=AGREES)
        assert breaks(verdict, found.low) == []


def ladder(limit, seed):
    """Steps below a limit, at ratios of 1.3 or so."""
    rng = np.random.default_rng(seed)
    return limit * np.exp(-np.cumsum(rng.uniform(0.05, 0.45, 16)))


def never_above_full_matrices(seed):
    """No step up to the answer breaks a criterion, at any wave sampled, where a ladder looks."""
    column, tableau, splitting = random_case(seed, most_layers=6)
    verdict = ColumnVerdict(column, splitting, tableau)
    try:
        found = MarchSearch(verdict.search, TOLERANCE).run()
    except CalculationError:
        return
    limit = LONGEST_S if found is None else found.low
    for dt in [limit, *ladder(limit, seed)]:
        assert breaks(verdict, dt) == [], f"{tableau.name}, {splitting.name}, {dt} of {limit} s"


def agrees_with_the_plain_search(seed):
    column, tableau, splitting = random_case(seed, most_layers=6)
    verdict = ColumnVerdict(column, splitting, tableau)
    found = MarchSearch(verdict.search, TOLERANCE).run()
    waves = [
        PlainWave(column, column.airs[0], splitting, tableau, kappa)
        for kappa in verdict.search.kappas[0]
    ]
    first_s = None if found is None else found.low / 30
    plain = plain_stable_step(waves, TOLERANCE.efolding_s, 1000.0, LONGEST_S, first_s)
    if found is not None and (plain is None or found.low < (1 - AGREES) * plain):
        # a window narrower than the ratio of the plain scan, which full matrices confirm
        assert found.problem.violated(found.high, TOLERANCE)
    elif plain is not None:
        assert found is not None, f"{tableau.name}, {splitting.name}: {plain} s"
        assert found.low == pytest.approx(plain, rel=AGREES), f"{tableau.name}, {splitting.name}"


@pytest.mark.parametrize("seed", range(20))
def test_never_stable_where_full_matrices_say_unstable(seed):
    never_above_full_matrices(seed)


@pytest.mark.slow
@pytest.mark.parametrize("seed", range(20, 400))
def test_never_stable_where_full_matrices_say_unstable_many_times(seed):
    never_above_full_matrices(seed)


@pytest.mark.parametrize("seed", range(1000, 1006))
def test_as_the_plain_search(seed):
    agrees_with_the_plain_search(seed)


@pytest.mark.slow
@pytest.mark.parametrize("seed", range(1006, 1300))
def test_as_the_plain_search_many_times(seed):
    agrees_with_the_plain_search(seed)


def test_marching_tells_growth_from_rest():
    verdict = ColumnVerdict(tower(), resolve("sound"), find("ARS(2,3,2)"))
    found = MarchSearch(verdict.search, TOLERANCE).run()
    march, problem = March(TOLERANCE), found.problem
    (below,) = march.look([problem], 0.98 * found.low, None)
    (above,) = march.look([problem], 1.02 * found.low, None)
    assert (below.seen, above.seen) == (Seen.QUIET, Seen.GROWS)
    assert above.rate == pytest.approx(problem.growth(1.02 * found.low), rel=0.1)


def test_waves_do_not_feel_each_other():
    verdict = ColumnVerdict(tower(), resolve("sound"), find("ARS(2,3,2)"))
    problems = verdict.search.problems()
    step = 1.01 * MarchSearch(verdict.search, TOLERANCE).run().low
    together = March(TOLERANCE).look(problems, step)
    alone = [March(TOLERANCE).look([problem], step)[0] for problem in problems]
    assert [look.seen for look in together] == [look.seen for look in alone]
    assert {look.seen for look in together} == {Seen.QUIET, Seen.GROWS}


def test_what_is_known_is_not_looked_at_again():
    verdict = ColumnVerdict(tower(), resolve("sound+buoyancy"), find("ARS(2,2,2)"))
    day = MarchSearch(verdict.search, TOLERANCE).run()
    hour = Tolerance(3600.0, 1000.0)
    again = MarchSearch(verdict.search, hour).run(refine=False, known_s=day.low)
    afresh = MarchSearch(verdict.search, hour).run(refine=False)
    assert again.low == pytest.approx(afresh.low, rel=AGREES)
    assert again.low > day.low
