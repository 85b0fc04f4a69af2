"""Compiled loops over what was read from a raster."""

from __future__ import annotations

import numpy as np
from numba import njit


@njit(cache=True, nogil=True, error_model="numpy")
def blank(values, missing):
    """Set cells that hold ``missing``, or are infinite, to NaN, in place and in one pass.

    Args:
        values: (height, width), float32 or float64.
        missing: stored value of no data, in the type of the values; NaN where there is none.
    """
    hole = values.dtype.type(np.nan)
    infinite = values.dtype.type(np.inf)
    for i in range(values.shape[0]):
        row = values[i]
        for j in range(row.size):
            value = row[j]
            row[j] = hole if (value == missing) | (abs(value) == infinite) else value
