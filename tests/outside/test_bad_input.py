"""What bad input gets: exit 2, one message, no traceback, and nothing written; some in a process of their own."""

import re

import numpy as np
import pytest
import shapely

from tests.outside.conftest import run_process, write_polygons, write_raster, write_site

UTM = "EPSG:26914"
CORNER = (512_000.0, 4_461_050.0)
GOOD = """
[ground]
existing = "existing.tif"
finished = "finished.tif"
[[strip]]
material = "topsoil"
depth = 0.15
[[stratum]]
material = "loess"
[material.topsoil]
use = "topsoil"
bank.dry_density = 1250
loose.swell_percent = 30
[material.loess]
use = "fill"
specific_gravity = 2.68
bank.dry_density = 1430
bank.water_content = 7.5
loose.dry_density = 1150
proctor = { method = "ASTM D698", max_dry_density = 1760, optimum_water_content = 16.0 }
[fill]
relative_compaction = 95
expected_compaction = 96.5
"""


@pytest.fixture
def folder(tmp_path):
    """A small site that runs."""
    ground = 600 + np.linspace(0, 4, 40)[None, :] + np.zeros((50, 1))
    surface(tmp_path / "existing.tif", ground)
    surface(tmp_path / "finished.tif", np.full((50, 40), 602.0))
    return tmp_path


def surface(path, elevation, *, crs=UTM, corner=CORNER, **more):
    return write_raster(path, elevation, corner=corner, crs=crs, dtype="float32", **more)


@pytest.fixture
def refuses(folder, earthwork, monkeypatch):
    """Run a site of this text; the one message must match every pattern."""

    def run(text, *says, command="balance", process=False):
        site = write_site(folder, text)
        before = sorted(folder.rglob("*"))
        arguments = [command, site, "--out", "out", "--quiet"]
        monkeypatch.chdir(folder)
        ran = run_process(*arguments, cwd=folder) if process else earthwork(*arguments)
        assert (ran.code, ran.stdout) == (2, ""), ran.stderr
        assert re.match("error: ", ran.stderr), ran.stderr
        assert "Traceback" not in ran.stderr
        # GDAL may be quoted once.
        assert len(re.findall("error|warning", ran.stderr, re.IGNORECASE)) <= 2, ran.stderr
        assert sorted(folder.rglob("*")) == before, "something was written"
        for pattern in says:
            assert re.search(pattern, ran.stderr, re.IGNORECASE | re.DOTALL), f"{pattern!r} is not in: {ran.stderr}"

    return run


def test_the_good_site_runs(folder):
    ran = run_process("balance", write_site(folder, GOOD), "--out", "out", "--json", cwd=folder)
    assert ran.document["result"]["required_compacted_m3"] > 0
    assert (folder / "out").is_dir()


# --- surfaces ---


def test_missing_file(refuses):
    refuses(GOOD.replace('"finished.tif"', '"finshed.tif"'), "finshed.tif", "finished.tif")


def test_not_a_raster(folder, refuses):
    (folder / "finished.tif").write_text("elevation,northing\n1,2\n")
    refuses(GOOD, "finished.tif", "raster", process=True)


def test_truncated_raster(folder, refuses):
    path = folder / "finished.tif"
    rough = np.random.default_rng(0).uniform(600, 604, (50, 40))
    surface(path, rough)
    path.write_bytes(path.read_bytes()[:-4000])
    refuses(GOOD, "finished.tif", "damaged", process=True)


def test_cut_off_header(folder, refuses):
    path = folder / "existing.tif"
    path.write_bytes(path.read_bytes()[:90])
    refuses(GOOD, "existing.tif")


def test_empty_file(folder, refuses):
    (folder / "existing.tif").write_bytes(b"")
    refuses(GOOD, "existing.tif")


def test_geographic_crs(folder, refuses):
    for name in ("existing", "finished"):
        write_raster(folder / f"{name}.tif", np.full((9, 9), 600.0), cell=1e-5, corner=(-98.86, 40.3), crs="EPSG:4269")
    refuses(GOOD, "geographic|degrees", "reproject")


def test_no_overlap(folder, refuses):
    surface(folder / "finished.tif", np.full((50, 40), 602.0), corner=(CORNER[0] + 5000, CORNER[1]))
    refuses(GOOD, "overlap", "512000", "517000")


def test_different_vertical_datum(folder, refuses):
    surface(folder / "existing.tif", np.full((50, 40), 600.0), crs="EPSG:26914+5703")
    surface(folder / "finished.tif", np.full((50, 40), 602.0), crs="EPSG:26914+5702")
    refuses(GOOD, "vertical", "1988", "1929")


def test_rotated_grid(folder, refuses):
    import rasterio

    turn = rasterio.Affine(0.996, 0.087, CORNER[0], 0.087, -0.996, CORNER[1])
    with rasterio.open(
        folder / "finished.tif",
        "w",
        driver="GTiff",
        height=50,
        width=40,
        count=1,
        dtype="float32",
        crs=UTM,
        transform=turn,
    ) as target:
        target.write(np.full((50, 40), 602, "float32"), 1)
    refuses(GOOD, "finished.tif", "rotated|sheared|turned", "resample|warp")


def test_all_nodata(folder, refuses):
    surface(folder / "finished.tif", np.full((50, 40), -9999.0), nodata=-9999)
    refuses(GOOD, "no (cell has )?data|nodata", process=True)


def test_crs_on_one_side_only(folder, refuses):
    surface(folder / "finished.tif", np.full((50, 40), 602.0), crs=None)
    refuses(GOOD, "finished.tif", "CRS")


def test_crs_of_another_planet(folder, refuses):
    surface(folder / "finished.tif", np.full((50, 40), 602.0), crs="EPSG:32618")
    refuses(GOOD, "overlap|CRS")


def test_band_that_is_not_there(refuses):
    refuses(GOOD.replace('"finished.tif"', '{ file = "finished.tif", band = 3 }'), "finished.tif", "band", "3")


# --- areas ---


def square(x, y, side=10.0):
    return shapely.box(CORNER[0] + x, CORNER[1] - y - side, CORNER[0] + x + side, CORNER[1] - y)


def test_overlapping_zones(folder, refuses):
    write_polygons(folder / "zones.gpkg", [square(2, 2), square(9, 9)], ["north bay", "south bay"], crs=UTM)
    text = GOOD + '[zones]\narea = "zones.gpkg"\nname = "name"\n'
    refuses(text, "overlap", "north bay", "south bay", "9", process=True)


def test_self_crossing_polygon(folder, refuses):
    x, y = CORNER[0] + 10, CORNER[1] - 20
    bow = shapely.Polygon([(x, y), (x + 8, y + 8), (x + 8, y), (x, y + 8)])
    write_polygons(folder / "limits.gpkg", [bow], ["bow tie"], crs=UTM)
    text = GOOD.replace("[ground]", '[ground]\nlimits = "limits.gpkg"')
    refuses(text, "limits.gpkg", "cross|self-intersection", rf"{x + 4:.0f}", rf"{y + 4:.0f}")


def test_area_without_polygons(folder, refuses):
    (folder / "limits.geojson").write_text('{"type": "FeatureCollection", "features": []}')
    refuses(GOOD.replace("[ground]", '[ground]\nlimits = "limits.geojson"'), "limits.geojson")


def test_lines_where_polygons_are_needed(folder, refuses):
    (folder / "limits.geojson").write_text(
        '{"type": "Feature", "properties": {}, "geometry": {"type": "LineString", "coordinates": [[0, 0], [1, 1]]}}'
    )
    refuses(GOOD.replace("[ground]", '[ground]\nlimits = "limits.geojson"'), "limits.geojson", "polygon")


def test_limits_elsewhere(folder, refuses):
    write_polygons(folder / "limits.gpkg", [square(9000, 0)], crs=UTM)
    refuses(GOOD.replace("[ground]", '[ground]\nlimits = "limits.gpkg"'), "limits")


def test_unknown_zone_field(folder, refuses):
    write_polygons(folder / "zones.gpkg", [square(2, 2)], crs=UTM)
    refuses(GOOD + '[zones]\narea = "zones.gpkg"\nname = "nam"\n', "nam", "name")


def test_unknown_layer(folder, refuses):
    write_polygons(folder / "zones.gpkg", [square(2, 2)], crs=UTM)
    refuses(GOOD + '[zones]\narea = { file = "zones.gpkg", layer = "zone" }\nname = "name"\n', "zone", "zones")


def test_filter_that_finds_nothing(folder, refuses):
    write_polygons(folder / "zones.gpkg", [square(2, 2)], crs=UTM)
    text = GOOD + """[zones]\narea = { file = "zones.gpkg", where = "name = 'east'" }\nname = "name"\n"""
    refuses(text, "zones.gpkg", "east")


# --- the site file ---


@pytest.mark.parametrize(
    ("good", "bad", "says"),
    [
        ("depth = 0.15", "depth = -0.15", ["depth", "-0.15"]),
        ("bank.dry_density = 1430", "bank.dry_density = 110", ["bank.dry_density", "110", "lb/ft³"]),
        ("bank.dry_density = 1430", "bank.dry_density = 1.43", ["bank.dry_density", "1.43", "t/m³"]),
        ("bank.water_content = 7.5", "bank.water_content = 0.12", ["bank.water_content", "0.12", "fraction", "12"]),
        ("expected_compaction = 96.5", "expected_compaction = 94", ["expected_compaction", "94", "95"]),
        ("relative_compaction = 95", "relative_compactoin = 95", ["relative_compactoin", "relative_compaction"]),
        ("relative_compaction = 95", 'relative_compaction = "95 psi"', ["relative_compaction"]),
        ('material = "loess"', 'material = "loes"', ["loes", "loess"]),
        ('use = "fill"', 'use = "filling"', ["use", "filling", "fill"]),
        ("[fill]", "[fil]", ["fil", "fill"]),
        ("loose.dry_density = 1150", "loose.dry_density = 1500", ["loose", "bank", "1500"]),
        ("specific_gravity = 2.68", "specific_gravity = 26.8", ["specific_gravity", "26.8"]),
        ('finished = "finished.tif"', "finished = {}", ["finished"]),
        ('finished = "finished.tif"', "", ["finished", "missing|design"]),
        ('existing = "existing.tif"', 'existing = "existing.tif"\ncell = 0.0', ["cell"]),
        ("[fill]", "[fill", ["TOML"]),
    ],
)
def test_fault_of_the_site_file(refuses, good, bad, says):
    assert good in GOOD
    refuses(GOOD.replace(good, bad, 1), "site.toml|material", *says)


def test_target_above_zero_air_voids(refuses):
    """At 96.5 % of 1760 kg/m³ and grain density 2680, voids hold at most (1/1698.4 − 1/2680) · 10⁵ = 21.6 % of water."""
    text = GOOD + "water_content_offset = 6.0\n"
    refuses(text, "zero air voids|saturat", "21\\.[56]", "loess", process=True)


def test_all_faults_in_one_message(refuses):
    text = GOOD.replace("depth = 0.15", "depth = -1").replace("water_content = 7.5", "water_content = 0.075")
    refuses(text.replace("[fill]", "[fill]\nlift = 0.2"), "strip.*depth", "0.075", "lift", "3 faults")


def test_missing_section_is_named(refuses):
    refuses(GOOD[: GOOD.index("[fill]")], r"\[fill\]")


# --- usage and outputs ---


def test_output_that_exists(folder, earthwork):
    arguments = ["soil", write_site(folder, GOOD), "--out", folder / "out", "--quiet"]
    assert earthwork(*arguments).code == 0
    before = {path: path.read_bytes() for path in (folder / "out").iterdir()}
    assert before
    ran = earthwork(*arguments)
    assert (ran.code, ran.stdout) == (2, "")
    assert "--overwrite" in ran.stderr
    assert {path: path.read_bytes() for path in (folder / "out").iterdir()} == before
    assert earthwork(*arguments, "--overwrite").code == 0


def test_output_that_is_a_file(folder):
    (folder / "out").write_text("mine")
    ran = run_process("volumes", write_site(folder, GOOD), "--out", "out", cwd=folder)
    assert (ran.code, ran.stdout) == (2, "")
    assert "Traceback" not in ran.stderr
    assert (folder / "out").read_text() == "mine"


@pytest.mark.parametrize(
    "arguments",
    [
        ["volumes"],
        ["volumes", "site.toml", "--existing", "existing.tif", "--finished", "finished.tif"],
        ["volumes", "--existing", "existing.tif"],
        ["volumes", "--existing", "existing.tif", "--finished", "finished.tif", "--zones", "existing.tif"],
        ["volumes", "--existing", "existing.tif", "--finished", "finished.tif", "--units", "imperial"],
        ["volumes", "site.toml", "--threads", "0"],
        ["volumes", "site.toml", "--thread", "2"],
        ["volumes", "nowhere.toml"],
        ["volumes", "."],
        ["volumes", "existing.tif"],
        ["measure", "site.toml"],
        ["new", "."],
    ],
    ids=" ".join,
)
def test_bad_usage(folder, earthwork, monkeypatch, arguments):
    write_site(folder, GOOD)
    before = sorted(folder.rglob("*"))
    monkeypatch.chdir(folder)
    ran = earthwork(*arguments)
    assert (ran.code, ran.stdout) == (2, ""), ran.stderr
    assert ran.stderr.strip()
    assert "Traceback" not in ran.stderr
    assert sorted(folder.rglob("*")) == before


def test_strict_ends_with_three_after_the_result(folder):
    site = write_site(folder, GOOD.replace("expected_compaction = 96.5\n", ""))
    plain, strict = (run_process("soil", site, "--json", *more, cwd=folder) for more in ([], ["--strict"]))
    assert "compaction-assumed" in plain.warning_codes
    assert strict.code == 3
    assert strict.stdout == plain.stdout
