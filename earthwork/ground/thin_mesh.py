"""Triangles from a grid of elevations, as few as keep within a tolerance: right triangles halved where it is needed.

The grid is cut into squares of 2ⁿ cells, each into two right triangles; a triangle is halved at the middle of its long
side where that is needed. Both triangles at a long side are halved together, so there are no cracks (Evans, Kirkpatrick
and Townsend 2001, "Right-triangulated irregular networks", Algorithmica 30; from memory).

Halving moves the surface most at the middle of the long side, by the height of the point over it. What a triangle can
be off is therefore at most this height and what its halves can be off: the sum bounds the error of every point, and a
triangle stays whole only where its sum is within the tolerance.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from earthwork.ground.grid import Grid


@dataclass(frozen=True)
class Mesh:
    """Triangles on the centres of a grid's cells.

    Attributes:
        rows, columns: cell of each vertex, shape (vertices,).
        heights: of each vertex [m].
        triangles: (triangles, 3), indices of vertices, anticlockwise as seen from above.
        tolerance_m: what it was made with.
    """

    rows: np.ndarray
    columns: np.ndarray
    heights: np.ndarray
    triangles: np.ndarray
    tolerance_m: float

    def places(self, grid: Grid) -> tuple[np.ndarray, np.ndarray]:
        """Eastings and northings of the vertices [CRS unit]."""
        east = grid.west + (self.columns + 0.5) * grid.cell_east
        return east, grid.north - (self.rows + 0.5) * grid.cell_north


def thin_mesh(heights: np.ndarray, tolerance_m: float, most_triangles: int | None = None) -> Mesh:
    """Triangles over all cells with data.

    Args:
        heights: (rows, columns) [m]; NaN = no data, where there are no triangles.
        tolerance_m: no point is farther from its triangle; raised where there would be more triangles than
            ``most_triangles``. The edge of the data is followed to the cell all the same.

    >>> mesh = thin_mesh(np.zeros((5, 5)), 0.01)
    >>> len(mesh.triangles), len(mesh.heights)
    (2, 4)
    """
    padded, side = _padded(heights)
    errors = _errors(padded, side)
    corners = _covered(errors, padded, side, tolerance_m)
    if most_triangles is not None and len(corners) > most_triangles:
        tolerance_m, corners = _few_enough(errors, padded, side, tolerance_m, most_triangles)
    flat = corners[..., 0] * padded.shape[1] + corners[..., 1]
    used, triangles = np.unique(flat, return_inverse=True)
    rows, columns = np.divmod(used, padded.shape[1])
    return Mesh(rows, columns, padded[rows, columns], triangles.reshape(-1, 3), tolerance_m)


def _covered(errors: np.ndarray, padded: np.ndarray, side: int, tolerance_m: float) -> np.ndarray:
    """The triangles of a tolerance whose corners all have data, (triangles, 3, 2)."""
    corners = _triangles(errors, side, tolerance_m)
    return corners[np.isfinite(padded[corners[..., 0], corners[..., 1]]).all(axis=1)]


def _few_enough(errors: np.ndarray, padded: np.ndarray, side: int, low: float, most: int) -> tuple[float, np.ndarray]:
    """A tolerance that leaves about as many triangles as asked for, and no more.

    Every middle whose sum is over the tolerance is halved at, which makes two triangles more; so the sums, in order,
    tell the tolerance of any number. Triangles without data, which are dropped, make room for a second try.
    """
    whole = (errors.shape[0] - 1) // side * ((errors.shape[1] - 1) // side) * 2
    finite = np.sort(errors[np.isfinite(errors) & (errors > low)])[::-1]
    halvings = (most - whole) // 2 - int(np.isinf(errors).sum())
    best: tuple[float, np.ndarray] | None = None
    for _ in range(4):
        tolerance = float(finite[max(halvings, 0)]) if 0 <= halvings < len(finite) else float(finite[0])
        corners = _covered(errors, padded, side, tolerance)
        if len(corners) <= most and (best is None or tolerance < best[0]):
            best = tolerance, corners
        if len(corners) > most:
            halvings -= max((len(corners) - most) // 2, 1)
        elif most - len(corners) > most // 50:
            halvings = max(halvings, 0) + (most - len(corners)) // 2
        else:
            break
    # so little is asked for that the edges of the data alone take more: nothing is left to give
    return best or (float(finite[0]), _covered(errors, padded, side, float(finite[0])))


def _padded(heights: np.ndarray) -> tuple[np.ndarray, int]:
    """The grid with NaN up to whole squares of a power of two cells, and their side."""
    shorter = max(min(heights.shape) - 1, 1)
    side = 1 << min((shorter - 1).bit_length(), 10)
    rows, columns = (-(-max(n - 1, 1) // side) * side + 1 for n in heights.shape)
    padded = np.full((rows, columns), np.nan)
    padded[: heights.shape[0], : heights.shape[1]] = heights
    return padded, side


def _off(z: np.ndarray, a: np.ndarray, b: np.ndarray) -> np.ndarray:
    """How far z lies from the middle of a–b; infinite where only some of the three have data, 0 where none has."""
    error = np.abs(z - 0.5 * (a + b))
    known = np.isfinite(z).astype(int) + np.isfinite(a) + np.isfinite(b)
    return np.where(known == 3, error, np.where(known == 0, 0.0, np.inf))


def _errors(z: np.ndarray, side: int) -> np.ndarray:
    """At the middle of each long side: what the triangles at it can be off at most, (rows, columns)."""
    errors = np.zeros(z.shape)
    s = 1
    while s <= side // 2:
        # long sides along the axes, 2s long; under them the diagonals of half the size
        for along in (z, z.T):
            e = errors if along is z else errors.T
            ends = along[: -2 * s : 2 * s, :: 2 * s], along[2 * s :: 2 * s, :: 2 * s]
            e[s :: 2 * s, :: 2 * s] = _off(along[s :: 2 * s, :: 2 * s], *ends)
            if s > 1:
                _add_diagonals(e, s)
        if 2 * s <= side:
            _diagonals(z, errors, s)
        s *= 2
    return errors


def _add_diagonals(e: np.ndarray, s: int) -> None:
    """Add to the middles of sides along an axis what the (up to four) diagonals beside them can be off."""
    h = s // 2
    here = e[s :: 2 * s, :: 2 * s]
    wide = np.zeros((e.shape[0], e.shape[1] + 2 * h))
    wide[:, h:-h] = e
    worst = np.zeros(here.shape)
    for dr in (-h, h):
        for dc in (0, 2 * h):
            beside = wide[s + dr :: 2 * s, dc :: 2 * s][: here.shape[0], : here.shape[1]]
            np.maximum(worst, beside, out=worst)
    here += worst


def _diagonals(z: np.ndarray, errors: np.ndarray, s: int) -> None:
    """Middles of squares of 2s: their diagonals lean to and fro like a chequerboard."""
    middle = errors[s :: 2 * s, s :: 2 * s]
    nw, se = z[: -2 * s : 2 * s, : -2 * s : 2 * s], z[2 * s :: 2 * s, 2 * s :: 2 * s]
    ne, sw = z[: -2 * s : 2 * s, 2 * s :: 2 * s], z[2 * s :: 2 * s, : -2 * s : 2 * s]
    even = np.add.outer(np.arange(middle.shape[0]), np.arange(middle.shape[1])) % 2 == 0
    centre = z[s :: 2 * s, s :: 2 * s]
    worst = np.zeros(middle.shape)
    for beside in (
        errors[s::2 * s, : -2 * s : 2 * s], errors[s::2 * s, 2 * s :: 2 * s],
        errors[: -2 * s : 2 * s, s::2 * s], errors[2 * s :: 2 * s, s::2 * s],
    ):  # fmt: skip
        np.maximum(worst, beside, out=worst)
    middle[...] = np.where(even, _off(centre, nw, se), _off(centre, ne, sw)) + worst


def _triangles(errors: np.ndarray, side: int, tolerance_m: float) -> np.ndarray:
    """Corners (row, column) of all triangles, (triangles, 3, 2): long side first, then the right angle."""
    r, c = np.meshgrid(np.arange(0, errors.shape[0] - 1, side), np.arange(0, errors.shape[1] - 1, side), indexing="ij")
    nw = np.stack([r.ravel(), c.ravel()], axis=1)
    se, ne, sw = nw + side, nw + [0, side], nw + [side, 0]
    even = ((nw // side).sum(axis=1) % 2 == 0)[:, None]
    # both anticlockwise with rows running down
    first = np.stack([np.where(even, nw, sw), np.where(even, se, ne), np.where(even, ne, nw)], axis=1)
    second = np.stack([np.where(even, se, ne), np.where(even, nw, sw), np.where(even, sw, se)], axis=1)
    waiting, done = np.concatenate([first, second]), []
    while len(waiting):
        a, b, apex = waiting[:, 0], waiting[:, 1], waiting[:, 2]
        total = a + b
        middle = total // 2
        split = (total % 2 == 0).all(axis=1) & (errors[middle[:, 0], middle[:, 1]] > tolerance_m)
        done.append(waiting[~split])
        a, b, apex, middle = a[split], b[split], apex[split], middle[split]
        waiting = np.concatenate([np.stack([apex, a, middle], axis=1), np.stack([b, apex, middle], axis=1)])
    return _anticlockwise(np.concatenate(done))


def _anticlockwise(corners: np.ndarray) -> np.ndarray:
    """Corners in the order that faces up."""
    a, b, c = corners[:, 0], corners[:, 1], corners[:, 2]
    turn = (b[:, 1] - a[:, 1]) * (a[:, 0] - c[:, 0]) - (a[:, 0] - b[:, 0]) * (c[:, 1] - a[:, 1])
    return np.where((turn < 0)[:, None, None], corners[:, ::-1], corners)
