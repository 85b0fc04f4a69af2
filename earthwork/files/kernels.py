"""Compiled loops over what was read from a raster."""

from __future__ import annotations

import numpy as np

from earthwork.compiled import FAST, kernel


@kernel(fastmath=FAST)
def blank(values, missing, low, high):
    """Set cells that hold ``missing``, or are infinite, to NaN, in place and in one pass; whether others lie far out.

    Args:
        values: (height, width), float32 or float64.
        missing: stored value of no data, in the type of the values; NaN where there is none.
        low, high: in the type of the values.

    Returns:
        True when a value that stays is under ``low`` or over ``high``.
    """
    hole = values.dtype.type(np.nan)
    infinite = values.dtype.type(np.inf)
    zero = values.dtype.type(0)
    one = values.dtype.type(1)
    odd = zero
    for i in range(values.shape[0]):
        row = values[i]
        for j in range(row.size):
            value = row[j]
            kept = hole if (value == missing) | (abs(value) == infinite) else value
            row[j] = kept
            odd += one if (kept < low) | (kept > high) else zero
    return odd > zero
