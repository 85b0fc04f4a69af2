"""Packed grids come back to the last step, and what they take stays within bounds."""

from __future__ import annotations

import base64
import zlib

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from hypothesis.extra.numpy import array_shapes, arrays

from earthwork.ground.grid import Grid
from earthwork.quantities.surface_map import SurfaceMap
from earthwork.reporting.report.map_data import MapContent, coarser, fitting_planes, map_document, surface_planes
from earthwork.reporting.report.planes import pack, packed_size, unpack, whole_steps


@given(arrays(np.int64, array_shapes(min_dims=2, max_dims=2, max_side=9), elements=st.integers(-400_000, 400_000)))
def test_what_is_packed_comes_back(values):
    assert (unpack(pack(values, 0.001), *values.shape) == values).all()


def test_bytes_by_hand():
    # values 5 6 / 7 9 less their least: 0 1 / 2 4. West + north − north-west: 0, 1 − 0, 2 − 0, 4 − 2 − 1 + 0 = 1
    # folded 0 2 4 2
    raw = zlib.decompress(base64.b64decode(pack(np.array([[5, 6], [7, 9]]), 1.0).data))
    assert list(raw) == [0, 2, 4, 2] + [0] * 12


def test_too_wide_a_span_is_refused():
    with pytest.raises(ValueError, match=r"spans 5,000,000 steps; it must be under 4,194,304"):
        pack(np.array([[0, 5_000_000]]), 0.001)


def test_cells_without_data_take_the_last_value():
    assert whole_steps(np.array([[np.nan, 1.0], [np.nan, 2.0]]), 0.5).tolist() == [[2, 2], [2, 4]]


def overview(rows, columns, *, noise=0.0):
    y, x = np.mgrid[:rows, :columns]
    ground = 100 + 0.02 * x + 3 * np.sin(y / 40.0)
    if noise:
        ground = ground + np.random.default_rng(1).normal(0, noise, ground.shape)
    fill = np.clip(50 - np.hypot(y - rows / 2, x - columns / 2), 0, 3)
    grid = Grid(rows, columns, 500000.0, 4100000.0, 2.0, 2.0)
    surfaces = {"existing": ground, "stripped": ground - 0.15, "removal_bottom": ground - 0.65,
                "subgrade": ground - 0.15 + fill, "finished": ground + fill}  # fmt: skip
    return SurfaceMap(grid, 1, **surfaces, stratum=np.zeros(ground.shape, dtype=int), materials=("loess",))


def test_each_surface_is_within_half_a_step():
    surfaces = overview(60, 80)
    planes = surface_planes(surfaces, 0.001)
    whole = {name: unpack(plane, 60, 80) for name, plane in planes.items()}
    subgrade = whole["existing"] - whole["strip"] + whole["depth"]
    assert np.abs(subgrade * 0.001 - surfaces.subgrade).max() <= 0.0005 + 1e-9
    finished = subgrade + whole["section"]
    assert np.abs(finished * 0.001 - surfaces.finished).max() <= 0.0005 + 1e-9
    bottom = np.minimum(whole["existing"] - whole["strip"], subgrade) - whole["refill"]
    assert np.abs(bottom * 0.001 - surfaces.removal_bottom).max() <= 0.0005 + 1e-9


def test_a_large_noisy_site_stays_within_what_the_page_can_carry():
    surfaces, planes = fitting_planes(overview(1000, 1000, noise=0.03), 4_500_000)
    assert packed_size(planes) <= 4_500_000
    assert surfaces.grid.rows == 1000


def test_where_there_is_little_room_cells_grow():
    surfaces, planes = fitting_planes(overview(200, 300, noise=0.05), 60_000)
    assert packed_size(planes) <= 60_000
    assert surfaces.grid.rows < 200
    assert surfaces.grid.cell_east > 2.0


def test_coarser_cells_are_means_of_four():
    small = coarser(overview(5, 6))
    whole = overview(5, 6).existing
    assert small.grid.rows == 3
    assert small.existing[0, 0] == pytest.approx(whole[:2, :2].mean())
    assert small.existing[2, 1] == pytest.approx(whole[4, 2:4].mean())


def test_fill_areas_follow_coarser_cells():
    surfaces = overview(200, 300, noise=0.05)
    fills = np.zeros((200, 300), dtype=int)
    fills[:, 150:] = 2
    document = map_document(surfaces, MapContent(fills=fills), most_characters=60_000)
    rows, columns = document["grid"]["rows"], document["grid"]["columns"]
    from earthwork.reporting.report.planes import Plane

    back = unpack(Plane(**document["planes"]["fill"]), rows, columns)
    assert back.shape == (rows, columns)
    assert set(back[:, 0]) == {0}
    assert set(back[:, -1]) == {2}
