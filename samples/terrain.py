"""Invented ground for the sample sites: rolling hills, draws, roughness, and platforms graded into them.

The makers of the samples (``make_larkspur.py``, ``make_cooper.py``) use these functions. Everything is
deterministic: the same script gives the same elevations. Only numpy, shapely, rasterio and pyogrio are used:
the samples are made by other means than the program that they try.
"""

from __future__ import annotations

import csv
from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pyogrio
import rasterio
import shapely
from rasterio.features import shapes as outlines_of
from rasterio.transform import from_origin
from shapely import LineString, Polygon
from shapely.affinity import rotate, translate
from shapely.geometry import box, shape

#: Elevations are rounded to this, as in a survey; a binary fraction, which float32 holds exactly.
QUANTUM = 1 / 128
_FIXED_DATE = "2026-01-05T00:00:00.000Z"


@dataclass(frozen=True)
class Lattice:
    """A north-up grid of square cells, ``west`` and ``north`` the outer corner of the first."""

    west: float
    north: float
    cell: float
    rows: int
    columns: int

    def centres(self) -> tuple[np.ndarray, np.ndarray]:
        """Easting and northing of the cell centres, each (rows, columns)."""
        east = self.west + (np.arange(self.columns) + 0.5) * self.cell
        north = self.north - (np.arange(self.rows) + 0.5) * self.cell
        return np.meshgrid(east, north)

    def cell_at(self, east: float, north: float) -> tuple[int, int]:
        """Row and column of the cell that holds a place."""
        return int((self.north - north) / self.cell), int((east - self.west) / self.cell)

    @property
    def transform(self) -> rasterio.Affine:
        return from_origin(self.west, self.north, self.cell, self.cell)

    @property
    def outline(self) -> Polygon:
        return box(self.west, self.north - self.rows * self.cell, self.west + self.columns * self.cell, self.north)


# --- natural ground ---


def hill(
    east: np.ndarray,
    north: np.ndarray,
    *,
    at: tuple[float, float],
    height: float,
    radii: tuple[float, float],
    turn: float = 0.0,
) -> np.ndarray:
    """A smooth hill, or a hollow with a negative height; ``turn`` in degrees anticlockwise from east."""
    angle = np.radians(turn)
    along = (east - at[0]) * np.cos(angle) + (north - at[1]) * np.sin(angle)
    across = -(east - at[0]) * np.sin(angle) + (north - at[1]) * np.cos(angle)
    return height * np.exp(-((along / radii[0]) ** 2) - (across / radii[1]) ** 2)


def draw(
    east: np.ndarray,
    north: np.ndarray,
    *,
    line: Sequence[tuple[float, float]],
    depths: tuple[float, float],
    widths: tuple[float, float],
) -> np.ndarray:
    """Depth of a draw along a line; depth and half-width grow from the head to the mouth."""
    path = smooth_line(line)
    points = shapely.points(east, north)
    share = shapely.line_locate_point(path, points, normalized=True)
    away = shapely.distance(path, points)
    depth = depths[0] + (depths[1] - depths[0]) * share**0.7
    width = widths[0] + (widths[1] - widths[0]) * share
    return depth / (1 + (away / width) ** 2) ** 1.5


def smooth_line(line: Sequence[tuple[float, float]], turns: int = 4) -> LineString:
    """A polyline with its corners cut again and again, ends kept, until it bends like a stream or a road."""
    points = np.asarray(line, float)
    for _ in range(turns):
        near, far = points[:-1], points[1:]
        cut = np.empty((2 * len(near), 2))
        cut[0::2] = 0.75 * near + 0.25 * far
        cut[1::2] = 0.25 * near + 0.75 * far
        points = np.vstack([points[:1], cut, points[-1:]])
    return LineString(points)


def roughness(
    lattice: Lattice, *, seed: int, wavelength: float, amplitude: float, steepness: float = 1.6
) -> np.ndarray:
    """Random relief of a given standard deviation: a power-law spectrum that is flat above ``wavelength``."""
    noise = np.random.default_rng(seed).standard_normal((lattice.rows, lattice.columns))
    frequency = np.hypot(
        np.fft.fftfreq(lattice.rows, lattice.cell)[:, None],
        np.fft.rfftfreq(lattice.columns, lattice.cell)[None, :],
    )
    spectrum = np.fft.rfft2(noise) / (1 + (frequency * wavelength) ** 2) ** (steepness / 2)
    relief = np.fft.irfft2(spectrum, noise.shape)
    return relief * (amplitude / relief.std())


def rounded(elevation: np.ndarray) -> np.ndarray:
    """Elevations on the quantum of the survey, as float32."""
    return (np.round(elevation / QUANTUM) * QUANTUM).astype(np.float32)


# --- graded platforms ---


@dataclass(frozen=True)
class Platform:
    """An area built to a grade, with side slopes (H:V) that run out until they daylight.

    ``grade`` gives the elevation of the platform at places inside it, from (n, 2) coordinates to (n,).
    """

    name: str
    area: Polygon
    grade: Callable[[np.ndarray], np.ndarray]
    cut_slope: float = 2.0
    fill_slope: float = 2.0


def level(elevation: float) -> Callable[[np.ndarray], np.ndarray]:
    """Grade of a level platform."""
    return lambda places: np.full(len(places), elevation)


def tilted(at: tuple[float, float], elevation: float, slope: tuple[float, float]) -> Callable[[np.ndarray], np.ndarray]:
    """Grade of a plane; ``slope`` is rise per unit east and per unit north."""
    return lambda places: elevation + (places[:, 0] - at[0]) * slope[0] + (places[:, 1] - at[1]) * slope[1]


def profile(
    line: LineString, stations: Sequence[float], elevations: Sequence[float]
) -> Callable[[np.ndarray], np.ndarray]:
    """Grade of a road: straight between stations (shares of the length, 0 to 1) along its centre line."""
    return lambda places: np.interp(
        shapely.line_locate_point(line, shapely.points(places), normalized=True), stations, elevations
    )


def grade_into(existing: np.ndarray, lattice: Lattice, platforms: Iterable[Platform]) -> np.ndarray:
    """The finished grade: platforms and their slopes until these daylight, existing ground elsewhere.

    The fill slope of a platform is a cone that falls from the nearest place of its edge, the cut slope one
    that rises. Existing ground is held between the highest fill cone and the lowest cut cone. Where platforms
    overlap, the later one wins.
    """
    east, north = lattice.centres()
    places = np.column_stack([east.ravel(), north.ravel()])
    points = shapely.points(places)
    lowest = np.full(len(points), -np.inf)
    highest = np.full(len(points), np.inf)
    inside = np.full(len(points), np.nan)
    for platform in platforms:
        nearest = shapely.get_coordinates(shapely.shortest_line(platform.area, points)).reshape(-1, 2, 2)[:, 0]
        away = shapely.distance(platform.area, points)
        grade = platform.grade(nearest)
        lowest = np.maximum(lowest, grade - away / platform.fill_slope)
        highest = np.minimum(highest, grade + away / platform.cut_slope)
        inside = np.where(away == 0, platform.grade(places), inside)
    finished = np.minimum(np.maximum(existing.ravel(), lowest), highest)
    return np.where(np.isnan(inside), finished, inside).reshape(existing.shape)


def changed_area(existing: np.ndarray, finished: np.ndarray, lattice: Lattice, *, margin: float) -> shapely.Geometry:
    """Outline of the ground that changes by more than 1 cm, with a working margin, holes closed."""
    changed = (np.abs(finished - existing) > 0.01).astype(np.uint8)
    parts = [shape(outline) for outline, _ in outlines_of(changed, changed == 1, transform=lattice.transform)]
    grown = shapely.union_all(parts).buffer(margin, quad_segs=4).simplify(lattice.cell / 2)
    solid = [Polygon(part.exterior) for part in getattr(grown, "geoms", [grown])]
    return shapely.set_precision(shapely.union_all(solid), 0.01)


def rectangle(centre: tuple[float, float], length: float, width: float, turn: float = 0.0) -> Polygon:
    """A rectangle; ``turn`` in degrees, anticlockwise."""
    shape_ = rotate(box(-length / 2, -width / 2, length / 2, width / 2), turn, origin=(0, 0))
    return shapely.set_precision(translate(shape_, *centre), 0.001)


# --- files ---


def write_raster(path: Path, elevation: np.ndarray, lattice: Lattice, *, crs: str, title: str, unit: str = "") -> None:
    """A tiled, compressed float32 GeoTIFF with its vertical unit."""
    profile_ = {
        "driver": "GTiff", "width": lattice.columns, "height": lattice.rows, "count": 1, "dtype": "float32",
        "crs": crs, "transform": lattice.transform, "nodata": -9999.0, "tiled": True, "blockxsize": 256,
        "blockysize": 256, "compress": "DEFLATE", "predictor": 3, "zlevel": 9,
    }  # fmt: skip
    with rasterio.open(path, "w", **profile_) as target:
        target.write(np.where(np.isnan(elevation), -9999.0, elevation).astype(np.float32), 1)
        if unit:
            target.set_band_unit(1, unit)
        target.set_band_description(1, title)


def write_layers(path: Path, layers: dict[str, list[tuple[shapely.Geometry, dict]]], *, crs: str) -> None:
    """A GeoPackage of named layers; each feature is a geometry with its attributes."""
    path.unlink(missing_ok=True)
    pyogrio.set_gdal_config_options({"OGR_CURRENT_DATE": _FIXED_DATE})
    for name, features in layers.items():
        fields = list(features[0][1])
        pyogrio.raw.write(
            path,
            geometry=shapely.to_wkb(np.array([geometry for geometry, _ in features], dtype=object)),
            field_data=[_column([row[field] for _, row in features]) for field in fields],
            fields=fields,
            geometry_type=features[0][0].geom_type,
            crs=crs,
            layer=name,
            append=path.exists(),
            driver="GPKG",
            layer_options={"SPATIAL_INDEX": "NO"},
        )
    pyogrio.set_gdal_config_options({"OGR_CURRENT_DATE": None})


def _column(values: list) -> np.ndarray:
    return np.array(values, dtype=object) if isinstance(values[0], str) else np.array(values)


def write_table(path: Path, rows: list[dict]) -> None:
    """A CSV with a header row."""
    with path.open("w", newline="", encoding="utf-8") as target:
        table = csv.DictWriter(target, list(rows[0]), lineterminator="\n")
        table.writeheader()
        table.writerows(rows)
