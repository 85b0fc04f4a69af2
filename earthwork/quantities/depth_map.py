"""A picture of the depths: their means on cells coarse enough to be drawn, gathered in the one pass."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from earthwork.ground.grid import Grid, Window
from earthwork.quantities.tile import Tile

#: Longest side of a picture [cells]: about as many as it has dots.
LONGEST_SIDE = 1100


@dataclass(frozen=True)
class DepthMap:
    """Mean depth (subgrade − stripped, + fill) of the cells of a coarse grid [m], NaN where nothing counts."""

    depth: np.ndarray
    grid: Grid


def coarse_grid(grid: Grid, longest_side: int = LONGEST_SIDE) -> tuple[Grid, int]:
    """A grid of whole cells joined, no side longer than asked, and how many cells are joined along each side.

    >>> coarse_grid(Grid(4000, 3100, 0, 0, 1, 1))[0].rows, coarse_grid(Grid(4000, 3100, 0, 0, 1, 1))[1]
    (1000, 4)
    """
    joined = max(1, -(-max(grid.rows, grid.columns) // longest_side))
    coarse = replace(
        grid,
        rows=-(-grid.rows // joined),
        columns=-(-grid.columns // joined),
        cell_east=grid.cell_east * joined,
        cell_north=grid.cell_north * joined,
    )
    return coarse, joined


class DepthMapTally:
    """Gathers a :class:`DepthMap`. It learns its grid from the first tile; :attr:`map` is ready after the walk."""

    depth_only = True  #: engine: the surfaces themselves are not asked for

    def __init__(self, longest_side: int = LONGEST_SIDE) -> None:
        self.longest_side = longest_side
        self.grid: Grid | None = None
        self._bands: list[tuple[int, np.ndarray]] = []  #: first coarse row; sums of depth and weight, (2, rows, columns)

    def empty(self) -> DepthMapTally:
        return DepthMapTally(self.longest_side)

    def add(self, tile: Tile) -> None:
        self.grid = tile.grid
        depth = tile.depth[1:-1, 1:-1]
        # single precision is more than a picture shows
        weight = np.isfinite(depth).astype(np.float32)
        if tile.weight is not None:
            weight *= tile.weight.astype(np.float32)
        sums = np.zeros((2, *depth.shape), np.float32)
        np.multiply(depth, weight, out=sums[0], where=weight > 0, casting="same_kind")
        sums[1] = weight
        coarse, joined = coarse_grid(tile.grid, self.longest_side)
        row, column, part = _joined(sums, tile.window, joined)
        if not self._bands or self._bands[-1][0] != row or self._bands[-1][1].shape[1] != part.shape[1]:
            self._bands.append((row, np.zeros((2, part.shape[1], coarse.columns), np.float32)))
        self._bands[-1][1][:, :, column : column + part.shape[2]] += part

    def merge(self, other: DepthMapTally) -> None:
        self.grid = self.grid or other.grid
        self._bands += other._bands

    @property
    def map(self) -> DepthMap | None:
        """The depths; None when no tile was seen."""
        if self.grid is None:
            return None
        coarse, _ = coarse_grid(self.grid, self.longest_side)
        sums = np.zeros((2, coarse.rows, coarse.columns), np.float32)
        for row, band in self._bands:
            sums[:, row : row + band.shape[1]] += band
        with np.errstate(invalid="ignore"):
            return DepthMap(np.where(sums[1] > 0, sums[0] / sums[1], np.nan), coarse)


def _joined(sums: np.ndarray, window: Window, joined: int) -> tuple[int, int, np.ndarray]:
    """Sums over the coarse cells that a window touches: (first coarse row, first coarse column, sums)."""
    rows = np.arange(window.row, window.row + window.height) // joined
    columns = np.arange(window.column, window.column + window.width) // joined
    row_starts = np.flatnonzero(np.diff(rows, prepend=-1))
    column_starts = np.flatnonzero(np.diff(columns, prepend=-1))
    part = np.add.reduceat(np.add.reduceat(sums, row_starts, axis=1), column_starts, axis=2)
    return int(rows[0]), int(columns[0]), part
