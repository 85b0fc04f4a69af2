"""Volume, area and depth bands of every lift of every fill area, from the column ends that a tally has counted."""

from __future__ import annotations

import numpy as np
from numba import njit

from earthwork.quantities.lift_kernel import BIN_BITS, BIN_ZERO, LOW, kinds_of

#: Ends within this share of a lift of each other, or of a lift's edge, are taken to be at one height.
_LEVEL = 2e-3


#: Numbers held at one time while the records of one key are added up: what the cache holds.
_HELD = 1 << 22


@njit(cache=True, nogil=True, error_model="numpy")
def bench_sums(keys, moments, bands, area_of_cell, origins, offsets, starts, volumes, standing, ends):
    """Add the column ends of all fill areas up, lift by lift.

    The ends in a bin are taken as spread evenly about their mean with the variance that they have: exact for level
    and for evenly sloping ground, and whatever they are, no volume is lost. The lift edge in the bin parts them.
    Records of one key, which the tiles of a coarse cell have made, are added up first.

    Args:
        keys, moments: records in any order; a key may come again.
        bands: number of ``by_depth`` rows.
        area_of_cell: (coarse cells,) number of the fill area, or −1.
        origins, offsets: of each area: bin that holds its lowest removal bottom, and the place of that in the bin.
        starts: of each area: where its lifts start in the sums.
        volumes: (1 + bands, lifts) to receive what the columns that end in a lift add to it [cell · lift].
        standing: (1 + bands, lifts + 1) to receive the area that fills all lifts from an index on [cells].
        ends: (3, lifts) to receive the area of bottoms, of tops and of inner edges in a lift [cells].
    """
    kinds = kinds_of(bands)
    cells, low, count = _ranges(keys, kinds, area_of_cell)
    first = 0
    while first < area_of_cell.size:
        last = first
        held = 0
        while last < area_of_cell.size and (last == first or held + 6 * kinds * count[last] <= _HELD):
            held += 6 * kinds * count[last]
            last += 1
        if held > 0:
            at = _places(count[first:last])
            sums = _added(keys, moments, cells, kinds, first, last, low, count, at)
            for cell in range(first, last):
                area = area_of_cell[cell]
                for row in range(at[cell - first], at[cell - first] + count[cell]):
                    # place of the bin's lower edge, in lifts above the lowest removal bottom
                    bin_at = low[cell] + (row - at[cell - first]) - origins[area] - offsets[area]
                    for kind in range(kinds):
                        for end in range(2):
                            if sums[row, kind, end, 0] != 0.0:
                                _add_bin(
                                    sums[row, kind, end], kind, end, bands, bin_at, offsets[area], starts[area],
                                    volumes, standing, ends,
                                )  # fmt: skip
        first = last


@njit(cache=True, nogil=True, error_model="numpy")
def _ranges(keys, kinds, area_of_cell):
    """Coarse cell of each record; lowest bin and number of bins that each cell has records in, 0 for cells of no area."""
    cells = np.empty(keys.size, np.int32)
    low = np.full(area_of_cell.size, np.int64(2 * BIN_ZERO))
    high = np.full(area_of_cell.size, np.int64(-2 * BIN_ZERO))
    for n in range(keys.size):
        cell = (keys[n] >> BIN_BITS) // (2 * kinds)
        cells[n] = cell
        k = (keys[n] & ((1 << BIN_BITS) - 1)) - BIN_ZERO
        low[cell] = min(low[cell], k)
        high[cell] = max(high[cell], k)
    count = np.zeros(area_of_cell.size, np.int64)
    for cell in range(count.size):
        if area_of_cell[cell] >= 0 and high[cell] >= low[cell]:
            count[cell] = high[cell] - low[cell] + 1
    return cells, low, count


@njit(cache=True, nogil=True, error_model="numpy")
def _places(count):
    """Where the bins of each coarse cell begin, one cell after another."""
    at = np.zeros(count.size, np.int64)
    for i in range(1, count.size):
        at[i] = at[i - 1] + count[i - 1]
    return at


@njit(cache=True, nogil=True, error_model="numpy")
def _added(keys, moments, cells, kinds, first, last, low, count, at):
    """Moments of coarse cells ``first … last``, added up by bin, kind and end: (bins, kinds, 2, 3)."""
    sums = np.zeros((at[-1] + count[last - 1], kinds, 2, 3))
    for n in range(keys.size):
        cell = cells[n]
        if first <= cell < last and count[cell] > 0:
            packed = (keys[n] >> BIN_BITS) - 2 * kinds * cell
            row = at[cell - first] + (keys[n] & ((1 << BIN_BITS) - 1)) - BIN_ZERO - low[cell]
            into = sums[row, packed // 2, packed % 2]
            into[0] += moments[n, 0]
            into[1] += moments[n, 1]
            into[2] += moments[n, 2]
    return sums


@njit(cache=True, nogil=True, error_model="numpy")
def _add_bin(moments, kind, end, bands, bin_at, offset, start, volumes, standing, ends):
    """Add the column ends of one bin to the lift that ends in it, and to the one that begins there."""
    whole = moments[0]
    mean = moments[1] / whole
    half = np.sqrt(3.0 * max(moments[2] / whole - mean * mean, 0.0))
    half = min(half, max(min(mean, 1.0 - mean), 0.0))
    if half <= _LEVEL:
        rises = np.int64(np.floor(bin_at + mean + _LEVEL))
        falls = np.int64(np.ceil(bin_at + mean - _LEVEL)) - 1
        at = max(rises if end == LOW else falls, 0)
        if kind <= bands:
            _add_end(volumes, standing, ends, kind, end, start, at, whole, mean, bin_at)
        elif rises == falls:
            ends[2, start + at] += whole
        return
    share = min(max((offset - mean + half) / (2.0 * half), 0.0), 1.0)
    centre = mean - half + share * half
    under = np.int64(np.ceil(bin_at - 1e-9)) - 1
    for upper in range(2):
        a = whole * (1.0 - share) if upper else whole * share
        if a <= 0.0:
            continue
        place = (moments[1] - whole * share * centre) / a if upper else centre
        at = max(under + upper, 0)
        if kind <= bands:
            _add_end(volumes, standing, ends, kind, end, start, at, a, place, bin_at)
        else:
            ends[2, start + at] += a


@njit(cache=True, nogil=True, error_model="numpy")
def _add_end(volumes, standing, ends, kind, end, start, at, area, place, bin_at):
    """Add ends of columns at ``bin_at + place`` lifts to lift ``at`` of an area."""
    signed = area if end == LOW else -area
    volumes[kind, start + at] += signed * (at + 1 - bin_at - place)
    standing[kind, start + at + 1] += signed
    ends[end, start + at] += area
