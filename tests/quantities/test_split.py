"""The zero-line split against closed forms worked by hand."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from earthwork.quantities.split import split_cells


def test_plane_through_the_middle_of_one_cell():
    # Depth falls from +1 at the west side of the middle cell to -1 at its east side: two triangles of 1/2 × 1/2.
    cells = split_cells(np.array([[2.0, 0.0, -2.0]] * 3))
    assert cells.fill[0, 0] == pytest.approx(0.25, abs=1e-15)
    assert cells.cut[0, 0] == pytest.approx(0.25, abs=1e-15)
    assert cells.cut_share[0, 0] == pytest.approx(0.5, abs=1e-15)


def test_plane_across_the_corner():
    # h + u + v in the square |u|, |v| ≤ 1 with h = −1: positive over the triangle u + v > 1, legs 1, area 1/2 of 4;
    # volume = area × mean height = 1/2 × 1/3, over the 4 of the square.
    u = np.array([-2.0, 0.0, 2.0])
    depth = -1.0 + u[None, :] + u[:, None]
    cells = split_cells(depth)
    assert cells.fill[0, 0] == pytest.approx(0.5 / 3 / 4, rel=1e-14)
    assert cells.fill_share[0, 0] == pytest.approx(0.125, rel=1e-14)
    assert cells.cut[0, 0] == pytest.approx(1 + 0.5 / 3 / 4, rel=1e-14)


def test_kink_invents_nothing():
    # The foot of a 3 m wall: level ground at zero, then a jump. No slope agrees on both sides of a cell.
    depth = np.array([[0.0, 0.0, 0.0, 3.0, 3.0, 3.0]] * 3)
    cells = split_cells(depth)
    assert cells.fill[0].tolist() == [0.0, 0.0, 3.0, 3.0]
    assert cells.cut.sum() == 0.0


def test_kink_at_the_rim_of_a_mound():
    # Ground −0.1 below, rising steeply on one side only: a central difference would invent fill here.
    cells = split_cells(np.array([[-0.1, -0.1, 1.0]] * 3))
    assert cells.fill[0, 0] == 0.0
    assert cells.cut[0, 0] == pytest.approx(0.1)


def test_hole_beside_the_cell_takes_the_other_side():
    # NaN in the west: the slope is the one to the east, −2 per cell: the same as without the hole.
    cells = split_cells(np.array([[np.nan, 0.0, -2.0]] * 3))
    assert cells.fill[0, 0] == pytest.approx(0.25, abs=1e-15)


def test_missing_cell_counts_nothing():
    cells = split_cells(np.array([[1.0, np.nan, 1.0]] * 3))
    assert cells.fill[0, 0] == cells.cut[0, 0] == cells.fill_share[0, 0] == cells.cut_share[0, 0] == 0.0


@settings(max_examples=60, deadline=None)
@given(st.integers(0, 2**32 - 1), st.sampled_from([np.float32, np.float64]))
def test_cut_minus_fill_is_the_plain_sum(seed, dtype):
    depth = np.random.default_rng(seed).normal(0, 1, (9, 12)).astype(dtype)
    cells = split_cells(depth)
    plain = depth[1:-1, 1:-1].astype(float)
    assert (cells.fill - cells.cut).sum() == pytest.approx(plain.sum(), abs=1e-12)
    assert (cells.fill >= np.maximum(plain, 0)).all()
    assert (cells.cut >= np.maximum(-plain, 0) - 1e-15).all()


@settings(max_examples=60, deadline=None)
@given(st.floats(-1, 1), st.floats(-1, 1), st.floats(-1, 1))
def test_planes_are_exact(h, gx, gy):
    """Any plane over 8 × 8 cells equals the exact volume under it, by clipping with another library."""
    import shapely

    n = 8
    at = np.arange(n + 2) - 0.5
    depth = h + gx * (at[None, :] - n / 2) + gy * (at[:, None] - n / 2)
    cells = split_cells(depth)
    # The rim is on the same plane, so the cells are whole planes. Polygon of the square where the plane is positive:
    big = 100.0
    normal = np.hypot(gx, gy)
    if abs(h) >= 50 * normal:  # the zero line is far outside
        expected = max(h, 0.0) * n * n
    else:
        along = np.array([gx, gy]) / normal
        across = np.array([-along[1], along[0]])
        foot = np.array([n / 2, n / 2]) - along * h / normal
        half = [foot + big * across, foot - big * across, foot - big * across + big * along * 2,
                foot + big * across + big * along * 2]  # fmt: skip
        above = shapely.intersection(shapely.box(0, 0, n, n), shapely.Polygon(half))
        if above.is_empty:
            expected = 0.0
        else:
            c = above.centroid
            expected = above.area * (h + gx * (c.x - n / 2) + gy * (c.y - n / 2))
    assert cells.fill.sum() == pytest.approx(expected, abs=1e-6)
