"""A tile: a window of the grid with all surfaces, and what follows from them cell by cell."""

from __future__ import annotations

from functools import cached_property

import numpy as np

from earthwork.ground.grid import Window
from earthwork.ground.stack import DISTURBED_OVER_M, Arrays, Stack
from earthwork.quantities.by_stratum import by_stratum
from earthwork.quantities.split import split


class Tile:
    """Cells of one window, each counted once in a walk.

    Args:
        stack: the site's surfaces and layers.
        window: the cells of the tile.
        arrays: fields with a one-cell rim, each (height + 2, width + 2); NaN outside the grid.
        seam: it lies on the edge of two bands, whose tiles have its rows in their rims.
    """

    def __init__(self, stack: Stack, window: Window, arrays: Arrays, *, seam: bool = False) -> None:
        self.stack = stack
        self.grid = stack.grid
        self.window = window
        self.arrays = arrays
        self.seam = seam
        self.extras: dict[str, np.ndarray] | None = None  #: set by :func:`earthwork.quantities.fields.extra_fields`

    def core(self, name: str) -> np.ndarray:
        """A field without its rim, shape (height, width)."""
        return self.arrays[name][1:-1, 1:-1]

    def rows_read(self) -> tuple[Window, Arrays]:
        """The window with the rows of the seams beside it, and its fields without a rim: a band has all its rows so."""
        window = self.window
        top, bottom = max(window.row - 1, 0), min(window.row + window.height + 1, self.grid.rows)
        rows = slice(top - window.row + 1, bottom - window.row + 1)
        whole = Window(top, window.column, bottom - top, window.width)
        return whole, {name: a[rows, 1:-1] for name, a in self.arrays.items()}

    @property
    def existing(self) -> np.ndarray:
        """Existing ground [m], (height, width)."""
        return self.core("existing")

    @property
    def stripped(self) -> np.ndarray:
        """Stripped ground [m], (height, width)."""
        return self.stack.stripped(self.arrays)[1:-1, 1:-1]

    @property
    def subgrade(self) -> np.ndarray:
        """Subgrade [m], (height, width)."""
        return self.stack.subgrade(self.arrays)[1:-1, 1:-1]

    @property
    def finished(self) -> np.ndarray:
        """Finished ground [m], (height, width)."""
        return self.core("finished")

    @cached_property
    def removal_bottom(self) -> np.ndarray:
        """What the fill rests on [m], (height, width)."""
        return self.stack.removal_bottom({name: a[1:-1, 1:-1] for name, a in self.arrays.items()})

    @property
    def depth(self) -> np.ndarray:
        """Subgrade − stripped [m], + fill, with a one-cell rim: (height + 2, width + 2)."""
        return self.arrays["depth"]

    @cached_property
    def weight(self) -> np.ndarray | None:
        """Share of each cell inside the limits, (height, width); None where all of the tile counts."""
        if self.stack.limits is None:
            return None
        share = self.stack.coverage(self.stack.limits, self.window)
        return None if share.min() >= 1.0 else share

    @cached_property
    def depth_sums(self) -> tuple[np.ndarray, float, float]:
        """Sums of the split cells, (8,) as of :func:`earthwork.quantities.split.split`, greatest and least depth [m]."""
        return self._split(np.empty((4, 0, 0)))

    def _split(self, cells: np.ndarray) -> tuple[np.ndarray, float, float]:
        sums = np.zeros(8)
        return (sums, *split(self.depth, cells, sums))

    @cached_property
    def cells(self) -> np.ndarray:
        """Cut, fill [mean m over the cell], cut share, fill share: (4, height, width), 0 where no data."""
        cells = np.empty((4, self.window.height, self.window.width))
        self.depth_sums = self._split(cells)
        return cells

    @property
    def cut(self) -> np.ndarray:
        """Cut, mean over each cell [m], (height, width)."""
        return self.cells[0]

    @property
    def fill(self) -> np.ndarray:
        """Fill, mean over each cell [m], (height, width)."""
        return self.cells[1]

    @property
    def refill(self) -> np.ndarray:
        """Over-excavation [m], (height, width): dug under the lower of stripped ground and subgrade, and refilled."""
        if not self.stack.excavations:
            return np.zeros((self.window.height, self.window.width))
        return np.minimum(self.stripped, self.subgrade) - self.removal_bottom

    @property
    def plainly_disturbed(self) -> bool:
        """Whether a cell is disturbed just where its depth is over DISTURBED_OVER_M, as :attr:`depth_sums` counts it."""
        return "disturbed" not in self.arrays and self.stack.disturbed is None

    @cached_property
    def disturbed(self) -> np.ndarray:
        """Share of each cell that is disturbed, (height, width)."""
        if "disturbed" in self.arrays:
            return self.core("disturbed")
        if self.stack.disturbed is not None:
            return self.stack.coverage(self.stack.disturbed, self.window)
        return (np.abs(self.depth[1:-1, 1:-1]) > DISTURBED_OVER_M).astype(np.float64)

    def part(self, row: int, column: int, height: int, width: int) -> Tile:
        """A part of the tile, with its own rim, of its own memory; row and column count from the tile's first cell."""
        window = Window(self.window.row + row, self.window.column + column, height, width)
        rows, columns = slice(row, row + height + 2), slice(column, column + width + 2)
        return Tile(self.stack, window, {name: a[rows, columns].copy() for name, a in self.arrays.items()})

    def shifted(self, shift_m: float, room: Arrays | None = None) -> Tile:
        """The same tile with its grade raised where it may move; see :meth:`earthwork.ground.stack.Stack.shifted`."""
        tile = Tile(self.stack, self.window, self.stack.shifted(self.arrays, shift_m, room))
        tile.stratum_bottoms = self.stratum_bottoms
        return tile

    @cached_property
    def stratum_bottoms(self) -> np.ndarray:
        """Bottoms of all strata but the last [m], (strata − 1, height, width)."""
        count = max(len(self.stack.strata) - 1, 0)
        bottoms = np.empty((count, self.window.height, self.window.width))
        for i in range(count):
            bottoms[i] = self.core(f"stratum{i}")
        return bottoms

    @cached_property
    def cut_by_stratum(self) -> np.ndarray:
        """Cut of each stratum, mean over the cell [m], (strata, height, width); they add up to the cut."""
        lower = np.minimum(self.stripped, self.subgrade)
        return by_stratum(self.stratum_bottoms, self.stripped, lower, self.cut)

    @cached_property
    def excavated_by_stratum(self) -> np.ndarray:
        """Over-excavation of each stratum, mean over the cell [m], (strata, height, width)."""
        lower = np.minimum(self.stripped, self.subgrade)
        return by_stratum(self.stratum_bottoms, lower, self.removal_bottom, np.nan_to_num(self.refill))

    @cached_property
    def stratum_at_bottom(self) -> np.ndarray:
        """Index of the stratum at the removal bottom, (height, width)."""
        return (self.removal_bottom < self.stratum_bottoms).sum(axis=0)
