"""The files that a site names."""

from earthwork.site.inputs import named_files
from earthwork.site.model import SiteModel


def _site(**tables):
    return SiteModel.model_validate(
        {
            "site": {"name": "x", "units": "metric"},
            "ground": {"existing": "a.tif", "finished": {"level": 3.0}},
            **tables,
        }
    )


def test_finds_surfaces_areas_and_test_files_wherever_they_stand():
    site = _site(
        stratum=[{"material": "loess", "bottom": {"file": "rock.tif"}}, {"material": "shale"}],
        section=[{"name": "a", "thickness": 0.3, "area": {"file": "plan.gpkg", "layer": "pavement"}}],
        material={
            "loess": {
                "use": "fill",
                "bank": {"tests": "lab/bank.csv"},
                "proctor": {"method": "ASTM D698", "tests": "lab/proctor.csv"},
            }
        },
    )
    assert named_files(site) == [
        ("ground.existing.file", "a.tif"),
        ("section[1].area.file", "plan.gpkg"),
        ("stratum[1].bottom.file", "rock.tif"),
        ("material.loess.bank.tests", "lab/bank.csv"),
        ("material.loess.proctor.tests", "lab/proctor.csv"),
    ]


def test_names_of_other_things_are_no_files():
    assert named_files(_site(zones={"area": "zones.geojson", "name": "phase"})) == [
        ("ground.existing.file", "a.tif"),
        ("zones.area.file", "zones.geojson"),
    ]
