"""Areas on the ground: overlaps, unions, spreads, and rings whose signed areas add up."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
import shapely
from hypothesis import given
from hypothesis import strategies as st
from pyproj import CRS

from earthwork.errors import GroundError
from earthwork.files.vectors import NamedPolygon, read_polygons
from earthwork.ground.areas import (
    check_overlaps,
    ground_area_m2,
    merge_names,
    only_polygons,
    rings_on,
    spread,
    square_metres,
    union_area,
)
from earthwork.ground.grid import Grid
from earthwork.site.model import AreaSpec

PLOTS = Path(__file__).parents[2] / "../shared/data/zones_bubenec_plots/bubenec.gpkg"


def zone(name, *corners):
    return NamedPolygon(name, shapely.box(*corners), where="zones: plan.gpkg")


# --- overlaps ------------------------------------------------------------------------------------------------------


def test_zones_that_share_an_edge_do_not_overlap():
    zones = [zone("a", 0, 0, 10, 10), zone("b", 10, 0, 20, 10), zone("c", 0, 10, 20, 20)]
    same, warnings = check_overlaps(zones)
    assert (same, warnings) == (zones, ())


def test_an_overlap_names_both_and_its_ground_area():
    zones = [zone("north lot", 0, 0, 10, 10), zone("south lot", 9, 0, 20, 10)]
    with pytest.raises(GroundError, match=r"zones: plan\.gpkg: zones overlap: 'north lot' and 'south lot' by 10 m²"):
        check_overlaps(zones)
    with pytest.raises(GroundError, match="by 40 m²"):
        check_overlaps(zones, square_m=4.0)


def test_the_worst_overlaps_come_first():
    zones = [zone(f"z{i}", 10 * i, 0, 10 * i + 11 + i, 10) for i in range(8)]
    with pytest.raises(
        GroundError, match=r"overlap: 'z6' and 'z7' by 70 m²; 'z5' and 'z6' by 60 m²; .*, and \d+ more pairs"
    ):
        check_overlaps(zones)


@pytest.mark.parametrize(
    ("overlap", "refused"),
    # zones of 100 m²: more than 0.01 m² is refused; of 1 km²: more than a millionth, 1 m²
    [((10.0, 9.9995), False), ((10.0, 9.9985), True), ((1000.0, 999.9995), False), ((1000.0, 999.998), True)],
)
def test_how_much_is_a_sliver(overlap, refused):
    side, start = overlap
    height = 10.0 if side == 10.0 else 1000.0
    zones = [zone("a", 0, 0, side, height), zone("b", start, 0, start + side, height)]
    if refused:
        with pytest.raises(GroundError, match="'a' and 'b'"):
            check_overlaps(zones)
        return
    cut, (warning,) = check_overlaps(zones)
    assert warning.code == "zone-slivers"
    assert "between 'a' and 'b'" in warning.message
    assert cut[0].polygon.area == pytest.approx(side * height, rel=1e-12)  # the first keeps it
    assert cut[1].polygon.area == pytest.approx(side * height - (side - start) * height, rel=1e-12)
    assert shapely.intersection(cut[0].polygon, cut[1].polygon).area == 0.0


def test_features_of_one_name_are_one_zone():
    zones, _ = check_overlaps([zone("a", 0, 0, 10, 10), zone("b", 20, 0, 30, 10), zone("a", 5, 0, 15, 10)])
    assert [z.name for z in zones] == ["a", "b"]
    assert zones[0].polygon.area == pytest.approx(150.0)
    assert [z.polygon.area for z in merge_names([zone("a", 0, 0, 1, 1), zone("a", 3, 0, 4, 1)])] == [2.0]


def test_a_zone_inside_another_is_an_overlap():
    with pytest.raises(GroundError, match="by 4 m²"):
        check_overlaps([zone("outer", 0, 0, 10, 10), zone("inner", 4, 4, 6, 6)])


@given(st.lists(st.floats(0.1, 50.0), min_size=1, max_size=8), st.lists(st.floats(0.1, 50.0), min_size=1, max_size=8))
def test_any_partition_is_accepted(widths, heights):
    xs, ys = np.concatenate([[0], np.cumsum(widths)]), np.concatenate([[0], np.cumsum(heights)])
    zones = [
        zone(f"{i} {j}", xs[i], ys[j], xs[i + 1], ys[j + 1]) for i in range(len(widths)) for j in range(len(heights))
    ]
    cut, warnings = check_overlaps(zones)
    assert warnings == ()
    assert sum(z.polygon.area for z in cut) == pytest.approx(xs[-1] * ys[-1], rel=1e-12)


@pytest.mark.skipif(not PLOTS.is_file(), reason="the folder of open data is not here")
def test_plots_that_overlap_on_the_ground():
    """Three pairs of the town's plots share more than 0.01 m² of ground; its map areas show thirty plots."""
    plots = read_polygons(
        AreaSpec(file=PLOTS.name, layer="plots"), PLOTS.parent, crs=CRS("EPSG:5514"), name="ID", what="zones"
    )
    shapes = np.array([p.polygon for p in plots])
    expected = set()
    for i in range(len(shapes)):  # every pair, without an index
        shared = shapely.area(shapely.intersection(shapes[i], shapes[i + 1 :]))
        expected |= {frozenset((plots[i].name, plots[i + 1 + j].name)) for j in np.flatnonzero(shared > 0.01)}
    with pytest.raises(GroundError) as caught:
        check_overlaps(plots)
    told = str(caught.value).split("zones overlap: ")[1].split(". Each")[0].split("; ")
    assert {frozenset(pair.split(" by ")[0].replace("'", "").split(" and ")) for pair in told} == expected
    assert len(expected) == 3


# --- unions and spreads --------------------------------------------------------------------------------------------


def test_union():
    assert union_area([zone("a", 0, 0, 10, 10), shapely.box(5, 0, 15, 10)]).area == pytest.approx(150.0)
    assert union_area([]).is_empty


def test_lines_left_by_cutting_are_dropped():
    mixed = shapely.GeometryCollection(
        [shapely.box(0, 0, 1, 1), shapely.LineString([(5, 5), (6, 6)]), shapely.Point(9, 9)]
    )
    assert only_polygons(mixed).equals(shapely.box(0, 0, 1, 1))
    assert only_polygons(shapely.LineString([(5, 5), (6, 6)])).is_empty


def test_a_spread_is_a_ground_length():
    """A square of 20 m, 1.5 m further: 400 + 4 × 20 × 1.5 + π 1.5², corners rounded to 0.04 %."""
    grid = Grid(1, 1, 0, 0, 1, 1, unit_m=0.5, ground_scale=2.0)  # one unit is a metre on the ground
    area = spread(shapely.box(0, 0, 20, 20), 1.5, grid)
    assert ground_area_m2(area, grid) == pytest.approx(400 + 120 + np.pi * 2.25, abs=np.pi * 2.25 * 1e-3)
    coarse = Grid(1, 1, 0, 0, 1, 1, unit_m=0.5, ground_scale=1.0)
    assert spread(shapely.box(0, 0, 40, 40), 1.5, coarse).bounds == pytest.approx((-3, -3, 43, 43))
    assert spread(shapely.box(0, 0, 1, 1), 0.0, grid).equals(shapely.box(0, 0, 1, 1))


def test_square_metres():
    assert square_metres(Grid(1, 1, 0, 0, 1, 1, unit_m=0.3048, ground_scale=1.0001)) == (0.3048 * 1.0001) ** 2


# --- rings ---------------------------------------------------------------------------------------------------------


def signed_area(rings, polygon):
    """Σ over edges of Δrow × mean distance to the east, in cells: + for what lies inside."""
    total = 0.0
    for k in range(rings.polygon_offsets[polygon], rings.polygon_offsets[polygon + 1]):
        ring = slice(rings.ring_offsets[k], rings.ring_offsets[k + 1])
        x, y = rings.xs[ring], rings.ys[ring]
        assert (x[0], y[0]) == (x[-1], y[-1])
        total -= np.sum(np.diff(y) * (x[:-1] + x[1:]) / 2)
    return total


GRID = Grid(40, 60, 100.0, 200.0, 2.0, 0.5)


def test_a_square_in_cells():
    rings = rings_on(GRID, [shapely.box(104, 198, 108, 199)])
    assert rings.bounds.tolist() == [[2.0, 2.0, 4.0, 4.0]]
    assert signed_area(rings, 0) == 4.0


def test_orientation_does_not_matter():
    square = [(104, 198), (108, 198), (108, 199), (104, 199)]
    for ring in (square, square[::-1]):
        assert signed_area(rings_on(GRID, [shapely.Polygon(ring)]), 0) == 4.0


def test_holes_and_parts_of_every_orientation():
    hole = [(105, 198.25), (106, 198.25), (106, 198.75), (105, 198.75)]
    outer = [(104, 198), (108, 198), (108, 199), (104, 199)]
    for shell in (outer, outer[::-1]):
        for inner in (hole, hole[::-1]):
            holed = shapely.Polygon(shell, [inner])
            both = shapely.MultiPolygon([holed, shapely.box(120, 190, 124, 191)])
            rings = rings_on(GRID, [both, shapely.box(110, 190, 112, 190.5), holed])
            assert len(rings) == 3
            # 4 − 1 × 0.5 / (2 × 0.5) cells, and 4 × 1 / 1 cells beside it
            assert [signed_area(rings, i) for i in range(3)] == pytest.approx([3.5 + 4.0, 1.0, 3.5], abs=1e-12)


def test_no_polygons_and_empty_ones():
    assert len(rings_on(GRID, [])) == 0
    rings = rings_on(GRID, [shapely.box(104, 198, 108, 199), shapely.Polygon(), shapely.box(104, 198, 106, 199)])
    assert [signed_area(rings, i) for i in range(3)] == [4.0, 0.0, 2.0]


def test_a_small_ring_far_from_the_origin():
    """5 cm² at coordinates of millions: the orientation must not drown in rounding."""
    far = Grid(10, 10, 6_500_000.0, 2_000_000.0, 1.0, 1.0)
    tiny = shapely.Polygon(
        [(6_500_003, 1_999_995), (6_500_003.02, 1_999_995), (6_500_003.02, 1_999_995.02), (6_500_003, 1_999_995.02)]
    )
    assert signed_area(rings_on(far, [tiny]), 0) == pytest.approx(4e-4, rel=1e-5)


@given(st.data())
def test_any_polygons_add_up(data):
    count = data.draw(st.integers(1, 6))
    rng = np.random.default_rng(data.draw(st.integers(0, 2**32 - 1)))
    shapes = []
    for _ in range(count):
        blobs = shapely.buffer(shapely.points(rng.uniform((100, 180), (220, 200), (3, 2))), rng.uniform(1, 20, 3))
        shapes.append(only_polygons(shapely.difference(shapely.union_all(blobs[:2]), shapely.buffer(blobs[2], -2))))
    rings = rings_on(GRID, shapes)
    cells = GRID.cell_east * GRID.cell_north
    assert [signed_area(rings, i) * cells for i in range(count)] == pytest.approx(
        [s.area for s in shapes], rel=1e-9, abs=1e-9
    )
    for i, s in enumerate(shapes):
        if not s.is_empty:
            west, south, east, north = s.bounds
            assert rings.bounds[i] == pytest.approx(
                [(west - 100) / 2, (200 - north) / 0.5, (east - 100) / 2, (200 - south) / 0.5]
            )
