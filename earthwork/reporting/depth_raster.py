"""The depth raster: written while the ground is walked, so that it is never whole in memory."""

from __future__ import annotations

import threading
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np

from earthwork.files.gis import DepthRasterWriter
from earthwork.units import UnitSystem

if TYPE_CHECKING:
    from earthwork.ground.stack import Arrays, Stack
    from earthwork.quantities.tile import Tile


class DepthRasterTally:
    """Hands the depths of every band to one file, in the site's unit of length; :meth:`finish` closes it.

    Cells outside the limits are no data.
    """

    description = "depth: subgrade - stripped ground; + fill, - cut"

    depth_only = True  #: engine: the surfaces themselves are not asked for
    portable = False  #: all instances write into one file, so they stay on one machine

    def __init__(self, path: Path, units: UnitSystem) -> None:
        self.path = path
        self.units = units
        self._shared = _Shared()

    def empty(self) -> DepthRasterTally:
        other = type(self)(self.path, self.units)
        other._shared = self._shared
        return other

    def add(self, tile: Tile) -> None:
        if tile.seam:
            return  # the bands on both sides have its rows, and write theirs whole: blocks of the file come together early
        window, arrays = tile.rows_read()
        depth = self.values(tile.stack, arrays)
        if tile.stack.limits is not None:
            depth = np.where(tile.stack.coverage(tile.stack.limits, window) > 0, depth, np.nan)
        with self._shared.lock:
            if self._shared.writer is None:
                self._shared.writer = DepthRasterWriter(
                    self.path,
                    tile.grid,
                    description=self.description,
                    unit=self.units.unit("length"),
                    factor=1 / self.units.factor("length"),
                )
        self._shared.writer.write(window, depth)

    def values(self, stack: Stack, arrays: Arrays) -> np.ndarray:
        """What is written of a window [m], (height, width)."""
        return arrays["depth"]

    def merge(self, other: DepthRasterTally) -> None:
        """Nothing: all instances write into the same file."""

    def finish(self) -> None:
        """Complete the file."""
        if self._shared.writer is not None:
            self._shared.writer.finish()

    def abandon(self) -> None:
        """Close the file as it is; nothing to do once it is finished."""
        if self._shared.writer is not None:
            self._shared.writer.abandon()


class ThicknessRasterTally(DepthRasterTally):
    """The same for the thickness of fill, the refill of over-excavation under it included."""

    description = "fill thickness: subgrade - removal bottom, with the refill of over-excavation"
    depth_only = False

    def values(self, stack: Stack, arrays: Arrays) -> np.ndarray:
        return stack.subgrade(arrays) - stack.removal_bottom(arrays)


class _Shared:
    """What all instances of one tally write with."""

    def __init__(self) -> None:
        self.lock = threading.Lock()
        self.writer: DepthRasterWriter | None = None
