"""Toe, top and daylight lines, and the ground that a design takes up, against shapes known in closed form."""

import math

import numpy as np
import pytest
import shapely
from shapely.geometry import LineString, box

from earthwork.ground.design import build_design
from earthwork.ground.design_lines import design_area, design_lines
from earthwork.ground.elements import PadShape, SideSlope
from tests.ground.design_helpers import grid_of, ground

TWO = SideSlope(cut=2.0, fill=2.0)


def of_kind(found, kind):
    return [line for line in found.lines if line.kind == kind]


def test_toe_around_a_pad_on_level_ground_is_its_offset():
    grid = grid_of(100, 1)
    pad = box(40, 40, 60, 60)
    design = build_design(grid, ground(grid, lambda e, n: 100.0 + 0 * e), [PadShape("p", pad, 104.0, TWO)])
    found = design_lines(design)
    offset = pad.buffer(8, quad_segs=64)
    assert found.area.symmetric_difference(offset).area < 0.01 * offset.area
    (toe,) = of_kind(found, "toe of fill")
    assert toe.name == "p"
    # The field is linear between the cells beside a straight edge: there the toe is exact.
    assert shapely.LineString(toe.geometry).hausdorff_distance(offset.exterior) < 0.2
    assert {round(float(z), 9) for *_, z in toe.geometry.coords} == {100.0}
    assert toe.geometry.intersection(box(45, 0, 55, 100)).bounds[1] == pytest.approx(32.0, abs=0.005)
    (top,) = of_kind(found, "top of fill")
    assert top.geometry.length == pytest.approx(80)
    assert {z for *_, z in top.geometry.coords} == {104.0}
    assert not of_kind(found, "toe of cut")


def test_edges_are_split_where_cut_turns_to_fill():
    grid = grid_of(100, 1)
    design = build_design(
        grid, ground(grid, lambda e, n: 100 + 0.1 * (e - 50)), [PadShape("p", box(30, 30, 70, 70), 100.0, TWO)]
    )
    found = design_lines(design)
    fill = shapely.union_all([line.geometry for line in of_kind(found, "top of fill")])
    cut = shapely.union_all([line.geometry for line in of_kind(found, "toe of cut")])
    assert fill.bounds == pytest.approx((30, 30, 50, 70), abs=1e-6)
    assert cut.bounds == pytest.approx((50, 30, 70, 70), abs=1e-6)
    # West toe: 100 − d/2 = 100 − 0.1 (20 + d) at d = 5; east top: 100 + d/2 = 100 + 0.1 (20 + d), the same.
    west = of_kind(found, "toe of fill")
    assert min(line.geometry.bounds[0] for line in west) == pytest.approx(25.0, abs=1e-6)
    assert max(line.geometry.bounds[2] for line in of_kind(found, "top of cut")) == pytest.approx(75.0, abs=1e-6)
    for line in (*west, *of_kind(found, "top of cut")):
        c = np.array(line.geometry.coords)
        assert c[:, 2] == pytest.approx(100 + 0.1 * (c[:, 0] - 50), abs=1e-9)


def test_retaining_edges_are_lines_of_their_own():
    grid = grid_of(100, 1)
    design = build_design(
        grid,
        ground(grid, lambda e, n: 100.0 + 0 * e),
        [PadShape("p", box(30, 30, 70, 60), 106.0, TWO)],
        retaining=LineString([(70, 20), (70, 70)]),
    )
    found = design_lines(design)
    (wall,) = of_kind(found, "retaining edge")
    assert list(wall.geometry.coords) == [(70.0, 30.0, 106.0), (70.0, 60.0, 106.0)]
    assert found.area.bounds[2] == pytest.approx(70.5, abs=0.51)


def test_seams_between_windows_leave_no_trace():
    # 1400 cells a side: several windows; the outline is one polygon without slits.
    grid = grid_of(700, 0.5)
    pads = [PadShape("p", box(300, 300, 420, 560), 106.0, TWO), PadShape("q", box(436, 100, 560, 560), 103.0, TWO)]
    area = design_area(build_design(grid, ground(grid, lambda e, n: 100.0 + 0 * e), pads))
    assert area.geom_type == "Polygon"
    assert len(area.interiors) == 0
    joined = shapely.union_all([pads[0].polygon.buffer(12, quad_segs=64), pads[1].polygon.buffer(6, quad_segs=64)])
    assert area.area == pytest.approx(joined.area, rel=2e-4)


def test_slopes_to_the_edge_of_the_grid():
    grid = grid_of(60, 1)
    area = design_area(
        build_design(grid, ground(grid, lambda e, n: 100.0 + 0 * e), [PadShape("p", box(5, 20, 40, 40), 110.0, TWO)])
    )
    assert area.bounds[0] == pytest.approx(0)
    assert area.area < 60 * 60


def test_area_of_a_round_corner_converges():
    grid = grid_of(80, 0.25)
    area = design_area(
        build_design(grid, ground(grid, lambda e, n: 100.0 + 0 * e), [PadShape("p", box(35, 35, 45, 45), 105.0, TWO)])
    )
    assert area.area == pytest.approx(100 + 4 * 100 + math.pi * 100, rel=2e-4)
