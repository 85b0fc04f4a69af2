"""Slopes beside pads: how high they rise or fall from the edge, and the setback that a model code asks for."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from itertools import pairwise
from typing import Any

import numpy as np
import shapely

from earthwork.ground.grid import Grid, Window
from earthwork.plan.settlement import SETBACK_STEEPER_THAN, setback_from_toe_m, setback_from_top_m

#: How far from the edge slopes are followed [m].
REACH_M = 60.0
#: Ground steeper than this is a slope; flatter stretches (benches) up to ``_BENCH_M`` do not end it.
_STEEP = 1 / 5
_BENCH_M = 5.0
#: Edges are looked at every so many metres, or cells where those are larger.
_SPACING_M = 3.0

ReadFinished = Callable[[Window], np.ndarray]


@dataclass(frozen=True)
class SlopesBeside:
    """Slopes beside one pad.

    Heights are from the pad's edge to the toe (fill) or the top (cut), to about a cell. Setbacks are what the model
    code asks for at the worst place, from the slope's own top or toe, and hold for slopes steeper than 3:1; those steeper
    than 1:1 are measured from the code's plane of 45°. ``shortfall_m`` is by how much a building
    stands too near, at the worst place; 0 when it does not, None without a building.
    """

    fill_height_m: float
    cut_height_m: float
    setback_from_top_m: float
    setback_from_toe_m: float
    shortfall_m: float | None

    def to_dict(self) -> dict[str, Any]:
        return dict(self.__dict__)


def slopes_beside(polygon: Any, building: Any, grid: Grid, finished: ReadFinished) -> SlopesBeside:
    """Follow the finished ground outwards from the edge of a pad.

    Args:
        polygon: the pad [CRS unit].
        building: outline of the buildings on it [CRS unit], or None.
        grid: the analysis grid.
        finished: gives finished elevations [m] of a window.
    """
    cell = max(grid.cell_east_m, grid.cell_north_m)
    metres = grid.unit_m * grid.ground_scale
    points, outward = _edge_points(polygon, max(_SPACING_M, cell) / metres)
    if not len(points):
        return SlopesBeside(0.0, 0.0, 0.0, 0.0, None if building is None else 0.0)
    steps = np.arange(-1, int(np.ceil(REACH_M / cell)) + 1) * cell
    heights = _heights(points, outward, steps / metres, grid, finished)
    slopes = _slopes(heights, steps)
    down, up = np.maximum(-slopes.rise, 0.0), np.maximum(slopes.rise, 0.0)
    steep = slopes.run < SETBACK_STEEPER_THAN * np.abs(slopes.rise) * (1 + 1e-9)
    steep_down, steep_up = np.where(steep, down, 0.0), np.where(steep, up, 0.0)
    from_top = setback_from_top_m(steep_down, np.maximum(steep_down - slopes.run, 0.0))
    from_toe = setback_from_toe_m(steep_up, np.where(steep_up > 0, slopes.before_toe, 0.0))
    shortfall = None
    if building is not None:
        away = shapely.distance(shapely.points(points), building) * metres + slopes.start
        shortfall = float(max((np.maximum(from_top, from_toe) - away).max(), 0.0))
    return SlopesBeside(
        float(down.max()), float(up.max()), float(np.max(from_top)), float(np.max(from_toe)), shortfall
    )


def _edge_points(polygon: Any, spacing: float) -> tuple[np.ndarray, np.ndarray]:
    """Points along the outer edges of a polygon, and unit vectors outwards."""
    points, outward = [], []
    for part in shapely.get_parts(polygon):
        ring = shapely.get_coordinates(shapely.geometry.polygon.orient(part).exterior)
        for a, b in pairwise(ring):
            length = float(np.hypot(*(b - a)))
            if length == 0.0:
                continue
            count = max(round(length / spacing), 1)
            at = (np.arange(count) + 0.5) / count
            points.append(a + at[:, None] * (b - a))
            outward.append(np.tile([(b - a)[1] / length, -(b - a)[0] / length], (count, 1)))
    if not points:
        return np.empty((0, 2)), np.empty((0, 2))
    return np.vstack(points), np.vstack(outward)


def _heights(
    points: np.ndarray, outward: np.ndarray, steps: np.ndarray, grid: Grid, finished: ReadFinished
) -> np.ndarray:
    """Finished elevations (points, steps) along rays from the edge; NaN outside the grid."""
    east = points[:, :1] + outward[:, :1] * steps
    north = points[:, 1:] + outward[:, 1:] * steps
    rows = np.floor((grid.north - north) / grid.cell_north).astype(int)
    columns = np.floor((east - grid.west) / grid.cell_east).astype(int)
    on = (rows >= 0) & (rows < grid.rows) & (columns >= 0) & (columns < grid.columns)
    heights = np.full(rows.shape, np.nan)
    if on.any():
        top, left = int(rows[on].min()), int(columns[on].min())
        window = Window(top, left, int(rows[on].max()) - top + 1, int(columns[on].max()) - left + 1)
        heights[on] = finished(window)[rows[on] - top, columns[on] - left]
    return heights


@dataclass(frozen=True)
class _Slopes:
    """The first slope along each ray [m]."""

    rise: np.ndarray  #: + up, − down, from its near to its far end; 0 where there is none
    run: np.ndarray  #: how far that is
    start: np.ndarray  #: from the edge of the pad to its near end
    before_toe: np.ndarray  #: by how much most a place of it is higher than it is far from its near end


def _slopes(heights: np.ndarray, steps: np.ndarray) -> _Slopes:
    """Find the slope along each ray.

    It must begin within a few metres of the edge; it goes on as long as the ground keeps its direction and no flat
    stretch is longer than a bench.
    """
    step = float(steps[1] - steps[0])
    gradients = np.diff(heights, axis=1) / step
    count = len(heights)
    found = _Slopes(np.zeros(count), np.full(count, np.inf), np.zeros(count), np.zeros(count))
    for i, gradient in enumerate(gradients):
        steep = np.abs(gradient) > _STEEP
        first = int(np.argmax(steep))
        if not steep[first] or first * step > _BENCH_M:
            continue
        sign, last = np.sign(gradient[first]), first
        for k in range(first, len(gradient)):
            if not np.isfinite(gradient[k]) or (k - last) * step > _BENCH_M or sign * gradient[k] < -_STEEP:
                break
            if sign * gradient[k] > _STEEP:
                last = k
        whole = heights[i, first : last + 2] - heights[i, first]
        found.rise[i] = whole[-1]
        found.run[i] = (last + 1 - first) * step
        found.start[i] = max(float(steps[first]), 0.0)
        found.before_toe[i] = max(float(np.max(whole - step * np.arange(len(whole)))), 0.0)
    return found
