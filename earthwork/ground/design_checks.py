"""What a built grade cannot do as drawn: where no slope fits, and how high a wall would have to be."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
import shapely

from earthwork.errors import Warning
from earthwork.ground.design import CUT_SLOPE, FILL_SLOPE, INSIDE, UNTOUCHED, Built, Design, DesignReader
from earthwork.ground.elements import Element, Frame
from earthwork.ground.grid import Window
from earthwork.ground.reach import Lattice, TileKey, element_inside
from earthwork.ground.slopes import faces_at, near_edges
from earthwork.units import UnitSystem

#: Steps lower than this are within what a grader leaves, and are not called walls [m].
WALL_OVER_M = 0.05

#: Pads with more cut or fill than this are believed to have a wrong elevation [m].
FAR_M = 60.0

_RULES = {
    "no-room-for-slope": "no slope fits between {names}: a wall of {height} would be needed at {place}. "
    "Move them apart, bring their grades together, or mark a retaining edge",
    "slope-off-data": "the {kind} slope of {names} does not meet the ground inside the data: it is still {height} "
    "off at {place}. Extend the surface, or mark a retaining edge",
    "slope-over-limits": "the {kind} slope of {names} runs over the limits: at {place} a wall of {height} would "
    "keep it inside",
    "retaining-wall": "the retaining edge of {names} holds up to {height} at {place}",
    "far-from-ground": "{names} lies in {kind} of {height} at {place}; check that its elevation is in the site's unit and "
    "vertical datum",
    "step-at-joint": "{names} meet with a step of {height} at {place}",
}


@dataclass(frozen=True)
class Finding:
    """One thing that a design cannot do as drawn.

    ``code`` is no-room-for-slope, slope-off-data, slope-over-limits, retaining-wall, far-from-ground or step-at-joint;
    ``kind`` is "fill" or "cut" where it matters; ``height_m`` is the wall that would be needed, at its highest place (the
    depth of cut or fill where a pad is far from the ground).
    """

    code: str
    names: tuple[str, ...]
    easting: float
    northing: float
    height_m: float
    kind: str = ""

    def text(self, units: UnitSystem) -> str:
        """A sentence for people, in their units."""
        names = " and ".join(f'"{name}"' for name in dict.fromkeys(self.names))
        height = f"{units.from_si(self.height_m, 'length'):.2f} {units.label('length')}"
        place = f"({self.easting:.2f}, {self.northing:.2f})"
        return _RULES[self.code].format(names=names, height=height, place=place, kind=self.kind)

    def warning(self, units: UnitSystem) -> Warning:
        return Warning(self.code, self.text(units))


@dataclass(frozen=True)
class SlopeSummary:
    """Side slopes of one pad or road: greatest height from its edge to where they meet the ground, and plan area."""

    name: str
    fill_height_m: float
    cut_height_m: float
    fill_area_m2: float
    cut_area_m2: float


@dataclass(frozen=True)
class Inspection:
    """What :func:`inspect_design` found."""

    findings: tuple[Finding, ...]
    slopes: tuple[SlopeSummary, ...]  #: one for each element of the design, in its order


def inspect_design(design: Design, limits: shapely.Geometry | None = None) -> Inspection:
    """Look over a whole design.

    Args:
        design: the built grade.
        limits: the polygons that nothing may leave [CRS unit].
    """
    look = _Look(design, limits)
    reader = design.reader()
    try:
        for key in design.tiles():
            look.tile(reader, key)
        for index in range(len(design.elements)):
            look.edges(reader, index)
    finally:
        reader.close()
    slopes = tuple(
        SlopeSummary(element.name, *(float(v) for v in row))
        for element, row in zip(design.elements, look.slopes, strict=True)
    )
    order = list(_RULES)
    findings = sorted(look.worst.values(), key=lambda f: (order.index(f.code), -f.height_m, f.names))
    return Inspection(tuple(findings), slopes)


class _Look:
    """One walk over a design, keeping the worst place of each kind."""

    def __init__(self, design: Design, limits: shapely.Geometry | None) -> None:
        self.design = design
        self.lattice: Lattice = design.lattice
        self.frame = Frame.of(design.grid)
        self.limits = limits
        if limits is not None:
            shapely.prepare(limits)
        self.worst: dict[tuple[str, ...], Finding] = {}
        self.slopes = np.zeros((len(design.elements), 4))

    def keep(self, code: str, indices: tuple[int, ...], kind: str, x: float, y: float, height: float) -> None:
        """Note a finding when it is over the threshold and the worst of its kind between the same elements."""
        if height <= WALL_OVER_M:
            return
        names = tuple(sorted({self.design.elements[i].name for i in indices}))
        known = self.worst.get((code, kind, *names))
        if known is None or height > known.height_m:
            east, north = self.frame.point(x, y)
            self.worst[code, kind, *names] = Finding(code, names, east, north, float(height), kind)

    def tile(self, reader: DesignReader, key: TileKey) -> None:
        """Slope heights and areas, clashes, edges of the data, and limits, in one tile (read with a rim)."""
        core = self.lattice.tile(key)
        window, inner = _with_rim(core, self.design.grid.rows, self.design.grid.columns)
        built = reader.built(window)
        x0, y0 = self.lattice.first(window)
        own = np.zeros(built.z.shape, bool)
        own[inner] = True
        sloped = own & ((built.kind == FILL_SLOPE) | (built.kind == CUT_SLOPE))
        gap = np.abs(built.z - built.ground)
        self._keep_worst("far-from-ground", built, own & (built.kind == INSIDE) & (gap > FAR_M), gap, x0, y0)
        if not sloped.any() and self.limits is None:
            return
        self._summarise(built, sloped, x0, y0)
        open_edge = sloped & _beside_nothing(built.z, window, self.design)
        self._keep_worst("slope-off-data", built, open_edge, gap, x0, y0)
        clash = own & (built.clash >= 0)
        for i, j in np.unique(np.column_stack([built.owner[clash], built.clash[clash]]), axis=0):
            here = clash & (built.owner == i) & (built.clash == j)
            row, column = _where_most(here, built.clash_m)
            height = built.clash_m[row, column]
            self.keep("no-room-for-slope", (i, j), "", *self._place(x0, y0, row, column), height)
        if self.limits is not None:
            touched = built.kind != UNTOUCHED
            inside = np.ones(built.z.shape, bool)
            rows, columns = np.nonzero(_grown(touched))
            x, y = x0 + columns * self.lattice.dx, y0 + rows * self.lattice.dy
            east, north = self.frame.west + x / self.frame.metres, self.frame.north - y / self.frame.metres
            inside[rows, columns] = shapely.contains_xy(self.limits, east, north)
            self._keep_worst("slope-over-limits", built, own & touched & ~inside & _grown(inside), gap, x0, y0)

    def _place(self, x0: float, y0: float, row: int, column: int) -> tuple[float, float]:
        return x0 + column * self.lattice.dx, y0 + row * self.lattice.dy

    def _keep_worst(
        self, code: str, built: Built, cells: np.ndarray, height: np.ndarray, x0: float, y0: float
    ) -> None:
        for index in np.unique(built.owner[cells]):
            for kind, sign in (("fill", 1), ("cut", -1)):
                here = cells & (built.owner == index) & (sign * (built.z - built.ground) > 0)
                if here.any():
                    row, column = _where_most(here, height)
                    place = self._place(x0, y0, row, column)
                    self.keep(code, (int(index),), kind, *place, height[row, column])

    def _summarise(self, built: Built, sloped: np.ndarray, x0: float, y0: float) -> None:
        for index in np.unique(built.owner[sloped]):
            rows, columns = np.nonzero(sloped & (built.owner == index))
            x, y = x0 + columns * self.lattice.dx, y0 + rows * self.lattice.dy
            faces = _faces(self.design.elements[index], x, y)
            z = built.z[rows, columns]
            filled = built.kind[rows, columns] == FILL_SLOPE
            summary = self.slopes[index]
            summary[0] = max(summary[0], (faces.fill_edge - z)[filled].max(initial=0.0))
            summary[1] = max(summary[1], (z - faces.cut_edge)[~filled].max(initial=0.0))
            summary[2] += np.count_nonzero(filled) * self.design.grid.cell_area_m2
            summary[3] += np.count_nonzero(~filled) * self.design.grid.cell_area_m2

    def edges(self, reader: DesignReader, index: int) -> None:
        """Steps along the edges of one element: what stands beside it outside of its own slopes, and its walls."""
        element = self.design.elements[index]
        for key in sorted(self.lattice.tiles_of_edges(np.vstack([element.edges, element.walls]))):
            window = self.lattice.tile(key)
            built = reader.built(window)
            x0, y0 = self.lattice.first(window)
            beside = np.isfinite(built.z) & ~element_inside(element, self.lattice, window)
            for table, walls in ((element.edges, False), (element.walls, True)):
                near = np.zeros(built.z.shape, bool)
                near_edges(x0, y0, self.lattice.dx, self.lattice.dy, table, self.lattice.diagonal, near)
                rows, columns = np.nonzero(near & beside)
                x, y = x0 + columns * self.lattice.dx, y0 + rows * self.lattice.dy
                if walls:
                    self._walls(index, x, y, built.z[rows, columns])
                else:
                    self._steps(index, x, y, built, rows, columns)

    def _walls(self, index: int, x: np.ndarray, y: np.ndarray, z: np.ndarray) -> None:
        walls = self.design.elements[index].walls
        for px, py, height in zip(x, y, z, strict=True):
            qx, qy, grade, square = _on_edges(walls, px, py)
            if square <= _on_edges(self.design.elements[index].edges, px, py)[3]:
                self.keep("retaining-wall", (index,), "", qx, qy, abs(grade - height))

    def _steps(
        self, index: int, x: np.ndarray, y: np.ndarray, built: Built, rows: np.ndarray, columns: np.ndarray
    ) -> None:
        element = self.design.elements[index]
        faces = _faces(element, x, y)
        z, owner, kind = (a[rows, columns] for a in (built.z, built.owner, built.kind))
        over = np.maximum(faces.fill - z, z - faces.cut)
        for n in np.flatnonzero((over > 1e-3) & (owner >= 0)):
            qx, qy, grade, square = _on_edges(element.edges, x[n], y[n])
            if len(element.walls) and _on_edges(element.walls, x[n], y[n])[3] <= square:
                continue
            other = self.design.elements[owner[n]]
            if kind[n] == INSIDE:
                code = "step-at-joint" if "road" in (element.kind, other.kind) else "no-room-for-slope"
                self.keep(code, (index, owner[n]), "", qx, qy, abs(other.grade_at(qx, qy)[0] - grade))
                continue
            face = _faces(other, np.array([qx]), np.array([qy]))
            height = face.fill[0] - grade if kind[n] == FILL_SLOPE else grade - face.cut[0]
            self.keep("no-room-for-slope", (index, owner[n]), "", qx, qy, height)


@dataclass(frozen=True)
class _Faces:
    fill: np.ndarray
    cut: np.ndarray
    fill_edge: np.ndarray
    cut_edge: np.ndarray


def _faces(element: Element, x: np.ndarray, y: np.ndarray) -> _Faces:
    """Fill and cut faces of an element at places, and the grades of the edges that they start from [m]."""
    faces = _Faces(*(np.empty(len(x)) for _ in range(4)))
    faces_at(x, y, element.edges, element.slope.factors, element.mitred, *vars(faces).values())
    return faces


def _on_edges(edges: np.ndarray, x: float, y: float) -> tuple[float, float, float, float]:
    """The nearest place on edges: x, y, grade [m], and the square of its distance (infinite without edges)."""
    if not len(edges):
        return x, y, np.nan, np.inf
    along = (x - edges[:, 0]) * edges[:, 3] + (y - edges[:, 1]) * edges[:, 4]
    along = np.clip(along, 0.0, edges[:, 5])
    qx, qy = edges[:, 0] + along * edges[:, 3], edges[:, 1] + along * edges[:, 4]
    square = (qx - x) ** 2 + (qy - y) ** 2
    e = int(np.argmin(square))
    return float(qx[e]), float(qy[e]), float(edges[e, 2] + edges[e, 6] * along[e]), float(square[e])


def _with_rim(core: Window, rows: int, columns: int) -> tuple[Window, tuple[slice, slice]]:
    """A window one cell wider where the grid goes on, and where the core lies in it."""
    row, column = max(core.row - 1, 0), max(core.column - 1, 0)
    stop_row, stop_column = min(core.row + core.height + 1, rows), min(core.column + core.width + 1, columns)
    top, left = core.row - row, core.column - column
    inner = slice(top, top + core.height), slice(left, left + core.width)
    return Window(row, column, stop_row - row, stop_column - column), inner


def _neighbours(mask: np.ndarray, outside: bool) -> Iterator[np.ndarray]:
    """A mask moved by one cell in each of the eight directions."""
    padded = np.pad(mask, 1, constant_values=outside)
    rows, columns = mask.shape
    for i in range(3):
        for j in range(3):
            if (i, j) != (1, 1):
                yield padded[i : i + rows, j : j + columns]


def _grown(mask: np.ndarray) -> np.ndarray:
    """Cells that are in a mask or next to it."""
    return np.logical_or.reduce([mask, *_neighbours(mask, False)])


def _beside_nothing(z: np.ndarray, window: Window, design: Design) -> np.ndarray:
    """Cells beside missing ground, or at the edge of the grid."""
    beside = np.logical_or.reduce(list(_neighbours(np.isnan(z), False)))
    if window.row == 0:
        beside[0] = True
    if window.column == 0:
        beside[:, 0] = True
    if window.row + window.height == design.grid.rows:
        beside[-1] = True
    if window.column + window.width == design.grid.columns:
        beside[:, -1] = True
    return beside


def _where_most(cells: np.ndarray, values: np.ndarray) -> tuple[int, int]:
    row, column = np.unravel_index(int(np.argmax(np.where(cells, values, -np.inf))), cells.shape)
    return int(row), int(column)
