"""Walks the analysis grid once, tile by tile, and lets tallies count.

The grid is cut into bands of rows that follow the blocks of the files; a band is read from west to east. Cells at the
edge of what is read wait for their neighbours: the last columns are carried to the next tile, and the two rows on each
side of a band's edge are kept until both bands are known (a *seam*). So every block of a file is decoded once, and what
is counted depends neither on the number of threads nor on their order: each band and each seam counts for itself,
and the counts are merged from north to south.
"""

from __future__ import annotations

import os
import threading
from collections import deque
from collections.abc import Callable, Sequence
from concurrent.futures import ThreadPoolExecutor
from itertools import pairwise
from typing import Any, Protocol

import numpy as np

from earthwork.ground.grid import Grid, Window
from earthwork.ground.stack import Arrays, Stack, StackReader
from earthwork.quantities.sharing import SHARED
from earthwork.quantities.tile import Tile

Progress = Callable[[int, int], None]

_BAND_ROWS = 256  #: least rows of a band of tiled files
_STRIP_ROWS = 64  #: rows of a band of striped files: GDAL's cache holds them across the tiles of the band


class Tally(Protocol):
    """A question about the ground. Merging is associative, and always done from north to south.

    A tally that asks only for the depth of a site without layers may say ``depth_only = True``: when all do, the
    surfaces are not kept. One that asks for finished ground (or subgrade) as well says ``wants_finished = True`` too.
    """

    def empty(self) -> Tally:
        """The same question with nothing counted."""

    def add(self, tile: Tile) -> None:
        """Count a tile; called by one thread at a time for each instance."""

    def merge(self, other: Any) -> None:
        """Take over what another instance, of ground further on, has counted."""


def walk(
    stack: Stack,
    tallies: Sequence[Tally],
    *,
    threads: int | None = None,
    progress: Progress | None = None,
    client: Any = None,
    tile_cells: int | None = None,
    band_rows: int | None = None,
) -> None:
    """Read the ground once and let every tally count it.

    Args:
        stack: the surfaces and layers of the site.
        tallies: counted into in place.
        threads: default: one a processor, at most 4.
        progress: called with (bands done, bands in all), from any thread, one call at a time.
        client: a ``dask.distributed.Client``: the bands are then walked by its workers, which must see the files
            under the same paths; the answer is the same to the last digit.
        tile_cells, band_rows: size of a tile and of a band; sums do not depend on them beyond rounding. (Single lifts of
            rough ground do, by less than a thousandth of the fill: where bins are sampled, see lift_plain.)

    Raises:
        FileError: a file cannot be read; KeyboardInterrupt passes through after the threads have stopped.
    """
    shared = SHARED.get()
    if shared is not None:
        shared.walk(stack, tallies)
        return
    edges = band_edges(stack.grid.rows, stack.block, stack.block_start[0], band_rows)
    whole = Walk(stack, tallies, progress, tile_cells=tile_cells or _tile_cells(stack, tallies), edges=edges)
    if client is not None:
        from earthwork.quantities.cluster import walk_on_cluster

        walk_on_cluster(whole, client)
    else:
        whole.run(range(whole.bands), thread_count(threads))


def thread_count(threads: int | None) -> int:
    """Threads that a walk takes: what is asked for, else one a processor, at most 4."""
    return threads or min(os.cpu_count() or 1, 4)


def band_edges(rows: int, block: tuple[int, int] | None, start: int = 0, band_rows: int | None = None) -> list[int]:
    """Row edges of the bands: on block edges of the files, no band under three rows.

    >>> band_edges(700, (256, 256), start=156)
    [0, 156, 412, 700]
    """
    block_rows = block[0] if block else _BAND_ROWS
    height = band_rows or (
        -(-_BAND_ROWS // block_rows) * block_rows if block_rows >= 16 else _STRIP_ROWS // block_rows * block_rows
    )
    first = (start % block_rows or height) if block_rows >= 16 else height
    edges = [0, *range(first if first >= 3 else first + height, rows, max(height, 3)), rows]
    if len(edges) > 2 and edges[-1] - edges[-2] < max(3, min(height // 4, 64)):
        del edges[-2]
    return edges


def _tile_cells(stack: Stack, tallies: Sequence[Tally]) -> int:
    """Cells of a tile: fewer when more fields of 8 bytes a cell are held at once."""
    if not stack.layered and all(getattr(tally, "depth_only", False) for tally in tallies):
        return 2**18
    layers = len(stack.strips) + len(stack.sections) + len(stack.excavations) + 2 * len(stack.strata)
    return max(2**15, 2**20 // (16 + 2 * layers))


class Walk:
    """The state of one walk: bands waiting, seams half known, counts waiting to be merged in order."""

    def __init__(
        self,
        stack: Stack,
        tallies: Sequence[Tally],
        progress: Progress | None,
        *,
        tile_cells: int,
        edges: list[int],
    ) -> None:
        self.stack = stack
        self.tallies = tallies
        self.progress = progress
        self.grid: Grid = stack.grid
        self.wants_finished = any(getattr(tally, "wants_finished", False) for tally in tallies)
        self.depth_only = not stack.layered and all(getattr(tally, "depth_only", False) for tally in tallies)
        self.edges = edges
        self.tile_cells = tile_cells
        self.lock = threading.Lock()
        self.merging = threading.Lock()
        self.stop = threading.Event()
        self.rims: dict[tuple[int, str], Arrays] = {}
        self.counted: dict[int, list[Tally]] = {}
        self.next_unit = 0
        self.done = 0

    @property
    def bands(self) -> int:
        return len(self.edges) - 1

    def run(self, bands: range, threads: int) -> None:
        """Walk some neighbouring bands; the seams at their ends stay half known unless other bands are walked too."""
        threads = max(1, min(threads, len(bands)))
        # Each thread starts on a run of neighbouring bands, so that blocks cut by a band edge are still in GDAL's
        # cache; who is done first helps the others from the far end.
        share = -(-len(bands) // threads)
        queues = [deque(bands[k * share : (k + 1) * share]) for k in range(threads)]
        if threads == 1:
            self._thread(0, queues)
            return
        with ThreadPoolExecutor(threads) as pool:
            try:
                futures = [pool.submit(self._thread, k, queues) for k in range(threads)]
                for future in futures:
                    future.result()
            except BaseException:
                self.stop.set()
                raise

    def _thread(self, k: int, queues: list[deque[int]]) -> None:
        reader = self.stack.reader()
        try:
            while not self.stop.is_set():
                band = self._take(k, queues)
                if band is None:
                    return
                self._band(reader, band)
        except BaseException:
            self.stop.set()
            raise
        finally:
            reader.close()

    def _take(self, k: int, queues: list[deque[int]]) -> int | None:
        with self.lock:
            if queues[k]:
                return queues[k].popleft()
            longest = max(queues, key=len)
            return longest.pop() if longest else None

    def _band(self, reader: StackReader, band: int) -> None:
        """Read a band from west to east, count its inner cells, and hand its edge rows to the seams."""
        row, stop = self.edges[band], self.edges[band + 1]
        first, last = band == 0, band == self.bands - 1
        counts = [tally.empty() for tally in self.tallies]
        edges_north: list[Arrays] = []
        edges_south: list[Arrays] = []
        carried: Arrays | None = None
        columns = self._column_edges(stop - row)
        for left, right in pairwise(columns):
            if self.stop.is_set():
                return
            window = Window(row, left, stop - row, right - left)
            east_end = right == self.grid.columns
            rim = _Rim(window, carried, north=first, south=last, east=east_end)
            if self.depth_only:
                arrays = reader.read_depth(window, rim.room, self.wants_finished)
            else:
                arrays = rim.around(reader.read_base(window))
            if not first:
                edges_north.append({name: a[:2].copy() for name, a in arrays.items()})
            if not last:
                edges_south.append({name: a[-2:].copy() for name, a in arrays.items()})
            west = left if carried is None else left - 1
            east = right if east_end else right - 1
            if not east_end:
                carried = {name: a[:, -2:].copy() for name, a in arrays.items()}
            inner = row if first else row + 1
            height = (stop if last else stop - 1) - inner
            if height > 0 and east > west:
                self._count(counts, rim.arrays, Window(inner, west, height, east - west))
        self.finish(2 * band, counts)
        if not first:
            self.seam(band - 1, "south", _side_by_side(edges_north))
        if not last:
            self.seam(band, "north", _side_by_side(edges_south))
        self.note_done(1)

    def note_done(self, bands: int) -> None:
        """Count bands that are done, and tell."""
        with self.lock:
            self.done += bands
            if self.progress:
                self.progress(self.done, self.bands)

    def _column_edges(self, height: int) -> list[int]:
        block_columns = self.stack.block[1] if self.stack.block else 256
        width = max(self.tile_cells // max(height, 1), 3)
        start = self.stack.block_start[1]
        if block_columns <= width:
            width = width // block_columns * block_columns
            first = start % block_columns or width
        else:
            first = width
        edges = [0, *range(first if first >= 3 else first + width, self.grid.columns, width), self.grid.columns]
        if len(edges) > 2 and edges[-1] - edges[-2] < 3:
            del edges[-2]
        return edges

    def seam(self, above: int, side: str, rows: Arrays) -> None:
        """Keep the two rows on one side of a seam; count its two rows of cells when both sides are known."""
        other = "north" if side == "south" else "south"
        with self.lock:
            waiting = self.rims.pop((above, other), None)
            if waiting is None:
                self.rims[above, side] = rows
                return
        north, south = (waiting, rows) if side == "south" else (rows, waiting)
        arrays = {name: _padded(np.concatenate([north[name], south[name]]), west=True, east=True) for name in north}
        counts = [tally.empty() for tally in self.tallies]
        self._count(counts, arrays, Window(self.edges[above + 1] - 1, 0, 2, self.grid.columns), seam=True)
        self.finish(2 * above + 1, counts)

    def _count(self, counts: list[Tally], arrays: Arrays, window: Window, *, seam: bool = False) -> None:
        if not self.depth_only:
            self.stack.derive(arrays)
        tile = Tile(self.stack, window, arrays, seam=seam)
        for tally in counts:
            tally.add(tile)

    def finish(self, unit: int, counts: list[Tally]) -> None:
        """Merge what is counted from north to south, as far as it is known without a gap."""
        with self.merging:
            self.counted[unit] = counts
            while self.next_unit in self.counted:
                for tally, part in zip(self.tallies, self.counted.pop(self.next_unit), strict=True):
                    tally.merge(part)
                self.next_unit += 1


def _padded(array: np.ndarray, *, north=False, south=False, west=False, east=False) -> np.ndarray:
    """The array with a row or column of NaN on the sides where the grid ends."""
    if not (north or south or west or east):
        return array
    rows, columns = array.shape
    padded = np.full((rows + north + south, columns + west + east), np.nan, array.dtype)
    padded[int(north) : int(north) + rows, int(west) : int(west) + columns] = array
    return padded


class _Rim:
    """Arrays of a tile with its rim: carried columns or the edge in the west, the edge elsewhere where asked."""

    def __init__(self, window: Window, carried: Arrays | None, *, north: bool, south: bool, east: bool) -> None:
        self.arrays: Arrays = {}
        self._window = window
        self._carried = carried
        self._north, self._south, self._east = north, south, east

    def room(self, name: str, dtype: np.dtype) -> np.ndarray:
        """A new field with its rim in place; the part of it that the window fills, (height, width), not yet set."""
        rows, columns = self._window.height, self._window.width
        before = 1 if self._carried is None else 2
        whole = np.empty((rows + self._north + self._south, before + columns + self._east), dtype)
        if self._north:
            whole[0] = np.nan
        if self._south:
            whole[-1] = np.nan
        if self._east:
            whole[:, -1] = np.nan
        inner = whole[int(self._north) : int(self._north) + rows]
        inner[:, :before] = np.nan if self._carried is None else self._carried[name]
        self.arrays[name] = whole
        return inner[:, before : before + columns]

    def around(self, arrays: Arrays) -> Arrays:
        """The same fields, moved into their rims."""
        moved: Arrays = {}
        for name, array in arrays.items():
            moved[name] = self.room(name, array.dtype)
            moved[name][...] = array
        return moved


def _side_by_side(pieces: list[Arrays]) -> Arrays:
    return {name: np.concatenate([piece[name] for piece in pieces], axis=1) for name in pieces[0]}
