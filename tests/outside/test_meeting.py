"""Surfaces and areas that do not lie on one grid, in one CRS, or in one format; names and paths of all kinds."""

import geopandas
import numpy as np
import pyproj
import pytest
import shapely

from tests.outside.conftest import run_process, write_polygons, write_raster, write_site

UTM = "EPSG:26914"
CORNER = (512_000.0, 4_461_300.0)


def plane(corner, rows, columns, cell, *, rise=1.0):
    """Elevations of one tilted plane at the cell centres of any grid [m]."""
    east = corner[0] + (np.arange(columns) + 0.5) * cell
    north = corner[1] - (np.arange(rows) + 0.5) * cell
    return 600 + 0.013 * (east[None, :] - CORNER[0]) - 0.021 * (CORNER[1] - north[:, None]) + rise


@pytest.mark.parametrize(
    ("cell", "east", "north"), [(3.0, 0.7, -1.1), (2.0, 0.31, 0.0), (7.3, -2.0, 5.0), (0.6, 0.1, 0.2)]
)
def test_grids_that_do_not_coincide(tmp_path, volumes, cell, east, north):
    """A plane and the same plane a metre higher on another grid: bilinear values and means are exact on planes."""
    corner = (CORNER[0] + east, CORNER[1] + north)
    rows, columns = int(300 / cell), int(240 / cell)
    files = {
        "existing": write_raster(
            tmp_path / "a.tif", plane(CORNER, 150, 120, 2.0, rise=0.0), cell=2.0, corner=CORNER, crs=UTM
        ),
        "finished": write_raster(
            tmp_path / "b.tif", plane(corner, rows, columns, cell), cell=cell, corner=corner, crs=UTM
        ),
    }
    found = volumes(**files)
    total, scale = found["total"], found["grid"]["ground_scale"]
    assert total["fill_m3"] == pytest.approx(total["area_m2"], rel=1e-8)
    assert total["cut_m3"] == 0.0
    # All of the overlap counts, but for a rim of at most two cells where not all neighbours are there.
    overlap = shapely.box(*bounds(CORNER, 150, 120, 2.0)).intersection(
        shapely.box(*bounds(corner, rows, columns, cell))
    )
    assert (
        overlap.buffer(-2 * max(cell, 2.0)).area * scale**2 <= total["area_m2"] <= overlap.area * scale**2 * (1 + 1e-9)
    )
    assert found["grid"]["cell_m"] == pytest.approx(min(cell, 2.0) * scale, rel=1e-9)


def bounds(corner, rows, columns, cell):
    return corner[0], corner[1] - rows * cell, corner[0] + columns * cell, corner[1]


def test_surfaces_in_two_zones_of_a_projection(tmp_path, volumes):
    """Level ground in UTM zone 14 and a level two metres higher in zone 15: fill = 2 × area."""
    files = {
        "existing": write_raster(tmp_path / "a.tif", np.full((100, 100), 600.0), cell=2.0, corner=CORNER, crs=UTM),
        "finished": write_raster(
            tmp_path / "b.tif", np.full((400, 400), 602.0), cell=2.0, corner=zone_15(CORNER), crs="EPSG:26915"
        ),
    }
    found = volumes(**files)
    assert found["total"]["fill_m3"] == pytest.approx(2 * found["total"]["area_m2"], rel=1e-9)
    assert found["total"]["area_m2"] + found["total"]["missing_area_m2"] > 0.9 * 200 * 200
    assert found["grid"]["crs"] == UTM


def zone_15(corner):
    east, north = pyproj.Transformer.from_crs(26914, 26915, always_xy=True).transform(corner[0] + 100, corner[1] - 100)
    return round(east) - 400, round(north) + 400


@pytest.mark.parametrize("name", ["zones.gpkg", "zones.geojson", "zones.shp"])
def test_areas_in_other_formats_and_degrees(tmp_path, volumes, name):
    """The same polygon in UTM and in degrees (as GeoJSON has it): its area from UTM, sides followed closely."""
    files = {
        "existing": write_raster(tmp_path / "a.tif", np.full((150, 150), 600.0), cell=2.0, corner=CORNER, crs=UTM),
        "finished": write_raster(tmp_path / "b.tif", np.full((150, 150), 600.5), cell=2.0, corner=CORNER, crs=UTM),
    }
    polygon = shapely.Polygon([(512_031, 4_461_040), (512_250, 4_461_077), (512_222, 4_461_270), (512_080, 4_461_210)])
    to_degrees = pyproj.Transformer.from_crs(26914, 4269, always_xy=True).transform
    in_degrees = shapely.transform(polygon, to_degrees, interleaved=False)
    found = volumes(
        "--zones",
        write_polygons(tmp_path / name, [in_degrees], ["field"], crs="EPSG:4269"),
        "--zone-name",
        "name",
        **files,
    )
    (zone,) = found["zones"]
    assert zone["zone"] == "field"
    assert zone["area_m2"] == pytest.approx(polygon.area * found["grid"]["ground_scale"] ** 2, rel=2e-6)
    assert zone["fill_m3"] == pytest.approx(0.5 * zone["area_m2"], rel=1e-9)


def test_coarser_cell_on_request(tmp_path, volumes):
    """ground.cell = 5 on rasters of 1 m: means of cells, so the plain sum over whole cells stays."""
    rough = np.random.default_rng(3).uniform(0, 2, (100, 100))
    write_raster(tmp_path / "a.tif", rough, cell=1.0)
    write_raster(tmp_path / "b.tif", np.full((100, 100), 1.0), cell=1.0)
    text = '[ground]\nexisting = "a.tif"\nfinished = "b.tif"\ncell = 5.0\n'
    found = volumes(write_site(tmp_path, text))
    assert found["grid"]["cell_m"] == 5.0
    assert found["total"]["area_m2"] == 10_000
    assert found["total"]["cut_minus_fill_m3"] == pytest.approx((rough - 1).sum(), rel=1e-9)


NAMES = ['Lot "A"', "<b>7</b>", "=1+1", "Große Wiese", "地块 12", "🏠", "x" * 300, "a\nb", "-5", "O'Brien"]


def test_names_of_all_kinds_come_out_as_they_went_in(tmp_path, earthwork):
    folder = tmp_path / "Höhe & Söhne, phase 2 (final)"
    folder.mkdir()
    write_raster(folder / "vorher é.tif", np.full((40, 120), 10.0), cell=1.0)
    write_raster(folder / "nachher.tif", np.full((40, 120), 11.0), cell=1.0)
    lots = [shapely.box(501 + 10 * i, 870, 510 + 10 * i, 890) for i in range(len(NAMES))]
    write_polygons(folder / "lots.gpkg", lots, NAMES)
    text = '[ground]\nexisting = "vorher é.tif"\nfinished = "nachher.tif"\n[zones]\narea = "lots.gpkg"\nname = "name"\n'
    ran = earthwork("volumes", write_site(folder, text), "--json", "--out", folder / "out")
    zones = ran.result["zones"]
    assert [zone["fill_m3"] for zone in zones] == pytest.approx([180.0] * len(NAMES), rel=1e-9)
    assert [zone["zone"].strip() for zone in zones] == [name.strip() for name in NAMES]
    table = (folder / "out" / "volumes.csv").read_text("utf-8-sig")
    assert "\n=1+1" not in table
    assert ",=1+1" not in table
    assert earthwork("volumes", folder / "site.toml").code == 0


def test_a_zone_outside_the_limits_is_written_without_ground(tmp_path):
    """One of two zones lies beyond the limits: its figures are zero, and the run ends well, map and shapes included."""
    write_raster(tmp_path / "e.tif", np.zeros((40, 40)), crs=UTM, corner=CORNER)
    write_raster(tmp_path / "f.tif", np.full((40, 40), 2.0), crs=UTM, corner=CORNER)
    west, north = CORNER
    write_polygons(tmp_path / "limits.gpkg", [shapely.box(west + 5, north - 35, west + 35, north - 5)], crs=UTM)
    inside = shapely.box(west + 10, north - 20, west + 20, north - 10)
    beyond = shapely.box(west + 1, north - 3, west + 2, north - 2)
    write_polygons(tmp_path / "zones.gpkg", [inside, beyond], ["yard", "lane"], crs=UTM)
    arguments = ["--existing", "e.tif", "--finished", "f.tif", "--limits", "limits.gpkg", "--zones", "zones.gpkg"]
    ran = run_process("volumes", *arguments, "--zone-name", "name", "--out", "out", "--json", cwd=tmp_path)
    scale = ran.result["grid"]["ground_scale"]
    areas = {zone["zone"]: (zone["area_m2"], zone["fill_m3"]) for zone in ran.result["zones"]}
    assert areas["yard"] == pytest.approx((100 * scale**2, 200 * scale**2), rel=1e-9)
    assert areas["lane"] == (0, 0)
    assert "zone-without-ground" in ran.warning_codes
    written = geopandas.read_file(tmp_path / "out" / "volumes_zones.gpkg")
    assert list(written.geometry.is_empty) == [False, True]
    assert (tmp_path / "out" / "volumes_map.png").stat().st_size > 1000
