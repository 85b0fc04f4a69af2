"""Grades that the program builds from pads against those that the makers of the samples build with shapely."""

import importlib.util
import sys

import numpy as np
import pytest
import rasterio

import earthwork
from tests.samples.ground_by_numpy import SAMPLES, Plan

FOLDER = SAMPLES / "larkspur-campus"


@pytest.fixture(scope="module")
def terrain():
    spec = importlib.util.spec_from_file_location("terrain", SAMPLES / "terrain.py")
    module = importlib.util.module_from_spec(spec)
    sys.modules["terrain"] = module
    spec.loader.exec_module(module)
    yield module
    del sys.modules["terrain"]


def test_campus_built_by_the_program():
    """Houses, court, basin and drives: the same cut and fill as finished.tif has, but for the ends of the drives."""
    plan, built = Plan(FOLDER), earthwork.volumes(FOLDER / "design.toml").to_dict()
    depth = (plan.elevation("finished") - plan.elevation("existing"))[plan.inside("limits")]
    cell = built["grid"]["cell_m"] ** 2
    assert built["total"]["cut_m3"] == pytest.approx(-depth[depth < 0].sum() * cell, rel=2e-3)
    assert built["total"]["fill_m3"] == pytest.approx(depth[depth > 0].sum() * cell, rel=2e-3)
    assert built["total"]["max_cut_m"] == pytest.approx(-depth.min(), abs=0.01)
    assert built["total"]["max_fill_m"] == pytest.approx(depth.max(), abs=0.01)


def test_level_pads_with_round_corners(terrain, tmp_path):
    """Five level pads, slopes 2:1 in cut and 3:1 in fill: cell by cell the same cones, by quite other means."""
    plan = Plan(FOLDER)
    with rasterio.open(FOLDER / "existing.tif") as source:
        profile, existing = source.profile, source.read(1).astype(float)
    lattice = terrain.Lattice(profile["transform"].c, profile["transform"].f, 1.0, *existing.shape)
    columns, shapes = plan.features("pads")
    platforms = [
        terrain.Platform(name, shape, terrain.level(grade), cut_slope=2.0, fill_slope=3.0)
        for name, grade, shape in zip(columns["pad"], columns["grade"], shapes, strict=True)
    ]
    finished = terrain.grade_into(existing, lattice, platforms)
    depth = finished - existing
    site = tmp_path / "site.toml"
    site.write_text(
        f"""
[site]
name = "pads alone"
units = "metric"
[ground]
existing = '{(FOLDER / "existing.tif").as_posix()}'
ground_scale = 1.0
[design]
pads = {{ file = '{(FOLDER / "plan.gpkg").as_posix()}', layer = "pads" }}
name = "pad"
elevation = "grade"
elevation_is = "finished"
cut_slope = 2.0
fill_slope = 3.0
""",
        "utf-8",
    )
    built = earthwork.volumes(site).to_dict()
    assert built["unsplit"]["cut_m3"] == pytest.approx(-depth[depth < 0].sum(), rel=1e-6)
    assert built["unsplit"]["fill_m3"] == pytest.approx(depth[depth > 0].sum(), rel=1e-6)
    assert built["total"]["cut_area_m2"] + built["total"]["fill_area_m2"] == pytest.approx(
        (np.abs(depth) > 0).sum(), rel=2e-3
    )
