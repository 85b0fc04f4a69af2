"""Shortest ways between places around barriers and along haul roads.

Without roads the shortest way is a string pulled taut round the barriers: straight where the straight line is free,
else bent only at convex corners. So the ways are exact, a shortest path in the graph of what sees what (Lozano-Pérez
and Wesley 1979), and do not depend on a grid. Roads join that graph with nodes along them; they cross barriers as a
bridge or a gate does, and a way over ground and roads of different speed is the quickest one.
"""

from __future__ import annotations

import os
from collections.abc import Callable, Iterator
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass
from itertools import pairwise
from typing import Any

import numpy as np

from earthwork.plan.barriers import Barriers
from earthwork.plan.roads import RoadNet
from earthwork.plan.visibility import (
    Array,
    free_lengths,
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
    """Ways from n places to m places; ``inf`` where there is none.

    ``effort``: metres of open ground that take as long, equal to ``length`` without roads.
    """

    length: Array
    effort: Array


class Ways:
    """Finds the ways between places on one piece of ground.

    Args:
        barriers: what nothing drives over.
        roads: haul roads, or None.
        threads: default: one a processor.

    >>> import shapely
    >>> ways = Ways(Barriers.of([shapely.box(-1, -3, 1, 3)]))
    >>> table = ways.table(np.array([[-5.0, 0.0]]), np.array([[5.0, 0.0], [-5.0, 4.0]]))
    >>> [round(float(x), 9) for x in table.length[0]]  # 2 × √(4² + 3²) + 2 around the box; straight
    [12.0, 4.0]
    """

    def __init__(self, barriers: Barriers, roads: RoadNet | None = None, *, threads: int | None = None) -> None:
        self.barriers = barriers
        self.roads = roads
        self._threads = threads or os.cpu_count() or 1
        corners = barriers.corners if barriers.walls is not None else np.zeros((0, 6))
        self._nodes = corners
        if roads is not None:
            free = np.full((len(roads.nodes), 4), np.nan)
            self._nodes = np.vstack([corners, np.hstack([roads.nodes, free])])
        self._graph: Any = self._links() if len(self._nodes) else None

    def table(self, sources: Array, targets: Array) -> WayTable:
        """Lengths of the ways from each source to each target."""
        starts, out = self.barriers.exits(sources)
        ends, back = self.barriers.exits(targets)
        effort = self._straight(starts, ends)
        length = effort.copy()
        if self._graph is not None:
            reached = self._pairs(ends)
            by_end = np.split(np.arange(len(reached[0])), np.searchsorted(reached[0], np.arange(1, len(ends))))
            for rows, cost, far in self._from(starts):
                for j, pairs in enumerate(by_end):
                    if not len(pairs):
                        continue
                    nodes, last = reached[1][pairs], reached[2][pairs]
                    through = cost[:, nodes] + last
                    best = through.argmin(axis=1)
                    value = through[np.arange(len(best)), best]
                    better = value < effort[rows, j]
                    effort[rows, j] = np.where(better, value, effort[rows, j])
                    along = far[np.arange(len(best)), nodes[best]] + last[best]
                    length[rows, j] = np.where(better, along, length[rows, j])
        detour = out[:, None] + back[None, :]
        return WayTable(length + detour, effort + detour)

    def ways(self, sources: Array, targets: Array) -> list[Way | None]:
        """The way of each pair of a source and a target, None where there is none."""
        starts, _ = self.barriers.exits(sources)
        ends, _ = self.barriers.exits(targets)
        found: list[Way | None] = []
        order, first = np.unique(starts, axis=0, return_inverse=True)
        reached = self._pairs(ends) if self._graph is not None else None
        tree: dict[int, tuple[Array, Array]] = {}
        if self._graph is not None:
            for rows, cost, before in self._from(order, before=True):
                tree.update({int(r): (cost[k], before[k]) for k, r in enumerate(rows)})
        for k in range(len(starts)):
            inner = self._way(starts[k], ends[k], k, tree.get(int(first.ravel()[k])), reached)
            found.append(None if inner is None else _with_ends(sources[k], inner, targets[k]))
        return found

    # --- the graph ---------------------------------------------------------------------------------------------------

    def _links(self) -> Any:
        """Sparse matrix of what one may drive from node to node, in metres of open ground."""
        from scipy.sparse import coo_array

        i, j = self._seen_nodes()
        length = np.hypot(*(self._nodes[i, :2] - self._nodes[j, :2]).T)
        tails, heads, efforts = [i, j], [j, i], [length, length]
        if self.roads is not None:
            shift = len(self._nodes) - len(self.roads.nodes)
            kept = self.roads.worth_leaving(i - shift, j - shift, length)
            tails, heads, efforts = [i[kept], j[kept]], [j[kept], i[kept]], [length[kept], length[kept]]
            tails.append(self.roads.tails + shift)
            heads.append(self.roads.heads + shift)
            efforts.append(self.roads.effort)
        return _lightest(
            np.concatenate(tails), np.concatenate(heads), np.concatenate(efforts), len(self._nodes), coo_array
        )

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

    def _pairs(self, points: Array) -> tuple[Array, Array, Array]:
        """Pairs (point, node) that see each other, sorted by point, and their lengths."""
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
        return i, j, np.hypot(*(points[i] - self._nodes[j, :2]).T)

    def _straight(self, starts: Array, ends: Array) -> Array:
        """Straight distances, ``inf`` where a barrier is in the way."""
        if self.barriers.walls is None:
            return np.hypot(starts[:, None, 0] - ends[None, :, 0], starts[:, None, 1] - ends[None, :, 1])
        walls = self.barriers.walls.arguments
        out = np.empty((len(starts), len(ends)))
        self._in_parts(len(starts), lambda a, b: free_lengths(starts[a:b], ends, walls, out[a:b]))
        return out

    def _from(self, starts: Array, *, before: bool = False) -> Iterator[tuple[Array, Array, Array]]:
        """Rows of starts, their cheapest efforts to all nodes, and lengths (or the nodes before) of those ways."""
        from scipy.sparse import coo_array
        from scipy.sparse.csgraph import dijkstra

        count = len(self._nodes)
        i, j, length = self._pairs(starts)
        core = self._graph.tocoo()
        step = max(1, _CHUNK // (count + 1))
        for first in range(0, len(starts), step):
            rows = np.arange(first, min(first + step, len(starts)))
            mine = (i >= first) & (i < first + step)
            size = count + len(rows)
            graph = coo_array(
                (
                    np.concatenate([core.data, length[mine]]),
                    (np.concatenate([core.row, i[mine] - first + count]), np.concatenate([core.col, j[mine]])),
                ),
                shape=(size, size),
            ).tocsr()
            if not before and self.roads is None:
                cost = dijkstra(graph, indices=count + rows - first)
                yield rows, cost[:, :count], cost[:, :count]
                continue
            cost, tree = dijkstra(graph, indices=count + rows - first, return_predecessors=True)
            if before:
                yield rows, cost[:, :count], tree[:, :count]
            else:
                yield rows, cost[:, :count], self._lengths(starts[rows], cost, tree, count)

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
        best = float(self._straight(start[None], end[None])[0, 0])
        nodes: list[int] = []
        if tree is not None and reached is not None:
            cost, before = tree
            low, high = np.searchsorted(reached[0], [k, k + 1])
            seen, last = reached[1][low:high], reached[2][low:high]
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
        if self.roads is not None:
            shift = len(self._nodes) - len(self.roads.nodes)
            for k, (a, b) in enumerate(pairwise(nodes)):
                road[k + 1] = self.roads.road_between(a - shift, b - shift, float(self._graph[a, b]))
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


def _lightest(tails: Array, heads: Array, efforts: Array, size: int, coo_array: Any) -> Any:
    """Sparse matrix that keeps the least of parallel links."""
    order = np.lexsort((efforts, heads, tails))
    tails, heads, efforts = tails[order], heads[order], efforts[order]
    first = np.ones(len(tails), bool)
    first[1:] = (np.diff(tails) != 0) | (np.diff(heads) != 0)
    # A link without length would be no link in a sparse matrix.
    efforts = np.maximum(efforts[first], 1e-9)
    return coo_array((efforts, (tails[first], heads[first])), shape=(size, size)).tocsr()


def _with_ends(source: Array, way: Way, target: Array) -> Way:
    """Add the stretches inside barriers, and drop what has no length."""
    points = np.vstack([source, way.points, target])
    road = np.concatenate([[-1], way.road, [-1]])
    keep = np.hypot(*np.diff(points, axis=0).T) > 0
    if not keep.any():
        return Way(np.vstack([source, target]), np.array([-1]))
    return Way(np.vstack([points[:-1][keep], target]), road[keep])
