"""Shortest ways between places around barriers and along haul roads.

Without roads the shortest way is a string pulled taut round the barriers: straight where the straight line is free,
else bent only at convex corners. So the ways are exact, a shortest path in the graph of what sees what (Lozano-Pérez
and Wesley 1979), and do not depend on a grid. Roads join that graph with nodes along them; they cross barriers as a
bridge or a gate does, and a way over ground and roads of different speed is the quickest one.
"""

from __future__ import annotations

import copy
import os
from collections.abc import Callable, Iterator
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass
from itertools import pairwise
from typing import Any

import numpy as np

from earthwork.plan.barriers import Barriers
from earthwork.plan.roads import RoadNet, lightest_links
from earthwork.plan.visibility import (
    Array,
    free_lengths,
    shorten,
    visible_among_corners,
    visible_corners,
)

#: Entries of a matrix of path costs that are held at once.
_CHUNK = 20_000_000


@dataclass(frozen=True)
class Way:
    """A way as driven.

    ``points`` (k, 2) [m], from the place of the earth to the place it goes to. ``road`` (k − 1,): index of the road
    that each stretch runs on, −1 over open ground.
    """

    points: Array
    road: Array

    @property
    def stretches_m(self) -> Array:
        """Length of each stretch [m]."""
        return np.hypot(*np.diff(self.points, axis=0).T)

    @property
    def length_m(self) -> float:
        return float(self.stretches_m.sum())


@dataclass(frozen=True)
class WayTable:
    """Ways from n places to m places; ``inf`` where there is none. ``effort`` is what the ways were chosen by."""

    length: Array
    effort: Array


#: Effort of straight lines from (k, 2) to (k, 2) at a speed limit (k,) [m/s]: metres, minutes or whatever is to be
#: least.
Effort = Callable[[Array, Array, Array], Array]


def metres(start: Array, end: Array, limit_m_s: Array) -> Array:
    """Length as the effort, whatever the speed."""
    return np.hypot(*(end - start).T)


def seconds(start: Array, end: Array, limit_m_s: Array) -> Array:
    """Time at the speed limit as the effort."""
    return np.hypot(*(end - start).T) / limit_m_s


class Ways:
    """Finds the ways between places on one piece of ground.

    Args:
        barriers: what nothing drives over.
        roads: haul roads, or None.
        effort: what a way is chosen by.
        ground_speed_m_s: speed limit of open ground.
        threads: default: one a processor.

    >>> import shapely
    >>> ways = Ways(Barriers.of([shapely.box(-1, -3, 1, 3)]))
    >>> table = ways.table(np.array([[-5.0, 0.0]]), np.array([[5.0, 0.0], [-5.0, 4.0]]))
    >>> [round(float(x), 9) for x in table.length[0]]  # 2 × √(4² + 3²) + 2 around the box; straight
    [12.0, 4.0]
    """

    def __init__(
        self,
        barriers: Barriers,
        roads: RoadNet | None = None,
        *,
        effort: Effort = metres,
        ground_speed_m_s: float = 1.0,
        threads: int | None = None,
    ) -> None:
        self.barriers = barriers
        self.roads = roads
        self.effort = effort
        self._speed = ground_speed_m_s
        self._threads = threads or os.cpu_count() or 1
        corners = barriers.corners if barriers.walls is not None else np.zeros((0, 6))
        self._nodes = corners
        if roads is not None:
            free = np.full((len(roads.nodes), 4), np.nan)
            self._nodes = np.vstack([corners, np.hstack([roads.nodes, free])])
        self._seen = self._seen_nodes() if len(self._nodes) else None
        self._link()

    def chosen_by(self, effort: Effort) -> Ways:
        """The same ground, with ways chosen by another effort."""
        other = copy.copy(self)
        other.effort = effort
        other._link()
        return other

    def table(self, sources: Array, targets: Array) -> WayTable:
        """Lengths of the ways from each source to each target."""
        starts, out = self.barriers.exits(sources)
        ends, back = self.barriers.exits(targets)
        length = self._straight(starts, ends)
        effort = self._straight_effort(starts, ends, length)
        if self._graph is not None:
            self._through_nodes(starts, ends, length, effort)
        leaving = self._ground_effort(np.asarray(sources, float), starts)
        arriving = self._ground_effort(ends, np.asarray(targets, float))
        return WayTable(length + out[:, None] + back[None, :], effort + leaving[:, None] + arriving[None, :])

    def ways(self, sources: Array, targets: Array) -> list[Way | None]:
        """The way of each pair of a source and a target, None where there is none."""
        starts, _ = self.barriers.exits(sources)
        ends, _ = self.barriers.exits(targets)
        found: list[Way | None] = []
        order, first = np.unique(starts, axis=0, return_inverse=True)
        reached = self._pairs(ends, arriving=True) if self._graph is not None else None
        tree: dict[int, tuple[Array, Array]] = {}
        if self._graph is not None:
            for rows, cost, before in self._from(order, before=True):
                tree.update({int(r): (cost[k], before[k]) for k, r in enumerate(rows)})
        for k in range(len(starts)):
            inner = self._way(starts[k], ends[k], k, tree.get(int(first.ravel()[k])), reached)
            found.append(None if inner is None else _with_ends(sources[k], inner, targets[k]))
        return found

    # --- the graph ---------------------------------------------------------------------------------------------------

    def _ground_effort(self, start: Array, end: Array) -> Array:
        return self.effort(start, end, np.full(len(start), self._speed))

    def _link(self) -> None:
        """Sparse matrix of what one may drive from node to node, and the efforts by road."""
        self._by_road: dict[tuple[int, int], tuple[int, float]] = {}
        self._graph: Any = None
        if self._seen is None:
            return
        i, j = self._seen
        places = self._nodes[:, :2]
        tails, heads = np.concatenate([i, j]), np.concatenate([j, i])
        efforts = self._ground_effort(places[tails], places[heads])
        if self.roads is not None:
            shift = len(self._nodes) - len(self.roads.nodes)
            road_effort = self.effort(
                self.roads.nodes[self.roads.tails], self.roads.nodes[self.roads.heads], self.roads.limits_m_s
            )
            kept = self._worth_leaving(tails - shift, heads - shift, efforts, road_effort)
            tails = np.concatenate([tails[kept], self.roads.tails + shift])
            heads = np.concatenate([heads[kept], self.roads.heads + shift])
            efforts = np.concatenate([efforts[kept], road_effort])
            self._note_roads(road_effort, shift)
        self._graph = lightest_links(tails, heads, efforts, len(self._nodes))

    def _worth_leaving(self, tails: Array, heads: Array, efforts: Array, road_effort: Array) -> Array:
        """Which links over open ground are quicker than the roads between their nodes; −: not a node of a road."""
        assert self.roads is not None
        along = self.roads.along(road_effort)
        keep = np.ones(len(tails), bool)
        both = (tails >= 0) & (heads >= 0)
        keep[both] = efforts[both] < along[tails[both], heads[both]] * (1 - 1e-9)
        return keep

    def _note_roads(self, road_effort: Array, shift: int) -> None:
        assert self.roads is not None
        links = zip(self.roads.tails + shift, self.roads.heads + shift, self.roads.road, road_effort, strict=True)
        for tail, head, road, effort in links:
            key = int(tail), int(head)
            if key not in self._by_road or effort < self._by_road[key][1]:
                self._by_road[key] = int(road), float(effort)

    def _through_nodes(self, starts: Array, ends: Array, length: Array, effort: Array) -> None:
        """Shorten efforts, in place, by ways that bend; lengths follow."""
        point, node, last_length, last_effort = self._pairs(ends, arriving=True)
        edges = np.searchsorted(point, np.arange(len(ends) + 1))
        for rows, cost, far in self._from(starts):
            some_effort, some_length = effort[rows], length[rows]

            def part(a: int, b: int, cost=cost, far=far, efforts=some_effort, lengths=some_length) -> None:
                shorten(cost[a:b], far[a:b], edges, node, last_effort, last_length, efforts[a:b], lengths[a:b])

            self._in_parts(len(rows), part)
            effort[rows], length[rows] = some_effort, some_length

    def _seen_nodes(self) -> tuple[Array, Array]:
        """Pairs of nodes that see each other."""
        count = len(self._nodes)
        if self.barriers.walls is None:
            return np.triu_indices(count, 1)
        walls = self.barriers.walls.arguments

        def part(start: int, stop: int) -> tuple[Array, Array]:
            return _grown(lambda a, b: visible_among_corners(self._nodes, start, stop, walls, a, b), 8 * count)

        pieces = self._in_parts(count, part)
        return np.concatenate([p[0] for p in pieces]), np.concatenate([p[1] for p in pieces])

    def _pairs(self, points: Array, *, arriving: bool = False) -> tuple[Array, Array, Array, Array]:
        """Pairs (point, node) that see each other, sorted by point, with lengths and efforts of the way between.

        Args:
            arriving: whether the way runs from the node to the point.
        """
        if self.barriers.walls is None:
            i = np.repeat(np.arange(len(points)), len(self._nodes))
            j = np.tile(np.arange(len(self._nodes)), len(points))
        else:
            walls = self.barriers.walls.arguments

            def part(start: int, stop: int) -> tuple[Array, Array]:
                some = points[start:stop]
                a, b = _grown(lambda a, b: visible_corners(some, self._nodes, walls, a, b), 8 * len(self._nodes))
                return a + start, b

            pieces = self._in_parts(len(points), part)
            i, j = np.concatenate([p[0] for p in pieces]), np.concatenate([p[1] for p in pieces])
        here, there = points[i], self._nodes[j, :2]
        effort = self._ground_effort(there, here) if arriving else self._ground_effort(here, there)
        return i, j, np.hypot(*(there - here).T), effort

    def _straight(self, starts: Array, ends: Array) -> Array:
        """Straight distances, ``inf`` where a barrier is in the way."""
        if self.barriers.walls is None:
            return np.hypot(starts[:, None, 0] - ends[None, :, 0], starts[:, None, 1] - ends[None, :, 1])
        walls = self.barriers.walls.arguments
        out = np.empty((len(starts), len(ends)))
        self._in_parts(len(starts), lambda a, b: free_lengths(starts[a:b], ends, walls, out[a:b]))
        return out

    def _straight_effort(self, starts: Array, ends: Array, length: Array) -> Array:
        """Efforts of straight lines whose lengths are given, ``inf`` where they are."""
        if self.effort is metres:
            return length.copy()
        effort = np.full(length.shape, np.inf)
        i, j = np.nonzero(np.isfinite(length))
        effort[i, j] = self._ground_effort(starts[i], ends[j])
        return effort

    def _from(self, starts: Array, *, before: bool = False) -> Iterator[tuple[Array, Array, Array]]:
        """Rows of starts, their least efforts to all nodes, and lengths (or the nodes before) of those ways."""
        from scipy.sparse import coo_array
        from scipy.sparse.csgraph import dijkstra

        count = len(self._nodes)
        i, j, _, effort = self._pairs(starts)
        core = self._graph.tocoo()
        step = max(1, _CHUNK // (count + 1))
        for first in range(0, len(starts), step):
            rows = np.arange(first, min(first + step, len(starts)))
            mine = (i >= first) & (i < first + step)
            size = count + len(rows)
            links = np.concatenate([core.data, np.maximum(effort[mine], 1e-12)])
            tails = np.concatenate([core.row, i[mine] - first + count])
            heads = np.concatenate([core.col, j[mine]])
            graph = coo_array((links, (tails, heads)), shape=(size, size)).tocsr()
            if not before and self.effort is metres:
                cost = dijkstra(graph, indices=count + rows - first)
                inner = np.ascontiguousarray(cost[:, :count])
                yield rows, inner, inner
                continue
            cost, tree = dijkstra(graph, indices=count + rows - first, return_predecessors=True)
            if before:
                yield rows, cost[:, :count], tree[:, :count]
            else:
                lengths = self._lengths(starts[rows], cost, tree, count)
                yield rows, np.ascontiguousarray(cost[:, :count]), lengths

    def _lengths(self, starts: Array, cost: Array, tree: Array, count: int) -> Array:
        """Lengths of the ways whose efforts and trees are given."""
        places = np.vstack([self._nodes[:, :2], np.zeros((cost.shape[1] - count, 2))])
        length = np.full((len(starts), count), np.inf)
        for k in range(len(starts)):
            places[count + k] = starts[k]
            known = np.zeros(cost.shape[1])
            order = np.argsort(cost[k])
            order = order[np.isfinite(cost[k][order])]
            steps = np.hypot(*(places[order] - places[np.maximum(tree[k][order], 0)]).T)
            for node, back, step in zip(order.tolist(), tree[k][order].tolist(), steps.tolist(), strict=True):
                known[node] = known[back] + step if back >= 0 else 0.0
            reached = order[order < count]
            length[k, reached] = known[reached]
        return length

    def _way(
        self, start: Array, end: Array, k: int, tree: tuple[Array, Array] | None, reached: tuple | None
    ) -> Way | None:
        """The way between two free points."""
        length = self._straight(start[None], end[None])
        best = float(self._straight_effort(start[None], end[None], length)[0, 0])
        nodes: list[int] = []
        if tree is not None and reached is not None:
            cost, before = tree
            low, high = np.searchsorted(reached[0], [k, k + 1])
            seen, last = reached[1][low:high], reached[3][low:high]
            through = cost[seen] + last
            if len(seen) and through.min() < best:
                best = float(through.min())
                node = int(seen[through.argmin()])
                while 0 <= node < len(self._nodes):
                    nodes.append(node)
                    node = int(before[node])
        if not np.isfinite(best):
            return None
        nodes.reverse()
        points = np.vstack([start, self._nodes[nodes, :2], end])
        return Way(points, self._roads_of(nodes))

    def _roads_of(self, nodes: list[int]) -> Array:
        """Road of each stretch of a way through some nodes; its first and last stretch are over open ground."""
        road = np.full(len(nodes) + 1, -1)
        for k, (a, b) in enumerate(pairwise(nodes)):
            index, effort = self._by_road.get((a, b), (-1, np.inf))
            if effort <= float(self._graph[a, b]) * (1 + 1e-9) + 1e-9:
                road[k + 1] = index
        return road

    def _in_parts(self, count: int, work: Callable[[int, int], Any]) -> list[Any]:
        """Do work on ranges of indices, in threads."""
        parts = min(count, 8 * self._threads) or 1
        edges = [count * k // parts for k in range(parts + 1)]
        if self._threads == 1 or count < 16:
            return [work(a, b) for a, b in pairwise(edges)]
        with ThreadPoolExecutor(self._threads) as pool:
            return list(pool.map(work, edges[:-1], edges[1:]))


def _grown(fill: Callable[[Array, Array], int], room: int) -> tuple[Array, Array]:
    """Call a kernel that writes pairs, again with more room where the first was too little."""
    while True:
        a, b = np.empty(room, np.int64), np.empty(room, np.int64)
        count = fill(a, b)
        if count <= room:
            return a[:count], b[:count]
        room = count


def _with_ends(source: Array, way: Way, target: Array) -> Way:
    """Add the stretches inside barriers, and drop what has no length."""
    points = np.vstack([source, way.points, target])
    road = np.concatenate([[-1], way.road, [-1]])
    keep = np.hypot(*np.diff(points, axis=0).T) > 0
    if not keep.any():
        return Way(np.vstack([source, target]), np.array([-1]))
    return Way(np.vstack([points[:-1][keep], target]), road[keep])
