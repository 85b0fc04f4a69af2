"""Surfaces that meet on one grid: which grid, which cells, which way of resampling, and what is refused."""

from __future__ import annotations

from pathlib import Path

import geopandas
import numpy as np
import pytest
import shapely
from pyproj import Transformer
from rasterio.transform import Affine

from earthwork.errors import FileError, GroundError, SiteFileError
from earthwork.ground.surfaces import open_ground
from earthwork.site import check_site, site_from_files
from earthwork.units import FOOT_M, US_SURVEY_FOOT_M
from tests.rasters import write_raster

DATA = Path(__file__).parents[2] / "../shared/data"
WEST, NORTH = 500_000.0, 4_100_000.0
FLAT = np.full((4, 6), 100.0)


def ground_of(folder, *, units="metric", crs=None, finished=None, **ground):
    """The surfaces of a site that is written as a site file would be."""
    site = {"name": "test", "units": units} | ({"crs": crs} if crs else {})
    table = {"existing": "existing.tif", "finished": "finished.tif" if finished is None else finished} | ground
    return open_ground(check_site({"site": site, "ground": table}, folder))


def whole(surface, ground):
    reader = surface.reader()
    values = reader.read(ground.grid.window)
    reader.close()
    return values


def codes(ground):
    return [w.code for w in ground.warnings]


def polygon_file(path, ring, crs=True):
    """A GeoJSON of one polygon in the CRS of the rasters."""
    text = ",".join(f"[{e},{n}]" for e, n in [*ring, ring[0]])
    name = '"crs":{"type":"name","properties":{"name":"urn:ogc:def:crs:EPSG::32611"}},' if crs else ""
    path.write_text(
        f'{{"type":"FeatureCollection",{name}"features":[{{"type":"Feature","properties":{{}},'
        f'"geometry":{{"type":"Polygon","coordinates":[[{text}]]}}}}]}}'
    )
    return path.name


# --- which grid ----------------------------------------------------------------------------------------------------


def test_aligned_rasters_are_cut_to_what_they_share(tmp_path):
    write_raster(tmp_path / "existing.tif", np.arange(24.0).reshape(4, 6))
    write_raster(tmp_path / "finished.tif", np.arange(30.0).reshape(5, 6), west=WEST + 2, north=NORTH + 2)
    ground = ground_of(tmp_path)
    grid = ground.grid
    assert (grid.rows, grid.columns, grid.west, grid.north) == (3, 4, WEST + 2, NORTH)
    assert (ground.existing.resampling, ground.finished.resampling) == ("none", "none")
    assert whole(ground.existing, ground).tolist() == np.arange(24.0).reshape(4, 6)[:3, 2:].tolist()
    assert whole(ground.finished, ground).tolist() == np.arange(30.0).reshape(5, 6)[2:, :4].tolist()
    assert ground.notes == ()
    assert ground.warnings == ()


@pytest.mark.parametrize(
    ("existing_cell", "finished_cell", "cell", "ways"),
    [
        (2.0, 1.0, 1.0, ("bilinear", "none")),  # the finer gives the grid
        (1.0, 2.0, 1.0, ("none", "bilinear")),
        (1.0, 1.0, 1.0, ("none", "bilinear")),  # equally fine: existing
        (1.0, 0.999, 1.0, ("none", "bilinear")),  # equally fine but for the way they were written
        (1.0, 0.98, 0.98, ("bilinear", "none")),
        ((2.0, 1.0), (1.0, 1.5), (1.0, 1.5), ("average", "none")),  # by the area of a cell
    ],
)
def test_the_finer_raster_gives_the_grid(tmp_path, existing_cell, finished_cell, cell, ways):
    write_raster(tmp_path / "existing.tif", np.full((40, 40), 100.0), cell=existing_cell)
    write_raster(
        tmp_path / "finished.tif", np.full((40, 40), 101.0), cell=finished_cell, west=WEST + 5.3, north=NORTH - 5.3
    )
    ground = ground_of(tmp_path)
    east, north = (cell, cell) if isinstance(cell, float) else cell
    assert (ground.grid.cell_east, ground.grid.cell_north) == (east, north)
    assert (ground.existing.resampling, ground.finished.resampling) == ways
    # nothing at the rim is missing: the grid ends where the last cell has all that it needs
    assert np.isfinite(whole(ground.existing, ground)).all()
    assert np.isfinite(whole(ground.finished, ground)).all()
    assert "onto the grid of " in ground.notes[0]


@pytest.mark.parametrize(
    ("cell", "rows", "columns", "way"),
    [
        (2.0, 2, 3, "average"),
        (0.5, 6, 10, "bilinear"),
        (1.5, 2, 4, "average"),
        (1.0, 4, 6, "none"),
        ("3 ft", 3, 5, "bilinear"),
    ],
)
def test_a_stated_cell_lies_on_the_lattice_of_the_raster(tmp_path, cell, rows, columns, way):
    for name in ("existing", "finished"):
        write_raster(tmp_path / f"{name}.tif", FLAT)
    ground = ground_of(tmp_path, cell=cell)
    assert (ground.grid.rows, ground.grid.columns) == (rows, columns)
    assert ground.existing.resampling == way
    # the corner of the lattice is the raster's; the rim without four neighbours is cut off
    shift = (ground.grid.west - WEST) / ground.grid.cell_east
    assert shift == pytest.approx(round(shift), abs=1e-6)
    assert np.isfinite(whole(ground.existing, ground)).all()


def test_a_stated_cell_in_us_survey_feet_is_a_whole_number_of_cells(tmp_path):
    for name in ("existing", "finished"):
        write_raster(tmp_path / f"{name}.tif", FLAT, crs="EPSG:2230", west=6_500_000, north=2_000_000)
    ground = ground_of(tmp_path, units="us", cell=2)
    assert ground.grid.cell_east == 2.0
    assert ground.grid.unit_m == US_SURVEY_FOOT_M
    assert (ground.grid.rows, ground.grid.columns) == (2, 3)


def test_a_cell_larger_than_the_site(tmp_path):
    for name in ("existing", "finished"):
        write_raster(tmp_path / f"{name}.tif", FLAT)
    with pytest.raises(GroundError, match=r"ground\.cell is 5 CRS units; it must be at most the site's 6 × 4"):
        ground_of(tmp_path, cell=5.0)


def test_a_cell_far_finer_than_the_raster_is_refused(tmp_path):
    """A slip of the unit, such as millimetres for metres, would otherwise run for days."""
    write_raster(tmp_path / "existing.tif", FLAT, cell=1.0)
    write_raster(tmp_path / "finished.tif", FLAT, cell=1.0)
    assert ground_of(tmp_path, cell=0.01).grid.columns == 500  # 5 m between the outermost samples
    with pytest.raises(
        GroundError, match=r"ground\.cell is 0\.001 CRS units; it must be at least a hundredth of the 1 "
    ):
        ground_of(tmp_path, cell=0.001)


def test_more_cells_than_can_be_counted_are_refused(tmp_path):
    box = shapely.box(WEST, NORTH - 1000, WEST + 2000, NORTH)
    geopandas.GeoDataFrame(geometry=[box], crs="EPSG:32611").to_file(tmp_path / "limits.gpkg")
    more = {"existing": {"level": 3.0}, "finished": {"level": 4.0}, "limits": "limits.gpkg", "crs": "EPSG:32611"}
    assert ground_of(tmp_path, cell=1.0, **more).grid.rows == 1000
    with pytest.raises(GroundError, match=r"would have 1,000,000 × 2,000,000 cells.*at most 1e\+11"):
        ground_of(tmp_path, cell=0.001, **more)


# --- nodes ---------------------------------------------------------------------------------------------------------


def test_a_survey_of_nodes_ends_at_the_outermost(tmp_path):
    write_raster(tmp_path / "existing.tif", np.add.outer([0.0, 10.0, 20.0], [0.0, 1.0, 2.0, 3.0]), cell=2.0)
    ground = ground_of(tmp_path, existing={"file": "existing.tif", "sample": "node"}, finished={"level": 20.0})
    grid = ground.grid
    assert ground.sample == "node"
    assert (grid.rows, grid.columns, grid.west, grid.north) == (2, 3, WEST + 1.0, NORTH - 1.0)
    assert whole(ground.existing, ground).tolist() == [[5.5, 6.5, 7.5], [15.5, 16.5, 17.5]]
    assert "read as nodes" in ground.notes[0]


def test_one_row_of_nodes_makes_no_patch(tmp_path):
    write_raster(tmp_path / "existing.tif", [[1.0, 2.0]])
    with pytest.raises(GroundError, match="it has 1 × 2 nodes; at least 2 × 2 make a patch"):
        ground_of(tmp_path, existing={"file": "existing.tif", "sample": "node"}, finished={"level": 20.0})


# --- levels and planes ---------------------------------------------------------------------------------------------


def test_a_level_has_the_extent_of_the_other(tmp_path):
    write_raster(tmp_path / "existing.tif", FLAT)
    ground = ground_of(tmp_path, finished={"level": 102.5})
    assert (ground.grid.rows, ground.grid.columns) == (4, 6)
    assert whole(ground.finished, ground).tolist() == np.full((4, 6), 102.5).tolist()


def test_a_plane_through_a_point(tmp_path):
    write_raster(tmp_path / "existing.tif", FLAT)
    plane = {"at": [WEST, NORTH], "elevation": 100.0, "slope": [0.01, 0.0]}
    ground = ground_of(tmp_path, finished={"plane": plane}, ground_scale=1.0)
    assert whole(ground.finished, ground)[0].tolist() == pytest.approx(100 + 0.01 * (np.arange(6) + 0.5), abs=1e-12)


def test_two_levels_need_limits_and_a_cell(tmp_path):
    two = {"existing": {"level": 100.0}, "finished": {"level": 101.0}}
    with pytest.raises(
        GroundError, match=r"levels or planes, which have no extent; give ground\.limits and ground\.cell"
    ):
        ground_of(tmp_path, **two)
    name = polygon_file(
        tmp_path / "limits.geojson", [(WEST, NORTH), (WEST + 10, NORTH), (WEST + 10, NORTH - 5), (WEST, NORTH - 5)]
    )
    ground = ground_of(tmp_path, **two, limits=name, cell=0.5, crs="EPSG:32611")
    assert (ground.grid.rows, ground.grid.columns) == (10, 20)
    assert ground.mean_elevation_m == 100.0


# --- coordinates ---------------------------------------------------------------------------------------------------


def test_ground_scale_by_hand(tmp_path):
    """On the central meridian of UTM: 1 / (0.9996 × 6371000 / 6372000)."""
    for name in ("existing", "finished"):
        write_raster(tmp_path / f"{name}.tif", np.full((4, 4), 1000.0), west=WEST - 2)
    ground = ground_of(tmp_path)
    assert ground.mean_elevation_m == 1000.0
    assert ground.grid.ground_scale == pytest.approx(6372.0 / 6371.0 / 0.9996, abs=1e-9)
    assert ground.grid.cell_area_m2 == pytest.approx((6372.0 / 6371.0 / 0.9996) ** 2, abs=2e-9)
    assert ground_of(tmp_path, ground_scale=1.0).grid.cell_area_m2 == 1.0


def test_a_local_grid_warns_and_counts_in_the_site_s_unit(tmp_path):
    for name in ("existing", "finished"):
        write_raster(tmp_path / f"{name}.tif", FLAT, crs=None)
    ground = ground_of(tmp_path)
    assert (ground.grid.ground_scale, ground.grid.unit_m, ground.grid.crs) == (1.0, 1.0, None)
    assert codes(ground) == ["no-crs"]
    feet = ground_of(tmp_path, units="us")
    assert (feet.grid.unit_m, feet.grid.cell_area_m2) == (FOOT_M, pytest.approx(FOOT_M**2))
    assert whole(feet.existing, feet)[0, 0] == 100 * FOOT_M


def test_a_crs_missing_on_one_side(tmp_path):
    write_raster(tmp_path / "existing.tif", FLAT)
    write_raster(tmp_path / "finished.tif", FLAT, crs=None)
    with pytest.raises(
        GroundError, match=r"ground\.finished: .*finished\.tif: it carries no CRS, while another .*EPSG:32611"
    ):
        ground_of(tmp_path)
    assert ground_of(tmp_path, crs="EPSG:32611").finished.resampling == "none"


def test_the_crs_of_a_file_wins_over_the_stated_one(tmp_path):
    for name in ("existing", "finished"):
        write_raster(tmp_path / f"{name}.tif", FLAT)
    ground = ground_of(tmp_path, crs="EPSG:32612")
    assert ground.grid.crs.to_epsg() == 32611
    assert codes(ground) == ["crs-differs"]
    with pytest.raises(SiteFileError, match=r'site\.crs: "EPSG:1" is not a CRS'):
        ground_of(tmp_path, crs="EPSG:1")


@pytest.mark.parametrize("both", [True, False])
def test_degrees_are_refused(tmp_path, both):
    write_raster(
        tmp_path / "existing.tif", FLAT, crs="EPSG:4326" if both else "EPSG:32614", west=-97.5, north=32.5, cell=1e-3
    )
    write_raster(tmp_path / "finished.tif", FLAT, crs="EPSG:4326", west=-97.5, north=32.5, cell=1e-3)
    with pytest.raises(GroundError, match=r"CRS is EPSG:4326 \(WGS 84\), in degrees.*EPSG:32614"):
        ground_of(tmp_path)


def test_web_mercator_is_corrected_with_a_warning(tmp_path):
    for name in ("existing", "finished"):
        write_raster(tmp_path / f"{name}.tif", FLAT, crs="EPSG:3857", west=-1.363e7, north=4.55e6)
    ground = ground_of(tmp_path)
    assert codes(ground) == ["web-mercator"]
    assert ground.grid.ground_scale == pytest.approx(0.79, abs=0.01)


def test_another_zone_is_reprojected_and_told(tmp_path):
    """A plane in zone 10 laid over a site in zone 11; its corners outside of the turned rectangle have no data."""
    there = Transformer.from_crs("EPSG:32611", "EPSG:32610", always_xy=True)
    east, north = (round(v) for v in there.transform(240_000.0, 4_100_000.0))
    e, n = np.meshgrid(np.arange(60) + 0.5, -np.arange(60) - 0.5)
    write_raster(tmp_path / "existing.tif", np.full((40, 40), 100.0), west=240_000.0, north=4_100_000.0)
    write_raster(
        tmp_path / "finished.tif",
        100 + 0.1 * e + 0.05 * n,
        crs="EPSG:32610",
        west=east - 10,
        north=north + 10,
        dtype="float64",
    )
    ground = ground_of(tmp_path)
    assert ground.grid.crs.to_epsg() == 32611
    assert ground.finished.resampling == "bilinear"
    assert codes(ground) == ["reprojected"]
    assert "out of EPSG:32610" in ground.notes[0]
    values = whole(ground.finished, ground)
    x, y = there.transform(ground.grid.west + 0.5, ground.grid.north - 0.5)
    assert values[0, 0] == pytest.approx(100 + 0.1 * (x - east + 10) + 0.05 * (y - north - 10), abs=1e-3)
    assert ground.footprint.area == pytest.approx(59 * 59, rel=2e-3)


def test_a_local_crs_cannot_meet_one_on_earth(tmp_path):
    write_raster(tmp_path / "existing.tif", FLAT)
    write_raster(tmp_path / "finished.tif", FLAT, crs='LOCAL_CS["shop floor",UNIT["metre",1]]')
    with pytest.raises(GroundError, match=r"finished\.tif: it carries no CRS"):
        ground_of(tmp_path)
    assert ground_of(tmp_path, crs="EPSG:32611").finished.resampling == "none"


# --- extent --------------------------------------------------------------------------------------------------------


def test_no_overlap_names_both_extents(tmp_path):
    write_raster(tmp_path / "existing.tif", FLAT)
    write_raster(tmp_path / "finished.tif", FLAT, west=WEST + 1000)
    with pytest.raises(
        GroundError,
        match=r"ground\.finished: .* covers easting 501000 to 501006 and northing 4099996 to 4100000 .*"
        r"ground\.existing easting 500000 to 500006 and northing 4099996 to 4100000 .*they must overlap",
    ):
        ground_of(tmp_path)


def test_surfaces_that_only_touch_do_not_overlap(tmp_path):
    write_raster(tmp_path / "existing.tif", FLAT)
    write_raster(tmp_path / "finished.tif", FLAT, west=WEST + 6)
    with pytest.raises(GroundError, match="they must overlap"):
        ground_of(tmp_path)


def test_a_raster_that_is_too_coarse_to_interpolate(tmp_path):
    write_raster(tmp_path / "existing.tif", FLAT)
    write_raster(tmp_path / "finished.tif", [[100.0, 100.0]], cell=100.0, west=WEST - 8)
    with pytest.raises(
        GroundError, match=r"finished\.tif: its 1 × 2 samples surround the centre of no cell of the site"
    ):
        ground_of(tmp_path)


def test_no_overlap_in_another_crs(tmp_path):
    write_raster(tmp_path / "existing.tif", FLAT)
    write_raster(tmp_path / "finished.tif", FLAT, crs="EPSG:32610")
    with pytest.raises(GroundError, match=r"in EPSG:32610.*in EPSG:32611.*they must overlap"):
        ground_of(tmp_path)


def test_limits_cut_the_grid_to_their_box(tmp_path):
    for name in ("existing", "finished"):
        write_raster(tmp_path / f"{name}.tif", np.full((20, 20), 100.0))
    ring = [(WEST + 3.5, NORTH - 2.0), (WEST + 8.0, NORTH - 6.5), (WEST + 3.5, NORTH - 6.5)]
    ground = ground_of(tmp_path, limits=polygon_file(tmp_path / "limits.geojson", ring), ground_scale=1.0)
    grid = ground.grid
    assert (grid.west, grid.north, grid.rows, grid.columns) == (WEST + 3, NORTH - 2, 5, 5)
    assert ground.limits[0].polygon.area == pytest.approx(4.5 * 4.5 / 2)
    assert ground.limits_outside_m2 == 0.0


def test_limits_beyond_the_surfaces_are_counted(tmp_path):
    for name in ("existing", "finished"):
        write_raster(tmp_path / f"{name}.tif", np.full((20, 20), 100.0))
    ring = [(WEST - 4, NORTH - 5), (WEST + 6, NORTH - 5), (WEST + 6, NORTH - 8), (WEST - 4, NORTH - 8)]
    ground = ground_of(tmp_path, limits=polygon_file(tmp_path / "limits.geojson", ring), ground_scale=2.0)
    # 4 × 3 map units lie west of the data; each is 2 × 2 m on the ground
    assert ground.limits_outside_m2 == pytest.approx(48.0)
    assert (ground.grid.rows, ground.grid.columns) == (3, 6)


def test_limits_elsewhere(tmp_path):
    for name in ("existing", "finished"):
        write_raster(tmp_path / f"{name}.tif", FLAT)
    ring = [(WEST + 100, NORTH), (WEST + 110, NORTH), (WEST + 110, NORTH - 5)]
    with pytest.raises(GroundError, match=r"ground\.limits covers easting 500100 to 500110.*they must overlap"):
        ground_of(tmp_path, limits=polygon_file(tmp_path / "limits.geojson", ring))


# --- heights -------------------------------------------------------------------------------------------------------


def test_two_vertical_datums_are_refused(tmp_path):
    write_raster(tmp_path / "existing.tif", FLAT, crs="EPSG:32611+5703")
    write_raster(tmp_path / "finished.tif", FLAT, crs="EPSG:32611+3855")
    with pytest.raises(
        GroundError,
        match=r"ground\.existing is in the vertical datum 'North American Vertical Datum 1988', ground\.finished in "
        r"'EGM2008 geoid'; they must be the same",
    ):
        ground_of(tmp_path)


def test_one_datum_in_two_units_is_converted(tmp_path):
    write_raster(tmp_path / "existing.tif", FLAT, crs="EPSG:32611+5703")
    write_raster(tmp_path / "finished.tif", FLAT / US_SURVEY_FOOT_M, crs="EPSG:32611+6360", dtype="float64")
    ground = ground_of(tmp_path)
    assert whole(ground.finished, ground)[0, 0] == pytest.approx(100.0, abs=1e-12)
    assert codes(ground) == ["vertical-unit"]
    assert [f.unit for f in ground.vertical] == ["m", "ft (US survey)"]


def test_a_marker_that_is_not_declared_is_refused(tmp_path):
    holed = FLAT.copy()
    holed[0, 0] = -10000
    write_raster(tmp_path / "existing.tif", FLAT)
    write_raster(tmp_path / "finished.tif", holed)
    ground = ground_of(tmp_path)
    with pytest.raises(FileError, match=r"ground\.finished: .*it holds the value -10000 at .*nodata = -10000"):
        whole(ground.finished, ground)
    ground = ground_of(tmp_path, finished={"file": "finished.tif", "nodata": -10000})
    assert np.isnan(whole(ground.finished, ground)[0, 0])


def test_a_marker_s_number_may_be_an_elevation(tmp_path):
    """9,999 ft is a mountain of 3,048 m."""
    for name in ("existing", "finished"):
        write_raster(tmp_path / f"{name}.tif", np.full((4, 6), 9999.0), crs="EPSG:2223", west=700_000, north=1_500_000)
    assert ground_of(tmp_path, units="us").mean_elevation_m == pytest.approx(9999 * FOOT_M)


def test_an_absurd_value_is_refused(tmp_path):
    write_raster(tmp_path / "existing.tif", FLAT)
    write_raster(tmp_path / "finished.tif", np.where(np.arange(24).reshape(4, 6) == 3, 1e30, FLAT))
    ground = ground_of(tmp_path)
    with pytest.raises(FileError, match=r"it holds the value 1\.000000015e\+30"):
        whole(ground.finished, ground)


def test_no_data_anywhere_is_told(tmp_path):
    for name in ("existing", "finished"):
        write_raster(tmp_path / f"{name}.tif", np.full((4, 6), -9999.0), nodata=-9999)
    ground = ground_of(tmp_path)
    assert codes(ground) == ["elevation-unknown"]
    assert ground.mean_elevation_m == 0.0


# --- further surfaces ----------------------------------------------------------------------------------------------


@pytest.fixture
def site_ground(tmp_path):
    for name in ("existing", "finished"):
        write_raster(tmp_path / f"{name}.tif", FLAT, crs="EPSG:32611+5703")
    return ground_of(tmp_path)


def spec_of(**table):
    site = check_site(
        {"site": {"name": "t", "units": "metric"}, "ground": {"existing": "a.tif", "finished": table}}, Path()
    )
    return site.model.ground.finished


def test_a_further_surface_comes_onto_the_grid(tmp_path, site_ground):
    write_raster(tmp_path / "shale.tif", np.full((4, 4), 90.0), west=WEST + 3, north=NORTH)
    surface = site_ground.surface(spec_of(file="shale.tif"), 'stratum "loess" bottom')
    values = whole(surface, site_ground)
    assert np.isnan(values[:, :3]).all()
    assert (values[:, 3:] == 90.0).all()
    level = site_ground.surface(spec_of(level=88.0), "bottom")
    assert whole(level, site_ground)[0, 0] == 88.0


def test_a_further_surface_in_feet(tmp_path, site_ground):
    write_raster(tmp_path / "shale.tif", np.full((4, 6), 300.0))
    warnings = []
    surface = site_ground.surface(spec_of(file="shale.tif", vertical_unit="ft"), "bottom", warnings=warnings)
    assert whole(surface, site_ground)[0, 0] == 300 * FOOT_M
    assert warnings == []  # it was stated, so there is no doubt


def test_a_further_surface_elsewhere_or_of_another_datum(tmp_path, site_ground):
    write_raster(tmp_path / "far.tif", FLAT, west=WEST + 1000)
    write_raster(tmp_path / "other.tif", FLAT, crs="EPSG:32611+3855")
    write_raster(tmp_path / "none.tif", FLAT, crs=None)
    with pytest.raises(GroundError, match=r'stratum "loess" bottom: .*far\.tif covers .*they must overlap'):
        site_ground.surface(spec_of(file="far.tif"), 'stratum "loess" bottom')
    with pytest.raises(GroundError, match="EGM2008 geoid"):
        site_ground.surface(spec_of(file="other.tif"), "bottom")
    with pytest.raises(GroundError, match="it carries no CRS"):
        site_ground.surface(spec_of(file="none.tif"), "bottom")
    with pytest.raises(FileError, match=r"bottom: .*nowhere\.tif: no such file"):
        site_ground.surface(spec_of(file="nowhere.tif"), "bottom")


# --- without a site file -------------------------------------------------------------------------------------------


def test_a_site_of_two_files(tmp_path, monkeypatch):
    write_raster(tmp_path / "old.tif", FLAT)
    write_raster(tmp_path / "new.tif", np.where(FLAT == 100, -7777.0, 0))
    monkeypatch.chdir(tmp_path)
    site = site_from_files("old.tif", "new.tif", nodata=-7777, units="us")
    assert (site.name, site.units.name) == ("old to new", "us")
    ground = open_ground(site)
    assert np.isnan(whole(ground.finished, ground)).all()
    with pytest.raises(SiteFileError, match='zone name is "lot", but no zones are given'):
        site_from_files("old.tif", "new.tif", zone_name="lot")
    with pytest.raises(SiteFileError, match=r"site\.units"):
        site_from_files("old.tif", "new.tif", units="imperial")


# --- real surveys --------------------------------------------------------------------------------------------------

# first date, second date, valid cells, cut m³, fill m³: numpy, bilinear, by another hand (README of the data)
BEACH_PAIRS = [
    ("20180606", "20180713", 140535, 45187.6119, 20000.7717),
    ("20180713", "20190211", 92682, 25552.0326, 44933.7618),
    ("20190211", "20190731", 85183, 11955.3179, 30313.8588),
    ("20180606", "20190731", 82019, 15872.9308, 31297.2944),
]
needs_data = pytest.mark.skipif(not DATA.is_dir(), reason="the folder of open data is not here")


@needs_data
@pytest.mark.parametrize(("before", "after", "cells", "cut", "fill"), BEACH_PAIRS)
def test_beach_surveys_on_grids_that_never_coincide(before, after, cells, cut, fill):
    names = [DATA / f"pair_beach_leo/leo_{date}_dsm_resampled_1m.tif" for date in (before, after)]
    ground = open_ground(site_from_files(*names, nodata=-10000))
    old, new = (whole(s, ground) for s in (ground.existing, ground.finished))
    depth = new.astype(np.float64) - old
    depth = depth[np.isfinite(depth)]
    map_area = ground.grid.cell_east * ground.grid.cell_north
    assert (ground.existing.resampling, ground.finished.resampling) == ("none", "bilinear")
    assert depth.size == cells
    assert -np.minimum(depth, 0).sum() * map_area == pytest.approx(cut, abs=1e-3)
    assert np.maximum(depth, 0).sum() * map_area == pytest.approx(fill, abs=1e-3)


@needs_data
def test_beach_against_gdal_on_common_cells():
    """GDAL's bilinear, which fills cells beside holes by re-weighting: on common cells to 1e-8 m."""
    import rasterio
    from rasterio.enums import Resampling
    from rasterio.warp import reproject

    names = [DATA / f"pair_beach_leo/leo_{date}_dsm_resampled_1m.tif" for date in ("20180606", "20180713")]
    ground = open_ground(site_from_files(*names, nodata=-10000))
    mine = whole(ground.finished, ground)
    grid = ground.grid
    other = np.full((grid.rows, grid.columns), np.nan)
    with rasterio.open(names[1]) as file:
        transform = Affine(grid.cell_east, 0, grid.west, 0, -grid.cell_north, grid.north)
        reproject(
            file.read(1).astype(np.float64), other, src_transform=file.transform, src_crs=file.crs, src_nodata=-10000,
            dst_transform=transform, dst_crs=file.crs, dst_nodata=np.nan, resampling=Resampling.bilinear,
        )  # fmt: skip
    common = np.isfinite(mine) & np.isfinite(other)
    assert common.sum() == np.isfinite(mine).sum() > 150_000
    assert np.abs(mine - other)[common].max() < 1e-8


@needs_data
def test_the_untagged_nodata_of_the_beach_is_seen():
    names = [DATA / f"pair_beach_leo/leo_{date}_dsm_resampled_1m.tif" for date in ("20180606", "20180713")]
    with pytest.raises(FileError, match="it holds the value -10000"):
        open_ground(site_from_files(*names))


# valid cells and mean elevation, README of the data
SINGLES = [("west_bijou_gully.asc", 1088, 1700.0 + 8.477515), ("DEM-kootenai_37x50_1x1.asc", 1850, 540.0 - 0.154297)]


@needs_data
@pytest.mark.parametrize(("name", "cells", "mean"), SINGLES)
def test_single_elevation_models_against_a_level(name, cells, mean):
    ground = ground_of(DATA / "dem_singles", existing=name, finished={"level": 100.0})
    values = whole(ground.existing, ground)
    assert np.isfinite(values).sum() == cells
    assert np.nanmean(values.astype(np.float64)) == pytest.approx(mean, abs=1e-5)
    assert codes(ground) == ["no-crs"]


@needs_data
@pytest.mark.parametrize("name", ["rmnp-dem.tif", "pysheds_dem.tif"])
def test_models_in_degrees_are_refused(name):
    with pytest.raises(GroundError, match="in degrees"):
        ground_of(DATA / "dem_singles", existing=name, finished={"level": 100.0})


@needs_data
def test_web_mercator_against_geodesic_areas():
    """6,654,276.828 m² by geodesics for the whole raster; here with 31 m of elevation: 1 + 2 × 31 / 6371000."""
    ground = ground_of(DATA / "dem_web_mercator", existing="elev.tif", finished={"level": 20.0})
    grid = ground.grid
    raised = (1 + ground.mean_elevation_m / 6_371_000) ** 2
    assert grid.rows * grid.columns * grid.cell_area_m2 == pytest.approx(6_654_276.828 * raised, rel=1e-6)
