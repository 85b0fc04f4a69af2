"""Haul roads as a net of nodes: where they cross they join, and a truck may leave or enter them all along."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import shapely

from earthwork.errors import Warning
from earthwork.plan.visibility import Array

#: Nodes of a net; more roads get a wider spacing.
_NODES = 1000
_SPACING_M = 10.0
#: Length over which the grade of a road is taken.
_WINDOW_M = 30.0

Elevations = Callable[[Array], Array]


@dataclass(frozen=True)
class Road:
    """A haul road.

    ``points`` (k, 2) [m] in the direction of travel of a one-way road; ``speed_m_s`` > 0; ``grade_limit``: rise per run
    that is still driven, either way; ``capacity_per_hour``: loads.
    """

    name: str
    points: Array
    speed_m_s: float
    one_way: bool = False
    grade_limit: float | None = None
    capacity_per_hour: float | None = None


@dataclass(frozen=True)
class RoadNet:
    """Nodes along roads, and links between them.

    ``nodes`` (n, 2) [m]; ``tails``, ``heads``, ``road`` (k,): links, one for each direction that may be driven.
    """

    roads: tuple[Road, ...]
    nodes: Array
    tails: Array
    heads: Array
    road: Array
    warnings: tuple[Warning, ...] = ()

    @classmethod
    def of(cls, roads: Sequence[Road], *, elevations: Elevations | None = None) -> RoadNet:
        """A net of roads.

        Args:
            elevations: heights of points (n, 2) [m], NaN where unknown; needed for grade limits.
        """
        lines = _joined([road.points for road in roads])
        spacing = max(_SPACING_M, sum(shapely.LineString(p).length for p in lines) / _NODES)
        lines = [shapely.get_coordinates(shapely.segmentize(shapely.LineString(p), spacing)) for p in lines]
        places = np.round(np.concatenate(lines), 3)
        nodes, number = np.unique(places, axis=0, return_inverse=True)
        number = number.ravel()
        tails, heads, of_road, warnings = [], [], [], []
        first = 0
        for index, (road, line) in enumerate(zip(roads, lines, strict=True)):
            at = number[first : first + len(line)]
            first += len(line)
            usable, warning = _within_grade(road, line, elevations)
            if warning:
                warnings.append(warning)
            a, b = at[:-1][usable], at[1:][usable]
            for tail, head in [(a, b)] if road.one_way else [(a, b), (b, a)]:
                tails.append(tail)
                heads.append(head)
                of_road.append(np.full(len(tail), index))
        return cls(
            tuple(roads), nodes, np.concatenate(tails), np.concatenate(heads), np.concatenate(of_road), tuple(warnings)
        )

    @property
    def limits_m_s(self) -> Array:
        """Speed of the road of each link."""
        return np.array([road.speed_m_s for road in self.roads])[self.road]

    def along(self, effort: Array) -> Array:
        """Least effort from node to node by roads alone, (n, n), from that of each link."""
        from scipy.sparse.csgraph import dijkstra

        return dijkstra(lightest_links(self.tails, self.heads, effort, len(self.nodes)))


def lightest_links(tails: Array, heads: Array, efforts: Array, size: int) -> Any:
    """Sparse matrix of links that keeps the least of parallel ones."""
    from scipy.sparse import coo_array

    order = np.lexsort((efforts, heads, tails))
    tails, heads, efforts = tails[order], heads[order], efforts[order]
    first = np.ones(len(tails), bool)
    first[1:] = (np.diff(tails) != 0) | (np.diff(heads) != 0)
    # A link without length would be no link in a sparse matrix.
    efforts = np.maximum(efforts[first], 1e-9)
    return coo_array((efforts, (tails[first], heads[first])), shape=(size, size)).tocsr()


def _joined(lines: Sequence[Array]) -> list[Array]:
    """The lines with a vertex wherever one crosses or touches another."""
    shapes = [shapely.LineString(points) for points in lines]
    tree = shapely.STRtree(shapes)
    out = []
    for i, shape in enumerate(shapes):
        extra: list[Array] = []
        for k in tree.query(shape, predicate="intersects"):
            if k != i:
                extra.append(shapely.get_coordinates(shape.intersection(shapes[k])))
        if not extra:
            out.append(np.asarray(lines[i], float))
            continue
        own = np.asarray(lines[i], float)
        along_own = np.concatenate([[0.0], np.cumsum(np.hypot(*np.diff(own, axis=0).T))])
        points = np.concatenate([own, *extra])
        along = np.concatenate([along_own, [shape.project(shapely.Point(p)) for p in np.concatenate(extra)]])
        order = np.argsort(along, kind="stable")
        points = points[order]
        apart = np.concatenate([[True], np.hypot(*np.diff(points, axis=0).T) > 1e-6])
        out.append(points[apart])
    return out


def _within_grade(road: Road, line: Array, elevations: Elevations | None) -> tuple[Array, Warning | None]:
    """Which pieces of a road are not too steep; pieces of unknown grade are driven."""
    step = np.hypot(*np.diff(line, axis=0).T)
    if road.grade_limit is None or elevations is None:
        return np.ones(len(step), bool), None
    # A grade is felt over the length of a truck's run, not over a metre: half a window each way from the middle.
    at = np.concatenate([[0.0], np.cumsum(step)])
    middle = (at[:-1] + at[1:]) / 2
    low, high = np.maximum(middle - _WINDOW_M / 2, 0.0), np.minimum(middle + _WINDOW_M / 2, at[-1])
    grade = np.abs(_heights(line, at, high, elevations) - _heights(line, at, low, elevations)) / np.maximum(
        high - low, 1e-9
    )
    steep = np.nan_to_num(grade) > road.grade_limit
    if not steep.any():
        return ~steep, None
    worst = int(np.nanargmax(grade))
    return ~steep, Warning(
        "road-too-steep",
        f'haul road "{road.name}": {step[steep].sum():.0f} m of it are steeper than its limit of '
        f"{100 * road.grade_limit:.3g} %, up to {100 * grade[worst]:.3g} %; they are not driven",
    )


def _heights(line: Array, at: Array, where: Array, elevations: Elevations) -> Array:
    """Heights at distances along a line."""
    return elevations(np.column_stack([np.interp(where, at, line[:, k]) for k in (0, 1)]))
