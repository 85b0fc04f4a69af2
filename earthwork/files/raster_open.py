"""Opens raster files, and says in one sentence why one cannot be opened."""

from __future__ import annotations

import os
import zipfile
from pathlib import Path
from typing import Any

import rasterio
from rasterio.env import set_gdal_config
from rasterio.errors import RasterioError

from earthwork.errors import FileError
from earthwork.files.paths import is_virtual

#: GDAL's block cache [bytes]. Its default, 5 % of memory, makes streamed reads three times slower. It is the process's,
#: and is set when a raster is opened unless the environment variable GDAL_CACHEMAX says otherwise.
CACHE_BYTES = 32 * 2**20

#: Settings under which every raster is opened; without it the vertical part of a compound CRS is dropped.
_GDAL = {"GTIFF_REPORT_COMPD_CS": True}

#: Members of a zip that no raster driver opens on their own.
_SIDECARS = {".xml", ".prj", ".txt", ".tfw", ".wld", ".pdf", ".md", ".html", ".csv", ".ovr"}


def open_raster(path: str | Path, what: str) -> Any:
    """An open rasterio dataset of its own, never shared between threads.

    Args:
        path: any raster that GDAL reads; a zip that holds one raster; a ``/vsizip/…`` name.
        what: what the file is to the user, for messages.

    Raises:
        FileError: no raster, damaged, or a zip of several.
    """
    try:
        return _open(str(path))
    except RasterioError as error:
        inside = _raster_in_zip(Path(path), what)
        if inside is not None:
            return _open(inside)
        raise FileError(f"{what}: {path}: {_why_not_open(Path(path), error)}") from None


def _open(path: str) -> Any:
    if "GDAL_CACHEMAX" not in os.environ:
        # an Env would set it only for its own duration, and readers outlive the opening
        set_gdal_config("GDAL_CACHEMAX", CACHE_BYTES)
    with rasterio.Env(**_GDAL):
        return rasterio.open(path, sharing=False)


def _raster_in_zip(path: Path, what: str) -> str | None:
    """GDAL's name of the only raster in a zip; None when the path is no zip or holds no raster."""
    if path.suffix.lower() != ".zip" or not zipfile.is_zipfile(path):
        return None
    try:
        with zipfile.ZipFile(path) as archive:
            names = archive.namelist()
    except (zipfile.BadZipFile, OSError):
        return None
    members = [m for m in names if not m.endswith("/") and Path(m).suffix.lower() not in _SIDECARS]
    found = []
    for member in members:
        name = f"/vsizip/{path}/{member}"
        try:
            _open(name).close()
        except RasterioError:
            continue
        found.append(name)
    if len(found) > 1:
        raise FileError(f"{what}: {path}: the zip holds {len(found)} rasters; name one of them: {', '.join(found)}")
    return found[0] if found else None


def _why_not_open(path: Path, error: Exception) -> str:
    """Why a file that exists cannot be opened as a raster, and what to do."""
    if path.is_dir():
        return "this is a folder; name the raster in it"
    if not is_virtual(path):
        try:
            with path.open("rb") as stream:
                head = stream.read(4)
        except OSError as failure:
            return f"cannot be read ({failure.strerror})"
        if not head:
            return "the file is empty; copy it anew"
        if head[:2] in (b"II", b"MM") or "not recognized" not in str(error):
            return f"corrupt or cut off ({reason_of(error)}); copy it anew"
    return "not a raster (no format that GDAL knows); give a GeoTIFF, an ASCII grid or the like"


def reason_of(error: BaseException) -> str:
    """The innermost reason of a failure, on one line."""
    text = str(error)
    cause = error.__cause__ or error.__context__
    while cause is not None:
        text = str(cause) or text
        cause = cause.__cause__ or cause.__context__
    return " ".join(text.split()).rstrip(".")
