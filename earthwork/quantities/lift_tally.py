"""Tally of fill by elevation: what every lift of every fill area is worked out from, in the same pass as the volumes."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from earthwork.errors import GroundError
from earthwork.ground.grid import Grid
from earthwork.ground.stack import Stack
from earthwork.quantities.lift_kernel import (
    BIN_BITS,
    BIN_ZERO,
    FOOTPRINT,
    GROUND,
    HIGHEST,
    LOWEST,
    VOLUME,
    count_columns,
)
from earthwork.quantities.tile import Tile

_COARSE_M = 5.0  #: side of the cells on which fill areas are told apart, where the site is small enough
_COARSE_CELLS = 160  #: at most along a side
_OVERVIEW_CELLS = 1024  #: of the map that lift outlines are drawn on, at most along a side
_NONE = np.empty((0, 0))


@dataclass(frozen=True)
class CoarseGrid:
    """Blocks of grid cells: ``side`` along a coarse cell, ``fine`` along a cell of the overview."""

    grid: Grid
    side: int
    fine: int

    @classmethod
    def of(cls, grid: Grid) -> CoarseGrid:
        """Coarse cells of about 5 m, but no more than 160 along a side of the grid.

        >>> CoarseGrid.of(Grid(500, 600, 0, 0, 1.0, 1.0)).side
        5
        """
        longest = max(grid.rows, grid.columns)
        fine = -(-longest // _OVERVIEW_CELLS)
        wanted = max(_COARSE_M / min(grid.cell_east_m, grid.cell_north_m), longest / _COARSE_CELLS)
        return cls(grid, math.ceil(max(round(wanted, 6), 1.0) / fine) * fine, fine)

    @property
    def rows(self) -> int:
        return -(-self.grid.rows // self.side)

    @property
    def columns(self) -> int:
        return -(-self.grid.columns // self.side)

    @property
    def side_m(self) -> float:
        """Side of a coarse cell on the ground, the longer one [m]."""
        return self.side * max(self.grid.cell_east_m, self.grid.cell_north_m)


@dataclass(frozen=True)
class Records:
    """Column ends by coarse cell, kind, end and bin: the area [cells] and the first two moments of their place."""

    keys: np.ndarray
    moments: np.ndarray

    def compacted(self) -> Records:
        """The same with one row a key, in the order of the keys."""
        order = np.argsort(self.keys, kind="stable")
        keys = self.keys[order]
        starts = np.flatnonzero(np.concatenate([[True], keys[1:] != keys[:-1]])) if len(keys) else np.empty(0, int)
        return Records(keys[starts], np.add.reduceat(self.moments[order], starts) if len(keys) else self.moments)


class LiftTally:
    """Fill and over-excavation refill by elevation, for lifts of one thickness.

    Args:
        stack: the site's surfaces and layers.
        lift_m: compacted thickness of a lift [m].
        overview: whether the map for lift outlines is wanted.
    """

    def __init__(self, stack: Stack, lift_m: float, *, overview: bool = True) -> None:
        if not lift_m > 0:
            raise GroundError(f"lift thickness is {lift_m:g} m; it must be more than 0")
        self.stack = stack
        self.lift_m = lift_m
        self.coarse = CoarseGrid.of(stack.grid)
        self.overview_wanted = overview
        below = [depth for depth, _ in stack.bands_below_m]
        self.below = np.array(below, dtype=np.float64)
        self.from_finished = np.array([start == "finished" for _, start in stack.bands_below_m], dtype=np.bool_)
        self.order = np.array(sorted(range(len(below)), key=lambda i: -below[i]), dtype=np.int64)
        self._cells: dict[int, np.ndarray] = {}  #: coarse row → (columns, 5)
        self._overview: dict[int, np.ndarray] = {}  #: overview row → (columns, 3)
        self._parts: list[Records] = []
        self._loose = 0

    def empty(self) -> LiftTally:
        return LiftTally(self.stack, self.lift_m, overview=self.overview_wanted)

    def add(self, tile: Tile) -> None:
        weight = tile.weight
        if weight is not None and not weight.any():
            return
        window, coarse = tile.window, self.coarse
        dug = bool(self.stack.excavations)
        top, stripped = tile.subgrade, tile.stripped
        bottom = tile.removal_bottom if dug else _NONE.astype(top.dtype)
        first, bins = self._bins(bottom if dug else np.minimum(top, stripped), top)
        if bins == 0:
            return
        here = _Pieces.of(window, coarse)
        overview = here.overview(coarse) if self.overview_wanted else np.empty((0, 0, 3))
        blocks = here.cells.shape[0] * here.cells.shape[1]
        kinds = 2 * (1 + len(self.below))
        room = min(blocks * kinds * bins, window.height * window.width * (2 + kinds))
        keys, moments = np.empty(room, np.int64), np.empty((room, 3))
        wants_finished = bool(self.from_finished.any())
        count = count_columns(
            tile.depth, top, stripped, bottom, _NONE if weight is None else weight,
            tile.finished if wants_finished else _NONE.astype(top.dtype),
            self.below, self.from_finished, self.order, window.row, window.column, coarse.side, coarse.fine,
            coarse.columns, self.lift_m, first, bins, here.cells, overview, keys, moments,
        )  # fmt: skip
        self._parts.append(Records(keys[:count].copy(), moments[:count].copy()))
        self._loose += count
        _add_cells(self._cells, here.coarse_row, here.coarse_column, here.cells, self.coarse.columns)
        if self.overview_wanted:
            width = -(-coarse.grid.columns // coarse.fine)
            _add_overview(self._overview, here.fine_row, here.fine_column, overview, width)

    def merge(self, other: LiftTally) -> None:
        _merge_cells(self._cells, other._cells)
        for row, values in other._overview.items():
            if row in self._overview:
                self._overview[row] += values
            else:
                self._overview[row] = values
        self._parts += other._parts
        self._loose += other._loose
        if self._loose > 1_000_000:
            self._compact()

    def _compact(self) -> None:
        whole = _joined(self._parts).compacted()
        self._parts = [whole]
        # further parts may add half as much again before the next time
        self._loose = -len(whole.keys) // 2

    def _bins(self, low: np.ndarray, top: np.ndarray) -> tuple[int, int]:
        """Lowest bin and number of bins between two surfaces; (0, 0) where there is no data."""
        least = float(np.fmin.reduce(low, axis=None, initial=np.inf))
        most = float(np.fmax.reduce(top, axis=None, initial=-np.inf))
        if not least <= most:
            return 0, 0
        first, last = math.floor(least / self.lift_m), math.floor(most / self.lift_m)
        if max(abs(first), abs(last)) >= BIN_ZERO or last - first > 1_000_000:
            raise GroundError(
                f"elevations from {least:g} to {most:g} m make {last - first:,} lifts of {self.lift_m:g} m; "
                "check the nodata values, or give a thicker lift"
            )
        return first, last - first + 2

    # --- what was counted -------------------------------------------------------------------------------------------

    @property
    def records(self) -> Records:
        """All column ends, one row a key."""
        return _joined(self._parts).compacted()

    def unpacked(self) -> tuple[np.ndarray, np.ndarray, np.ndarray, np.ndarray, np.ndarray]:
        """Records as (coarse cell, kind, end, bin, moments); kind 0 is all fill, 1 + i what lies in depth row i."""
        records = self.records
        packed = records.keys >> BIN_BITS
        bins = (records.keys & ((1 << BIN_BITS) - 1)) - BIN_ZERO
        kinds = 1 + len(self.below)
        return packed // (2 * kinds), packed // 2 % kinds, packed % 2, bins, records.moments

    @property
    def cells(self) -> np.ndarray:
        """(coarse rows, coarse columns, 5): VOLUME [cell·m], FOOTPRINT, GROUND [cells], LOWEST, HIGHEST [m]."""
        whole = _no_cells(self.coarse.rows, self.coarse.columns)
        for row, values in self._cells.items():
            whole[row] = values
        return whole

    @property
    def overview(self) -> np.ndarray:
        """(rows, columns, 3) on the overview: area [cells], mean removal bottom and subgrade under fill [m] or NaN."""
        fine = self.coarse.fine
        shape = (-(-self.stack.grid.rows // fine), -(-self.stack.grid.columns // fine), 3)
        whole = np.zeros(shape)
        for row, values in self._overview.items():
            whole[row] = values
        area = whole[..., :1]
        whole[..., 1:] = np.divide(whole[..., 1:], area, out=np.full((*shape[:2], 2), np.nan), where=area > 0)
        return whole


@dataclass(frozen=True)
class _Pieces:
    """Where a tile lies on the coarse grid and on the overview, with room for what it adds there."""

    coarse_row: int
    coarse_column: int
    fine_row: int
    fine_column: int
    shape: tuple[int, int]
    cells: np.ndarray

    @classmethod
    def of(cls, window, coarse: CoarseGrid) -> _Pieces:
        rows = _span(window.row, window.height, coarse.side)
        columns = _span(window.column, window.width, coarse.side)
        fine_rows = _span(window.row, window.height, coarse.fine)
        fine_columns = _span(window.column, window.width, coarse.fine)
        return cls(
            rows[0], columns[0], fine_rows[0], fine_columns[0], (fine_rows[1], fine_columns[1]),
            _no_cells(rows[1], columns[1]),
        )  # fmt: skip

    def overview(self, coarse: CoarseGrid) -> np.ndarray:
        return np.zeros((*self.shape, 3))


def _span(start: int, length: int, side: int) -> tuple[int, int]:
    """First block, and number of blocks, that cells ``start … start + length`` touch."""
    first = start // side
    return first, (start + length - 1) // side - first + 1


def _no_cells(rows: int, columns: int) -> np.ndarray:
    cells = np.zeros((rows, columns, 5))
    cells[..., LOWEST] = np.inf
    cells[..., HIGHEST] = -np.inf
    return cells


def _add_cells(into: dict[int, np.ndarray], row0: int, column0: int, cells: np.ndarray, columns: int) -> None:
    for i, values in enumerate(cells):
        whole = into.get(row0 + i)
        if whole is None:
            whole = into[row0 + i] = _no_cells(1, columns)[0]
        _widen(whole[column0 : column0 + len(values)], values)


def _merge_cells(into: dict[int, np.ndarray], other: dict[int, np.ndarray]) -> None:
    for row, values in other.items():
        if row in into:
            _widen(into[row], values)
        else:
            into[row] = values


def _widen(into: np.ndarray, values: np.ndarray) -> None:
    sums = [VOLUME, FOOTPRINT, GROUND]
    into[:, sums] += values[:, sums]
    into[:, LOWEST] = np.minimum(into[:, LOWEST], values[:, LOWEST])
    into[:, HIGHEST] = np.maximum(into[:, HIGHEST], values[:, HIGHEST])


def _add_overview(into: dict[int, np.ndarray], row0: int, column0: int, overview: np.ndarray, columns: int) -> None:
    for i, values in enumerate(overview):
        whole = into.get(row0 + i)
        if whole is None:
            whole = into[row0 + i] = np.zeros((columns, 3))
        whole[column0 : column0 + len(values)] += values


def _joined(parts: list[Records]) -> Records:
    if not parts:
        return Records(np.empty(0, np.int64), np.empty((0, 3)))
    return Records(np.concatenate([p.keys for p in parts]), np.concatenate([p.moments for p in parts]))
