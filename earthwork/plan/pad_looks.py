"""Cut and fill of each pad of a design at trial shifts, counted tile by tile, and where they lie."""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import Any

import numpy as np

from earthwork.ground.design import Design
from earthwork.plan.grade_solver import PadCurve


class PadLooks:
    """Cut and fill of each pad at trial shifts, and where they lie."""

    def __init__(self, design: Design, shifts_m: np.ndarray, names: Sequence[str]) -> None:
        self.grid = design.grid
        self.shifts_m = shifts_m
        self.names = list(names)
        self.cut_m3 = np.zeros((len(shifts_m), len(names)))
        self.fill_m3 = np.zeros((len(shifts_m), len(names)))
        self.moments = np.zeros((2, 3))  #: cut and fill as drawn: volume, × easting, × northing

    def take(self, k: int, stack: Any, design: Design) -> None:
        """Count one trial."""
        reader, builder = stack.reader(), design.reader()
        cell = self.grid.cell_area_m2
        try:
            for key in design.tiles():
                window = design.lattice.tile(key)
                depth = np.nan_to_num(np.asarray(reader.read(window)["depth"], float))
                owner = builder.built(window).owner
                known = (owner >= 0) & (owner < len(self.names))
                index = owner[known]
                for row, volumes in ((self.cut_m3, np.maximum(-depth, 0)), (self.fill_m3, np.maximum(depth, 0))):
                    row[k] += np.bincount(index, volumes[known], len(self.names)) * cell
                if self.shifts_m[k] == 0.0:
                    self._add_moments(depth * known, window)
        finally:
            reader.close()
            builder.close()

    def _add_moments(self, depth: np.ndarray, window: Any) -> None:
        east = self.grid.west + (window.column + np.arange(window.width) + 0.5) * self.grid.cell_east
        north = self.grid.north - (window.row + np.arange(window.height) + 0.5) * self.grid.cell_north
        for i, volume in enumerate((np.maximum(-depth, 0), np.maximum(depth, 0))):
            self.moments[i] += volume.sum(), (volume.sum(axis=0) * east).sum(), (volume.sum(axis=1) * north).sum()

    def curve(self, group: Sequence[str]) -> PadCurve:
        columns = [self.names.index(name) for name in group]
        return PadCurve(
            tuple(group), self.shifts_m, self.cut_m3[:, columns].sum(axis=1), self.fill_m3[:, columns].sum(axis=1)
        )

    def _centre(self, kind: str) -> tuple[float, float]:
        volume, east, north = self.moments[0 if kind == "cut" else 1]
        if volume > 0:
            return east / volume, north / volume
        west, south, east, north = self.grid.bounds
        return (west + east) / 2, (south + north) / 2

    def away_m(self, place: Sequence[float], kind: str) -> float:
        """Straight distance on the ground [m] from the centre of cut or fill to a place."""
        centre = self._centre(kind)
        return math.hypot(place[0] - centre[0], place[1] - centre[1]) * self.grid.unit_m * self.grid.ground_scale

    @property
    def distance_m(self) -> float:
        """From the centre of cut to that of fill; at least a tenth of the side of the site's disturbed square."""
        least = 0.1 * math.sqrt(self.grid.rows * self.grid.columns * self.grid.cell_area_m2)
        return max(self.away_m(self._centre("cut"), "fill"), least)
