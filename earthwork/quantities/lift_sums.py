"""Volume, area and depth bands of every lift of every fill area, from the column ends that a tally has counted."""

from __future__ import annotations

import numpy as np

from earthwork.compiled import kernel
from earthwork.quantities.lift_kernel import BIN, CODE, LENGTH, LOW, kinds_of, record

#: Ends within this share of a lift of each other, or of a lift's edge, are taken to be at one height.
_LEVEL = 2e-3


@kernel
def _reach(runs, order, n):
    """Of the runs of one code, the first of which is the n-th: where they end, lowest bin, and the one over the highest."""
    code = runs[order[n], CODE]
    low = runs[order[n], BIN]
    high = low
    while n < order.size and runs[order[n], CODE] == code:
        low = min(low, runs[order[n], BIN])
        high = max(high, runs[order[n], BIN] + runs[order[n], LENGTH])
        n += 1
    return n, low, high


@kernel
def _add_runs(runs, moments, order, starts, n, stop, low, sums):
    """Add up the moments of some runs by bin, in ``sums`` (bins from the lowest one, 3), which holds zeros."""
    for i in range(n, stop):
        start = starts[order[i]]
        at = runs[order[i], BIN] - low
        for k in range(runs[order[i], LENGTH]):
            sums[at + k, 0] += moments[start + k, 0]
            sums[at + k, 1] += moments[start + k, 1]
            sums[at + k, 2] += moments[start + k, 2]


@kernel
def merge_runs(runs, moments, order, starts, merged_runs, merged, counts):
    """Add up the records of one code and bin, which the tiles of a coarse cell have made.

    Args:
        runs, moments: the records.
        order: of the runs, by code.
        starts: (runs,) where the moments of each run begin.
        merged_runs, merged, counts: records to fill, with room for as many as there are; see
            :func:`earthwork.quantities.lift_kernel.record`.
    """
    sums = np.zeros((64, 3))
    n = 0
    while n < order.size:
        stop, low, high = _reach(runs, order, n)
        if high - low > sums.shape[0]:
            sums = np.zeros((2 * (high - low), 3))
        _add_runs(runs, moments, order, starts, n, stop, low, sums)
        code = runs[order[n], CODE]
        for k in range(high - low):
            if sums[k, 0] != 0.0:
                record(merged_runs, merged, counts, code, low + k, sums[k, 0], sums[k, 1], sums[k, 2])
                sums[k, :] = 0.0
        n = stop


@kernel
def bench_sums(
    runs, moments, order, starts, bands, area_of_cell, origins, offsets, first_lift, volumes, standing, ends
):  # fmt: skip
    """Add the column ends of all fill areas up, lift by lift.

    The ends in a bin are taken as spread evenly about their mean with the variance that they have: exact for level
    and for evenly sloping ground, and whatever they are, no volume is lost. The lift edge in the bin parts them.
    Records of one code and bin are added up first.

    Args:
        runs, moments, order, starts: as in :func:`merge_runs`.
        bands: number of ``by_depth`` rows.
        area_of_cell: (coarse cells,) number of the fill area, or −1.
        origins, offsets: of each area: bin that holds its lowest removal bottom, and the place of that in the bin.
        first_lift: of each area: where its lifts start in the sums.
        volumes: (1 + bands, lifts) to receive what the columns that end in a lift add to it [cell · lift].
        standing: (1 + bands, lifts + 1) to receive the area that fills all lifts from an index on [cells].
        ends: (3, lifts) to receive the area of bottoms, of tops and of inner edges in a lift [cells].
    """
    kinds = kinds_of(bands)
    sums = np.zeros((64, 3))
    n = 0
    while n < order.size:
        stop, low, high = _reach(runs, order, n)
        code = runs[order[n], CODE]
        area = area_of_cell[code // (2 * kinds)]
        if area >= 0:
            if high - low > sums.shape[0]:
                sums = np.zeros((2 * (high - low), 3))
            _add_runs(runs, moments, order, starts, n, stop, low, sums)
            # place of the lowest bin's lower edge, in lifts above the lowest removal bottom
            place = low - origins[area] - offsets[area]
            for k in range(high - low):
                if sums[k, 0] != 0.0:
                    _add_bin(
                        sums[k, 0], sums[k, 1], sums[k, 2], code // 2 % kinds, code % 2, bands, place + k,
                        offsets[area], first_lift[area], volumes, standing, ends,
                    )  # fmt: skip
                    sums[k, :] = 0.0
        n = stop


@kernel
def _add_bin(
    whole, first_moment, second_moment, kind, end, bands, bin_at, offset, start, volumes, standing, ends
):  # fmt: skip
    """Add the column ends of one bin to the lift that ends in it, and to the one that begins there."""
    mean = first_moment / whole
    half = np.sqrt(3.0 * max(second_moment / whole - mean * mean, 0.0))
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
        place = (first_moment - whole * share * centre) / a if upper else centre
        at = max(under + upper, 0)
        if kind <= bands:
            _add_end(volumes, standing, ends, kind, end, start, at, a, place, bin_at)
        else:
            ends[2, start + at] += a


@kernel
def _add_end(volumes, standing, ends, kind, end, start, at, area, place, bin_at):
    """Add ends of columns at ``bin_at + place`` lifts to lift ``at`` of an area."""
    signed = area if end == LOW else -area
    volumes[kind, start + at] += signed * (at + 1 - bin_at - place)
    standing[kind, start + at + 1] += signed
    ends[end, start + at] += area
