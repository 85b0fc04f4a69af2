"""Areas on the ground: overlaps of zones, unions, spreads, and polygons as rings in cells of a grid."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import TypeAlias

import numpy as np
import shapely

from earthwork.errors import GroundError, Warning
from earthwork.files.vectors import NamedPolygon
from earthwork.ground.grid import Grid

Area: TypeAlias = shapely.Polygon | shapely.MultiPolygon

#: Overlaps under this ground area [m²], or this part of the smaller polygon, are slips of the pen.
_SLIVER_M2 = 0.01
_SLIVER_PART = 1e-6

#: Overlaps under this ground area [m²] are rounding of coordinates and are not spoken of.
_ROUNDING_M2 = 1e-9

#: Segments per quarter circle of a spread: its area is exact to 0.04 %.
_QUARTER_SEGMENTS = 32


def square_metres(grid: Grid) -> float:
    """Ground area [m²] of one square CRS unit.

    >>> square_metres(Grid(1, 1, 0, 0, 1, 1, unit_m=0.5, ground_scale=2.0))
    1.0
    """
    return (grid.unit_m * grid.ground_scale) ** 2


def check_overlaps(
    polygons: Sequence[NamedPolygon], *, square_m: float = 1.0
) -> tuple[list[NamedPolygon], tuple[Warning, ...]]:
    """Zones that share no ground: one for each name; slivers go to the first, overlaps are refused.

    Args:
        polygons: zones in the order of the file.
        square_m: ground area [m²] of one square CRS unit, see :func:`square_metres`.

    Raises:
        GroundError: two zones overlap by more than 0.01 m² and more than a millionth of the smaller.
    """
    zones = merge_names(polygons)
    shapes = np.array([z.geometry for z in zones], dtype=object)
    first, second = shapely.STRtree(shapes).query(shapes, predicate="intersects")
    pairs = np.unique(np.column_stack([first, second])[first < second], axis=0)
    if len(pairs) == 0:
        return zones, ()
    shared = shapely.area(shapely.intersection(shapes[pairs[:, 0]], shapes[pairs[:, 1]])) * square_m
    areas = shapely.area(shapes) * square_m
    smaller = np.minimum(areas[pairs[:, 0]], areas[pairs[:, 1]])
    _refuse_overlaps(zones, pairs, shared, (shared > _SLIVER_M2) & (shared > _SLIVER_PART * smaller))
    sliver = np.flatnonzero(shared > _ROUNDING_M2)
    for k in sliver:
        i, j = pairs[k]
        shapes[j] = only_polygons(shapely.difference(shapes[j], shapes[i]))
    if sliver.size == 0:
        return zones, ()
    worst = sliver[np.argmax(shared[sliver])]
    message = (
        f"zones overlap by slivers in {sliver.size} place{'s' if sliver.size > 1 else ''}, "
        f"{shared[sliver].sum():.2g} m² in all, the largest {shared[worst]:.2g} m² between "
        f"{zones[pairs[worst, 0]].name!r} and {zones[pairs[worst, 1]].name!r}; they are given to the first zone of "
        "each pair"
    )
    return [replace(z, geometry=s) for z, s in zip(zones, shapes, strict=True)], (Warning("zone-slivers", message),)


def _refuse_overlaps(zones: list[NamedPolygon], pairs: np.ndarray, shared: np.ndarray, bad: np.ndarray) -> None:
    worst = np.flatnonzero(bad)[np.argsort(-shared[bad], kind="stable")]
    if worst.size == 0:
        return
    lines = [f"{zones[pairs[k, 0]].name!r} and {zones[pairs[k, 1]].name!r} by {shared[k]:.6g} m²" for k in worst[:5]]
    more = f", and {worst.size - 5} more pairs" if worst.size > 5 else ""
    where = zones[0].where or "zones"
    raise GroundError(
        f"{where}: zones overlap: {'; '.join(lines)}{more}. Each piece of ground must lie in one zone only; "
        "cut the overlap out of one of the two"
    )


def merge_names(polygons: Sequence[NamedPolygon]) -> list[NamedPolygon]:
    """Features of one name as one polygon, in the order in which the names first come."""
    groups: dict[str, list[NamedPolygon]] = {}
    for polygon in polygons:
        groups.setdefault(polygon.name, []).append(polygon)
    return [
        group[0] if len(group) == 1 else replace(group[0], geometry=union_area(group), heights=None)
        for group in groups.values()
    ]


def union_area(polygons: Sequence[NamedPolygon | Area]) -> Area:
    """All ground that lies in at least one of the polygons; an empty polygon for none."""
    shapes = [p.geometry if isinstance(p, NamedPolygon) else p for p in polygons]
    return only_polygons(shapely.union_all(shapes))


def only_polygons(shape: shapely.Geometry) -> Area:
    """The parts of a shape that have an area: points and lines that cutting leaves behind are dropped."""
    if isinstance(shape, shapely.Polygon | shapely.MultiPolygon):
        return shape
    parts = [p for p in shapely.get_parts(shape) if isinstance(p, shapely.Polygon) and not p.is_empty]
    return shapely.MultiPolygon(parts) if len(parts) != 1 else parts[0]


def spread(area: Area, distance_m: float, grid: Grid) -> Area:
    """An area and all ground within a distance of it, corners rounded.

    Args:
        area: in the grid's CRS.
        distance_m: on the ground [m], 0 or more.

    >>> grid = Grid(1, 1, 0, 0, 1, 1, ground_scale=2.0)      # 2 m on the ground are 1 on the map
    >>> [round(v, 9) for v in spread(shapely.box(0, 0, 10, 10), 2.0, grid).bounds]
    [-1.0, -1.0, 11.0, 11.0]
    """
    if distance_m == 0:
        return area
    distance = distance_m / (grid.unit_m * grid.ground_scale)
    return only_polygons(shapely.buffer(area, distance, quad_segs=_QUARTER_SEGMENTS))


def ground_area_m2(area: Area, grid: Grid) -> float:
    """Area on the ground [m²] of a polygon in the grid's CRS."""
    return float(shapely.area(area)) * square_metres(grid)


@dataclass(frozen=True)
class Rings:
    """Closed rings of polygons in cells of a grid, for exact shares of cells by signed areas.

    Outer rings run so that their western side goes down the rows (counter-clockwise on the map), holes the other way:
    the sum over edges of ``Δrow`` × (share of the cell east of the edge) is + inside and cancels
        in holes.

    Attributes:
        xs, ys: column and row of each vertex [cells]; the last vertex of a ring repeats its first.
        ring_offsets: ring k has the vertices ``ring_offsets[k]`` to ``ring_offsets[k + 1]``.
        polygon_offsets: polygon i has the rings ``polygon_offsets[i]`` to ``polygon_offsets[i + 1]``.
        bounds: (column, row) least and greatest of each polygon, shape (n, 4) [cells].
    """

    xs: np.ndarray
    ys: np.ndarray
    ring_offsets: np.ndarray
    polygon_offsets: np.ndarray
    bounds: np.ndarray

    def __len__(self) -> int:
        return len(self.polygon_offsets) - 1


def rings_on(grid: Grid, polygons: Sequence[NamedPolygon | Area]) -> Rings:
    """Polygons as :class:`Rings` in the cells of a grid.

    >>> rings = rings_on(Grid(4, 4, 0.0, 4.0, 1.0, 1.0), [shapely.box(1, 1, 3, 2)])
    >>> rings.bounds.tolist()
    [[1.0, 2.0, 3.0, 3.0]]
    """
    shapes = [p.geometry if isinstance(p, NamedPolygon) else p for p in polygons]
    if not shapes:
        none = np.zeros(0)
        return Rings(none, none, np.zeros(1, np.int64), np.zeros(1, np.int64), np.zeros((0, 4)))
    many = [
        s if isinstance(s, shapely.MultiPolygon) else shapely.MultiPolygon([s] if not s.is_empty else [])
        for s in shapes
    ]
    _, points, (ring_offsets, part_offsets, polygon_parts) = shapely.to_ragged_array(shapely.force_2d(many))
    ring_offsets, part_offsets = ring_offsets.astype(np.int64), part_offsets.astype(np.int64)
    order = _oriented(points, ring_offsets, part_offsets)
    xs = np.ascontiguousarray((points[order, 0] - grid.west) / grid.cell_east)
    ys = np.ascontiguousarray((grid.north - points[order, 1]) / grid.cell_north)
    west, south, east, north = shapely.bounds(np.array(many, dtype=object)).T
    bounds = np.column_stack(
        [
            (west - grid.west) / grid.cell_east,
            (grid.north - north) / grid.cell_north,
            (east - grid.west) / grid.cell_east,
            (grid.north - south) / grid.cell_north,
        ]
    )
    return Rings(xs, ys, ring_offsets, part_offsets[polygon_parts.astype(np.int64)], bounds)


def _oriented(points: np.ndarray, ring_offsets: np.ndarray, part_offsets: np.ndarray) -> np.ndarray:
    """Order of vertices in which outer rings run counter-clockwise and holes clockwise."""
    start, count = ring_offsets[:-1], np.diff(ring_offsets)
    outer = np.zeros(len(count), bool)
    outer[part_offsets[:-1][np.diff(part_offsets) > 0]] = True
    # from the first vertex of each ring: coordinates of millions would drown the area of a small ring
    x, y = (points - np.repeat(points[start], count, axis=0)).T
    cross = np.zeros(len(points))
    cross[:-1] = x[:-1] * y[1:] - x[1:] * y[:-1]
    cross[ring_offsets[1:] - 1] = 0.0
    turned = np.repeat((np.add.reduceat(cross, start) > 0) != outer, count)
    order = np.arange(len(points))
    mirror = np.repeat(start + ring_offsets[1:] - 1, count) - order
    return np.where(turned, mirror, order)
