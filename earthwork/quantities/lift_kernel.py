"""Columns of fill as moments of their bottoms and tops, by coarse cell and elevation bin.

A cell's fill is a column from a low to a high elevation over a share of the cell. The volume between any two
elevations follows from where columns start and end, so only that is counted: per coarse cell of the plan and per bin
of elevation (one lift thick), the area of column ends in the bin and the first and second moment of their place in
it. That is a fixed handful of additions a cell, however many lifts there are.
"""

from __future__ import annotations

import numpy as np
from numba import njit

from earthwork.quantities.split import _half_slope, _plane_above_zero

LOW, HIGH = 0, 1  #: ends of a column
BIN_BITS = 22  #: of a record's key
BIN_ZERO = 1 << 21  #: what the bin from elevation 0 on has in a key
VOLUME, FOOTPRINT, GROUND, LOWEST, HIGHEST = range(5)  #: what is kept of each coarse cell


@njit(cache=True, nogil=True, error_model="numpy", inline="always")
def _end(scratch, kind, end, z, area, first, lift, reach):
    """Count one end of a column: its area, and the moments of its place in the bin.

    An end beyond the bins keeps its moments in the first or last one, so that no volume is lost.
    """
    place = z / lift - first
    k = min(max(int(place), 0), scratch.shape[2] - 1)
    x = place - k
    ax = area * x
    scratch[kind, end, k, 0] += area
    scratch[kind, end, k, 1] += ax
    scratch[kind, end, k, 2] += ax * x
    reach[0] = min(reach[0], k)
    reach[1] = max(reach[1], k)


@njit(cache=True, nogil=True, error_model="numpy")
def _bands(scratch, low, top, amount, weight, finished, below, from_finished, order, first, lift, reach):
    """Count the parts of a column that lie in ``by_depth`` rows; returns their volume.

    The column low … top holds ``amount`` [mean m over the cell] in equal density, as the volumes count it.
    """
    if not top > low:
        return 0.0
    density = amount / (top - low)
    reached = low
    for n in range(order.size):
        i = order[n]
        edge = min(max((finished if from_finished[i] else top) - below[i], low), top)
        if edge > reached:
            _end(scratch, 1 + i, LOW, reached, density * weight, first, lift, reach)
            _end(scratch, 1 + i, HIGH, edge, density * weight, first, lift, reach)
            reached = edge
    return density * (reached - low)


@njit(cache=True, nogil=True, error_model="numpy")
def _flush(scratch, reach, coarse, first, keys, moments, count):
    """Move what the scratch holds of one coarse cell into the records, and clear it."""
    kinds = scratch.shape[0]
    for kind in range(kinds):
        for end in range(2):
            for k in range(reach[0], reach[1] + 1):
                if scratch[kind, end, k, 0] != 0.0:
                    keys[count] = (((coarse * kinds + kind) * 2 + end) << BIN_BITS) + (k + first + BIN_ZERO)
                    moments[count, 0] = scratch[kind, end, k, 0]
                    moments[count, 1] = scratch[kind, end, k, 1]
                    moments[count, 2] = scratch[kind, end, k, 2]
                    count += 1
                    scratch[kind, end, k, 0] = 0.0
                    scratch[kind, end, k, 1] = 0.0
                    scratch[kind, end, k, 2] = 0.0
    reach[0] = scratch.shape[2]
    reach[1] = -1
    return count


@njit(cache=True, nogil=True, error_model="numpy")
def count_columns(
    depth, top, stripped, bottom, weight, finished, below, from_finished, order,
    row0, column0, side, coarse_columns, lift, first, bins, cells, keys, moments,
):  # fmt: skip
    """Count the fill columns of a tile.

    Args:
        depth: (h + 2, w + 2) subgrade − stripped with a one-cell rim [m]; NaN = no data.
        top, stripped: (h, w) subgrade and stripped ground [m].
        bottom: (h, w) removal bottom [m], or (0, 0) where nothing is over-excavated.
        weight: (h, w) share of each cell that counts, or (0, 0).
        finished: (h, w) finished ground [m], or (0, 0) where no band is measured from it.
        below, from_finished, order: of the ``by_depth`` rows: depth [m], start, and indices from the deepest.
        row0, column0: of the tile's first cell in the grid.
        side, coarse_columns: cells of the grid along a coarse cell; coarse cells across the grid.
        lift, first, bins: thickness of a bin [m]; index of the lowest one that is held, and how many.
        cells: (coarse rows, coarse columns, 5) to which VOLUME [cell·m], FOOTPRINT and GROUND [cells] are added, and
            LOWEST (removal bottom) and HIGHEST (subgrade) widened [m]; from the coarse cell of the tile's first cell.
        keys, moments: records to fill: coarse cell, kind, end and bin in one number; area and moments, (n, 3).

    Returns:
        Number of records.
    """
    h, w = top.shape
    scratch = np.zeros((1 + below.size, 2, bins, 3))
    reach = np.array([bins, -1])
    dug = bottom.size > 0
    weighted = weight.size > 0
    banded = below.size > 0
    needs_finished = finished.size > 0
    count = 0
    big_row0 = row0 // side
    big_column0 = column0 // side
    for big_row in range(big_row0, (row0 + h - 1) // side + 1):
        i0 = max(big_row * side - row0, 0)
        i1 = min((big_row + 1) * side - row0, h)
        for big_column in range(big_column0, (column0 + w - 1) // side + 1):
            j0 = max(big_column * side - column0, 0)
            j1 = min((big_column + 1) * side - column0, w)
            volume = 0.0
            footprint = 0.0
            ground = 0.0
            lowest = np.inf
            highest = -np.inf
            for i in range(i0, i1):
                for j in range(j0, j1):
                    x = np.float64(depth[i + 1, j + 1])
                    if x != x:
                        continue
                    share = weight[i, j] if weighted else 1.0
                    if not share > 0.0:
                        continue
                    ground += share
                    a = _half_slope(np.float64(depth[i + 1, j]), x, np.float64(depth[i + 1, j + 2]))
                    b = _half_slope(np.float64(depth[i, j + 1]), x, np.float64(depth[i + 2, j + 1]))
                    z = np.float64(top[i, j])
                    ground_z = np.float64(stripped[i, j])
                    lower = min(ground_z, z)
                    low = np.float64(bottom[i, j]) if dug else lower
                    refill = lower - low
                    if a + b <= abs(x):
                        fill = max(x, 0.0)
                        part = 1.0 if x > 0.0 else 0.0
                    else:
                        fill, part = _plane_above_zero(x, a, b)
                    amount = fill + refill
                    if not amount > 0.0:
                        continue
                    volume += amount * share
                    lowest = min(lowest, low)
                    highest = max(highest, z)
                    deep = 0.0
                    if banded:
                        level = np.float64(finished[i, j]) if needs_finished else 0.0
                        _, deep = _bands(
                            scratch, low, z, amount, share, level, below, from_finished, order, first, lift, reach
                        )
                    if part == 1.0 or part == 0.0:
                        covered = 1.0
                        _end(scratch, 0, LOW, low, share, first, lift, reach)
                        _end(scratch, 0, HIGH, z, share, first, lift, reach)
                    elif deep > 0.0:
                        covered = 1.0
                        density = amount / (z - low) * share
                        _end(scratch, 0, LOW, low, density, first, lift, reach)
                        _end(scratch, 0, HIGH, z, density, first, lift, reach)
                    else:
                        covered = part
                        thick = fill / part
                        if refill > 0.0:
                            covered = 1.0
                            _end(scratch, 0, LOW, low, share, first, lift, reach)
                            _end(scratch, 0, HIGH, lower, share, first, lift, reach)
                        _end(scratch, 0, LOW, z - thick, part * share, first, lift, reach)
                        _end(scratch, 0, HIGH, z, part * share, first, lift, reach)
                    footprint += covered * share
            place = cells[big_row - big_row0, big_column - big_column0]
            place[VOLUME] += volume
            place[FOOTPRINT] += footprint
            place[GROUND] += ground
            place[LOWEST] = min(place[LOWEST], lowest)
            place[HIGHEST] = max(place[HIGHEST], highest)
            if reach[1] >= reach[0]:
                coarse = big_row * coarse_columns + big_column
                count = _flush(scratch, reach, coarse, first, keys, moments, count)
    return count


# --- the same for plain sites, several times as fast
# -----------------------------------------------------------------

_FAST = {"reassoc", "nsz", "contract", "arcp"}
_FINITE = {*_FAST, "nnan", "ninf"}
_PAD = 4  #: numbers kept for a bin, a power of two
_FAR = 1e300


@njit(cache=True, nogil=True, error_model="numpy", fastmath=_FAST)
def _states(depth, i, j0, fills, mixed):
    """Mark the cells of a row that are all fill, and those that the zero line may cross.

    Args:
        depth: (h + 2, w + 2) with a rim; i, j0: the row, and the first column, of the cells without the rim.
        fills, mixed: (n,) to receive 1 or 0, in the type of the depths.

    Returns:
        Number of cells that are all fill, that may be crossed, and that have data.
    """
    zero = fills.dtype.type(0)
    one = fills.dtype.type(1)
    half = fills.dtype.type(0.5)
    filled = zero
    crossed = zero
    valid = zero
    up = depth[i][j0:]
    row = depth[i + 1][j0:]
    down = depth[i + 2][j0:]
    for j in range(fills.size):
        x = row[j + 1]
        a = x - row[j]
        b = row[j + 2] - x
        c = x - up[j + 1]
        d = down[j + 1] - x
        near = (min(abs(a), abs(b)) if a * b > zero else zero) + (min(abs(c), abs(d)) if c * d > zero else zero)
        holes = (a + b) + (c + d)
        ok = x == x
        mix = ok & ((holes != holes) | (abs(x) < half * near))
        fill = (x > zero) & ~mix
        fills[j] = one if fill else zero
        mixed[j] = one if mix else zero
        filled += one if fill else zero
        crossed += one if mix else zero
        valid += one if ok else zero
    return filled, crossed, valid


@njit(cache=True, nogil=True, error_model="numpy", fastmath=_FINITE)
def _levels(z, i, j0, inverse, first, fills, levels, away):
    """Elevations of the fill cells of a row in bins above the first; ``away`` for the other cells.

    Returns:
        Least and greatest of them, ``away`` included.
    """
    row = z[i][j0:]
    least = _FAR
    most = -_FAR
    for j in range(fills.size):
        u = np.float64(row[j]) * inverse - first
        level = u if fills[j] != 0 else away
        levels[j] = level
        least = min(least, level)
        most = max(most, level)
    return least, most


@njit(cache=True, nogil=True, error_model="numpy")
def _scatter(tables, fills, lows, tops, edges, ranges):
    """Count the ends of the columns of a row into the tables of their coarse cells, and widen their ranges."""
    one = np.uint64(1)
    two = np.uint64(2)
    pad = np.uint64(_PAD)
    for b in range(edges.size - 1):
        low_table = tables[b, LOW]
        top_table = tables[b, HIGH]
        least = ranges[b, 0]
        most = ranges[b, 1]
        for j in range(edges[b], edges[b + 1]):
            if fills[j] != 0:
                u = lows[j]
                k = np.int32(u)
                x = u - k
                at = np.uint64(k) * pad
                least = min(least, u)
                low_table[at] += 1.0
                low_table[at + one] += x
                low_table[at + two] += x * x
                u = tops[j]
                k = np.int32(u)
                x = u - k
                at = np.uint64(k) * pad
                most = max(most, u)
                top_table[at] += 1.0
                top_table[at + one] += x
                top_table[at + two] += x * x
        ranges[b, 0] = least
        ranges[b, 1] = most


@njit(cache=True, nogil=True, error_model="numpy")
def _crossing(depth, top, stripped, i, j, scratch, first, lift, reach, place):
    """Count a cell that the zero line crosses: the part with fill, as thick as its fill is on the mean."""
    x = np.float64(depth[i + 1, j + 1])
    a = _half_slope(np.float64(depth[i + 1, j]), x, np.float64(depth[i + 1, j + 2]))
    b = _half_slope(np.float64(depth[i, j + 1]), x, np.float64(depth[i + 2, j + 1]))
    fill, part = _plane_above_zero(x, a, b)
    if not fill > 0.0:
        return
    z = np.float64(top[i, j])
    base = min(np.float64(stripped[i, j]), z)
    _end(scratch, 0, LOW, base if part == 1.0 else z - fill / part, part, first, lift, reach)
    _end(scratch, 0, HIGH, z, part, first, lift, reach)
    place[VOLUME] += fill
    place[FOOTPRINT] += part
    place[LOWEST] = min(place[LOWEST], base)
    place[HIGHEST] = max(place[HIGHEST], z)


@njit(cache=True, nogil=True, error_model="numpy")
def _collect(tables, scratch, kmin, kmax, lift, place):
    """Move the tables of a coarse cell into the scratch and clear them; adds volume and footprint to its place."""
    for end in range(2):
        sign = 1.0 if end == HIGH else -1.0
        for k in range(kmin, kmax + 1):
            at = k * _PAD
            area = tables[end, at]
            if area == 0.0:
                continue
            first_moment = tables[end, at + 1]
            scratch[0, end, k, 0] += area
            scratch[0, end, k, 1] += first_moment
            scratch[0, end, k, 2] += tables[end, at + 2]
            tables[end, at] = 0.0
            tables[end, at + 1] = 0.0
            tables[end, at + 2] = 0.0
            place[VOLUME] += sign * lift * (k * area + first_moment)
            if end == LOW:
                place[FOOTPRINT] += area


@njit(cache=True, nogil=True, error_model="numpy")
def count_plain(
    depth, top, stripped, row0, column0, side, coarse_columns, lift, first, tables, crossings, cells, keys, moments
):  # fmt: skip
    """:func:`count_columns` of a tile where nothing is over-excavated, banded or weighted.

    Args:
        tables, crossings: of zeros, (coarse cells counted at a time, 2, bins · 4) and (…, 1, 2, bins, 3).

    Returns:
        Number of records, or −1 where an elevation lies outside the bins; what is in ``cells`` is then of no use.
    """
    h, w = top.shape
    big_row0 = row0 // side
    big_column0 = column0 // side
    last_row = (row0 + h - 1) // side
    last_column = (column0 + w - 1) // side
    blocks = tables.shape[0]
    bins = crossings.shape[3]
    reach = np.empty((blocks, 2), np.int64)
    ranges = np.empty((blocks, 2))
    width = blocks * side
    fills = np.empty(width, depth.dtype)
    mixed = np.empty(width, depth.dtype)
    lows = np.empty(width)
    tops = np.empty(width)
    count = 0
    for big_row in range(big_row0, last_row + 1):
        i0 = max(big_row * side - row0, 0)
        i1 = min((big_row + 1) * side - row0, h)
        for chunk in range(big_column0, last_column + 1, blocks):
            edges = _edges(chunk, min(blocks, last_column + 1 - chunk), side, column0, w)
            j0 = edges[0]
            edges -= j0
            n = edges[-1]
            f = fills[:n]
            places = cells[big_row - big_row0, chunk - big_column0 :]
            reach[:, 0] = bins
            reach[:, 1] = -1
            ranges[:, 0] = _FAR
            ranges[:, 1] = -_FAR
            for i in range(i0, i1):
                filled, crossed, valid = _states(depth, i, j0, f, mixed)
                if valid > 0:
                    _ground(depth[i + 1], j0, valid == n, edges, places)
                if filled > 0:
                    least, _ = _levels(stripped, i, j0, 1.0 / lift, first, f, lows, _FAR)
                    _, most = _levels(top, i, j0, 1.0 / lift, first, f, tops, -_FAR)
                    if least < 0.0 or most >= bins:
                        return -1
                    _scatter(tables, f, lows, tops, edges, ranges)
                if crossed > 0:
                    left = crossed
                    for j in range(n):
                        if mixed[j] != 0:
                            b = (column0 + j0 + j) // side - chunk
                            _crossing(depth, top, stripped, i, j0 + j, crossings[b], first, lift, reach[b], places[b])
                            left -= 1
                            if left == 0:
                                break
            for b in range(edges.size - 1):
                place = places[b]
                if ranges[b, 0] < _FAR:
                    place[LOWEST] = min(place[LOWEST], (ranges[b, 0] + first) * lift)
                    place[HIGHEST] = max(place[HIGHEST], (ranges[b, 1] + first) * lift)
                    least = np.int64(ranges[b, 0])
                    most = np.int64(ranges[b, 1])
                    _collect(tables[b], crossings[b], least, most, lift, place)
                    reach[b, 0] = min(reach[b, 0], least)
                    reach[b, 1] = max(reach[b, 1], most)
                if reach[b, 1] >= reach[b, 0]:
                    coarse = big_row * coarse_columns + chunk + b
                    count = _flush(crossings[b], reach[b], coarse, first, keys, moments, count)
    return count


@njit(cache=True, nogil=True, error_model="numpy")
def _edges(chunk, blocks, side, column0, width):
    """Columns of a tile where its coarse cells begin, and where the last one ends."""
    edges = np.empty(blocks + 1, np.int64)
    for b in range(blocks + 1):
        edges[b] = min(max((chunk + b) * side - column0, 0), width)
    return edges


@njit(cache=True, nogil=True, error_model="numpy")
def _ground(row, j0, whole, edges, places):
    """Count the cells with data of a row."""
    for b in range(edges.size - 1):
        if whole:
            places[b, GROUND] += edges[b + 1] - edges[b]
        else:
            for j in range(edges[b], edges[b + 1]):
                x = row[j0 + j + 1]
                places[b, GROUND] += 1.0 if x == x else 0.0
