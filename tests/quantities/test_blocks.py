"""Haul blocks against sums and centres of mass worked out from the same arrays, by hand or cell by cell."""

import numpy as np
import pytest
import shapely

from earthwork.ground.areas import rings_on
from earthwork.ground.stack import ExcavationLayer, StratumLayer, StripLayer
from earthwork.quantities.blocks import BlockLayout, BlockTally, PartRule, ReliefTally, channels_of
from earthwork.quantities.engine import walk

from .conftest import stack_of

FLAT = 100.0


def count_blocks(stack, layout, **walking):
    tally = BlockTally(stack, layout)
    walk(stack, [tally], **walking)
    return tally


def at(tally, block, channel):
    """Amount, column and row of the centre of mass of a channel of a block."""
    amount, column, row = tally.amounts()[block][tally.channels.index(channel)]
    return amount, column / amount, row / amount


def random_site(seed=0, shape=(60, 45)):
    rng = np.random.default_rng(seed)
    existing = FLAT + rng.normal(0, 1, shape)
    return existing, existing + np.repeat(np.repeat(rng.normal(0, 2, (6, 5)), 10, 0), 9, 1)


def test_a_block_of_cut_and_a_block_of_fill_with_their_centres():
    finished = np.full((10, 20), FLAT)
    finished[2:4, 2:6] -= 1.0  # 8 cells of cut, centre (row 3, column 4)
    finished[6:8, 12:18] += 2.0  # 12 cells of fill 2 deep, centre (row 7, column 15)
    tally = count_blocks(stack_of(np.full((10, 20), FLAT), finished), BlockLayout(10, 10))
    assert at(tally, (-1, 0, 0), ("cut", -1, -1)) == pytest.approx((8, 4, 3))
    assert at(tally, (-1, 0, 1), ("fill", 0, -1)) == pytest.approx((24, 15, 7))
    assert set(tally.amounts()) == {(-1, 0, 0), (-1, 0, 1)}


def test_centre_of_a_wedge_of_cut():
    # Depth grows evenly from west to east over 30 columns: the centre lies at two thirds.
    depth = np.tile(np.arange(30) + 0.5, (4, 1))
    stack = stack_of(np.full((4, 30), FLAT), FLAT - depth)
    amount, column, row = at(count_blocks(stack, BlockLayout(50, 50)), (-1, 0, 0), ("cut", -1, -1))
    assert (amount, row) == (pytest.approx(4 * 450), pytest.approx(2))
    assert column == pytest.approx(20, rel=1e-3)


def test_blocks_add_up_to_the_site_and_moments_to_its_centre(count):
    existing, finished = random_site()
    stack = stack_of(existing, finished)
    whole = count(existing, finished)
    tally = count_blocks(stack, BlockLayout(7, 8))
    sums = sum(tally.amounts().values())
    assert sums[0, 0] == pytest.approx(whole.cut_m3, rel=1e-12)
    assert sums[-1, 0] == pytest.approx(whole.fill_m3, rel=1e-12)
    one = count_blocks(stack, BlockLayout(100, 100)).amounts()[-1, 0, 0]
    assert sums == pytest.approx(one, rel=1e-12)


@pytest.mark.parametrize("walking", [{"threads": 2}, {"tile_cells": 200}, {"band_rows": 5, "threads": 2}])
def test_tiles_and_threads_change_nothing(walking):
    existing, finished = random_site(1)
    layout = BlockLayout(11, 6)
    plain = count_blocks(stack_of(existing, finished), layout, threads=1).amounts()
    other = count_blocks(stack_of(existing, finished), layout, **walking).amounts()
    assert plain.keys() == other.keys()
    for key, sums in plain.items():
        assert other[key] == pytest.approx(sums, rel=1e-12, abs=1e-12)


def test_regions_are_cut_out_exactly_and_the_rest_stays():
    existing = np.full((20, 20), FLAT)
    stack = stack_of(existing, existing - 1.0)
    # A 7.5 × 4.5 pad that no cell edge fits, north-west corner at (column 2.25, row 3.5); y runs north from 0.
    pad = shapely.box(2.25, 20 - 8.0, 9.75, 20 - 3.5)
    layout = BlockLayout(10, 10, rings_on(stack.grid, [pad]), (False,))
    tally = count_blocks(stack, layout, tile_cells=64, band_rows=6)
    amount, column, row = at(tally, (0, -1, -1), ("cut", -1, -1))
    assert amount == pytest.approx(7.5 * 4.5, rel=1e-12)
    # Each share of a cell counts at the cell's centre.
    assert (column, row) == (pytest.approx(6.0, abs=0.05), pytest.approx(5.75, abs=0.05))
    assert sum(s[0, 0] for s in tally.amounts().values()) == pytest.approx(400, rel=1e-12)
    assert at(tally, (-1, 0, 0), ("cut", -1, -1))[0] == pytest.approx(100 - 7.5 * 4.5, rel=1e-12)


def test_a_divided_region_is_cut_into_squares():
    existing = np.full((20, 20), FLAT)
    stack = stack_of(existing, existing + 1.0)
    phase = shapely.box(0, 0, 20, 12.5)  # rows 7.5 to 20
    tally = count_blocks(stack, BlockLayout(10, 10, rings_on(stack.grid, [phase]), (True,)))
    fill = ("fill", 0, -1)
    assert at(tally, (0, 0, 1), fill)[0] == pytest.approx(25)
    assert at(tally, (0, 1, 1), fill)[0] == pytest.approx(100)
    assert at(tally, (-1, 0, 1), fill)[0] == pytest.approx(75)


def test_materials_strips_and_over_excavation_are_told_apart():
    existing = np.full((6, 6), FLAT)
    stack = stack_of(
        existing, existing - 3.0,
        strips=(StripLayer("topsoil", 0.5, None),),
        strata=(StratumLayer("loess", None, 2.0), StratumLayer("shale", None, None)),
        excavations=(ExcavationLayer("pads", 1.0, None, "lower", None),),
    )  # fmt: skip
    sums = count_blocks(stack, BlockLayout(10, 10)).amounts()[-1, 0, 0][:, 0]
    by_channel = dict(zip(channels_of(stack), sums, strict=True))
    # Strip 0.5, then cut 2.5 of which loess 1.5 and shale 1.0; a metre of shale is dug and refilled.
    assert by_channel["strip", 0, -1] == pytest.approx(18)
    assert by_channel["cut", 0, -1] == pytest.approx(1.5 * 36)
    assert by_channel["cut", 1, -1] == pytest.approx(1.0 * 36)
    assert by_channel["over_excavation", 1, -1] == pytest.approx(36)
    assert by_channel["fill", 0, -1] == pytest.approx(36)


def fill_parts(rules, bands=(), height=5.0):
    """Parts of a level fill, 5 m high over 4 × 4 cells, as depths [m]: (rules + 1, bands + 1)."""
    existing = np.full((4, 4), FLAT)
    stack = stack_of(existing, existing + height, bands_below_m=bands)
    tally = count_blocks(stack, BlockLayout(10, 10, rules=tuple(r(stack.grid) if callable(r) else r for r in rules)))
    sums = tally.amounts()[-1, 0, 0][-(len(rules) + 1) * (len(bands) + 1) :, 0] / 16
    return sums.reshape(len(rules) + 1, len(bands) + 1)


def east_half(top_m=None):
    return lambda grid: PartRule(top_m, area=rings_on(grid, [shapely.box(2, 0, 4, 4)]))


def test_the_top_metre_is_a_part_of_the_fill():
    assert fill_parts([PartRule(1.0)]) == pytest.approx(np.array([[1.0], [4.0]]))


def test_the_first_rule_that_holds_governs():
    # East half from 2 m up (1 m mean), then the top metre of what is left (0.5), then the rest.
    assert fill_parts([east_half(2.0), PartRule(1.0)])[:, 0] == pytest.approx([1.0, 0.5, 3.5])
    # Top metre first: the east half keeps the second metre alone.
    assert fill_parts([PartRule(1.0), east_half(2.0)])[:, 0] == pytest.approx([1.0, 0.5, 3.5])
    assert fill_parts([east_half()])[:, 0] == pytest.approx([2.5, 2.5])


def test_parts_are_divided_by_bands():
    # Below 2 m one band, below 4 m another; the top metre has none, what lies under it 1 m of none.
    bands = ((2.0, "finished"), (4.0, "finished"))
    assert fill_parts([PartRule(1.0)], bands) == pytest.approx(np.array([[1.0, 0, 0], [1.0, 2.0, 1.0]]))
    assert fill_parts([PartRule(3.0)], bands) == pytest.approx(np.array([[2.0, 1.0, 0], [0, 1.0, 1.0]]))


def test_relief_is_the_mean_of_the_ground():
    existing, finished = random_site(2, (60, 45))
    existing[:20, :20] = np.nan
    stack = stack_of(existing, finished)
    tally = ReliefTally(stack, 10)
    walk(stack, [tally], threads=2, tile_cells=150)
    relief = tally.elevations()
    assert relief.shape == (6, 5)
    assert np.isnan(relief[:2, :2]).all()
    assert relief[3, 2] == pytest.approx(existing[30:40, 20:30].mean(), rel=1e-12)
    assert relief[5, 4] == pytest.approx(existing[50:60, 40:45].mean(), rel=1e-12)
