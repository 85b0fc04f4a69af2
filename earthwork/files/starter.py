"""The starter site of ``earthwork new``: small surfaces and a plan of an invented place, and a commented site file."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np

from earthwork.errors import OutputError
from earthwork.files.output import OutputFolder
from earthwork.files.starter_text import NUMBERS, site_text


@dataclass(frozen=True)
class _Place:
    """Where the starter lies and how large its numbers are: one ``unit`` is a metre, or about three feet."""

    crs: str
    west: float
    north: float
    cell: float
    unit: float
    ground: float  #: elevation of the lowest ground


_PLACES = {
    "metric": _Place("EPSG:32613", 493_200.0, 4_411_800.0, 1.0, 1.0, 1660.0),
    "us": _Place("EPSG:2231", 3_105_000.0, 1_331_000.0, 3.0, 3.25, 5446.0),
}
_ROWS, _COLUMNS = 200, 260
_SLOPE = 2.0


def new(directory: str | Path, *, units: str = "metric") -> Path:
    """Write a commented starter site that runs at once.

    Args:
        directory: a folder that is new or empty.
        units: ``"metric"`` or ``"us"``.

    Returns:
        the path of the site file.

    Raises:
        OutputError: the folder has something in it, or cannot be written.
    """
    directory = Path(directory)
    if units not in NUMBERS:
        raise OutputError(f"units is {units!r}; it must be metric or us")
    if directory.is_dir() and any(directory.iterdir()):
        first = min(p.name for p in directory.iterdir())
        raise OutputError(f"{directory}: is not empty (it has {first}); give a folder that is new or empty")
    place = _PLACES[units]
    existing = existing_ground(place)
    pads = _pads(place)
    with OutputFolder(directory) as folder:
        _write_raster(folder.path("existing.tif"), place, existing)
        _write_raster(folder.path("finished.tif"), place, finished_ground(place, existing, pads))
        _write_plan(folder.path("plan.gpkg"), place, pads)
        pit = (place.west - 300 * place.unit, place.north - 40 * place.unit)
        tip = (place.west + 520 * place.unit, place.north - 380 * place.unit)
        folder.path("site.toml").write_text(site_text(units, pit_at=pit, tip_at=tip), encoding="utf-8")
    return directory / "site.toml"


def _centres(place: _Place) -> tuple[np.ndarray, np.ndarray]:
    """Eastings and northings of the cell centres, each (rows, columns)."""
    east = place.west + (np.arange(_COLUMNS) + 0.5) * place.cell
    north = place.north - (np.arange(_ROWS) + 0.5) * place.cell
    return np.meshgrid(east, north)


def existing_ground(place: _Place) -> np.ndarray:
    """A bench of ground that falls to the south-east, with a knoll and a draw, shape (rows, columns)."""
    east, north = _centres(place)
    x, y = (east - place.west) / place.unit, (place.north - north) / place.unit
    ground = 9.0 - 0.018 * x - 0.012 * y
    ground += 4.2 * np.exp(-(((x - 75) / 42) ** 2 + ((y - 70) / 36) ** 2))
    ground -= 3.0 * np.exp(-(((x - 0.35 * y - 140) / 16) ** 2)) * np.clip((y - 20) / 80, 0, 1)
    ground += 0.25 * np.sin(x / 17) * np.cos(y / 13)
    return (place.ground + ground * place.unit).astype(np.float32)


def _pads(place: _Place) -> list[tuple[str, Any, float]]:
    """(name, polygon, elevation) of the hall and the yard."""
    import shapely

    def box(x0: float, y0: float, x1: float, y1: float, turn: float) -> Any:
        shape = shapely.affinity.rotate(shapely.box(x0, -y1, x1, -y0), turn)
        shape = shapely.affinity.scale(shape, place.unit, place.unit, origin=(0, 0))
        return shapely.affinity.translate(shape, place.west, place.north)

    return [
        ("hall", box(56, 52, 116, 96, 6.0), place.ground + 8.4 * place.unit),
        ("yard", box(128, 84, 212, 146, 6.0), place.ground + 4.7 * place.unit),
    ]


def finished_ground(place: _Place, existing: np.ndarray, pads: list[tuple[str, Any, float]]) -> np.ndarray:
    """Level pads, with slopes of two to one from their edges to the existing ground; elsewhere the existing ground."""
    import shapely

    east, north = _centres(place)
    points = shapely.points(east.ravel(), north.ravel())
    finished = existing.astype(np.float64)
    for _, shape, elevation in pads:
        rise = shapely.distance(points, shape).reshape(existing.shape) / _SLOPE
        finished = np.clip(finished, elevation - rise, elevation + rise)
    return finished.astype(np.float32)


def _write_raster(path: Path, place: _Place, values: np.ndarray) -> None:
    import rasterio
    from affine import Affine

    with rasterio.open(
        path,
        "w",
        driver="GTiff",
        width=_COLUMNS,
        height=_ROWS,
        count=1,
        dtype="float32",
        crs=place.crs,
        transform=Affine(place.cell, 0.0, place.west, 0.0, -place.cell, place.north),
        nodata=-9999.0,
        compress="DEFLATE",
        predictor=3,
        tiled=True,
        blockxsize=128,
        blockysize=128,
    ) as file:
        file.write(values, 1)


def _write_plan(path: Path, place: _Place, pads: list[tuple[str, Any, float]]) -> None:
    import pandas as pd
    import pyproj
    import shapely

    from earthwork.files.gis import write_shapes

    crs = pyproj.CRS(place.crs)
    south = place.north - _ROWS * place.cell
    east = place.west + _COLUMNS * place.cell
    edge = 4 * place.cell
    limits = shapely.box(place.west + edge, south + edge, east - edge, place.north - edge)
    middle = place.west + 122 * place.unit
    grading = shapely.union_all([shape.buffer(14 * place.unit) for _, shape, _ in pads]).intersection(limits)
    phases = [
        ("1 hall", limits.intersection(shapely.box(place.west, south, middle, place.north))),
        ("2 yard", limits.intersection(shapely.box(middle, south, east, place.north))),
    ]
    names = [name for name, _, _ in pads]
    write_shapes(path, "pads", [shape for _, shape, _ in pads], pd.DataFrame({"pad": names}), crs=crs)
    write_shapes(path, "limits", [limits], pd.DataFrame({"name": ["limits"]}), crs=crs, append=True)
    write_shapes(path, "grading", [grading], pd.DataFrame({"name": ["grading"]}), crs=crs, append=True)
    table = pd.DataFrame({"phase": [name for name, _ in phases]})
    write_shapes(path, "phases", [shape for _, shape in phases], table, crs=crs, append=True)
