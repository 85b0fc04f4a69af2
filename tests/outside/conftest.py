"""The program as people run it: the command ``earthwork``, its JSON, its exit codes, and files of others."""

from __future__ import annotations

import json
import subprocess
import sys
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import pyogrio
import pytest
import rasterio
import shapely
from rasterio.transform import from_origin

#: Open data of others; the tests that need a set are skipped where it is absent.
DATA = Path(__file__).parents[3] / "shared" / "data"


@dataclass(frozen=True)
class Ran:
    """How a command ended, and what it said."""

    code: int
    stdout: str
    stderr: str

    @property
    def document(self) -> dict[str, Any]:
        """The JSON document; stdout must hold nothing else, and no NaN or infinity."""
        assert self.code == 0, self.stderr
        return json.loads(self.stdout, parse_constant=_no_constant)

    @property
    def result(self) -> dict[str, Any]:
        return self.document["result"]

    @property
    def warning_codes(self) -> list[str]:
        return [warning["code"] for warning in self.document["warnings"]]


def _no_constant(name: str) -> None:
    raise AssertionError(f"{name} in the JSON document")


@pytest.fixture
def earthwork(capfd):
    """Run the command in this process, which saves the start; ``earthwork("volumes", "site.toml", "--json")``."""
    from earthwork_cli.main import main

    def run(*arguments: object) -> Ran:
        capfd.readouterr()
        code = main([str(a) for a in arguments])
        return Ran(code, *capfd.readouterr())

    return run


@pytest.fixture
def volumes(earthwork):
    """``volumes --json`` of two surfaces or of a site file: the result."""

    def run(*arguments: object, existing: object = None, finished: object = None) -> dict[str, Any]:
        files = ["--existing", existing, "--finished", finished] if existing is not None else []
        return earthwork("volumes", *files, *arguments, "--json", "--quiet").result

    return run


def run_process(*arguments: object, cwd: Path) -> Ran:
    """Run the command as a process of its own."""
    done = subprocess.run(
        [sys.executable, "-c", "from earthwork_cli.main import run; run()", *map(str, arguments)],
        cwd=cwd, capture_output=True, text=True, encoding="utf-8", timeout=120,
    )  # fmt: skip
    return Ran(done.returncode, done.stdout, done.stderr)


def data(name: str) -> Path:
    """A folder of open data; skips the test where it is absent."""
    folder = DATA / name
    if not folder.is_dir():
        pytest.skip(f"needs ../shared/data/{name}")
    return folder


def write_raster(
    path: Path,
    elevation: np.ndarray,
    *,
    cell: float | tuple[float, float] = 1.0,
    corner: tuple[float, float] = (500.0, 900.0),
    crs: str | None = None,
    dtype: str = "float64",
    **profile: Any,
) -> Path:
    """A raster with its upper left corner at ``corner``; row 0 is north."""
    values = np.asarray(elevation)
    east, north = cell if isinstance(cell, tuple) else (cell, cell)
    with rasterio.open(
        path, "w", driver="GTiff", height=values.shape[0], width=values.shape[1], count=1, dtype=dtype, crs=crs,
        transform=from_origin(*corner, east, north), **profile,
    ) as target:  # fmt: skip
        target.write(values.astype(dtype), 1)
    return path


def write_polygons(
    path: Path, polygons: Sequence[shapely.Polygon], names: Sequence[str] | None = None, *, crs: str | None = None
) -> Path:
    """A vector file of polygons with the attribute ``name``."""
    names = names or [f"part {i + 1}" for i in range(len(polygons))]
    pyogrio.raw.write(
        path,
        geometry=shapely.to_wkb(np.array(polygons, dtype=object)),
        field_data=[np.array(names, dtype=object)],
        fields=["name"],
        geometry_type="Polygon",
        crs=crs,
        driver={".gpkg": "GPKG", ".geojson": "GeoJSON", ".shp": "ESRI Shapefile"}[path.suffix],
    )
    return path


def write_site(folder: Path, text: str, *, units: str = "metric", name: str = "site.toml") -> Path:
    """A site file of ``[site]`` and the text."""
    path = folder / name
    path.write_text(f'[site]\nname = "Test ground"\nunits = "{units}"\n{text}\n', "utf-8")
    return path


def centres(rows: int, columns: int, cell: float) -> tuple[np.ndarray, np.ndarray]:
    """x to the east and y to the north of the cell centres, from the middle of the raster."""
    x = (np.arange(columns) + 0.5) * cell - columns * cell / 2
    y = rows * cell / 2 - (np.arange(rows) + 0.5) * cell
    return np.meshgrid(x, y)
