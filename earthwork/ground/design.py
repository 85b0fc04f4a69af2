"""Built grades as a surface: pads and roads with side slopes that daylight on the existing ground.

At a place outside all pads, with existing ground ``E``, the slopes that reach it give

    fill face  F = max over elements of (edge grade − height of its fill slope),
    cut face   C = min over elements of (edge grade + height of its cut slope),
    finished   = F where E < F,  else C where E > C,  else E.

Inside a pad the grade of the pad holds. Each value is a function of the place alone, so the surface can be
read in any windows; what a slope reaches (:mod:`earthwork.ground.reach`) is found once, when the design is
built.
"""

from __future__ import annotations

import difflib
from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np
import shapely

from earthwork.errors import GroundError
from earthwork.ground.elements import Element, Frame, PadShape, RoadShape, pad_element, road_element
from earthwork.ground.grid import Grid, Window
from earthwork.ground.reach import (
    TILE,
    GroundTiles,
    Lattice,
    TileKey,
    element_faces,
    element_grade,
    element_inside,
    slope_reach,
    unpacked,
)
from earthwork.ground.surfaces import Surface, SurfaceReader

#: Pads may overlap by this area [m²], or by a millionth of the smaller one, before it is an error.
SLIVER_M2 = 0.01

UNTOUCHED, FILL_SLOPE, CUT_SLOPE, INSIDE = 0, 1, 2, 3


@dataclass(frozen=True)
class Built:
    """A window of a design: all arrays (height, width)."""

    z: np.ndarray  #: finished grade [m]
    ground: np.ndarray  #: existing ground [m]
    kind: np.ndarray  #: int8: UNTOUCHED, FILL_SLOPE, CUT_SLOPE or INSIDE
    owner: np.ndarray  #: int32: index of the element that gives the grade, −1 for existing ground
    #: int32: index of an element whose cut slope runs through another's fill slope here, −1 for none
    clash: np.ndarray
    clash_m: np.ndarray  #: by how much [m]


@dataclass(frozen=True)
class Design:
    """Pads and roads on existing ground; a :class:`earthwork.ground.surfaces.Surface`.

    Args:
        grid: the analysis grid.
        existing: existing ground on it.
        elements: pads first, then roads; the ground belongs to the first whose footprint it lies in.
        slopes: per tile the elements whose slopes reach it, with the cells that they reach (None: all that
            are active).
        inside: per tile the elements whose footprint touches it.
    """

    grid: Grid
    existing: Surface
    elements: tuple[Element, ...]
    slopes: dict[TileKey, tuple[tuple[int, np.ndarray | None], ...]] = field(repr=False)
    inside: dict[TileKey, tuple[int, ...]] = field(repr=False)
    resampling: str = "exact"

    @property
    def dtype(self) -> np.dtype:
        return np.dtype(np.float64)

    @property
    def block(self) -> tuple[int, int] | None:
        return self.existing.block

    @property
    def block_start(self) -> tuple[int, int]:
        return self.existing.block_start

    @property
    def lattice(self) -> Lattice:
        return Lattice(self.grid)

    @property
    def pads(self) -> tuple[Element, ...]:
        return tuple(e for e in self.elements if e.kind == "pad")

    def tiles(self) -> list[TileKey]:
        """Tiles where the design may change the ground, from north to south."""
        return sorted(set(self.slopes) | set(self.inside))

    def index(self, name: str) -> int:
        """Index of the pad or road of a name.

        Raises:
            GroundError: there is none; the message names the nearest.
        """
        names = [e.name for e in self.elements]
        if name in names:
            return names.index(name)
        near = difflib.get_close_matches(name, names, n=1)
        raise GroundError(
            f'there is no pad or road "{name}"' + (f'; did you mean "{near[0]}"?' if near else "")
        )

    def reader(self) -> DesignReader:
        return DesignReader(self)


class DesignReader:
    """One thread's way to a design."""

    def __init__(self, design: Design) -> None:
        self.design = design
        self.existing: SurfaceReader = design.existing.reader()

    def close(self) -> None:
        self.existing.close()

    def read(self, window: Window) -> np.ndarray:
        """Finished (or subgrade) elevations [m] of the built grade, float64 (height, width); NaN = no
        data.
        """
        return self.built(window).z

    def built(self, window: Window) -> Built:
        """The built grade of a window, with what gave it."""
        ground = self.existing.read(window).astype(np.float64)
        shape = ground.shape
        kind, owner = np.zeros(shape, np.int8), np.full(shape, -1, np.int32)
        whole = Built(ground.copy(), ground, kind, owner, np.full(shape, -1, np.int32), np.zeros(shape))
        for key in _tiles_of(window):
            if key not in self.design.slopes and key not in self.design.inside:
                continue
            part = _overlap(self.design.lattice.tile(key), window)
            rows = slice(part.row - window.row, part.row - window.row + part.height)
            columns = slice(part.column - window.column, part.column - window.column + part.width)
            self._build(key, part, Built(*(a[rows, columns] for a in vars(whole).values())))
        return whole

    def _build(self, key: TileKey, window: Window, built: Built) -> None:
        """Write the design into one window that lies in one tile; ``built.z`` starts as existing ground."""
        design, lattice = self.design, self.design.lattice
        ground = built.ground
        fill, cut = np.full(ground.shape, -np.inf), np.full(ground.shape, np.inf)
        filler, cutter = np.full(ground.shape, -1, np.int32), np.full(ground.shape, -1, np.int32)
        tile = lattice.tile(key)
        for index, bits in design.slopes.get(key, ()):
            f, c = element_faces(design.elements[index], ground, lattice, window)
            mask = unpacked(bits, tile)
            if mask is not None:
                mask = mask[
                    window.row - tile.row : window.row - tile.row + window.height,
                    window.column - tile.column : window.column - tile.column + window.width,
                ]
                f[~mask], c[~mask] = -np.inf, np.inf
            higher, lower = (f > fill) & (f > ground), (c < cut) & (c < ground)
            fill[higher], filler[higher] = f[higher], index
            cut[lower], cutter[lower] = c[lower], index
        _settle(built, fill, cut, filler, cutter)
        for index in design.inside.get(key, ()):
            inside = element_inside(design.elements[index], lattice, window)
            inside &= built.kind != INSIDE
            if inside.any():
                element_grade(design.elements[index], lattice, window, inside, built.z)
                built.kind[inside], built.owner[inside], built.clash[inside] = INSIDE, index, -1


def _settle(built: Built, fill: np.ndarray, cut: np.ndarray, filler: np.ndarray, cutter: np.ndarray) -> None:
    """Fill where a fill face lies above the ground, else cut; note where both would be."""
    filled = filler >= 0
    dug = (cutter >= 0) & ~filled
    both = filled & (cutter >= 0)
    built.z[filled], built.kind[filled], built.owner[filled] = fill[filled], FILL_SLOPE, filler[filled]
    built.z[dug], built.kind[dug], built.owner[dug] = cut[dug], CUT_SLOPE, cutter[dug]
    built.clash[both], built.clash_m[both] = cutter[both], (fill - cut)[both]


def _tiles_of(window: Window) -> list[TileKey]:
    rows = range(window.row // TILE, -(-(window.row + window.height) // TILE))
    columns = range(window.column // TILE, -(-(window.column + window.width) // TILE))
    return [(row, column) for row in rows for column in columns]


def _overlap(one: Window, other: Window) -> Window:
    row, column = max(one.row, other.row), max(one.column, other.column)
    return Window(
        row, column,
        min(one.row + one.height, other.row + other.height) - row,
        min(one.column + one.width, other.column + other.width) - column,
    )  # fmt: skip


def build_design(
    grid: Grid,
    existing: Surface,
    pads: Sequence[PadShape],
    roads: Sequence[RoadShape] = (),
    *,
    mitred: bool = False,
    retaining: shapely.Geometry | None = None,
) -> Design:
    """Build pads and roads on existing ground.

    Args:
        grid, existing: the analysis grid and the ground on it.
        pads, roads: what is built; pads must not overlap, roads end where they enter a pad.
        mitred: slopes meet in a line at convex corners instead of running around them as a cone.
        retaining: lines [CRS unit] along the edges where a slope may not spread.

    Raises:
        GroundError: pads that overlap or share a name, a pad outside the grid, a fall as steep as the slopes.
    """
    check_pads(grid, pads, roads)
    frame = Frame.of(grid)
    elements = [pad_element(pad, frame, mitred=mitred, retaining=retaining) for pad in pads]
    taken = shapely.union_all([pad.polygon for pad in pads])
    for road in roads:
        element = road_element(road, frame, taken=taken, retaining=retaining)
        if element is not None:
            elements.append(element)
            taken = taken.union(element.footprint)
    lattice = Lattice(grid)
    reader = existing.reader()
    try:
        tiles = GroundTiles(reader, lattice, elements)
        slopes: dict[TileKey, list[tuple[int, np.ndarray | None]]] = {}
        for index in range(len(elements)):
            for key, bits in slope_reach(index, tiles).items():
                slopes.setdefault(key, []).append((index, bits))
    finally:
        reader.close()
    return Design(
        grid,
        existing,
        tuple(elements),
        {key: tuple(value) for key, value in slopes.items()},
        {key: tuple(value) for key, value in tiles.inside_of.items()},
    )


def check_pads(grid: Grid, pads: Sequence[PadShape], roads: Sequence[RoadShape] = ()) -> None:
    """Refuse pads with faults, all in one message; see :func:`pad_faults`.

    Raises:
        GroundError: there are any.
    """
    faults = pad_faults(grid, pads, roads)
    if faults:
        raise GroundError("design: " + "\n  ".join(faults))


def pad_faults(grid: Grid, pads: Sequence[PadShape], roads: Sequence[RoadShape] = ()) -> list[str]:
    """Pads that overlap, share a name, have no grade or no area, or lie outside the ground."""
    faults = []
    names = [pad.name for pad in pads] + [road.name for road in roads]
    for name in sorted({n for n in names if names.count(n) > 1}):
        faults.append(
            f'the name "{name}" is given {names.count(name)} times; names of pads and roads must be unique'
        )
    box = shapely.box(*grid.bounds)
    for pad in pads:
        if pad.polygon.is_empty or pad.polygon.area == 0:
            faults.append(f'pad "{pad.name}" has no area')
        elif not np.isfinite(pad.elevation_m) and not pad.warped:
            faults.append(f'pad "{pad.name}" has no grade; give its elevation')
        elif not box.covers(pad.polygon):
            east, north = pad.polygon.centroid.coords[0]
            west, south, east_end, north_end = grid.bounds
            faults.append(
                f'pad "{pad.name}" at ({east:.2f}, {north:.2f}) is not wholly on the ground that is known: '
                f"{west:.2f} to {east_end:.2f} east, {south:.2f} to {north_end:.2f} north. "
                "Move it, or extend the surface"
            )
    return faults + _overlaps(grid, pads)


def _overlaps(grid: Grid, pads: Sequence[PadShape]) -> list[str]:
    polygons = np.array([pad.polygon for pad in pads], dtype=object)
    scale = (grid.unit_m * grid.ground_scale) ** 2
    faults = []
    for one, other in zip(*shapely.STRtree(polygons).query(polygons, predicate="intersects"), strict=True):
        if one >= other:
            continue
        common = polygons[one].intersection(polygons[other])
        area = common.area * scale
        if area > max(SLIVER_M2, 1e-6 * min(polygons[one].area, polygons[other].area) * scale):
            east, north = common.representative_point().coords[0]
            faults.append(
                f'pads "{pads[one].name}" and "{pads[other].name}" overlap by {area:.3g} m² near '
                f"({east:.2f}, {north:.2f}); a place has one grade. Trim one of them"
            )
    return faults
