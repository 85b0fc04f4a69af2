"""Compiled inner loops; imported for large grids only, since loading them takes half a second."""

from __future__ import annotations

import numba
import numpy as np


@numba.njit(cache=True, nogil=True)
def weigh(
    values: np.ndarray,
    row_index: np.ndarray,
    row_weight: np.ndarray,
    column_index: np.ndarray,
    column_weight: np.ndarray,
    out: np.ndarray,
) -> None:
    """``out[i, j] = Σ_l v_lj Σ_k u_ki z``, in the order of :func:`earthwork.ground.resample.apply_taps`.

    Row sums are taken once for each source column and used by every cell that takes that column. Without fast-math,
    so that no term is reordered or fused and the digits are those of the array code.
    """
    samples = values.shape[1]
    sums = np.empty(samples, np.float64)
    for i in range(out.shape[0]):
        row = values[row_index[0, i]]
        weight = row_weight[0, i]
        for j in range(samples):
            sums[j] = row[j] * weight
        for k in range(1, row_index.shape[0]):
            row = values[row_index[k, i]]
            weight = row_weight[k, i]
            for j in range(samples):
                sums[j] += row[j] * weight
        cells = out[i]
        index, weights = column_index[0], column_weight[0]
        for j in range(cells.size):
            cells[j] = sums[index[j]] * weights[j]
        for k in range(1, column_index.shape[0]):
            index, weights = column_index[k], column_weight[k]
            for j in range(cells.size):
                cells[j] += sums[index[j]] * weights[j]
