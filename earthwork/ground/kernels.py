"""Compiled inner loops; imported for large grids only, since loading them takes half a second."""

from __future__ import annotations

import numpy as np

from earthwork.compiled import kernel


@kernel(error_model="python")
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


@kernel(error_model="python")
def _snapped(place: float, snap: float) -> float:
    near = np.rint(place)
    return near if abs(place - near) < snap else place


@kernel(error_model="python")
def add_between(
    values: np.ndarray,
    control: np.ndarray,
    row_node: np.ndarray,
    row_part: np.ndarray,
    column_node: np.ndarray,
    column_part: np.ndarray,
    top: int,
    left: int,
    snap: float,
    out: np.ndarray,
) -> None:
    """Add to ``out`` the samples interpolated at places that are themselves interpolated between control points.

    In the order of :func:`earthwork.ground.warp.places_between` and :func:`earthwork.ground.warp.bilinear`, whose
    digits it gives.

    Args:
        values: samples, shape (rows, columns), the first being (top, left) of the file.
        control: (row, column) in samples of the file at control points, shape (2, nodes down, nodes along).
        row_node, row_part: control point north of each row, and how far the row is on the way to the next.
        column_node, column_part: the same along the columns.
        snap: places closer than this to a sample are on it.
        out: shape (height, width).
    """
    last_row, last_column = values.shape[0] - 1, values.shape[1] - 1
    coarse = np.empty((2, control.shape[2]))
    for i in range(out.shape[0]):
        u = row_part[i]
        for axis in range(2):
            north, south = control[axis, row_node[i]], control[axis, row_node[i] + 1]
            for j in range(coarse.shape[1]):
                coarse[axis, j] = north[j] * (1.0 - u) + south[j] * u
        for j in range(out.shape[1]):
            node, v = column_node[j], column_part[j]
            row = _snapped(coarse[0, node] * (1.0 - v) + coarse[0, node + 1] * v - top, snap)
            column = _snapped(coarse[1, node] * (1.0 - v) + coarse[1, node + 1] * v - left, snap)
            if not (0.0 <= row <= last_row and 0.0 <= column <= last_column):
                out[i, j] += np.nan
                continue
            upper, before = np.int64(row), np.int64(column)
            down, along = row - upper, column - before
            lower = upper + 1 if down > 0.0 else upper
            after = before + 1 if along > 0.0 else before
            first = values[upper, before] * (1.0 - along) + values[upper, after] * along
            second = values[lower, before] * (1.0 - along) + values[lower, after] * along
            out[i, j] += first * (1.0 - down) + second * down
