"""Thickness under footprints by hand, measures of its change, classes, slopes beside pads, and keys."""

import math
from types import SimpleNamespace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from shapely.geometry import box

from earthwork.ground.areas import rings_on
from earthwork.ground.grid import Grid
from earthwork.ground.stack import ExcavationLayer
from earthwork.plan.keys import KeysTally, bench_depth_m, key_area_m2, keys_result, refill_cost_m3
from earthwork.plan.pad_measures import differential_distance_m, steepest
from earthwork.plan.pad_rules import Shares, classes_that_hold
from earthwork.plan.pad_slopes import slopes_beside
from earthwork.quantities.engine import walk
from earthwork.quantities.pads import PadField, PadsTally
from earthwork.site.model import Keys, Pads
from tests.quantities.conftest import stack_of

RULES = Pads.model_validate({"area": "pads.gpkg"})


def tally_of(existing, finished, *footprints, cell=1.0, threads=1, block=None, **layers):
    stack = stack_of(np.asarray(existing, float), np.asarray(finished, float), cell=cell, **layers)
    tally = PadsTally(rings_on(stack.grid, list(footprints)), stack.grid, block)
    walk(stack, [tally], threads=threads)
    return tally, stack


# --- the tally ---------------------------------------------------------------------------------------------------


def test_three_by_three_by_hand():
    # Thickness of fill (cut counts as 0):  1 2 3 / 0 1 2 / 0 0 1 over cells of 2 m, the whole grid one pad.
    depth = np.array([[1.0, 2, 3], [-1, 1, 2], [-2, -1, 1]])
    tally, _ = tally_of(np.full((3, 3), 10.0), 10 + depth, box(0, 0, 6, 6), cell=2.0)
    sums, field = tally.sums[0], tally.field(0)
    assert sums.area == 9
    assert sums.thickness == pytest.approx(10)
    assert (sums.max_thickness, sums.min_thickness, sums.max_cut) == (3, 0, 2)
    np.testing.assert_array_equal(field.thickness, np.maximum(depth, 0))
    # 95 % of nine equal cells are reached with the ninth; half of them with the fifth: 0 0 0 1 1 1 2 2 3.
    assert field.quantile(0.95) == 3
    assert field.quantile(0.5) == 1
    assert field.quantile(8 / 9) == 2
    # To 2 m everywhere: 1 0 0 / 2 1 0 / 2 2 1 are missing, 9 cell·m.
    assert field.below(2.0) == pytest.approx(9)


def test_shares_of_cells_at_the_edges():
    # A footprint of 1.5 × 1 cells over thicknesses 4 and 2: mean (4 · 1 + 2 · 0.5)/1.5.
    tally, _ = tally_of([[10.0, 10.0]], [[14.0, 12.0]], box(0, 0, 1.5, 1))
    sums = tally.sums[0]
    assert sums.area == pytest.approx(1.5)
    assert sums.thickness == pytest.approx(5.0)
    assert (sums.max_thickness, sums.min_thickness) == (4, 2)


def test_undercut_is_thickness_and_before_is_not():
    # One cell in 2 m of fill, one in 1 m of cut; dug out 1 m under both: 3 and 1.
    dug = ExcavationLayer("pads", 1.0, None, "lower", None)
    tally, _ = tally_of([[10.0, 10.0]], [[12.0, 9.0]], box(0, 0, 2, 1), excavations=(dug,))
    field = tally.field(0)
    np.testing.assert_allclose(field.thickness, [[3, 1]])
    np.testing.assert_allclose(field.before, [[2, 0]])
    assert (tally.sums[0].max_thickness, tally.sums[0].min_thickness) == (3, 1)


def test_missing_ground_is_counted_apart():
    tally, _ = tally_of([[10.0, np.nan]], [[12.0, 12.0]], box(0, 0, 2, 1))
    assert (tally.sums[0].area, tally.sums[0].missing) == (1, 1)
    assert tally.field(0).quantile(0.95) == 2


@settings(max_examples=15, deadline=None)
@given(seed=st.integers(0, 1000), threads=st.sampled_from([1, 3]), cut=st.floats(0.5, 39.5))
def test_two_halves_add_up(seed, threads, cut):
    rng = np.random.default_rng(seed)
    existing, finished = rng.normal(100, 2, (40, 50)), rng.normal(100, 2, (40, 50))
    whole, _ = tally_of(existing, finished, box(3.3, 2.2, 45.7, 39.5))
    halves, _ = tally_of(
        existing, finished, box(3.3, 2.2, 45.7, max(cut, 2.3)), box(3.3, max(cut, 2.3), 45.7, 39.5), threads=threads
    )
    for name in ("area", "thickness", "cut_area", "fill_area"):
        parts = sum(getattr(sums, name) for sums in halves.sums.values())
        assert parts == pytest.approx(getattr(whole.sums[0], name), rel=1e-9)


def test_threads_bands_and_blocks():
    rng = np.random.default_rng(5)
    existing, finished = rng.normal(100, 2, (300, 200)), rng.normal(100, 2, (300, 200))
    one, stack = tally_of(existing, finished, box(10, 15, 180, 290))
    many = PadsTally(one.footprints, stack.grid)
    walk(stack, [many], threads=4, band_rows=17, tile_cells=2000)
    np.testing.assert_array_equal(many.field(0).thickness, one.field(0).thickness)
    assert many.sums[0].thickness == pytest.approx(one.sums[0].thickness, rel=1e-12)
    coarse, _ = tally_of(existing, finished, box(10, 15, 180, 290), block=4)
    field = coarse.field(0)
    assert float(np.nansum(field.thickness * field.share)) * 16 == pytest.approx(one.sums[0].thickness, rel=1e-12)


# --- measures ----------------------------------------------------------------------------------------------------


def field_of(thickness):
    thickness = np.asarray(thickness, float)
    share = np.isfinite(thickness).astype(float)
    return PadField(0, 0, 1, share, thickness, thickness)


def grid_for(field, cell):
    rows, columns = field.share.shape
    return Grid(rows, columns, 0.0, rows * cell, cell, cell)


@pytest.mark.parametrize("cell", [0.25, 0.5, 1.0, 2.0])
@pytest.mark.parametrize("angle", [0.0, 30.0, 90.0])
def test_a_plane_has_its_own_slope_everywhere(cell, angle):
    # Thickness that grows by 5 % along an angle; over any gauge the steepest change is 5 %, less where cells have no
    # direction near the angle.
    count = round(40 / cell)
    x, y = np.meshgrid((np.arange(count) + 0.5) * cell, (np.arange(count) + 0.5) * cell)
    field = field_of(0.05 * (x * math.cos(math.radians(angle)) + y * math.sin(math.radians(angle))))
    found = steepest(field, field.thickness, 6.0, grid_for(field, cell))
    assert 6.0 <= found.length_m < 6.0 + cell
    assert found.slope == pytest.approx(0.05, rel=1e-9 if angle % 90 == 0 else 0.02)


def test_a_wedge_settles_by_one_in_five_hundred():
    # 0 to 20 ft over 100 ft at 1 %: 1 in 500.
    foot = 0.3048
    x = (np.arange(100) + 0.5) * foot
    field = field_of(np.tile(20 / 100 * x, (60, 1)))
    found = steepest(field, 0.01 * field.thickness, 20 * foot, grid_for(field, foot))
    assert 1 / found.slope == pytest.approx(500)


def test_the_face_of_an_undercut_is_seen_over_the_gauge():
    # A step of 1 m: over 6 m it is 1 in 6, not 1 in a cell.
    thickness = np.where(np.arange(40) < 20, 1.0, 2.0) * np.ones((30, 1))
    field = field_of(thickness)
    found = steepest(field, thickness, 6.0, grid_for(field, 0.5))
    assert (found.change, found.length_m) == (1.0, 6.0)
    assert found.slope == pytest.approx(1 / 6)
    # The gauge lies across the face.
    assert min(found.start[0], found.end[0]) < 10 < max(found.start[0], found.end[0])


def test_small_footprints_are_measured_over_less():
    field = field_of([[0.0, 0.3, 0.6]])
    found = steepest(field, field.thickness, 6.0, grid_for(field, 1.0))
    assert (found.length_m, found.change) == (2.0, pytest.approx(0.6))
    assert steepest(field_of([[1.0]]), np.array([[1.0]]), 6.0, Grid(1, 1, 0, 1, 1, 1)) is None
    flat = field_of(np.full((20, 20), 2.0))
    assert steepest(flat, flat.thickness, 6.0, grid_for(flat, 1.0)) is None


def test_nothing_is_measured_across_a_hole():
    thickness = np.full((1, 30), np.nan)
    thickness[0, :10], thickness[0, 20:] = 1.0, 3.0
    field = field_of(thickness)
    assert steepest(field, thickness, 6.0, grid_for(field, 1.0)) is None


def test_distance_between_most_and_least():
    field = field_of([[5.0, 5, 4, 3, 2, 1, 1, 1]])
    assert differential_distance_m(field, grid_for(field, 2.0)) == pytest.approx(8.0)
    assert differential_distance_m(field_of([[2.0, 2.0]]), Grid(1, 2, 0, 1, 1, 1)) is None


# --- rules -------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("cut", "fill", "p95", "mended", "classes"),
    [
        (100, 0, 0.0, False, ("cut",)),
        (98.5, 1.5, 0.5, False, ("cut",)),
        (0, 100, 2.0, False, ("fill",)),
        (2.0, 98.0, 2.0, False, ("fill",)),  # not over the share of 2 %
        (2.1, 97.9, 2.0, False, ("transition", "fill", "cut")),
        (50, 50, 3.0, True, ("fill", "cut")),
        (50, 50, 6.0, False, ("deep fill", "transition", "fill", "cut")),
        (0, 100, 6.0, False, ("deep fill", "fill")),
        (0, 100, 5.999, False, ("fill",)),
        (0, 0, 0.0, False, ("cut",)),
    ],
)
def test_classes(cut, fill, p95, mended, classes):
    assert classes_that_hold(Shares(cut, fill), p95, RULES, mended=mended) == classes


# --- slopes beside pads ------------------------------------------------------------------------------------------


def beside(height, *, cell=0.5, building=None):
    grid = Grid(round(120 / cell), round(120 / cell), 0.0, 120.0, cell, cell)
    rows, columns = np.mgrid[0 : grid.rows, 0 : grid.columns]
    z = height((columns + 0.5) * cell, 120 - (rows + 0.5) * cell)

    def read(window):
        return z[window.row : window.row + window.height, window.column : window.column + window.width]

    return slopes_beside(box(40, 40, 80, 80), building, grid, read)


def outside(e, n):
    """Distance from the pad (40..80), by the larger coordinate."""
    return np.maximum(np.maximum(np.abs(e - 60), np.abs(n - 60)) - 20, 0)


def test_height_of_a_fill_slope_and_its_setback():
    # 2:1 down 6 m, then flat: a third of 6 m from the top.
    found = beside(lambda e, n: 100 - np.minimum(outside(e, n) / 2, 6))
    assert found.fill_height_m == pytest.approx(6.0, abs=0.26)
    assert found.cut_height_m == 0
    assert found.setback_from_top_m == pytest.approx(2.0, abs=0.09)
    assert found.shortfall_m is None


def test_height_of_a_cut_slope_and_a_building_too_near():
    # 2:1 up 8 m: half of 8 m from the toe, and the building stands 1 m from the edge.
    found = beside(lambda e, n: 100 + np.minimum(outside(e, n) / 2, 8), building=box(41, 41, 79, 79))
    assert found.cut_height_m == pytest.approx(8.0, abs=0.26)
    assert found.setback_from_toe_m == pytest.approx(4.0, abs=0.13)
    assert found.shortfall_m == pytest.approx(3.0, abs=0.15)


def test_a_fall_steeper_than_45_degrees_is_measured_from_a_plane_through_its_toe():
    # ½:1 down 6 m, so 3 m wide: the plane of 45° through the toe comes out 6 − 3 = 3 m inside the top; 6/3 + 3 = 5 m.
    found = beside(lambda e, n: 100 - np.minimum(outside(e, n) * 2, 6), cell=0.1, building=box(41, 41, 79, 79))
    assert found.fill_height_m == pytest.approx(6.0, abs=1e-9)
    assert found.setback_from_top_m == pytest.approx(5.0, abs=0.11)
    assert found.shortfall_m == pytest.approx(4.0, abs=0.11)


def test_a_rise_steeper_than_45_degrees_is_measured_from_a_plane_that_touches_it():
    # ½:1 up 6 m, then 2:1 up another 2 m: the plane touches the bend, 6 m up and 3 m off, and meets the pad 3 m in
    # front of the toe. Half of the whole 8 m, and 3.
    def height(e, n):
        d = outside(e, n)
        return 100 + np.minimum(d * 2, 6) + np.clip(d - 3, 0, 4) / 2

    assert beside(height, cell=0.1).setback_from_toe_m == pytest.approx(7.0, abs=0.11)


def test_a_slope_of_one_to_one_is_measured_as_it_stands():
    found = beside(lambda e, n: 100 - np.minimum(outside(e, n), 6), cell=0.1)
    assert found.setback_from_top_m == pytest.approx(2.0, abs=0.11)


def test_a_slope_that_begins_beyond_the_edge_is_so_much_further_from_the_building():
    # 2:1 down 9 m from 4 m outside the pad: 3 m are asked for; the building stands 1 + 4 m off.
    found = beside(lambda e, n: 100 - np.clip(outside(e, n) - 4, 0, 18) / 2, building=box(41, 41, 79, 79))
    assert found.setback_from_top_m == pytest.approx(3.0, abs=0.1)
    assert found.shortfall_m == 0.0


def test_gentle_slopes_need_no_setback():
    found = beside(lambda e, n: 100 - np.minimum(outside(e, n) / 4, 5), building=box(41, 41, 79, 79))
    assert found.fill_height_m == pytest.approx(5.0, abs=0.13)
    assert (found.setback_from_top_m, found.shortfall_m) == (0.0, 0.0)


def test_a_bench_does_not_end_a_slope():
    def height(e, n):
        d = outside(e, n)
        return 100 - np.minimum(d, 10) / 2 - np.clip(d - 12, 0, 10) / 2

    assert beside(height).fill_height_m == pytest.approx(10.0, abs=0.26)


def test_flat_ground_has_no_slope():
    found = beside(lambda e, n: 100 + 0.02 * e)
    assert (found.fill_height_m, found.cut_height_m, found.setback_from_top_m) == (0, 0, 0)


# --- keys and benches --------------------------------------------------------------------------------------------


def keys_of(existing, finished, *, cell=1.0, **table):
    stack = stack_of(existing, finished, cell=cell)
    tally = KeysTally(stack.grid)
    walk(stack, [tally], threads=2)
    ground = SimpleNamespace(stack=stack)
    return keys_result(tally, Keys.model_validate(table), {}, (), ground)


def hillside(gradient, cell=1.0):
    rows, columns = np.mgrid[0 : round(200 / cell), 0 : round(200 / cell)]
    return (columns + 0.5) * cell * gradient + 0.0 * rows, (columns + 0.5) * cell


def test_key_and_benches_of_a_fill_on_a_hillside():
    # Ground rising 1:4 to the east; a level fill from 60 to 100 east over 100 m of northing: 10 m high at its toe.
    existing, east = hillside(0.25)
    finished = existing.copy()
    here = (east > 60) & (east < 100)
    finished[50:150][here[50:150]] = 25.0
    found = keys_of(existing, finished)
    (fill,) = found.fills
    assert fill.fill == "fill 1"
    assert fill.area_m2 == pytest.approx(4000, rel=0.03)
    assert fill.greatest_height_m == pytest.approx(25 - 60.5 / 4)
    assert fill.mean_gradient_percent == pytest.approx(25)
    assert fill.key_length_m == pytest.approx(100, rel=0.01)
    assert fill.key_m3 == pytest.approx(fill.key_length_m * (3 * 0.6 + 3 * 0.03))
    assert fill.benches_m3 == pytest.approx(fill.area_m2 * 0.375)
    assert not found.counted


@pytest.mark.parametrize(("gradient", "top", "listed"), [(0.25, 2.0, True), (0.19, 2.0, False), (0.25, 1.4, False)])
def test_rules_for_steep_ground_and_height(gradient, top, listed):
    existing, east = hillside(gradient)
    finished = existing.copy()
    here = (east > 60) & (east < 100)
    finished[50:150][here[50:150]] += top
    assert bool(keys_of(existing, finished).fills) is listed


def test_height_is_that_of_the_fill_on_steep_ground():
    # 1:4 up to 60 east, level from there on: 1 m of fill on the slope runs into 3 m on the level.
    existing, east = hillside(0.25)
    existing = np.minimum(existing, 15.0)
    finished = existing.copy()
    finished[50:150] = (existing + np.where((east > 20) & (east < 55), 1.0, 0.0))[50:150]
    finished[50:150] += np.where((east > 70) & (east < 100), 3.0, 0.0)[50:150]
    finished[50:150] += np.where((east >= 55) & (east <= 70), 0.5, 0.0)[50:150]
    assert keys_of(existing, finished).fills == ()
    assert len(keys_of(existing, finished, least_height=0.9).fills) == 1


def test_what_refilling_costs():
    soil = {"effective_factor": 0.8}
    assert refill_cost_m3(50.0, SimpleNamespace(use="fill", **soil)) == pytest.approx(10.0)
    # Waste is dug and taken away: all of the refill is missing.
    assert refill_cost_m3(50.0, SimpleNamespace(use="waste", **soil)) == 50.0
    assert refill_cost_m3(50.0, None) is None
    assert refill_cost_m3(0.0, None) == 0.0


def test_survey_noise_makes_no_steep_ground():
    rng = np.random.default_rng(3)
    existing, _ = hillside(0.15)
    existing = existing + rng.normal(0, 0.05, existing.shape)
    finished = existing.copy()
    finished[50:150, 60:100] += 3.0
    assert keys_of(existing, finished).fills == ()


def test_sections_of_keys_and_benches():
    assert key_area_m2(3.0, 0.6, 0.0) == pytest.approx(1.8)
    assert key_area_m2(15 * 0.3048, 1.0, 2.0) == pytest.approx(15 * 0.3048 * (1 + 15 * 0.3048 * 0.01))
    # Level benches 2 m wide in ground of 50 %: triangles of 2 × 1 m, half a square metre on each 2 m.
    assert bench_depth_m(2.0, 0.5) == pytest.approx(0.5)
