"""Overviews of all surfaces for pages, models and exchange files: a bounded number of cells, from the same pass."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from earthwork.ground.grid import Grid
from earthwork.ground.stack import Stack
from earthwork.quantities.tile import Tile

#: Cells of an overview at most: what a page can carry and a screen can show.
MOST_CELLS = 1_000_000
_FIELDS = ("existing", "stripped", "removal_bottom", "subgrade", "finished")


@dataclass(frozen=True)
class SurfaceMap:
    """Mean elevations [m] of all surfaces on blocks of ``every`` × ``every`` cells; NaN = no data or outside.

    Attributes:
        grid: of the overview; its last row and column may reach beyond the site's grid.
        every: cells of the site's grid along a block.
        existing, stripped, removal_bottom, subgrade, finished: (rows, columns) [m].
        stratum: (rows, columns) index of the stratum found at the lower of stripped ground and subgrade, −1 = no data.
        materials: names by stratum.
    """

    grid: Grid
    every: int
    existing: np.ndarray
    stripped: np.ndarray
    removal_bottom: np.ndarray
    subgrade: np.ndarray
    finished: np.ndarray
    stratum: np.ndarray
    materials: tuple[str, ...]

    @property
    def depth(self) -> np.ndarray:
        """Subgrade − stripped [m]: + fill, − cut."""
        return self.subgrade - self.stripped

    @property
    def fill_thickness(self) -> np.ndarray:
        """Subgrade − removal bottom [m]: fill with the over-excavation refill under it."""
        return self.subgrade - self.removal_bottom


def overview_grid(grid: Grid, most_cells: int = MOST_CELLS) -> tuple[Grid, int]:
    """The grid of an overview of at most so many cells, and how many cells of the site's grid make one of its sides.

    >>> small, every = overview_grid(Grid(4000, 4000, 0.0, 4000.0, 1.0, 1.0), 1_000_000)
    >>> small.rows, small.cell_east, every
    (1000, 4.0, 4)
    """
    every = max(1, math.ceil(math.sqrt(grid.rows * grid.columns / most_cells) - 1e-9))
    while -(-grid.rows // every) * -(-grid.columns // every) > most_cells:
        every += 1
    small = Grid(
        rows=-(-grid.rows // every),
        columns=-(-grid.columns // every),
        west=grid.west,
        north=grid.north,
        cell_east=grid.cell_east * every,
        cell_north=grid.cell_north * every,
        unit_m=grid.unit_m,
        ground_scale=grid.ground_scale,
        crs=grid.crs,
    )
    return small, every


class SurfaceMapTally:
    """Gathers a :class:`SurfaceMap`; a cell counts by its share inside the limits."""

    def __init__(self, stack: Stack, most_cells: int = MOST_CELLS) -> None:
        self.stack = stack
        self.most_cells = most_cells
        self.grid, self.every = overview_grid(stack.grid, most_cells)
        # overview row → (fields + weight, columns), and the strata seen nearest to the middle of each block
        self._rows: dict[int, np.ndarray] = {}
        self._strata: dict[int, np.ndarray] = {}

    def empty(self) -> SurfaceMapTally:
        return SurfaceMapTally(self.stack, self.most_cells)

    def add(self, tile: Tile) -> None:
        window, every = tile.window, self.every
        depth = tile.depth[1:-1, 1:-1]
        weight = np.isfinite(depth).astype(np.float64)
        if tile.weight is not None:
            weight *= tile.weight
        if not weight.any():
            return
        fields = np.stack([tile.existing, tile.stripped, tile.removal_bottom, tile.subgrade, tile.finished])
        values = np.where(weight > 0, fields * weight, 0.0)
        values = np.concatenate([values, weight[None]])
        rows = np.arange(window.row, window.row + window.height) // every
        columns = np.arange(window.column, window.column + window.width) // every
        starts = np.flatnonzero(np.diff(columns, prepend=-1))
        across = np.add.reduceat(values, starts, axis=2) if every > 1 else values
        left, right = int(columns[0]), int(columns[-1]) + 1
        stratum = self._stratum(tile, weight)
        for row in np.unique(rows):
            of = rows == row
            total = self._rows.setdefault(int(row), np.zeros((len(_FIELDS) + 1, self.grid.columns)))
            total[:, left:right] += across[:, of].sum(axis=1)
            self._note_strata(int(row), stratum[of], columns)

    def _stratum(self, tile: Tile, weight: np.ndarray) -> np.ndarray:
        """Index of the stratum in the cut face or under the fill, −1 where nothing counts."""
        bottoms = tile.stratum_bottoms
        lower = np.minimum(tile.stripped, tile.subgrade)
        found = (lower[None] < bottoms).sum(axis=0) if len(bottoms) else np.zeros(lower.shape, dtype=int)
        return np.where(weight > 0, found, -1)

    def _note_strata(self, row: int, stratum: np.ndarray, columns: np.ndarray) -> None:
        """Each block shows the greatest index seen in it: the deepest ground that comes to light."""
        seen = self._strata.setdefault(row, np.full(self.grid.columns, -1))
        np.maximum.at(seen, columns, stratum.max(axis=0))

    def merge(self, other: SurfaceMapTally) -> None:
        for row, values in other._rows.items():
            if row in self._rows:
                self._rows[row] += values
                np.maximum(self._strata[row], other._strata[row], out=self._strata[row])
            else:
                self._rows[row], self._strata[row] = values, other._strata[row]

    @property
    def map(self) -> SurfaceMap:
        """What was gathered."""
        shape = (self.grid.rows, self.grid.columns)
        means = np.full((len(_FIELDS), *shape), np.nan)
        stratum = np.full(shape, -1)
        for row, values in self._rows.items():
            weight = values[-1]
            counted = weight > 0
            means[:, row, counted] = values[:-1, counted] / weight[counted]
            stratum[row] = self._strata[row]
        materials = tuple(layer.material for layer in self.stack.strata)
        surfaces = dict(zip(_FIELDS, means, strict=True))
        return SurfaceMap(self.grid, self.every, **surfaces, stratum=stratum, materials=materials)
