"""Baselines written out by hand on dense matrices, from their formulas."""

import numpy as np


def solved(fast, h, rhs):
    return np.linalg.solve(np.eye(len(fast)) - h * fast, rhs)


def time_split(slow, wind, pressure, fast, q, dt, n, b, d):
    """Three large stages, each from q, by substeps of sound with slow tendencies held."""
    stage = q
    for share in (1 / 3, 1 / 2, 1.0):
        count = max(1, round(share * n))
        h = share * dt / count
        forcing, y, before = slow @ stage, q, q
        for k in range(count):
            extrapolated = y + (d * (y - before) if k else 0.0)
            moved = y + h * (wind @ extrapolated + forcing)
            rhs = moved + h * (pressure @ moved) + 0.5 * (1 - b) * h * (fast @ y)
            before, y = y, solved(fast, 0.5 * (1 + b) * h, rhs)
        stage = y
    return stage


def leapfrog(slow, fast, q, p, dt, b, f, s):
    """One step from q_n and the filtered state of the level before; the new pair of states."""
    rhs = p + 2 * dt * (slow @ q) + dt * (1 - b) * (fast @ p)
    new = solved(fast, (1 + b) * dt, rhs)
    shift = f * (p - 2 * q + new)
    return new - (1 - s) * shift, q + s * shift


def backward_difference(slow, fast, q, p, dt):
    """3/2 q_new - 2 q + 1/2 p = dt (2 S q - S p + F q_new)."""
    rhs = 2 * q - p / 2 + dt * (slow @ (2 * q - p))
    return np.linalg.solve(1.5 * np.eye(len(fast)) - dt * fast, rhs)
