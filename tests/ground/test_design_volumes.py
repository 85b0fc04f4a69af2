"""Volumes of built grades against closed forms and exact polyhedra."""

import math

import numpy as np
import pytest
from shapely import affinity
from shapely.geometry import LineString, Polygon, box

from earthwork.ground.design import build_design
from earthwork.ground.elements import PadShape, RoadShape, SideSlope
from tests.ground.design_helpers import exact_fill, grid_of, ground, volumes

TWO = SideSlope(cut=2.0, fill=2.0)


def design_of(grid, height, *pads, **options):
    return build_design(grid, ground(grid, height), pads, **options)


@pytest.mark.parametrize(
    ("mitred", "corner"),
    [(False, math.pi / 3), (True, 4 / 3)],
)
@pytest.mark.parametrize("raised", [3.0, -3.0])
def test_a_pad_on_level_ground_has_the_closed_form_volume(mitred, corner, raised):
    # V = LWh + s h²(L + W) + (4/3 mitred, π/3 conical) s² h³; L = 100, W = 60, h = 3, s = 2: 21024 and
    # 20993.1 m³.
    length, width, height, s = 100.0, 60.0, 3.0, 2.0
    volume = length * width * height + s * height**2 * (length + width) + corner * s**2 * height**3
    assert volume == pytest.approx(21024 if mitred else 20993.1, abs=0.05)
    grid = grid_of(160, 0.5)
    pad = PadShape("A", box(30, 50, 130, 110), 100 + raised, TWO)
    cut, fill = volumes(design_of(grid, lambda e, n: 100.0 + 0 * e, pad, mitred=mitred))
    larger, none = (fill, cut) if raised > 0 else (cut, fill)
    assert none == 0
    assert larger == pytest.approx(volume, rel=5e-5)


def test_error_falls_with_the_square_of_the_cell():
    volume = 100 * 60 * 3 + 2 * 9 * 160 + 4 / 3 * 4 * 27
    errors = []
    for cell in (1.0, 0.5, 0.25):
        pad = PadShape("A", box(30, 50, 130, 110), 103.0, TWO)
        fill = volumes(design_of(grid_of(160, cell), lambda e, n: 100.0 + 0 * e, pad, mitred=True))[1]
        errors.append(abs(fill - volume))
    assert errors[1] == pytest.approx(errors[0] / 4, rel=0.02)
    assert errors[2] == pytest.approx(errors[0] / 16, rel=0.02)


@pytest.mark.parametrize("mitred", [False, True])
@pytest.mark.parametrize("azimuth", [0.0, 33.0])
def test_a_pad_across_the_slope_equals_exact_polyhedra(mitred, azimuth):
    # Ground rising 8 % to the east and 3 % to the north; the level pad is in cut and in fill.
    plane = (100.0, 0.08, 0.03)
    polygon = affinity.rotate(box(60, 70, 140, 130), azimuth)
    level = plane[0] + plane[1] * 100 + plane[2] * 100
    grid = grid_of(200, 0.25)
    pad = PadShape("A", polygon, level, SideSlope(cut=1.5, fill=2.0))
    cut, fill = volumes(
        design_of(grid, lambda e, n: plane[0] + plane[1] * e + plane[2] * n, pad, mitred=mitred)
    )
    # Fill: only the edge's low side has ground under it; the polyhedron takes the part of the pad in fill by
    # itself.
    low_side = clipped_fill(polygon, (level, 0.0, 0.0), np.array(plane), 1 / 2.0, mitred)
    assert fill == pytest.approx(low_side, rel=1e-4)
    # Cut is the fill of the same pad turned upside down.
    high_side = clipped_fill(polygon, (-level, 0.0, 0.0), -np.array(plane), 1 / 1.5, mitred)
    assert cut == pytest.approx(high_side, rel=1e-4)


def clipped_fill(polygon, grade, plane, gradient, mitred):
    """Exact fill: the concave fill face above the ground, whose bounding polyhedron needs a point inside."""
    east, north = plane[1], plane[2]
    steep = math.hypot(east, north)
    reach = 30.0
    away = affinity.translate(polygon, -east / steep * reach, -north / steep * reach)
    inside = polygon.intersection(away).centroid
    assert polygon.contains(inside)
    return exact_fill_at(polygon, grade, plane, gradient, mitred, (inside.x, inside.y))


def exact_fill_at(polygon, grade, plane, gradient, mitred, inside):
    moved = affinity.translate(polygon, -inside[0], -inside[1])
    shift = lambda p: (p[0] + p[1] * inside[0] + p[2] * inside[1], p[1], p[2])  # noqa: E731
    return exact_fill(moved, shift(grade), np.array(shift(plane)), gradient, mitred=mitred, inside=(0.0, 0.0))


def test_a_tilted_pad_equals_an_exact_polyhedron():
    # 2 % fall to azimuth 30° over level ground, all in fill: the faces along its edges rise with the edges.
    polygon = affinity.rotate(box(50, 60, 110, 100), 20)
    azimuth = math.radians(30)
    rise = (-0.02 * math.sin(azimuth), -0.02 * math.cos(azimuth))
    centre = polygon.centroid
    grade = (103.0 - rise[0] * centre.x - rise[1] * centre.y, *rise)
    pad = PadShape("A", polygon, 103.0, TWO, fall=0.02, fall_azimuth=30.0)
    _, fill = volumes(design_of(grid_of(160, 0.25), lambda e, n: 100.0 + 0 * e, pad))
    exact = exact_fill(polygon, grade, np.array([100.0, 0.0, 0.0]), 0.5)
    assert fill == pytest.approx(exact, rel=2e-5)


@pytest.mark.parametrize("mitred", [False, True])
def test_a_pad_over_a_ridge_equals_two_exact_polyhedra(mitred):
    # The ground falls by 10 % to both sides of the line at 100 east; the solid is cut there into two convex halves.
    polygon = affinity.rotate(box(80, 85, 125, 115), 15)
    pad = PadShape("A", polygon, 105.0, TWO)
    fill = volumes(design_of(grid_of(200, 0.25), lambda e, n: 104 - 0.1 * np.abs(e - 100), pad, mitred=mitred))[1]
    halves = 0.0
    for plane, inside, cut in (
        ((94.0, 0.1, 0.0), (95, 100), (1, 0, 0, -100)),
        ((114.0, -0.1, 0.0), (105, 100), (-1, 0, 0, 100)),
    ):
        halves += exact_fill(
            polygon, (105.0, 0, 0), np.array(plane), 0.5, mitred=mitred, inside=inside, also=[cut]
        )
    assert fill == pytest.approx(halves, rel=1e-4)


def test_an_embankment_on_a_side_slope_has_the_closed_form_section():
    # Crest of width b, height h over the centre line, ground rising at r = 1/n across, side slopes 1/s:
    # the section's area is (s (b/2)² /n² + ... ) by subtracting two triangles; worked with coordinates here:
    # left toe where h + z falls to −x/10: crest edge (±5, 4); faces 4 − (|x| − 5)/2; ground x/10.
    # right: 4 − (x − 5)/2 = x/10 → x = 6.5/0.6; left: 4 − (−x − 5)/2 = x/10 → x = −6.5/0.4.
    right, left = 6.5 / 0.6, -6.5 / 0.4
    corners = [(-5, 4), (5, 4), (right, right / 10), (left, left / 10)]
    area = Polygon(corners).area
    grid = grid_of(120, 0.25)
    line = LineString([(60, 20, 104.0), (60, 100, 104.0)])
    road = RoadShape("ramp", line, 10.0, TWO)
    surface = ground(grid, lambda e, n: 100 + (e - 60) / 10)
    depth = build_design(grid, surface, [], [road]).reader().read(grid.window) - surface.values
    row = depth[grid.rows // 2]
    assert row.min() >= -1e-9
    assert row.sum() * 0.25 == pytest.approx(area, rel=1e-3)


def test_crossfall_of_a_road_lowers_its_edges():
    grid = grid_of(60, 0.5)
    line = LineString([(30, 10, 100.0), (30, 50, 102.0)])
    surface = ground(grid, lambda e, n: 90.0 + 0 * e)
    both = build_design(grid, surface, [], [RoadShape("r", line, 8.0, TWO, crossfall=0.025)]).reader()
    one = build_design(
        grid, surface, [], [RoadShape("r", line, 8.0, TWO, crossfall=0.025, one_way_fall=True)]
    ).reader()
    row, column = grid.cell(33.25, 30.25)
    window = type(grid.window)(int(row), 0, 1, grid.columns)
    crowned, tipped = both.read(window)[0], one.read(window)[0]
    middle = 100 + 2.0 * 20.25 / 40  # grade 2 m in 40 m, at northing 30.25
    assert crowned[int(column)] == pytest.approx(middle - 0.025 * 3.25)
    assert tipped[int(column)] == pytest.approx(middle - 0.025 * 3.25)
    assert tipped[int(grid.cell(26.75, 30.25)[1])] == pytest.approx(middle + 0.025 * 3.25)


def test_benches_add_a_level_step_every_so_many_metres():
    # A basin 12 m deep, 1:2, benches 2 m wide each 5 m: the section's width grows by 2 m at 5 m and at 10 m.
    # One side's section: triangle 12·24/2 = 144 plus the soil over the benches, 2·(12 − 5) + 2·(12 − 10) =
    # 18.
    grid = grid_of(200, 0.25)
    slope = SideSlope(cut=2.0, fill=2.0, bench_height_m=5.0, bench_width_m=2.0)
    pad = PadShape("basin", box(80, 0.01, 120, 199.99), 88.0, slope)
    surface = ground(grid, lambda e, n: 100.0 + 0 * e)
    depth = build_design(grid, surface, [pad]).reader().read(grid.window) - surface.values
    assert -depth[grid.rows // 2].sum() * 0.25 == pytest.approx(40 * 12 + 2 * (144 + 18), rel=1e-4)


def test_a_warped_pad_follows_the_triangles_between_its_vertices():
    # Three corners level, one 1 m up: over the triangle of 50 × 50/2 with the raised corner the mean rise is
    # 1/3 m.
    corners = [(40, 40, 103.0), (90, 40, 103.0), (90, 90, 104.0), (40, 90, 103.0)]
    grid = grid_of(130, 0.25)
    surface = ground(grid, lambda e, n: 100.0 + 0 * e)
    steep = SideSlope(cut=0.001, fill=0.001)
    pad = PadShape("W", Polygon(corners), math.nan, steep, warped=True)
    fill = volumes(build_design(grid, surface, [pad]))[1]
    one_way, other_way = 50 * 50 * 3 + 1250 / 3, 50 * 50 * 3 + 2500 / 3  # by which diagonal splits the square
    assert min(abs(fill - one_way), abs(fill - other_way)) < 2
