"""The stable step by the plainest means: dense matrices, every wave, every step of the scan.

Slow twin of the search: no power norms as proofs, no strides, no caps. The step matrix comes from
the dense stage loop, eigenvalues and norms from numpy, straight from the definitions.
"""

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import expm

from levelstride.column.air import Background
from levelstride.column.column import Column
from levelstride.operator.energy import energy_weights
from levelstride.operator.setting import layout_of
from levelstride.operator.wave import Wave
from levelstride.splitting import split_operator
from levelstride.splitting.splitting import Splitting
from levelstride.tableaux.tableau import Tableau

Matrix = NDArray[np.complex128]


def dense_step(
    slow: Matrix, fast: Matrix, after: Matrix, after_implicit: Matrix, tableau: Tableau, dt: float
) -> Matrix:
    """R(dt) by the stage equations, stage by stage."""
    size = slow.shape[0]
    one = np.eye(size)
    if tableau.kind == "explicit":
        slow, fast = slow + fast, np.zeros_like(fast)
    slow_of, fast_of = [], []
    for i in range(tableau.nstage):
        y = one.astype(complex)
        for j in range(i):
            y = y + dt * tableau.a_explicit[i, j] * slow_of[j]
            y = y + dt * tableau.a_implicit[i, j] * fast_of[j]
        diagonal = tableau.a_implicit[i, i] if tableau.kind != "explicit" else 0.0
        if diagonal != 0:
            solved = np.linalg.solve(one - dt * diagonal * fast, y)
            fast_of.append((solved - y) / (dt * diagonal))
            y = solved
        else:
            fast_of.append(fast @ y)
        slow_of.append(slow @ y)
    q = one.astype(complex)
    for j in range(tableau.nstage):
        q = q + dt * tableau.b_explicit[j] * slow_of[j]
        q = q + dt * tableau.b_implicit[j] * fast_of[j]
    q = q + dt * after @ q
    return np.linalg.solve(one - dt * after_implicit, q)


def exceeds(matrix: Matrix, limit: float) -> bool:
    """Whether the spectral norm does; the cheaper Frobenius norm is never smaller."""
    return bool(np.linalg.norm(matrix) > limit and np.linalg.norm(matrix, 2) > limit)


class PlainWave:
    """One wave, its dense parts in energy coordinates."""

    def __init__(
        self, column: Column, air: Background, splitting: Splitting, tableau: Tableau, kappa: float
    ) -> None:
        parts = split_operator(splitting, column, air, Wave(kappa, column.horizontal))
        scale = np.sqrt(energy_weights(column, air, layout_of(column)))
        self.dense = [
            (scale[:, None] * part.to_dense() / scale[None, :]).astype(complex)
            for part in (parts.slow, parts.fast, parts.after, parts.after_implicit)
        ]
        self.tableau = tableau
        self.operator = sum(self.dense)
        self.eigenvalues = np.linalg.eigvals(self.operator)
        self.own = max(0.0, float(self.eigenvalues.real.max()))
        self.exponentials: dict[float, float] = {}

    def matrix(self, dt: float) -> Matrix:
        return dense_step(*self.dense, self.tableau, dt)

    def log_exponential(self, rate: float, horizon: float) -> float:
        """Largest ln ||exp(tL)|| - t rate, t doubled from a short time on; at least zero."""
        hermitian = (self.operator + self.operator.conj().T) / 2
        if np.linalg.eigvalsh(hermitian)[-1] < 1e-11 * np.abs(self.eigenvalues).max():
            return 0.0
        t, best = 0.25 / np.abs(self.eigenvalues).max(), 1.0
        power = expm(t * (self.operator - rate * np.eye(self.operator.shape[0])))
        while t < horizon and best < 1e120:
            best = max(best, float(np.linalg.norm(power, 2)))
            power, t = power @ power, 2 * t
        return float(np.log(best))

    def stable(self, dt: float, efolding_s: float, transient_limit: float) -> bool:
        """Spectrum and transient criterion; the tolerated growth is taken out of R at once."""
        rate = 1 / efolding_s + self.own
        matrix = self.matrix(dt) * np.exp(-dt * rate)
        if np.abs(np.linalg.eigvals(matrix)).max() > 1:
            return False
        if rate not in self.exponentials:
            self.exponentials[rate] = self.log_exponential(rate, 10 * efolding_s)
        limit = transient_limit * np.exp(self.exponentials[rate])
        power, previous, m = matrix, matrix, 1
        while True:
            if exceeds(power, limit) or (m > 1 and exceeds(power @ previous, limit)):
                return False
            # beyond a power of norm one nothing grows any more
            if m * dt >= 10 * efolding_s or (m > 1 and np.linalg.norm(power) <= 1):
                return True
            previous, power, m = power, power @ power, 2 * m


def plain_stable_step(
    waves: list[PlainWave],
    efolding_s: float,
    transient_limit: float,
    longest_s: float,
    first_s: float | None = None,
) -> float | None:
    """Scan at ratio 1.05, every wave at every step; bisect to 0.1 %.

    ``first_s`` is where the scan begins, by default 1e-3 over the fastest rate [s].
    """
    fastest = max(np.abs(wave.eigenvalues).max() for wave in waves)

    def stable(dt: float) -> bool:
        return all(wave.stable(dt, efolding_s, transient_limit) for wave in waves)

    step = first_s or 1e-3 / fastest
    while not stable(step):
        step /= 10
    while stable(step):
        if step >= longest_s:
            return None
        step *= 1.05
    low, high = step / 1.05, step
    while high / low > 1.001:
        middle = float(np.sqrt(low * high))
        low, high = (middle, high) if stable(middle) else (low, middle)
    return low
