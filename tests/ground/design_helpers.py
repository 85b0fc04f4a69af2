"""Ground given as arrays and functions, and exact volumes of pads by convex polyhedra, for the tests of built
grades."""

import numpy as np
from scipy.spatial import ConvexHull, HalfspaceIntersection
from shapely.geometry import Polygon

from earthwork.ground.grid import Grid


class ArraySurface:
    """Elevations given as an array on the whole grid."""

    dtype = np.dtype(np.float64)
    block = None
    block_start = (0, 0)
    resampling = "none"

    def __init__(self, values):
        self.values = np.asarray(values, float)

    def reader(self):
        return self

    def read(self, window):
        rows = slice(window.row, window.row + window.height)
        return self.values[rows, window.column : window.column + window.width].copy()

    def close(self):
        pass


def grid_of(side_m, cell, **more):
    """A square grid with its south-west corner at (0, 0)."""
    count = round(side_m / cell)
    return Grid(count, count, 0.0, float(side_m), float(cell), float(cell), **more)


def centres(grid):
    """Eastings and northings of all cell centres, each (rows, columns)."""
    east = grid.west + (np.arange(grid.columns) + 0.5) * grid.cell_east
    north = grid.north - (np.arange(grid.rows) + 0.5) * grid.cell_north
    return np.meshgrid(east, north)


def ground(grid, height):
    """A surface from a function of easting and northing."""
    east, north = centres(grid)
    return ArraySurface(np.broadcast_to(np.asarray(height(east, north), float), east.shape))


def built(design):
    return design.reader().built(design.grid.window)


def volumes(design):
    """Cut and fill [m³] by plain sums over the cells."""
    depth = built(design).z - design.existing.values
    area = design.grid.cell_area_m2
    return -depth[depth < 0].sum() * area, depth[depth > 0].sum() * area


def exact_fill(
    polygon: Polygon, grade, ground_plane, gradient, *, mitred=False, inside=None, directions=1440, also=()
):
    """Exact fill volume of a convex pad whose grade and ground are planes (z0, rise east, rise north).

    The fill face of a convex pad is concave: its volume is that of a convex polyhedron, bounded by the pad's
    plane, the planes of the given gradient through its edges, at round corners planes tangent to the cones
    (``directions`` around the whole circle), and the ground; ``inside`` is a place where it is thick,
    ``also`` more half-spaces.
    """
    z = lambda p: grade[0] + grade[1] * p[0] + grade[2] * p[1]  # noqa: E731
    corners = np.array(polygon.exterior.coords)[:-1]
    # Each row: a half-space a·x + b·y + c·z + d ≤ 0.
    spaces = [
        *also,
        (-grade[1], -grade[2], 1.0, -grade[0]),
        (ground_plane[1], ground_plane[2], -1.0, ground_plane[0]),
    ]

    def below(normal_east, normal_north, touch):
        spaces.append((gradient * normal_east, gradient * normal_north, 1.0, -touch))

    for p, q in zip(corners, np.roll(corners, -1, axis=0), strict=True):
        along = q - p
        length = np.hypot(*along)
        along = along / length
        out = np.array([along[1], -along[0]])
        rise = (z(q) - z(p)) / length
        # Of the planes through the edge, the one of the asked gradient that falls outwards.
        slope = -out * np.sqrt(gradient**2 - rise**2) + along * rise
        spaces.append((-slope[0], -slope[1], 1.0, slope @ p - z(p)))
    if not mitred:
        for angle in np.arange(directions) * 2 * np.pi / directions:
            n = np.array([np.cos(angle), np.sin(angle)])
            below(n[0], n[1], max(z(v) + gradient * n @ v for v in corners))
    inside = np.array(inside or (polygon.centroid.x, polygon.centroid.y))
    low, high = ground_plane[0] + ground_plane[1:] @ inside, z(inside)
    found = HalfspaceIntersection(np.array(spaces), np.array([*inside, (low + high) / 2]))
    return ConvexHull(found.intersections).volume
