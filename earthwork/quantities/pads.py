"""Thickness of fill under pads: a tally over their footprints, by the share of each cell inside."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np

from earthwork.ground.areas import Rings
from earthwork.ground.grid import Grid
from earthwork.quantities.coverage import polygon_share, touching
from earthwork.quantities.tile import Tile

#: Cells of all footprints together that are kept one by one; above that, blocks of cells are.
KEPT_CELLS = 4_000_000

#: A cell belongs to a footprint when at least this share of it lies inside.
_MOST = 0.5 - 1e-9


@dataclass
class PadSums:
    """Sums over one footprint, in cells and cell·m, and extremes [m]."""

    area: float = 0.0  #: with data
    missing: float = 0.0
    cut_area: float = 0.0
    fill_area: float = 0.0
    thickness: float = 0.0
    max_cut: float = 0.0
    max_thickness: float = -np.inf
    min_thickness: float = np.inf
    strata: dict[int, float] = field(default_factory=dict)  #: area by index of the stratum at the removal bottom

    def merge(self, other: PadSums) -> None:
        for name in ("area", "missing", "cut_area", "fill_area", "thickness"):
            setattr(self, name, getattr(self, name) + getattr(other, name))
        self.max_cut = max(self.max_cut, other.max_cut)
        self.max_thickness = max(self.max_thickness, other.max_thickness)
        self.min_thickness = min(self.min_thickness, other.min_thickness)
        for index, area in other.strata.items():
            self.strata[index] = self.strata.get(index, 0.0) + area


@dataclass(frozen=True)
class _Piece:
    """Part of the field of one footprint; row and column count blocks of the grid."""

    row: int
    column: int
    share: np.ndarray
    thickness: np.ndarray  #: × share
    before: np.ndarray  #: × share


@dataclass(frozen=True)
class PadField:
    """Thickness under one footprint as a raster.

    Attributes:
        row, column: first cell on the grid.
        block: cells of the grid along the side of one of its cells.
        share: of each of its cells inside the footprint and with data, (h, w).
        thickness: subgrade − removal bottom [m], NaN outside.
        before: the same without any undercut [m]: fill only.
    """

    row: int
    column: int
    block: int
    share: np.ndarray
    thickness: np.ndarray
    before: np.ndarray

    @property
    def inside(self) -> np.ndarray:
        """Cells that belong to the footprint."""
        return self.share >= _MOST

    def quantile(self, part: float, values: np.ndarray | None = None) -> float:
        """The value that this part of the footprint does not exceed [m]; NaN for an empty footprint."""
        values = self.thickness if values is None else values
        here = self.share > 0
        if not here.any():
            return float("nan")
        order = np.argsort(values[here], kind="stable")
        weights = self.share[here][order]
        reached = np.cumsum(weights)
        k = int(np.searchsorted(reached, part * reached[-1] * (1 - 1e-12)))
        return float(values[here][order][min(k, len(order) - 1)])

    def below(self, level_m: float) -> float:
        """What is missing to a thickness everywhere: Σ share × (level − thickness) where it is less [cell·m]."""
        here = self.share > 0
        gap = np.maximum(level_m - self.thickness[here], 0.0)
        return float((gap * self.share[here]).sum()) * self.block**2


class PadsTally:
    """Thickness under footprints.

    Args:
        footprints: one polygon for each pad, in cells of the grid.
        grid: the analysis grid.
    """

    def __init__(self, footprints: Rings, grid: Grid, block: int | None = None) -> None:
        self.footprints = footprints
        self.grid = grid
        self.block = block or _block(footprints)
        self.sums: dict[int, PadSums] = {}
        self.pieces: dict[int, list[_Piece]] = {}

    def empty(self) -> PadsTally:
        return PadsTally(self.footprints, self.grid, self.block)

    def add(self, tile: Tile) -> None:
        for pad in touching(self.footprints, tile.window):
            found = polygon_share(self.footprints, int(pad), tile.window)
            if found is not None and found[1].any():
                part, share = found
                rows = slice(part.row - tile.window.row, part.row - tile.window.row + part.height)
                columns = slice(part.column - tile.window.column, part.column - tile.window.column + part.width)
                self._count(int(pad), tile, (rows, columns), part.row, part.column, share)

    def merge(self, other: PadsTally) -> None:
        for pad, sums in other.sums.items():
            if pad in self.sums:
                self.sums[pad].merge(sums)
            else:
                self.sums[pad] = sums
        for pad, pieces in other.pieces.items():
            self.pieces.setdefault(pad, []).extend(pieces)

    def _count(
        self, pad: int, tile: Tile, at: tuple[slice, slice], row: int, column: int, share: np.ndarray
    ) -> None:
        depth = tile.depth[1:-1, 1:-1][at].astype(np.float64)
        known = np.isfinite(depth)
        sums = self.sums.setdefault(pad, PadSums())
        weight = np.where(known, share, 0.0)
        sums.area += float(weight.sum())
        sums.missing += float(share.sum() - weight.sum())
        if not weight.any():
            return
        # Of the surfaces, not of the zero-line split: a pad's edge is a kink, and its own thickness ends there.
        thickness = np.where(known, tile.subgrade[at] - tile.removal_bottom[at], 0.0)
        before = np.where(known, np.maximum(depth, 0.0), 0.0)
        sums.cut_area += float((tile.cells[2][at] * weight).sum())
        sums.fill_area += float((tile.cells[3][at] * weight).sum())
        sums.thickness += float((thickness * weight).sum())
        inside = weight >= _MOST
        if inside.any():
            sums.max_cut = max(sums.max_cut, float((-depth[inside]).max()))
            sums.max_thickness = max(sums.max_thickness, float(thickness[inside].max()))
            sums.min_thickness = min(sums.min_thickness, float(thickness[inside].min()))
        if tile.stack.strata:
            index = tile.stratum_at_bottom[at]
            for k in np.unique(index[weight > 0]):
                here = float(weight[index == k].sum())
                sums.strata[int(k)] = sums.strata.get(int(k), 0.0) + here
        self.pieces.setdefault(pad, []).append(_piece(self.block, row, column, weight, thickness, before))

    def field(self, pad: int) -> PadField:
        """The field of one footprint, put together from its pieces; empty where it has none."""
        pieces = self.pieces.get(pad, [])
        if not pieces:
            none = np.empty((0, 0))
            return PadField(0, 0, self.block, none, none, none)
        row, column = min(p.row for p in pieces), min(p.column for p in pieces)
        height = max(p.row + p.share.shape[0] for p in pieces) - row
        width = max(p.column + p.share.shape[1] for p in pieces) - column
        share, thickness, before = np.zeros((3, height, width))
        for piece in pieces:
            at = (
                slice(piece.row - row, piece.row - row + piece.share.shape[0]),
                slice(piece.column - column, piece.column - column + piece.share.shape[1]),
            )
            share[at] += piece.share
            thickness[at] += piece.thickness
            before[at] += piece.before
        known = np.where(share > 0, share, np.nan)
        return PadField(
            row * self.block, column * self.block, self.block, share / self.block**2, thickness / known, before / known
        )


def _block(footprints: Rings) -> int:
    west, north, east, south = footprints.bounds.T
    cells = float(((east - west + 1) * (south - north + 1)).sum()) if len(footprints) else 0.0
    return max(int(np.ceil(np.sqrt(cells / KEPT_CELLS))), 1)


def _piece(
    block: int, row: int, column: int, weight: np.ndarray, thickness: np.ndarray, before: np.ndarray
) -> _Piece:
    """Sums over blocks of cells; single cells where the block is 1."""
    fields = (weight, weight * thickness, weight * before)
    if block > 1:
        top, left = row % block, column % block
        bottom, right = -(top + weight.shape[0]) % block, -(left + weight.shape[1]) % block
        padded = [np.pad(f, ((top, bottom), (left, right))) for f in fields]
        shape = (padded[0].shape[0] // block, block, padded[0].shape[1] // block, block)
        fields = tuple(f.reshape(shape).sum(axis=(1, 3)) for f in padded)
    return _Piece(row // block, column // block, *fields)
