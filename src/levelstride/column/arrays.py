"""The one array type of the column records."""

from typing import TypeAlias

import numpy as np
from numpy.typing import ArrayLike, NDArray

Array: TypeAlias = NDArray[np.float64]


def read_only(values: ArrayLike) -> Array:
    """Copy ``values`` into a contiguous float64 array that refuses to be written to."""
    array = np.array(values, dtype=np.float64, order="C")
    array.flags.writeable = False
    return array
