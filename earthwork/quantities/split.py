"""Cut and fill of cells, split at the zero line.

Each cell is the plane through its value whose slope along each axis is the smaller of the two one-sided differences
when they agree in sign, else zero (one-sided at edges and holes). The plane is integrated exactly in the square, so
cut − fill stays the plain sum of the depths, whatever the slopes are.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from earthwork.compiled import FAST, kernel
from earthwork.ground.stack import DISTURBED_OVER_M

#: Sums over cells: with data, cut and fill, their areas, cut and fill without the split, disturbed [cells, cell·m].
VALID, CUT, FILL, CUT_AREA, FILL_AREA, PLAIN_CUT, PLAIN_FILL, DISTURBED = range(8)


@kernel(inline="always")
def half_slope(before, here, after):
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


@kernel(inline="always")
def plane_above_zero(h, a, b):
    """Mean fill depth and fill share of a square cell with the plane h + a·u + b·v, u and v from −1 to 1.

    Third (second) powers of the positive parts at the four corners, alternating: the double (single) integral of the
    positive part of a plane over a rectangle.
    """
    if a < b:
        a, b = b, a
    if a + b <= abs(h):
        return max(h, 0.0), 1.0 if h > 0.0 else 0.0
    if b < 1e-7 * a:
        # Taken as level along the other axis, it may lie beside the zero line by a hair.
        reach = min(max(h + a, 0.0), 2.0 * a)
        return max(reach * reach / (4.0 * a), max(h, 0.0)), reach / (2.0 * a)
    p1 = max(h + a + b, 0.0)
    p2 = max(h + a - b, 0.0)
    p3 = max(h - a + b, 0.0)
    p4 = max(h - a - b, 0.0)
    depth = (p1 * p1 * p1 - p2 * p2 * p2 - p3 * p3 * p3 + p4 * p4 * p4) / (24.0 * a * b)
    share = (p1 * p1 - p2 * p2 - p3 * p3 + p4 * p4) / (8.0 * a * b)
    # The alternating sum loses digits on nearly flat cells; the bounds always hold in exact arithmetic.
    return max(depth, max(h, 0.0)), min(max(share, 0.0), 1.0)


@kernel(fastmath=FAST)
def flat_row(up, row, down, flat, mixed, sums):
    """One row of cells: depths of those that the zero line does not cross, and marks of those that it may.

    Kept in the type of the depths, so that it runs in vectors: counts of a row are exact in float32 too.
    """
    zero = flat.dtype.type(0)
    one = flat.dtype.type(1)
    half = flat.dtype.type(0.5)
    disturbed_over = flat.dtype.type(DISTURBED_OVER_M)
    marks = zero
    valid = zero
    fills = zero
    cuts = zero
    disturbed = zero
    for j in range(flat.size):
        x = row[j + 1]
        a = x - row[j]
        b = row[j + 2] - x
        c = x - up[j + 1]
        d = down[j + 1] - x
        near = (min(abs(a), abs(b)) if a * b > zero else zero) + (min(abs(c), abs(d)) if c * d > zero else zero)
        holes = (a + b) + (c + d)
        ok = x == x
        crossed = ok & ((holes != holes) | (abs(x) < half * near))
        depth = x if ok else zero
        alone = zero if crossed else depth
        flat[j] = alone
        mixed[j] = one if crossed else zero
        marks += one if crossed else zero
        valid += one if ok else zero
        fills += one if alone > zero else zero
        cuts += one if alone < zero else zero
        disturbed += one if abs(depth) > disturbed_over else zero
    fill = 0.0
    cut = 0.0
    for j in range(flat.size):
        depth64 = np.float64(flat[j])
        fill += max(depth64, 0.0)
        cut -= min(depth64, 0.0)
    sums[VALID] += valid
    sums[CUT] += cut
    sums[FILL] += fill
    sums[CUT_AREA] += cuts
    sums[FILL_AREA] += fills
    sums[PLAIN_CUT] += cut
    sums[PLAIN_FILL] += fill
    sums[DISTURBED] += disturbed
    return marks > zero


@kernel
def _extremes(bits):
    """Greatest and least of a row of depths without NaN, as the integers of their bits: these compare in vectors.

    Positive floats order as their bits do; a negative one has a negative integer that is the greater the lower it is.
    """
    zero = bits.dtype.type(0)
    lowest = bits.dtype.type(np.iinfo(bits.dtype).min)
    high = zero
    low = lowest
    for j in range(bits.size):
        here = bits[j]
        high = here if here > high else high
        below = here if here < zero else lowest
        low = below if below > low else low
    return high, low


@kernel(fastmath=FAST)
def _keep_row(flat, cells, i):
    """Store the cells of a row that the zero line does not cross."""
    for j in range(flat.size):
        x = np.float64(flat[j])
        cells[0, i, j] = -min(x, 0.0)
        cells[1, i, j] = max(x, 0.0)
        cells[2, i, j] = 1.0 if x < 0.0 else 0.0
        cells[3, i, j] = 1.0 if x > 0.0 else 0.0


@kernel(inline="always")
def add_crossed(up, row, down, j, sums):
    """Count a cell that the zero line may cross, the j-th of a row.

    Returns:
        Its depth, fill [mean m over the cell], cut share and fill share.
    """
    x = np.float64(row[j + 1])
    a = half_slope(np.float64(row[j]), x, np.float64(row[j + 2]))
    b = half_slope(np.float64(up[j + 1]), x, np.float64(down[j + 1]))
    fill, fill_share = plane_above_zero(x, a, b)
    cut_share = 1.0 - fill_share if a + b > abs(x) else (1.0 if x < 0.0 else 0.0)
    sums[CUT] += fill - x
    sums[FILL] += fill
    sums[CUT_AREA] += cut_share
    sums[FILL_AREA] += fill_share
    sums[PLAIN_CUT] -= min(x, 0.0)
    sums[PLAIN_FILL] += max(x, 0.0)
    return x, fill, cut_share, fill_share


def split(depth: np.ndarray, cells: np.ndarray, sums: np.ndarray) -> tuple[float, float]:
    """Split every cell of a tile at the zero line.

    Args:
        depth: (h + 2, w + 2) depths with a one-cell rim [m], + fill; NaN = no data.
        cells: (4, h, w) to receive cut, fill [mean m over the cell], cut share, fill share; or (4, 0, 0) for none.
        sums: (8,) to which VALID, CUT, FILL, CUT_AREA, FILL_AREA, PLAIN_CUT, PLAIN_FILL and DISTURBED are added
            [cells, cell·m].

    Returns:
        (greatest fill, least depth) [m]: (0, 0) where there is neither fill nor cut.
    """
    room = SplitRoom(depth.shape[1] - 2, depth.dtype)
    high, low = _split(depth, cells, sums, room.flat, room.bits, room.mixed, room.extreme_bits)
    return room.extremes(high, low)


class SplitRoom:
    """Room for a row of cells while it is split, and for the greatest and least depth of those that are not crossed.

    Args:
        width: cells of a row, at most.
        dtype: of the depths, float32 or float64.
    """

    def __init__(self, width: int, dtype: np.dtype) -> None:
        integer = np.int32 if dtype == np.float32 else np.int64
        self.flat, self.mixed = np.empty(width, dtype), np.empty(width, dtype)
        self.bits = self.flat.view(integer)
        self.extreme = np.zeros(2, dtype)
        self.extreme_bits = self.extreme.view(integer)

    def extremes(self, high: float, low: float) -> tuple[float, float]:
        """Greatest and least depth of all cells, from those of the crossed ones [m]."""
        return max(high, float(self.extreme[0])), min(low, float(self.extreme[1]))


@kernel
def widen(bits, extreme_bits):
    """Widen the greatest and least depth, kept as the integers of their bits, by a row; (0, 0) before the first."""
    lowest = np.iinfo(bits.dtype).min
    high, low = _extremes(bits)
    extreme_bits[0] = max(extreme_bits[0], high)
    if low != lowest:
        # a negative float has a negative integer that is the greater the lower it is; 0 stands for none yet
        extreme_bits[1] = low if extreme_bits[1] == 0 else max(extreme_bits[1], low)


@kernel
def _split(depth, cells, sums, flat, bits, mixed, extreme_bits):
    h = depth.shape[0] - 2
    w = depth.shape[1] - 2
    keep = cells.shape[1] > 0
    high = 0.0
    low = 0.0
    for i in range(h):
        up = depth[i]
        row = depth[i + 1]
        down = depth[i + 2]
        any_mixed = flat_row(up, row, down, flat, mixed, sums)
        widen(bits, extreme_bits)
        if keep:
            _keep_row(flat, cells, i)
        if not any_mixed:
            continue
        for j in range(w):
            if mixed[j] == 0:
                continue
            x, fill, cut_share, fill_share = add_crossed(up, row, down, j, sums)
            high = max(high, x)
            low = min(low, x)
            if keep:
                cells[0, i, j] = fill - x
                cells[1, i, j] = fill
                cells[2, i, j] = cut_share
                cells[3, i, j] = fill_share
    return high, low


def split_part(
    depth: np.ndarray, share: np.ndarray, row: int, column: int, disturbed: np.ndarray | None, sums: np.ndarray
) -> tuple[float, float]:
    """Split the cells of one area at the zero line, each by its share inside it.

    Args:
        depth: (h + 2, w + 2) depths of a tile with a one-cell rim [m], + fill; NaN = no data.
        share: of each cell inside the area, (height, width), starting at (row, column) of the tile without its rim.
        disturbed: (h, w) share of each cell that is disturbed; None: all of those whose depth is over DISTURBED_OVER_M.
        sums: as for :func:`split`.

    Returns:
        (greatest fill, least depth) [m] of cells with any share: (0, 0) where there is neither fill nor cut.
    """
    room = SplitRoom(share.shape[1], depth.dtype)
    given = np.empty((0, 0)) if disturbed is None else disturbed
    high, low = _split_part(
        depth, share, row, column, given, sums, np.zeros(8), room.flat, room.bits, room.mixed, room.extreme_bits
    )  # fmt: skip
    return room.extremes(high, low)


@kernel
def _split_part(depth, share, row0, column0, disturbed, sums, whole, flat, bits, mixed, extreme_bits):
    high = 0.0
    low = 0.0
    width = share.shape[1]
    for i in range(share.shape[0]):
        up = depth[row0 + i][column0 : column0 + width + 2]
        row = depth[row0 + i + 1][column0 : column0 + width + 2]
        down = depth[row0 + i + 2][column0 : column0 + width + 2]
        parts = share[i]
        any_mixed = flat_row(up, row, down, flat, mixed, whole)
        _add_row(row, flat, parts, sums)
        if disturbed.size > 0:
            sums[DISTURBED] += _disturbed_row(row, disturbed[row0 + i][column0 : column0 + width], parts)
        else:
            sums[DISTURBED] += _differing_row(row, parts)
        if any_mixed:
            for j in range(width):
                part = parts[j]
                if mixed[j] == 0 or part == 0.0:
                    continue
                x, fill, cut_share, fill_share = add_crossed(up, row, down, j, whole)
                high = max(high, x)
                low = min(low, x)
                sums[CUT] += (fill - x) * part
                sums[FILL] += fill * part
                sums[CUT_AREA] += cut_share * part
                sums[FILL_AREA] += fill_share * part
                sums[PLAIN_CUT] -= min(x, 0.0) * part
                sums[PLAIN_FILL] += max(x, 0.0) * part
        _blank_outside(flat, parts)
        widen(bits, extreme_bits)
    return high, low


@kernel(fastmath=FAST)
def _add_row(row, flat, parts, sums):
    """Add the cells of a row that the zero line does not cross, each by its part."""
    area = 0.0
    cut = 0.0
    fill = 0.0
    cut_area = 0.0
    fill_area = 0.0
    for j in range(flat.size):
        part = parts[j]
        x = np.float64(flat[j])
        area += part if row[j + 1] == row[j + 1] else 0.0
        cut -= min(x, 0.0) * part
        fill += max(x, 0.0) * part
        cut_area += part if x < 0.0 else 0.0
        fill_area += part if x > 0.0 else 0.0
    sums[VALID] += area
    sums[CUT] += cut
    sums[FILL] += fill
    sums[CUT_AREA] += cut_area
    sums[FILL_AREA] += fill_area
    sums[PLAIN_CUT] += cut
    sums[PLAIN_FILL] += fill


@kernel(fastmath=FAST)
def _differing_row(row, parts):
    """Area of a row whose depth is not 0, of ground without layers [cells]."""
    area = 0.0
    for j in range(parts.size):
        area += parts[j] if abs(row[j + 1]) > DISTURBED_OVER_M else 0.0
    return area


@kernel(fastmath=FAST)
def _disturbed_row(row, disturbed, parts):
    """Area of a row that is disturbed and has data [cells]."""
    area = 0.0
    for j in range(parts.size):
        area += disturbed[j] * parts[j] if row[j + 1] == row[j + 1] else 0.0
    return area


@kernel(fastmath=FAST)
def _blank_outside(flat, parts):
    """Set the depths of cells that have no part to 0."""
    for j in range(flat.size):
        flat[j] = flat[j] if parts[j] > 0.0 else flat.dtype.type(0)


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
    split(depth, cells, np.zeros(8))
    return SplitCells(*cells)
