"""Toe, top and daylight lines of a built grade, and the ground that it disturbs, as shapes in CRS coordinates."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from functools import lru_cache
from itertools import pairwise
from typing import Any

import numpy as np
import shapely
from shapely.geometry import LineString, Polygon

from earthwork.ground.areas import only_polygons
from earthwork.ground.design import CUT_SLOPE, FILL_SLOPE, INSIDE, UNTOUCHED, Built, Design, DesignReader
from earthwork.ground.elements import Element, Frame
from earthwork.ground.grid import Window
from earthwork.ground.reach import TILE, Lattice
from earthwork.ground.slopes import faces_at

#: Side of the windows that outlines are traced in [cells]: whole tiles, so that windows share nothing but their seams.
_WINDOW = 8 * TILE

#: Traced lines are thinned by this part of a cell.
_THIN = 0.005

#: Kinds of lines, in the order in which they are listed.
KINDS = ("top of fill", "toe of fill", "toe of cut", "top of cut", "retaining edge")


@dataclass(frozen=True)
class DesignLine:
    """A line for stake-out.

    ``kind`` is one of :data:`KINDS`: the edge of a pad or road over fill ("top of fill") or under cut ("toe of cut"),
    where its slope daylights ("toe of fill", "top of cut"), or a retaining edge. ``geometry`` is a LineString in CRS
    coordinates with elevations [m].
    """

    kind: str
    name: str
    geometry: LineString


@dataclass(frozen=True)
class DesignLines:
    """All lines of a design, and the ground that pads and slopes take up [CRS unit]."""

    lines: tuple[DesignLine, ...]
    area: Any


def design_lines(design: Design, area: Any = None) -> DesignLines:
    """Trace a design: edges exactly, daylight lines by linear interpolation between cell centres.

    ``area`` is that of :func:`design_area`, where it is known already.
    """
    tracer = _Tracer(design)
    try:
        area = tracer.area() if area is None else area
        lines = [*tracer.edge_lines(), *tracer.daylight_lines(area)]
    finally:
        tracer.close()
    lines.sort(key=lambda line: (line.name, KINDS.index(line.kind)))
    return DesignLines(tuple(lines), area)


def design_area(design: Design) -> Any:
    """The ground that pads, roads and their slopes take up, as a polygon in CRS coordinates."""
    tracer = _Tracer(design)
    try:
        return tracer.area()
    finally:
        tracer.close()


class _Tracer:
    def __init__(self, design: Design) -> None:
        self.design = design
        self.lattice: Lattice = design.lattice
        self.frame = Frame.of(design.grid)
        self.reader: DesignReader = design.reader()
        self.footprints = shapely.union_all([e.footprint for e in design.elements])
        self._built = lru_cache(maxsize=64)(self._read_tile)

    def close(self) -> None:
        self.reader.close()

    def _read_tile(self, key: tuple[int, int]) -> Built:
        return self.reader.built(self.lattice.tile(key))

    # --- outlines ------------------------------------------------------------------------------------------------

    def area(self) -> Any:
        """Footprints and slopes as one shape."""
        parts = [self.footprints]
        for window in self._windows():
            field = _slope_field(self.design, self.reader.built(window), window)
            if field is not None:
                parts += _positive(field, window, self.design)
        return only_polygons(shapely.union_all(parts, grid_size=None))

    def _windows(self) -> Iterator[Window]:
        """Windows over the tiles of the design, each one cell wider than its own to the south and east."""
        grid = self.design.grid
        side = _WINDOW // TILE
        for row, column in sorted({(key[0] // side, key[1] // side) for key in self.design.tiles()}):
            top, left = max(row * _WINDOW - 1, 0), max(column * _WINDOW - 1, 0)
            bottom = min((row + 1) * _WINDOW + 1, grid.rows)
            right = min((column + 1) * _WINDOW + 1, grid.columns)
            yield Window(top, left, bottom - top, right - left)

    # --- lines ---------------------------------------------------------------------------------------------------

    def daylight_lines(self, area: Any) -> Iterator[DesignLine]:
        """The outline of the disturbed ground where it is a slope's, split by kind and by pad."""
        cell = max(self.design.grid.cell_east, self.design.grid.cell_north)
        thin = shapely.simplify(area, _THIN * cell)
        beside = shapely.buffer(self.footprints, 0.05 * cell)
        for run in shapely.get_parts(shapely.line_merge(shapely.boundary(thin).difference(beside))):
            points = shapely.get_coordinates(run)
            if len(points) < 2:
                continue
            middle = (points[:-1] + points[1:]) / 2
            kinds, owners = self._slope_at(middle)
            z = self.ground_at(points)
            start = 0
            for k in range(1, len(middle) + 1):
                if k < len(middle) and (kinds[k], owners[k]) == (kinds[start], owners[start]):
                    continue
                if owners[start] >= 0:
                    line = LineString(np.column_stack([points, z])[start : k + 1])
                    kind = "toe of fill" if kinds[start] == FILL_SLOPE else "top of cut"
                    yield DesignLine(kind, self.design.elements[owners[start]].name, line)
                start = k

    def edge_lines(self) -> Iterator[DesignLine]:
        """Edges of pads and roads, split where they pass from cut to fill."""
        footprints = np.array([e.footprint for e in self.design.elements], dtype=object)
        tree = shapely.STRtree(footprints)
        for index, element in enumerate(self.design.elements):
            touching = tree.query(element.footprint, predicate="intersects")
            others = footprints[touching[touching != index]]
            inside_others = shapely.union_all(others) if len(others) else None
            for a, b in _segments(element.walls):
                yield DesignLine("retaining edge", element.name, self._line(np.vstack([a, b])))
            for chain in _chains(element):
                for kind, points in self._by_sign(chain):
                    line = self._line(points)
                    if inside_others is not None and inside_others.covers(line):
                        continue
                    yield DesignLine(kind, element.name, line)

    def _line(self, points: np.ndarray) -> LineString:
        east = self.frame.west + points[:, 0] / self.frame.metres
        north = self.frame.north - points[:, 1] / self.frame.metres
        return LineString(np.column_stack([east, north, points[:, 2]]))

    def _by_sign(self, chain: np.ndarray) -> Iterator[tuple[str, np.ndarray]]:
        """Runs of a chain of edges (x, y, z) over and under the ground, cut where the ground crosses them."""
        dense = _densified(chain, min(self.lattice.dx, self.lattice.dy))
        east = self.frame.west + dense[:, 0] / self.frame.metres
        north = self.frame.north - dense[:, 1] / self.frame.metres
        over = dense[:, 2] - self.ground_at(np.column_stack([east, north]))
        run: list[np.ndarray] = []
        for k in range(len(dense)):
            if not np.isfinite(over[k]):
                yield from _flush(run, over[k - 1])
                run = []
                continue
            if run and (over[k] > 0) != (over[k - 1] > 0):
                part = over[k - 1] / (over[k - 1] - over[k])
                meet = dense[k - 1] + part * (dense[k] - dense[k - 1])
                yield from _flush([*run, meet], over[k - 1])
                run = [meet]
            run.append(dense[k])
        yield from _flush(run, over[-1])

    # --- look-ups ------------------------------------------------------------------------------------------------

    def ground_at(self, points: np.ndarray) -> np.ndarray:
        """Existing ground [m] at places (n, 2) in CRS coordinates, bilinear between cell centres; NaN without data."""
        grid = self.design.grid
        row = np.clip((grid.north - points[:, 1]) / grid.cell_north - 0.5, 0, grid.rows - 1)
        column = np.clip((points[:, 0] - grid.west) / grid.cell_east - 0.5, 0, grid.columns - 1)
        i = np.minimum(row.astype(int), max(grid.rows - 2, 0))
        j = np.minimum(column.astype(int), max(grid.columns - 2, 0))
        down, right = row - i, column - j
        z = np.zeros(len(points))
        for a, b, share in (
            (0, 0, (1 - down) * (1 - right)),
            (0, 1, (1 - down) * right),
            (1, 0, down * (1 - right)),
            (1, 1, down * right),
        ):
            values = self._cells("ground", np.minimum(i + a, grid.rows - 1), np.minimum(j + b, grid.columns - 1))
            z += np.where(share > 0, share * values, 0.0)
        return z

    def _slope_at(self, points: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """Kind and owner of the slope cell nearest to each place; owner −1 where none of the four around is a slope."""
        grid = self.design.grid
        row = (grid.north - points[:, 1]) / grid.cell_north - 0.5
        column = (points[:, 0] - grid.west) / grid.cell_east - 0.5
        kinds, owners = np.zeros(len(points), np.int8), np.full(len(points), -1)
        nearest = np.full(len(points), np.inf)
        for a in (0, 1):
            for b in (0, 1):
                i = np.clip(np.floor(row).astype(int) + a, 0, grid.rows - 1)
                j = np.clip(np.floor(column).astype(int) + b, 0, grid.columns - 1)
                kind = self._cells("kind", i, j)
                square = (row - i) ** 2 + (column - j) ** 2
                better = ((kind == FILL_SLOPE) | (kind == CUT_SLOPE)) & (square < nearest)
                nearest[better], kinds[better] = square[better], kind[better]
                owners[better] = self._cells("owner", i, j)[better]
        return kinds, owners

    def _cells(self, name: str, rows: np.ndarray, columns: np.ndarray) -> np.ndarray:
        """A field of the design at single cells."""
        values = np.empty(len(rows))
        tile_rows, tile_columns = rows // TILE, columns // TILE
        for key in sorted(set(zip(tile_rows.tolist(), tile_columns.tolist(), strict=True))):
            here = (tile_rows == key[0]) & (tile_columns == key[1])
            values[here] = getattr(self._built(key), name)[rows[here] - key[0] * TILE, columns[here] - key[1] * TILE]
        return values if name == "ground" else values.astype(np.int64)


def _slope_field(design: Design, built: Built, window: Window) -> np.ndarray | None:
    """A field that is positive on slopes and crosses zero where they daylight; None without slopes.

    Beside a slope it goes on under the ground, so that its zero is where the face meets the ground between two cells.
    """
    sloped = (built.kind == FILL_SLOPE) | (built.kind == CUT_SLOPE)
    if not sloped.any():
        return None
    gap = np.abs(built.z - built.ground)
    field = np.full(gap.shape, -1.0)
    field[sloped] = np.maximum(gap[sloped], 1e-9)
    lattice = design.lattice
    x0, y0 = lattice.first(window)
    for index, kind, at, beside in _beside(built, sloped):
        rows, columns = np.nonzero(beside & (built.kind[at] == INSIDE))
        rows, columns = rows + at[0].start, columns + at[1].start
        field[rows, columns] = np.maximum(field[rows, columns], np.maximum(gap[rows, columns], 1e-3))
        rows, columns = np.nonzero(beside & (built.kind[at] == UNTOUCHED) & np.isfinite(built.ground[at]))
        rows, columns = rows + at[0].start, columns + at[1].start
        x, y = x0 + columns * lattice.dx, y0 + rows * lattice.dy
        fill, cut, _, _ = _faces(design.elements[index], x, y)
        over = fill - built.ground[rows, columns] if kind == FILL_SLOPE else built.ground[rows, columns] - cut
        field[rows, columns] = np.maximum(field[rows, columns], np.minimum(over, -1e-9))
    return field


def _beside(built: Built, sloped: np.ndarray) -> Iterator[tuple[int, int, tuple[slice, slice], np.ndarray]]:
    """For each element and kind of slope, a box around its outer cells, and in it the cells next to them, no slope."""
    rows, columns = np.nonzero(sloped & _grown(~sloped))
    keys = built.owner[rows, columns].astype(np.int64) * 4 + built.kind[rows, columns]
    order = np.argsort(keys, kind="stable")
    cuts = np.flatnonzero(np.diff(keys[order])) + 1
    for group in np.split(order, cuts):
        r, c = rows[group], columns[group]
        at = (
            slice(max(int(r.min()) - 1, 0), int(r.max()) + 2),
            slice(max(int(c.min()) - 1, 0), int(c.max()) + 2),
        )
        own = np.zeros(sloped[at].shape, bool)
        own[r - at[0].start, c - at[1].start] = True
        yield int(keys[group[0]] // 4), int(keys[group[0]] % 4), at, _grown(own) & ~sloped[at]


def _grown(mask: np.ndarray) -> np.ndarray:
    padded = np.pad(mask, 1)
    rows, columns = mask.shape
    return np.logical_or.reduce([padded[i : i + rows, j : j + columns] for i in range(3) for j in range(3)])


def _faces(element: Element, x: np.ndarray, y: np.ndarray) -> tuple[np.ndarray, ...]:
    faces = tuple(np.empty(len(x)) for _ in range(4))
    faces_at(x, y, element.edges, element.slope.factors, element.mitred, *faces)
    return faces


def _positive(field: np.ndarray, window: Window, design: Design) -> list[Polygon]:
    """Polygons [CRS unit] of where a field of cell centres is positive; it goes on unchanged to the grid's edge."""
    import contourpy

    grid = design.grid
    sides = (
        (int(window.row == 0), int(window.row + window.height == grid.rows)),
        (int(window.column == 0), int(window.column + window.width == grid.columns)),
    )
    field = np.pad(field, sides, mode="edge")
    rows = window.row - sides[0][0] + 0.5 + np.arange(field.shape[0])
    columns = window.column - sides[1][0] + 0.5 + np.arange(field.shape[1])
    east = grid.west + np.clip(columns, 0, grid.columns) * grid.cell_east
    north = grid.north - np.clip(rows, 0, grid.rows) * grid.cell_north
    tracer = contourpy.contour_generator(east, north, field, name="serial", fill_type="OuterOffset")
    found: Any = tracer.filled(0.0, np.inf)
    polygons = []
    for outline, ring_offsets in zip(*found, strict=True):
        rings = [outline[a:b] for a, b in pairwise(ring_offsets)]
        polygon = Polygon(rings[0], rings[1:])
        polygons.append(polygon if polygon.is_valid else shapely.make_valid(polygon))
    return [p for p in polygons if p.area > 0]


def _segments(edges: np.ndarray) -> Iterator[tuple[np.ndarray, np.ndarray]]:
    """Both ends (x, y, z) of each edge of a table."""
    for e in edges:
        yield e[:3], np.array([e[0] + e[3] * e[5], e[1] + e[4] * e[5], e[2] + e[6] * e[5]])


def _chains(element: Element) -> list[np.ndarray]:
    """Sloping edges joined end to end, each (n, 3) x, y, z."""
    chains: list[list[np.ndarray]] = []
    for a, b in _segments(element.edges):
        if chains and np.allclose(chains[-1][-1], a, atol=1e-6):
            chains[-1].append(b)
        else:
            chains.append([a, b])
    return [np.array(chain) for chain in chains]


def _densified(chain: np.ndarray, step: float) -> np.ndarray:
    """A chain with points at most a step apart."""
    pieces: Sequence[np.ndarray] = [
        a + np.linspace(0, 1, max(int(np.ceil(np.hypot(*(b - a)[:2]) / step)), 1), endpoint=False)[:, None] * (b - a)
        for a, b in pairwise(chain)
    ]
    return np.vstack([*pieces, chain[-1:]])


def _flush(run: list[np.ndarray], over: float) -> Iterator[tuple[str, np.ndarray]]:
    """A finished run, without the points that lie on a straight line between others."""
    if len(run) < 2:
        return
    points = np.array(run)
    before, after = points[1:-1] - points[:-2], points[2:] - points[1:-1]
    bend = np.linalg.norm(np.cross(before, after), axis=1)
    straight = bend <= 1e-9 * np.linalg.norm(before, axis=1) * np.linalg.norm(after, axis=1)
    keep = np.r_[True, ~straight, True]
    if np.hypot(*(points[-1] - points[0])[:2]) > 1e-6 or len(points) > 2:
        yield ("top of fill" if over > 0 else "toe of cut"), points[keep]


