"""Walls that a design would need: their height and place against hand-worked cases."""

import math

import pytest
from shapely.geometry import LineString, box

from earthwork.ground.design import build_design
from earthwork.ground.design_checks import inspect_design
from earthwork.ground.elements import PadShape, RoadShape, SideSlope
from earthwork.units import METRIC, UnitSystem
from tests.ground.design_helpers import ArraySurface, grid_of, ground

TWO = SideSlope(cut=2.0, fill=2.0)


def look(grid, height, pads, roads=(), limits=None, **options):
    return inspect_design(build_design(grid, ground(grid, height), pads, roads, **options), limits)


def level(z):
    return lambda e, n: z + 0 * e


def pair(gap, upper, lower):
    return [
        PadShape("up", box(100, 100, 140, 200), upper, TWO),
        PadShape("low", box(140 + gap, 100, 190 + gap, 200), lower, TWO),
    ]


def test_pads_with_room_between_them_need_no_wall():
    # 10 m of height at 1:2 needs 20 m; there are 21.
    for z in (90.0, 100.0, 105.0, 110.0, 130.0):
        assert look(grid_of(320, 1), level(z), pair(21, 110.0, 100.0)).findings == ()


@pytest.mark.parametrize("z", [95.0, 100.0, 104.0, 107.0, 110.0, 120.0])
def test_wall_between_pads_without_room(z):
    # 10 m of height, 15 m of room at 1:2: 7.5 m of slope and a wall of 2.5 m, wherever the ground lies.
    found = look(grid_of(320, 1), level(z), pair(15, 110.0, 100.0)).findings
    assert [(f.code, f.names) for f in found] == [("no-room-for-slope", ("low", "up"))]
    assert found[0].height_m == pytest.approx(2.5, abs=1e-9 if z <= 100 or z >= 110 else 0.26)
    assert 140 <= found[0].easting <= 155
    assert 'no slope fits between "low" and "up": a wall of 2.5' in found[0].text(METRIC)


def test_pads_that_touch_need_a_wall_of_their_whole_step():
    found = look(grid_of(320, 1), level(104.0), pair(0, 106.0, 104.5)).findings
    assert [(f.code, f.height_m) for f in found] == [("no-room-for-slope", pytest.approx(1.5))]
    assert found[0].easting == pytest.approx(140)


def test_deep_cuts_use_the_cut_slope_between_them():
    # Cut 1:1.5 needs 15 m for 10 m; fill 1:2 would need 20: in native ground 16 m are enough.
    slope = SideSlope(cut=1.5, fill=2.0)
    pads = [
        PadShape("up", box(40, 40, 80, 160), 110.0, slope),
        PadShape("low", box(96, 40, 140, 160), 100.0, slope),
    ]
    assert look(grid_of(240, 1), level(125.0), pads).findings == ()


def test_slope_that_does_not_meet_the_ground_inside_the_data():
    # 8 m over level ground needs 16 m at 1:2; the data end 10 m away, so the face ends 3 m up (8 − 10/2).
    found = look(grid_of(100, 1), level(100.0), [PadShape("p", box(30, 30, 90, 60), 108.0, TWO)]).findings
    (off,) = found
    assert (off.code, off.names, off.kind) == ("slope-off-data", ("p",), "fill")
    assert off.height_m == pytest.approx(8 - 9.5 / 2)  # at the last cell's centre
    assert off.easting == pytest.approx(99.5)
    text = off.text(METRIC)
    assert 'the fill slope of "p" does not meet the ground inside the data: it is still 3.25 m off at' in text
    z = ground(grid_of(100, 1), level(100.0)).values.copy()
    z[:, 95:] = math.nan
    (hole,) = inspect_design(
        build_design(grid_of(100, 1), ArraySurface(z), [PadShape("p", box(30, 30, 90, 60), 98.0 - 6, TWO)])
    ).findings
    assert (hole.code, hole.kind, hole.height_m) == ("slope-off-data", "cut", pytest.approx(8 - 4.5 / 2))


def test_slope_over_the_limits():
    # The limits run 4 m from the pad's east edge: 6 m high, the wall there is 6 − 4/2 = 4 m.
    limits = box(0, 0, 74, 100)
    found = look(grid_of(100, 1), level(100.0), [PadShape("p", box(30, 30, 70, 60), 106.0, TWO)], limits=limits)
    (over,) = found.findings
    assert (over.code, over.kind) == ("slope-over-limits", "fill")
    assert over.height_m == pytest.approx(6 - 4.5 / 2)
    assert over.easting == pytest.approx(74.5)


def test_retaining_edge_says_how_high_its_wall_is():
    line = LineString([(70, 20), (70, 70)])
    pads = [PadShape("p", box(30, 30, 70, 60), 106.0, TWO)]
    (wall,) = look(grid_of(100, 1), level(100.0), pads, retaining=line).findings
    assert (wall.code, wall.names, wall.height_m) == ("retaining-wall", ("p",), pytest.approx(6.0))


def test_road_that_misses_a_pad_has_a_step():
    pad = PadShape("p", box(60, 40, 100, 80), 104.0, TWO)
    good = RoadShape("r", LineString([(20, 60, 100.0), (60, 60, 104.0)]), 8.0, TWO)
    high = RoadShape("r", LineString([(20, 60, 100.0), (60, 60, 104.5)]), 8.0, TWO)
    assert look(grid_of(140, 1), level(100.0), [pad], [good]).findings == ()
    (step,) = look(grid_of(140, 1), level(100.0), [pad], [high]).findings
    assert (step.code, step.names, step.height_m) == ("step-at-joint", ("p", "r"), pytest.approx(0.5, abs=0.01))


def test_slope_heights_and_areas():
    pads = [PadShape("p", box(40, 40, 60, 60), 104.0, TWO)]
    grid = grid_of(100, 0.25)
    (slope,) = look(grid, level(100.0), pads).slopes
    assert slope.fill_height_m == pytest.approx(4.0, abs=0.25 / 2)
    assert (slope.cut_height_m, slope.cut_area_m2) == (0, 0)
    assert slope.fill_area_m2 == pytest.approx(4 * 20 * 8 + math.pi * 64, rel=2e-3)


def test_text_in_feet_and_hostile_names():
    found = look(grid_of(320, 1), level(100.0), pair(15, 110.0, 100.0)).findings[0]
    assert "8.20 ft" in found.warning(UnitSystem("us", 0.3048)).message
    name = '=cmd|"<b>🙂'
    (off,) = look(grid_of(100, 1), level(100.0), [PadShape(name, box(30, 30, 90, 60), 108.0, TWO)]).findings
    assert name in off.text(METRIC)
