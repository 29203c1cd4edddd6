"""How much growth is tolerated."""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar, Final

import numpy as np

STANDARD_EFOLDINGS_S: Final = (86400.0, 3600.0, 600.0)
"""E-folding times whose steps stand side by side: a day, an hour, ten minutes [s]."""

STRICT_ALLOWANCE: Final = 1e-8
"""Round-off allowance on a spectral radius of one: radii near coalescing eigenvalues scatter."""

LOG_STRICT: Final = float(np.log1p(STRICT_ALLOWANCE))


@dataclass(frozen=True, slots=True)
class Tolerance:
    """Tolerated growth of a disturbance.

    Attributes
    ----------
    efolding_s : float
        Shortest e-folding time tolerated, growth of the operator itself not counted [s].
    transient_limit : float
        Largest energy norm of a power of R, that growth taken out [1].
    """

    efolding_s: float
    transient_limit: float

    LONGEST_EFOLDING_S: ClassVar[float] = STANDARD_EFOLDINGS_S[0]

    @property
    def rate(self) -> float:
        """Tolerated growth rate [1/s]."""
        return 1.0 / self.efolding_s

    @property
    def horizon(self) -> float:
        """Simulated time over which power norms are compared [s]."""
        return 10.0 * self.efolding_s
