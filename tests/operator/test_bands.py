"""Banded matrices against their dense twins."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from levelstride.operator.bands import Banded, total
from oracles.columns import seeds


def random_banded(rng, size, *, imaginary=False):
    count = int(rng.integers(1, 12))
    rows, columns = rng.integers(0, size, count), rng.integers(0, size, count)
    values = rng.normal(size=count)
    if imaginary:
        values = values + 1j * rng.normal(size=count)
    dense = np.zeros((size, size), values.dtype)
    np.add.at(dense, (rows, columns), values)
    return Banded.from_entries(size, [(rows, columns, values)]), dense


@settings(max_examples=60, deadline=None)
@given(seed=seeds, imaginary=st.booleans())
def test_arithmetic_equals_dense(seed, imaginary):
    rng = np.random.default_rng(seed)
    size = int(rng.integers(1, 9))
    a, dense_a = random_banded(rng, size, imaginary=imaginary)
    b, dense_b = random_banded(rng, size)
    x, lanes = rng.normal(size=size), rng.normal(size=(size, 3))
    scale = np.exp(rng.normal(size=size))
    np.testing.assert_array_equal(a.to_dense(), dense_a)
    np.testing.assert_allclose((a + b).to_dense(), dense_a + dense_b, atol=1e-15)
    np.testing.assert_allclose((a - b).to_dense(), dense_a - dense_b, atol=1e-15)
    np.testing.assert_allclose(a.scaled(2 - 1j).to_dense(), (2 - 1j) * dense_a)
    np.testing.assert_allclose(a.apply(x), dense_a @ x, atol=1e-13)
    np.testing.assert_allclose(a.apply(lanes), dense_a @ lanes, atol=1e-13)
    np.testing.assert_allclose(
        a.similar(scale).to_dense(), np.diag(scale) @ dense_a @ np.diag(1 / scale), atol=1e-12
    )
    np.testing.assert_array_equal(total(size, [a, b]).to_dense(), (a + b).to_dense())
    rows, columns = np.indices((size, size))
    np.testing.assert_array_equal(a.entries(rows, columns), dense_a)
    below = max((int(i - j) for i, j in np.argwhere(dense_a) if i > j), default=0)
    above = max((int(j - i) for i, j in np.argwhere(dense_a) if j > i), default=0)
    assert (a.trimmed().lower, a.trimmed().upper) == (below, above)


def test_diagonals_and_reality():
    matrix = Banded.from_entries(3, [(np.array([0, 1]), np.array([1, 2]), np.array([2.0, 3.0]))])
    assert matrix.offsets == (1,)
    np.testing.assert_array_equal(matrix.diagonal(1), [2.0, 3.0, 0.0])
    np.testing.assert_array_equal(matrix.diagonal(-2), [0.0, 0.0, 0.0])
    assert matrix.scaled(1 + 0j).is_real
    assert matrix.scaled(1 + 0j).real().diagonals.dtype == np.float64
    with pytest.raises(ValueError, match="complex"):
        matrix.scaled(1j).real()


def test_empty_matrices():
    none = Banded.zeros(4)
    assert none.is_zero
    assert none.is_real
    assert (none.lower, none.upper, none.size) == (0, 0, 4)
    assert Banded.from_entries(4, []).is_zero
    np.testing.assert_array_equal(none.apply(np.ones(4)), np.zeros(4))
