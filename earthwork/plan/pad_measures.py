"""Measures of the fill under one pad: how its thickness differs, over which distance, and how steeply it changes."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from earthwork.ground.grid import Grid
from earthwork.quantities.pads import PadField

#: Directions at most in which a gauge is laid.
_DIRECTIONS = 90

#: Thickness within this part of the difference of the greatest (least) counts as greatest (least).
_PLATEAU = 0.01


@dataclass(frozen=True)
class Steepest:
    """The steepest change of a quantity over a gauge length.

    ``change`` is in the unit of the quantity, over ``length_m``; the gauge lies between two places in CRS coordinates.
    """

    change: float
    length_m: float
    start: tuple[float, float]
    end: tuple[float, float]

    @property
    def slope(self) -> float:
        """Change by metre."""
        return self.change / self.length_m


def steepest(field: PadField, values: np.ndarray, gauge_m: float, grid: Grid) -> Steepest | None:
    """The steepest change of a quantity between two places of a footprint that are a gauge length apart.

    Both places are centres of cells of the footprint; the distance is the gauge length, or the next one up that cells
    have. Where the footprint has no room for the gauge, half of it is tried, and so on.

    Args:
        field: the footprint.
        values: the quantity on it, (h, w).
        gauge_m: gauge length [m].
        grid: the analysis grid.

    Returns:
        None where the footprint is a single cell, or nothing changes.
    """
    inside = field.inside
    dx, dy = grid.cell_east_m * field.block, grid.cell_north_m * field.block
    while gauge_m >= min(dx, dy) / 2:
        best: tuple[float, float, int, int, int, int] | None = None
        found = False
        for di, dj, length in _offsets(gauge_m, dx, dy):
            one, other = _pair(inside.shape, di, dj)
            both = inside[one] & inside[other]
            if not both.any():
                continue
            found = True
            change = np.where(both, np.abs(values[other] - values[one]), 0.0)
            k = int(np.argmax(change))
            i, j = np.unravel_index(k, change.shape)
            if best is None or change[i, j] / length > best[0] / best[1] * (1 + 1e-12):
                best = float(change[i, j]), length, int(i) + one[0].start, int(j) + one[1].start, di, dj
        if found:
            if best is None or best[0] <= 0.0:
                return None
            return _named(best, field, grid)
        gauge_m /= 2
    return None


def _offsets(gauge_m: float, dx: float, dy: float) -> list[tuple[int, int, float]]:
    """Offsets (rows, columns, length) of half the directions, as little longer than the gauge as cells allow."""
    cell = max(dx, dy)
    reach_i, reach_j = int((gauge_m + cell) / dy) + 1, int((gauge_m + cell) / dx) + 1
    rows, columns = np.mgrid[0 : reach_i + 1, -reach_j : reach_j + 1]
    length = np.hypot(rows * dy, columns * dx)
    ahead = (rows > 0) | (columns > 0)
    ring = ahead & (length >= gauge_m * (1 - 1e-9)) & (length < gauge_m + cell * (1 - 1e-9))
    i, j, d = rows[ring], columns[ring], length[ring]
    sector = np.floor(np.arctan2(i * dy, j * dx) / np.pi * _DIRECTIONS).astype(int)
    order = np.lexsort((d, sector))
    first = np.r_[True, np.diff(sector[order]) > 0]
    return [(int(i[k]), int(j[k]), float(d[k])) for k in order[first]]


def _pair(shape: tuple[int, int], di: int, dj: int) -> tuple[tuple[slice, slice], tuple[slice, slice]]:
    """Slices of an array and of the same array moved by an offset."""
    rows, columns = shape
    rows_one, rows_other = slice(0, max(rows - di, 0)), slice(di, max(rows, di))
    if dj >= 0:
        return (rows_one, slice(0, max(columns - dj, 0))), (rows_other, slice(dj, max(columns, dj)))
    return (rows_one, slice(-dj, max(columns, -dj))), (rows_other, slice(0, max(columns + dj, 0)))


def _named(best: tuple[float, float, int, int, int, int], field: PadField, grid: Grid) -> Steepest:
    change, length, i, j, di, dj = best

    def place(row: int, column: int) -> tuple[float, float]:
        return grid.point(field.row + (row + 0.5) * field.block, field.column + (column + 0.5) * field.block)

    return Steepest(change, length, place(i, j), place(i + di, j + dj))


def differential_distance_m(field: PadField, grid: Grid) -> float | None:
    """Least distance [m] between a place of the greatest thickness and one of the least; None without a difference."""
    from scipy.ndimage import distance_transform_edt

    inside = field.inside
    if not inside.any():
        return None
    low, high = float(field.thickness[inside].min()), float(field.thickness[inside].max())
    if high - low <= 1e-9:
        return None
    margin = _PLATEAU * (high - low)
    least = inside & (field.thickness <= low + margin)
    most = inside & (field.thickness >= high - margin)
    sampling = (grid.cell_north_m * field.block, grid.cell_east_m * field.block)
    return float(distance_transform_edt(~least, sampling=sampling)[most].min())


def profile(
    start: tuple[float, float], end: tuple[float, float], grid: Grid, beyond_m: float
) -> Iterator[tuple[float, float, float]]:
    """Places along a straight line, and on for a distance at both ends: (station from the start [m], row, column).

    Rows and columns are those of the grid's corners: (0.5, 0.5) is the centre of the first cell.
    """
    metres = grid.unit_m * grid.ground_scale
    length = float(np.hypot(end[0] - start[0], end[1] - start[1])) * metres
    way = (end[0] - start[0]) / length, (end[1] - start[1]) / length
    step = min(grid.cell_east_m, grid.cell_north_m) / 2
    for station in np.arange(-beyond_m, length + beyond_m + step / 2, step):
        row, column = grid.cell(start[0] + way[0] * station, start[1] + way[1] * station)
        if 0 <= row < grid.rows and 0 <= column < grid.columns:
            yield float(station), float(row), float(column)


