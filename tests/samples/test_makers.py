"""The scripts make what lies in the repository, and it stays small."""

import subprocess
import sys

import numpy as np
import pyogrio
import pytest
import rasterio
import shapely

from tests.samples.ground_by_numpy import SAMPLES

MAKERS = {"larkspur-campus": "make_larkspur.py", "cooper-ridge": "make_cooper.py"}


@pytest.fixture(scope="module", params=MAKERS)
def made(request, tmp_path_factory):
    folder = tmp_path_factory.mktemp(request.param)
    subprocess.run([sys.executable, SAMPLES / MAKERS[request.param], folder], check=True, timeout=120)
    return SAMPLES / request.param, folder


def test_rasters_are_made_anew(made):
    kept, new = made
    rasters = sorted(kept.glob("*.tif"))
    assert rasters
    for path in rasters:
        with rasterio.open(path) as a, rasterio.open(new / path.name) as b:
            assert a.profile == b.profile
            assert a.units == b.units
            # Another build of numpy may round a value the other way: by one quantum of the survey, no more.
            assert np.abs(a.read(1) - b.read(1)).max() <= 1 / 128


def test_plan_is_made_anew(made):
    kept, new = made
    layers = [name for name, _ in pyogrio.list_layers(kept / "plan.gpkg")]
    assert layers == [name for name, _ in pyogrio.list_layers(new / "plan.gpkg")]
    for layer in layers:
        before, after = (pyogrio.raw.read(folder / "plan.gpkg", layer=layer) for folder in (kept, new))
        assert before[0]["crs"] == after[0]["crs"]
        for column, again in zip(before[3], after[3], strict=True):
            assert list(column) == list(again)
        ours, theirs = shapely.from_wkb(before[2]), shapely.from_wkb(after[2])
        assert shapely.is_valid(ours).all()
        assert shapely.hausdorff_distance(ours, theirs).max() < 0.05


def test_tables_are_made_anew(made):
    kept, new = made
    tables = sorted((new / "lab").glob("*.csv"))
    assert tables
    for path in tables:
        assert path.read_text("utf-8") == (kept / "lab" / path.name).read_text("utf-8")


@pytest.mark.parametrize("name", MAKERS)
def test_samples_stay_small(name):
    assert sum(path.stat().st_size for path in (SAMPLES / name).rglob("*") if "out" not in path.parts) < 1_500_000


@pytest.mark.parametrize("name", MAKERS)
def test_readme_names_every_file_and_layer(name):
    text = (SAMPLES / name / "README.md").read_text("utf-8")
    for path in [*(SAMPLES / name).glob("*.t*"), *(SAMPLES / name / "lab").glob("*.csv")]:
        assert path.name in text, path.name
    for layer, _ in pyogrio.list_layers(SAMPLES / name / "plan.gpkg"):
        assert f"`{layer}`" in text, layer
