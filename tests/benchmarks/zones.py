"""Exact zones: `volumes` with Z zones on N × N cells against the plain pass, in time and peak memory.

    python tests/benchmarks/zones.py FOLDER [N] [Z ...]

Zones are irregular polygons that tile the site. Goal: peak memory at most 400 MB with a thousand zones.
"""

from __future__ import annotations

import sys
from pathlib import Path

import numpy as np
from ground import raster_pair, report, timed


def zone_file(folder: Path, n: int, zones: int) -> Path:
    """Voronoi cells of random points over the site, as GeoPackage; made when it is not there yet."""
    path = folder / f"zones_{n}_{zones}.gpkg"
    if path.exists():
        return path
    import pyogrio.raw
    import shapely

    random = np.random.default_rng(2)
    points = shapely.MultiPoint(random.uniform(0, n, (zones, 2)) + (500_000, 4_400_000 - n))
    site = shapely.box(500_000, 4_400_000 - n, 500_000 + n, 4_400_000)
    cells = shapely.get_parts(shapely.voronoi_polygons(points, extend_to=site))
    cells = shapely.intersection(cells, site)
    names = np.array([f"zone {i + 1}" for i in range(len(cells))], dtype=object)
    pyogrio.raw.write(
        path, shapely.to_wkb(cells), [names], ["name"], geometry_type="Polygon", crs="EPSG:32614", driver="GPKG"
    )
    return path


def main() -> None:
    folder = Path(sys.argv[1])
    n = int(sys.argv[2]) if len(sys.argv) > 2 else 10_000
    existing, finished = raster_pair(folder, n)
    command = [sys.executable, "-m", "earthwork_cli", "volumes", "--existing", str(existing)]
    command += ["--finished", str(finished), "--json", "--quiet"]
    plain = timed(command)
    report(f"no zones, {n}", plain)
    for zones in [int(z) for z in sys.argv[3:]] or [1000]:
        with_zones = timed([*command, "--zones", str(zone_file(folder, n, zones)), "--zone-name", "name"])
        report(f"{zones} zones, {n}", {**with_zones, "ratio": with_zones["wall_s"] / plain["wall_s"]})


if __name__ == "__main__":
    main()
