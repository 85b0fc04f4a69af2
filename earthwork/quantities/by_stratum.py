"""What is dug, shared out to the strata by how much of each cell's column lies in each."""

from __future__ import annotations

import numpy as np

from earthwork.compiled import FAST, kernel
from earthwork.quantities.split import CUT_AREA, SplitRoom, add_crossed, flat_row, widen


@kernel(inline="always")
def _share_out(bottoms, i, j, top, low, amount, weight, sums):
    """Add an amount [mean m] × weight to the sums of the strata, of the column from low to top [m].

    A cell whose column is empty but whose amount is not (its plane crosses zero beside the centre) takes the stratum
    that lies at the top of the column. The last stratum with thickness takes the rest, so the parts add up exactly.
    """
    left = amount
    here = top
    k = 0
    last = bottoms.shape[0]
    while k < last:
        bottom = bottoms[k, i, j]
        if here > bottom:
            if bottom <= low or not top > low:
                break
            part = amount * (here - bottom) / (top - low)
            sums[k] += part * weight
            left -= part
            here = bottom
        k += 1
    sums[k] += left * weight


@kernel
def by_stratum(bottoms, top, low, amount):
    """Amounts of each stratum, mean over the cell [m], (strata, height, width); they add up to the amount.

    Args:
        bottoms: of all strata but the last [m], (strata − 1, height, width).
        top, low: ends of the columns [m], (height, width).
        amount: mean over the cell [m], (height, width).
    """
    h, w = amount.shape
    out = np.zeros((bottoms.shape[0] + 1, h, w))
    for i in range(h):
        for j in range(w):
            if amount[i, j] > 0.0:
                _share_out(bottoms, i, j, top[i, j], low[i, j], amount[i, j], 1.0, out[:, i, j])
    return out


def split_by_stratum(
    depth: np.ndarray, bottoms: np.ndarray, stripped: np.ndarray, subgrade: np.ndarray,
    share: np.ndarray | None = None, row: int = 0, column: int = 0,
) -> tuple[np.ndarray, np.ndarray, float, float]:  # fmt: skip
    """Cut of each stratum over an area, as :func:`by_stratum` has it cell by cell, and what the split gives beside.

    Args:
        depth, stripped, subgrade: with a one-cell rim [m], (h + 2, w + 2); NaN = no data.
        bottoms: of all strata but the last [m], (strata − 1, h, w).
        share: of each cell inside the area, (height, width), starting at (row, column); None: all of the tile.

    Returns:
        Cut by stratum (strata,) [cell·m]; and of all cells, whatever their share, the sums (8,), greatest fill and
        least depth of :func:`earthwork.quantities.split.split`.
    """
    height, width = (depth.shape[0] - 2, depth.shape[1] - 2) if share is None else share.shape
    room = SplitRoom(width, depth.dtype)
    parts = np.ones((1, width)) if share is None else share  # the last row serves all that follow
    cut, sums = np.zeros(len(bottoms) + 1), np.zeros(8)
    high, low = _split_by_stratum(
        depth, bottoms, stripped, subgrade, parts, row, column, height, sums,
        room.flat, room.bits, room.mixed, room.extreme_bits, np.empty(width), cut,
    )  # fmt: skip
    return (cut, sums, *room.extremes(high, low))


@kernel(fastmath=FAST)
def _add_row(flat, top, bottom, parts, above):
    """Cut of one stratum in the cells of a row that the zero line does not cross, each by its part.

    ``above`` (n,) is the cut that lies above it, and is moved on to its bottom: the column of such a cell is its cut.
    """
    total = 0.0
    for j in range(flat.size):
        amount = max(-np.float64(flat[j]), 0.0)
        reached = top[j] - bottom[j]
        # in this order NaN, where there is no data, gives what lies above, which is 0
        reached = reached if reached > above[j] else above[j]
        reached = reached if reached < amount else amount
        total += (reached - above[j]) * parts[j]
        above[j] = reached
    return total


@kernel(fastmath=FAST)
def _add_rest(flat, parts, above):
    """Cut of the last stratum, likewise."""
    total = 0.0
    for j in range(flat.size):
        total += (max(-np.float64(flat[j]), 0.0) - above[j]) * parts[j]
    return total


@kernel
def _split_by_stratum(
    depth, bottoms, stripped, subgrade, share, row0, column0, height, sums, flat, bits, mixed, extreme_bits, above, cut
):  # fmt: skip
    width = flat.size
    last = bottoms.shape[0]
    high = 0.0
    low = 0.0
    for i in range(row0, row0 + height):
        up = depth[i][column0 : column0 + width + 2]
        row = depth[i + 1][column0 : column0 + width + 2]
        down = depth[i + 2][column0 : column0 + width + 2]
        top = stripped[i + 1][column0 + 1 : column0 + 1 + width]
        parts = share[min(i - row0, share.shape[0] - 1)]
        cut_area = sums[CUT_AREA]
        crossed = flat_row(up, row, down, flat, mixed, sums)
        widen(bits, extreme_bits)
        if sums[CUT_AREA] > cut_area:
            above[:] = 0.0
            for k in range(last):
                cut[k] += _add_row(flat, top, bottoms[k, i][column0 : column0 + width], parts, above)
            cut[last] += _add_rest(flat, parts, above)
        if not crossed:
            continue
        for j in range(width):
            if mixed[j] == 0:
                continue
            x, fill, _, _ = add_crossed(up, row, down, j, sums)
            high = max(high, x)
            low = min(low, x)
            if fill - x > 0.0:
                bottom = min(top[j], subgrade[i + 1, column0 + 1 + j])
                _share_out(bottoms, i, column0 + j, top[j], bottom, fill - x, parts[j], cut)
    return high, low
