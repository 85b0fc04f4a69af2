"""Exact shares of grid cells inside polygons, by accumulating signed areas along the edges."""

from __future__ import annotations

import numpy as np

from earthwork.compiled import kernel
from earthwork.ground.areas import Rings
from earthwork.ground.grid import Window


@kernel
def _add_edge(acc, xa, ya, xb, yb):
    """Add the signed area to the right of one edge to ``acc``; its running sum along a row is then the coverage.

    ``acc`` is (rows, columns + 2); coordinates are in cells from its first cell, y down.
    """
    rows = acc.shape[0]
    columns = float(acc.shape[1] - 2)
    sign = 1.0
    if ya > yb:
        xa, ya, xb, yb = xb, yb, xa, ya
        sign = -1.0
    if ya == yb or yb <= 0.0 or ya >= rows:
        return
    run = (xb - xa) / (yb - ya)
    if ya < 0.0:
        xa -= ya * run
        ya = 0.0
    if yb > rows:
        xb = xa + (rows - ya) * run
        yb = float(rows)
    x = xa
    y = ya
    i = int(ya)
    while y < yb and i < rows:
        y_next = min(float(i + 1), yb)
        x_next = xb if y_next == yb else xa + (y_next - ya) * run
        _add_in_row(acc[i], x, x_next, sign * (y_next - y), columns)
        x = x_next
        y = y_next
        i += 1


@kernel(inline="always")
def _add_in_row(row, x, x_next, height, columns):
    """The part of an edge inside one row of cells; what lies beside the window is clamped to its sides."""
    low = min(x, x_next)
    high = max(x, x_next)
    if high - low < 1e-12:
        middle = min(max(0.5 * (low + high), 0.0), columns)
        j = int(middle)
        row[j] += height * (1.0 - (middle - j))
        row[j + 1] += height * (middle - j)
        return
    per_x = height / (high - low)
    if low < 0.0:
        row[0] += per_x * (min(high, 0.0) - low)
    if high > columns:
        row[int(columns)] += per_x * (high - max(low, columns))
    left = min(max(low, 0.0), columns)
    right = min(max(high, 0.0), columns)
    j = int(left)
    while left < right:
        step = min(float(j + 1), right)
        part = per_x * (step - left)
        away = 0.5 * (left + step) - j
        row[j] += part * (1.0 - away)
        row[j + 1] += part * away
        left = step
        j += 1


@kernel
def _polygon_shares(xs, ys, ring_offsets, first, last, row, column, acc, out):
    """Coverage of the rings first..last in ``out`` (rows, columns), whose first cell is (row, column).

    ``acc`` (rows, columns + 2) holds zeros.
    """
    for ring in range(first, last):
        for k in range(ring_offsets[ring], ring_offsets[ring + 1] - 1):
            _add_edge(acc, xs[k] - column, ys[k] - row, xs[k + 1] - column, ys[k + 1] - row)
    for i in range(acc.shape[0]):
        total = 0.0
        for j in range(out.shape[1]):
            total += acc[i, j]
            # The running sum carries rounding of 1e-16 per edge; a share below 1e-12 is nothing.
            share = min(abs(total), 1.0)
            out[i, j] = share if share > 1e-12 else 0.0


def polygon_share(rings: Rings, polygon: int, window: Window) -> tuple[Window, np.ndarray] | None:
    """Share of each cell of a window inside one polygon.

    Returns:
        The part of the window that the polygon's bounding box touches, and the shares there (height, width) in
        [0, 1]; None when it touches nothing.
    """
    west, north, east, south = rings.bounds[polygon]  # first and last column and row
    row = max(int(np.floor(north)), window.row)
    stop_row = min(int(np.ceil(south)), window.row + window.height)
    column = max(int(np.floor(west)), window.column)
    stop_column = min(int(np.ceil(east)), window.column + window.width)
    if stop_row <= row or stop_column <= column:
        return None
    acc = np.zeros((stop_row - row, stop_column - column + 2))
    first, last = rings.polygon_offsets[polygon], rings.polygon_offsets[polygon + 1]
    share = np.empty((stop_row - row, stop_column - column))
    _polygon_shares(rings.xs, rings.ys, rings.ring_offsets, first, last, row, column, acc, share)
    return Window(row, column, stop_row - row, stop_column - column), share


@kernel
def take_out(rest, share, row, column):
    """Take the shares of an area, which start at (row, column), off what is left of the cells."""
    for i in range(share.shape[0]):
        line = rest[row + i]
        for j in range(share.shape[1]):
            line[column + j] -= share[i, j]


@kernel
def clear_rounding(rest):
    """Set what subtraction leaves of a cell that areas cover whole to 0; whether anything is left."""
    left = False
    for i in range(rest.shape[0]):
        line = rest[i]
        for j in range(line.size):
            value = line[j]
            kept = value if value >= 1e-9 else 0.0
            line[j] = kept
            left |= kept > 0.0
    return left


def touching(rings: Rings, window: Window) -> np.ndarray:
    """Indices of the polygons whose bounding box touches a window."""
    west, north, east, south = rings.bounds.T
    return np.flatnonzero(
        (west < window.column + window.width)
        & (east > window.column)
        & (north < window.row + window.height)
        & (south > window.row)
    )


def area_share(rings: Rings, window: Window) -> np.ndarray:
    """Share of each cell of a window inside an area: polygons that do not overlap; shape (height, width) in [0, 1]."""
    share = np.zeros((window.height, window.width))
    for polygon in touching(rings, window):
        found = polygon_share(rings, polygon, window)
        if found:
            part, values = found
            top, left = part.row - window.row, part.column - window.column
            share[top : top + part.height, left : left + part.width] += values
    return np.minimum(share, 1.0, out=share)
