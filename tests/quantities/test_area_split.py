"""Sums over areas: cells split at the zero line by their shares, and cut told apart by stratum.

Every plane is cut cell by cell with shapely, or sliced in fine sub-cells with numpy; neither knows our formulas.
"""

from itertools import pairwise

import numpy as np
import pytest
import shapely

from earthwork.quantities.by_stratum import split_by_stratum
from earthwork.quantities.split import (
    CUT,
    CUT_AREA,
    DISTURBED,
    FILL,
    FILL_AREA,
    PLAIN_CUT,
    PLAIN_FILL,
    VALID,
    split,
    split_part,
)

ROWS, COLUMNS = 11, 14


def plane(h, east, south):
    """Values at the centres of the cells and of their rim: ``h`` in the middle, slopes per cell."""
    u, v = np.arange(COLUMNS + 2) - 0.5 - COLUMNS / 2, np.arange(ROWS + 2) - 0.5 - ROWS / 2
    return h + east * u[None, :] + south * v[:, None]


def clipped(h, east, south):
    """Fill [m] and fill share of every cell under such a plane, with shapely."""
    u, v = COLUMNS / 2, ROWS / 2
    steepest = np.hypot(east, south)
    along = np.array([east, south]) / steepest
    foot, across = -along * h / steepest, np.array([-along[1], along[0]])
    above = shapely.Polygon([foot + 99 * across, foot - 99 * across, foot + 99 * (2 * along - across),
                             foot + 99 * (2 * along + across)])  # fmt: skip
    fill, share = np.zeros((ROWS, COLUMNS)), np.zeros((ROWS, COLUMNS))
    for i in range(ROWS):
        for j in range(COLUMNS):
            part = shapely.box(j - u, i - v, j - u + 1, i - v + 1).intersection(above)
            if part.area > 0:
                share[i, j] = part.area
                fill[i, j] = part.area * (h + east * part.centroid.x + south * part.centroid.y)
    return fill, share


def holed(depth):
    """The plane with holes that leave every cell a neighbour on each axis, so that it is the same plane still."""
    depth = depth.copy()
    depth[3:5, 4:6] = np.nan
    depth[8, 9] = np.nan
    depth[:, -1] = np.nan
    return depth


def some_shares(random, height, width):
    """Shares of an area: within, outside, and on the edge."""
    return random.choice([0.0, 1.0, 0.37, 0.125, 1e-3], (height, width))


PLANES = [(0.05, 0.31, -0.17), (-0.2, 0.0, 0.25), (0.4, -0.03, 0.002), (0.1, 2.0, 1.9), (-3.0, 0.6, 0.1)]


@pytest.mark.parametrize(("h", "east", "south"), PLANES)
@pytest.mark.parametrize(("dtype", "rel"), [(np.float64, 1e-9), (np.float32, 3e-6)])
@pytest.mark.parametrize("given", [False, True])
def test_part_of_a_plane_is_what_clipping_gives(h, east, south, dtype, rel, given):
    random = np.random.default_rng(5)
    depth = holed(plane(h, east, south)).astype(dtype)
    fill, fill_share = clipped(h, east, south)
    row, column, height, width = 2, 1, 8, 12
    share = some_shares(random, height, width)
    disturbed = random.choice([0.0, 0.4, 1.0], (ROWS, COLUMNS)) if given else None
    sums = np.zeros(8)
    high, low = split_part(depth, share, row, column, disturbed, sums)

    part = (slice(row, row + height), slice(column, column + width))
    at = depth[1:-1, 1:-1][part].astype(float)
    weight = np.where(np.isnan(at), 0.0, share)
    x = np.nan_to_num(at)
    expected = np.zeros(8)
    expected[VALID] = weight.sum()
    expected[FILL] = (weight * fill[part]).sum()
    expected[CUT] = (weight * (fill[part] - x)).sum()
    expected[FILL_AREA] = (weight * fill_share[part]).sum()
    expected[CUT_AREA] = (weight * (1 - fill_share[part])).sum()
    expected[PLAIN_FILL] = (weight * np.maximum(x, 0)).sum()
    expected[PLAIN_CUT] = (weight * np.maximum(-x, 0)).sum()
    expected[DISTURBED] = (weight * (abs(x) > 0.01 if disturbed is None else disturbed[part])).sum()
    assert sums == pytest.approx(expected, rel=rel, abs=rel * weight.sum())
    seen = x[weight > 0]
    assert (high, low) == (max(seen.max(), 0.0), min(seen.min(), 0.0))


def test_part_that_is_all_of_the_tile_is_the_tile():
    depth = np.random.default_rng(8).normal(0, 1, (ROWS + 2, COLUMNS + 2)).astype(np.float32)
    depth[4, 4:9] = np.nan
    whole, part = np.zeros(8), np.zeros(8)
    ends = split(depth, np.empty((4, 0, 0)), whole)
    assert split_part(depth, np.ones((ROWS, COLUMNS)), 0, 0, None, part) == ends
    assert part == pytest.approx(whole, rel=1e-12)


def test_a_plane_that_just_reaches_a_cell_has_no_share_under_nothing():
    # The zero line passes a hair beside the corner of the middle cell, along its edge: share and fill are within 0 … 1.
    for aside in (-1.5e-8, 0.0, 1.5e-8):
        for side in (1.0, -1.0):
            h = side * (0.5 + aside)
            depth = np.array([[h - 1.0, h, h + 1.0]] * 3) + 4e-8 * np.array([[-1.0], [0.0], [1.0]])
            cells, sums = np.empty((4, 1, 1)), np.zeros(8)
            split(depth, cells, sums)
            assert (cells >= 0).all()
            assert (cells[2:] <= 1).all()
            assert cells[1, 0, 0] - cells[0, 0, 0] == pytest.approx(h, rel=1e-12)


# --- strata ------------------------------------------------------------------------------------------------------


def sliced(stripped, subgrade, bottoms, slopes, fine=24):
    """Cut of each stratum in every cell, by fine sub-cells: all surfaces of a cell are planes of the slopes given."""
    at = (np.arange(fine) + 0.5) / fine - 0.5
    lean = [s[0] * at[None, :] + s[1] * at[:, None] for s in slopes]

    def refined(surface, k):
        return surface[:, :, None, None] + lean[k]

    top, low = refined(stripped, 0), refined(subgrade, 1)
    tops = [np.full_like(top, np.inf)]
    for k, bottom in enumerate(bottoms):
        tops.append(np.minimum(refined(bottom, 2 + k), tops[-1]))
    tops.append(np.full_like(top, -np.inf))
    thick = [np.clip(np.minimum(top, a) - np.maximum(low, b), 0, None) for a, b in pairwise(tops)]
    return np.array([t.mean(axis=(2, 3)) for t in thick])


@pytest.mark.parametrize("shared", [False, True])
def test_cut_by_stratum_is_what_slicing_gives(shared):
    """Three strata and one that pinches out, in ground that is cut by metres: no surface crosses another in a cell."""
    random = np.random.default_rng(12)
    slopes = [(0.05, -0.02), (0.01, 0.03), (-0.04, 0.01), (0.02, 0.02), (0.05, -0.02)]
    stripped = plane(20.0, *slopes[0])
    subgrade = plane(15.0, *slopes[1])
    # of each cell its own: under the subgrade, between, or over the stripped ground (dug off with the topsoil)
    level = random.choice([30.0, 18.5, 12.0], stripped.shape)
    first = level + plane(0.0, *slopes[2])
    second = np.minimum(random.choice([17.0, 11.0], stripped.shape) + plane(0.0, *slopes[3]), first)
    third = np.where(random.random(stripped.shape) < 0.5, second, second - 0.4)  # 0.4 m thick, or none
    depth = subgrade - stripped
    for hole in ((3, 4), (3, 5), (9, 2)):
        depth[hole] = stripped[hole] = subgrade[hole] = np.nan
    core = slice(1, -1)
    bottoms = np.array([s[core, core] for s in (first, second, third)])
    # a stratum's bottom is the plane of the one that it rests on where it was brought down to it
    slices = np.zeros((4, ROWS, COLUMNS))
    for on_first in (False, True):
        for none_left in (False, True):
            lean = [*slopes[:3], slopes[2] if on_first else slopes[3], slopes[2] if on_first else slopes[3]]
            here = (second == first)[core, core] == on_first
            here &= (third == second)[core, core] == none_left
            made = sliced(stripped[core, core], subgrade[core, core], bottoms, lean)
            slices += np.where(here, np.nan_to_num(made), 0.0)
    row, column, share = 0, 0, None
    weight = np.ones((ROWS, COLUMNS))
    if shared:
        row, column, share = 1, 2, some_shares(random, 9, 10)
        weight = np.zeros((ROWS, COLUMNS))
        weight[1:10, 2:12] = share
    cut, sums, high, low = split_by_stratum(depth, bottoms, stripped, subgrade, share, row, column)
    assert cut == pytest.approx((slices * weight).sum(axis=(1, 2)), rel=1e-12)
    assert (cut > 0).sum() >= 3
    counted = np.isfinite(depth[core, core])
    if shared:
        counted = counted[1:10, 2:12]
    assert sums[VALID] == counted.sum()
    assert high == 0.0
    assert low < -4


@pytest.mark.parametrize(("h", "east", "south"), PLANES)
@pytest.mark.parametrize("dtype", [np.float32, np.float64])
def test_strata_of_a_plane_through_zero_add_up_to_its_cut(h, east, south, dtype):
    random = np.random.default_rng(3)
    depth = holed(plane(h, east, south)).astype(dtype)
    fill, _ = clipped(h, east, south)
    x = np.nan_to_num(depth[1:-1, 1:-1].astype(float))
    lost = np.isnan(depth[1:-1, 1:-1])
    stripped = np.full(depth.shape, 50.0) + 0.0 * depth
    subgrade = stripped + depth
    bottoms = np.array([np.full(x.shape, 49.9), np.full(x.shape, 49.9), np.full(x.shape, 49.5)])
    share = some_shares(random, ROWS, COLUMNS)
    cut, sums, _, _ = split_by_stratum(depth, bottoms, stripped, subgrade, share, 0, 0)
    expected = np.where(lost, 0.0, fill - x)
    assert cut.sum() == pytest.approx((expected * share).sum(), rel=3e-6 if dtype == np.float32 else 1e-9, abs=1e-6)
    assert sums[CUT] == pytest.approx(expected.sum(), rel=3e-6 if dtype == np.float32 else 1e-9, abs=1e-6)
    assert (cut >= 0).all()
    assert cut[1] == 0.0  # pinched out
    if (x < -0.5).any():
        assert cut[3] > 0.0
