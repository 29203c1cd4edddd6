"""The step matrix R(dt) in coordinates in which the energy norm is the Euclidean one."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
from numpy.typing import NDArray

from levelstride.schemes.scheme import ProgramScheme, TimeScheme
from levelstride.splitting.parts import Parts
from levelstride.stepper.any_scheme import stepper_of
from levelstride.tableaux.tableau import Tableau

Matrix = NDArray[Any]
Complex = NDArray[np.complex128]


def energy_parts(parts: Parts, weights: NDArray[np.float64]) -> Parts:
    """Carry the parts over to coordinates D q with D = sqrt(weights).

    Parameters
    ----------
    parts : Parts
    weights : ndarray, shape (nstate,)
        Positive energy weights.

    Returns
    -------
    Parts
        With real matrices where the given ones are real. Partner pairs are skew in it.
    """
    scale = np.sqrt(weights)
    return Parts(
        parts.slow.similar(scale),
        parts.fast.similar(scale),
        parts.after.similar(scale),
        parts.after_implicit.similar(scale),
        parts.layout,
        parts.implicit_terms,
        {name: term.similar(scale) for name, term in parts.slow_terms.items()},
        {name: term.similar(scale) for name, term in parts.fast_terms.items()},
    )


def step_matrix(parts: Parts, tableau: TimeScheme, dt: float) -> Matrix:
    """Return R(dt), shape (nstate, nstate), in the coordinates of ``parts``.

    For a scheme of several time levels the companion matrix, shape (levels * nstate,) twice, the
    newest level first.

    Raises
    ------
    CalculationError
        If an implicit stage has no solution at this step.
    """
    return stepper_of(parts, tableau, dt).matrix()


def spectral_radius(matrix: Matrix) -> float:
    """Largest modulus of the eigenvalues."""
    return float(np.abs(np.linalg.eigvals(matrix)).max())


def growth_rate(matrix: Matrix, dt: float) -> float:
    """Growth rate sigma = ln(spectral radius)/dt [1/s]; -inf for a nilpotent matrix."""
    radius = spectral_radius(matrix)
    return float(np.log(radius) / dt) if radius > 0 else -np.inf


def explicit_polynomial(tableau: Tableau) -> NDArray[np.float64]:
    """Coefficients of the stability polynomial of the explicit part, ascending, shape (nstage+1,).

    Notes
    -----
    1 + sum_k z^(k+1) b.A^k.1 (Hairer and Wanner 1996, Solving Ordinary Differential Equations II,
    section IV.2).
    """
    coefficients, vector = [1.0], np.ones(tableau.nstage)
    for _ in range(tableau.nstage):
        coefficients.append(float(tableau.b_explicit @ vector))
        vector = tableau.a_explicit @ vector
    return np.array(coefficients)


def slow_amplification(scheme: TimeScheme) -> Callable[[Complex], NDArray[np.float64]]:
    """Return what tells the amplification factor of slow terms alone at z = dt times their rate.

    The modulus of the stability polynomial of a tableau; of a scheme of several time levels the
    largest modulus of its factors, computational modes included.
    """
    if isinstance(scheme, ProgramScheme):
        return scheme.slow_factor
    polynomial = explicit_polynomial(scheme)
    return lambda z: np.abs(np.polynomial.polynomial.polyval(z, polynomial))
