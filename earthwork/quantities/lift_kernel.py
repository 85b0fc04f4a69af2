"""Columns of fill as moments of their bottoms and tops, by coarse cell and elevation bin.

A cell's fill is a column from a low to a high elevation over a share of the cell. The volume between any two
elevations follows from where columns start and end, so only that is counted: per coarse cell of the plan and per bin
of elevation (one lift thick), the area of column ends in the bin and the first and second moment of their place in
it. That is a fixed handful of additions a cell, however many lifts there are.
"""

from __future__ import annotations

import numpy as np

from earthwork.compiled import kernel
from earthwork.quantities.split import half_slope, plane_above_zero

LOW, HIGH = 0, 1  #: ends of a column
CODE, BIN, LENGTH = range(3)  #: of a run: coarse cell, kind and end in one number; its lowest bin; its bins
VOLUME, FOOTPRINT, GROUND, LOWEST, HIGHEST = range(5)  #: what is kept of each coarse cell


@kernel
def kinds_of(bands):
    """Kinds of column that are told apart: what lies in no ``by_depth`` row, in each row, and their inner edges."""
    return bands + 2 if bands else 1


@kernel(inline="always")
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


@kernel
def _bands(scratch, low, top, density, weight, finished, below, from_finished, order, first, lift, reach):
    """Count the parts of a column that lie in ``by_depth`` rows; returns where the part above them starts.

    The column low … top is as dense as the volumes take it to be: ``density`` of its area. Where one part ends and
    the next one starts is counted as an inner edge, the last kind.
    """
    inner = scratch.shape[0] - 1
    reached = low
    for n in range(order.size):
        i = order[n]
        edge = min(max((finished if from_finished[i] else top) - below[i], low), top)
        if edge > reached:
            _end(scratch, 1 + i, LOW, reached, density * weight, first, lift, reach)
            _end(scratch, 1 + i, HIGH, edge, density * weight, first, lift, reach)
            if reached > low:
                _end(scratch, inner, LOW, reached, density * weight, first, lift, reach)
            reached = edge
    if low < reached < top:
        _end(scratch, inner, LOW, reached, density * weight, first, lift, reach)
    return reached


@kernel(inline="always")
def code_of(coarse, kinds, kind, end):
    """What a run is of: a coarse cell, a kind of column, and its lower or upper ends."""
    return (coarse * kinds + kind) * 2 + end


@kernel(inline="always")
def record(runs, moments, counts, code, k, area, first_moment, second_moment):
    """Append the ends in bin ``k``: to the last run where that goes on there, else to a new one.

    Args:
        counts: (2,) number of runs and of moments so far; both go up.
    """
    n = counts[0]
    if n == 0 or runs[n - 1, CODE] != code or runs[n - 1, BIN] + runs[n - 1, LENGTH] != k:
        runs[n, CODE] = code
        runs[n, BIN] = k
        runs[n, LENGTH] = 0
        n += 1
        counts[0] = n
    runs[n - 1, LENGTH] += 1
    row = counts[1]
    moments[row, 0] = area
    moments[row, 1] = first_moment
    moments[row, 2] = second_moment
    counts[1] = row + 1


@kernel
def _flush(scratch, reach, coarse, first, runs, moments, counts):
    """Move what the scratch holds of one coarse cell into the records, and clear it."""
    kinds = scratch.shape[0]
    for kind in range(kinds):
        for end in range(2):
            code = code_of(coarse, kinds, kind, end)
            for k in range(reach[0], reach[1] + 1):
                here = scratch[kind, end, k]
                if here[0] != 0.0:
                    record(runs, moments, counts, code, k + first, here[0], here[1], here[2])
                    here[:] = 0.0
    reach[0] = scratch.shape[2]
    reach[1] = -1


@kernel
def count_columns(
    depth, top, bottom, weight, finished, below, from_finished, order,
    row0, column0, side, coarse_columns, lift, first, bins, cells, runs, moments, counts,
):  # fmt: skip
    """Count the fill columns of a tile, in one long loop: parted into functions it takes a quarter longer.

    Args:
        depth: (h + 2, w + 2) subgrade − stripped with a one-cell rim [m]; NaN = no data.
        top: (h, w) subgrade [m].
        bottom: (h, w) removal bottom [m], or (0, 0) where nothing is over-excavated.
        weight: (h, w) share of each cell that counts, or (0, 0).
        finished: (h, w) finished ground [m], or (0, 0) where no band is measured from it.
        below, from_finished, order: of the ``by_depth`` rows: depth [m], start, and indices from the deepest.
        row0, column0: of the tile's first cell in the grid.
        side, coarse_columns: cells of the grid along a coarse cell; coarse cells across the grid.
        lift, first, bins: thickness of a bin [m]; index of the lowest one that is held, and how many.
        cells: (coarse rows, coarse columns, 5) to which VOLUME [cell·m], FOOTPRINT and GROUND [cells] are added, and
            LOWEST (removal bottom) and HIGHEST (subgrade) widened [m]; from the coarse cell of the tile's first cell.
        runs, moments, counts: records to fill, see :func:`record`: neighbouring bins with ends of one code make a run,
            each with its area [cells] and moments, one run after another.
    """
    h, w = top.shape
    scratch = np.zeros((kinds_of(below.size), 2, bins, 3))
    reach = np.array([bins, -1])
    dug = bottom.size > 0
    weighted = weight.size > 0
    banded = below.size > 0
    needs_finished = finished.size > 0
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
                    a = half_slope(np.float64(depth[i + 1, j]), x, np.float64(depth[i + 1, j + 2]))
                    b = half_slope(np.float64(depth[i, j + 1]), x, np.float64(depth[i + 2, j + 1]))
                    z = np.float64(top[i, j])
                    lower = min(z - x, z)
                    low = np.float64(bottom[i, j]) if dug else lower
                    refill = lower - low
                    if a + b <= abs(x):
                        fill = max(x, 0.0)
                        part = 1.0 if x > 0.0 else 0.0
                    else:
                        fill, part = plane_above_zero(x, a, b)
                    amount = fill + refill
                    if not amount > 0.0:
                        continue
                    volume += amount * share
                    whole = part == 1.0 or part == 0.0
                    lowest = min(lowest, low if whole or refill > 0.0 else z - fill / part)
                    highest = max(highest, z)
                    start = low
                    density = 1.0
                    if banded and z > low:
                        level = np.float64(finished[i, j]) if needs_finished else 0.0
                        density = amount / (z - low)
                        start = _bands(
                            scratch, low, z, density, share, level, below, from_finished, order, first, lift, reach
                        )
                    covered = 1.0
                    if whole or start > low:
                        if start < z:
                            _end(scratch, 0, LOW, start, density * share, first, lift, reach)
                            _end(scratch, 0, HIGH, z, density * share, first, lift, reach)
                    else:
                        if refill > 0.0:
                            _end(scratch, 0, LOW, low, share, first, lift, reach)
                            _end(scratch, 0, HIGH, lower, share, first, lift, reach)
                        else:
                            covered = part
                        _end(scratch, 0, LOW, z - fill / part, part * share, first, lift, reach)
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
                _flush(scratch, reach, coarse, first, runs, moments, counts)
