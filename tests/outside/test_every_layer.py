"""Every layer of a site at once, against plain numpy and shapely: cell by cell, by clipping, with nothing of the program.

Cells of 2.0 m × 1.5 m, areas that cut cells, ground without data, strata that pinch out, a stated ground scale.
"""

from __future__ import annotations

from itertools import pairwise

import numpy as np
import pytest
import shapely

from tests.outside.conftest import write_polygons, write_raster, write_site

ROWS, COLUMNS, EAST, NORTH, SCALE = 50, 60, 2.0, 1.5, 1.01
AREAS = {
    "limits": [(3, 4), (117, 1.2), (110, 72), (8, 70.3)],
    "grading": [(15, 8), (100, 8), (100, 65), (15, 65)],
    "path": [(25, 20), (60, 18), (58, 40), (22, 44)],
    "pad": [(40, 15), (80, 22), (75, 50), (45, 46)],
    "pit": [(60, 30), (90, 30), (90, 55), (60, 55)],
    "trench": [(30, 40), (50, 40), (50, 58), (30, 58)],
    "pavement": [(50, 50), (92, 50), (92, 57), (50, 57)],
    "soft": [(20, 14), (50, 14), (50, 30), (20, 30)],
    "west": [(0, 0), (57.3, 0), (52.1, 75), (0, 75)],
}
SITE = """
[ground]
existing = "existing.tif"
finished = "finished.tif"
limits = "limits.gpkg"
disturbed = "grading.gpkg"
ground_scale = 1.01
[zones]
area = "west.gpkg"
[[strip]]
material = "topsoil"
depth = 0.15
[[strip]]
material = "rubble"
depth = 0.3
area = "pavement.gpkg"
[[section]]
name = "path"
thickness = 0.45
area = "path.gpkg"
[[section]]
name = "drain"
thickness = 0.25
area = "trench.gpkg"
source = "rock"
[[section]]
name = "turf"
thickness = 0.1
area = "soft.gpkg"
source = "topsoil"
[[over_excavation]]
name = "pad"
depth = 1.0
spread = 1.5
area = "pad.gpkg"
[[over_excavation]]
name = "pit"
depth = 1.4
measured_from = "subgrade"
area = "pit.gpkg"
[[over_excavation]]
name = "trench"
depth = 0.8
measured_from = "stripped"
area = "trench.gpkg"
[[over_excavation]]
name = "soft"
bottom = "soft.tif"
area = "soft.gpkg"
[[scarify]]
depth = 0.2
[[allowance]]
name = "spoil"
material = "clay"
volume = 100
state = "loose"
[[allowance]]
name = "berm"
material = "loess"
volume = -200
state = "compacted"
[[stratum]]
material = "loess"
bottom = "loess.tif"
[[stratum]]
material = "clay"
thickness = 0.9
[[stratum]]
material = "rock"
[material.topsoil]
use = "topsoil"
bank = { dry_density = 1250, water_content = 12 }
loose.swell_percent = 30
loss_percent = 4
[material.rubble]
use = "waste"
bank = { dry_density = 2000, water_content = 3 }
loose.swell_percent = 50
[material.loess]
use = "fill"
specific_gravity = 2.68
bank = { moist_density = 1540, water_content = 7.5 }
loose.dry_density = 1150
proctor = { method = "ASTM D698", max_dry_density = 1760, optimum_water_content = 16 }
loss_percent = 2
[material.clay]
use = "fill"
specific_gravity = 2.72
bank = { dry_density = 1500, water_content = 20 }
loose.swell_percent = 25
proctor = { method = "ASTM D698", max_dry_density = 1700, optimum_water_content = 18 }
loss_percent = 1
[material.rock]
use = "rock"
bank = { dry_density = 2250, water_content = 3 }
loose.swell_percent = 45
fill.dry_density = 2000
[fill]
relative_compaction = 95
expected_compaction = 96.5
by_depth = [ { below = 1.0, relative_compaction = 96, expected_compaction = 97.5 },
             { below = 2.0, measured_from = "subgrade", relative_compaction = 98, expected_compaction = 99 } ]
[balance]
shift_area = "pad.gpkg"
shift_range = [-2, 2]
"""
NAMES = ("loess", "clay", "rock")
BANK = np.array([1540 / 1.075, 1500, 2250])
KEPT = np.array([0.98, 0.99, 1.0])
#: Fill dry density above all rows, in the first, and in the second.
FILL = np.array(
    [[0.965 * 1760, 0.965 * 1700, 2000], [0.975 * 1760, 0.975 * 1700, 2000], [0.99 * 1760, 0.99 * 1700, 2000]]
)

x, y = np.meshgrid((np.arange(COLUMNS) + 0.5) * EAST, (np.arange(ROWS) + 0.5) * NORTH)
EXISTING = 100 + 3 * np.sin(x / 25) + 2 * np.cos(y / 18) + np.random.default_rng(5).normal(0, 0.05, x.shape)
FINISHED = np.where((x > 20) & (x < 95) & (y > 12) & (y < 60), 100.8 + 0.004 * x, EXISTING)
EXISTING[10:14, 40:47] = np.nan
LOESS_BOTTOM = 99.3 + 2.2 * np.sin(x / 12)  # above the ground in places
SOFT_BOTTOM = 99.0 + 0.005 * y
KNOWN = np.isfinite(EXISTING)
CELLS = shapely.box(x - EAST / 2, -y - NORTH / 2, x + EAST / 2, -y + NORTH / 2)


def polygon(name):
    return shapely.Polygon([(east, -south) for east, south in AREAS[name]])


def share(shape):
    return shapely.area(shapely.intersection(CELLS, shape)) / (EAST * NORTH)


def half_slope(depth, axis):
    """Half the rise over a cell: the smaller of the one-sided differences that agree, one-sided beside a hole."""
    edge = np.full_like(np.take(depth, [0], axis), np.nan)
    before = np.diff(np.concatenate([edge, depth], axis), axis=axis)
    after = np.diff(np.concatenate([depth, edge], axis), axis=axis)
    agreed = np.where(before * after > 0, np.sign(before) * np.minimum(abs(before), abs(after)), 0.0)
    return np.nan_to_num(np.where(np.isnan(before), after, np.where(np.isnan(after), before, agreed))) / 2


def above_zero(h, a, b):
    """Mean and share of the part of a square where h + a u + b v is over zero, by clipping its corners."""
    corners = [(u, v, h + a * u + b * v) for u, v in ((-1, -1), (1, -1), (1, 1), (-1, 1))]
    kept = []
    for p, q in zip(corners, corners[1:] + corners[:1], strict=True):
        if p[2] > 0:
            kept.append(p)
        if (p[2] > 0) != (q[2] > 0):
            t = p[2] / (p[2] - q[2])
            kept.append(tuple(s + t * (e - s) for s, e in zip(p, q, strict=True)))
    volume = area = 0.0
    for p, q in pairwise(kept[1:]):
        o = kept[0]
        triangle = abs((p[0] - o[0]) * (q[1] - o[1]) - (q[0] - o[0]) * (p[1] - o[1])) / 2
        area += triangle
        volume += triangle * (o[2] + p[2] + q[2]) / 3
    return volume / 4, area / 4


def by_stratum(top, low, amount):
    """An amount of each cell by the thickness of each stratum in the column low..top; all to the top one if it is empty."""
    first = np.minimum(LOESS_BOTTOM, EXISTING)
    tops = [np.full_like(first, np.inf), first, first - 0.9]
    bottoms = [first, first - 0.9, np.full_like(first, -np.inf)]
    column = top - low
    parts = []
    for above, below in zip(tops, bottoms, strict=True):
        thickness = np.clip(np.minimum(top, above) - np.maximum(low, below), 0, None)
        at_top = (top <= above) & (top > below)
        parts.append(np.nan_to_num(amount * np.where(column > 0, thickness / np.where(column > 0, column, 1), at_top)))
    return np.array(parts)


def evaluate(shift=0.0):
    """Mean depths of each quantity in each cell [m]."""
    finished = FINISHED + shift * share(polygon("pad"))
    stripped = EXISTING - 0.15 * share(polygon("grading")) - 0.3 * share(polygon("pavement"))
    sections = 0.45 * share(polygon("path")) + 0.25 * share(polygon("trench")) + 0.1 * share(polygon("soft"))
    subgrade = finished - sections
    depth = subgrade - stripped
    slopes = half_slope(depth, 1), half_slope(depth, 0)
    fill, fill_share = np.vectorize(above_zero)(np.nan_to_num(depth), *slopes)
    fill, fill_share = fill * KNOWN, fill_share * KNOWN
    cut = fill - np.nan_to_num(depth)
    lower = np.minimum(stripped, subgrade)
    spread = shapely.buffer(polygon("pad"), 1.5 / SCALE, quad_segs=32)
    targets = [
        (share(spread), lower - 1.0), (share(polygon("pit")), subgrade - 1.4),
        (share(polygon("trench")), stripped - 0.8), (share(polygon("soft")), SOFT_BOTTOM),
    ]  # fmt: skip
    bottom = np.minimum.reduce([lower] + [lower + part * (np.minimum(lower, at) - lower) for part, at in targets])
    refill = np.nan_to_num(lower - bottom)
    first = np.minimum(LOESS_BOTTOM, EXISTING)
    scarified = 0.2 * fill_share
    rests_on = np.where(bottom < first - 0.9, 2, np.where(bottom < first, 1, 0))
    height = np.where(subgrade > bottom, subgrade - bottom, 1.0)
    deeper = [
        np.nan_to_num((fill + refill) * np.clip((np.minimum(level, subgrade) - bottom) / height, 0, 1))
        for level in (finished - 1.0, subgrade - 2.0)
    ]
    return {
        "area_m2": KNOWN * 1.0, "cut_m3": cut, "fill_m3": fill, "fill_area_m2": fill_share,
        "strip_m3": EXISTING - stripped, "section_m3": sections, "over_excavation_m3": refill, "scarify_m3": scarified,
        "cut": by_stratum(stripped, lower, cut), "dug": by_stratum(lower, bottom, refill),
        "scarified": np.array([scarified * (rests_on == k) for k in range(3)]),
        "bands": np.array([np.maximum(deeper[0] - deeper[1], 0), deeper[1]]),
    }  # fmt: skip


def summed(field, weight):
    """Ground volume or area of a field inside a weight, of its last two axes."""
    return (np.where(KNOWN, field, 0.0) * weight).sum(axis=(-2, -1)) * EAST * NORTH * SCALE**2


def hand_balance(cells, weight):
    """(available, required) compacted volume."""
    placed = summed(cells["fill_m3"] + cells["over_excavation_m3"], weight)
    bands = summed(cells["bands"], weight)
    density = (FILL[0] * (placed - bands.sum()) + bands @ FILL[1:]) / placed
    added = np.array([0.0, 100 * 1200 / 1500, 0.0])
    bank = summed(cells["cut"] + cells["dug"], weight) + added
    scarified = summed(cells["scarified"], weight) @ (1 - BANK / FILL[0])
    drain = summed(0.25 * share(polygon("trench")), weight)
    return (bank * BANK * KEPT / density).sum(), placed + scarified + 200 + drain


@pytest.fixture
def site(tmp_path):
    corner = {"corner": (0.0, 0.0), "cell": (EAST, NORTH), "dtype": "float64", "nodata": np.nan}
    grids = {"existing": EXISTING, "finished": FINISHED, "loess": LOESS_BOTTOM, "soft": SOFT_BOTTOM}
    for name, values in grids.items():
        write_raster(tmp_path / f"{name}.tif", values, **corner)
    for name in AREAS:
        write_polygons(tmp_path / f"{name}.gpkg", [polygon(name)])
    return write_site(tmp_path, SITE)


def test_volumes_by_zone_and_material(site, earthwork):
    found = earthwork("volumes", site, "--json").result
    limits = share(polygon("limits"))
    west = share(polygon("west").intersection(polygon("limits")))
    cells = evaluate()
    for row, weight in ((found["total"], limits), (found["zones"][0], west), (found["outside_zones"], limits - west)):
        for key in ("area_m2", "cut_m3", "fill_m3", "fill_area_m2", "strip_m3", "section_m3", "over_excavation_m3",
                    "scarify_m3"):  # fmt: skip
            assert row[key] == pytest.approx(summed(cells[key], weight), rel=1e-8), (row.get("zone"), key)
        missing = (~KNOWN * weight).sum() * EAST * NORTH * SCALE**2
        assert row["missing_area_m2"] == pytest.approx(missing, rel=1e-8, abs=1e-6)
        assert [m["cut_m3"] for m in row["materials"]] == pytest.approx(list(summed(cells["cut"], weight)), abs=1e-6)
    by_name = {m["material"]: m for m in found["materials"]}
    dug = [by_name[name]["over_excavation_m3"] for name in NAMES]
    assert dug == pytest.approx(list(summed(cells["dug"], limits)), rel=1e-8)


def test_balance_and_its_shift(site, earthwork):
    found = earthwork("balance", site, "--json").result
    limits = share(polygon("limits"))
    available, required = hand_balance(evaluate(), limits)
    assert found["available_compacted_m3"] == pytest.approx(available, rel=1e-8)
    assert found["required_compacted_m3"] == pytest.approx(required, rel=1e-8)
    shift = found["grade_shift"]
    points = [(p["shift_m"], p["surplus_compacted_m3"]) for p in found["grade_curve"][::6]]
    for at, surplus in [*points, (shift["shift_m"], shift["surplus_compacted_m3"])]:
        available, required = hand_balance(evaluate(at), limits)
        assert surplus == pytest.approx(available - required, abs=1e-4), at
    available, required = hand_balance(evaluate(shift["shift_exact_m"]), limits)
    assert available == pytest.approx(required, abs=0.01)
