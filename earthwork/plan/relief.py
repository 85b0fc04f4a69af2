"""Rise and fall along ways, and the time that a truck takes over them, from the mean ground on a coarse grid."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from earthwork.compiled import kernel
from earthwork.plan.trucks import Drive

Array = np.ndarray

#: Grades of the table of speeds [%]: beyond them a truck drives as at them.
_STEEPEST = 60.0
_STEPS = 481


@dataclass(frozen=True)
class Relief:
    """Mean elevations of squares of ground.

    ``elevations`` (rows, columns) [m], NaN where unknown; row 0 is north. ``east_m``, ``north_m``: sides of a square.
    Places are metres east and north of the north-west corner, so north is negative on the ground.
    """

    elevations: Array
    east_m: float
    north_m: float

    def at(self, points: Array) -> Array:
        """Elevations of places (n, 2) [m], bilinear between centres of squares; NaN where unknown.

        >>> relief = Relief(np.array([[0.0, 10.0]]), 10.0, 10.0)
        >>> relief.at(np.array([[5.0, -5.0], [10.0, -5.0], [15.0, -5.0], [40.0, -5.0]])).tolist()
        [0.0, 5.0, 10.0, nan]
        """
        out = np.empty(len(points))
        _elevations(np.asarray(points, float), self.elevations, self.east_m, self.north_m, out)
        return out

    def rise_and_fall(self, points: Array) -> tuple[float, float, float]:
        """Rise and fall along a line of points [m], and the length over ground of unknown height [m]."""
        return _rise_and_fall(np.asarray(points, float), self.elevations, self.east_m, self.north_m, self.step_m)

    @property
    def step_m(self) -> float:
        """Distance between the heights that a way is judged by."""
        return min(self.east_m, self.north_m)

    def minutes(self, drive: Drive, start: Array, end: Array, limit_m_s: Array) -> Array:
        """Time over straight lines [min], (n,); unknown ground counts as level.

        Args:
            drive: the truck, loaded or empty.
            start, end: (n, 2) [m].
            limit_m_s: (n,) speed limit of each line.
        """
        grades = np.linspace(-_STEEPEST, _STEEPEST, _STEPS)
        out = np.empty(len(start))
        _minutes(
            np.asarray(start, float), np.asarray(end, float), np.broadcast_to(limit_m_s, (len(start),)).astype(float),
            drive.speed_m_s(grades), self.elevations, self.east_m, self.north_m, self.step_m, out,
        )  # fmt: skip
        return out


@kernel(error_model="python")
def _elevation(x, y, elevations, east, north):
    """Bilinear height at a place; squares without a height leave their weight to the others of the four."""
    rows, columns = elevations.shape
    column, row = x / east - 0.5, -y / north - 0.5
    if column < -0.5 or row < -0.5 or column > columns - 0.5 or row > rows - 0.5:
        return np.nan
    column, row = min(max(column, 0.0), columns - 1.0), min(max(row, 0.0), rows - 1.0)
    i, j = int(row), int(column)
    total = 0.0
    weight = 0.0
    for a in range(2):
        for b in range(2):
            r, c = min(i + a, rows - 1), min(j + b, columns - 1)
            w = (1.0 - abs(row - (i + a))) * (1.0 - abs(column - (j + b)))
            z = elevations[r, c]
            if w > 0.0 and z == z:
                total += w * z
                weight += w
    return total / weight if weight > 0.0 else np.nan


@kernel(error_model="python")
def _elevations(points, elevations, east, north, out):
    for k in range(len(points)):
        out[k] = _elevation(points[k, 0], points[k, 1], elevations, east, north)


@kernel(error_model="python")
def _rise_and_fall(points, elevations, east, north, step):
    rise = 0.0
    fall = 0.0
    unknown = 0.0
    for k in range(len(points) - 1):
        dx, dy = points[k + 1, 0] - points[k, 0], points[k + 1, 1] - points[k, 1]
        length = np.sqrt(dx * dx + dy * dy)
        count = max(int(np.ceil(length / step)), 1)
        before = _elevation(points[k, 0], points[k, 1], elevations, east, north)
        for s in range(1, count + 1):
            t = s / count
            here = _elevation(points[k, 0] + t * dx, points[k, 1] + t * dy, elevations, east, north)
            if here == here and before == before:
                rise += max(here - before, 0.0)
                fall += max(before - here, 0.0)
            else:
                unknown += length / count
            before = here
    return rise, fall, unknown


@kernel(error_model="python")
def _minutes(start, end, limit, speeds, elevations, east, north, step, out):
    per_percent = (len(speeds) - 1) / (2.0 * _STEEPEST)
    for k in range(len(start)):
        dx, dy = end[k, 0] - start[k, 0], end[k, 1] - start[k, 1]
        length = np.sqrt(dx * dx + dy * dy)
        count = max(int(np.ceil(length / step)), 1)
        piece = length / count
        seconds = 0.0
        before = _elevation(start[k, 0], start[k, 1], elevations, east, north)
        for s in range(1, count + 1):
            t = s / count
            here = _elevation(start[k, 0] + t * dx, start[k, 1] + t * dy, elevations, east, north)
            grade = 0.0
            if here == here and before == before and piece > 0.0:
                grade = min(max(100.0 * (here - before) / piece, -_STEEPEST), _STEEPEST)
            place = (grade + _STEEPEST) * per_percent
            i = min(int(place), len(speeds) - 2)
            speed = speeds[i] + (place - i) * (speeds[i + 1] - speeds[i])
            seconds += piece / min(speed, limit[k])
            before = here
        out[k] = seconds / 60.0
