"""Ways round barriers against hand-worked figures and an independent visibility graph; roads against Snell's law."""

import numpy as np
import pytest
import shapely
from scipy.sparse import coo_array
from scipy.sparse.csgraph import dijkstra

from earthwork.plan.barriers import Barriers
from earthwork.plan.paths import Ways, seconds
from earthwork.plan.relief import Relief
from earthwork.plan.roads import Road, RoadNet
from earthwork.plan.trucks import Drive


def points(*pairs):
    return np.array(pairs, float)


def lengths(shapes, sources, targets):
    return Ways(Barriers.of(shapes)).table(points(*sources), points(*targets)).length


def random_shapes(rng, count, size=1000.0):
    shapes = []
    for _ in range(count):
        centre = rng.uniform(0, size, 2)
        corners = rng.integers(4, 20)
        angle, radius = np.sort(rng.uniform(0, 2 * np.pi, corners)), rng.uniform(0.02, 0.12, corners) * size
        star = shapely.Polygon(np.column_stack([np.cos(angle), np.sin(angle)]) * radius[:, None] + centre)
        shapes.append(star.buffer(0))
    return shapes


def by_all_vertices(shape, starts, ends):
    """Shortest distances over every vertex, with the visibility of each pair judged by shapely."""
    vertices = shapely.get_coordinates(shape)
    places = np.vstack([vertices, starts, ends])
    i, j = np.triu_indices(len(places), 1)
    inside = shape.buffer(-1e-6, join_style="mitre")
    shapely.prepare(inside)
    free = ~shapely.intersects(inside, shapely.linestrings(np.stack([places[i], places[j]], axis=1)))
    length = np.hypot(*(places[i] - places[j]).T)
    free &= length > 0
    graph = coo_array((length[free], (i[free], j[free])), shape=(len(places),) * 2).tocsr()
    first = len(vertices)
    return dijkstra(graph, directed=False, indices=range(first, first + len(starts)))[:, first + len(starts) :]


# --- by hand ------------------------------------------------------------------------------------------------------


def test_without_barriers_the_way_is_straight():
    assert lengths([], [(0, 0)], [(3, 4)]).tolist() == [[5.0]]


def test_round_one_corner():
    # From (−5, 0) to (5, 0) past the end at (0, 12) of a wall that stands on the axis and reaches far south: 2 × 13.
    wall = shapely.box(-1e-9 - 0.001, -1e4, 0.001, 12)
    assert lengths([wall], [(-5, 0)], [(5, 0)])[0, 0] == pytest.approx(26, rel=1e-4)


def test_round_two_corners():
    # Past the box (−1, −3) to (1, 3): √(4² + 3²) + 2 + √(4² + 3²).
    assert lengths([shapely.box(-1, -3, 1, 3)], [(-5, 0)], [(5, 0)])[0, 0] == pytest.approx(12)


def test_along_a_wall_and_between_touching_barriers():
    boxes = [shapely.box(0, 0, 10, 10), shapely.box(10, 0, 20, 10)]
    assert lengths(boxes, [(0, 10)], [(20, 10)])[0, 0] == 20.0
    # Neighbours that share an edge leave no gap: (10, −5) to (10, 15) goes round the far ends.
    assert lengths(boxes, [(10, -5)], [(10, 15)])[0, 0] == pytest.approx(2 * np.hypot(10, 5) + 10)


def test_a_gap_that_digitising_left_is_closed_and_a_real_one_is_driven():
    closed = [shapely.box(0, 0, 10, 10), shapely.box(10.0000001, 0, 20, 10)]
    assert lengths(closed, [(10, -5)], [(10, 15)])[0, 0] > 30
    gap = [shapely.box(0, 0, 10, 10), shapely.box(13, 0, 20, 10)]
    assert lengths(gap, [(11.5, -5)], [(11.5, 15)])[0, 0] == 20.0


def test_earth_inside_a_barrier_leaves_at_the_nearest_free_point():
    # (2, 5) in a 10 × 10 box leaves west at (0, 5) after 2 m; from there straight to (−6, 13): 10 m.
    assert lengths([shapely.box(0, 0, 10, 10)], [(2, 5)], [(-6, 13)])[0, 0] == pytest.approx(12)
    # and to a place inside the same box near its east side: out 2, over the top, in 1.
    way = lengths([shapely.box(0, 0, 10, 10)], [(2, 5)], [(9, 5)])[0, 0]
    assert way == pytest.approx(2 + 5 + 10 + 5 + 1)


def test_no_way_out_of_a_ring():
    ring = shapely.Point(0, 0).buffer(10) - shapely.Point(0, 0).buffer(5)
    table = lengths([ring], [(0, 0), (20, 0)], [(1, 0), (20, 1)])
    assert table[0].tolist() == [1.0, np.inf]
    assert table[1].tolist() == [np.inf, 1.0]


def test_the_way_has_the_length_of_the_table_and_touches_no_barrier():
    rng = np.random.default_rng(1)
    barriers = Barriers.of(random_shapes(rng, 8))
    sources, targets = rng.uniform(-50, 1050, (10, 2)), rng.uniform(-50, 1050, (10, 2))
    ways = Ways(barriers)
    table = ways.table(sources, targets).length
    for k, way in enumerate(ways.ways(sources, targets)):
        assert way.length_m == pytest.approx(table[k, k], rel=1e-12)
        assert way.points[0] == pytest.approx(sources[k])
        assert way.points[-1] == pytest.approx(targets[k])
        free, _ = barriers.exits(np.array([sources[k], targets[k]]))
        inner = shapely.LineString(way.points).intersection(barriers.shape.buffer(-0.01)).length
        assert inner == pytest.approx(np.hypot(*(free - [sources[k], targets[k]]).T).sum(), abs=0.1)


# --- against an independent solution ------------------------------------------------------------------------------


@pytest.mark.parametrize("seed", range(12))
def test_ways_are_the_shortest_of_the_full_visibility_graph(seed):
    rng = np.random.default_rng(seed)
    barriers = Barriers.of(random_shapes(rng, int(rng.integers(1, 9))))
    sources, targets = rng.uniform(-100, 1100, (12, 2)), rng.uniform(-100, 1100, (9, 2))
    starts, out = barriers.exits(sources)
    ends, back = barriers.exits(targets)
    expected = by_all_vertices(barriers.shape, starts, ends) + out[:, None] + back[None, :]
    assert Ways(barriers).table(sources, targets).length == pytest.approx(expected, rel=1e-9)


def test_stairs_of_a_raster_are_barriers_too():
    rng = np.random.default_rng(3)
    cells = [shapely.box(x, y, x + 1, y + 1) for x in range(20) for y in range(20) if rng.random() < 0.3]
    barriers = Barriers.of(cells)
    sources, targets = points((-1, -1), (-1, 9.5)), points((21, 21), (21, 9.5), (9.5, 21))
    expected = by_all_vertices(barriers.shape, sources, targets)
    assert Ways(barriers).table(sources, targets).length == pytest.approx(expected, rel=1e-3)


# --- properties ---------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("seed", range(6))
def test_another_barrier_never_shortens_a_way(seed):
    rng = np.random.default_rng(seed)
    *some, new = random_shapes(rng, 6, size=300.0)
    free = rng.uniform(-50, 350, (30, 2))
    before = Ways(Barriers.of([s for s in some if s.disjoint(new)])).table(free, free).length
    after = Ways(Barriers.of([s for s in some if s.disjoint(new)] + [new])).table(free, free).length
    assert (after >= before * (1 - 1e-9)).all()


def test_turning_and_moving_the_site_changes_nothing():
    rng = np.random.default_rng(4)
    shapes = random_shapes(rng, 5)
    places = rng.uniform(0, 1000, (8, 2))
    angle = 0.7
    turn = np.array([[np.cos(angle), -np.sin(angle)], [np.sin(angle), np.cos(angle)]])

    def moved(p):
        return p @ turn.T + [3000.0, -500.0]

    before = Ways(Barriers.of(shapes)).table(places, places).length
    after = Ways(Barriers.of([shapely.transform(s, moved) for s in shapes])).table(moved(places), moved(places)).length
    assert after == pytest.approx(before, abs=0.02)


def test_threads_change_nothing():
    rng = np.random.default_rng(5)
    barriers, places = Barriers.of(random_shapes(rng, 8)), rng.uniform(0, 1000, (40, 2))
    one, two = Ways(barriers, threads=1), Ways(barriers, threads=2)
    assert (one.table(places, places).length == two.table(places, places).length).all()


# --- roads --------------------------------------------------------------------------------------------------------


def by_road(shapes, *roads, elevations=None):
    """Ways chosen by time, at 5 m/s over open ground."""
    net = RoadNet.of(roads, elevations=elevations)
    return Ways(Barriers.of(shapes), net, effort=seconds, ground_speed_m_s=5.0)


def test_a_fast_road_is_entered_at_the_angle_of_snell():
    # Both ends 200 m from a straight road of twice the speed, 2000 m apart along it. The quickest way leaves at
    # cos θ = 1/2 and takes 2000/v2 + 2 × 200 × √(1/v1² − 1/v2²); the grid of nodes may cost up to 1 %.
    road = Road("spine", points((-500, 0), (2500, 0)), speed_m_s=10.0)
    table = by_road([], road).table(points((0, 200)), points((2000, 200)))
    quickest = 2000 / 10 + 2 * 200 * np.sqrt(1 / 5**2 - 1 / 10**2)
    assert quickest <= table.effort[0, 0] <= quickest * 1.001
    assert table.length[0, 0] == pytest.approx(2000 - 2 * 200 / np.sqrt(3) + 2 * 400 / np.sqrt(3), rel=0.01)


def test_a_road_crosses_a_barrier_as_a_bridge_does():
    river = shapely.box(-1e4, -10, 1e4, 10)
    bridge = Road("bridge", points((30, -40), (30, 40)), speed_m_s=5.0)
    barriers = Barriers.of([river])
    assert Ways(barriers).table(points((0, -50)), points((0, 50))).length[0, 0] > 20_000  # round its far end
    ways = by_road([river], bridge)
    table = ways.table(points((0, -50)), points((0, 50)))
    # Bends may lie only on nodes of the bridge, 10 m apart: on the ideal way, at the banks (30, ∓10).
    assert table.length[0, 0] == pytest.approx(2 * np.hypot(30, 40) + 20)
    (way,) = ways.ways(points((0, -50)), points((0, 50)))
    assert way.length_m == pytest.approx(table.length[0, 0])
    assert way.stretches_m[way.road == 0].sum() == pytest.approx(20)


def test_one_way_roads_are_driven_one_way():
    river = shapely.box(-1e4, -10, 1e4, 10)
    north = Road("north only", points((0, -20), (0, 20)), speed_m_s=5.0, one_way=True)
    south = Road("south only", points((100, 20), (100, -20)), speed_m_s=5.0, one_way=True)
    ways = by_road([river], north, south)
    there = ways.table(points((50, -10)), points((50, 10))).length[0, 0]
    assert there == pytest.approx(50 + 20 + 50)
    (way,) = ways.ways(points((50, 10)), points((50, -10)))
    assert set(way.road[way.road >= 0]) == {1}


def test_roads_that_cross_join():
    # No ground to drive on but two roads through barriers: round the corner at the crossing (50, 50), which neither
    # line has a vertex at.
    blocks = [shapely.box(a, b, a + 49, b + 49) for a in (0, 51) for b in (0, 51)]
    east = Road("east", points((0, 50), (100, 50)), speed_m_s=50.0)
    north = Road("north", points((50, 0), (50, 100)), speed_m_s=50.0)
    table = by_road(blocks, east, north).table(points((0, 50)), points((50, 100)))
    assert table.effort[0, 0] == pytest.approx(100 / 50)


def test_a_road_steeper_than_its_limit_is_not_driven_and_named():
    road = Road("ramp", points((0, -20), (0, 20)), speed_m_s=5.0, grade_limit=0.10)
    river = shapely.box(-1e4, -10, 1e4, 10)
    steep = by_road([river], road, elevations=lambda p: 0.2 * p[:, 1])
    assert steep.table(points((0, -20)), points((0, 20))).length[0, 0] > 20_000  # round the river
    (warning,) = steep.roads.warnings
    assert warning.code == "road-too-steep"
    assert 'haul road "ramp": 40 m of it are steeper than its limit of 10 %, up to 20 %' in warning.message
    flat = by_road([river], road, elevations=lambda p: 0.05 * p[:, 1])
    assert flat.roads.warnings == ()
    assert flat.table(points((0, -20)), points((0, 20))).length[0, 0] == pytest.approx(40)


def test_a_slow_road_is_left_aside():
    road = Road("track", points((0, 0), (100, 0)), speed_m_s=2.0)
    ways = by_road([], road)
    table = ways.table(points((0, 0)), points((100, 0)))
    assert table.effort[0, 0] == pytest.approx(100 / 5)
    (way,) = ways.ways(points((0, 0)), points((100, 0)))
    assert (way.road == -1).all()


# --- relief -------------------------------------------------------------------------------------------------------


def hill(slope, *, columns=60, side=10.0):
    """Ground that rises to the east by a slope, 600 m long and 100 m wide."""
    east = (np.arange(columns) + 0.5) * side
    return Relief(np.tile(slope * east, (10, 1)), side, side)


def test_rise_and_fall_along_a_way():
    relief = hill(0.05)
    up = points((50, -50), (450, -50))
    assert relief.rise_and_fall(up) == pytest.approx((20, 0, 0))
    assert relief.rise_and_fall(np.vstack([up, up[:1]])) == pytest.approx((20, 20, 0))


def test_ground_without_heights_counts_as_level_and_is_told():
    relief = hill(0.05)
    rise, fall, unknown = relief.rise_and_fall(points((450, -50), (850, -50)))
    assert unknown == pytest.approx(250, abs=10)
    assert rise == pytest.approx(7.25, abs=0.5)
    assert fall == 0


def test_time_up_and_down_a_hill():
    # 400 m up 5 % at 8 − 0.4 × 5 = 6 m/s, down at the limit of the way, 7 m/s.
    drive = Drive(limit_m_s=20.0, table=((-10.0, 12.0), (10.0, 4.0)))
    start, end = points((50, -50)), points((450, -50))
    relief = hill(0.05)
    assert relief.minutes(drive, start, end, np.array([7.0])) == pytest.approx(400 / 6 / 60)
    assert relief.minutes(drive, end, start, np.array([7.0])) == pytest.approx(400 / 7 / 60)


def test_ways_by_time_go_round_a_hill():
    # A ridge 40 m high and 60 m wide across the straight line, open at its south end: up 133 % at walking pace costs
    # more than the detour over level ground.
    ground = np.zeros((60, 60))
    ground[:45, 27:33] = 40.0
    relief = Relief(ground, 10.0, 10.0)
    drive = Drive(limit_m_s=10.0, table=((0.0, 10.0), (30.0, 0.5)))

    def minutes(start, end, limit):
        return relief.minutes(drive, start, end, limit)

    # Something to bend at: a post south of the ridge's end.
    ways = Ways(Barriers.of([shapely.box(290, -480, 310, -470)]), effort=minutes, ground_speed_m_s=10.0)
    table = ways.table(points((200, -400)), points((400, -400)))
    assert table.length[0, 0] == pytest.approx(2 * np.hypot(90, 80) + 20, rel=0.02)
