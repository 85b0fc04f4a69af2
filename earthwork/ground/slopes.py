"""Kernels of built grades: side slopes of pads and roads on windows of a grid, and what lies inside them.

All coordinates are ground metres from the north-west corner of the grid: x east, y south. A side slope of
ratio H:V leaves every point of an edge as a cone of that ratio; the slope face is the envelope of these
cones, so it is nowhere steeper than the ratio *along its own steepest line*, also beside an edge that rises.
For a level edge that is the plane through the edge; around a corner it is a cone.
"""

from __future__ import annotations

import numpy as np

from earthwork.compiled import kernel

#: Columns of an edge table: start (x, y, z), direction (x, y), length, rise per metre, lowest and highest
#: end, index of the edge that follows in the ring (−1: none), and
#: whether the corner between the two is mitred.
EDGE_COLUMNS = ("x", "y", "z", "ux", "uy", "length", "rise", "low", "high", "next", "mitred")

#: Sharper corners than this are cones even where mitred ones are asked for: sin of half the angle inside.
SHARPEST_MITRE = 0.38

_BLOCK = 16


@kernel(inline="always")
def _height_at(run, gradient, bench_height, bench_width):
    """Height of a slope at a distance ``run`` from its edge, with benches every ``bench_height`` (0:
    none).
    """
    if bench_height <= 0.0:
        return gradient * run
    period = bench_height / gradient + bench_width
    benches = np.floor(run / period)
    return benches * bench_height + min(gradient * (run - benches * period), bench_height)


@kernel(inline="always")
def _skew(rise, gradient):
    """How far along an edge the steepest line runs, per metre beside it; and its length per metre beside the
    edge.
    """
    square = gradient * gradient - rise * rise
    if square <= 1e-12 * gradient * gradient:
        return np.sign(rise) * 1e9, 1e9
    root = np.sqrt(square)
    return rise / root, gradient / root


@kernel(inline="always")
def _foot(edge, px, py, gradient, sign):
    """How far along an edge the steepest line to a place starts [m]."""
    along = (px - edge[0]) * edge[3] + (py - edge[1]) * edge[4]
    beside = -(px - edge[0]) * edge[4] + (py - edge[1]) * edge[3]
    skew, _ = _skew(edge[6], gradient)
    return min(max(along - sign * abs(beside) * skew, 0.0), edge[5])


@kernel(inline="always")
def _plane(edge, px, py, gradient, bench_height, bench_width, sign):
    """Height of the face through a whole (endless) edge; ``sign`` −1 for fill, +1 for cut."""
    along = (px - edge[0]) * edge[3] + (py - edge[1]) * edge[4]
    beside = -(px - edge[0]) * edge[4] + (py - edge[1]) * edge[3]
    skew, stretch = _skew(edge[6], gradient)
    along -= sign * beside * skew
    return (
        edge[2] + edge[6] * along + sign * _height_at(beside * stretch, gradient, bench_height, bench_width)
    )


@kernel(inline="always")
def _face(edge, px, py, gradient, bench_height, bench_width, sign, rounded):
    """Height of the face of one edge at a point, NaN where a mitred edge has none (beside its ends)."""
    along = (px - edge[0]) * edge[3] + (py - edge[1]) * edge[4]
    beside = -(px - edge[0]) * edge[4] + (py - edge[1]) * edge[3]
    if not rounded and (beside < 0.0 or along < 0.0 or along > edge[5]):
        return np.nan
    foot = _foot(edge, px, py, gradient, sign)
    run = np.sqrt(beside * beside + (along - foot) * (along - foot))
    return edge[2] + edge[6] * foot + sign * _height_at(run, gradient, bench_height, bench_width)


@kernel(inline="always")
def _gap(low, high, start, stop):
    """Distance between two intervals."""
    return max(max(start - high, low - stop), 0.0)


@kernel
def slope_faces(ground, x0, y0, dx, dy, edges, slopes, mitred, fill, cut):
    """Lowest grade that the fill slopes of one element hold, and highest that its cut slopes allow.

    Args:
        ground: existing ground [m], (h, w); NaN cells are left alone.
        x0, y0: centre of the first cell [m]; dx, dy: cell sides [m].
        edges: (n, 11), see :data:`EDGE_COLUMNS`.
        slopes: fill gradient, cut gradient (rise per run), bench height (0: none), bench width [m].
        mitred: whether corners are mitred.
        fill, cut: (h, w), out. ``fill`` is exact where it lies above the ground and may be anything lower
            elsewhere; ``cut`` is exact where it lies under the ground and may be anything higher elsewhere.
    """
    rows, columns = ground.shape
    fill_gradient, cut_gradient, bench_height, bench_width = slopes
    reach = SHARPEST_MITRE if mitred else 1.0
    fill[:] = -np.inf
    cut[:] = np.inf
    for top in range(0, rows, _BLOCK):
        bottom = min(top + _BLOCK, rows)
        for left in range(0, columns, _BLOCK):
            right = min(left + _BLOCK, columns)
            low = np.inf
            high = -np.inf
            for i in range(top, bottom):
                for j in range(left, right):
                    low = min(low, ground[i, j])
                    high = max(high, ground[i, j])
            if not low <= high:
                continue
            for e in range(edges.shape[0]):
                edge = edges[e]
                xe = edge[0] + edge[3] * edge[5]
                ye = edge[1] + edge[4] * edge[5]
                away_x = _gap(min(edge[0], xe), max(edge[0], xe), x0 + left * dx, x0 + (right - 1) * dx)
                away_y = _gap(min(edge[1], ye), max(edge[1], ye), y0 + top * dy, y0 + (bottom - 1) * dy)
                away = reach * np.sqrt(away_x * away_x + away_y * away_y)
                fills = edge[8] - _height_at(away, fill_gradient, bench_height, bench_width) > low
                cuts = edge[7] + _height_at(away, cut_gradient, bench_height, bench_width) < high
                if not fills and not cuts:
                    continue
                corner = mitred and edge[10] > 0.0
                for i in range(top, bottom):
                    py = y0 + i * dy
                    for j in range(left, right):
                        px = x0 + j * dx
                        if fills:
                            z = _face(
                                edge, px, py, fill_gradient, bench_height, bench_width, -1.0, not mitred
                            )
                            if z > fill[i, j]:
                                fill[i, j] = z
                        if cuts:
                            z = _face(edge, px, py, cut_gradient, bench_height, bench_width, 1.0, not mitred)
                            if z < cut[i, j]:
                                cut[i, j] = z
                        if corner:
                            follower = edges[int(edge[9])]
                            past = (px - xe) * edge[3] + (py - ye) * edge[4] > 0.0
                            before = (px - xe) * follower[3] + (py - ye) * follower[4] < 0.0
                            if past and before:
                                if fills:
                                    a = _plane(edge, px, py, fill_gradient, bench_height, bench_width, -1.0)
                                    b = _plane(
                                        follower, px, py, fill_gradient, bench_height, bench_width, -1.0
                                    )
                                    fill[i, j] = max(fill[i, j], min(a, b))
                                if cuts:
                                    a = _plane(edge, px, py, cut_gradient, bench_height, bench_width, 1.0)
                                    b = _plane(follower, px, py, cut_gradient, bench_height, bench_width, 1.0)
                                    cut[i, j] = min(cut[i, j], max(a, b))


@kernel(inline="always")
def _square_distance(edges, px, py):
    best = np.inf
    for e in range(edges.shape[0]):
        along = (px - edges[e, 0]) * edges[e, 3] + (py - edges[e, 1]) * edges[e, 4]
        along = min(max(along, 0.0), edges[e, 5])
        ax = px - edges[e, 0] - along * edges[e, 3]
        ay = py - edges[e, 1] - along * edges[e, 4]
        best = min(best, ax * ax + ay * ay)
    return best


@kernel
def stop_at_walls(x0, y0, dx, dy, edges, walls, fill, cut):
    """Take the slopes away where a retaining edge is the nearest; at an equal distance (a shared corner) it
    counts.
    """
    rows, columns = fill.shape
    for i in range(rows):
        for j in range(columns):
            if fill[i, j] == -np.inf and cut[i, j] == np.inf:
                continue
            px = x0 + j * dx
            py = y0 + i * dy
            if _square_distance(walls, px, py) <= _square_distance(edges, px, py) * (1 + 1e-9) + 1e-12:
                fill[i, j] = -np.inf
                cut[i, j] = np.inf


@kernel
def near_edges(x0, y0, dx, dy, edges, distance, near):
    """Mark the cells (h, w) whose centre lies within a distance [m] of an edge."""
    rows, columns = near.shape
    for e in range(edges.shape[0]):
        xe = edges[e, 0] + edges[e, 3] * edges[e, 5]
        ye = edges[e, 1] + edges[e, 4] * edges[e, 5]
        first = max(int(np.ceil((min(edges[e, 1], ye) - distance - y0) / dy)), 0)
        last = min(int(np.floor((max(edges[e, 1], ye) + distance - y0) / dy)), rows - 1)
        start = max(int(np.ceil((min(edges[e, 0], xe) - distance - x0) / dx)), 0)
        stop = min(int(np.floor((max(edges[e, 0], xe) + distance - x0) / dx)), columns - 1)
        for i in range(first, last + 1):
            for j in range(start, stop + 1):
                if not near[i, j]:
                    square = _square_distance(edges[e : e + 1], x0 + j * dx, y0 + i * dy)
                    near[i, j] = square <= distance * distance


@kernel
def inside_rings(x0, y0, dx, dy, xs, ys, offsets, inside):
    """Mark the cells (h, w) whose centre lies inside closed rings (even-odd); neighbours never share a
    centre.
    """
    rows, columns = inside.shape
    crossings = np.empty(len(xs))
    for i in range(rows):
        py = y0 + i * dy
        count = 0
        for ring in range(len(offsets) - 1):
            for k in range(offsets[ring], offsets[ring + 1] - 1):
                if (ys[k] <= py) != (ys[k + 1] <= py):
                    crossings[count] = xs[k] + (py - ys[k]) / (ys[k + 1] - ys[k]) * (xs[k + 1] - xs[k])
                    count += 1
        crossings[:count].sort()
        for k in range(0, count - 1, 2):
            start = max(int(np.ceil((crossings[k] - x0) / dx)), 0)
            stop = min(int(np.ceil((crossings[k + 1] - x0) / dx)), columns)
            for j in range(start, stop):
                inside[i, j] = True


@kernel
def triangle_heights(x0, y0, dx, dy, triangles, inside, heights):
    """Heights of a triangulated grade at the cells that are inside; the nearest triangle where rounding
    misses all.

    ``triangles`` is (n, 9): x, y, z of three corners.
    """
    rows, columns = inside.shape
    for i in range(rows):
        for j in range(columns):
            if not inside[i, j]:
                continue
            px = x0 + j * dx
            py = y0 + i * dy
            best = -np.inf
            for t in range(triangles.shape[0]):
                ax, ay, az, bx, by, bz, cx, cy, cz = triangles[t]
                area = (bx - ax) * (cy - ay) - (cx - ax) * (by - ay)
                if area == 0.0:
                    continue
                v = ((px - ax) * (cy - ay) - (cx - ax) * (py - ay)) / area
                w = ((bx - ax) * (py - ay) - (px - ax) * (by - ay)) / area
                least = min(min(v, w), 1.0 - v - w)
                if least > best:
                    best = least
                    heights[i, j] = az + v * (bz - az) + w * (cz - az)
                    if least >= 0.0:
                        break


@kernel
def spread(codes, stack_rows, stack_columns):
    """Let what is reached spread in place through active cells of its own kind, over all eight neighbours.

    ``codes`` is int8: 1 fill and −1 cut that are active, 2 and −2 the same once reached, 0 anything else.
    The two stacks are scratch of at least ``codes.size``.
    """
    rows, columns = codes.shape
    count = 0
    for i in range(rows):
        for j in range(columns):
            if abs(codes[i, j]) == 2:
                stack_rows[count] = i
                stack_columns[count] = j
                count += 1
    while count > 0:
        count -= 1
        i = stack_rows[count]
        j = stack_columns[count]
        kind = codes[i, j] // 2
        for a in range(max(i - 1, 0), min(i + 2, rows)):
            for b in range(max(j - 1, 0), min(j + 2, columns)):
                if codes[a, b] == kind:
                    codes[a, b] = 2 * kind
                    stack_rows[count] = a
                    stack_columns[count] = b
                    count += 1


@kernel
def faces_at(xs, ys, edges, slopes, mitred, fill, cut, fill_edge, cut_edge):
    """Faces of one element at single places (n,), exact everywhere; and the grade of the edge that each
    belongs to.

    Arguments as for :func:`slope_faces`; ``fill_edge`` and ``cut_edge`` are (n,), out [m].
    """
    fill_gradient, cut_gradient, bench_height, bench_width = slopes
    for n in range(len(xs)):
        px = xs[n]
        py = ys[n]
        fill[n] = -np.inf
        cut[n] = np.inf
        fill_edge[n] = np.nan
        cut_edge[n] = np.nan
        for e in range(edges.shape[0]):
            edge = edges[e]
            z = _face(edge, px, py, fill_gradient, bench_height, bench_width, -1.0, not mitred)
            if z > fill[n]:
                fill[n] = z
                fill_edge[n] = edge[2] + edge[6] * _foot(edge, px, py, fill_gradient, -1.0)
            z = _face(edge, px, py, cut_gradient, bench_height, bench_width, 1.0, not mitred)
            if z < cut[n]:
                cut[n] = z
                cut_edge[n] = edge[2] + edge[6] * _foot(edge, px, py, cut_gradient, 1.0)
            if not mitred or edge[10] == 0.0:
                continue
            follower = edges[int(edge[9])]
            xe = edge[0] + edge[3] * edge[5]
            ye = edge[1] + edge[4] * edge[5]
            past = (px - xe) * edge[3] + (py - ye) * edge[4] > 0.0
            if past and (px - xe) * follower[3] + (py - ye) * follower[4] < 0.0:
                a = _plane(edge, px, py, fill_gradient, bench_height, bench_width, -1.0)
                b = _plane(follower, px, py, fill_gradient, bench_height, bench_width, -1.0)
                if min(a, b) > fill[n]:
                    fill[n] = min(a, b)
                    fill_edge[n] = follower[2]
                a = _plane(edge, px, py, cut_gradient, bench_height, bench_width, 1.0)
                b = _plane(follower, px, py, cut_gradient, bench_height, bench_width, 1.0)
                if max(a, b) < cut[n]:
                    cut[n] = max(a, b)
                    cut_edge[n] = follower[2]
