"""How far the side slopes of built grades reach: from the edge to where they first meet the existing ground.

A slope ends where it daylights. Ground that lies under its cone again behind a ridge is not filled: only
cells that hang together with the edge through cells of the same kind (fill or cut) belong to the slope.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from functools import lru_cache

import numpy as np

from earthwork.ground.elements import Element
from earthwork.ground.grid import Grid, Window
from earthwork.ground.slopes import (
    inside_rings,
    near_edges,
    slope_faces,
    spread,
    stop_at_walls,
    triangle_heights,
)
from earthwork.ground.surfaces import SurfaceReader

#: Side of the tiles that slopes are kept in [cells].
TILE = 128

TileKey = tuple[int, int]


@dataclass(frozen=True)
class Lattice:
    """Cell centres of a grid in ground metres from its north-west corner, and its tiles."""

    grid: Grid

    @property
    def dx(self) -> float:
        return self.grid.cell_east_m

    @property
    def dy(self) -> float:
        return self.grid.cell_north_m

    @property
    def diagonal(self) -> float:
        """Diagonal of a cell [m]."""
        return float(np.hypot(self.dx, self.dy))

    def first(self, window: Window) -> tuple[float, float]:
        """x, y of the first cell's centre of a window."""
        return (window.column + 0.5) * self.dx, (window.row + 0.5) * self.dy

    def tile(self, key: TileKey) -> Window:
        """The window of a tile, clipped to the grid."""
        row, column = key[0] * TILE, key[1] * TILE
        return Window(row, column, min(TILE, self.grid.rows - row), min(TILE, self.grid.columns - column))

    def tiles_of_box(self, west: float, north: float, east: float, south: float) -> list[TileKey]:
        """Tiles that a box [local m] touches."""
        row_stop, column_stop = -(-self.grid.rows // TILE), -(-self.grid.columns // TILE)
        rows = range(
            max(int(np.floor(north / self.dy / TILE)), 0),
            min(int(np.floor(south / self.dy / TILE)) + 1, row_stop),
        )
        columns = range(
            max(int(np.floor(west / self.dx / TILE)), 0),
            min(int(np.floor(east / self.dx / TILE)) + 1, column_stop),
        )
        return [(row, column) for row in rows for column in columns]

    def tiles_of_edges(self, edges: np.ndarray) -> set[TileKey]:
        """Tiles within a cell of any edge."""
        found: set[TileKey] = set()
        room = self.diagonal
        for edge in edges:
            # Long edges are walked in steps of a tile, so that a diagonal does not claim its whole bounding
            # box.
            steps = max(int(np.ceil(edge[5] / (TILE * min(self.dx, self.dy)))), 1)
            at = np.linspace(0.0, edge[5], steps + 1)
            x, y = edge[0] + edge[3] * at, edge[1] + edge[4] * at
            for k in range(steps):
                west, east = min(x[k], x[k + 1]) - room, max(x[k], x[k + 1]) + room
                north, south = min(y[k], y[k + 1]) - room, max(y[k], y[k + 1]) + room
                found.update(self.tiles_of_box(west, north, east, south))
        return found


def element_faces(
    element: Element, ground: np.ndarray, lattice: Lattice, window: Window
) -> tuple[np.ndarray, np.ndarray]:
    """Fill and cut faces of an element over a window: see :func:`earthwork.ground.slopes.slope_faces`."""
    fill, cut = np.empty(ground.shape), np.empty(ground.shape)
    x0, y0 = lattice.first(window)
    slope_faces(
        ground,
        x0,
        y0,
        lattice.dx,
        lattice.dy,
        element.edges,
        element.slope.factors,
        element.mitred,
        fill,
        cut,
    )
    if len(element.walls):
        stop_at_walls(x0, y0, lattice.dx, lattice.dy, element.edges, element.walls, fill, cut)
    return fill, cut


def element_inside(element: Element, lattice: Lattice, window: Window) -> np.ndarray:
    """Cells of a window whose centre lies inside an element, bool (h, w)."""
    inside = np.zeros((window.height, window.width), bool)
    x0, y0 = lattice.first(window)
    inside_rings(x0, y0, lattice.dx, lattice.dy, element.ring_x, element.ring_y, element.ring_offsets, inside)
    return inside


def element_grade(
    element: Element, lattice: Lattice, window: Window, inside: np.ndarray, out: np.ndarray
) -> None:
    """Write the grade of an element into the cells that are inside it."""
    x0, y0 = lattice.first(window)
    if element.plane is not None:
        z, gx, gy = element.plane
        rows, columns = np.nonzero(inside)
        out[rows, columns] = z + gx * (x0 + columns * lattice.dx) + gy * (y0 + rows * lattice.dy)
        return
    t = element.triangles.reshape(-1, 3, 3)
    x1, y1 = x0 + (window.width - 1) * lattice.dx, y0 + (window.height - 1) * lattice.dy
    low, high = t.min(axis=1), t.max(axis=1)
    near = (low[:, 0] <= x1 + lattice.dx) & (high[:, 0] >= x0 - lattice.dx)
    near &= (low[:, 1] <= y1 + lattice.dy) & (high[:, 1] >= y0 - lattice.dy)
    triangle_heights(x0, y0, lattice.dx, lattice.dy, element.triangles[near], inside, out)


class GroundTiles:
    """Existing ground and what lies inside elements, tile by tile, the latest ones kept in memory."""

    def __init__(self, reader: SurfaceReader, lattice: Lattice, elements: Sequence[Element]) -> None:
        self.lattice = lattice
        self.elements = elements
        self.inside_of: dict[TileKey, list[int]] = {}
        for index, element in enumerate(elements):
            box = element.ring_x.min(), element.ring_y.min(), element.ring_x.max(), element.ring_y.max()
            for key in lattice.tiles_of_box(*box):
                self.inside_of.setdefault(key, []).append(index)
        self.ground = lru_cache(maxsize=64)(lambda key: reader.read(lattice.tile(key)).astype(np.float64))
        self.built_on = lru_cache(maxsize=64)(self._built_on)

    def _built_on(self, key: TileKey) -> np.ndarray:
        """Index of the element that a cell lies inside, −1 for none: (h, w)."""
        window = self.lattice.tile(key)
        owner = np.full((window.height, window.width), -1, np.int32)
        for index in self.inside_of.get(key, ()):
            owner[element_inside(self.elements[index], self.lattice, window)] = index
        return owner


def slope_reach(index: int, tiles: GroundTiles) -> dict[TileKey, np.ndarray | None]:
    """The tiles that the slopes of an element reach; per tile the cells (bits packed), or None: all that are
    active.
    """
    element, lattice = tiles.elements[index], tiles.lattice
    codes: dict[TileKey, np.ndarray] = {}
    scratch = np.empty((2, (TILE + 2) ** 2), np.int32)
    waiting = dict.fromkeys(sorted(lattice.tiles_of_edges(element.edges)))
    while waiting:
        key = next(iter(waiting))
        del waiting[key]
        if key not in codes:
            codes[key] = _active(element, tiles, key)
        inner = codes[key]
        padded = np.zeros((inner.shape[0] + 2, inner.shape[1] + 2), np.int8)
        padded[1:-1, 1:-1] = inner
        _add_rim(padded, codes, key)
        spread(padded, scratch[0], scratch[1])
        inner[:] = padded[1:-1, 1:-1]
        for other in _touched(inner, key, lattice):
            if other not in codes or _would_spread(codes, key, other):
                waiting[other] = None
    found: dict[TileKey, np.ndarray | None] = {}
    for key, code in codes.items():
        reached = np.abs(code) == 2
        if reached.any():
            found[key] = None if not (np.abs(code) == 1).any() else np.packbits(reached)
    return found


def unpacked(bits: np.ndarray | None, window: Window) -> np.ndarray | None:
    """The mask (h, w) of packed bits of a tile."""
    if bits is None:
        return None
    size = window.height * window.width
    return np.unpackbits(bits, count=size).astype(bool).reshape(window.height, window.width)


def _active(element: Element, tiles: GroundTiles, key: TileKey) -> np.ndarray:
    """Codes of a tile: 1 under the fill face, −1 above the cut face, doubled beside the edge, 0 elsewhere."""
    lattice, window = tiles.lattice, tiles.lattice.tile(key)
    ground = tiles.ground(key)
    fill, cut = element_faces(element, ground, lattice, window)
    codes = (fill > ground).astype(np.int8) - (cut < ground)
    codes[tiles.built_on(key) >= 0] = 0
    near = np.zeros(ground.shape, bool)
    x0, y0 = lattice.first(window)
    near_edges(x0, y0, lattice.dx, lattice.dy, element.edges, lattice.diagonal, near)
    codes[near] *= 2
    return codes


def _add_rim(padded: np.ndarray, codes: dict[TileKey, np.ndarray], key: TileKey) -> None:
    """Put what the neighbouring tiles have reached around a tile."""
    height, width = padded.shape[0] - 2, padded.shape[1] - 2
    row, column = key
    for down, right, into, out_of in (
        (-1, 0, np.s_[0, 1 : width + 1], np.s_[-1, :]),
        (1, 0, np.s_[-1, 1 : width + 1], np.s_[0, :]),
        (0, -1, np.s_[1 : height + 1, 0], np.s_[:, -1]),
        (0, 1, np.s_[1 : height + 1, -1], np.s_[:, 0]),
        (-1, -1, np.s_[0, 0], np.s_[-1, -1]),
        (-1, 1, np.s_[0, -1], np.s_[-1, 0]),
        (1, -1, np.s_[-1, 0], np.s_[0, -1]),
        (1, 1, np.s_[-1, -1], np.s_[0, 0]),
    ):
        neighbour = codes.get((row + down, column + right))
        if neighbour is not None:
            values = neighbour[out_of]
            padded[into] = np.where(np.abs(values) == 2, values, 0)


def _touched(code: np.ndarray, key: TileKey, lattice: Lattice) -> Iterable[TileKey]:
    """Neighbouring tiles that border on reached cells."""
    reached = np.abs(code) == 2
    row, column = key
    sides = {
        (-1, 0): reached[0].any(), (1, 0): reached[-1].any(),
        (0, -1): reached[:, 0].any(), (0, 1): reached[:, -1].any(),
        (-1, -1): reached[0, 0], (-1, 1): reached[0, -1], (1, -1): reached[-1, 0], (1, 1): reached[-1, -1],
    }  # fmt: skip
    rows, columns = -(-lattice.grid.rows // TILE), -(-lattice.grid.columns // TILE)
    for (down, right), any_reached in sides.items():
        other = row + down, column + right
        if any_reached and 0 <= other[0] < rows and 0 <= other[1] < columns:
            yield other


def _would_spread(codes: dict[TileKey, np.ndarray], key: TileKey, other: TileKey) -> bool:
    """Whether what a tile has reached can go on in a neighbour that is already known."""
    target = codes[other]
    padded = np.zeros((target.shape[0] + 2, target.shape[1] + 2), np.int8)
    padded[1:-1, 1:-1] = target
    _add_rim(padded, {key: codes[key]}, other)
    scratch = np.empty((2, padded.size), np.int32)
    spread(padded, scratch[0], scratch[1])
    return bool((padded[1:-1, 1:-1] != target).any())
