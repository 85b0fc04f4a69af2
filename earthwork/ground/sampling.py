"""A cheap look at a surface before the main pass, for its mean elevation."""

from __future__ import annotations

import numpy as np

from earthwork.ground.grid import Grid, Window
from earthwork.ground.surfaces import Surface

#: Side of a sampled window [cells].
_SIDE = 32

#: Windows along each axis: a first look, and a closer one when the first finds no data.
_LOOKS = (3, 8)


def sampled_elevation(surface: Surface, grid: Grid) -> float | None:
    """Mean elevation [m] of a surface over a few windows of its grid; None when they hold no data.

    The windows lie at the corners, along the edges and in the middle, the same ones each time.
    """
    reader = surface.reader()
    try:
        for along in _LOOKS:
            parts = [reader.read(window).astype(np.float64).ravel() for window in _windows(grid, along)]
            values = np.concatenate(parts)
            values = values[np.isfinite(values)]
            if values.size:
                return float(values.mean())
    finally:
        reader.close()
    return None


def _windows(grid: Grid, along: int) -> list[Window]:
    height, width = min(_SIDE, grid.rows), min(_SIDE, grid.columns)
    rows = np.unique(np.linspace(0, grid.rows - height, along).astype(int)).tolist()
    columns = np.unique(np.linspace(0, grid.columns - width, along).astype(int)).tolist()
    return [Window(row, column, height, width) for row in rows for column in columns]
