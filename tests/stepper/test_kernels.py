"""The kernels without compilation, with coefficients for every lane, and their compilation."""

import numpy as np
import pytest

from levelstride import tableaux
from levelstride.stepper import Stepper, kernels
from levelstride.stepper.helmholtz import Couplings, Helmholtz
from levelstride.stepper.kernels import Reduction, Rows
from levelstride.stepper.prepared import rows_of
from oracles.columns import STAGGERINGS
from oracles.stepping import parts_of, small_column

KERNELS = (
    "multiply",
    "factor",
    "solve",
    "begin_layer",
    "begin_interface",
    "finish_layer",
    "combine",
    "advance",
)


@pytest.mark.parametrize("staggering", STAGGERINGS)
@pytest.mark.parametrize("kind", ["flat", "everything"])
def test_uncompiled_kernels_take_the_same_step(kind, staggering):
    splittings = ("sound+buoyancy+divergence", "sound+buoyancy+horizontal-pressure-gradient")
    for splitting in splittings:
        parts = parts_of(splitting, small_column(kind, staggering))
        stepper = Stepper(parts, tableaux.find("SSP2(2,2,2)"), 0.5)
        states = np.random.default_rng(0).normal(size=(parts.layout.size, 3))
        compiled = stepper.step(states)
        with pytest.MonkeyPatch.context() as patch:
            for name in KERNELS:
                patch.setattr(kernels, name, getattr(kernels, name).py_func)
            slow = stepper.step(states)
        np.testing.assert_allclose(slow, compiled, rtol=0, atol=1e-13 * np.abs(compiled).max())


def test_uncompiled_factor_gives_the_same_factors():
    rng = np.random.default_rng(1)
    diagonals = rng.uniform(-1, 1, 6), rng.uniform(3, 4, 6), rng.uniform(-1, 1, 6)
    both = []
    for function in (kernels.factor, kernels.factor.py_func):
        factors = [np.empty(6) for _ in range(3)]
        assert function(*diagonals, *factors) == kernels.DONE
        both.append(factors)
    np.testing.assert_allclose(both[0], both[1], rtol=1e-15)


@pytest.mark.parametrize(
    ("row", "diagonal"), [(1, [0.0, 1, 1]), (2, [1.0, 1, 5]), (3, [1.0, 2, 1])]
)
def test_factor_names_the_row_that_cancels(row, diagonal):
    factors = [np.empty(3) for _ in range(3)]
    assert kernels.factor(np.ones(3), np.array(diagonal), np.ones(3), *factors) == row


def test_workspaces_that_do_not_fit_are_refused():
    parts = parts_of("sound", small_column("flat", "lorenz"))
    size = parts.layout.size
    stepper = Stepper(parts, tableaux.find("ARS(2,3,2)"), 1.0)
    helmholtz, operator = stepper._helmholtz, stepper._operator
    q = np.ones((size, 2))
    for kept, work in [((4, size + 1, 2), (2, size, 2)), ((4, size, 2), (2, size - 1, 2))]:
        status = kernels.advance(
            q,
            q.copy(),
            np.zeros(kept),
            np.zeros(work),
            stepper._schedule,
            operator.slow_rows,
            operator.fast_rows,
            helmholtz.origin,
            helmholtz.traits,
            helmholtz.reduction,
        )
        assert status == kernels.WRONG_SHAPE


@pytest.mark.parametrize("staggering", STAGGERINGS)
def test_solve_with_coefficients_for_every_lane(staggering):
    parts = parts_of("sound+buoyancy+divergence", small_column("slope", staggering))
    couplings = Couplings.of(parts.fast, parts.layout, np.complex128)
    shared = Helmholtz(couplings, parts.layout, np.array([2.0, 5.0]))
    nlane = 3
    rhs = np.random.default_rng(2).normal(size=(parts.layout.size, nlane)) + 0j
    wide = Reduction(*(np.repeat(c[..., None], nlane, axis=-1) for c in shared.reduction))
    for d in range(2):
        y = rhs.copy()
        kernels.solve(y, shared.origin, shared.traits, wide, d, nlane)
        np.testing.assert_array_equal(y, shared.solve(rhs, d))
        back = y - shared.steps[d] * parts.fast.apply(y)
        np.testing.assert_allclose(back, rhs, rtol=0, atol=1e-12)


def test_multiply_with_coefficients_for_every_lane():
    parts = parts_of("all-explicit", small_column("flat", "lorenz"))
    rows = rows_of(parts.slow)
    x = np.random.default_rng(3).normal(size=(parts.layout.size, 4))
    factors = np.array([1.0, 2.0, 3.0, 4.0])
    wide = Rows(rows.start, rows.column, rows.value[:, None] * factors)
    y = np.empty_like(x)
    kernels.multiply(wide, x, y, 4)
    np.testing.assert_allclose(y, factors * parts.slow.apply(x), rtol=0, atol=1e-14)


def test_compilation_is_known(tmp_path, monkeypatch):
    Stepper(
        parts_of("sound", small_column("flat", "lorenz")), tableaux.find("ARS(2,3,2)"), 1.0
    ).matrix()
    assert kernels.is_compiled()

    class Fresh:
        signatures = ()

        class stats:  # noqa: N801
            cache_path = str(tmp_path)

    monkeypatch.setattr(kernels, "advance", Fresh)
    assert not kernels.is_compiled()
    (tmp_path / "kernels.advance-1.py311.nbi").touch()
    assert kernels.is_compiled()
    Fresh.stats.cache_path = None
    assert not kernels.is_compiled()


def test_kernels_compile_where_no_cache_can_be_written(monkeypatch):
    original = kernels.numba.njit

    def refuse(*args, cache=False, **flags):
        if cache:
            raise RuntimeError("cannot cache function: no locator available")
        return original(*args, cache=cache, **flags)

    monkeypatch.setattr(kernels.numba, "njit", refuse)
    assert kernels.compiled(lambda x: x + 1)(1) == 2
