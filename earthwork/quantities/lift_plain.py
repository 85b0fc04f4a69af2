"""Columns of fill as in :mod:`earthwork.quantities.lift_kernel`, for plain ground, several times as fast.

Plain is a tile where nothing is over-excavated, banded or weighted: its columns run from existing to finished ground.
Cut and fill of the tile come of the same rows, so they are counted as well: nothing is read twice.
"""

from __future__ import annotations

import numpy as np

from earthwork.compiled import FAST, kernel
from earthwork.quantities.lift_kernel import FOOTPRINT, GROUND, HIGH, HIGHEST, LOW, LOWEST, VOLUME, code_of, record
from earthwork.quantities.split import FILL_AREA, VALID, add_crossed, flat_row, widen

_FINITE = {*FAST, "nnan", "ninf"}  #: where what comes of NaN is not used
_PAD = 4  #: numbers kept for a bin, a power of two
_FAR = 1e300  #: beyond every level, for the least and the greatest of none
LARGE_SIDE = 32  #: coarse cells of so many cells along are counted with the second moments of a sample
SAMPLED_ROWS = 4  #: of so many rows one is counted with second moments where the others are packed
LEAST_PLACE_BITS = 32  #: a level fill of one lift then adds up to 2⁻³² of it, 2.3·10⁻¹⁰, at the worst


def packing(side: int) -> tuple[int, int] | None:
    """Bits of the places and of the number of ends that a packed bin of a coarse cell holds; None where none is packed.

    A bin holds the number of its ends above the sum of their places, each in units of 2 to the power of minus the
    first bits of a lift: the fewer the cells, the finer.

    >>> packing(32), packing(80), packing(31), packing(512)
    ((43, 10), (37, 13), None, None)
    """
    most = side * side - side * (side // SAMPLED_ROWS)
    places = 63 - 2 * most.bit_length()
    return (places, most.bit_length()) if side >= LARGE_SIDE and places >= LEAST_PLACE_BITS else None


@kernel(fastmath=_FINITE)
def _levels(top, depth, i, j0, scale, origin, height, flat, lows, tops):
    """Ends of the columns of a row above the lowest bin; of no meaning for cells that are not all fill.

    Args:
        scale, origin: level = elevation · scale − origin.
        height: level of the upper edge of the highest bin.
        flat: (n,) depths of cells that the zero line does not cross, + fill; else 0.
        lows, tops: (n,) to receive the levels, cut off where these are integers: add ½ through the origin.

    Returns:
        Whether an end lies outside the bins.
    """
    high = top[i + 1][j0 + 1 :]
    thick = depth[i + 1][j0 + 1 :]
    outside = 0.0
    for j in range(flat.size):
        z = np.float64(high[j])
        low = (z - np.float64(thick[j])) * scale - origin
        up = z * scale - origin
        lows[j] = lows.dtype.type(low)
        tops[j] = tops.dtype.type(up)
        outside += 1.0 if (flat[j] > 0) & ((low < 0.0) | (up >= height)) else 0.0
    return outside > 0.0


@kernel(fastmath=FAST)
def _over_zero(values, start, stop):
    """How many of a stretch of values are over 0."""
    count = values.dtype.type(0)
    one = values.dtype.type(1)
    zero = values.dtype.type(0)
    for value in values[start:stop]:
        count += one if value > zero else zero
    return count


@kernel
def _any(values, start, stop):
    """Whether any of a stretch of values is over 0."""
    return _over_zero(values, start, stop) > 0


@kernel
def _scatter(tables, flat, lows, tops, edges, ranges):
    """Count the ends of the columns of a row into the tables of their coarse cells, and widen their ranges."""
    one = np.uint64(1)
    two = np.uint64(2)
    pad = np.uint64(_PAD)
    for b in range(edges.size - 1):
        if not _any(flat, edges[b], edges[b + 1]):
            continue
        low_table = tables[b, LOW]
        top_table = tables[b, HIGH]
        lowest, low_most = ranges[b, LOW]
        top_least, highest = ranges[b, HIGH]
        for j in range(edges[b], edges[b + 1]):
            if flat[j] > 0:
                u = lows[j]
                k = np.int32(u)
                x = u - k
                at = np.uint64(k) * pad
                lowest = min(lowest, u)
                low_most = max(low_most, u)
                low_table[at] += 1.0
                low_table[at + one] += x
                low_table[at + two] += x * x
                u = tops[j]
                k = np.int32(u)
                x = u - k
                at = np.uint64(k) * pad
                top_least = min(top_least, u)
                highest = max(highest, u)
                top_table[at] += 1.0
                top_table[at + one] += x
                top_table[at + two] += x * x
        ranges[b, LOW, 0] = lowest
        ranges[b, LOW, 1] = low_most
        ranges[b, HIGH, 0] = top_least
        ranges[b, HIGH, 1] = highest


@kernel
def _scatter_packed(packed, flat, lows, tops, edges, ranges, place_bits, count_bits):
    """As :func:`_scatter` of levels in units of a lift's 2 to the power of ``place_bits``, without the second moment.

    Number and places of the ends of a bin add up in one integer, see :func:`packing`.
    """
    unit = 1.0 / (np.int64(1) << place_bits)
    mask = (np.int64(1) << place_bits) - np.int64(1)
    one = np.int64(1) << (place_bits + count_bits)
    far = np.int64(1 << 62)
    for b in range(edges.size - 1):
        filled = _over_zero(flat, edges[b], edges[b + 1])
        if filled == 0:
            continue
        whole = filled == edges[b + 1] - edges[b]  # one test for all cells is foreseen, one a cell is not
        low_bins = packed[b, LOW]
        top_bins = packed[b, HIGH]
        lowest = far
        low_most = -far
        top_least = far
        highest = -far
        for j in range(edges[b], edges[b + 1]):
            if whole or flat[j] > 0:
                level = lows[j]
                lowest = min(lowest, level)
                low_most = max(low_most, level)
                low_bins[np.uint64(level >> place_bits)] += (level & mask) | one
                level = tops[j]
                top_least = min(top_least, level)
                highest = max(highest, level)
                top_bins[np.uint64(level >> place_bits)] += (level & mask) | one
        ranges[b, LOW, 0] = min(ranges[b, LOW, 0], lowest * unit)
        ranges[b, LOW, 1] = max(ranges[b, LOW, 1], low_most * unit)
        ranges[b, HIGH, 0] = min(ranges[b, HIGH, 0], top_least * unit)
        ranges[b, HIGH, 1] = max(ranges[b, HIGH, 1], highest * unit)


@kernel
def _crossings(up, row, down, top, mixed, edges, crossings, first, bins, lift, reach, places, sums, spread):
    """Count the cells of a row that the zero line crosses: the part with fill, as thick as its fill is on the mean.

    Returns:
        Whether an end lies outside the bins.

    Args:
        up, row, down: depths of three rows, with the column before the first cell and the one after the last.
        top: subgrade of the row, likewise.
        sums: of cut and fill, see :func:`earthwork.quantities.split.split`.
        spread: (2,) greatest and least depth, to be widened.
    """
    outside = False
    inverse = 1.0 / lift
    for b in range(edges.size - 1):
        if not _any(mixed, edges[b], edges[b + 1]):
            continue
        for j in range(edges[b], edges[b + 1]):
            if mixed[j] == 0:
                continue
            x, fill, _, part = add_crossed(up, row, down, j, sums)
            spread[0] = max(spread[0], x)
            spread[1] = min(spread[1], x)
            if not fill > 0.0:
                continue
            z = np.float64(top[j + 1])
            base = z - fill / part if part < 1.0 else min(z - x, z)
            for end in range(2):
                level = (z if end == HIGH else base) * inverse - first
                outside |= level < 0.0 or level >= bins
                k = min(max(int(level), 0), bins - 1)
                place = level - k
                crossings[b, end, k, 0] += part
                crossings[b, end, k, 1] += part * place
                crossings[b, end, k, 2] += part * place * place
                reach[b, end, 0] = min(reach[b, end, 0], k)
                reach[b, end, 1] = max(reach[b, end, 1], k)
            places[b, VOLUME] += fill
            places[b, FOOTPRINT] += part
            places[b, LOWEST] = min(places[b, LOWEST], base)
            places[b, HIGHEST] = max(places[b, HIGHEST], z)
    return outside


@kernel
def _widen(ranges, reach, first, lift, place):
    """Widen the elevations of a coarse cell, and the bins that have ends, by the ranges of its whole columns."""
    if ranges[LOW, 0] == _FAR:
        return
    place[LOWEST] = min(place[LOWEST], (ranges[LOW, 0] + first) * lift)
    place[HIGHEST] = max(place[HIGHEST], (ranges[HIGH, 1] + first) * lift)
    for end in range(2):
        reach[end, 0] = min(reach[end, 0], np.int64(ranges[end, 0]))
        reach[end, 1] = max(reach[end, 1], np.int64(ranges[end, 1]))


@kernel
def _collect(
    tables, packed, crossings, reach, coarse, first, lift, place, runs, moments, counts, place_bits, count_bits
):  # fmt: skip
    """Move what was counted of a coarse cell into the records, and clear it; adds volume and footprint to its place."""
    has_packed = packed.shape[0] > 0
    for end in range(2):
        code = code_of(coarse, 1, 0, end)
        total = 0.0
        level = 0.0
        for k in range(reach[end, 0], reach[end, 1] + 1):
            at = k * _PAD
            area = tables[end, at]
            part = crossings[end, k, 0]
            bits = packed[end, k] if has_packed else 0
            if area == 0.0 and part == 0.0 and bits == 0:
                continue
            first_moment = tables[end, at + 1]
            second_moment = tables[end, at + 2]
            if bits != 0:
                shift = place_bits + count_bits
                more = np.float64(bits >> shift)
                places = np.float64(bits & ((np.int64(1) << shift) - np.int64(1))) / (np.int64(1) << place_bits)
                mean = (first_moment + places) / (area + more)
                half = max(min(mean, 1.0 - mean), 0.0)
                variance = half * half / 3.0  # as spread as can be, where no row of the sample has an end in the bin
                if area > 0.0:
                    variance = max(second_moment / area - (first_moment / area) ** 2, 0.0)
                area += more
                first_moment += places
                second_moment = area * (variance + mean * mean)
                packed[end, k] = 0
            total += area
            level += k * area + first_moment
            record(
                runs, moments, counts, code, k + first, area + part,
                first_moment + crossings[end, k, 1], second_moment + crossings[end, k, 2],
            )  # fmt: skip
            for m in range(3):
                tables[end, at + m] = 0.0
                crossings[end, k, m] = 0.0
        place[VOLUME] += lift * level if end == HIGH else -lift * level
        if end == LOW:
            place[FOOTPRINT] += total


@kernel
def count_plain(
    depth, top, row0, column0, side, coarse_columns, lift, first, bins, tables, packed, place_bits, count_bits,
    crossings, cells, runs, moments, counts, sums, flat, bits, mixed, extreme_bits, spread,
):  # fmt: skip
    """:func:`count_columns` of a tile where nothing is over-excavated, banded or weighted, and its cut and fill.

    Args:
        top: (h + 2, w + 2) subgrade with a rim [m]: rows that are not cut off can be read in vectors.
        first, bins: index of the lowest bin, and how many; the tables may hold more of them.
        tables, crossings: of zeros, (coarse cells counted at a time, 2, bins · 4) and (…, 2, bins, 3).
        packed: of zeros, (…, 2, bins), where coarse cells are large enough that the second moment of every fourth row
            will do; else (…, 0, 0).
        place_bits, count_bits: see :func:`packing`.
        sums: (8,) to which cut and fill are added, see :func:`earthwork.quantities.split.split`.
        flat, bits, mixed, extreme_bits: of a :class:`earthwork.quantities.split.SplitRoom` as wide as the coarse cells
            that are counted at a time.
        spread: (2,) greatest and least depth of cells that the zero line crosses, to be widened [m].

    Returns:
        False where an elevation lies outside the bins; nothing that was counted is then of use.
    """
    h = top.shape[0] - 2
    w = top.shape[1] - 2
    big_row0 = row0 // side
    big_column0 = column0 // side
    last_row = (row0 + h - 1) // side
    last_column = (column0 + w - 1) // side
    blocks = tables.shape[0]
    reach = np.empty((blocks, 2, 2), np.int64)
    ranges = np.empty((blocks, 2, 2))
    width = blocks * side
    lows = np.empty(width)
    tops = np.empty(width)
    fine = float(np.int64(1) << place_bits)
    fine_lows = np.empty(width, np.int64)
    fine_tops = np.empty(width, np.int64)
    for big_row in range(big_row0, last_row + 1):
        i0 = max(big_row * side - row0, 0)
        i1 = min((big_row + 1) * side - row0, h)
        for chunk in range(big_column0, last_column + 1, blocks):
            edges = _edges(chunk, min(blocks, last_column + 1 - chunk), side, column0, w)
            j0 = edges[0]
            edges -= j0
            n = edges[-1]
            f = flat[:n]
            m = mixed[:n]
            places = cells[big_row - big_row0, chunk - big_column0 :]
            reach[:, :, 0] = bins
            reach[:, :, 1] = -1
            ranges[:, :, 0] = _FAR
            ranges[:, :, 1] = -_FAR
            for i in range(i0, i1):
                valid = sums[VALID]
                filled = sums[FILL_AREA]
                up = depth[i][j0:]
                row = depth[i + 1][j0:]
                down = depth[i + 2][j0:]
                crossed = flat_row(up, row, down, f, m, sums)
                widen(bits[:n], extreme_bits)
                if sums[VALID] > valid:
                    _ground(row, sums[VALID] - valid == n, edges, places)
                if sums[FILL_AREA] > filled:
                    if packed.shape[1] == 0 or (row0 + i) % SAMPLED_ROWS == 0:
                        if _levels(top, depth, i, j0, 1.0 / lift, float(first), float(bins), f, lows, tops):
                            return False
                        _scatter(tables, f, lows, tops, edges, ranges)
                    else:
                        if _levels(
                            top, depth, i, j0, fine / lift, fine * first - 0.5, fine * bins, f, fine_lows, fine_tops
                        ):
                            return False
                        _scatter_packed(packed, f, fine_lows, fine_tops, edges, ranges, place_bits, count_bits)
                if crossed and _crossings(
                    up, row, down, top[i + 1][j0:], m, edges, crossings, first, bins, lift, reach, places, sums, spread
                ):  # fmt: skip
                    return False
            for b in range(edges.size - 1):
                _widen(ranges[b], reach[b], first, lift, places[b])
                _collect(
                    tables[b], packed[b], crossings[b], reach[b], big_row * coarse_columns + chunk + b, first, lift,
                    places[b], runs, moments, counts, place_bits, count_bits,
                )  # fmt: skip
    return True


@kernel
def _edges(chunk, blocks, side, column0, width):
    """Columns of a tile where its coarse cells begin, and where the last one ends."""
    edges = np.empty(blocks + 1, np.int64)
    for b in range(blocks + 1):
        edges[b] = min(max((chunk + b) * side - column0, 0), width)
    return edges


@kernel
def _ground(row, whole, edges, places):
    """Count the cells with data of a row."""
    for b in range(edges.size - 1):
        if whole:
            places[b, GROUND] += edges[b + 1] - edges[b]
        else:
            for j in range(edges[b], edges[b + 1]):
                x = row[j + 1]
                places[b, GROUND] += 1.0 if x == x else 0.0
