"""Units, and map against ground: feet that differ in the sixth digit, Web Mercator, elevation factors, US displays."""

import numpy as np
import pytest

from tests.outside.conftest import write_raster, write_site

#: The US survey foot is 1200/3937 m (Federal Register 2020-21902, read), the foot 0.3048 m.
SURVEY_FOOT, FOOT = 1200 / 3937, 0.3048
YARD3 = 0.764554857984  # (3 · 0.3048)³, by definition


def slab(folder, *, crs, corner, cell, thickness, side=30, base=0.0):
    return {
        "existing": write_raster(folder / "a.tif", np.full((side, side), base), crs=crs, corner=corner, cell=cell),
        "finished": write_raster(
            folder / "b.tif", np.full((side, side), base + thickness), crs=crs, corner=corner, cell=cell
        ),
    }


@pytest.mark.parametrize(("crs", "foot"), [("EPSG:2274", SURVEY_FOOT), ("EPSG:2264", SURVEY_FOOT), ("EPSG:2223", FOOT)])
def test_which_foot(tmp_path, volumes, crs, foot):
    """A slab of 300 × 300 × 3 of the CRS's feet: 270,000 ft³, in Tennessee and North Carolina (survey feet) and Arizona."""
    corner = (700_000.0, 1_000_000.0) if crs == "EPSG:2223" else (2_006_400.0, 613_000.0)
    found = volumes("--units", "us", **slab(tmp_path, crs=crs, corner=corner, cell=10.0, thickness=3.0))
    scale = found["grid"]["ground_scale"]
    assert found["grid"]["cell_m"] == pytest.approx(10 * foot * scale, rel=1e-12)
    assert found["total"]["fill_m3"] == pytest.approx(270_000 * foot**3 * scale**2, rel=1e-12)
    # What the other foot would give differs by six parts in a million, so the check above can tell.
    assert abs(SURVEY_FOOT**3 / FOOT**3 - 1) == pytest.approx(6e-6, rel=1e-3)


def test_survey_feet_against_feet_far_from_the_origin(tmp_path, earthwork):
    """At 2,000,000 ft the two feet put a place 4 ft apart: surfaces in the one and the other must not meet 1 : 1.

    Tennessee in survey feet (EPSG:2274), and the same projection written out in feet: its numbers for the same place
    are larger by two parts in a million. A wall that stands at one place must stay there.
    """
    feet = (
        "+proj=lcc +lat_0=34.3333333333333 +lon_0=-86 +lat_1=35.25 +lat_2=36.4166666666667 "
        "+x_0=600000 +y_0=0 +datum=NAD83 +units=ft"
    )
    wall = np.zeros((60, 60))
    wall[:, 30:] = 10.0
    west, north = 2_006_400.0, 613_000.0
    existing = write_raster(tmp_path / "a.tif", wall, crs="EPSG:2274", corner=(west, north), cell=2.0)
    ratio = SURVEY_FOOT / FOOT
    moved = (west * ratio, north * ratio)
    assert moved[0] - west == pytest.approx(4.01, abs=0.01)
    finished = write_raster(tmp_path / "b.tif", wall, crs=feet, corner=moved, cell=2.0 * ratio)
    ran = earthwork("volumes", "--existing", existing, "--finished", finished, "--units", "us", "--json")
    total = ran.result["total"]
    assert total["cut_m3"] + total["fill_m3"] < 60 * 2 * 10 * 0.1 * SURVEY_FOOT**3


def test_a_cubic_yard(tmp_path, volumes, earthwork):
    """9 × 3 ft, 1 ft thick, without a CRS: 27 ft³, one cubic yard; the page says so in yards."""
    write_raster(tmp_path / "a.tif", np.zeros((3, 9)), cell=1.0)
    write_raster(tmp_path / "b.tif", np.ones((3, 9)), cell=1.0)
    site = write_site(tmp_path, '[ground]\nexisting = "a.tif"\nfinished = "b.tif"\n', units="us")
    assert volumes(site)["total"]["fill_m3"] == pytest.approx(YARD3, rel=1e-12)
    document = earthwork("volumes", site, "--json").document
    assert document["display_units"] == "us"
    page = earthwork("volumes", site, "--quiet").stdout
    assert "yd³" in page
    assert "m³" not in page


def test_metric_heights_on_a_map_in_feet(tmp_path, volumes):
    """Elevations in metres on State Plane feet: 1 m over 300 × 300 survey feet."""
    files = slab(tmp_path, crs="EPSG:2274", corner=(2_006_400.0, 613_000.0), cell=10.0, thickness=1.0)
    text = "[ground]\n" + "\n".join(f'{k} = {{ file = "{v.name}", vertical_unit = "m" }}' for k, v in files.items())
    found = volumes(write_site(tmp_path, text, units="us"))
    area = 90_000 * SURVEY_FOOT**2 * found["grid"]["ground_scale"] ** 2
    assert found["total"]["fill_m3"] == pytest.approx(area * 1.0, rel=1e-12)


def test_feet_and_metres_of_height_meet(tmp_path, volumes):
    """10 m of ground and 32.808399 ft of plan are the same height."""
    write_raster(tmp_path / "a.tif", np.full((9, 9), 10.0), cell=1.0)
    write_raster(tmp_path / "b.tif", np.full((9, 9), 10.0 / FOOT), cell=1.0)
    text = '[ground]\nexisting = "a.tif"\nfinished = { file = "b.tif", vertical_unit = "ft" }\n'
    total = volumes(write_site(tmp_path, text))["total"]
    assert total["cut_m3"] + total["fill_m3"] < 1e-9


@pytest.mark.parametrize(
    ("latitude", "northing", "shrinks"), [(41.402634, 5_070_000, 0.75008067), (60.0, 8_399_737.9, 0.5)]
)
def test_web_mercator(tmp_path, earthwork, latitude, northing, shrinks):
    """A map metre is cos φ of a ground metre: 0.75008067 at 41.402634°, a half at 60° (published; sphere).

    On the ellipsoid the two differ by up to 0.4 %; elevation is zero.
    """
    y = 6378137 * np.log(np.tan(np.pi / 4 + np.radians(latitude) / 2))
    assert y == pytest.approx(northing, rel=0.01)
    files = slab(tmp_path, crs="EPSG:3857", corner=(300_000.0, y + 15), cell=1.0, thickness=2.0)
    ran = earthwork("volumes", "--existing", files["existing"], "--finished", files["finished"], "--json")
    grid, total = ran.result["grid"], ran.result["total"]
    assert grid["ground_scale"] == pytest.approx(shrinks, rel=4e-3)
    assert total["area_m2"] == pytest.approx(900 * shrinks**2, rel=8e-3)
    assert total["fill_m3"] == pytest.approx(2 * total["area_m2"], rel=1e-12)
    assert "web-mercator" in ran.warning_codes


@pytest.mark.parametrize(("height", "factor"), [(200, 0.999969), (500, 0.999921), (1000, 0.999843), (2000, 0.999686)])
def test_elevation_factor(tmp_path, volumes, height, factor):
    """Ground over map grows with height as (R + h) / R; factors from a surveying table (R = 6,371 km), six digits."""
    scales = []
    for i, base in enumerate((0.0, float(height))):
        folder = tmp_path / str(i)
        folder.mkdir()
        files = slab(folder, crs="EPSG:26914", corner=(500_000.0, 4_461_000.0), cell=1.0, thickness=0.0, base=base)
        scales.append(volumes(**files)["grid"]["ground_scale"])
    # Earth's radius of curvature differs from 6,371 km by up to half a percent.
    assert scales[0] / scales[1] == pytest.approx(factor, abs=0.006 * (1 - factor) + 6e-7)
    # On the central meridian of a UTM zone the grid scale factor is 0.9996 by definition.
    assert scales[0] == pytest.approx(1 / 0.9996, rel=1e-6)


def test_scale_of_ones_own(tmp_path, volumes):
    """A stated ground scale, as on a job with a combined factor of 0.999957 (a surveying text): areas by its square."""
    slab(tmp_path, crs="EPSG:2274", corner=(2_006_400.0, 613_000.0), cell=10.0, thickness=3.0)
    text = f'[ground]\nexisting = "a.tif"\nfinished = "b.tif"\nground_scale = {1 / 0.999957!r}\n'
    found = volumes(write_site(tmp_path, text, units="us"))
    assert found["grid"]["ground_scale"] == pytest.approx(1 / 0.999957, rel=1e-12)
    assert found["total"]["fill_m3"] == pytest.approx(270_000 * SURVEY_FOOT**3 / 0.999957**2, rel=1e-12)


def test_json_is_the_same_in_both_unit_systems(tmp_path, earthwork):
    """JSON is SI whatever the display; --units changes only what people read."""
    rough = np.random.default_rng(5).uniform(0, 3, (30, 30))
    write_raster(tmp_path / "a.tif", rough, crs="EPSG:26914", corner=(500_000.0, 4_461_000.0))
    write_raster(tmp_path / "b.tif", np.full((30, 30), 1.5), crs="EPSG:26914", corner=(500_000.0, 4_461_000.0))
    files = ["--existing", tmp_path / "a.tif", "--finished", tmp_path / "b.tif", "--json"]
    metric = earthwork("volumes", *files, "--units", "metric").document
    us = earthwork("volumes", *files, "--units", "us").document
    assert metric["result"] == us["result"]
    assert (metric["display_units"], us["display_units"]) == ("metric", "us")


@pytest.mark.parametrize(
    "written",
    ["100", '"100 lb/ft3"', '"1601.846337 kg/m3"', '"15.7087464 kN/m3"', '"2700 lb/yd3"', '"1.601846337 t/m3"'],
)
def test_density_units(tmp_path, earthwork, written):
    """1 lb/ft³ is 16.01846337 kg/m³, 0.157087464 kN/m³ and 27 lb/yd³ (by definition of pound, foot and gravity)."""
    write_raster(tmp_path / "a.tif", np.zeros((3, 3)))
    text = f"""
[ground]
existing = "a.tif"
finished = {{ level = 1.0 }}
[material.clay]
use = "waste"
bank.dry_density = {written}
loose.swell_percent = 25
[fill]
relative_compaction = 95
expected_compaction = 97
"""
    (clay,) = earthwork("soil", write_site(tmp_path, text, units="us"), "--json").result["materials"]
    assert clay["bank_dry_density_kg_m3"] == pytest.approx(1601.846337, rel=1e-8)
    assert clay["load_factor"] == pytest.approx(0.8, rel=1e-12)
