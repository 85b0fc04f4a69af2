"""Writers for maps: depth rasters as GeoTIFF, shapes with their results as GeoPackage."""

from __future__ import annotations

import shutil
import threading
import warnings
from collections.abc import Iterator, Sequence
from contextlib import contextmanager, suppress
from math import ceil
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from earthwork.errors import OutputError
from earthwork.ground.grid import Grid, Window

if TYPE_CHECKING:
    import pandas

_BLOCK = 512
_NODATA = -9999.0
#: With less room than this on the disk, a file that is cut off was cut off by it.
_FULL_BYTES = 200_000
#: Unfinished blocks kept in memory; beyond it the fullest go to the file and are completed there.
_PENDING_BYTES = 32_000_000


class DepthRasterWriter:
    """A tiled, DEFLATE-compressed float32 GeoTIFF with overviews, written window by window in any order.

    Windows may come from several threads at a time and need not follow the blocks of the file: blocks are put
    together in memory and written once, when they are whole. Cells that no window covers become no data.

    Args:
        path: the file; it must be finished with :meth:`finish`, or given up with :meth:`abandon`.
        grid: the grid of the values.
        description: of the band, as a GIS shows it.
        unit: of the band.
        factor: what the arrays are multiplied by to give that unit.
    """

    def __init__(self, path: Path, grid: Grid, *, description: str, unit: str, factor: float = 1.0) -> None:
        import rasterio
        from affine import Affine

        self.grid = grid
        self.factor = np.float32(factor)
        self._lock = threading.Lock()
        self._pending: dict[tuple[int, int], tuple[np.ndarray, int]] = {}
        self._early: dict[tuple[int, int], int] = {}
        self._most = max(8, _PENDING_BYTES // (_BLOCK * _BLOCK * 4))
        self._env = rasterio.Env(GDAL_CACHEMAX=32_000_000, GTIFF_SRS_SOURCE="EPSG")
        self._path = path
        with self._env:
            self._file = rasterio.open(
                path,
                "w+",
                driver="GTiff",
                width=grid.columns,
                height=grid.rows,
                count=1,
                dtype="float32",
                crs=grid.crs.to_wkt() if grid.crs is not None else None,
                transform=Affine(grid.cell_east, 0.0, grid.west, 0.0, -grid.cell_north, grid.north),
                nodata=_NODATA,
                tiled=True,
                blockxsize=_BLOCK,
                blockysize=_BLOCK,
                compress="DEFLATE",
                predictor=3,
                bigtiff="IF_SAFER",
                num_threads="ALL_CPUS",
                sparse_ok=False,
            )
            self._file.set_band_description(1, description)
            self._file.units = (unit,)

    def write(self, window: Window, values: np.ndarray) -> None:
        """Take the values of a window, shape (height, width), NaN = no data; each cell comes once."""
        values = np.asarray(values, dtype=np.float32) * self.factor
        values[~np.isfinite(values)] = _NODATA
        with self._lock:
            for block_row in range(window.row // _BLOCK, -(-(window.row + window.height) // _BLOCK)):
                for block_column in range(window.column // _BLOCK, -(-(window.column + window.width) // _BLOCK)):
                    self._add((block_row, block_column), window, values)

    def _add(self, block: tuple[int, int], window: Window, values: np.ndarray) -> None:
        row, column, height, width = self._extent(block)
        top, bottom = max(row, window.row), min(row + height, window.row + window.height)
        left, right = max(column, window.column), min(column + width, window.column + window.width)
        array, filled = self._pending.get(block) or self._fresh(block)
        array[top - row : bottom - row, left - column : right - column] = values[
            top - window.row : bottom - window.row, left - window.column : right - window.column
        ]
        filled += (bottom - top) * (right - left)
        self._pending[block] = (array, filled)
        if filled == height * width:
            self._store(block)
        elif len(self._pending) > self._most:
            self._store(max(self._pending, key=lambda b: self._pending[b][1]))

    def _fresh(self, block: tuple[int, int]) -> tuple[np.ndarray, int]:
        row, column, height, width = self._extent(block)
        if block in self._early:
            with self._env:
                stored = self._file.read(1, window=((row, row + height), (column, column + width)))
            return stored, self._early.pop(block)
        return np.full((height, width), _NODATA, dtype=np.float32), 0

    def _extent(self, block: tuple[int, int]) -> tuple[int, int, int, int]:
        row, column = block[0] * _BLOCK, block[1] * _BLOCK
        return row, column, min(_BLOCK, self.grid.rows - row), min(_BLOCK, self.grid.columns - column)

    def _store(self, block: tuple[int, int]) -> None:
        array, filled = self._pending.pop(block)
        row, column, height, width = self._extent(block)
        if filled < height * width:
            self._early[block] = filled
        with _write_errors(self._path), self._env:
            self._file.write(array, 1, window=((row, row + height), (column, column + width)))

    def finish(self) -> None:
        """Write what is left and the overviews, and close the file."""
        import rasterio
        from rasterio.enums import Resampling

        with self._lock:
            for block in sorted(self._pending):
                self._store(block)
            self._file.close()
        levels = overview_levels(self.grid.rows, self.grid.columns)
        self._verify(())
        if not levels:
            return
        with (
            _write_errors(self._path),
            rasterio.Env(
                GDAL_CACHEMAX=16_000_000,
                COMPRESS_OVERVIEW="DEFLATE",
                PREDICTOR_OVERVIEW="3",
                GDAL_TIFF_OVR_BLOCKSIZE=str(_BLOCK),
                GDAL_NUM_THREADS="ALL_CPUS",
            ),
            rasterio.open(self._path, "r+") as file,
        ):
            file.build_overviews(levels, Resampling.average)
        self._verify(levels)

    def _verify(self, levels: Sequence[int]) -> None:
        """Make sure that every block is in the file: a write that fails for want of room is not reported on closing.

        Raises:
            OutputError: the file is cut off.
        """
        import rasterio

        size = self._path.stat().st_size
        with _write_errors(self._path), rasterio.open(self._path) as file:
            for level, factor in enumerate([1, *levels]):
                for name in _block_names(self.grid, factor):
                    offset, length = (
                        file.get_tag_item(f"BLOCK_{what}_{name}", "TIFF", bidx=1, ovr=level - 1 if level else None)
                        for what in ("OFFSET", "SIZE")
                    )
                    if offset is None or length is None or int(offset) + int(length) > size:
                        raise cut_off(self._path)

    def abandon(self) -> None:
        """Close the file unfinished; it is to be removed, so that it does not matter when the disk is full."""
        from rasterio.errors import RasterioError

        with self._lock, suppress(OSError, RasterioError):
            self._pending.clear()
            if not self._file.closed:
                self._file.close()


@contextmanager
def _write_errors(path: Path) -> Iterator[None]:
    """Turn what the raster library raises when it cannot write into one message."""
    from rasterio.errors import BandOverviewError, RasterioError

    try:
        yield
    except (OSError, RasterioError, BandOverviewError) as error:
        raise cut_off(path, error) from None


def _block_names(grid: Grid, factor: int) -> Iterator[str]:
    """Names of the blocks of an overview, as ``column_row``."""
    rows = ceil(ceil(grid.rows / factor) / _BLOCK)
    columns = ceil(ceil(grid.columns / factor) / _BLOCK)
    return (f"{x}_{y}" for y in range(rows) for x in range(columns))


def cut_off(path: Path, error: Exception | None = None) -> OutputError:
    """The error of a file that could not be written whole, with the likeliest reason."""
    if shutil.disk_usage(path.parent).free < _FULL_BYTES:
        return OutputError(f"{path.name}: cannot be written: the disk is full")
    return OutputError(f"{path.name}: cannot be written whole" + (f": {str(error)[:160]}" if error else ""))


def overview_levels(rows: int, columns: int) -> list[int]:
    """Factors of the overviews: halved until the longer side is under a block.

    >>> overview_levels(2000, 600), overview_levels(300, 300)
    ([2, 4], [])
    """
    levels, factor = [], 2
    while max(rows, columns) > _BLOCK * factor // 2:
        levels.append(factor)
        factor *= 2
    return levels


def write_shapes(
    path: Path,
    layer: str,
    shapes: Sequence[Any],
    table: pandas.DataFrame,
    *,
    crs: Any = None,
    append: bool = False,
) -> None:
    """Write shapes with their attributes as a layer of a GeoPackage.

    Args:
        path: the file.
        layer: name of the layer.
        shapes: one shapely geometry for each row of the table.
        table: attributes; texts, numbers and truth values.
        crs: a ``pyproj.CRS``, or None for a local grid.
        append: add the layer to a file that is there.

    Raises:
        OutputError: the file cannot be written.
    """
    import pyogrio
    import pyogrio.raw
    import shapely

    # The format notes when a layer changed; with a fixed time the same layers give the same bytes.
    pyogrio.set_gdal_config_options({"OGR_CURRENT_DATE": "2000-01-01T00:00:00.000Z"})
    fields = [str(name) for name in table.columns]
    kinds = {type(shape).__name__ for shape in shapes}
    several = any(kind.startswith("Multi") for kind in kinds)
    kind = kinds.pop() if len(kinds) == 1 else ("MultiPolygon" if several else "Unknown")
    if kind == "MultiPolygon":
        shapes = [s if type(s).__name__ == "MultiPolygon" else shapely.MultiPolygon([s]) for s in shapes]
    # A local grid has no CRS, and its user has been told so.
    warnings.filterwarnings("ignore", message="'crs' was not provided", module="earthwork")
    try:
        pyogrio.raw.write(
            path,
            geometry=shapely.to_wkb(np.asarray(shapes, dtype=object)),
            field_data=[_field(table[name]) for name in table.columns],
            fields=fields,
            layer=layer,
            driver="GPKG",
            geometry_type=kind + (" Z" if all(shapely.has_z(s) for s in shapes) else ""),
            crs=crs.to_wkt() if crs is not None else None,
            append=append,
        )
    except (pyogrio.errors.DataSourceError, pyogrio.errors.DataLayerError, pyogrio.errors.FeatureError) as error:
        raise cut_off(path, error) from None


def _field(values: pandas.Series) -> np.ndarray:
    """A column as an array that a GeoPackage has a type for: numbers, or texts with None for what is absent."""
    array = values.to_numpy()
    if array.dtype.kind in "iufb":
        return array
    listed = list(values)
    if all(v is None or (isinstance(v, int | float) and not isinstance(v, bool)) for v in listed):
        return np.array([np.nan if v is None else float(v) for v in listed])
    return np.array([None if v is None or v != v else str(v) for v in listed], dtype=object)
