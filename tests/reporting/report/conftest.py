"""A small site with hostile names, and its report; the larger sample once for a session."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pyogrio.raw
import pytest
import rasterio
import shapely
from rasterio.transform import from_origin

import earthwork

SAMPLES = Path(__file__).parents[3] / "samples"
#: Names that break what does not escape: markup, quotes, formulas, emoji, line breaks, 300 letters.
HOSTILE = ("<script>alert('x')</script>", '=HYPERLINK("http://x","y")', 'Ω𝄞 "Lot" & co', "L" * 300)

SITE = """
[site]
name = "Quarry </script><b>"
units = "metric"
[ground]
existing = "existing.tif"
finished = "finished.tif"
[zones]
area = {{ file = "plan.gpkg", layer = "zones" }}
name = "zone"
[[strip]]
material = "topsoil"
depth = 0.1
[[over_excavation]]
name = "pads"
depth = 0.5
area = {{ file = "plan.gpkg", layer = "pads" }}
[[stratum]]
material = "{soil}"
[material.topsoil]
use = "topsoil"
bank.dry_density = 1250
bank.water_content = 12
loose.swell_percent = 30
[material."{soil}"]
use = "fill"
specific_gravity = 2.68
bank.dry_density = 1430
bank.water_content = 7.5
loose.dry_density = 1150
proctor = {{ method = "ASTM D698", max_dry_density = 1760, optimum_water_content = 16.0 }}
loss_percent = 2
[fill]
relative_compaction = 95
expected_compaction = 96.5
[pads]
area = {{ file = "plan.gpkg", layer = "pads" }}
name = "pad"
settlement_percent = [0.2, 1.0]
"""
SOIL = "=1+1 <i>clay</i>"


def make_site(directory: Path, soil: str = SOIL) -> Path:
    """A hillside of 60 × 80 cells with two level pads and four zones."""
    directory.mkdir(parents=True, exist_ok=True)
    row, column = np.mgrid[:60, :80]
    existing = 100 + 0.05 * column + 0.4 * np.sin(row / 9.0)
    finished = existing.copy()
    finished[20:40, 10:30] = 101.0
    finished[15:45, 45:70] = 102.4
    for name, values in (("existing.tif", existing), ("finished.tif", finished)):
        with rasterio.open(
            directory / name, "w", driver="GTiff", width=80, height=60, count=1, dtype="float64", crs="EPSG:32614",
            transform=from_origin(512000, 4461060, 1.0, 1.0),
        ) as file:  # fmt: skip
            file.write(values, 1)
    shapes = {
        "zones": [shapely.box(512000 + 20 * i, 4461000, 512020 + 20 * i, 4461060) for i in range(4)],
        "pads": [shapely.box(512010, 4461020, 512030, 4461040), shapely.box(512045, 4461015, 512070, 4461045)],
    }
    for layer, geometry in shapes.items():
        pyogrio.raw.write(
            directory / "plan.gpkg", geometry=shapely.to_wkb(np.array(geometry, dtype=object)),
            field_data=[np.array(HOSTILE[: len(geometry)], dtype=object)], fields=[layer[:-1]], layer=layer,
            driver="GPKG", geometry_type="Polygon", crs="EPSG:32614", append=layer != "zones",
        )  # fmt: skip
    site = directory / "site.toml"
    site.write_text(SITE.format(soil=soil), encoding="utf-8")
    return site


def write_pads(path: Path, names: list[str], grades: list[float]) -> None:
    """The two pads of :func:`make_site` with names and grades, for a ``[design]``."""
    shapes = [shapely.box(512010, 4461020, 512030, 4461040), shapely.box(512045, 4461020, 512060, 4461040)]
    pyogrio.raw.write(
        path, geometry=shapely.to_wkb(np.array(shapes, dtype=object)), fields=["pad", "grade"],
        field_data=[np.array(names, dtype=object), np.array(grades)], driver="GPKG", geometry_type="Polygon",
        crs="EPSG:32614",
    )  # fmt: skip


@pytest.fixture(scope="session")
def hostile_site(tmp_path_factory):
    return make_site(tmp_path_factory.mktemp("hostile"))


@pytest.fixture(scope="session")
def hostile(hostile_site):
    """The report of the small site with hostile names."""
    return earthwork.report(hostile_site)


@pytest.fixture(scope="session")
def sample(tmp_path_factory):
    """The report of the US sample."""
    return earthwork.report(SAMPLES / "cooper-ridge" / "site.toml", out=tmp_path_factory.mktemp("sample") / "report")
