"""Volume, area and depth bands of every lift of every fill area, from the column ends that a tally has counted."""

from __future__ import annotations

import numpy as np
from numba import njit

from earthwork.quantities.lift_kernel import BIN_BITS, BIN_ZERO, LOW, kinds_of

#: Ends within this share of a lift of each other, or of a lift's edge, are taken to be at one height.
_LEVEL = 2e-3


@njit(cache=True, nogil=True, error_model="numpy")
def bench_sums(keys, moments, bands, area_of_cell, origins, offsets, starts, volumes, standing, ends):
    """Add the column ends of all fill areas up, lift by lift.

    The ends in a bin are taken as spread evenly about their mean with the variance that they have: exact for level
    and for evenly sloping ground, and whatever they are, no volume is lost. The lift edge in the bin parts them.

    Args:
        keys, moments: records, one row a key.
        bands: number of ``by_depth`` rows.
        area_of_cell: (coarse cells,) number of the fill area, or −1.
        origins, offsets: of each area: bin that holds its lowest removal bottom, and the place of that in the bin.
        starts: of each area: where its lifts start in the sums.
        volumes: (1 + bands, lifts) to receive what the columns that end in a lift add to it [cell · lift].
        standing: (1 + bands, lifts + 1) to receive the area that fills all lifts from an index on [cells].
        ends: (3, lifts) to receive the area of bottoms, of tops and of inner edges in a lift [cells].
    """
    kinds = kinds_of(bands)
    for n in range(keys.size):
        packed = keys[n] >> BIN_BITS
        area = area_of_cell[packed // (2 * kinds)]
        if area < 0:
            continue
        end = packed % 2
        kind = packed // 2 % kinds
        offset = offsets[area]
        # place of the bin's lower edge, in lifts above the lowest removal bottom
        bin_at = (keys[n] & ((1 << BIN_BITS) - 1)) - BIN_ZERO - origins[area] - offset
        whole = moments[n, 0]
        mean = moments[n, 1] / whole
        half = np.sqrt(3.0 * max(moments[n, 2] / whole - mean * mean, 0.0))
        half = min(half, max(min(mean, 1.0 - mean), 0.0))
        rises = np.int64(np.floor(bin_at + mean + _LEVEL))
        falls = np.int64(np.ceil(bin_at + mean - _LEVEL)) - 1
        if half <= _LEVEL:
            at = max(rises if end == LOW else falls, 0)
            if kind > bands:
                if rises == falls:
                    ends[2, starts[area] + at] += whole
            else:
                _add_end(volumes, standing, ends, kind, end, starts[area], at, whole, mean, bin_at)
            continue
        share = min(max((offset - mean + half) / (2.0 * half), 0.0), 1.0)
        centre = mean - half + share * half
        under = np.int64(np.ceil(bin_at - 1e-9)) - 1
        for upper in range(2):
            a = whole * (1.0 - share) if upper else whole * share
            if a <= 0.0:
                continue
            place = (moments[n, 1] - whole * share * centre) / a if upper else centre
            at = max(under + upper, 0)
            if kind > bands:
                ends[2, starts[area] + at] += a
            else:
                _add_end(volumes, standing, ends, kind, end, starts[area], at, a, place, bin_at)


@njit(cache=True, nogil=True, error_model="numpy")
def _add_end(volumes, standing, ends, kind, end, start, at, area, place, bin_at):
    """Add ends of columns at ``bin_at + place`` lifts to lift ``at`` of an area."""
    signed = area if end == LOW else -area
    volumes[kind, start + at] += signed * (at + 1 - bin_at - place)
    standing[kind, start + at + 1] += signed
    ends[end, start + at] += area
