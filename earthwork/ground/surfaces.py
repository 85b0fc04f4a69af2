"""Surfaces: anything that gives elevations on a window of a grid."""

from __future__ import annotations

from typing import Protocol, runtime_checkable

import numpy as np

from earthwork.ground.grid import Window


@runtime_checkable
class SurfaceReader(Protocol):
    """One thread's way to a surface: it holds its own file handles, and is used by that thread alone."""

    def read(self, window: Window) -> np.ndarray:
        """Elevations [m] of the cells of a window, shape (height, width), float32 or float64; NaN = no data.

        The window lies inside the grid. The array belongs to the caller, who may write into it.
        """

    def close(self) -> None: ...


class Surface(Protocol):
    """Elevations on one grid. A constant or a plane has no extent of its own: it is known everywhere."""

    dtype: np.dtype  #: float32 or float64, of what the readers give
    block: tuple[int, int] | None  #: (rows, columns) that the file decodes at once; None where it does not matter
    resampling: str  #: "none", "bilinear", "average", "nodes" or "exact": how the file came onto the grid

    def reader(self) -> SurfaceReader: ...
