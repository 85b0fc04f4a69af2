"""Which straight lines between points are free of barriers: kernels on edges sorted into a grid of bins."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np

from earthwork.compiled import kernel

Array = np.ndarray


@dataclass(frozen=True)
class Walls:
    """Edges of barriers, sorted into square bins.

    ``edges`` (k, 4): x and y of both ends [m]. The edges that touch bin ``b = row × columns + column`` are
    ``items[starts[b]:starts[b + 1]]``.
    """

    edges: Array
    starts: Array
    items: Array
    west: float
    south: float
    side: float
    rows: int
    columns: int

    @property
    def arguments(self) -> tuple[Any, ...]:
        """As the kernels take them."""
        return (self.edges, self.starts, self.items, self.west, self.south, self.side, self.rows, self.columns)


def walls_of(edges: Array) -> Walls:
    """Sort edges into bins, about one edge to a bin.

    Args:
        edges: (k, 4), k > 0.
    """
    low, high = edges.reshape(-1, 2).min(axis=0), edges.reshape(-1, 2).max(axis=0)
    extent = np.maximum(high - low, 1e-9)
    side = float(max(np.sqrt(extent[0] * extent[1] / len(edges)), extent.max() / 1000, 1e-6))
    columns, rows = (int(n) for n in np.floor(extent / side) + 1)
    counts = np.zeros(rows * columns + 1, np.int64)
    geometry = (float(low[0]), float(low[1]), side, rows, columns)
    _bin_edges(edges, *geometry, counts, np.zeros(0, np.int64))
    starts = np.concatenate([[0], np.cumsum(counts[:-1])])
    items = np.empty(starts[-1], np.int64)
    counts[:-1] = starts[:-1]
    _bin_edges(edges, *geometry, counts, items)
    return Walls(edges, starts, items, *geometry)


@kernel(error_model="python")
def _bin_edges(edges, west, south, side, rows, columns, counts, items):
    """Count the edges of each bin, or with ``items`` fill them in from the position in ``counts`` on."""
    for k in range(len(edges)):
        x1, y1, x2, y2 = edges[k, 0], edges[k, 1], edges[k, 2], edges[k, 3]
        low_row = max(int((min(y1, y2) - south) / side - 1e-9), 0)
        high_row = min(int((max(y1, y2) - south) / side + 1e-9), rows - 1)
        for row in range(low_row, high_row + 1):
            # The part of the edge inside this row of bins, a little widened.
            bottom, top = south + (row - 1e-9) * side, south + (row + 1 + 1e-9) * side
            a, b = x1, x2
            if abs(y2 - y1) > 0.0:
                t1, t2 = (bottom - y1) / (y2 - y1), (top - y1) / (y2 - y1)
                a = x1 + min(max(min(t1, t2), 0.0), 1.0) * (x2 - x1)
                b = x1 + min(max(max(t1, t2), 0.0), 1.0) * (x2 - x1)
            first = max(int((min(a, b) - west) / side - 1e-9), 0)
            last = min(int((max(a, b) - west) / side + 1e-9), columns - 1)
            for column in range(first, last + 1):
                if len(items):
                    items[counts[row * columns + column]] = k
                counts[row * columns + column] += 1


@kernel(error_model="python", inline="always")
def _side(ax, ay, bx, by, px, py):
    """Twice the signed area of the triangle a, b, p: > 0 where p lies left of a → b."""
    return (bx - ax) * (py - ay) - (by - ay) * (px - ax)


@kernel(error_model="python")
def _meets(x1, y1, x2, y2, edge):
    """Whether a segment touches an edge."""
    a = _side(x1, y1, x2, y2, edge[0], edge[1])
    b = _side(x1, y1, x2, y2, edge[2], edge[3])
    if (a > 0.0 and b > 0.0) or (a < 0.0 and b < 0.0):
        return False
    c = _side(edge[0], edge[1], edge[2], edge[3], x1, y1)
    d = _side(edge[0], edge[1], edge[2], edge[3], x2, y2)
    if (c > 0.0 and d > 0.0) or (c < 0.0 and d < 0.0):
        return False
    if a == 0.0 and b == 0.0:
        return (
            max(min(x1, x2), min(edge[0], edge[2])) <= min(max(x1, x2), max(edge[0], edge[2]))
            and max(min(y1, y2), min(edge[1], edge[3])) <= min(max(y1, y2), max(edge[1], edge[3]))
        )  # fmt: skip
    return True


@kernel(error_model="python")
def is_free(x1, y1, x2, y2, edges, starts, items, west, south, side, rows, columns):
    """Whether the segment meets no edge; it walks the bins that it passes, row by row."""
    low_row = int(np.floor((min(y1, y2) - south) / side - 1e-9))
    high_row = int(np.floor((max(y1, y2) - south) / side + 1e-9))
    upward = y2 >= y1
    for step in range(max(low_row, 0), min(high_row, rows - 1) + 1):
        row = step if upward else max(low_row, 0) + min(high_row, rows - 1) - step
        bottom, top = south + (row - 1e-9) * side, south + (row + 1 + 1e-9) * side
        a, b = x1, x2
        if y2 != y1:
            t1, t2 = (bottom - y1) / (y2 - y1), (top - y1) / (y2 - y1)
            a = x1 + min(max(min(t1, t2), 0.0), 1.0) * (x2 - x1)
            b = x1 + min(max(max(t1, t2), 0.0), 1.0) * (x2 - x1)
        first = max(int(np.floor((min(a, b) - west) / side - 1e-9)), 0)
        last = min(int(np.floor((max(a, b) - west) / side + 1e-9)), columns - 1)
        for column in range(first, last + 1):
            cell = row * columns + column
            for k in range(starts[cell], starts[cell + 1]):
                if _meets(x1, y1, x2, y2, edges[items[k]]):
                    return False
    return True


@kernel(error_model="python", inline="always")
def _is_taut(px, py, corner):
    """Whether a path that comes from p may bend at a corner: both walls lie on one side of the line p → corner.

    A corner is (x, y, x and y of the wall's point before, x and y of the one after). A point without walls
    (NaN) may be passed in any way.
    """
    if corner[2] != corner[2]:
        return True
    before = _side(px, py, corner[0], corner[1], corner[2], corner[3])
    after = _side(px, py, corner[0], corner[1], corner[4], corner[5])
    # Corners stand a little off the walls that are tested, so what is parallel within rounding is taut.
    slack = 1e-9 * (abs(corner[0] - px) + abs(corner[1] - py) + 1.0)
    return (before >= -slack and after >= -slack) or (before <= slack and after <= slack)


@kernel(error_model="python")
def visible_corners(points, corners, walls, out_point, out_corner):
    """Pairs (point, corner) that see each other along a line that may bend there; returns their number.

    The pairs are written as far as there is room; call again with more room when the number exceeds it.
    """
    count = 0
    for i in range(len(points)):
        for j in range(len(corners)):
            if not _is_taut(points[i, 0], points[i, 1], corners[j]):
                continue
            if is_free(points[i, 0], points[i, 1], corners[j, 0], corners[j, 1], *walls):
                if count < len(out_point):
                    out_point[count] = i
                    out_corner[count] = j
                count += 1
    return count


@kernel(error_model="python")
def visible_among_corners(corners, start, stop, walls, out_from, out_to):
    """Pairs (i, j > i) of corners, i from start to stop, that see each other and may bend at both ends."""
    count = 0
    for i in range(start, stop):
        for j in range(i + 1, len(corners)):
            if not _is_taut(corners[i, 0], corners[i, 1], corners[j]):
                continue
            if not _is_taut(corners[j, 0], corners[j, 1], corners[i]):
                continue
            if is_free(corners[i, 0], corners[i, 1], corners[j, 0], corners[j, 1], *walls):
                if count < len(out_from):
                    out_from[count] = i
                    out_to[count] = j
                count += 1
    return count


@kernel(error_model="python")
def free_lengths(points, others, walls, out):
    """Straight distance of each point to each other one where the line between them is free, else ``inf``."""
    for i in range(len(points)):
        for j in range(len(others)):
            dx, dy = others[j, 0] - points[i, 0], others[j, 1] - points[i, 1]
            free = is_free(points[i, 0], points[i, 1], others[j, 0], others[j, 1], *walls)
            out[i, j] = np.sqrt(dx * dx + dy * dy) if free else np.inf


@kernel(error_model="python")
def shorten(cost, far, edges, node, last_effort, last_length, effort, length):
    """Replace efforts (n, m) and lengths of ways, in place, where one through a node is less.

    Args:
        cost, far: (n, nodes) effort and length from each start to each node.
        edges, node, last_effort, last_length: the nodes that see end j stand from ``edges[j]`` to ``edges[j + 1]``,
            with the way from there to the end.
    """
    for i in range(len(cost)):
        for j in range(len(edges) - 1):
            best = effort[i, j]
            at = -1
            for k in range(edges[j], edges[j + 1]):
                value = cost[i, node[k]] + last_effort[k]
                if value < best:
                    best = value
                    at = k
            if at >= 0:
                effort[i, j] = best
                length[i, j] = far[i, node[at]] + last_length[at]
