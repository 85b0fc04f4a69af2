"""Haul roads as a net of nodes: where they cross they join, and a truck may leave or enter them all along."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import cached_property

import numpy as np
import shapely

from earthwork.errors import Warning
from earthwork.plan.visibility import Array

#: Nodes of a net; more roads get a wider spacing.
_NODES = 1000
_SPACING_M = 10.0

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

    ``nodes`` (n, 2) [m]; ``tails``, ``heads``, ``road``, ``effort`` (k,): links, one for each direction that may be
    driven, with the effort in metres of open ground that take as long.
    """

    roads: tuple[Road, ...]
    nodes: Array
    tails: Array
    heads: Array
    road: Array
    effort: Array
    warnings: tuple[Warning, ...] = ()

    @classmethod
    def of(cls, roads: Sequence[Road], *, ground_speed_m_s: float, elevations: Elevations | None = None) -> RoadNet:
        """A net of roads.

        Args:
            ground_speed_m_s: speed over open ground.
            elevations: heights of points (n, 2) [m], NaN where unknown; needed for grade limits.
        """
        lines = _joined([road.points for road in roads])
        spacing = max(_SPACING_M, sum(shapely.LineString(p).length for p in lines) / _NODES)
        lines = [shapely.get_coordinates(shapely.segmentize(shapely.LineString(p), spacing)) for p in lines]
        places = np.round(np.concatenate(lines), 3)
        nodes, number = np.unique(places, axis=0, return_inverse=True)
        number = number.ravel()
        tails, heads, of_road, effort, warnings = [], [], [], [], []
        first = 0
        for index, (road, line) in enumerate(zip(roads, lines, strict=True)):
            at = number[first : first + len(line)]
            first += len(line)
            step = np.hypot(*np.diff(line, axis=0).T)
            usable, warning = _within_grade(road, line, step, elevations)
            if warning:
                warnings.append(warning)
            a, b, e = at[:-1][usable], at[1:][usable], step[usable] * (ground_speed_m_s / road.speed_m_s)
            for tail, head in [(a, b)] if road.one_way else [(a, b), (b, a)]:
                tails.append(tail)
                heads.append(head)
                effort.append(e)
                of_road.append(np.full(len(tail), index))
        return cls(
            tuple(roads), nodes, np.concatenate(tails), np.concatenate(heads), np.concatenate(of_road),
            np.concatenate(effort), tuple(warnings),
        )  # fmt: skip

    @cached_property
    def _links(self) -> dict[tuple[int, int], tuple[int, float]]:
        links: dict[tuple[int, int], tuple[int, float]] = {}
        for tail, head, road, effort in zip(
            self.tails.tolist(), self.heads.tolist(), self.road.tolist(), self.effort.tolist(), strict=True
        ):
            if (tail, head) not in links or effort < links[tail, head][1]:
                links[tail, head] = (road, effort)
        return links

    def road_between(self, tail: int, head: int, effort: float) -> int:
        """Index of the road of a link that costs so much; −1 where the link runs over open ground."""
        road, along = self._links.get((tail, head), (-1, np.inf))
        return road if along <= effort * (1 + 1e-9) + 1e-8 else -1

    def worth_leaving(self, i: Array, j: Array, length: Array) -> Array:
        """Which links over open ground are shorter than the roads between their nodes, in one direction at least.

        Negative numbers are no nodes of the net; their links are kept.
        """
        from scipy.sparse import coo_array
        from scipy.sparse.csgraph import dijkstra

        size = len(self.nodes)
        graph = coo_array((np.maximum(self.effort, 1e-9), (self.tails, self.heads)), shape=(size, size)).tocsr()
        along = dijkstra(graph)
        keep = np.ones(len(i), bool)
        both = (i >= 0) & (j >= 0)
        slower = np.maximum(along[i[both], j[both]], along[j[both], i[both]])
        keep[both] = length[both] < slower * (1 - 1e-9)
        return keep


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


def _within_grade(road: Road, line: Array, step: Array, elevations: Elevations | None) -> tuple[Array, Warning | None]:
    """Which pieces of a road are not too steep; pieces of unknown grade are driven."""
    if road.grade_limit is None or elevations is None:
        return np.ones(len(step), bool), None
    grade = np.abs(np.diff(elevations(line))) / np.maximum(step, 1e-9)
    steep = np.nan_to_num(grade) > road.grade_limit
    if not steep.any():
        return ~steep, None
    worst = int(np.nanargmax(grade))
    return ~steep, Warning(
        "road-too-steep",
        f'haul road "{road.name}": {step[steep].sum():.0f} m of it are steeper than its limit of '
        f"{100 * road.grade_limit:.3g} %, up to {100 * grade[worst]:.3g} %; they are not driven",
    )
