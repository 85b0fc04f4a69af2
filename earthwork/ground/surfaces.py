"""Surfaces: anything that gives elevations on a window of a grid."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Protocol, runtime_checkable

import numpy as np

from earthwork.errors import GroundError
from earthwork.files.rasters import RasterInfo, RasterSource
from earthwork.ground.grid import Grid, Window
from earthwork.ground.resample import Taps, apply_taps, axis_taps, worth_compiling

if TYPE_CHECKING:
    from earthwork.ground.meet import SurfaceSet
    from earthwork.site.load import Site

#: A raster is read as it is when none of its cells lies further than this from the grid's [cells].
ALIGNED_WITHIN = 1e-3

#: Source cells read at once when many of them make one cell of the grid [cells].
_READ_AT_ONCE = 4_000_000


#: Cells of the grid along a block of a file that is resampled: one of a coarse file would be wider than memory.
_WIDEST_BLOCK = 1024

#: What surfaces give that are computed, not read as they are.
FLOAT64 = np.dtype(np.float64)


@runtime_checkable
class SurfaceReader(Protocol):
    """One thread's way to a surface: it holds its own file handles, and is used by that thread alone."""

    def read(self, window: Window) -> np.ndarray:
        """Elevations [m] of the cells of a window, shape (height, width), float32 or float64; NaN = no data.

        The window lies inside the grid. The array belongs to the caller, who may write into it.
        """

    def close(self) -> None: ...


class Surface(Protocol):
    """Elevations on one grid. A constant or a plane has no extent of its own: it is known everywhere."""

    @property
    def dtype(self) -> np.dtype:
        """float32 or float64, of what the readers give."""

    @property
    def block(self) -> tuple[int, int] | None:
        """(rows, columns) of the grid that the file decodes at once; None where it does not matter."""

    @property
    def block_start(self) -> tuple[int, int]:
        """(row, column) of the grid where a block begins; others follow at every ``block``."""

    @property
    def resampling(self) -> str:
        """How it came onto the grid: "none", "bilinear", "average", "nodes", or "exact" without a file."""

    def reader(self) -> SurfaceReader: ...


def open_ground(site: Site) -> SurfaceSet:
    """The surfaces of a site on one grid; see :func:`earthwork.ground.meet.open_ground`."""
    from earthwork.ground.meet import open_ground as meet

    return meet(site)


# --- without a file
# ------------------------------------------------------------------------------------------------


@dataclass(frozen=True)
class LevelGround:
    """One elevation everywhere [m]."""

    elevation_m: float
    dtype: np.dtype = FLOAT64
    block: tuple[int, int] | None = None
    block_start: tuple[int, int] = (0, 0)
    resampling: str = "exact"

    def reader(self) -> LevelGround:
        return self

    def read(self, window: Window) -> np.ndarray:
        """The level in each cell.

        >>> LevelGround(102.5).read(Window(0, 0, 1, 2))
        array([[102.5, 102.5]])
        """
        return np.full((window.height, window.width), self.elevation_m)

    def close(self) -> None:
        """Nothing is held."""


@dataclass(frozen=True)
class PlaneGround:
    """A tilted plane: its elevation at the centre of each cell, which is also its mean over the cell.

    Args:
        grid: the grid that it is read on.
        at: (easting, northing) of a point of the plane [CRS unit].
        elevation_m: its elevation [m].
        slope: rise per unit east and per unit north, on the ground.
    """

    grid: Grid
    at: tuple[float, float]
    elevation_m: float
    slope: tuple[float, float]
    dtype: np.dtype = FLOAT64
    block: tuple[int, int] | None = None
    block_start: tuple[int, int] = (0, 0)
    resampling: str = "exact"

    def reader(self) -> PlaneGround:
        return self

    def read(self, window: Window) -> np.ndarray:
        """Elevations at the centres.

        >>> grid = Grid(1, 2, 0.0, 1.0, 1.0, 1.0)
        >>> PlaneGround(grid, (0.0, 0.0), 10.0, (0.5, 0.0)).read(Window(0, 0, 1, 2))
        array([[10.25, 10.75]])
        """
        row, column = self.grid.cell(*self.at)
        east = (np.arange(window.column, window.column + window.width) + 0.5 - column) * self.grid.cell_east_m
        north = (row - np.arange(window.row, window.row + window.height) - 0.5) * self.grid.cell_north_m
        return (self.elevation_m + self.slope[1] * north)[:, None] + (self.slope[0] * east)[None, :]

    def close(self) -> None:
        """Nothing is held."""


# --- rasters
# ---------------------------------------------------------------------------------------------------------


@dataclass(frozen=True)
class AlignedRaster:
    """A raster whose cells are the grid's: read as it is, never resampled.

    Args:
        source: the file.
        row, column: row and column of the file (north up) at the grid's (0, 0); negative where the grid begins first.
    """

    source: RasterSource
    row: int
    column: int
    resampling: str = "none"

    @property
    def dtype(self) -> np.dtype:
        return self.source.dtype

    @property
    def block(self) -> tuple[int, int] | None:
        return self.source.info.block

    @property
    def block_start(self) -> tuple[int, int]:
        return _block_start(self.source.info, self.row, self.column)

    def reader(self) -> AlignedReader:
        return AlignedReader(self)


class AlignedReader:
    """One thread's way to an aligned raster."""

    def __init__(self, surface: AlignedRaster) -> None:
        self.dtype = surface.dtype
        self._surface = surface
        self._file = surface.source.reader()

    def read(self, window: Window, out: np.ndarray | None = None) -> np.ndarray:
        """Elevations of a window, into ``out`` where that is given."""
        info = self._surface.source.info
        row, column = window.row + self._surface.row, window.column + self._surface.column
        values = np.empty((window.height, window.width), self._surface.dtype) if out is None else out
        if row >= 0 and column >= 0 and row + window.height <= info.rows and column + window.width <= info.columns:
            return self._file.read(row, column, window.height, window.width, out=values)
        values[...] = np.nan
        top, left = max(row, 0), max(column, 0)
        bottom, right = min(row + window.height, info.rows), min(column + window.width, info.columns)
        if bottom > top and right > left:
            inside = np.s_[top - row : bottom - row, left - column : right - column]
            self._file.read(top, left, bottom - top, right - left, out=values[inside])
        return values

    def close(self) -> None:
        self._file.close()


@dataclass(frozen=True)
class ResampledRaster:
    """A north-up raster in the grid's CRS brought onto its cells by weights along each axis."""

    source: RasterSource
    north: Taps
    east: Taps
    resampling: str
    block: tuple[int, int] | None
    block_start: tuple[int, int] = (0, 0)
    compiled: bool = False
    dtype: np.dtype = FLOAT64

    def reader(self) -> _ResampledReader:
        return _ResampledReader(self)


class _ResampledReader:
    def __init__(self, surface: ResampledRaster) -> None:
        self._surface = surface
        self._file = surface.source.reader()

    def read(self, window: Window) -> np.ndarray:
        values = np.full((window.height, window.width), np.nan)
        north = self._surface.north.part(window.row, window.row + window.height)
        east = self._surface.east.part(window.column, window.column + window.width)
        if len(north) and len(east):
            self._fill(values[north.first : north.stop, east.first : east.stop], north, east)
        return values

    def _fill(self, out: np.ndarray, north: Taps, east: Taps) -> None:
        """Write the cells of two runs of taps into ``out``; in halves when they take too many samples."""
        (top, bottom), (left, right) = north.reach, east.reach
        high, wide = len(north), len(east)
        if (bottom - top) * (right - left) > _READ_AT_ONCE and (high > 1 or wide > 1):
            if high > 1:
                for start, stop in ((0, high // 2), (high // 2, high)):
                    part = north.part(north.first + start, north.first + stop)
                    self._fill(out[start:stop], part, east)
            else:
                for start, stop in ((0, wide // 2), (wide // 2, wide)):
                    part = east.part(east.first + start, east.first + stop)
                    self._fill(out[:, start:stop], north, part)
            return
        values = self._file.read(top, left, bottom - top, right - left)
        out[...] = apply_taps(values, north.less(top), east.less(left), compiled=self._surface.compiled)

    def close(self) -> None:
        self._file.close()


def raster_on_grid(source: RasterSource, grid: Grid, *, nodes: bool = False) -> AlignedRaster | ResampledRaster:
    """A raster in the grid's CRS as a surface on the grid: as it is where the cells agree, else resampled.

    Args:
        source: the file.
        grid: in the same CRS.
        nodes: the raster's values are points of the ground (else each stands for its cell).

    Raises:
        GroundError: rotated, sheared, or without a place.
    """
    info = source.info
    require_north_up(info, source.what)
    offset = aligned_offset(info, grid)
    if offset is not None and not nodes:
        return AlignedRaster(source, *offset)
    north, east = raster_taps(info, grid, nodes=nodes)
    averaged = north.averaged or east.averaged
    resampling = "average" if averaged else "nodes" if nodes else "bilinear"
    start_row = (grid.north - info.north) / info.cell_north
    start_column = (grid.west - info.west) / info.cell_east
    ratio = (grid.cell_north / info.cell_north, grid.cell_east / info.cell_east)
    high, wide = (min(max(round(size / r), 1), _WIDEST_BLOCK) for size, r in zip(info.block, ratio, strict=True))
    block = (high, wide)
    first = _block_start(info, round(start_row), round(start_column))
    block_start = (round(first[0] / ratio[0]) % block[0], round(first[1] / ratio[1]) % block[1])
    compiled = worth_compiling(grid.rows * grid.columns)
    return ResampledRaster(source, north, east, resampling, block, block_start, compiled)


def raster_taps(info: RasterInfo, grid: Grid, *, nodes: bool = False) -> tuple[Taps, Taps]:
    """Taps along north and east that bring a north-up raster of the grid's CRS onto the grid."""
    north = axis_taps(-info.north, info.cell_north, info.rows, -grid.north, grid.cell_north, grid.rows, nodes=nodes)
    east = axis_taps(info.west, info.cell_east, info.columns, grid.west, grid.cell_east, grid.columns, nodes=nodes)
    return north, east


def aligned_offset(info: RasterInfo, grid: Grid) -> tuple[int, int] | None:
    """(row, column) of the raster at the grid's (0, 0) when its cells are the grid's, else None."""
    shifts = []
    for start, mine, theirs, cells in (
        ((info.north - grid.north) / grid.cell_north, info.cell_north, grid.cell_north, grid.rows),
        ((grid.west - info.west) / grid.cell_east, info.cell_east, grid.cell_east, grid.columns),
    ):
        # the place of the first and the last edge of the grid, in cells of the file
        first = start * theirs / mine
        last = first + cells * theirs / mine
        shift = round(first)
        if abs(first - shift) > ALIGNED_WITHIN or abs(last - shift - cells) > ALIGNED_WITHIN:
            return None
        shifts.append(shift)
    return shifts[0], shifts[1]


def require_north_up(info: RasterInfo, what: str) -> None:
    """Raise a GroundError for a raster that is rotated or sheared, or that lies nowhere."""
    if info.rotated:
        a, b, _, d, e, _ = info.transform
        raise GroundError(
            f"{what}: {info.name}: its grid is rotated or sheared (one column is {a:g} east and {d:g} north, one row "
            f"{b:g} east and {e:g} north); rows must run east. Resample it to a north-up grid first: gdalwarp -r "
            "bilinear in.tif out.tif"
        )
    if not info.placed:
        raise GroundError(
            f"{what}: {info.name}: it carries no georeference; where it lies and how large its cells are must be "
            "known. Add them, for example with a world file"
        )


def _block_start(info: RasterInfo, row: int, column: int) -> tuple[int, int]:
    """(row, column) where a block begins, of a grid that begins at a row and column of the file."""
    high, wide = info.block
    first_row = info.rows % high if info.south_up else 0
    first_column = info.columns % wide if info.east_first else 0
    return (first_row - row) % high, (first_column - column) % wide


__all__ = [
    "AlignedRaster",
    "LevelGround",
    "PlaneGround",
    "ResampledRaster",
    "Surface",
    "SurfaceReader",
    "aligned_offset",
    "open_ground",
    "raster_on_grid",
    "require_north_up",
]
