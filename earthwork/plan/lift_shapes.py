"""Lifts in plan, from the overview of a tally: where each lies, and how wide it is at its widest."""

from __future__ import annotations

import numpy as np

from earthwork.plan.fill_areas import Bench, FillArea
from earthwork.quantities.lift_tally import LiftTally


class LiftShapes:
    """The overview of removal bottom and subgrade under fill, cut up by fill area and lift."""

    def __init__(self, tally: LiftTally) -> None:
        self.coarse = tally.coarse
        self.overview = tally.overview
        grid = tally.stack.grid
        self.cell_m = self.coarse.fine * min(grid.cell_east_m, grid.cell_north_m)
        self._windows: dict[str, tuple[slice, slice, np.ndarray]] = {}

    def window(self, area: FillArea) -> tuple[slice, slice, np.ndarray]:
        """Rows and columns of the overview that an area lies in, and which cells of them are its own."""
        if area.name not in self._windows:
            ratio = self.coarse.side // self.coarse.fine
            rows, columns = np.flatnonzero(area.cells.any(axis=1)), np.flatnonzero(area.cells.any(axis=0))
            height, width = self.overview.shape[:2]
            r = slice(int(rows[0]) * ratio, min((int(rows[-1]) + 1) * ratio, height))
            c = slice(int(columns[0]) * ratio, min((int(columns[-1]) + 1) * ratio, width))
            own = area.cells[np.ix_(np.arange(r.start, r.stop) // ratio, np.arange(c.start, c.stop) // ratio)]
            self._windows[area.name] = (r, c, own)
        return self._windows[area.name]

    def mask(self, area: FillArea, bench: Bench) -> np.ndarray:
        """Cells of the area's window in which a lift has any thickness."""
        rows, columns, own = self.window(area)
        bottom, top = self.overview[rows, columns, 0], self.overview[rows, columns, 1]
        lowest = bench is area.benches[0]
        return own & (bottom < bench.top_m) & ((top > bench.bottom_m) | lowest)

    def widest_m(self, area: FillArea, bench: Bench) -> float:
        """Diameter of the largest circle in a lift [m], to a cell of the overview."""
        return widest_cells(self.mask(area, bench)) * self.cell_m


def widest_cells(mask: np.ndarray) -> float:
    """Diameter of the largest circle about a middle or a corner of cells that lies in a shape of cells [cells].

    A strip of an odd number of cells is widest about middles, one of an even number about corners.

    >>> [widest_cells(np.ones((k, 20), bool)) for k in (1, 2, 3, 10)]
    [1.0, 2.0, 3.0, 10.0]
    """
    from scipy import ndimage

    cells = np.pad(mask, 1)
    if not cells.any():
        return 0.0
    corners = cells[:-1, :-1] & cells[1:, :-1] & cells[:-1, 1:] & cells[1:, 1:]
    about_middles = 2.0 * ndimage.distance_transform_edt(cells).max() - 1.0
    about_corners = 2.0 * ndimage.distance_transform_edt(corners).max() if corners.any() else 0.0
    return float(max(about_middles, about_corners))
