"""A picture of the depths: their means on cells coarse enough to be drawn, gathered in the one pass."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from earthwork.ground.grid import Grid, Window
from earthwork.quantities.tile import Tile

#: Longest side of a picture [cells].
LONGEST_SIDE = 1500


@dataclass(frozen=True)
class DepthMap:
    """Mean depth (subgrade − stripped, + fill) of the cells of a coarse grid [m], NaN where nothing counts."""

    depth: np.ndarray
    grid: Grid


def coarse_grid(grid: Grid, longest_side: int = LONGEST_SIDE) -> tuple[Grid, int]:
    """A grid of whole cells joined, no side longer than asked, and how many cells are joined along each side.

    >>> coarse_grid(Grid(4000, 3100, 0, 0, 1, 1))[0].rows, coarse_grid(Grid(4000, 3100, 0, 0, 1, 1))[1]
    (1334, 3)
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

    def __init__(self, longest_side: int = LONGEST_SIDE) -> None:
        self.longest_side = longest_side
        self.grid: Grid | None = None
        self._parts: list[tuple[int, int, np.ndarray]] = []

    def empty(self) -> DepthMapTally:
        return DepthMapTally(self.longest_side)

    def add(self, tile: Tile) -> None:
        self.grid = tile.grid
        depth = tile.depth[1:-1, 1:-1]
        weight = np.isfinite(depth).astype(np.float64)
        if tile.weight is not None:
            weight *= tile.weight
        _, joined = coarse_grid(tile.grid, self.longest_side)
        sums = np.stack([np.where(weight > 0, depth, 0.0) * weight, weight])
        self._parts.append(_joined(sums, tile.window, joined))

    def merge(self, other: DepthMapTally) -> None:
        self.grid = self.grid or other.grid
        self._parts += other._parts

    @property
    def map(self) -> DepthMap | None:
        """The depths; None when no tile was seen."""
        if self.grid is None:
            return None
        coarse, _ = coarse_grid(self.grid, self.longest_side)
        sums = np.zeros((2, coarse.rows, coarse.columns))
        for row, column, part in self._parts:
            sums[:, row : row + part.shape[1], column : column + part.shape[2]] += part
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
