"""Overviews of the surfaces: means of blocks by hand, whatever the tiles."""

from __future__ import annotations

import numpy as np
import pytest

from earthwork.ground.stack import SectionLayer, StratumLayer, StripLayer
from earthwork.quantities.engine import walk
from earthwork.quantities.surface_map import SurfaceMapTally, overview_grid
from tests.quantities.conftest import ArraySurface, stack_of


def mapped(stack, most_cells, **how):
    tally = SurfaceMapTally(stack, most_cells)
    walk(stack, [tally], **how)
    return tally.map


def test_one_cell_of_the_overview_is_the_mean_of_its_block():
    existing = np.arange(16.0).reshape(4, 4)
    overview = mapped(stack_of(existing, existing + 1.0), 4)
    # by hand: (0 + 1 + 4 + 5) / 4 = 2.5, and 2 to the east
    assert overview.existing.tolist() == [[2.5, 4.5], [10.5, 12.5]]
    assert overview.depth.tolist() == [[1.0, 1.0], [1.0, 1.0]]
    assert overview.grid.cell_east == 2.0


def test_cells_without_data_do_not_count():
    existing = np.array([[1.0, np.nan, 5.0, 5.0], [3.0, 2.0, 5.0, 5.0]])
    overview = mapped(stack_of(existing, existing), 2)
    assert overview.existing.tolist() == [[2.0, 5.0]]


def test_a_block_without_data_is_nan():
    existing = np.array([[np.nan, np.nan, 5.0, 5.0], [np.nan, np.nan, 5.0, 5.0]])
    overview = mapped(stack_of(existing, existing), 2)
    assert np.isnan(overview.existing[0, 0])
    assert overview.stratum.tolist() == [[-1, 0]]


def test_layers_stand_where_they_belong():
    existing = np.full((4, 4), 10.0)
    stack = stack_of(
        existing,
        np.full((4, 4), 12.0),
        strips=(StripLayer("topsoil", 0.2, None),),
        sections=(SectionLayer("pavement", "imported", 0.5, None),),
        strata=(StratumLayer("loess", None, 1.0), StratumLayer("shale", None, None)),
    )
    overview = mapped(stack, 100)
    assert overview.stripped[1, 1] == pytest.approx(9.8)
    assert overview.subgrade[1, 1] == pytest.approx(11.5)
    assert overview.removal_bottom[1, 1] == pytest.approx(9.8)
    assert overview.fill_thickness[1, 1] == pytest.approx(1.7)
    assert overview.materials == ("loess", "shale")
    assert overview.stratum[1, 1] == 0


def test_a_cut_through_the_top_stratum_shows_the_one_below():
    stack = stack_of(
        np.full((3, 3), 10.0),
        np.full((3, 3), 7.0),
        strata=(StratumLayer("loess", ArraySurface(np.full((3, 3), 8.0)), None), StratumLayer("shale", None, None)),
    )
    assert (mapped(stack, 100).stratum == 1).all()


@pytest.mark.parametrize("how", [{"threads": 2}, {"tile_cells": 40, "band_rows": 7}, {"threads": 2, "band_rows": 3}])
def test_tiles_and_threads_change_nothing(how):
    rng = np.random.default_rng(5)
    existing = rng.normal(100, 3, (53, 47))
    stack = stack_of(existing, existing + rng.normal(0, 1, existing.shape))
    plain, other = mapped(stack, 300, threads=1), mapped(stack, 300, **how)
    np.testing.assert_allclose(other.subgrade, plain.subgrade, rtol=1e-13)
    assert (other.stratum == plain.stratum).all()


def test_the_overview_never_has_more_cells_than_asked_for():
    for rows, columns in ((4000, 4000), (20000, 300), (1000, 1001), (7, 3)):
        grid = stack_of(np.zeros((2, 2)), np.zeros((2, 2))).grid
        grid = type(grid)(rows, columns, 0.0, float(rows), 1.0, 1.0)
        small, every = overview_grid(grid)
        assert small.rows * small.columns <= 1_000_000
        assert small.rows * every >= rows
