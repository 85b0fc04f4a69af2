"""A cheap look at a surface before the main pass: its mean elevation, and undeclared markers of no data."""

from __future__ import annotations

import numpy as np

from earthwork.errors import GroundError
from earthwork.files.rasters import RasterSource
from earthwork.ground.grid import Grid, Window
from earthwork.ground.surfaces import Surface

#: Side of a sampled window [cells].
_SIDE = 32

#: Windows along each axis: a first look, and a closer one when the first finds no data.
_LOOKS = (3, 8)

#: Stored values that programs write where they have no data.
_MARKERS = (-9999.0, -10000.0, -32767.0, -32768.0, -99999.0, 9999.0, 32767.0, 99999.0)

#: Ground on earth lies within these elevations [m], with room for mines and local datums.
_GROUND_M = (-1000.0, 9000.0)

#: Elevations beyond this are markers, whatever their value [m].
_ABSURD_M = 1e5


def sampled_elevation(surface: Surface, grid: Grid, what: str, source: RasterSource | None = None) -> float | None:
    """Mean elevation [m] of a surface over a few windows; None when they hold no data.

    The windows lie at the corners, along the edges and in the middle, the same ones each time.

    Args:
        surface: on the grid.
        grid: the grid.
        what: what the surface is to the user.
        source: its file, where it has one.

    Raises:
        GroundError: a value that programs write for missing data, and that nothing declares to be one.
    """
    reader = surface.reader()
    try:
        for windows in _LOOKS:
            parts = [reader.read(w).astype(np.float64).ravel() for w in _windows(grid, windows)]
            values = np.concatenate(parts)
            values = values[np.isfinite(values)]
            if values.size:
                if source is not None:
                    _refuse_markers(values, what, source)
                return float(values.mean())
    finally:
        reader.close()
    return None


def _windows(grid: Grid, along: int) -> list[Window]:
    height, width = min(_SIDE, grid.rows), min(_SIDE, grid.columns)
    rows = np.unique(np.linspace(0, grid.rows - height, along).astype(int)).tolist()
    columns = np.unique(np.linspace(0, grid.columns - width, along).astype(int)).tolist()
    return [Window(row, column, height, width) for row in rows for column in columns]


def _refuse_markers(values: np.ndarray, what: str, source: RasterSource) -> None:
    odd = values[(values < _GROUND_M[0]) | (values > _GROUND_M[1])]
    if odd.size == 0:
        return
    stored = (odd / source.unit_m - source.info.offset) / (source.info.scale or 1.0)
    marker = next((m for m in _MARKERS if np.isclose(stored, m, rtol=1e-9, atol=0).any()), None)
    if marker is None and np.abs(odd).max() > _ABSURD_M:
        marker = float(stored[np.argmax(np.abs(odd))])
    if marker is not None:
        raise GroundError(
            f"{what}: {source.info.name}: it holds the value {marker:.10g}, which is no elevation; it looks like a "
            f"marker of missing data that the file does not declare. State it: {{ file = …, nodata = {marker:.10g} }}"
        )
