"""The cells of deepest fill and deepest cut with all their surfaces: what a reader can check by hand."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from earthwork.ground.stack import Stack
from earthwork.quantities.tile import Tile


@dataclass(frozen=True)
class ProbedCell:
    """One whole cell; elevations and depths [m], coordinates in CRS units at its centre."""

    row: int
    column: int
    easting: float
    northing: float
    existing_m: float
    strip_m: float
    stripped_m: float
    finished_m: float
    section_m: float
    subgrade_m: float
    removal_bottom_m: float
    depth_m: float
    cut_m: float
    fill_m: float

    @property
    def thickness_m(self) -> float:
        """Subgrade − removal bottom: fill and the over-excavation refill under it."""
        return self.subgrade_m - self.removal_bottom_m


class CellProbe:
    """Finds the cells of deepest fill (:attr:`fill`) and deepest cut (:attr:`cut`) that lie whole inside the limits."""

    def __init__(self, stack: Stack) -> None:
        self.stack = stack
        self.fill: ProbedCell | None = None
        self.cut: ProbedCell | None = None

    def empty(self) -> CellProbe:
        return CellProbe(self.stack)

    def add(self, tile: Tile) -> None:
        depth = np.array(tile.depth[1:-1, 1:-1], dtype=np.float64)
        whole = np.isfinite(depth)
        if tile.weight is not None:
            whole &= tile.weight >= 1.0
        if not whole.any():
            return
        depth[~whole] = 0.0
        self._take(_probe(tile, int(depth.argmax())))
        self._take(_probe(tile, int(depth.argmin())))

    def merge(self, other: CellProbe) -> None:
        for cell in (other.fill, other.cut):
            if cell is not None:
                self._take(cell)

    def _take(self, cell: ProbedCell) -> None:
        if cell.depth_m > (self.fill.depth_m if self.fill else 0.0):
            self.fill = cell
        if cell.depth_m < (self.cut.depth_m if self.cut else 0.0):
            self.cut = cell


def _probe(tile: Tile, flat: int) -> ProbedCell:
    i, j = divmod(flat, tile.window.width)
    row, column = tile.window.row + i, tile.window.column + j
    easting, northing = tile.grid.point(row + 0.5, column + 0.5)
    existing, stripped, subgrade, finished = (
        float(a[i, j]) for a in (tile.existing, tile.stripped, tile.subgrade, tile.finished)
    )
    return ProbedCell(
        row=row,
        column=column,
        easting=easting,
        northing=northing,
        existing_m=existing,
        strip_m=existing - stripped,
        stripped_m=stripped,
        finished_m=finished,
        section_m=finished - subgrade,
        subgrade_m=subgrade,
        removal_bottom_m=float(tile.removal_bottom[i, j]),
        depth_m=float(tile.depth[i + 1, j + 1]),
        cut_m=float(tile.cut[i, j]),
        fill_m=float(tile.fill[i, j]),
    )
