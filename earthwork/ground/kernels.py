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
    """``out[i, j] = Σ_l v_jl Σ_k u_ik z_kl``, in the order of :func:`earthwork.ground.resample.apply_taps`.

    Row sums are taken once for each source column and reused by every cell that takes that column. Without
    fast-math, so that no term is reordered or fused and the digits are those of the array code.
    """
    samples = values.shape[1]
    sums = np.empty(samples, np.float64)
    for i in range(out.shape[0]):
        first = values[row_index[i, 0]]
        weight = row_weight[i, 0]
        for j in range(samples):
            sums[j] = first[j] * weight
        for k in range(1, row_index.shape[1]):
            row = values[row_index[i, k]]
            weight = row_weight[i, k]
            for j in range(samples):
                sums[j] += row[j] * weight
        for j in range(out.shape[1]):
            total = sums[column_index[j, 0]] * column_weight[j, 0]
            for k in range(1, column_index.shape[1]):
                total += sums[column_index[j, k]] * column_weight[j, k]
            out[i, j] = total
