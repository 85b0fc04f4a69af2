"""Tally of fill by elevation: every lift of every fill area comes from it, in the same pass as the volumes."""

from __future__ import annotations

import math
import threading
from dataclasses import dataclass

import numpy as np

from earthwork.errors import GroundError
from earthwork.ground.grid import Grid
from earthwork.ground.stack import Stack
from earthwork.quantities.lift_kernel import (
    CODE,
    FOOTPRINT,
    GROUND,
    HIGHEST,
    LENGTH,
    LOWEST,
    VOLUME,
    count_columns,
    kinds_of,
)
from earthwork.quantities.lift_plain import count_plain, packing
from earthwork.quantities.lift_sums import merge_runs
from earthwork.quantities.split import SplitRoom
from earthwork.quantities.tile import Tile

_COARSE_M = 5.0  #: side of the cells on which fill areas are told apart, where the site is small enough
_COARSE_CELLS = 128  #: at most along a side
_LOOSE = 3_000_000  #: records that are kept before those of one code and bin are added up
_FURTHEST_BIN = 1 << 21  #: above or below elevation 0: what lies further is no ground
_MOST_BINS = 500_000  #: of a tile; with those to spare, places of packed bins stay within 63 bits
_ARENA = 1 << 22  #: records that memory is set aside for at one time; what is not written costs nothing
_STRETCH = 1 << 17  #: records that a thread takes of it at one time
_CHUNK = 2048  #: cells across that are counted at one time
_OVERVIEW_CELLS = 1024  #: of the map that lift outlines are drawn on, at most along a side


@dataclass(frozen=True)
class CoarseGrid:
    """Blocks of grid cells: ``side`` along a coarse cell, ``fine`` along a cell of the overview."""

    grid: Grid
    side: int
    fine: int

    @classmethod
    def of(cls, grid: Grid) -> CoarseGrid:
        """Coarse cells of about 5 m, but no more than 128 along a side of the grid.

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
    """Column ends by coarse cell, kind, end and bin: the area [cells] and the first two moments of their place.

    ``runs`` (n, 3) of CODE, BIN and LENGTH; ``moments`` (bins of all runs, 3), one run after another.
    """

    runs: np.ndarray
    moments: np.ndarray

    @classmethod
    def room(cls, most: int) -> Records:
        """Room for so many, not set."""
        return cls(np.empty((most, 3), np.int64), np.empty((most, 3)))

    @classmethod
    def joined(cls, parts: list[Records]) -> Records:
        """All records of all parts; a code and bin may come again."""
        if not parts:
            return cls.room(0)
        return cls(np.concatenate([part.runs for part in parts]), np.concatenate([part.moments for part in parts]))

    def sorted(self) -> SortedRecords:
        """In the order of the codes."""
        return sorted_records([self])

    def merged(self) -> Records:
        """The same with each code and bin once, in their order."""
        room, counts = Records.room(len(self.moments)), np.zeros(2, np.int64)
        merge_runs(*self.sorted(), room.runs, room.moments, counts)
        return Records(room.runs[: counts[0]].copy(), room.moments[: counts[1]].copy())


#: Runs, moments, the order of the runs by code, and where the moments of each run start.
SortedRecords = tuple[np.ndarray, np.ndarray, np.ndarray, np.ndarray]


def sorted_records(parts: list[Records]) -> SortedRecords:
    """The records of all parts in the order of the codes; a code and bin may come again.

    Moments that lie in one arena are left there: copying them would cost as much as adding them up.
    """
    if not parts:
        parts = [Records.room(0)]
    runs = np.concatenate([part.runs for part in parts])
    arena = parts[0].moments.base
    if isinstance(arena, np.ndarray) and all(_lies_in(part.moments, arena) for part in parts):
        first = [(_address(part.moments) - _address(arena)) // arena.strides[0] for part in parts]
        moments = arena
    else:
        first = np.cumsum([0, *(len(part.moments) for part in parts[:-1])]).tolist()
        moments = np.concatenate([part.moments for part in parts])
    starts = [at + np.cumsum(part.runs[:, LENGTH]) - part.runs[:, LENGTH] for at, part in zip(first, parts, strict=True)]
    return runs, moments, np.argsort(runs[:, CODE], kind="stable"), np.concatenate(starts)


def _lies_in(rows: np.ndarray, arena: np.ndarray) -> bool:
    """Whether rows are rows of an arena; what came from another machine lies in memory of other kinds."""
    return rows.base is arena and rows.shape[1:] == arena.shape[1:] and rows.strides == arena.strides


def _address(array: np.ndarray) -> int:
    return array.__array_interface__["data"][0]


class LiftTally:
    """Fill and over-excavation refill by elevation, for lifts of one thickness.

    On plain ground it counts cut and fill of the same rows: hand it to the walk before the tally of the volumes.

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
        self._cells: list[tuple[int, int, np.ndarray]] = []  #: coarse row, column, cells from there on
        self._overview: list[tuple[int, int, np.ndarray, np.ndarray]] = []  #: row, column, bottoms, tops
        self._arena = _Arena()
        self._parts: list[Records] = []
        self._loose = 0

    depth_only = True  #: engine: without layers, depth and finished ground are all that is asked for
    wants_finished = True

    @property
    def key(self) -> tuple[str, float, bool]:
        """Tallies that are alike in a shared pass are counted once."""
        return ("lifts", self.lift_m, self.overview_wanted)

    def empty(self) -> LiftTally:
        other = LiftTally(self.stack, self.lift_m, overview=self.overview_wanted)
        other._arena = self._arena
        return other

    def add(self, tile: Tile) -> None:
        weight = tile.weight
        if weight is not None and not weight.any():
            return
        window, coarse = tile.window, self.coarse
        plain = not self.stack.excavations and not len(self.below) and weight is None
        counted = self._count_plain(tile) if plain else self._count(tile, weight)
        if counted is None:
            return
        records, cells = counted
        self._parts.append(records)
        self._loose += len(records.moments)
        self._cells.append((window.row // coarse.side, window.column // coarse.side, cells))
        if self.overview_wanted:
            self._sample(tile, weight)

    def _count_plain(self, tile: Tile) -> tuple[Records, np.ndarray] | None:
        """Count with the bins of a sample of the tile, and again with all that it needs should they not do."""
        top, window = self.stack.subgrade(tile.arrays), tile.window
        for step in (16, 1):
            high = top[1:-1:step, 1:-1:step]
            low = np.minimum(high, high - tile.depth[1:-1:step, 1:-1:step])
            first, bins = self._bins(low, high, tile.depth, sampled=step > 1)
            if bins == 0:
                continue
            cells = self._room(tile)
            room, counts = self._record_room(tile, cells, bins)
            packs = packing(self.coarse.side)
            blocks = min(max(_CHUNK // self.coarse.side, 1), cells.shape[1])
            tables, packed, crossings = _TABLES.zeros(blocks, bins, packed=packs is not None)
            split = SplitRoom(blocks * self.coarse.side, tile.depth.dtype)
            sums, spread = np.zeros(8), np.zeros(2)
            if count_plain(
                tile.depth, top, window.row, window.column, self.coarse.side, self.coarse.columns, self.lift_m, first,
                bins, tables[:blocks], packed[:blocks], *(packs or (0, 0)), crossings[:blocks], cells,
                room.runs, room.moments, counts, sums, split.flat, split.bits, split.mixed, split.extreme_bits, spread,
            ):  # fmt: skip
                tile.depth_sums = (sums, *split.extremes(*spread.tolist()))
                return _TABLES.keep(counts), cells
            _TABLES.clear()
        return None

    def _count(self, tile: Tile, weight: np.ndarray | None) -> tuple[Records, np.ndarray] | None:
        top, window = tile.subgrade, tile.window
        dug = bool(self.stack.excavations)
        nothing = np.empty((0, 0), top.dtype)
        bottom = tile.removal_bottom if dug else nothing
        low = bottom if dug else np.minimum(top, top - tile.depth[1:-1, 1:-1])
        first, bins = self._bins(low, top, tile.depth)
        if bins == 0:
            return None
        cells = self._room(tile)
        room, counts = self._record_room(tile, cells, bins)
        count_columns(
            tile.depth, top, bottom, np.empty((0, 0)) if weight is None else weight,
            tile.finished if self.from_finished.any() else nothing,
            self.below, self.from_finished, self.order, window.row, window.column, self.coarse.side,
            self.coarse.columns, self.lift_m, first, bins, cells, room.runs, room.moments, counts,
        )  # fmt: skip
        return _TABLES.keep(counts), cells

    def _room(self, tile: Tile) -> np.ndarray:
        """Coarse cells that a tile touches, with nothing counted."""
        window, side = tile.window, self.coarse.side
        return _no_cells(_touched(window.row, window.height, side), _touched(window.column, window.width, side))

    def _record_room(self, tile: Tile, cells: np.ndarray, bins: int) -> tuple[Records, np.ndarray]:
        """Room for as many records as a tile can make, and how many there are of runs and of moments: none."""
        kinds = 2 * kinds_of(len(self.below))
        most = min(cells.shape[0] * cells.shape[1] * kinds * bins, tile.window.height * tile.window.width * (2 + kinds))
        return _TABLES.records(self._arena, most), np.zeros(2, np.int64)

    def _sample(self, tile: Tile, weight: np.ndarray | None) -> None:
        """Keep bottom and top of the fill at the middle of each overview cell."""
        window, fine = tile.window, self.coarse.fine
        row = -(window.row - fine // 2) % fine
        column = -(window.column - fine // 2) % fine
        here = (slice(row, None, fine), slice(column, None, fine))
        # copied first: what lies apart in memory is slow to come by
        top, depth = tile.subgrade[here].copy(), tile.depth[1:-1, 1:-1][here].copy()
        bottom = tile.removal_bottom[here] if self.stack.excavations else np.minimum(top, top - depth)
        filled = top > bottom
        if weight is not None:
            filled &= weight[here] > 0.5
        if not filled.any():
            return
        bottom, top = np.where(filled, bottom, np.nan), np.where(filled, top, np.nan)
        self._overview.append(((window.row + row) // fine, (window.column + column) // fine, bottom, top))

    def merge(self, other: LiftTally) -> None:
        self._cells += other._cells
        self._overview += other._overview
        self._parts += other._parts
        self._loose += other._loose
        if self._loose > _LOOSE:
            self._compact()

    def _compact(self) -> None:
        whole = self.records.merged()
        self._parts = [whole]
        # further parts may add half as much again before the next time
        self._loose = -len(whole.moments) // 2

    def _bins(self, low: np.ndarray, top: np.ndarray, depth: np.ndarray, *, sampled: bool = False) -> tuple[int, int]:
        """Lowest bin and number of bins between two surfaces; (0, 0) where there is no data.

        Of a sample, with bins to spare for what lies between its cells; else, for the fill of cells that the zero line
        crosses, which hangs from their subgrade by no more than three times the greatest depth.
        """
        least = float(np.fmin.reduce(low, axis=None, initial=np.inf))
        most = float(np.fmax.reduce(top, axis=None, initial=-np.inf))
        if not least <= most:
            return 0, 0
        first, last = math.floor(least / self.lift_m), math.floor(most / self.lift_m)
        deepest = 0.0 if sampled else float(np.fmax.reduce(np.abs(depth), axis=None, initial=0.0))
        hanging = math.ceil(3 * deepest / self.lift_m) + 1
        if max(abs(first), abs(last)) >= _FURTHEST_BIN or last - first + hanging > _MOST_BINS:
            raise GroundError(
                f"elevations from {least:g} to {most:g} m"
                + (f" and surfaces up to {deepest:g} m apart" if deepest else "")
                + f" are too much for lifts of {self.lift_m:g} m; check the nodata values, or give a thicker lift"
            )
        if sampled:
            spare = 8 + (last - first) // 4
            return first - spare, last - first + 2 + 2 * spare
        return first - hanging, last - first + 2 + hanging

    # --- what was counted -------------------------------------------------------------------------------------------

    @property
    def records(self) -> Records:
        """All column ends; a code and bin comes once for each tile that has ends there."""
        return Records.joined(self._parts)

    def sorted_records(self) -> SortedRecords:
        """All column ends in the order of their codes."""
        return sorted_records(self._parts)

    @property
    def cells(self) -> np.ndarray:
        """(coarse rows, coarse columns, 5): VOLUME [cell·m], FOOTPRINT, GROUND [cells], LOWEST, HIGHEST [m]."""
        whole = _no_cells(self.coarse.rows, self.coarse.columns)
        sums = [VOLUME, FOOTPRINT, GROUND]
        for row, column, cells in self._cells:
            here = whole[row : row + cells.shape[0], column : column + cells.shape[1]]
            here[..., sums] += cells[..., sums]
            np.minimum(here[..., LOWEST], cells[..., LOWEST], out=here[..., LOWEST])
            np.maximum(here[..., HIGHEST], cells[..., HIGHEST], out=here[..., HIGHEST])
        return whole

    @property
    def overview(self) -> np.ndarray:
        """(rows, columns, 2): removal bottom and subgrade under fill [m] at the middles of overview cells, or NaN."""
        fine = self.coarse.fine
        whole = np.full((-(-self.stack.grid.rows // fine), -(-self.stack.grid.columns // fine), 2), np.nan)
        for row, column, bottom, top in self._overview:
            here = whole[row : row + len(top), column : column + top.shape[1]]
            here[..., 0], here[..., 1] = bottom, top
        return whole


class _Arena:
    """Memory for the records of a walk, of which its threads take stretches."""

    def __init__(self) -> None:
        self._lock = threading.Lock()
        self._left = Records.room(0)

    def __reduce__(self) -> tuple[type[_Arena], tuple[()]]:
        return (_Arena, ())  # on another machine there is other memory

    def stretch(self, most: int) -> Records:
        """Room for so many records at least."""
        size = max(most, _STRETCH)
        with self._lock:
            if len(self._left.moments) < size:
                self._left = Records.room(max(size, _ARENA))
            runs, moments = self._left.runs, self._left.moments
            self._left = Records(runs[size:], moments[size:])
        return Records(runs[:size], moments[:size])


class _Tables(threading.local):
    """Room that each thread counts in: tables that every count leaves as zeros, and records before they are kept."""

    def __init__(self) -> None:
        self.arena: _Arena | None = None
        self.room = Records.room(0)
        self.clear()

    def clear(self) -> None:
        """Forget tables that a count has not left as zeros."""
        self.tables = np.zeros((0, 2, 0))
        self.packed = np.zeros((0, 0, 0), np.int64)
        self.crossings = np.zeros((0, 2, 0, 3))

    def zeros(self, blocks: int, bins: int, *, packed: bool) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        """Tables for :func:`count_plain` of at least so many bins, the same ones for as long as they are enough."""
        held = self.crossings.shape
        if held[0] < blocks or held[2] < bins or (self.packed.shape[1] > 0) != packed:
            blocks, bins = max(blocks, held[0]), max(bins, held[2])
            # numpy's zeros cost nothing until they are touched, those made in a kernel do
            self.tables = np.zeros((blocks, 2, 4 * bins))
            self.packed = np.zeros((blocks, 2, bins) if packed else (blocks, 0, 0), np.int64)
            self.crossings = np.zeros((blocks, 2, bins, 3))
        return self.tables, self.packed, self.crossings

    def records(self, arena: _Arena, most: int) -> Records:
        """Room for so many records, until they are kept."""
        if arena is not self.arena or min(len(self.room.moments), len(self.room.runs)) < most:
            self.arena, self.room = arena, arena.stretch(most)
        return self.room

    def keep(self, counts: np.ndarray) -> Records:
        """The first so many runs and moments of the room, which is the smaller for it."""
        runs, moments = counts.tolist()
        kept = Records(self.room.runs[:runs], self.room.moments[:moments])
        self.room = Records(self.room.runs[runs:], self.room.moments[moments:])
        return kept


_TABLES = _Tables()


def _touched(start: int, length: int, side: int) -> int:
    """Number of blocks of ``side`` cells that cells ``start … start + length`` touch."""
    return (start + length - 1) // side - start // side + 1


def _no_cells(rows: int, columns: int) -> np.ndarray:
    cells = np.zeros((rows, columns, 5))
    cells[..., LOWEST] = np.inf
    cells[..., HIGHEST] = -np.inf
    return cells
