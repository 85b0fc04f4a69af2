"""A site whose lifts and water can be worked out by hand, for the tests of both."""

from __future__ import annotations

import copy
from pathlib import Path

import numpy as np
import rasterio
from rasterio.transform import from_origin

from earthwork.site import Site, check_site

#: 100 m × 60 m of fill, 1 m high; cut 2 m deep over 60 m × 60 m. Silt: fill dry density 0.95 × 1800 = 1710 kg/m³,
#: from 8 to 15 % of water: 119.7 L/m³; 1500 kg/m³ in the bank, so that 6000 m³ of fill take 6840 bank m³ of the 7200.
DOCUMENT = {
    "site": {"name": "Hand", "units": "metric"},
    "ground": {"existing": "existing.tif", "finished": "finished.tif", "ground_scale": 1.0},
    "stratum": [{"material": "silt"}],
    "material": {
        "silt": {
            "use": "fill", "specific_gravity": 2.7,
            "bank": {"dry_density": 1500, "water_content": 8.0}, "loose": {"dry_density": 1200},
            "proctor": {"method": "ASTM D698", "max_dry_density": 1800, "optimum_water_content": 15.0},
        },
    },
    "fill": {"relative_compaction": 95, "expected_compaction": 95, "lift_thickness": 0.2},
    "haul": {"truck": {"heaped_volume": 12, "payload": 15}},
    "water": {
        "placing_rate": 1000, "work_hours": 10, "evaporation": 5.0, "open_area": 8000, "waste_percent": 5,
        "dust": {"area": 5000, "rate": 1.0, "passes_per_day": 4},
        "supply": {"flow": 300, "hours": 24}, "tank": {"volume": 100000},
        "truck": {"capacity": 12000, "fill_flow": 3000, "travel_time": 14, "spread_time": 6, "efficiency": 0.8},
    },
}  # fmt: skip


def write_ground(folder: Path) -> None:
    x = np.arange(200) + 0.5
    fill = ((x > 20) & (x < 120))[None, :] & ((x > 10) & (x < 70))[:, None]
    cut = ((x > 130) & (x < 190))[None, :] & ((x > 10) & (x < 70))[:, None]
    existing = np.full((80, 200), 50.0)
    finished = existing + 1.0 * fill[:80] - 2.0 * cut[:80]
    profile = {"driver": "GTiff", "height": 80, "width": 200, "count": 1, "dtype": "float64", "crs": "EPSG:32614",
               "transform": from_origin(500_000, 4_400_000, 1, 1)}  # fmt: skip
    for name, array in (("existing", existing), ("finished", finished)):
        with rasterio.open(folder / f"{name}.tif", "w", **profile) as file:
            file.write(array, 1)


def site(folder: Path, changes: dict | None = None, *, without: tuple[str, ...] = ()) -> Site:
    """The site with some keys changed (``"water.supply.flow": 100``) or tables taken out."""
    write_ground(folder)
    document = copy.deepcopy(DOCUMENT)
    for key in without:
        _parent(document, key).pop(key.split(".")[-1], None)
    for key, value in (changes or {}).items():
        _parent(document, key)[key.split(".")[-1]] = value
    return check_site(document, folder)


def _parent(document: dict, key: str) -> dict:
    for step in key.split(".")[:-1]:
        document = document.setdefault(step, {})
    return document
