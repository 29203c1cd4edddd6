"""A step as a list of sums, tendencies and solves: what every linear time scheme comes down to.

A program starts from the states of one or more time levels. Each row is a weighted sum of vectors
that are there already and of tendencies of parts of the operator, and may be solved:

    (I - a dt F) y = sum_j c_j y_j + dt sum_p sum_j b_pj P_p y_j

F is the part ``fast``. A scheme is data in this form, and one interpreter takes it on states, on
small matrices and on scalars alike.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Any, Final, TypeAlias

import numpy as np
from numpy.typing import NDArray

Array: TypeAlias = NDArray[Any]

PARTS: Final = ("slow", "wind", "pressure", "fast")
"""Parts of the operator by their role in a step: slow terms; pressure gradients and divergences
that are stepped explicitly with sound; what is solved for."""

Tendency: TypeAlias = Callable[[str, Array], Array | None]
"""Returns dt times a part of the operator times a vector; None where the part is zero."""

Solve: TypeAlias = Callable[[float, Array], Array]
"""Solves (I - a dt F) y = right-hand side for a given a."""


@dataclass(frozen=True, slots=True)
class Row:
    """One vector of a program.

    Attributes
    ----------
    of : tuple of (int, float)
        Vectors that are summed, with their weights [1].
    tendencies : tuple of (str, int, float)
        Part, vector and weight of every tendency, in units of dt [1].
    solve : float
        a of (I - a dt F); 0 where nothing is solved.
    """

    of: tuple[tuple[int, float], ...] = ()
    tendencies: tuple[tuple[str, int, float], ...] = ()
    solve: float = 0.0


@dataclass(frozen=True, slots=True)
class Program:
    """A step.

    Attributes
    ----------
    levels : int
        Time levels it starts from, the newest first: vectors 0 to ``levels`` - 1.
    rows : tuple of Row
        Vectors from ``levels`` on, in the order they are computed.
    results : tuple of int
        Vectors that are the new time levels, the newest first.
    """

    levels: int
    rows: tuple[Row, ...]
    results: tuple[int, ...]

    def evaluations(self, part: str) -> int:
        """Number of tendencies of one part that have to be evaluated by multiplication.

        The fast tendency of a vector that was solved for comes with the solve.
        """
        solved = {self.levels + i for i, row in enumerate(self.rows) if row.solve}
        asked = {v for row in self.rows for p, v, _ in row.tendencies if p == part}
        return len(asked - solved) if part == "fast" else len(asked)

    def needed(self, part: str) -> int:
        """Number of tendencies of one part that a model evaluates in a step.

        A time level that was the level before it in the last step, unchanged, brings the tendency
        that was evaluated then.
        """
        asked = {v for row in self.rows for p, v, _ in row.tendencies if p == part}
        kept = {k for k in range(1, self.levels) if self.results[k] == k - 1}
        return len({v for v in asked if v not in kept} | {0 for v in asked if v in kept})

    @property
    def solves(self) -> int:
        """Number of systems solved."""
        return sum(row.solve != 0.0 for row in self.rows)

    @property
    def diagonals(self) -> tuple[float, ...]:
        """The different a of the systems solved, ascending [1]."""
        return tuple(sorted({row.solve for row in self.rows} - {0.0}))


def run(
    program: Program, levels: Sequence[Array], tendency: Tendency, solve: Solve
) -> tuple[Array, ...]:
    """Carry out a program.

    The fast tendency of a vector that was solved for is (y - right-hand side)/a: the product would
    multiply what the solve has just made small by a large number, and lose digits at large dt.

    Parameters
    ----------
    program : Program
    levels : sequence of ndarray
        States of the time levels, the newest first; they are not changed.
    tendency : callable
    solve : callable
        Must return a new array.

    Returns
    -------
    tuple of ndarray
        The new time levels, the newest first; some may be arrays that were handed in.
    """
    vectors = list(levels)
    known: dict[tuple[str, int], Array | None] = {}
    wanted = {v for row in program.rows for part, v, _ in row.tendencies if part == "fast"}
    for row in program.rows:
        total = np.zeros_like(vectors[0])
        for v, weight in row.of:
            total += weight * vectors[v]
        for part, v, weight in row.tendencies:
            if (part, v) not in known:
                known[part, v] = tendency(part, vectors[v])
            rate = known[part, v]
            if rate is not None:
                total += weight * rate
        if row.solve:
            solved = solve(row.solve, total)
            if len(vectors) in wanted:
                known["fast", len(vectors)] = (solved - total) / row.solve
            total = solved
        vectors.append(total)
    return tuple(vectors[v] for v in program.results)


def scalar_factors(program: Program, **rates: Array) -> Array:
    """Eigenvalues of one step of q' = (sum of rates) q, each rate of its own part.

    Parameters
    ----------
    program : Program
    **rates
        dt times the rate of a part, by its name, all of one shape [1].

    Returns
    -------
    ndarray of complex, shape (..., levels)
        The factor of the physical mode among those of computational ones, in no order.
    """
    first = np.asarray(next(iter(rates.values())), dtype=complex)
    given = {part: np.asarray(rate, dtype=complex) for part, rate in rates.items()}

    def tendency(part: str, y: Array) -> Array | None:
        rate = given.get(part)
        return None if rate is None else rate * y

    def solve(a: float, y: Array) -> Array:
        return y / (1.0 - a * given["fast"]) if "fast" in given else y.copy()

    companion = np.empty((*first.shape, program.levels, program.levels), dtype=complex)
    for k in range(program.levels):
        start = [np.full(first.shape, float(k == i), dtype=complex) for i in range(program.levels)]
        for i, result in enumerate(run(program, start, tendency, solve)):
            companion[..., i, k] = result
    if program.levels == 1:
        return companion[..., 0]
    return np.linalg.eigvals(companion)
