"""Pads and roads as the elements of a built grade: edges with elevations, and the surface inside them."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field, replace
from itertools import pairwise
from typing import Any

import numpy as np
import shapely
from shapely.geometry import LineString, MultiPolygon, Polygon
from shapely.geometry.polygon import orient

from earthwork.errors import GroundError
from earthwork.ground.grid import Grid
from earthwork.ground.slopes import EDGE_COLUMNS, SHARPEST_MITRE

#: Two vertices nearer than this [m] are one.
_SAME_M = 1e-6
#: How near a retaining line must run to an edge to make it a retaining edge [m].
RETAINING_WITHIN_M = 0.25


@dataclass(frozen=True)
class SideSlope:
    """Side slopes as ratios H:V, with level benches every so many metres of height (None: no benches)."""

    cut: float
    fill: float
    bench_height_m: float | None = None
    bench_width_m: float = 0.0

    @property
    def factors(self) -> tuple[float, float, float, float]:
        """Fill gradient, cut gradient, bench height (0: none), bench width [m]."""
        return 1 / self.fill, 1 / self.cut, self.bench_height_m or 0.0, self.bench_width_m


@dataclass(frozen=True)
class PadShape:
    """A pad to be built.

    Args:
        name: its name, unique.
        polygon: Polygon or MultiPolygon [CRS unit]; with ``warped``, its vertices carry elevations [m].
        elevation_m: its grade, at ``anchor``; not used when ``warped``.
        fall: how steeply it falls, rise per run, 0 for a level pad.
        fall_azimuth: where it falls to, degrees clockwise from grid north.
        anchor: where ``elevation_m`` holds [CRS unit]; None: the centroid.
        warped: the vertices of the polygon give the grade, with triangles between them.
        slope: side slopes.
    """

    name: str
    polygon: Any
    elevation_m: float
    slope: SideSlope
    fall: float = 0.0
    fall_azimuth: float = 0.0
    anchor: tuple[float, float] | None = None
    warped: bool = False

    def raised(self, shift_m: float) -> PadShape:
        """The same pad at another elevation."""
        polygon = self.polygon
        if self.warped:
            polygon = shapely.transform(polygon, lambda c: c + [0.0, 0.0, shift_m], include_z=True)
        return replace(self, polygon=polygon, elevation_m=self.elevation_m + shift_m)


@dataclass(frozen=True)
class RoadShape:
    """A road as a prism along a line.

    Args:
        name: its name.
        line: LineString with elevations [CRS unit; elevations m].
        width_m: whole width, on the ground.
        crossfall: rise per run; + falls from the crown to both sides, or from left to right with
            ``one_way_fall``.
        slope: side slopes.
    """

    name: str
    line: LineString
    width_m: float
    slope: SideSlope
    crossfall: float = 0.0
    one_way_fall: bool = False


@dataclass(frozen=True)
class Element:
    """One pad or road in ground metres from the grid's north-west corner (x east, y south)."""

    name: str
    kind: str  #: "pad" or "road"
    slope: SideSlope
    mitred: bool
    footprint: Any  #: the polygon that it owns [CRS unit]
    edges: np.ndarray  #: edges with side slopes, see :data:`earthwork.ground.slopes.EDGE_COLUMNS`
    walls: np.ndarray  #: retaining edges, same columns
    ring_x: np.ndarray
    ring_y: np.ndarray
    ring_offsets: np.ndarray
    plane: tuple[float, float, float] | None  #: z at (0, 0), rise per metre of x, rise per metre of y
    triangles: np.ndarray = field(default_factory=lambda: np.empty((0, 9)))

    def grade_at(self, x: np.ndarray, y: np.ndarray) -> np.ndarray:
        """Its grade [m] at places inside it or on its edge [local m]."""
        x, y = np.atleast_1d(np.asarray(x, float)), np.atleast_1d(np.asarray(y, float))
        if self.plane is not None:
            z, gx, gy = self.plane
            return z + gx * x + gy * y
        from earthwork.ground.slopes import triangle_heights

        heights = np.full((1, 1), np.nan)
        inside = np.ones((1, 1), bool)
        values = np.empty(x.shape)
        for i, (px, py) in enumerate(zip(x, y, strict=True)):
            triangle_heights(px, py, 1.0, 1.0, self.triangles, inside, heights)
            values[i] = heights[0, 0]
        return values


@dataclass(frozen=True)
class Frame:
    """Turns coordinates of the CRS into ground metres from the grid's north-west corner, and back."""

    west: float
    north: float
    metres: float  #: ground metres per CRS unit

    @classmethod
    def of(cls, grid: Grid) -> Frame:
        return cls(grid.west, grid.north, grid.unit_m * grid.ground_scale)

    def local(self, coordinates: np.ndarray) -> np.ndarray:
        """(n, 2) easting, northing → x, y."""
        c = np.asarray(coordinates, float)
        return np.column_stack([(c[:, 0] - self.west) * self.metres, (self.north - c[:, 1]) * self.metres])

    def point(self, x: float, y: float) -> tuple[float, float]:
        """(easting, northing) of a place."""
        return self.west + x / self.metres, self.north - y / self.metres


def pad_element(pad: PadShape, frame: Frame, *, mitred: bool = False, retaining: Any = None) -> Element:
    """A pad as an element.

    Raises:
        GroundError: the pad falls as steeply as its own side slopes.
    """
    polygons = [orient(part) for part in _parts(pad.polygon)]
    plane = None if pad.warped else _pad_plane(pad, frame)
    triangles = np.empty((0, 9))
    if pad.warped:
        triangles = _triangles(polygons, frame, pad.name)
        plane = _flat(triangles)
    steepest = min(1 / pad.slope.fill, 1 / pad.slope.cut)
    if plane is not None and math.hypot(plane[1], plane[2]) >= steepest:
        raise GroundError(
            f'pad "{pad.name}": its fall is {100 * math.hypot(plane[1], plane[2]):.3g} %; '
            f"it must be less than its side slopes ({100 * steepest:.3g} %). Lower it"
        )

    def heights(xy: np.ndarray, z: np.ndarray) -> np.ndarray:
        return z if plane is None else plane[0] + plane[1] * xy[:, 0] + plane[2] * xy[:, 1]

    rings = []
    for polygon in polygons:
        for ring in (polygon.exterior, *polygon.interiors):
            coordinates = shapely.get_coordinates(ring, include_z=True)
            xy = frame.local(coordinates)
            rings.append(np.column_stack([xy, heights(xy, coordinates[:, 2])]))
    sloping, walls = _edges(rings, frame, retaining, mitred)
    x, y, offsets = _ragged(rings)
    return Element(
        pad.name, "pad", pad.slope, mitred, MultiPolygon(polygons) if len(polygons) > 1 else polygons[0],
        sloping, walls, x, y, offsets, plane, triangles,
    )  # fmt: skip


def road_element(
    road: RoadShape, frame: Frame, *, taken: Any = None, retaining: Any = None
) -> Element | None:
    """A road as an element, without what lies inside ``taken`` (pads and earlier roads); None when nothing is
    left.

    Raises:
        GroundError: the road turns within its own width, or its line has no elevations.
    """
    left, right, centre = _road_sides(road, frame)
    outline = np.vstack([right, left[::-1], right[:1]])
    polygon = Polygon([frame.point(x, y) for x, y, _ in outline])
    if not polygon.is_valid:
        place = shapely.is_valid_reason(polygon).partition("[")[2].rstrip("]") or "its course"
        raise GroundError(
            f'road "{road.name}" turns within its own width near {place}; ease the bend or narrow the road'
        )
    triangles = _strip_triangles(left, centre) + _strip_triangles(centre, right)
    outside = polygon if taken is None else polygon.difference(taken)
    parts = [orient(p) for p in _parts(outside) if p.area > 0]
    if not parts:
        return None
    ring = outline if polygon.exterior.is_ccw else outline[::-1]
    pieces = _outside_pieces(ring, frame, taken)
    sloping, walls = _edges(pieces, frame, retaining, mitred=False)
    x, y, offsets = _ragged(
        [frame.local(shapely.get_coordinates(r)) for p in parts for r in (p.exterior, *p.interiors)]
    )
    footprint = MultiPolygon(parts) if len(parts) > 1 else parts[0]
    return Element(
        road.name,
        "road",
        road.slope,
        False,
        footprint,
        sloping,
        walls,
        x,
        y,
        offsets,
        None,
        np.array(triangles),
    )


def _parts(geometry: Any) -> list[Polygon]:
    return [part for part in shapely.get_parts(geometry) if isinstance(part, Polygon) and not part.is_empty]


def _pad_plane(pad: PadShape, frame: Frame) -> tuple[float, float, float]:
    """z at the origin and the rises along x (east) and y (south) of a level or tilted pad."""
    anchor = pad.anchor or (pad.polygon.centroid.x, pad.polygon.centroid.y)
    (x, y) = frame.local(np.array([anchor]))[0]
    azimuth = math.radians(pad.fall_azimuth)
    rise_x, rise_y = -pad.fall * math.sin(azimuth), pad.fall * math.cos(azimuth)
    return pad.elevation_m - rise_x * x - rise_y * y, rise_x, rise_y


def _flat(triangles: np.ndarray) -> tuple[float, float, float] | None:
    """The plane through all triangles, None when they do not lie in one (to a micrometre)."""
    points = triangles.reshape(-1, 3)
    matrix = np.column_stack([np.ones(len(points)), points[:, :2] - points[0, :2]])
    solution, *_ = np.linalg.lstsq(matrix, points[:, 2], rcond=None)
    if np.abs(matrix @ solution - points[:, 2]).max() > 1e-6:
        return None
    z, gx, gy = (float(v) for v in solution)
    return z - gx * points[0, 0] - gy * points[0, 1], gx, gy


def _triangles(polygons: Sequence[Polygon], frame: Frame, name: str) -> np.ndarray:
    """Triangles between the vertices of polygons, edges kept."""
    found = []
    for polygon in polygons:
        if not polygon.has_z or not np.isfinite(shapely.get_coordinates(polygon, include_z=True)[:, 2]).all():
            raise GroundError(
                f'pad "{name}": a vertex of its polygon has no elevation; give all of them, or an attribute'
            )
        heights = {(x, y): z for x, y, z in shapely.get_coordinates(polygon, include_z=True)}
        for triangle in shapely.get_parts(shapely.constrained_delaunay_triangles(polygon)):
            corners = shapely.get_coordinates(triangle)[:3]
            xy = frame.local(corners)
            z = [heights[x, y] for x, y in corners]
            found.append(np.column_stack([xy, z]).ravel())
    return np.array(found)


def _edges(
    rings: Sequence[np.ndarray], frame: Frame, retaining: Any, mitred: bool
) -> tuple[np.ndarray, np.ndarray]:
    """Edge tables of the sloping and of the retaining edges of 3D rings or open runs (x, y, z), interior on
    the left."""
    sloping: list[list[float]] = []
    walls: list[list[float]] = []
    zone = None if retaining is None or shapely.is_empty(retaining) else _local_zone(retaining, frame)
    for ring in rings:
        first = len(sloping)
        closed = np.allclose(ring[0], ring[-1])
        for a, b in pairwise(ring):
            if math.hypot(b[0] - a[0], b[1] - a[1]) < _SAME_M:
                continue
            for p, q, wall in _split(a, b, zone):
                (walls if wall else sloping).append(_edge_row(p, q))
        if mitred:
            _join(sloping, first, closed)
    shape = (-1, len(EDGE_COLUMNS))
    return np.array(sloping, float).reshape(shape), np.array(walls, float).reshape(shape)


def _edge_row(a: np.ndarray, b: np.ndarray) -> list[float]:
    length = math.hypot(b[0] - a[0], b[1] - a[1])
    ux, uy = (b[0] - a[0]) / length, (b[1] - a[1]) / length
    return [
        a[0],
        a[1],
        a[2],
        ux,
        uy,
        length,
        (b[2] - a[2]) / length,
        min(a[2], b[2]),
        max(a[2], b[2]),
        -1.0,
        0.0,
    ]


def _join(rows: list[list[float]], first: int, closed: bool) -> None:
    """Note which edge follows which, and where the corner between them is mitred: convex, and not too
    sharp.
    """
    count = len(rows) - first
    for k in range(count if closed else count - 1):
        here, there = rows[first + k], rows[first + (k + 1) % count]
        end = here[0] + here[3] * here[5], here[1] + here[4] * here[5]
        if math.hypot(end[0] - there[0], end[1] - there[1]) > _SAME_M:
            continue
        turn = here[3] * there[4] - here[4] * there[3]
        inner_half = math.sqrt(max(0.0, (1 + here[3] * there[3] + here[4] * there[4]) / 2))
        here[9] = first + (k + 1) % count
        # y points south, so a left turn in the world (a convex corner) is a negative one here.
        here[10] = 1.0 if turn < 0 and inner_half >= SHARPEST_MITRE else 0.0


def _local_zone(retaining: Any, frame: Frame) -> Any:
    lines = shapely.transform(retaining, frame.local)
    return lines.buffer(RETAINING_WITHIN_M, cap_style="flat")


def _split(a: np.ndarray, b: np.ndarray, zone: Any) -> Iterator[tuple[np.ndarray, np.ndarray, bool]]:
    """Pieces of an edge, with whether each runs along a retaining line."""
    if zone is None:
        yield a, b, False
        return
    length = math.hypot(b[0] - a[0], b[1] - a[1])
    along = LineString([a[:2], b[:2]]).intersection(zone)
    stretches = []
    for piece in shapely.get_parts(along):
        if piece.geom_type == "LineString" and piece.length > min(2 * RETAINING_WITHIN_M, 0.999 * length):
            c = shapely.get_coordinates(piece)
            ends = sorted(((c[[0, -1]] - a[:2]) @ (b[:2] - a[:2])) / length**2)
            stretches.append((max(ends[0], 0.0), min(ends[1], 1.0)))
    at = 0.0
    for start, stop in sorted(stretches):
        # A stretch that ends within the tolerance of a corner ends at the corner.
        start = at if (start - at) * length <= RETAINING_WITHIN_M else start
        stop = 1.0 if (1.0 - stop) * length <= RETAINING_WITHIN_M else stop
        if start > at:
            yield a + at * (b - a), a + start * (b - a), False
        yield a + start * (b - a), a + stop * (b - a), True
        at = stop
    if at < 1.0:
        yield a + at * (b - a), b, False


def _ragged(rings: Sequence[np.ndarray]) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    offsets = np.cumsum([0, *(len(ring) for ring in rings)]).astype(np.int64)
    whole = np.vstack([ring[:, :2] for ring in rings])
    return np.ascontiguousarray(whole[:, 0]), np.ascontiguousarray(whole[:, 1]), offsets


def _road_sides(road: RoadShape, frame: Frame) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Left edge, right edge and crown of a road, a row (x, y, z) for each vertex; corners are mitred."""
    c = shapely.get_coordinates(road.line, include_z=True)
    xy = frame.local(c)
    keep = np.r_[True, np.hypot(*np.diff(xy, axis=0).T) > _SAME_M]
    xy, z = xy[keep], c[keep, 2]
    if len(xy) < 2 or not np.isfinite(z).all():
        raise GroundError(f'road "{road.name}": its line needs two places or more, each with an elevation')
    way = np.diff(xy, axis=0)
    way /= np.hypot(way[:, 0], way[:, 1])[:, None]
    to_left = np.column_stack([way[:, 1], -way[:, 0]])  # y points south
    before, after = np.vstack([to_left[:1], to_left]), np.vstack([to_left, to_left[-1:]])
    middle = before + after
    length = np.hypot(middle[:, 0], middle[:, 1])
    half_cosine = length / 2
    if (half_cosine < SHARPEST_MITRE).any():
        east, north = frame.point(*xy[int(np.argmin(half_cosine))])
        raise GroundError(
            f'road "{road.name}" turns too sharply at ({east:.2f}, {north:.2f}); round the bend'
        )
    offset = middle / length[:, None] * (road.width_m / 2 / half_cosine)[:, None]
    drop = road.crossfall * road.width_m / 2
    left = np.column_stack([xy + offset, z + drop if road.one_way_fall else z - drop])
    right = np.column_stack([xy - offset, z - drop])
    return left, right, np.column_stack([xy, z])


def _strip_triangles(one: np.ndarray, other: np.ndarray) -> list[np.ndarray]:
    """Triangles between two lines that run side by side."""
    found = []
    for k in range(len(one) - 1):
        found.append(np.concatenate([one[k], one[k + 1], other[k]]))
        found.append(np.concatenate([other[k], one[k + 1], other[k + 1]]))
    return found


def _outside_pieces(ring: np.ndarray, frame: Frame, taken: Any) -> list[np.ndarray]:
    """The runs of a closed 3D ring (x, y, z) that lie outside the ground that others own."""
    if taken is None or shapely.is_empty(taken):
        return [ring]
    zone = shapely.transform(taken, frame.local)
    pieces = []
    for a, b in pairwise(ring):
        length = math.hypot(b[0] - a[0], b[1] - a[1])
        if length < _SAME_M:
            continue
        for part in shapely.get_parts(LineString([a[:2], b[:2]]).difference(zone)):
            if part.length <= _SAME_M:
                continue
            c = shapely.get_coordinates(part)
            ends = np.sort(((c[[0, -1]] - a[:2]) @ (b[:2] - a[:2])) / length**2)
            pieces.append(a + ends[:, None] * (b - a))
    return pieces
