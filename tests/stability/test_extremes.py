"""Norms and eigenvalues found by iteration against those of full matrices."""

import numpy as np
import pytest

from levelstride.operator.bands import Banded
from levelstride.stability.extremes import (
    full_spectral_norm,
    is_skew,
    largest_modulus,
    only_damps,
    spectral_norm,
)

OFFSETS = (-3, -1, 0, 2)


def random_band(n, seed, dtype=complex):
    rng = np.random.default_rng(seed)
    entries = []
    for offset in OFFSETS:
        rows = np.arange(max(0, -offset), min(n, n - offset))
        values = rng.standard_normal(rows.size).astype(dtype)
        if dtype is complex:
            values += 1j * rng.standard_normal(rows.size)
        entries.append((rows, rows + offset, values))
    return Banded.from_entries(n, entries)


@pytest.mark.parametrize("n", [30, 260])
@pytest.mark.parametrize("dtype", [float, complex])
def test_as_full_matrices_say(n, dtype):
    matrix = random_band(n, n, dtype)
    dense = matrix.to_dense()
    assert np.array_equal(matrix.adjoint().to_dense(), dense.conj().T)
    assert matrix.frobenius == pytest.approx(np.linalg.norm(dense))
    norm = np.linalg.norm(dense, 2)
    assert spectral_norm(matrix) == pytest.approx(norm, rel=1e-5)
    assert full_spectral_norm(dense) == pytest.approx(norm, rel=1e-5)
    assert norm <= matrix.norm_bound
    largest = np.abs(np.linalg.eigvals(dense)).max()
    assert largest_modulus(matrix) == pytest.approx(largest, rel=1e-5)


@pytest.mark.parametrize("n", [5, 260])
def test_energy_is_gained_or_not(n):
    matrix = random_band(n, 1)
    dense = matrix.to_dense()
    highest = np.linalg.eigvalsh((dense + dense.conj().T) / 2)[-1]
    one = Banded((0,), np.ones((1, n)))
    assert only_damps(matrix - one.scaled(highest + 1e-9), 0.0)
    assert not only_damps(matrix - one.scaled(highest - 1e-9), 0.0)
    assert only_damps(matrix - one.scaled(highest - 1e-9), 1e-8)


@pytest.mark.parametrize("n", [3, 260])
def test_what_is_skew(n):
    matrix = random_band(n, 2)
    skew = matrix - matrix.adjoint()
    one = Banded((0,), np.ones((1, n)))
    assert is_skew(skew, 1e-12)
    assert not is_skew(skew + one.scaled(1e-9), 1e-12)
    assert is_skew(Banded.zeros(n), 1e-12)
    assert spectral_norm(Banded.zeros(n)) == largest_modulus(Banded.zeros(n)) == 0.0
