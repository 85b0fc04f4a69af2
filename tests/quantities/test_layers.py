"""Layers on small grids, worked by hand. Cells are 1 m; existing ground is level at 10 m unless said otherwise."""

import numpy as np
import pytest
import shapely

from earthwork.ground.areas import rings_on
from earthwork.ground.grid import Grid, Window
from earthwork.ground.stack import ExcavationLayer, ScarifyLayer, SectionLayer, StratumLayer, StripLayer
from earthwork.quantities.coverage import area_share, polygon_share
from tests.quantities.conftest import ArraySurface, count_arrays

GRID = Grid(4, 6, 0.0, 4.0, 1.0, 1.0)
ALL = rings_on(GRID, [shapely.box(0, 0, 6, 4)])
LEVEL = np.full((4, 6), 10.0)


def area(*bounds):
    return rings_on(GRID, [shapely.box(*bounds)])


def test_strip_lowers_the_ground_that_the_fill_stands_on():
    # 24 m² stripped by 0.5 m, then filled from 9.5 to 12.
    v = count_arrays(LEVEL, LEVEL + 2, strips=(StripLayer("topsoil", 0.5, ALL),))
    assert v.strips == {"topsoil": pytest.approx(12.0)}
    assert v.fill_m3 == pytest.approx(60.0)
    assert v.cut_m3 == 0.0


def test_strip_counts_by_the_share_of_a_cell():
    v = count_arrays(LEVEL, LEVEL + 2, strips=(StripLayer("topsoil", 0.4, area(0, 0.25, 2.5, 4)),))
    assert v.strip_m3 == pytest.approx(0.4 * 2.5 * 3.75, rel=1e-12)


def test_default_strip_is_the_disturbed_area():
    finished = LEVEL.copy()
    finished[:, :2] += 1.0
    finished[:, 2] += 0.009  # under one centimetre: not disturbed
    v = count_arrays(LEVEL, finished, strips=(StripLayer("topsoil", 0.1, None),))
    assert v.disturbed_area_m2 == pytest.approx(8.0)
    assert v.strip_m3 == pytest.approx(0.8)


def test_section_takes_its_thickness_from_the_fill():
    v = count_arrays(LEVEL, LEVEL + 2, sections=(SectionLayer("court", "imported", 0.45, area(0, 0, 3, 4)),))
    assert v.sections == {"court": pytest.approx(12 * 0.45)}
    assert v.fill_m3 == pytest.approx(48 - 12 * 0.45)


def test_section_in_level_ground_becomes_cut():
    # Finished = existing: the section is dug in. Its area is disturbed though the surfaces do not differ.
    court = area(0, 0, 3, 4)
    v = count_arrays(LEVEL, LEVEL, sections=(SectionLayer("court", "imported", 0.45, court),), worked=court)
    assert v.cut_m3 == pytest.approx(12 * 0.45)
    assert v.disturbed_area_m2 == pytest.approx(12.0)


@pytest.mark.parametrize(
    ("measured_from", "finished", "expected"),
    [
        # Stripped 10, subgrade 12: the lower one is the ground.
        ("lower", 12.0, 24.0),
        ("stripped", 12.0, 24.0),
        ("subgrade", 12.0, 0.0),  # 12 − 1 lies above the ground: nothing is dug below it
        ("subgrade", 10.4, 0.6 * 24),  # 10.4 − 1 = 9.4
        # Subgrade 8: the lower one is the subgrade.
        ("lower", 8.0, 24.0),
        ("subgrade", 8.0, 24.0),
        ("stripped", 8.0, 0.0),  # 10 − 1 lies above the subgrade already
    ],
)
def test_over_excavation_is_measured_from(measured_from, finished, expected):
    dug = ExcavationLayer("pads", 1.0, None, measured_from, ALL)
    v = count_arrays(LEVEL, np.full_like(LEVEL, finished), excavations=(dug,))
    assert v.over_excavation_m3 == pytest.approx(expected)


def test_overlapping_over_excavations_take_the_deepest():
    layers = (
        ExcavationLayer("a", 1.0, None, "lower", area(0, 0, 4, 4)),
        ExcavationLayer("b", 2.5, None, "lower", area(2, 0, 6, 4)),
    )
    v = count_arrays(LEVEL, LEVEL + 1, excavations=layers)
    assert v.over_excavation_m3 == pytest.approx(8 * 1.0 + 16 * 2.5)


def test_over_excavation_to_a_surface_never_digs_upwards():
    bottom = np.full((4, 6), 9.0)
    bottom[:, :3] = 11.0  # above the ground
    layer = ExcavationLayer("key", None, ArraySurface(bottom), "lower", ALL)
    v = count_arrays(LEVEL, LEVEL + 1, excavations=(layer,))
    assert v.over_excavation_m3 == pytest.approx(12.0)


def test_cut_by_stratum_with_one_pinched_out():
    # Cut from 10 to 4. Loess down to 8 in the west; in the east its bottom lies above ground, so it has no thickness.
    loess = np.full((4, 6), 8.0)
    loess[:, 3:] = 12.0
    strata = (
        StratumLayer("loess", ArraySurface(loess), None),
        StratumLayer("sand", None, 1.5),
        StratumLayer("shale", None, None),
    )
    v = count_arrays(LEVEL, LEVEL - 6, strata=strata)
    # West: 2 m loess, 1.5 m sand, 2.5 m shale. East: 1.5 m sand, 4.5 m shale.
    assert v.cut_by_material == {
        "loess": pytest.approx(12 * 2.0),
        "sand": pytest.approx(24 * 1.5),
        "shale": pytest.approx(12 * 2.5 + 12 * 4.5),
    }


def test_strip_is_taken_out_of_the_top_stratum_first():
    strata = (StratumLayer("loess", None, 2.0), StratumLayer("shale", None, None))
    v = count_arrays(LEVEL, LEVEL - 3, strata=strata, strips=(StripLayer("topsoil", 0.5, ALL),))
    # Strata go down from the existing ground: loess from 10 to 8, of which the strip takes 0.5.
    assert v.cut_by_material == {"loess": pytest.approx(24 * 1.5), "shale": pytest.approx(24 * 1.0)}


def test_over_excavation_by_stratum():
    strata = (StratumLayer("loess", None, 2.0), StratumLayer("shale", None, None))
    dug = ExcavationLayer("pads", 1.0, None, "lower", ALL)
    v = count_arrays(LEVEL, LEVEL - 1.5, strata=strata, excavations=(dug,))
    assert v.over_excavation_by_material == {"loess": pytest.approx(12.0), "shale": pytest.approx(12.0)}


def test_one_material_twice_is_one_line():
    strata = (StratumLayer("sand", None, 1.0), StratumLayer("clay", None, 1.0), StratumLayer("sand", None, None))
    v = count_arrays(LEVEL, LEVEL - 3, strata=strata)
    assert v.cut_by_material == {"sand": pytest.approx(48.0), "clay": pytest.approx(24.0)}


def test_scarifying_is_under_fill_unless_an_area_is_given():
    finished = LEVEL.copy()
    finished[:, :3] += 1
    finished[:, 3:] -= 1
    strata = (StratumLayer("loess", None, None),)
    v = count_arrays(LEVEL, finished, scarifies=(ScarifyLayer(0.2, None),), strata=strata)
    assert v.scarify_m3 == pytest.approx(12 * 0.2)
    assert v.scarify_by_material == {"loess": pytest.approx(2.4)}
    v = count_arrays(LEVEL, finished, scarifies=(ScarifyLayer(0.2, area(5, 0, 6, 4)),))
    assert v.scarify_m3 == pytest.approx(4 * 0.2)


def test_fill_below_a_depth_is_a_band_of_its_own():
    # 8 m of fill and 1 m of refill: below 6 m from finished lie 3 m; below 8.5 m lies 0.5 m of them.
    dug = ExcavationLayer("pads", 1.0, None, "lower", ALL)
    v = count_arrays(LEVEL, LEVEL + 8, excavations=(dug,), bands_below_m=((6.0, "finished"), (8.5, "finished")))
    assert v.bands_m3 == (pytest.approx(24 * 2.5), pytest.approx(24 * 0.5))
    assert v.refill_and_fill_m3 == pytest.approx(24 * 9.0)


def test_missing_stratum_makes_the_cell_missing():
    bottom = np.full((4, 6), 8.0)
    bottom[0, 0] = np.nan
    strata = (StratumLayer("loess", ArraySurface(bottom), None), StratumLayer("shale", None, None))
    v = count_arrays(LEVEL, LEVEL - 3, strata=strata)
    assert v.area_m2 == pytest.approx(23.0)
    assert v.missing_area_m2 == pytest.approx(1.0)


def test_limits_weigh_every_volume():
    limits = area(0.5, 0.5, 4.25, 3.5)
    v = count_arrays(LEVEL, LEVEL + 2, limits=limits, strips=(StripLayer("topsoil", 0.5, ALL),))
    assert v.area_m2 == pytest.approx(3.75 * 3.0, rel=1e-12)
    assert v.fill_m3 == pytest.approx(3.75 * 3.0 * 2.5, rel=1e-12)


# --- exact shares of cells ---------------------------------------------------------------------------------------


def test_shares_of_a_triangle():
    # Legs 3 and 3 from the south-west corner: cells on the hypotenuse are halves.
    rings = rings_on(GRID, [shapely.Polygon([(0, 0), (3, 0), (0, 3)])])
    share = area_share(rings, GRID.window)
    expected = np.zeros((4, 6))
    expected[3, :3] = [1, 1, 0.5]
    expected[2, :2] = [1, 0.5]
    expected[1, :1] = [0.5]
    assert share == pytest.approx(expected, abs=1e-12)


def test_shares_of_any_window_are_those_of_the_whole():
    hole = shapely.Point(3, 2).buffer(0.8)
    shape = shapely.Point(3, 2).buffer(1.9).difference(hole)
    rings = rings_on(GRID, [shape])
    whole = area_share(rings, GRID.window)
    assert whole.sum() == pytest.approx(shape.area, rel=1e-12)
    for row in range(4):
        for column in range(6):
            for height, width in ((1, 1), (2, 3)):
                if row + height <= 4 and column + width <= 6:
                    part = area_share(rings, Window(row, column, height, width))
                    assert part == pytest.approx(whole[row : row + height, column : column + width], abs=1e-12)


def test_shares_agree_with_clipping_cell_by_cell():
    random = np.random.default_rng(7)
    grid = Grid(12, 15, 100.0, 50.0, 2.0, 1.5)
    for _ in range(20):
        angles = np.sort(random.uniform(0, 2 * np.pi, 9))
        radii = random.uniform(1, 9, 9)
        shape = shapely.Polygon(np.c_[115 + radii * np.cos(angles), 41 + radii * np.sin(angles)])
        if not shape.is_valid:
            continue
        share = np.zeros((12, 15))
        part, values = polygon_share(rings_on(grid, [shape]), 0, grid.window)
        share[part.row : part.row + part.height, part.column : part.column + part.width] = values
        for row in range(12):
            for column in range(15):
                west, north = grid.point(row, column)
                cell = shapely.box(west, north - 1.5, west + 2, north)
                assert share[row, column] == pytest.approx(cell.intersection(shape).area / 3.0, abs=1e-12)
