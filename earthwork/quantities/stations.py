"""Cut and fill by station along a baseline, and areas of cross-sections to check them by."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import shapely

from earthwork.compiled import kernel
from earthwork.ground.stack import Stack
from earthwork.quantities.blocks import Channel, channels_of
from earthwork.quantities.fields import named_fields
from earthwork.quantities.tile import Tile


@dataclass(frozen=True)
class Baseline:
    """A line with stations.

    ``points`` (k, 2): metres east and north of the grid's north-west corner; ``edges``: distances along the line [m] of
    the stations, from 0 to its length; ``width_m``: ground farther off does not count, ``inf``: all counts.
    """

    points: np.ndarray
    edges: np.ndarray
    width_m: float = np.inf

    @classmethod
    def of(cls, points: np.ndarray, *, interval_m: float, width_m: float | None = None) -> Baseline:
        """Stations at an interval; the last one at the end of the line, short of an interval or not.

        >>> Baseline.of(np.array([[0.0, 0.0], [50.0, 0.0]]), interval_m=20.0).edges.tolist()
        [0.0, 20.0, 40.0, 50.0]
        """
        length = float(np.hypot(*np.diff(points, axis=0).T).sum())
        edges = np.arange(0.0, length, interval_m)
        # A last interval under a hundredth of the others is rounding of the line's length.
        if length - edges[-1] < 0.01 * interval_m and len(edges) > 1:
            edges = edges[:-1]
        return cls(np.asarray(points, float), np.append(edges, length), width_m or np.inf)


class StationTally:
    """Amounts by station: every cell belongs to the nearest point of the line, those beyond an end to that end.

    ``sums`` (intervals, channels) [cell·m], channels as for blocks without rules; ``beyond``: what of it lies beyond
    the ends of the line; ``outside``: what lies off the width.
    """

    def __init__(self, stack: Stack, line: Baseline) -> None:
        self.stack = stack
        self.line = line
        self.channels: tuple[Channel, ...] = tuple(c for c in channels_of(stack) if c[0] in _COUNTED and c[2] < 0)
        self.sums = np.zeros((len(line.edges) - 1, len(self.channels)))
        self.beyond = np.zeros(len(self.channels))
        self.outside = np.zeros(len(self.channels))

    def empty(self) -> StationTally:
        return StationTally(self.stack, self.line)

    def add(self, tile: Tile) -> None:
        window, grid = tile.window, self.stack.grid
        values = self._values(tile)
        if tile.weight is not None:
            values *= tile.weight
        size = grid.cell_east_m, grid.cell_north_m
        box = (
            window.column * size[0], -(window.row + window.height) * size[1],
            (window.column + window.width) * size[0], -window.row * size[1],
        )  # fmt: skip
        near = _near_segments(self.line.points, box)
        starts = np.concatenate([[0.0], np.cumsum(np.hypot(*np.diff(self.line.points, axis=0).T))])
        _by_station(
            values, window.row, window.column, *size, self.line.points, near, starts, self.line.edges,
            self.line.width_m, self.sums, self.beyond, self.outside,
        )  # fmt: skip

    def merge(self, other: StationTally) -> None:
        self.sums += other.sums
        self.beyond += other.beyond
        self.outside += other.outside

    def _values(self, tile: Tile) -> np.ndarray:
        fields = named_fields(tile)
        values = np.empty((len(self.channels), tile.window.height, tile.window.width))
        for i, (what, index, _) in enumerate(self.channels):
            if what == "fill":
                values[i] = fields["fill"] + fields.get("over_excavation", 0.0)
            else:
                values[i] = fields[what if index < 0 else f"{what}:{index}"]
        return values


_COUNTED = ("cut", "over_excavation", "scarify", "fill")


def _near_segments(points: np.ndarray, box: tuple[float, float, float, float]) -> np.ndarray:
    """Segments that may be the nearest to some point of a box: none is farther at its best than another at its
    worst."""
    segments = shapely.linestrings(np.stack([points[:-1], points[1:]], axis=1))
    shape = shapely.box(*box)
    best = shapely.distance(segments, shape)
    worst = shapely.hausdorff_distance(shapely.points([[x, y] for x in box[::2] for y in box[1::2]])[:, None], segments)
    return np.flatnonzero(best <= worst.max(axis=0).min() * (1 + 1e-9))


@kernel
def _by_station(values, row, column, east, north, points, near, starts, edges, width, sums, beyond, outside):
    channels, height, wide = values.shape
    intervals = len(edges) - 1
    for i in range(height):
        y = -(row + i + 0.5) * north
        for j in range(wide):
            some = False
            for c in range(channels):
                some = some or values[c, i, j] != 0.0
            if not some:
                continue
            x = (column + j + 0.5) * east
            best = np.inf
            station = 0.0
            for s in near:
                ax, ay = points[s, 0], points[s, 1]
                bx, by = points[s + 1, 0] - ax, points[s + 1, 1] - ay
                length = np.sqrt(bx * bx + by * by)
                along = min(max(((x - ax) * bx + (y - ay) * by) / length, 0.0), length)
                dx, dy = x - ax - along * bx / length, y - ay - along * by / length
                square = dx * dx + dy * dy
                if square < best:
                    best = square
                    station = starts[s] + along
            if best > width * width:
                for c in range(channels):
                    outside[c] += values[c, i, j]
                continue
            k = min(max(np.searchsorted(edges, station, side="right") - 1, 0), intervals - 1)
            past = station <= 0.0 or station >= edges[-1]
            for c in range(channels):
                sums[k, c] += values[c, i, j]
                if past:
                    beyond[c] += values[c, i, j]


class SectionTally:
    """Areas of cut and fill in cross-sections square to the line, at the stations and half-way between them.

    ``areas`` (2, sections) [m²]: cut and fill. Section 2k stands at station k, section 2k + 1 half-way to the next.
    """

    def __init__(self, stack: Stack, line: Baseline) -> None:
        self.stack = stack
        self.line = line
        middle = (line.edges[:-1] + line.edges[1:]) / 2
        self.stations = np.empty(2 * len(line.edges) - 1)
        self.stations[::2], self.stations[1::2] = line.edges, middle
        self.areas = np.zeros((2, len(self.stations)))
        self._place()

    def empty(self) -> SectionTally:
        other = SectionTally.__new__(SectionTally)
        other.__dict__ = {**self.__dict__, "areas": np.zeros_like(self.areas)}
        return other

    def _place(self) -> None:
        """Cells under points a cell apart on each section, as far as the section is their nearest one."""
        grid, line = self.stack.grid, shapely.LineString(self.line.points)
        self.step = min(grid.cell_east_m, grid.cell_north_m)
        size = grid.columns * grid.cell_east_m, grid.rows * grid.cell_north_m
        corners = shapely.points([[x, y] for x in (0.0, size[0]) for y in (0.0, -size[1])])
        reach = min(self.line.width_m, float(shapely.distance(corners, line).max()) + np.hypot(*size) / 4)
        offsets = (np.arange(-np.floor(reach / self.step), np.floor(reach / self.step)) + 0.5) * self.step
        rows, columns, sections = [], [], []
        # A section at an end of the line is taken half a cell inside it, where the ground may just end.
        inside_line = np.clip(self.stations, 0.5 * self.step, self.line.edges[-1] - 0.5 * self.step)
        for k, station in enumerate(inside_line):
            at, across = _normal(line, station)
            points = at + offsets[:, None] * across
            column = np.floor(points[:, 0] / grid.cell_east_m).astype(np.int64)
            row = np.floor(-points[:, 1] / grid.cell_north_m).astype(np.int64)
            inside = (row >= 0) & (row < grid.rows) & (column >= 0) & (column < grid.columns)
            found = np.flatnonzero(inside)
            if not len(found):
                continue
            nearest = shapely.line_locate_point(line, shapely.points(points[found]))
            found = found[np.abs(nearest - station) <= 0.5 * self.step]
            rows.append(row[found])
            columns.append(column[found])
            sections.append(np.full(len(found), k))
        none = np.zeros(0, np.int64)
        self.rows = np.concatenate([none, *rows])
        self.columns = np.concatenate([none, *columns])
        self.sections = np.concatenate([none, *sections])

    def add(self, tile: Tile) -> None:
        window = tile.window
        here = np.flatnonzero(
            (self.rows >= window.row)
            & (self.rows < window.row + window.height)
            & (self.columns >= window.column)
            & (self.columns < window.column + window.width)
        )
        if not len(here):
            return
        row, column = self.rows[here] - window.row, self.columns[here] - window.column
        depth = np.nan_to_num(np.asarray(tile.depth[1:-1, 1:-1], np.float64)[row, column])
        if tile.weight is not None:
            depth = depth * tile.weight[row, column]
        for i, amount in enumerate((np.maximum(-depth, 0.0), np.maximum(depth, 0.0))):
            self.areas[i] += np.bincount(self.sections[here], amount, len(self.stations)) * self.step

    def merge(self, other: SectionTally) -> None:
        self.areas += other.areas


def _normal(line: shapely.LineString, station: float) -> tuple[np.ndarray, np.ndarray]:
    """A point of a line and the direction square to it there."""
    reach = max(line.length * 1e-6, 1e-6)
    before, after = line.interpolate(max(station - reach, 0.0)), line.interpolate(min(station + reach, line.length))
    along = np.array([after.x - before.x, after.y - before.y])
    along /= np.hypot(*along)
    at = line.interpolate(station)
    return np.array([at.x, at.y]), np.array([-along[1], along[0]])
