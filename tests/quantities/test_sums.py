"""Sums of all fields over a site, of shifted grades too, against plain numpy and shapely.

Cut and fill are metres deep and change in steps of two cells at least, so that the zero line crosses no cell: every
volume is a sum over cells that can be written down in a line.
"""

from types import SimpleNamespace

import numpy as np
import pytest
import shapely

from earthwork.ground.areas import rings_on
from earthwork.ground.grid import Grid
from earthwork.ground.stack import ExcavationLayer, ScarifyLayer, SectionLayer, StratumLayer, StripLayer
from earthwork.plan.grade_shift import ShiftTally
from earthwork.quantities.engine import walk
from earthwork.quantities.fields import field_names
from earthwork.quantities.volumes import VolumesTally
from earthwork.reporting.depth_raster import DepthRasterTally
from earthwork.units import METRIC
from tests.quantities.conftest import count_arrays, stack_of

ROWS, COLUMNS = 40, 52
GRID = Grid(ROWS, COLUMNS, 0.0, float(ROWS), 1.0, 1.0)

STRIPPED = shapely.Polygon([(2.3, 3.1), (49.7, 1.2), (44.4, 37.9), (5.5, 33.3)])
PAVED = shapely.Polygon([(8.2, 6.0), (30.5, 9.25), (27.0, 29.9), (9.1, 25.5)])
DUG = shapely.Point(34.3, 18.2).buffer(9.7)
DUG_DEEPER = shapely.box(30.25, 4.5, 45.6, 17.3)
LIMITS = shapely.Polygon([(1.2, 2.0), (50.9, 0.8), (47.3, 38.6), (3.4, 36.1)])
DISTURBED = shapely.Polygon([(0.4, 0.9), (51.2, 3.3), (46.0, 39.5), (2.2, 38.1)])
MOVED = shapely.Polygon([(12.4, 5.2), (40.1, 8.8), (33.3, 30.7), (14.8, 22.2)]).difference(
    shapely.Point(25, 15).buffer(2.6)
)


def shares(shape) -> np.ndarray:
    """Share of each cell inside a shape, by clipping each with shapely."""
    rows, columns = np.mgrid[:ROWS, :COLUMNS]
    cells = shapely.box(columns, ROWS - rows - 1, columns + 1, ROWS - rows)
    return shapely.area(shapely.intersection(cells, shape))


def rings(shape):
    return rings_on(GRID, [shape])


def ground():
    """Existing ground that rolls by centimetres, and a grade of cut and fill, 2 to 4 m, in blocks of 4 × 4 cells."""
    random = np.random.default_rng(21)
    existing = 100.0 + random.normal(0, 0.02, (ROWS, COLUMNS))
    steps = random.choice([-4.0, -3.2, 2.5, 3.7], (ROWS // 4, COLUMNS // 4))
    steps[3:6, 6:10], steps[1:3, 1:3] = 2.5, -3.2  # beside a hole the slope is that of the other side
    finished = existing.mean() + np.kron(steps, np.ones((4, 4)))
    existing[17:20, 30:33] = np.nan
    finished[6, 9] = np.nan
    return existing, finished


LAYERS = {
    "limits": rings(LIMITS),
    "disturbed": rings(DISTURBED),
    "strips": (StripLayer("topsoil", 0.3, rings(STRIPPED)), StripLayer("peat", 0.2, None)),
    "sections": (SectionLayer("court", "imported", 0.45, rings(PAVED)),),
    "excavations": (
        ExcavationLayer("round", 0.6, None, "lower", rings(DUG)),
        ExcavationLayer("square", 1.1, None, "subgrade", rings(DUG_DEEPER)),
    ),
    "scarifies": (ScarifyLayer(0.15, rings(PAVED)), ScarifyLayer(0.2, None)),
    "strata": (StratumLayer("clay", None, 1.3), StratumLayer("till", None, 1.0), StratumLayer("rock", None, None)),
    "bands_below_m": ((1.0, "finished"), (2.2, "subgrade")),
}


def overlap(low, high, bottom, top):
    return np.maximum(np.minimum(high, top) - np.maximum(low, bottom), 0.0)


def expected(existing, finished, shift=0.0, without="", counted=None) -> dict[str, float]:
    """All sums, each written down as its definition says; of a site without one of the layers those of the others.

    ``counted`` is the share of each cell that counts: by default inside the limits.
    """
    move = shares(MOVED)
    disturbed = shares(DISTURBED)
    if without == "disturbed":
        disturbed = np.maximum(abs(finished - existing) > 0.01, shares(PAVED))
    if counted is None:
        counted = 1.0 if without == "limits" else shares(LIMITS)
    weight = np.where(np.isnan(existing + finished), 0.0, counted)
    existing, finished = np.nan_to_num(existing, nan=100.0), np.nan_to_num(finished, nan=100.0) + shift * move
    strips = 0.3 * shares(STRIPPED), 0.2 * disturbed
    court = 0.45 * shares(PAVED)
    stripped, subgrade = existing - strips[0] - strips[1], finished - court
    depth = subgrade - stripped
    lower = np.minimum(stripped, subgrade)
    dug = 0.6 * shares(DUG), shares(DUG_DEEPER) * (lower - np.minimum(lower, subgrade - 1.1))
    refill = np.maximum(*dug) * (without != "excavations")
    bottom = lower - refill
    inf = np.full_like(depth, np.inf)
    strata = [(existing - 1.3, inf), (existing - 2.3, existing - 1.3), (-inf, existing - 2.3)]
    scarified = 0.15 * shares(PAVED) + 0.2 * (depth > 0)
    fill, cut = np.maximum(depth, 0), np.maximum(-depth, 0)
    # deepest row first: what lies under it is its own, and the next row takes what it does not
    under = [np.maximum(np.minimum(top, subgrade) - bottom, 0) for top in (finished - 1.0, subgrade - 2.2)]
    # of cut the refill alone is placed, from the removal bottom up to subgrade
    fields = {
        "area": np.ones_like(depth), "cut": cut, "fill": fill, "cut_area": depth < 0, "fill_area": depth > 0,
        "plain_cut": cut, "plain_fill": fill, "disturbed": disturbed,
        "strip0": strips[0], "strip1": strips[1], "section0": court, "over_excavation": refill, "scarify": scarified,
        "band1": under[1], "band0": np.maximum(under[0] - under[1], 0), "move": move,
    }  # fmt: skip
    for k, (low, high) in enumerate(strata):
        fields[f"cut:{k}"] = overlap(low, high, lower, stripped)
        fields[f"over_excavation:{k}"] = overlap(low, high, bottom, lower)
        fields[f"scarify:{k}"] = scarified * ((bottom < high) & (bottom >= low))
    return {name: float((field * weight).sum()) for name, field in fields.items()}


SHIFTS = (-0.75, -0.2, 0.0, 0.4)


@pytest.mark.parametrize(
    ("threads", "tile_cells", "band_rows"), [(1, None, None), (1, 200, 11), (2, 60, 3), (1, 9, 3), (2, 500, 20)]
)
def test_sums_of_shifted_grades_with_every_layer(threads, tile_cells, band_rows):
    existing, finished = ground()
    stack = stack_of(existing, finished, **LAYERS).with_move(rings(MOVED))
    tally = ShiftTally(stack, SHIFTS)
    walk(stack, [tally], threads=threads, tile_cells=tile_cells, band_rows=band_rows)
    for shift in SHIFTS:
        sums = dict(zip(field_names(stack), tally.sums[shift].values, strict=True))
        assert sums == pytest.approx(expected(existing, finished, shift), rel=1e-9, abs=1e-9), shift


@pytest.mark.parametrize("without", ["limits", "disturbed", "strata", "excavations", "bands_below_m"])
def test_sums_of_shifted_grades_without_a_layer(without):
    existing, finished = ground()
    layers = {name: layer for name, layer in LAYERS.items() if name != without}
    if without == "disturbed":
        layers["worked"] = rings(PAVED)
    stack = stack_of(existing, finished, **layers).with_move(rings(MOVED))
    tally = ShiftTally(stack, SHIFTS)
    walk(stack, [tally], band_rows=9, tile_cells=150)
    for shift in SHIFTS:
        sums = dict(zip(field_names(stack), tally.sums[shift].values, strict=True))
        known = expected(existing, finished, shift, without)
        assert sums == pytest.approx({name: known[name] for name in sums}, rel=1e-9, abs=1e-9), shift


@pytest.mark.parametrize("seed", range(6))
def test_shifted_grades_where_the_zero_line_crosses(seed):
    """Rough ground: cut − fill is the plain sum of the depths, and all else is that of the site built so."""
    random = np.random.default_rng(seed)
    existing = 100 + random.normal(0, 0.3, (ROWS, COLUMNS))
    finished = np.where(random.random((ROWS, COLUMNS)) < 0.02, np.nan, 100.05)
    layers = {name: LAYERS[name] for name in ("limits", "disturbed", "strata", "sections")}
    stack = stack_of(existing, finished, **layers).with_move(rings(MOVED))
    tally = ShiftTally(stack, SHIFTS)
    walk(stack, [tally], band_rows=int(random.integers(3, 20)), tile_cells=int(random.integers(10, 600)))
    for shift in SHIFTS:
        sums = dict(zip(field_names(stack), tally.sums[shift].values, strict=True))
        moved = finished + shift * shares(MOVED)
        depth = moved - 0.45 * shares(PAVED) - existing
        assert sums["fill"] - sums["cut"] == pytest.approx(np.nansum(depth * shares(LIMITS)), abs=1e-9)
        plain = np.nansum(np.maximum(depth, 0) * shares(LIMITS))
        assert sums["plain_fill"] == pytest.approx(plain, rel=1e-9)
        assert sums["fill"] > plain * 1.001  # what the split adds
        built = count_arrays(existing, moved, **layers)
        assert sums["fill"] == pytest.approx(built.fill_m3, rel=1e-9)
        assert sums["cut_area"] == pytest.approx(built.cut_area_m2, rel=1e-9)
        by_stratum = [built.cut_by_material[material] for material in ("clay", "till", "rock")]
        assert [sums[f"cut:{k}"] for k in range(3)] == pytest.approx(by_stratum, rel=1e-9, abs=1e-9)


def test_a_shift_carries_nothing_where_no_cell_moves():
    existing, finished = ground()
    away = rings(shapely.box(-20, -20, -10, -10))
    stack = stack_of(existing, finished, **LAYERS).with_move(away)
    tally = ShiftTally(stack, (0.0, 2.0))
    walk(stack, [tally])
    assert tally.sums[2.0].values.tolist() == tally.sums[0.0].values.tolist()


@pytest.mark.parametrize("walking", [{}, {"tile_cells": 90, "band_rows": 3, "threads": 2}, {"tile_cells": 260}])
def test_sums_of_zones_and_of_what_is_outside(walking):
    existing, finished = ground()
    layers = {name: layer for name, layer in LAYERS.items() if name != "limits"}
    stack = stack_of(existing, finished, **layers)
    zones = [PAVED, DUG.difference(PAVED), shapely.box(46.5, 2.25, 51.0, 35.5).difference(DUG)]
    site = SimpleNamespace(stack=stack, zone_names=("a", "b", "c"), zones=rings_on(GRID, zones))
    tally = VolumesTally(site)
    walk(stack, [tally], **walking)
    parts = [(tally.zones[i], shares(zone)) for i, zone in enumerate(zones)]
    parts += [(tally.total, 1.0), (tally.outside, 1.0 - sum(shares(zone) for zone in zones))]
    for sums, counted in parts:
        known = expected(existing, finished, counted=counted)
        ours = dict(zip(field_names(stack), sums.values, strict=True))
        assert ours == pytest.approx({name: known[name] for name in ours}, rel=1e-9, abs=1e-8)
    lost = np.isnan(existing + finished)
    assert tally.missing == lost.sum()
    rows, columns = np.nonzero(lost)
    assert tally.missing_rows == (rows.min(), rows.max() + 1)
    assert tally.missing_columns == (columns.min(), columns.max() + 1)


# --- one stratum, limits -----------------------------------------------------------------------------------------


@pytest.mark.parametrize("dtype", [np.float32, np.float64])
@pytest.mark.parametrize("layers", [{}, {"limits": LAYERS["limits"]}, {"strips": LAYERS["strips"][:1]},
                                    {"excavations": LAYERS["excavations"]}])  # fmt: skip
def test_a_site_of_one_stratum_is_the_site_without(dtype, layers):
    random = np.random.default_rng(2)
    existing = (100 + random.normal(0, 0.4, (ROWS, COLUMNS))).astype(dtype)
    finished = np.full_like(existing, 100.1)
    plain = count_arrays(existing, finished, **layers)
    named = count_arrays(existing, finished, strata=(StratumLayer("clay", None, None),), **layers)
    assert named.cut_by_material == {"clay": named.cut_m3}
    assert named.over_excavation_m3 == sum(named.over_excavation_by_material.values())
    for name in ("cut_m3", "fill_m3", "cut_area_m2", "fill_area_m2", "max_cut_m", "max_fill_m", "area_m2", "strip_m3",
                 "over_excavation_m3", "disturbed_area_m2", "unsplit_cut_m3", "unsplit_fill_m3"):  # fmt: skip
        assert getattr(named, name) == getattr(plain, name), name


class Weights:
    """A tally of the share of each cell that counts, and of whether all of a tile does."""

    def __init__(self):
        self.parts, self.whole = [], []

    def empty(self):
        return Weights()

    def add(self, tile):
        window = tile.window
        rows, columns = (
            slice(window.row, window.row + window.height),
            slice(window.column, window.column + window.width),
        )
        self.parts.append((rows, columns, 1.0 if tile.weight is None else tile.weight))
        self.whole.append((rows, columns, tile.weight is None))

    def merge(self, other):
        self.parts += other.parts
        self.whole += other.whole


def test_tiles_inside_the_limits_have_no_weights():
    existing, finished = ground()
    stack = stack_of(existing, finished, limits=LAYERS["limits"])
    tally, share = Weights(), shares(LIMITS)
    walk(stack, [tally], tile_cells=50, band_rows=8)
    seen = np.full((ROWS, COLUMNS), np.nan)
    for rows, columns, part in tally.parts:
        assert np.isnan(seen[rows, columns]).all()  # each cell once
        seen[rows, columns] = part
    assert seen == pytest.approx(share, abs=1e-12)
    inside = [bool((share[rows, columns] > 1 - 1e-9).all()) for rows, columns, _ in tally.whole]
    assert [whole for _, _, whole in tally.whole] == inside
    assert 0 < sum(inside) < len(inside)


# --- rows of bands ------------------------------------------------------------------------------------------------


class RowsRead:
    """A tally that puts together what bands have read, as a file is written."""

    depth_only = True

    def __init__(self):
        self.parts = []

    def empty(self):
        return RowsRead()

    def add(self, tile):
        if not tile.seam:
            window, arrays = tile.rows_read()
            self.parts.append((window, arrays["depth"].copy()))

    def merge(self, other):
        self.parts += other.parts


@pytest.mark.parametrize("layers", [{}, {"strips": LAYERS["strips"][:1]}])
@pytest.mark.parametrize(("rows", "band_rows"), [(40, 3), (41, 3), (40, 4), (3, 3), (2, 3), (1, 3), (40, 100)])
def test_rows_read_by_bands_are_all_cells_once(rows, band_rows, layers):
    existing, finished = (surface[:rows] for surface in ground()) if rows < 40 else ground()
    if rows > 40:
        existing, finished = (np.vstack([surface, surface[-1:] + 0.5]) for surface in (existing, finished))
    tally = RowsRead()
    walk(stack_of(existing, finished, **layers), [tally], tile_cells=30, band_rows=band_rows, threads=2)
    seen = np.full(existing.shape, np.inf)
    for window, depth in tally.parts:
        place = np.s_[window.row : window.row + window.height, window.column : window.column + window.width]
        assert np.isinf(seen[place]).all()
        seen[place] = depth
    strip = 0.3 * np.pad(shares(STRIPPED), ((0, 1), (0, 0)))[:rows] if layers else 0.0
    np.testing.assert_allclose(seen, finished - existing + strip, atol=1e-12)


@pytest.mark.parametrize("limits", [False, True])
def test_depth_raster_of_thin_bands(tmp_path, limits):
    rasterio = pytest.importorskip("rasterio")
    existing, finished = ground()
    stack = stack_of(existing, finished, **({"limits": LAYERS["limits"]} if limits else {}))
    tally = DepthRasterTally(tmp_path / "depth.tif", METRIC)
    walk(stack, [tally], tile_cells=45, band_rows=3, threads=2)
    tally.finish()
    with rasterio.open(tmp_path / "depth.tif") as file:
        written = file.read(1, masked=True).filled(np.nan)
    depth = finished - existing
    if limits:
        depth = np.where(shares(LIMITS) > 1e-12, depth, np.nan)
    np.testing.assert_allclose(written, depth, rtol=1e-6)
