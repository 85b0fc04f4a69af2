"""Barriers as a machine meets them: one shape, its walls, and the corners that a shortest path may bend at.

Barriers are brought to whole millimetres, so that neighbours that share an edge leave no gap, and united. Lines are
tested against walls set back by half a millimetre: a path may run along a barrier and touch its corners.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import shapely

from earthwork.plan.visibility import Array, Walls, walls_of

_GRID_M = 1e-3
_SET_BACK_M = 5e-4


@dataclass(frozen=True)
class Barriers:
    """Ground that nothing drives over.

    ``corners`` (k, 6): convex corners, each with the wall's points before and after it [m].
    """

    shape: Any
    walls: Walls | None
    corners: Array

    @classmethod
    def of(cls, shapes: Sequence[Any]) -> Barriers:
        """Barriers from polygons [m]; those thinner than a millimetre vanish."""
        snapped = shapely.set_precision(np.array(list(shapes), object), _GRID_M)
        shape = shapely.union_all(snapped) if len(snapped) else shapely.Polygon()
        shape = shapely.simplify(shape, 0.0)  # takes out points in the middle of straight edges
        shape = shapely.MultiPolygon(_polygons(shape))
        behind = shapely.buffer(shape, -_SET_BACK_M, join_style="mitre", mitre_limit=20)
        edges = _edges(behind)
        return cls(shape, walls_of(edges) if len(edges) else None, _corners(shape))

    def exits(self, points: Array) -> tuple[Array, Array]:
        """Where earth at each point gets onto free ground, (n, 2), and how far that is, (n,) [m].

        Barriers stop travel, not digging: earth inside one leaves at the nearest point of its outline.
        """
        points = np.asarray(points, float)
        out, length = points.copy(), np.zeros(len(points))
        if self.walls is None:
            return out, length
        shapely.prepare(self.shape)
        for i in np.flatnonzero(shapely.contains_xy(self.shape, points[:, 0], points[:, 1])):
            here = shapely.Point(points[i])
            inside = next(p for p in self.shape.geoms if p.contains(here))
            nearest = shapely.shortest_line(inside.exterior, here)
            out[i] = shapely.get_coordinates(nearest)[0]
            length[i] = nearest.length
        return out, length


def _polygons(shape: Any) -> list[Any]:
    parts = shapely.get_parts(shape)
    return [p for p in parts if p.geom_type == "Polygon" and not p.is_empty]


def _rings(shape: Any) -> list[Array]:
    """Rings as open lists of points, the inside of the barrier on their left."""
    rings = []
    for polygon in _polygons(shape):
        for ring, ccw in [(polygon.exterior, True), *((hole, False) for hole in polygon.interiors)]:
            points = shapely.get_coordinates(ring)[:-1]
            rings.append(points if ring.is_ccw == ccw else points[::-1])
    return rings


def _edges(shape: Any) -> Array:
    rings = _rings(shape)
    if not rings:
        return np.zeros((0, 4))
    return np.concatenate([np.hstack([ring, np.roll(ring, -1, axis=0)]) for ring in rings])


def _corners(shape: Any) -> Array:
    """Corners where the barrier is convex: the others are never on a shortest path."""
    found = []
    for ring in _rings(shape):
        before, after = np.roll(ring, 1, axis=0), np.roll(ring, -1, axis=0)
        a, b = ring - before, after - ring
        turn = a[:, 0] * b[:, 1] - a[:, 1] * b[:, 0]
        convex = turn > 0
        found.append(np.hstack([ring, before, after])[convex])
    return np.concatenate(found) if found else np.zeros((0, 6))
