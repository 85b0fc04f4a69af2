"""Small raster files for tests, written as a user's program would."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import rasterio
from rasterio.transform import Affine

UTM = "EPSG:32611"


def write_raster(
    path: Path,
    values: Any,
    *,
    west: float = 500_000.0,
    north: float = 4_100_000.0,
    cell: float | tuple[float, float] = 1.0,
    crs: str | None = UTM,
    dtype: str = "float32",
    south_up: bool = False,
    transform: Affine | None = None,
    scale: float = 1.0,
    offset: float = 0.0,
    unit: str = "",
    mask: Any = None,
    **options: Any,
) -> Path:
    """Write rows from north to south (the file stores them the other way round when ``south_up``)."""
    bands = np.atleast_3d(np.asarray(values, dtype=dtype).T).T
    count, rows, columns = bands.shape
    east, tall = (cell, cell) if isinstance(cell, int | float) else cell
    if transform is None:
        transform = Affine(east, 0, west, 0, -tall, north)
        if south_up:
            transform = Affine(east, 0, west, 0, tall, north - rows * tall)
    stored = bands[:, ::-1] if south_up else bands
    facts = {"driver": "GTiff", "height": rows, "width": columns, "count": count, "dtype": dtype, "crs": crs}
    with (
        rasterio.Env(GDAL_TIFF_INTERNAL_MASK=True),
        rasterio.open(path, "w", **facts, transform=transform, **options) as file,
    ):
        file.write(stored)
        if scale != 1.0 or offset != 0.0:
            file.scales, file.offsets = (scale,) * count, (offset,) * count
        if unit:
            file.units = (unit,) * count
        if mask is not None:
            file.write_mask(np.asarray(mask, dtype=bool))
    return path
