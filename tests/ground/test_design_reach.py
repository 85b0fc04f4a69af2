"""Where slopes go, meet and end; that a design is a function of the place alone; and what is refused."""

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from shapely import affinity
from shapely.geometry import LineString, MultiPolygon, Polygon, box

from earthwork.errors import GroundError
from earthwork.ground.design import CUT_SLOPE, FILL_SLOPE, INSIDE, UNTOUCHED, build_design
from earthwork.ground.elements import PadShape, RoadShape, SideSlope
from earthwork.ground.grid import Window
from tests.ground.design_helpers import ArraySurface, built, centres, grid_of, ground, volumes

TWO = SideSlope(cut=2.0, fill=2.0)


def rough(grid, seed=1, height=2.0):
    """Smooth hills, nowhere steeper than about 1:4."""
    east, north = centres(grid)
    rng = np.random.default_rng(seed)
    z = np.full(east.shape, 100.0)
    for _ in range(6):
        k = rng.normal(size=2) * 0.03
        z += height / 6 * np.sin(k[0] * east + k[1] * north + rng.uniform(0, 6))
    return ArraySurface(z)


def test_three_by_three_by_hand():
    # Cells of 2 m; the middle cell is the pad at 101 on ground at 100. Slopes 1:2: beside the pad the centre
    # of a neighbour is 1 m from the edge, so 101 − 1/2 = 100.5; at a corner √2 m, so 101 − √2/2.
    grid = grid_of(6, 2)
    design = build_design(
        grid, ground(grid, lambda e, n: 100.0 + 0 * e), [PadShape("p", box(2, 2, 4, 4), 101.0, TWO)]
    )
    corner = 101 - math.sqrt(2) / 2
    expected = [[corner, 100.5, corner], [100.5, 101.0, 100.5], [corner, 100.5, corner]]
    np.testing.assert_allclose(built(design).z, expected, atol=1e-12)
    mitred = build_design(grid, design.existing, [PadShape("p", box(2, 2, 4, 4), 101.0, TWO)], mitred=True)
    np.testing.assert_allclose(
        built(mitred).z, [[100.5, 100.5, 100.5], [100.5, 101, 100.5], [100.5] * 3], atol=1e-12
    )


def test_cut_and_fill_on_either_side_of_the_zero_line():
    grid = grid_of(100, 1)
    design = build_design(
        grid,
        ground(grid, lambda e, n: 100 + 0.1 * (e - 50)),
        [PadShape("p", box(30, 30, 70, 70), 100.0, TWO)],
    )
    got = built(design)
    assert set(np.unique(got.kind)) == {UNTOUCHED, FILL_SLOPE, CUT_SLOPE, INSIDE}
    row = got.z[50]
    # At (20.5, 49.5): 9.5 m from the edge the fill face is at 100 − 4.75, under the ground at 97.05:
    # untouched.
    assert row[20] == pytest.approx(97.05)
    assert got.kind[50, 20] == UNTOUCHED
    # At (26.5, ·): 100 − 3.5/2 = 98.25 over ground at 97.65; at (72.5, ·): 100 + 2.5/2 under ground at
    # 102.25.
    assert (row[26], got.kind[50, 26]) == (pytest.approx(98.25), FILL_SLOPE)
    assert (row[72], got.kind[50, 72]) == (pytest.approx(101.25), CUT_SLOPE)


def test_a_valley_behind_a_ridge_is_not_filled():
    # A pad in fill at 100 on ground at 98; 40 m away, behind a ridge, a gorge lies under the pad's fill cone
    # again.
    grid = grid_of(300, 1)

    def height(e, n):
        return np.where(e < 150, 98.0, np.where(e < 160, 101.0, 20.0)) + 0 * n

    design = build_design(grid, ground(grid, height), [PadShape("p", box(100, 130, 130, 170), 100.0, TWO)])
    got = built(design)
    east, _ = centres(grid)
    assert (got.kind[east > 150] == UNTOUCHED).all()
    assert (got.kind == FILL_SLOPE).any()


def test_a_slope_flows_around_a_rock():
    # The ground behind a knoll is reached around it, so the face is one continuous surface.
    grid = grid_of(120, 1)

    def height(e, n):
        return np.where(np.hypot(e - 75, n - 60) < 4, 110.0, 90.0)

    got = built(build_design(grid, ground(grid, height), [PadShape("p", box(40, 40, 66, 80), 100.0, TWO)]))
    row, column = (int(v) for v in grid.cell(81.5, 60.5))
    assert got.kind[row, column] == FILL_SLOPE
    assert got.z[row, column] == pytest.approx(100 - 15.5 / 2)


def test_two_fills_meet_in_a_valley_half_way():
    # Equal pads 20 m apart, 10 m over the ground: the faces meet half way, 5 m down, and neither goes on.
    grid = grid_of(160, 1)
    pads = [PadShape("a", box(40, 40, 70, 120), 110.0, TWO), PadShape("b", box(90, 40, 120, 120), 110.0, TWO)]
    got = built(build_design(grid, ground(grid, lambda e, n: 100.0 + 0 * e), pads))
    row = got.z[80, 70:90]
    np.testing.assert_allclose(
        row, [110 - (0.5 + k) / 2 for k in [*range(10), *range(9, -1, -1)]], atol=1e-12
    )
    assert list(got.owner[80, 70:90]) == [0] * 10 + [1] * 10


def test_two_cuts_meet_in_a_ridge():
    grid = grid_of(160, 1)
    pads = [PadShape("a", box(40, 40, 70, 120), 90.0, TWO), PadShape("b", box(90, 40, 120, 120), 94.0, TWO)]
    got = built(build_design(grid, ground(grid, lambda e, n: 100.0 + 0 * e), pads))
    # 90 + d/2 = 94 + (20 − d)/2 at d = 14: the ridge is at 97.
    assert got.z[80, 70:90].max() == pytest.approx(90 + 13.5 / 2)
    assert list(got.owner[80, 70:90]) == [0] * 14 + [1] * 6


def test_upper_fill_and_lower_cut_leave_the_ground_between():
    grid = grid_of(200, 1)
    pads = [
        PadShape("up", box(40, 40, 80, 160), 110.0, TWO),
        PadShape("low", box(110, 40, 150, 160), 100.0, TWO),
    ]
    got = built(build_design(grid, ground(grid, lambda e, n: 105.0 + 0 * e), pads))
    assert (got.kind[100, 80:90] == FILL_SLOPE).all()
    assert (got.kind[100, 90:100] == UNTOUCHED).all()
    assert (got.kind[100, 100:110] == CUT_SLOPE).all()
    assert (got.clash == -1).all()


def test_a_retaining_edge_keeps_the_slope_off():
    grid = grid_of(120, 1)
    edge = LineString([(80, 30), (80, 90)])
    design = build_design(
        grid,
        ground(grid, lambda e, n: 100.0 + 0 * e),
        [PadShape("p", box(40, 40, 80, 80), 105.0, TWO)],
        retaining=edge,
    )
    got = built(design)
    east, _ = centres(grid)
    assert (got.kind[(east > 80)] == UNTOUCHED).all()
    assert got.kind[60, 35] == FILL_SLOPE
    # The slopes of the other sides end where the retaining line would go on.
    row, column = (int(v) for v in grid.cell(79.5, 35.5))
    assert got.kind[row, column] == FILL_SLOPE


def test_part_of_an_edge_can_be_retained():
    grid = grid_of(120, 1)
    line = LineString([(80, 50), (80, 60)])
    design = build_design(
        grid,
        ground(grid, lambda e, n: 100.0 + 0 * e),
        [PadShape("p", box(40, 40, 80, 80), 105.0, TWO)],
        retaining=line,
    )
    got = built(design)
    _, north = centres(grid)
    beside = got.kind[:, 80]
    retained = (north[:, 0] > 50) & (north[:, 0] < 60)
    assert (beside[retained] == UNTOUCHED).all()
    assert (beside[~retained & (north[:, 0] > 40) & (north[:, 0] < 80)] == FILL_SLOPE).all()


def test_a_road_ends_where_a_pad_begins():
    grid = grid_of(120, 1)
    pad = PadShape("p", box(60, 40, 100, 80), 104.0, TWO)
    road = RoadShape("ramp", LineString([(20, 60, 100.0), (80, 60, 106.0)]), 8.0, TWO)
    got = built(build_design(grid, ground(grid, lambda e, n: 100.0 + 0 * e), [pad], [road]))
    assert (got.z[60, 60:100] == 104).all()
    assert got.z[60, 40] == pytest.approx(100 + 0.1 * 20.5)
    # The buried end of the road throws no slope over the pad's other side.
    assert got.z[60, 101] == pytest.approx(104 - 0.75)


def test_missing_ground_stays_missing():
    grid = grid_of(60, 1)
    z = np.full((60, 60), 100.0)
    z[:, 45:] = np.nan
    design = build_design(grid, ArraySurface(z), [PadShape("p", box(20, 20, 42, 40), 104.0, TWO)])
    got = built(design).z
    assert np.isnan(got[:, 45:]).all()
    assert not np.isnan(got[:, :45]).any()


@settings(max_examples=25, deadline=None)
@given(
    corner=st.tuples(st.floats(40, 90), st.floats(40, 90)),
    size=st.tuples(st.floats(10, 50), st.floats(10, 50)),
    turn=st.floats(0, 90),
    level=st.floats(97, 103),
    cut=st.floats(1, 3),
    fill=st.floats(1, 3),
)
def test_windows_of_any_size_give_the_same_surface(corner, size, turn, level, cut, fill):
    grid = grid_of(180, 1.25)
    polygon = affinity.rotate(box(*corner, corner[0] + size[0], corner[1] + size[1]), turn)
    design = build_design(grid, rough(grid), [PadShape("p", polygon, level, SideSlope(cut, fill))])
    whole = design.reader().read(grid.window)
    reader = design.reader()
    for row in range(0, grid.rows, 37):
        for column in range(0, grid.columns, 50):
            window = Window(row, column, min(37, grid.rows - row), min(50, grid.columns - column))
            part = reader.read(window)
            np.testing.assert_array_equal(part, whole[row : row + 37, column : column + 50])


@settings(max_examples=20, deadline=None)
@given(level=st.floats(95, 105), up=st.floats(0.01, 3), seed=st.integers(0, 100))
def test_raising_a_pad_never_lowers_its_fill_nor_adds_cut(level, up, seed):
    grid = grid_of(140, 1)
    surface = rough(grid, seed)
    polygon = affinity.rotate(box(50, 50, 90, 80), seed)
    low = volumes(build_design(grid, surface, [PadShape("p", polygon, level, TWO)]))
    high = volumes(build_design(grid, surface, [PadShape("p", polygon, level + up, TWO)]))
    assert high[1] >= low[1]
    assert high[0] <= low[0]


@settings(max_examples=10, deadline=None)
@given(seed=st.integers(0, 100), level=st.floats(97, 103))
def test_a_quarter_turn_and_a_move_change_nothing(seed, level):
    grid = grid_of(128, 1)
    surface = rough(grid, seed)
    polygon = affinity.rotate(box(45, 50, 80, 75), seed)
    there = build_design(grid, surface, [PadShape("p", polygon, level, SideSlope(1.5, 2.5))])
    turned_polygon = affinity.rotate(polygon, 90, origin=(64, 64))
    turned = build_design(
        grid,
        ArraySurface(np.rot90(surface.values)),
        [PadShape("p", turned_polygon, level, SideSlope(1.5, 2.5))],
    )
    np.testing.assert_allclose(built(turned).z, np.rot90(built(there).z), atol=1e-9)
    far = type(grid)(128, 128, 512000.0, 4100128.0, 1.0, 1.0)
    moved = build_design(
        far,
        surface,
        [PadShape("p", affinity.translate(polygon, 512000, 4100000), level, SideSlope(1.5, 2.5))],
    )
    np.testing.assert_allclose(built(moved).z, built(there).z, atol=1e-6)


def test_any_turn_changes_the_volumes_only_within_the_cell():
    totals = []
    for angle in (0.0, 17.0, 45.0):
        grid = grid_of(200, 0.5)
        a = math.radians(angle)

        def height(e, n, a=a):
            along = (e - 100) * math.cos(a) + (n - 100) * math.sin(a)
            return 100 + 0.1 * along + 1.5 * np.sin(along / 9)

        polygon = affinity.rotate(box(75, 80, 125, 120), angle, origin=(100, 100))
        totals.append(volumes(build_design(grid, ground(grid, height), [PadShape("p", polygon, 100.0, TWO)])))
    for cut, fill in totals[1:]:
        assert cut == pytest.approx(totals[0][0], rel=1e-3)
        assert fill == pytest.approx(totals[0][1], rel=1e-3)


def test_a_pad_split_in_two_is_the_same_pad():
    grid = grid_of(140, 1)
    surface = rough(grid, 4)
    whole = build_design(grid, surface, [PadShape("p", box(40, 50, 100, 90), 101.0, TWO)])
    halves = [PadShape("w", box(40, 50, 63, 90), 101.0, TWO), PadShape("e", box(63, 50, 100, 90), 101.0, TWO)]
    split = build_design(grid, surface, halves)
    np.testing.assert_allclose(built(split).z, built(whole).z, atol=1e-9)
    parts = MultiPolygon([h.polygon for h in halves])
    one = build_design(grid, surface, [PadShape("both", parts, 101.0, TWO)])
    np.testing.assert_allclose(built(one).z, built(whole).z, atol=1e-9)


def test_ground_scale_and_feet_are_ground_lengths():
    # The same ground in a CRS whose unit is 0.5 m and whose scale is 2: one CRS unit is one ground metre.
    plain = grid_of(100, 1)
    scaled = grid_of(100, 1, unit_m=0.5, ground_scale=2.0)
    pad = PadShape("p", box(40, 40, 60, 60), 104.0, TWO)
    one = build_design(plain, ground(plain, lambda e, n: 100.0 + 0 * e), [pad])
    other = build_design(scaled, ground(scaled, lambda e, n: 100.0 + 0 * e), [pad])
    np.testing.assert_allclose(built(other).z, built(one).z, atol=1e-12)


def test_oblong_cells():
    grid = type(grid_of(1, 1))(100, 50, 0.0, 100.0, 2.0, 1.0)
    design = build_design(
        grid, ground(grid, lambda e, n: 100.0 + 0 * e), [PadShape("p", box(40, 40, 60, 60), 104.0, TWO)]
    )
    got = built(design).z
    assert got[50, 31] == pytest.approx(104 - 3 / 2)  # easting 63, 3 m from the edge
    assert got[35, 25] == pytest.approx(104 - 4.5 / 2)  # northing 64.5, 4.5 m from the edge


@pytest.mark.parametrize(
    ("pads", "message"),
    [
        ([PadShape("a", box(10, 10, 30, 30), 1.0, TWO), PadShape("b", box(25, 10, 40, 30), 1.0, TWO)],
         r'pads "a" and "b" overlap by 100 m² near \(27\.50, 20\.00\)'),
        ([PadShape("a", box(10, 10, 30, 30), 1.0, TWO), PadShape("a", box(40, 10, 50, 30), 1.0, TWO)],
         r'the name "a" is given 2 times'),
        ([PadShape("out", box(80, 80, 130, 90), 1.0, TWO)],
         r'pad "out" at \(105\.00, 85\.00\) is not wholly on the ground'),
        ([PadShape("none", box(10, 10, 30, 30), math.nan, TWO)], r'pad "none" has no grade'),
        ([PadShape("empty", Polygon(), 1.0, TWO)], r'pad "empty" has no area'),
        ([PadShape("steep", box(10, 10, 30, 30), 1.0, TWO, fall=0.5)],
         r'its fall is 50 %; it must be less than'),
    ],
)  # fmt: skip
def test_bad_pads_are_refused(pads, message):
    grid = grid_of(100, 1)
    with pytest.raises(GroundError, match=message):
        build_design(grid, ground(grid, lambda e, n: 0.0 * e), pads)


def test_bad_roads_are_refused():
    grid = grid_of(100, 1)
    surface = ground(grid, lambda e, n: 0.0 * e)
    hairpin = LineString([(20, 20, 1), (60, 20, 1), (60, 23, 1), (20, 23, 1)])
    with pytest.raises(GroundError, match=r'road "r" turns within its own width'):
        build_design(grid, surface, [], [RoadShape("r", hairpin, 10.0, TWO)])
    back = LineString([(20, 20, 1), (60, 20, 1), (21, 21, 1)])
    with pytest.raises(GroundError, match=r'road "r" turns too sharply at \(60\.00, 20\.00\)'):
        build_design(grid, surface, [], [RoadShape("r", back, 4.0, TWO)])
    with pytest.raises(
        GroundError, match=r'road "r": its line needs two places or more, each with an elevation'
    ):
        build_design(grid, surface, [], [RoadShape("r", LineString([(20, 20), (60, 20)]), 4.0, TWO)])
