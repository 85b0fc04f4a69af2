"""Brings a raster of another CRS onto the grid: each cell's centre is found in the file and interpolated."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np
from pyproj import CRS, Transformer

from earthwork.crs import transformer
from earthwork.errors import GroundError
from earthwork.files.rasters import RasterSource
from earthwork.ground.grid import Grid, Window
from earthwork.ground.resample import AVERAGE_FROM, SNAP, snapped, worth_compiling

if TYPE_CHECKING:
    import shapely

#: Places between control points may be wrong by this part of a source cell; the spacing is chosen by it
#: [cells].
_PLACE_ERROR = 1e-3

#: Spacings of control points that are tried, in cells of the grid.
_SPACINGS = (64, 32, 16, 8, 4, 2, 1)

#: Source cells read at once [cells].
_READ_AT_ONCE = 4_000_000

FLOAT64 = np.dtype(np.float64)

#: Control point before each row, part of the way to the next; the same for the columns.
Ways = tuple[np.ndarray, np.ndarray, np.ndarray, np.ndarray]


@dataclass(frozen=True)
class WarpedRaster:
    """A raster in another CRS, on the cells of the grid.

    Bilinear between the four source samples around the centre of a cell, valid only where all four are. Where the
    source is finer, ``parts`` × ``parts`` points of the cell are averaged.

    Args:
        source: the file, north up in its own CRS.
        crs: its CRS.
        grid: the grid.
        spacing: cells between control points, at which places are transformed; between them they are interpolated.
        parts: points per cell along each axis.
        compiled: use the compiled kernel, which gives the same digits.
    """

    source: RasterSource
    crs: CRS
    grid: Grid
    spacing: int
    parts: int
    compiled: bool = False
    block: tuple[int, int] | None = None
    block_start: tuple[int, int] = (0, 0)
    dtype: np.dtype = FLOAT64

    @property
    def resampling(self) -> str:
        return "average" if self.parts > 1 else "bilinear"

    def reader(self) -> _WarpedReader:
        return _WarpedReader(self)


def warped_raster(source: RasterSource, crs: CRS, grid: Grid) -> WarpedRaster:
    """A raster of another CRS as a surface on the grid, with control points as close as 1/1000 cell asks for.

    Raises:
        GroundError: places of the grid cannot be expressed in the file's CRS.
    """
    rough = WarpedRaster(source, crs, grid, 1, 1)
    to_file = transformer(grid.crs, crs)
    rows = np.linspace(0.5, grid.rows - 0.5, 5)
    columns = np.linspace(0.5, grid.columns - 0.5, 5)
    row, column = (a.ravel() for a in np.meshgrid(rows, columns, indexing="ij"))
    here = _places(rough, to_file, row, column)
    if not np.isfinite(here).all():
        raise GroundError(
            f"{source.what}: {source.info.name}: the site cannot be expressed in its CRS ({crs.name}); check both CRS"
        )
    beside = _places(rough, to_file, row, column + 1.0) - here
    below = _places(rough, to_file, row + 1.0, column) - here
    ratio = max(np.hypot(*beside).max(), np.hypot(*below).max())
    spacing = next((s for s in _SPACINGS if _bend(rough, to_file, row, column, s) < _PLACE_ERROR), 1)
    parts = math.ceil(ratio - 1e-6) if ratio >= AVERAGE_FROM else 1
    return replace(rough, spacing=spacing, parts=parts, compiled=worth_compiling(grid.rows * grid.columns))


def _places(surface: WarpedRaster, to_file: Transformer, row: np.ndarray, column: np.ndarray) -> np.ndarray:
    """(row, column) of grid places in samples of the file, (0, 0) at its first centre; shape (2, …)."""
    grid, info = surface.grid, surface.source.info
    east, north = to_file.transform(grid.west + column * grid.cell_east, grid.north - row * grid.cell_north)
    return np.stack([(info.north - north) / info.cell_north - 0.5, (east - info.west) / info.cell_east - 0.5])


def _bend(surface: WarpedRaster, to_file: Transformer, row: np.ndarray, column: np.ndarray, spacing: int) -> float:
    """The greatest error of places between control points ``spacing`` cells apart [source cells]."""
    if spacing == 1:
        return 0.0
    corner = [_places(surface, to_file, row + i * spacing, column + j * spacing) for i in (0, 1) for j in (0, 1)]
    middle = _places(surface, to_file, row + spacing / 2, column + spacing / 2)
    along = _places(surface, to_file, row, column + spacing / 2)
    down = _places(surface, to_file, row + spacing / 2, column)
    errors = (
        np.abs(middle - sum(corner) / 4).max(),
        np.abs(along - (corner[0] + corner[1]) / 2).max(),
        np.abs(down - (corner[0] + corner[2]) / 2).max(),
    )
    return float(max(errors)) if np.isfinite(errors).all() else math.inf


class _WarpedReader:
    def __init__(self, surface: WarpedRaster) -> None:
        self._surface = surface
        self._file = surface.source.reader()
        self._to_file = transformer(surface.grid.crs, surface.crs)

    def read(self, window: Window) -> np.ndarray:
        values = np.zeros((window.height, window.width))
        self._add(values, window)
        values /= self._surface.parts**2
        return values

    def close(self) -> None:
        self._file.close()

    def _add(self, out: np.ndarray, window: Window) -> None:
        """Add the points of each cell of a window to ``out``; in halves when they take too many samples."""
        info, parts = self._surface.source.info, self._surface.parts
        control = self._control(window)
        top, bottom, left, right = _reach(control, self._ways(window, 0.0, 0.0), parts)
        top, bottom, left, right = max(top, 0), min(bottom, info.rows), max(left, 0), min(right, info.columns)
        if bottom <= top or right <= left:
            out[...] = np.nan
            return
        if (bottom - top) * (right - left) > _READ_AT_ONCE and max(window.height, window.width) > 1:
            for part, cut in _halves(window):
                self._add(out[cut], part)
            return
        source = self._file.read(top, left, bottom - top, right - left)
        offsets = [(i + 0.5) / parts - 0.5 for i in range(parts)]
        for down in offsets:
            for along in offsets:
                ways = self._ways(window, down, along)
                if self._surface.compiled:
                    from earthwork.ground.kernels import add_between

                    add_between(source, control, *ways, top, left, SNAP, out)
                else:
                    row, column = places_between(control, *ways)
                    out += bilinear(source, row - top, column - left)

    def _control(self, window: Window) -> np.ndarray:
        """Places in the file of the control points around a window; the same cells for every window."""
        step = self._surface.spacing
        rows = np.arange(window.row // step, (window.row + window.height - 1) // step + 2) * step + 0.5
        columns = np.arange(window.column // step, (window.column + window.width - 1) // step + 2) * step + 0.5
        row, column = np.meshgrid(rows, columns, indexing="ij")
        places = _places(self._surface, self._to_file, row, column)
        return np.where(np.isfinite(places), places, np.nan)

    def _ways(self, window: Window, down: float, along: float) -> Ways:
        """Control point before each row and column, and how far each is on the way to the next.

        Args:
            down, along: offset from the centres of the cells [cells].
        """
        step = self._surface.spacing
        rows = np.arange(window.row, window.row + window.height)
        columns = np.arange(window.column, window.column + window.width)
        return (
            rows // step - window.row // step,
            (rows % step + down) / step,
            columns // step - window.column // step,
            (columns % step + along) / step,
        )


def places_between(
    control: np.ndarray, row_node: np.ndarray, row_part: np.ndarray, column_node: np.ndarray, column_part: np.ndarray
) -> np.ndarray:
    """Places in the file of cells between control points, shape (2, height, width)."""
    u, v = row_part[:, None], column_part
    coarse = control[:, row_node] * (1 - u) + control[:, row_node + 1] * u
    return coarse[:, :, column_node] * (1 - v) + coarse[:, :, column_node + 1] * v


def _reach(control: np.ndarray, ways: Ways, parts: int) -> tuple[int, int, int, int]:
    """(top, bottom, left, right) of the source samples that the cells of a window can take."""
    row_node, row_part, column_node, column_part = ways
    # between four control points places are bilinear, so their extremes lie at the corners of each such patch
    rows, columns = _ends(row_node), _ends(column_node)
    corners = places_between(control, row_node[rows], row_part[rows], column_node[columns], column_part[columns])
    known = corners[:, np.isfinite(corners).all(axis=0)]
    if known.size == 0:
        return 0, 0, 0, 0
    # points lie up to half a cell from the middle, a cell is at most ``parts`` samples wide, each takes a neighbour
    margin = parts // 2 + 2
    low = np.floor(known.min(axis=1)).astype(int) - margin
    high = np.ceil(known.max(axis=1)).astype(int) + margin + 1
    return int(low[0]), int(high[0]), int(low[1]), int(high[1])


def _ends(nodes: np.ndarray) -> np.ndarray:
    """Indices of the first and the last cell after each control point."""
    change = np.flatnonzero(np.diff(nodes))
    return np.unique(np.concatenate([[0], change, change + 1, [len(nodes) - 1]]))


def _halves(window: Window) -> list[tuple[Window, tuple[slice, slice]]]:
    """A window cut in two across its longer side, each half with its place in the whole."""
    everything = slice(None)
    if window.height >= window.width:
        half = window.height // 2
        return [
            (replace(window, height=half), (slice(0, half), everything)),
            (
                replace(window, row=window.row + half, height=window.height - half),
                (slice(half, None), everything),
            ),
        ]
    half = window.width // 2
    return [
        (replace(window, width=half), (everything, slice(0, half))),
        (
            replace(window, column=window.column + half, width=window.width - half),
            (everything, slice(half, None)),
        ),
    ]


def bilinear(values: np.ndarray, row: np.ndarray, column: np.ndarray) -> np.ndarray:
    """Values between samples, float64; NaN where a sample that is needed is missing or lies outside.

    Args:
        values: samples, shape (rows, columns).
        row, column: places in samples, (0, 0) is the first sample itself.

    >>> bilinear(np.array([[0.0, 1.0], [2.0, 3.0]]), np.array([0.5]), np.array([0.25]))
    array([1.25])
    """
    row, column = snapped(row), snapped(column)
    inside = (row >= 0) & (row <= values.shape[0] - 1) & (column >= 0) & (column <= values.shape[1] - 1)
    row, column = np.where(inside, row, 0.0), np.where(inside, column, 0.0)
    i, j = np.floor(row).astype(np.intp), np.floor(column).astype(np.intp)
    u, v = row - i, column - j
    below, right = i + (u > 0), j + (v > 0)
    upper = values[i, j] * (1 - v) + values[i, right] * v
    lower = values[below, j] * (1 - v) + values[below, right] * v
    return np.where(inside, upper * (1 - u) + lower * u, np.nan)


def footprint(source: RasterSource, crs: CRS, grid_crs: CRS, *, points: int = 64) -> shapely.Polygon:
    """The ground that a raster covers, as a polygon in another CRS: the rectangle of its sample centres.

    Raises:
        GroundError: the rectangle cannot be expressed in the other CRS.
    """
    import shapely

    info = source.info
    west, south, east, north = info.bounds
    half_east, half_north = info.cell_east / 2, info.cell_north / 2
    west, east, south, north = west + half_east, east - half_east, south + half_north, north - half_north
    along = np.linspace(0.0, 1.0, points)[:-1]
    ring_east = np.concatenate([west + (east - west) * along, np.full(points - 1, east)])
    ring_east = np.concatenate([ring_east, east - (east - west) * along, np.full(points - 1, west)])
    ring_north = np.concatenate([np.full(points - 1, south), south + (north - south) * along])
    ring_north = np.concatenate([ring_north, np.full(points - 1, north), north - (north - south) * along])
    xs, ys = transformer(crs, grid_crs).transform(ring_east, ring_north)
    polygon = shapely.Polygon(np.column_stack([xs, ys])) if np.isfinite(xs).all() and np.isfinite(ys).all() else None
    if polygon is None or polygon.is_empty or not polygon.is_valid:
        raise GroundError(
            f"{source.what}: {info.name}: its extent cannot be expressed in the CRS of the grid; cut it to "
            "the site first"
        )
    return polygon
