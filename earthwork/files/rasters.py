"""Reads elevations from raster files: what a file says of itself, and windows in metres, NaN for no data."""

from __future__ import annotations

import math
import warnings
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from pyproj import CRS
from rasterio.enums import MaskFlags
from rasterio.errors import NotGeoreferencedWarning, RasterioError
from rasterio.windows import Window as FileWindow

from earthwork.crs import VerticalReference, from_wkt, horizontal_unit_m, parse_crs, vertical_reference
from earthwork.errors import FileError
from earthwork.files.paths import require_file
from earthwork.files.raster_open import open_raster, reason_of
from earthwork.units import FOOT_M, US_SURVEY_FOOT_M

#: Integer types that float32 holds exactly.
_EXACT_IN_FLOAT32 = {"uint8", "int8", "int16", "uint16", "float32", "float16"}

#: Ground on earth lies within these elevations [m], with room for mines and local datums.
_GROUND_M = (-1000.0, 9000.0)

#: Stored values that programs write where they have no data.
_MARKERS = (-9999.0, -10000.0, -32767.0, -32768.0, -99999.0, 9999.0, 32767.0, 65535.0, 99999.0)

#: Elevations beyond this are markers, whatever their value [m].
_ABSURD_M = 1e5


@dataclass(frozen=True)
class RasterInfo:
    """What a raster file says of one of its bands.

    Attributes:
        path: as GDAL opens it (a raster in a zip gets its ``/vsizip/`` name).
        name: as the user knows it.
        rows, columns: shape.
        transform: (a, b, c, d, e, f): easting = a·column + b·row + c, northing = d·column + e·row + f.
        crs: CRS that the file carries, vertical part included, or None.
        dtype: type of the stored values.
        nodata: tagged value for missing data, None where there is none.
        scale, offset: elevation = stored value · scale + offset.
        block: (rows, columns) that are decoded at once.
        unit: unit of the band as the file spells it, "" where it does not say.
        masked: a mask band or alpha band marks missing data.
    """

    path: str
    name: str
    band: int
    rows: int
    columns: int
    transform: tuple[float, float, float, float, float, float]
    crs: CRS | None
    dtype: str
    nodata: float | None
    scale: float
    offset: float
    block: tuple[int, int]
    unit: str
    masked: bool

    @property
    def rotated(self) -> bool:
        """True when rows do not run east: the grid is rotated or sheared."""
        a, b, _, d, e, _ = self.transform
        return abs(b) > 1e-9 * abs(a) or abs(d) > 1e-9 * abs(e)

    @property
    def placed(self) -> bool:
        """False when the file says neither where it lies nor how large its cells are."""
        return self.transform != (1.0, 0.0, 0.0, 0.0, 1.0, 0.0)

    @property
    def south_up(self) -> bool:
        """True when the first row stored is the southernmost; readers turn such files."""
        return self.transform[4] > 0

    @property
    def east_first(self) -> bool:
        """True when the first column stored is the easternmost; readers turn such files."""
        return self.transform[0] < 0

    @property
    def cell_east(self) -> float:
        """Side of a cell along east [CRS unit]."""
        return abs(self.transform[0])

    @property
    def cell_north(self) -> float:
        """Side of a cell along north [CRS unit]."""
        return abs(self.transform[4])

    @property
    def west(self) -> float:
        """Easting of the western edge [CRS unit]."""
        return self.transform[2] + (self.transform[0] * self.columns if self.east_first else 0.0)

    @property
    def north(self) -> float:
        """Northing of the northern edge [CRS unit]."""
        return self.transform[5] + (self.transform[4] * self.rows if self.south_up else 0.0)

    @property
    def bounds(self) -> tuple[float, float, float, float]:
        """(west, south, east, north) of the outer edges [CRS unit]."""
        west, north = self.west, self.north
        return west, north - self.rows * self.cell_north, west + self.columns * self.cell_east, north

    @property
    def vertical(self) -> VerticalReference | None:
        """The vertical part of the CRS, where it has one."""
        return vertical_reference(self.crs)


def raster_info(path: str | Path, *, band: int = 1, what: str = "raster") -> RasterInfo:
    """What a raster file says of one band; no cell is read.

    Args:
        path: any raster that GDAL reads; a zip that holds one raster; a ``/vsizip/…`` name.
        band: from 1.
        what: what the file is to the user, for messages.

    Raises:
        FileError: missing (with the nearest name), not a raster, corrupt, no such band, complex numbers.
    """
    require_file(path, what)
    # not when it is opened: filters of warnings are the process's, and readers open in threads
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", NotGeoreferencedWarning)
        with open_raster(path, what) as dataset:
            return _facts(dataset, str(path), band, what)


def _facts(dataset: Any, name: str, band: int, what: str) -> RasterInfo:
    where = f"{what}: {name}"
    if dataset.count == 0:
        inner = dataset.subdatasets
        hint = f"name one of the rasters in it: {', '.join(inner[:8])}" if inner else "it holds no band"
        raise FileError(f"{where}: not one raster; {hint}")
    if not 1 <= band <= dataset.count:
        bands = "1 band" if dataset.count == 1 else f"{dataset.count} bands"
        raise FileError(f"{where}: band is {band}; it must be 1 to {dataset.count}, since the file has {bands}")
    dtype = str(dataset.dtypes[band - 1])
    if dtype.startswith("complex"):
        raise FileError(f"{where}: band {band} holds complex numbers ({dtype}); elevations must be real numbers")
    a, b, c, d, e, f = tuple(dataset.transform)[:6]
    if a * e - b * d == 0 or not all(math.isfinite(v) for v in (a, b, c, d, e, f)):
        raise FileError(
            f"{where}: the size of its cells is {a:g} × {e:g}; it must not be zero. Repair its georeference"
        )
    flags = dataset.mask_flag_enums[band - 1]
    return RasterInfo(
        path=dataset.name,
        name=name,
        band=band,
        rows=dataset.height,
        columns=dataset.width,
        transform=(a, b, c, d, e, f),
        crs=_crs(dataset),
        dtype=dtype,
        nodata=dataset.nodatavals[band - 1],
        scale=dataset.scales[band - 1],
        offset=dataset.offsets[band - 1],
        block=tuple(dataset.block_shapes[band - 1]),
        unit=(dataset.units[band - 1] or "").strip(),
        masked=MaskFlags.per_dataset in flags or MaskFlags.alpha in flags,
    )


def _crs(dataset: Any) -> CRS | None:
    """CRS of a dataset, vertical part included; None when it has none or it cannot be understood."""
    if not dataset.crs:
        return None
    try:
        return from_wkt(dataset.crs.to_wkt(version="WKT2_2019"))
    except RasterioError:  # some old definitions have no second edition
        return from_wkt(dataset.crs.to_wkt())


@dataclass(frozen=True)
class RasterSource:
    """How elevations in metres come out of a raster: the file, what marks missing data, and the unit.

    Args:
        info: facts of the file.
        nodata: a value for missing data that the user states, beside what the file tags.
        unit_m: metres of the unit of the elevations.
        what: what the file is to the user, for messages.
    """

    info: RasterInfo
    nodata: float | None = None
    unit_m: float = 1.0
    what: str = "raster"

    @property
    def converted(self) -> bool:
        """True when stored values are scaled, shifted or turned from feet into metres."""
        return self.info.scale != 1.0 or self.info.offset != 0.0 or self.unit_m != 1.0

    @property
    def dtype(self) -> np.dtype:
        """float32 where it holds the elevations exactly, else float64."""
        exact = self.info.dtype in _EXACT_IN_FLOAT32 and not self.converted
        return np.dtype(np.float32 if exact else np.float64)

    def reader(self) -> RasterReader:
        """One thread's way to the file."""
        return RasterReader(self)


class RasterReader:
    """Reads windows of one band in metres, north up; holds its own file handle, for one thread."""

    def __init__(self, source: RasterSource) -> None:
        self.source = source
        self._dataset = open_raster(source.info.path, source.what)
        self._missing = _missing_values(source)
        self._likely = _stored(source, *_GROUND_M)

    def close(self) -> None:
        self._dataset.close()

    def read(
        self, row: int, column: int, height: int, width: int, *, out: np.ndarray | None = None
    ) -> np.ndarray:
        """Elevations [m] of a window that lies inside the file, row 0 north; NaN where there is no data.

        Args:
            out: to be filled and returned, (height, width), of the source's type, its cells side by side in
                memory; default a new array.

        Raises:
            FileError: the data of the file are damaged; the message names the block and its place.
        """
        info, dtype = self.source.info, self.source.dtype
        if info.south_up:
            row = info.rows - row - height
        if info.east_first:
            column = info.columns - column - width
        window = FileWindow(column, row, width, height)
        try:
            turned = info.south_up or info.east_first
            values = np.empty((height, width), dtype) if out is None or turned else out
            self._dataset.read(info.band, window=window, out=values)
            mask = self._dataset.read_masks(info.band, window=window) == 0 if info.masked else None
        except RasterioError as error:
            raise FileError(self._damage(window, error)) from None
        if self._blank(values, mask):
            self._refuse_markers(values, window)
        if self.source.converted:
            values *= info.scale
            values += info.offset
            values *= self.source.unit_m
        if turned:
            right = np.empty_like(values) if out is None else out
            right[...] = values[:: -1 if info.south_up else 1, :: -1 if info.east_first else 1]
            return right
        return values

    def _blank(self, values: np.ndarray, mask: np.ndarray | None) -> bool:
        """Set missing and infinite values to NaN, in place; whether one that stays is hardly an elevation."""
        from earthwork.files.kernels import blank

        typed = values.dtype.type
        low, high = (typed(end) for end in self._likely)
        odd = False
        for value in self._missing or [typed(np.nan)]:
            odd = blank(values, value, low, high)
        if mask is not None and mask.any():
            np.putmask(values, mask, np.nan)
        return odd

    def _refuse_markers(self, values: np.ndarray, window: FileWindow) -> None:
        """Raise a FileError for a value that marks missing data, where nothing declares it and no ground can lie."""
        low, high = self._likely
        odd = (values < low) | (values > high)
        info = self.source.info
        absurd_low, absurd_high = _stored(self.source, -_ABSURD_M, _ABSURD_M)
        odd &= np.isin(values, np.array(_MARKERS, values.dtype)) | (values < absurd_low) | (values > absurd_high)
        if odd.any():
            row, column = (int(i) for i in np.argwhere(odd)[0])
            stored = float(values[row, column])
            raise FileError(
                f"{self.source.what}: {info.name}: it holds the value {stored:.10g} at "
                f"{self._place(window.row_off + row, window.col_off + column)}, which is no elevation; it looks like a "
                f"marker of missing data that the file does not declare. State it: nodata = {stored:.10g} for this "
                f"surface, or --nodata {stored:.10g} without a site file. If it is none, the data are damaged: copy the "
                "file anew"
            )

    def _place(self, row: int, column: int) -> str:
        """Coordinates of the corner of a stored cell, for messages."""
        a, b, c, d, e, f = self.source.info.transform
        return f"easting {a * column + b * row + c:.10g}, northing {d * column + e * row + f:.10g}"

    def _damage(self, window: FileWindow, error: Exception) -> str:
        """Message for a failed read: the first block that cannot be decoded, and where it lies."""
        info = self.source.info
        high, wide = info.block
        rows = range(window.row_off // high, (window.row_off + window.height - 1) // high + 1)
        columns = range(window.col_off // wide, (window.col_off + window.width - 1) // wide + 1)
        top, left, reason = window.row_off, window.col_off, reason_of(error)
        for i, j in ((i, j) for i in rows for j in columns):
            tall, broad = min(high, info.rows - i * high), min(wide, info.columns - j * wide)
            try:
                self._dataset.read(info.band, window=FileWindow(j * wide, i * high, broad, tall))
            except RasterioError as inner:
                top, left, reason = i * high, j * wide, reason_of(inner)
                break
        return (
            f"{self.source.what}: {info.name}: data are damaged or cut off in the block at row {top}, column {left} "
            f"({self._place(top, left)}): {reason}. Copy the file anew"
        )


def _stored(source: RasterSource, low_m: float, high_m: float) -> tuple[float, float]:
    """The stored values of two elevations [m], the lower one first."""
    scale = source.info.scale or 1.0
    ends = [(metres / source.unit_m - source.info.offset) / scale for metres in (low_m, high_m)]
    return min(ends), max(ends)


def _missing_values(source: RasterSource) -> list[Any]:
    """Stored values that mean no data, in the type in which they are read; NaN needs no test."""
    stored = np.dtype(source.info.dtype)
    found: list[Any] = []
    for value in (source.info.nodata, source.nodata):
        if value is None or math.isnan(value):
            continue
        if stored.kind == "f":
            # a tag in text or in double precision is compared as the cells hold it
            limits = np.finfo(stored)
            value = float(stored.type(min(max(value, float(limits.min)), float(limits.max))))
        typed = source.dtype.type(value)
        if typed not in found:
            found.append(typed)
    return found


def foot_of_site(document: dict[str, Any], directory: Path) -> float:
    """The foot of a site in US units [m]: US survey where the CRS's unit is that foot, else international.

    The CRS is that of the existing raster, else of the finished one, else ``[site] crs``. Nothing is raised: files
    that are missing are reported when they are opened.

    Args:
        document: the parsed site file, unchecked.
        directory: folder that its paths are relative to.
    """

    def table(name: str) -> dict[str, Any]:
        value = document.get(name)
        return value if isinstance(value, dict) else {}

    for key in ("existing", "finished"):
        spec = table("ground").get(key)
        file = spec.get("file") if isinstance(spec, dict) else spec
        if isinstance(file, str) and file:
            try:
                crs = raster_info(directory / file).crs
            except Exception:  # whatever is wrong with the file is told when it is opened for its cells
                continue
            if crs is not None:
                return _foot(crs)
    stated = table("site").get("crs")
    try:
        return _foot(parse_crs(stated)) if isinstance(stated, str) else FOOT_M
    except ValueError:
        return FOOT_M


def _foot(crs: CRS) -> float:
    return US_SURVEY_FOOT_M if horizontal_unit_m(crs) == US_SURVEY_FOOT_M else FOOT_M
