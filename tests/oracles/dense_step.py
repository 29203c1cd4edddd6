"""Slow twin of the stepper: dense matrices, a general solver and the stage sums written out."""

from __future__ import annotations

import numpy as np


def dense_step(parts, tableau, dt):
    """Return the matrix of one step, shape (nstate, nstate).

    The tendency of a solved stage is (Y - right-hand side)/(a_ii dt), as the stepper defines it.
    """
    slow, fast = parts.slow.to_dense(), parts.fast.to_dense()
    if tableau.kind == "explicit":
        slow, fast = slow + fast, np.zeros_like(slow)
    one = np.eye(slow.shape[0])
    slow_tendency, fast_tendency = [], []
    for i in range(len(tableau.b_explicit)):
        rhs = one.astype(np.result_type(slow, fast))
        for j in range(i):
            rhs = rhs + dt * tableau.a_explicit[i, j] * slow_tendency[j]
            rhs = rhs + dt * tableau.a_implicit[i, j] * fast_tendency[j]
        h = tableau.a_implicit[i, i] * dt
        if h != 0.0 and np.any(fast):
            stage = np.linalg.solve(one - h * fast, rhs)
            fast_tendency.append((stage - rhs) / h)
        else:
            stage = rhs
            fast_tendency.append(fast @ stage)
        slow_tendency.append(slow @ stage)
    new = one
    for j in range(len(tableau.b_explicit)):
        new = new + dt * tableau.b_explicit[j] * slow_tendency[j]
        new = new + dt * tableau.b_implicit[j] * fast_tendency[j]
    new = new + dt * parts.after.to_dense() @ new
    return np.linalg.solve(one - dt * parts.after_implicit.to_dense(), new)
