"""Arithmetic of level sets: interfaces from a rule with few numbers.

Every function returns heights above the ground [m], shape (nlev+1,), bottom-up, or raises
ValueError with one sentence that says why the rule has no solution and how to mend it.
"""

from typing import Final, cast

import numpy as np
from scipy.optimize import brentq

from .arrays import Array

LARGEST_RATIO: Final = 10.0
"""Layers that grow faster than this from one to the next are taken for a mistake."""


def uniform(layers: int, top_m: float) -> Array:
    """Interfaces of layers of one thickness."""
    return top_m * np.arange(layers + 1) / layers


def _log_sum(t: float, layers: int) -> float:
    """Log of 1 + r + ... + r^(layers-1) for r = exp(t), without overflow."""
    if abs(t) < 1e-9:
        return float(np.log(layers) + 0.5 * (layers - 1) * t)
    lead = (layers - 1) * t if t > 0.0 else 0.0
    s = -abs(t)
    return float(lead + np.log(-np.expm1(layers * s)) - np.log(-np.expm1(s)))


def geometric(layers: int, top_m: float, lowest_layer_m: float) -> Array:
    """Interfaces of layers that grow by one ratio, which makes their sum ``top_m``.

    The ratio may be 1 or smaller where the lowest layer is thicker than the mean.
    """
    if lowest_layer_m >= top_m:
        raise ValueError(
            f"the lowest layer alone reaches the top of {top_m:g} m, so {layers} layers have no "
            "ratio; give a thinner lowest_layer_m or a higher top_m"
        )
    wanted = float(np.log(top_m / lowest_layer_m))
    high = float(np.log(LARGEST_RATIO))
    if _log_sum(high, layers) < wanted:
        raise ValueError(
            f"{layers} layers cannot reach the top of {top_m:g} m unless each is more than "
            f"{LARGEST_RATIO:g} times as thick as the one below; give more layers, a thicker "
            "lowest_layer_m or a lower top_m"
        )
    low = float(np.log1p(-min(lowest_layer_m / top_m, 1.0 - 1e-12))) - 1.0
    t = brentq(lambda x: _log_sum(x, layers) - wanted, low, high, xtol=1e-15)
    heights = np.concatenate([[0.0], np.cumsum(lowest_layer_m * np.exp(t * np.arange(layers)))])
    heights[-1] = top_m
    return cast("Array", heights)


def tanh(layers: int, top_m: float, lowest_layer_m: float) -> Array:
    """Interfaces top [1 + tanh(a (f/n - 1))/tanh(a)] with a found from the lowest layer.

    Written as top sinh(a f/n)/(sinh(a) cosh(a (1 - f/n))), which keeps the lowest layers exact.
    """
    mean = top_m / layers
    if abs(lowest_layer_m - mean) <= 1e-9 * mean:
        return uniform(layers, top_m)
    if lowest_layer_m > mean:
        raise ValueError(
            f"a tanh set needs a lowest layer no thicker than the mean layer of {mean:g} m; give "
            "a thinner lowest_layer_m, fewer layers or a higher top_m"
        )

    def share(a: float, x: Array) -> Array:
        part: Array = np.sinh(a * x) / (np.sinh(a) * np.cosh(a * (1.0 - x)))
        return part

    first = np.array([1.0 / layers])

    def gap(a: float) -> float:
        return float(np.log(share(a, first)[0] * top_m / lowest_layer_m))

    if gap(40.0) > 0.0:
        raise ValueError(
            f"no tanh set of {layers} layers below {top_m:g} m has so thin a lowest layer; give a "
            "thicker lowest_layer_m or more layers"
        )
    a = brentq(gap, 1e-7, 40.0, xtol=1e-15)
    return top_m * share(a, np.arange(layers + 1) / layers)


def interfaces_from_centres(centres_m: Array) -> Array:
    """Interfaces whose middles are the given centres: z_0 = 0, z_{j+1} = 2 zc_j - z_j.

    Raises
    ------
    ValueError
        Where an interface would not lie above its centre.
    """
    heights = np.zeros(centres_m.size + 1)
    for j, centre in enumerate(centres_m):
        if centre <= heights[j]:
            raise ValueError(
                f"the centres are no middles of layers that start at the ground: interface {j} "
                f"would lie at {heights[j]:g} m, not below centre {j} at {centre:g} m; give the "
                'interfaces instead, with at = "interfaces"'
            )
        heights[j + 1] = 2.0 * centre - heights[j]
    return heights
