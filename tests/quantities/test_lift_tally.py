"""Lift volumes against closed forms, against clipping every cell, and against the volumes of the same pass."""

import math
from pathlib import Path
from types import SimpleNamespace

import numpy as np
import pytest
import rasterio
from rasterio.transform import from_origin

from earthwork.errors import GroundError
from earthwork.plan.fill_areas import fill_areas, label_fills
from earthwork.quantities import lift_tally
from earthwork.quantities.engine import walk
from earthwork.quantities.lift_tally import CoarseGrid, LiftTally, Records
from earthwork.quantities.site_ground import open_site
from earthwork.quantities.split import CUT, FILL, VALID
from earthwork.quantities.volumes import VolumesTally, count_volumes
from earthwork.site import check_site
from tests.quantities.conftest import stack_of


def write(path: Path, array: np.ndarray, cell: float = 1.0, dtype: str = "float64") -> None:
    profile = {"driver": "GTiff", "height": array.shape[0], "width": array.shape[1], "count": 1, "dtype": dtype,
               "crs": "EPSG:32614", "transform": from_origin(500_000, 4_400_000, cell, cell)}  # fmt: skip
    with rasterio.open(path, "w", **profile) as file:
        file.write(array.astype(dtype), 1)


def counted(folder, existing, finished, *, cell=1.0, lift=0.2, dtype="float64", walk=None, **tables):
    write(folder / "existing.tif", existing, cell, dtype)
    write(folder / "finished.tif", finished, cell, dtype)
    document = {
        "site": {"name": "test", "units": "metric"},
        "ground": {"existing": "existing.tif", "finished": "finished.tif", "ground_scale": 1.0},
        **tables,
    }
    site = check_site(document, folder)
    ground = open_site(site)
    tally = LiftTally(ground.stack, lift)
    volumes = count_volumes(site, ground, tallies=[tally], **(walk or {}))
    return fill_areas(tally), volumes.total, tally


def centres(n, cell=1.0):
    x = (np.arange(n) + 0.5) * cell
    return x[None, :], x[:, None]


def total(areas):
    return math.fsum(area.compacted_m3 for area in areas)


def test_a_level_pad_on_level_ground_is_built_in_equal_lifts(tmp_path):
    x, y = centres(60)
    pad = 1.0 * ((abs(x - 30) < 10) & (abs(y - 30) < 15))
    (area,), volumes, _ = counted(tmp_path, np.full((60, 60), 100.0), 100.0 + pad)
    assert [round(b.bottom_m, 9) for b in area.benches] == [100.0, 100.2, 100.4, 100.6, 100.8]
    for bench in area.benches:
        assert bench.area_m2 == pytest.approx(600.0)
        assert bench.compacted_m3 == pytest.approx(120.0, rel=1e-9)
    assert total([area]) == pytest.approx(volumes.fill_m3, rel=1e-12)


def test_a_stepped_pyramid(tmp_path):
    x, y = centres(100)
    steps = sum(0.5 * ((abs(x - 50) < half) & (abs(y - 50) < half)) for half in (40, 30, 20))
    (area,), volumes, _ = counted(tmp_path, np.full((100, 100), 20.0), 20.0 + steps, lift=0.25)
    by_hand = [80 * 80 * 0.25] * 2 + [60 * 60 * 0.25] * 2 + [40 * 40 * 0.25] * 2
    assert [b.compacted_m3 for b in area.benches] == pytest.approx(by_hand, rel=1e-9)
    assert [b.area_m2 for b in area.benches] == pytest.approx([6400, 6400, 3600, 3600, 1600, 1600])
    assert total([area]) == pytest.approx(volumes.fill_m3, rel=1e-12)


def test_a_wedge(tmp_path):
    # ground falls 2 m over 100 m to the east, the grade is level at its high end: lift k reaches back to x = 100 − 10
    # k
    x, _ = centres(100)
    existing = np.broadcast_to(50.0 - 0.02 * x, (40, 100))
    (area,), volumes, _ = counted(tmp_path, existing, np.full((40, 100), 50.0))
    low = 50.0 - 0.02 * 99.5
    assert area.bottom_m == pytest.approx(low, abs=1e-12)
    for bench in area.benches[:-1]:
        z0, z1 = bench.bottom_m, bench.top_m
        # between two elevations a wedge holds ∫ width·(z − low) dz: 40 m wide, 50 m longer for each metre of height,
        # and half a cell beyond the lowest centre
        exact = 40 * 50 * ((z1 - low + 0.01) ** 2 - (z0 - low + 0.01) ** 2) / 2
        first = bench is area.benches[0]
        assert bench.compacted_m3 == pytest.approx(exact, rel=2e-2 if first else 1e-3)
    assert total([area]) == pytest.approx(40 * 100 * 1.0, rel=1e-9)
    assert total([area]) == pytest.approx(volumes.fill_m3, rel=1e-12)


def test_a_cone(tmp_path):
    x, y = centres(220, 0.5)
    radius, height = 50.0, 10.0
    cone = np.maximum(height * (1 - np.hypot(x - 55, y - 55) / radius), 0.0)
    (area,), volumes, _ = counted(tmp_path, np.full((220, 220), 5.0), 5.0 + cone, cell=0.5, lift=0.5)
    slice_volume = [
        math.pi * radius**2 / (3 * height**2) * ((height - z) ** 3 - (height - z - 0.5) ** 3)
        for z in np.arange(0, 10, 0.5)
    ]
    assert len(area.benches) == 20
    for bench, exact in zip(area.benches[:18], slice_volume[:18], strict=True):
        assert bench.compacted_m3 == pytest.approx(exact, rel=2e-3)
    assert total([area]) == pytest.approx(volumes.fill_m3, rel=1e-12)


def rolling(n=150, seed=3):
    x, y = centres(n)
    ground = 100 + 0.03 * x + 2.5 * np.sin(x / 23) * np.cos(y / 31)
    pads = ((abs(x - 40) < 20) & (abs(y - 60) < 30)) * 1.0 + ((abs(x - 115) < 18) & (abs(y - 90) < 35)) * 2.0
    grade = np.where(pads == 1, 103.0, np.where(pads == 2, 105.4, ground))
    return ground, grade


def clipped(ground, grade, low, high, where):
    """Fill between two elevations, cell by cell, without the split at the zero line."""
    bottom = np.minimum(ground, grade)
    return np.where(where, np.clip(np.minimum(grade, high) - np.maximum(bottom, low), 0, None), 0).sum()


def test_every_lift_is_what_clipping_every_cell_gives(tmp_path):
    ground, grade = rolling()
    areas, volumes, _ = counted(tmp_path, ground, grade)
    assert [area.name for area in areas] == ["fill 1", "fill 2"]
    split = volumes.fill_m3 - volumes.unsplit_fill_m3
    x, _ = centres(150)
    sides = {"fill 1": x > 78, "fill 2": x < 78} if areas[0].bottom_m > 101 else {"fill 1": x < 78, "fill 2": x > 78}
    for area in areas:
        for bench in area.benches:
            low = -np.inf if bench is area.benches[0] else bench.bottom_m
            exact = clipped(ground, grade, low, bench.top_m, np.broadcast_to(sides[area.name], ground.shape))
            assert bench.compacted_m3 == pytest.approx(exact, abs=0.003 * area.compacted_m3 / 10 + split)
    assert total(areas) == pytest.approx(volumes.fill_m3, rel=1e-12)


@pytest.mark.parametrize("walk", [{"threads": 1}, {"threads": 3}, {"tile_cells": 700, "band_rows": 17}])
@pytest.mark.parametrize("layers", [False, True])
def test_threads_change_no_digit_and_tiles_nothing_that_counts(tmp_path, walk, layers):
    ground, grade = rolling()
    tables = {}
    if layers:
        tables = {
            "over_excavation": [{"name": "all", "depth": 0.7}],
            "fill": {"relative_compaction": 95, "by_depth": [{"below": 1.5, "relative_compaction": 98}]},
        }
    reference, _, _ = counted(tmp_path, ground, grade, **tables)
    again, _, _ = counted(tmp_path, ground, grade, walk=walk, **tables)
    assert len(reference) == len(again)
    for a, b in zip(reference, again, strict=True):
        assert a.name == b.name
        ours, theirs = ([bench.compacted_m3 for bench in area.benches] for area in (a, b))
        if "threads" in walk:
            assert ours == theirs
        else:
            assert ours == pytest.approx(theirs, rel=1e-11, abs=1e-9)


@pytest.mark.parametrize("dtype", ["float32", "float64"])
def test_lifts_of_large_coarse_cells_are_what_clipping_gives(tmp_path, dtype):
    ground, grade = rolling(400)
    ground, grade = ground.astype(dtype), grade.astype(dtype)
    areas, volumes, tally = counted(tmp_path, ground, grade, cell=0.1, lift=0.15, dtype=dtype)
    assert tally.coarse.side >= 32
    bottoms = {bench.bottom_m: bench for area in areas for bench in area.benches}
    assert len(areas) == 1
    for bottom, bench in bottoms.items():
        low = -np.inf if bench is areas[0].benches[0] else bottom
        exact = clipped(ground.astype(float), grade.astype(float), low, bench.top_m, True) * 0.01
        assert bench.compacted_m3 == pytest.approx(exact, abs=0.003 * volumes.fill_m3 / 10)
    assert total(areas) == pytest.approx(volumes.fill_m3, rel=1e-9)


@pytest.mark.parametrize(("cell", "dtype"), [(1.0, "float64"), (0.1, "float32")])
def test_volumes_counted_with_the_lifts_are_those_counted_alone(tmp_path, cell, dtype):
    ground, grade = rolling(300)
    ground = ground.copy()
    ground[40:50, 30:45] = np.nan
    _, together, _ = counted(tmp_path, ground, grade, cell=cell, dtype=dtype)
    document = {
        "site": {"name": "test", "units": "metric"},
        "ground": {"existing": "existing.tif", "finished": "finished.tif", "ground_scale": 1.0},
    }
    site = check_site(document, tmp_path)
    alone = count_volumes(site, open_site(site)).total
    assert together.fill_m3 > 0
    assert together.cut_m3 > 0
    for name, value in alone.to_dict().items():
        if isinstance(value, float):
            assert getattr(together, name) == pytest.approx(value, rel=1e-12), name
    assert together.max_fill_m == alone.max_fill_m
    assert together.max_cut_m == alone.max_cut_m


@pytest.mark.parametrize("measured_from", ["finished", "subgrade"])
def test_refill_and_depth_bands_add_up_to_the_volumes(tmp_path, measured_from):
    ground, grade = rolling()
    areas, volumes, _ = counted(
        tmp_path, ground, grade,
        strip=[{"material": "topsoil", "depth": 0.15}],
        section=[{"name": "slab", "thickness": 0.3}],
        over_excavation=[{"name": "all", "depth": 1.1}],
        fill={"relative_compaction": 95, "by_depth": [
            {"below": 1.0, "measured_from": measured_from, "relative_compaction": 97},
            {"below": 2.2, "measured_from": "subgrade", "relative_compaction": 99}]},
    )  # fmt: skip
    assert volumes.over_excavation_m3 > 0
    assert min(volumes.bands_m3) > 0
    assert total(areas) == pytest.approx(volumes.refill_and_fill_m3, rel=1e-10)
    for i, band in enumerate(volumes.bands_m3):
        ours = math.fsum(bench.bands_m3[i] for area in areas for bench in area.benches)
        assert ours == pytest.approx(band, rel=1e-9)
    for area in areas:
        for bench in area.benches:
            assert sum(bench.bands_m3) <= bench.compacted_m3 * (1 + 1e-9) + 1e-9


def test_plain_and_layered_ways_count_the_same(tmp_path):
    ground, grade = rolling()
    plain, _, _ = counted(tmp_path, ground, grade)
    layered, _, _ = counted(tmp_path, ground, grade, over_excavation=[{"name": "nothing", "depth": 0.0}])
    assert len(plain) == len(layered)
    for a, b in zip(plain, layered, strict=True):
        assert [x.compacted_m3 for x in a.benches] == pytest.approx([x.compacted_m3 for x in b.benches], rel=1e-9)
        assert [x.area_m2 for x in a.benches] == pytest.approx([x.area_m2 for x in b.benches], rel=1e-9)


def test_noise_does_not_make_fills(tmp_path):
    ground, grade = rolling()
    noise = np.random.default_rng(5).normal(0, 0.03, ground.shape)
    areas, volumes, _ = counted(tmp_path, ground + noise, grade)
    assert [area.name for area in areas] == ["fill 1", "fill 2", "small fills"]
    small = areas[-1]
    assert small.is_small
    assert len(small.benches) == 1
    # noise of sd s makes s/√(2π) of false fill on untouched ground
    untouched = (grade == ground).sum()
    expected = 0.03 / math.sqrt(2 * math.pi) * untouched
    assert 0.75 * expected < small.compacted_m3 < expected  # what lies beside a fill counts with it
    assert total(areas) == pytest.approx(volumes.fill_m3, rel=1e-12)


def test_fills_closer_than_a_coarse_cell_are_one(tmp_path):
    x, y = centres(120)
    first = (abs(x - 30) < 15) & (abs(y - 60) < 20)
    for gap, count in ((3, 1), (20, 2)):
        second = (x > 45 + gap) & (x < 75 + gap) & (abs(y - 60) < 20)
        areas, _, _ = counted(tmp_path, np.full((120, 120), 10.0), 10.0 + 0.6 * (first | second))
        assert len(areas) == count


def test_thin_ends_stay_with_their_fill(tmp_path):
    # 1 in 1000: the last 40 m are under 5 cm thick, the last coarse cell is half a centimetre
    x, _ = centres(200)
    areas, volumes, _ = counted(tmp_path, np.broadcast_to(30 - 0.001 * x, (30, 200)), np.full((30, 200), 30.0))
    assert [area.name for area in areas] == ["fill 1"]
    assert total(areas) == pytest.approx(volumes.fill_m3, rel=1e-12)


def test_no_fill_gives_no_areas(tmp_path):
    areas, volumes, _ = counted(tmp_path, np.full((20, 20), 10.0), np.full((20, 20), 9.0))
    assert volumes.fill_m3 == 0
    assert areas == ()


def test_missing_ground_and_limits(tmp_path):
    import geopandas
    from shapely.geometry import box

    ground, grade = rolling()
    ground = ground.copy()
    ground[40:50, 30:45] = np.nan
    limits = geopandas.GeoDataFrame(geometry=[box(500_010.3, 4_399_870.5, 500_140.7, 4_399_990.2)], crs="EPSG:32614")
    limits.to_file(tmp_path / "limits.gpkg")
    write(tmp_path / "existing.tif", ground)
    write(tmp_path / "finished.tif", grade)
    site = check_site(
        {
            "site": {"name": "test", "units": "metric"},
            "ground": {"existing": "existing.tif", "finished": "finished.tif", "limits": "limits.gpkg",
                       "ground_scale": 1.0},
        },
        tmp_path,
    )  # fmt: skip
    opened = open_site(site)
    tally = LiftTally(opened.stack, 0.3)
    volumes = count_volumes(site, opened, tallies=[tally]).total
    assert volumes.missing_area_m2 > 100
    assert total(fill_areas(tally)) == pytest.approx(volumes.fill_m3, rel=1e-12)


def test_overview_holds_bottom_and_top_of_fill(tmp_path):
    ground, grade = rolling()
    _, _, tally = counted(tmp_path, ground, grade)
    overview = tally.overview
    assert overview.shape == (150, 150, 2)
    filled = grade > ground
    np.testing.assert_allclose(overview[filled][:, 0], ground[filled], atol=1e-9)
    np.testing.assert_allclose(overview[filled][:, 1], grade[filled], atol=1e-9)
    assert np.isnan(overview[~filled]).all()


def test_coarse_grid_follows_cell_and_extent(tmp_path):
    from earthwork.ground.grid import Grid

    assert CoarseGrid.of(Grid(100, 100, 0, 0, 2.0, 2.0)).side == 3
    large = CoarseGrid.of(Grid(10_000, 9_000, 0, 0, 1.0, 1.0))
    assert large.fine == 10
    assert large.side % large.fine == 0
    assert large.rows <= 128


def test_impossible_lifts_are_refused(tmp_path):
    ground, grade = rolling()
    with pytest.raises(GroundError, match=r"lift thickness is 0 m; it must be more than 0"):
        counted(tmp_path, ground, grade, lift=0.0)
    with pytest.raises(GroundError, match=r"too much for lifts of 1e-06 m; check the nodata values"):
        counted(tmp_path, ground, grade, lift=1e-6)


def test_labels_join_by_corners():
    cells = np.zeros((4, 4, 5))
    cells[..., 2] = 25.0
    for row, column in ((0, 0), (1, 1), (3, 3)):
        cells[row, column, :2] = (25.0, 25.0)
    labels = label_fills(cells, 0.2)
    assert labels[0, 0] == labels[1, 1] != 0
    assert labels[3, 3] not in (0, labels[0, 0])


def test_level_fill_on_small_cells_adds_up_to_the_last_digits(tmp_path):
    # coarse cells of 50 cells along, where ends are packed: all at one place, so that a rounding does not average out
    (area,), volumes, tally = counted(
        tmp_path, np.full((60, 70), 100.123456), np.full((60, 70), 100.183456), cell=0.1, lift=1.0
    )
    assert tally.coarse.side == 50
    assert total([area]) == pytest.approx(42 * 0.06, rel=1e-9)
    assert total([area]) == pytest.approx(volumes.fill_m3, rel=1e-10)


def cliffs_with_holes(cell):
    """Steps against a cliff, with holes beside it: fill that hangs far below the ground of its cell's middle."""
    rng = np.random.default_rng(7)
    y, x = np.mgrid[0:60, 0:70]
    existing = 0.7 * np.floor(x / 7) + 1.3 * np.floor(y / 11)
    finished = np.where(x > 35, 60.0, 0.0) + 0.01 * x
    return existing, np.where(rng.random(x.shape) < 0.03, np.nan, finished)


@pytest.mark.parametrize(("cell", "lift"), [(0.1, 0.05), (1.0, 0.2), (5.0, 0.003)])
def test_digits_are_those_of_one_thread_where_ends_lie_outside_the_bins(tmp_path, cell, lift):
    existing, finished = cliffs_with_holes(cell)
    walk = {"tile_cells": 97, "band_rows": 16}
    counts = [
        [a.benches for a in counted(tmp_path, existing, finished, cell=cell, lift=lift, walk={**walk, "threads": n})[0]]
        for n in (1, 2, 5)
    ]
    assert counts[0] == counts[1] == counts[2]


@pytest.mark.parametrize("layered", [False, True])
def test_no_lift_holds_more_than_its_area_and_thickness(tmp_path, layered):
    existing, finished = cliffs_with_holes(1.0)
    bands = {"fill": {"relative_compaction": 95, "by_depth": [{"below": 5.0, "relative_compaction": 98}]}}
    areas, volumes, _ = counted(tmp_path, existing, finished, lift=0.2, **(bands if layered else {}))
    assert total(areas) == pytest.approx(volumes.fill_m3, rel=1e-9)
    for area in areas:
        for bench in () if area.is_small else area.benches:
            assert 0 < bench.compacted_m3 <= bench.area_m2 * 0.2 * (1 + 1e-6)


def test_depth_rows_on_a_site_that_has_nothing_else(tmp_path):
    # 30 × 20 m of fill, 8 m high: 3 m of it deeper than 5 m
    x, y = centres(60)
    pad = 8.0 * ((abs(x - 30) < 15) & (abs(y - 30) < 10))
    rows = {"relative_compaction": 95, "by_depth": [{"below": 5.0, "relative_compaction": 98}]}
    (area,), volumes, _ = counted(tmp_path, np.full((60, 60), 100.0), 100.0 + pad, lift=0.5, fill=rows)
    assert volumes.bands_m3 == pytest.approx((30 * 20 * 3.0,))
    assert volumes.fill_m3 == pytest.approx(30 * 20 * 8.0)
    assert [b.bands_m3[0] for b in area.benches] == pytest.approx([300.0] * 6 + [0.0] * 10)


@pytest.mark.parametrize("seed", range(4))
def test_no_lift_of_rough_ground_with_depth_rows_is_less_than_nothing_or_more_than_it_has_room_for(tmp_path, seed):
    rng = np.random.default_rng(seed)
    y, x = np.mgrid[0:150, 0:130]
    existing = 1.5 * np.sin(x / 9) + 0.05 * y + rng.normal(0, 0.03, x.shape)
    finished = np.where((abs(x - 32) < 20) | (abs(x - 97) < 23), rng.uniform(-1, 4), existing)
    rows = [{"below": below, "measured_from": "finished", "relative_compaction": 98} for below in (0.5, 2.0)]
    lift = (0.05, 0.2, 0.3048, 1.0)[seed]
    fill = {"relative_compaction": 95, "by_depth": rows}
    areas, volumes, _ = counted(tmp_path, existing, finished, cell=0.1, lift=lift, fill=fill)
    assert total(areas) == pytest.approx(volumes.fill_m3, rel=1e-9)
    for i, band in enumerate(volumes.bands_m3):
        assert math.fsum(b.bands_m3[i] for a in areas for b in a.benches) == pytest.approx(band, rel=1e-9)
    for area in areas:
        for bench in () if area.is_small else area.benches:
            assert 0 < bench.compacted_m3 <= bench.area_m2 * lift * (1 + 1e-9)


# --- records that are added up on the way -------------------------------------------------------------------------


def by_code_and_bin(records):
    """The moments of each code and bin, added up one by one."""
    sums, at = {}, 0
    for code, first, length in records.runs.tolist():
        for k in range(length):
            key = (code, first + k)
            sums[key] = sums.get(key, 0.0) + records.moments[at + k]
        at += length
    assert at == len(records.moments)
    return sums


def test_merged_records_are_the_sums_of_their_codes_and_bins():
    random = np.random.default_rng(4)
    lengths = random.integers(1, 90, 300)
    runs = np.c_[random.integers(0, 12, 300), random.integers(-400, 400, 300), lengths]
    runs[50:60, 0] = 99  # a code of its own, and one bin of it taken back to nothing
    records = Records(runs.astype(np.int64), random.uniform(0.1, 1, (lengths.sum(), 3)))
    merged = records.merged()
    expected, made = by_code_and_bin(records), by_code_and_bin(merged)
    assert made.keys() == expected.keys()
    assert len(made) == len(merged.moments)  # each once
    assert list(made) == sorted(made)
    for key, sums in expected.items():
        assert made[key] == pytest.approx(sums, rel=1e-13)


@pytest.mark.parametrize("layered", [False, True])
def test_records_that_are_merged_on_the_way_change_no_lift(tmp_path, monkeypatch, layered):
    ground, grade = rolling()
    grade = grade + np.random.default_rng(9).normal(0, 0.4, grade.shape)  # rough, so that bins come in many runs
    tables = {"over_excavation": [{"name": "all", "depth": 0.7}]} if layered else {}
    walk = {"tile_cells": 10, "band_rows": 3}  # several tiles to a coarse cell
    monkeypatch.setattr(lift_tally, "_LOOSE", 10**9)
    kept, volumes, loose = counted(tmp_path, ground, grade, walk={**walk, "threads": 1}, **tables)
    expected = by_code_and_bin(loose.records)
    assert len(loose.records.moments) > 2 * len(expected)
    monkeypatch.setattr(lift_tally, "_LOOSE", 2000)
    for threads in (1, 3):
        areas, _, tally = counted(tmp_path, ground, grade, walk={**walk, "threads": threads}, **tables)
        made = by_code_and_bin(tally.records)
        assert made.keys() == expected.keys()
        assert max(abs(made[key] - expected[key]).max() for key in expected) < 1e-9
        assert len(tally.records.moments) < 1.6 * len(expected) + 2000
        assert total(areas) == pytest.approx(volumes.refill_and_fill_m3, rel=1e-10)
        for ours, theirs in zip(areas, kept, strict=True):
            assert [b.compacted_m3 for b in ours.benches] == pytest.approx(
                [b.compacted_m3 for b in theirs.benches], rel=1e-9, abs=1e-9
            )


@pytest.mark.parametrize("height", [2e6, 1e30])
def test_cut_through_what_is_no_ground(height):
    existing = np.full((40, 40), 100.0)
    existing[20, 20] = height
    finished = np.full((40, 40), 101.0)
    # plain ground has bins for its fill alone
    stack = stack_of(existing, finished)
    tally = LiftTally(stack, 0.2)
    walk(stack, [tally])
    assert total(fill_areas(tally)) == pytest.approx(40 * 40 - 1, rel=1e-12)
    stack = stack_of(existing, finished, bands_below_m=((1.0, "subgrade"),))
    with pytest.raises(GroundError, match=r"m apart are too much for lifts of 0\.2 m; check the nodata values"):
        walk(stack, [LiftTally(stack, 0.2)])


@pytest.mark.parametrize("seed", range(24))
def test_lifts_and_volumes_of_any_plain_ground(seed):
    """Any cell, lift, level, roughness, holes, type and tiles: sums and ends are numpy's, and lifts add up to the fill."""
    random = np.random.default_rng(seed)
    rows, columns = random.integers(40, 220, 2)
    y, x = np.mgrid[0:rows, 0:columns]
    level, waves = random.choice([-3.0, 0.0, 100.0, 2500.0]), random.uniform(3, 40, 2)
    existing = level + random.uniform(0, 3) * np.sin(x / waves[0]) * np.cos(y / waves[1])
    existing += random.normal(0, random.choice([1e-9, 0.01, 0.3]), x.shape)
    finished = np.where((x // random.integers(5, 60)) % 2 == 0, level + random.uniform(-1, 3), existing)
    existing[random.random(x.shape) < random.choice([0, 0.02])] = np.nan
    dtype, cell = random.choice([np.float32, np.float64]), random.choice([0.05, 0.1, 0.3, 1.0, 3.0])
    existing, finished = existing.astype(dtype), finished.astype(dtype)
    lift = random.choice([0.01, 0.1, 0.2, 0.3048, 1.0])

    stack = stack_of(existing, finished, cell=cell)
    lifts, volumes = LiftTally(stack, lift), VolumesTally(SimpleNamespace(stack=stack, zone_names=(), zones=None))
    tiles = {"tile_cells": int(random.integers(30, 9000)), "band_rows": int(random.integers(3, 90))}
    walk(stack, [lifts, volumes], threads=2, **tiles)
    sums, depth = volumes.total, (finished - existing).astype(np.float64)
    assert sums.values[VALID] == np.isfinite(depth).sum()
    assert sums.values[FILL] - sums.values[CUT] == pytest.approx(np.nansum(depth), abs=1e-9 * np.nansum(abs(depth)))
    assert (sums.high_m, sums.low_m) == (max(np.nanmax(depth), 0.0), min(np.nanmin(depth), 0.0))
    areas = fill_areas(lifts)
    assert total(areas) == pytest.approx(sums.values[FILL] * cell**2, rel=1e-9)
    for area in areas:
        for bench in area.benches:
            assert bench.compacted_m3 > 0
            assert area.is_small or bench.compacted_m3 <= bench.area_m2 * lift * (1 + 1e-9)


@pytest.mark.parametrize("keeps", [lambda a: np.frombuffer(a.tobytes()).reshape(-1, 3), lambda a: a.T.copy().T, np.copy])
def test_records_from_another_machine_are_merged_wherever_they_lie(keeps):
    # bins 4 and 5 of one code, then bin 5 of it once more
    runs = np.array([[2, 4, 2], [2, 5, 1]])
    moments = np.array([[1.0, 0.5, 0.25], [2.0, 1.0, 0.5], [4.0, 2.0, 1.0]])
    merged = Records(runs, keeps(moments)).merged()
    assert merged.runs.tolist() == [[2, 4, 2]]
    assert merged.moments.tolist() == [[1.0, 0.5, 0.25], [6.0, 3.0, 1.5]]
