"""Cut and fill of cells, split at the zero line.

Each cell is the plane through its value whose slope along each axis is the smaller of the two one-sided differences
when they agree in sign, else zero (one-sided at edges and holes). The plane is integrated exactly in the square, so
cut − fill stays the plain sum of the depths, whatever the slopes are.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numba import njit

from earthwork.ground.stack import DISTURBED_OVER_M

# Not nnan: missing cells are NaN, and the kernels test for them.
_FAST = {"reassoc", "nsz", "contract", "arcp"}


VALID, CUT, FILL, CUT_AREA, FILL_AREA, PLAIN_CUT, PLAIN_FILL, DISTURBED = range(8)
_DISTURBED_OVER_M = DISTURBED_OVER_M


@njit(cache=True, nogil=True, error_model="numpy", inline="always")
def _half_slope(before, here, after):
    """Half the slope of a cell's plane along one axis [m per half cell], signless; NaN neighbours are holes."""
    left = here - before
    right = after - here
    if left != left:
        return 0.0 if right != right else 0.5 * abs(right)
    if right != right:
        return 0.5 * abs(left)
    if (left > 0.0) == (right > 0.0) and left != 0.0 and right != 0.0:
        return 0.5 * min(abs(left), abs(right))
    return 0.0


@njit(cache=True, nogil=True, error_model="numpy", inline="always")
def _plane_above_zero(h, a, b):
    """Mean fill depth and fill share of a square cell with the plane h + a·u + b·v, u and v from −1 to 1.

    Third (second) powers of the positive parts at the four corners, alternating: the double (single) integral of the
    positive part of a plane over a rectangle.
    """
    if a < b:
        a, b = b, a
    if a + b <= abs(h):
        return max(h, 0.0), 1.0 if h > 0.0 else 0.0
    if b < 1e-7 * a:
        return (h + a) * (h + a) / (4.0 * a), (h + a) / (2.0 * a)
    p1 = max(h + a + b, 0.0)
    p2 = max(h + a - b, 0.0)
    p3 = max(h - a + b, 0.0)
    p4 = max(h - a - b, 0.0)
    depth = (p1 * p1 * p1 - p2 * p2 * p2 - p3 * p3 * p3 + p4 * p4 * p4) / (24.0 * a * b)
    share = (p1 * p1 - p2 * p2 - p3 * p3 + p4 * p4) / (8.0 * a * b)
    # The alternating sum loses digits on nearly flat cells; the bounds always hold in exact arithmetic.
    return max(depth, max(h, 0.0)), min(max(share, 0.0), 1.0)


@njit(cache=True, nogil=True, error_model="numpy", fastmath=_FAST)
def split_depths(depth, cells, sums):
    """Split every cell of a tile at the zero line.

    Args:
        depth: (h + 2, w + 2) depths with a one-cell rim [m], + fill; NaN = no data.
        cells: (4, h, w) to receive cut, fill [mean m over the cell], cut share, fill share; or (4, 0, 0) for none.
        sums: (8,) to which VALID, CUT, FILL, CUT_AREA, FILL_AREA, PLAIN_CUT, PLAIN_FILL and DISTURBED are added
            [cells, cell·m].

    Returns:
        (greatest depth, least depth) over the cells with data [m]; (−inf, inf) without any.
    """
    h = depth.shape[0] - 2
    w = depth.shape[1] - 2
    keep = cells.shape[1] > 0
    flag = np.empty(w, np.uint8)
    high = -np.inf
    low = np.inf
    for i in range(h):
        row = depth[i + 1]
        up = depth[i]
        down = depth[i + 2]
        valid = 0.0
        cut = 0.0
        fill = 0.0
        cut_area = 0.0
        fill_area = 0.0
        disturbed = 0.0
        flagged = 0
        for j in range(w):
            x = row[j + 1]
            a = x - row[j]
            b = row[j + 2] - x
            c = x - up[j + 1]
            d = down[j + 1] - x
            near = (min(abs(a), abs(b)) if a * b > 0 else 0.0) + (min(abs(c), abs(d)) if c * d > 0 else 0.0)
            hole = a + b + c + d
            ok = x == x
            mixed = ok and (hole != hole or abs(x) < 0.5 * near)
            flag[j] = 1 if mixed else 0
            flagged += 1 if mixed else 0
            plain = np.float64(x) if (ok and not mixed) else 0.0
            valid += 1.0 if ok else 0.0
            fill += max(plain, 0.0)
            cut += max(-plain, 0.0)
            fill_area += 1.0 if plain > 0.0 else 0.0
            cut_area += 1.0 if plain < 0.0 else 0.0
            disturbed += 1.0 if abs(x) > _DISTURBED_OVER_M else 0.0
        if valid > 0.0:
            for j in range(w):
                x = np.float64(row[j + 1])
                high = max(high, x if x == x else -np.inf)
                low = min(low, x if x == x else np.inf)
        if keep:
            for j in range(w):
                x = np.float64(row[j + 1])
                cells[0, i, j] = max(-x, 0.0) if x == x else 0.0
                cells[1, i, j] = max(x, 0.0) if x == x else 0.0
                cells[2, i, j] = 1.0 if x < 0.0 else 0.0
                cells[3, i, j] = 1.0 if x > 0.0 else 0.0
        plain_cut = cut
        plain_fill = fill
        if flagged > 0:
            for j in range(w):
                if flag[j] == 0:
                    continue
                x = np.float64(row[j + 1])
                a = _half_slope(np.float64(row[j]), x, np.float64(row[j + 2]))
                b = _half_slope(np.float64(up[j + 1]), x, np.float64(down[j + 1]))
                mean, share = _plane_above_zero(x, a, b)
                cut_share = 1.0 - share if a + b > 0.0 else (1.0 if x < 0.0 else 0.0)
                fill += mean
                cut += mean - x
                fill_area += share
                cut_area += cut_share
                plain_fill += max(x, 0.0)
                plain_cut += max(-x, 0.0)
                if keep:
                    cells[0, i, j] = mean - x
                    cells[1, i, j] = mean
                    cells[2, i, j] = cut_share
                    cells[3, i, j] = share
        sums[0] += valid
        sums[1] += cut
        sums[2] += fill
        sums[3] += cut_area
        sums[4] += fill_area
        sums[5] += plain_cut
        sums[6] += plain_fill
        sums[7] += disturbed
    return high, low


@dataclass(frozen=True)
class SplitCells:
    """Cells of a tile after the split: mean depth over each cell [m] and share of its area; 0 where no data."""

    cut: np.ndarray
    fill: np.ndarray
    cut_share: np.ndarray
    fill_share: np.ndarray


def split_cells(depth: np.ndarray) -> SplitCells:
    """Cut and fill of each cell from depths with a one-cell rim, shape (h + 2, w + 2) [m]; NaN = no data.

    A plane that falls from +1 m to −1 m across one cell is half fill, half cut, 0.25 m of each:

    >>> c = split_cells(np.array([[2.0, 0.0, -2.0]] * 3))
    >>> float(c.fill[0, 0]), float(c.cut[0, 0]), float(c.fill_share[0, 0])
    (0.25, 0.25, 0.5)
    """
    cells = np.empty((4, depth.shape[0] - 2, depth.shape[1] - 2))
    split_depths(depth, cells, np.zeros(8))
    return SplitCells(*cells)
