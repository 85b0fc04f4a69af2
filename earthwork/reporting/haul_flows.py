"""Moves as they are drawn on the haul map: by the way that they take, bundled where they are many."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from earthwork.ground.grid import Grid
from earthwork.plan.haul import HaulResult
from earthwork.reporting.map_frame import Frame

#: Numbered moves carry at most this share of all t·km; the rest is told by width alone.
_SHARE = 0.8
#: Up to so many moves are drawn each for itself; more are bundled by squares, so many along the longer side.
_FEW, _NEIGHBOURHOODS = 60, 7
#: Hauls shorter than this share of a block are dots.
_DOT_SHARE = 0.35
#: Pits and tips farther off the site than this share of its size are told at the edge of the map.
_NEAR_SHARE = 0.2


@dataclass(frozen=True)
class Flow:
    """All earth that goes one way, whatever the material; ``points`` in CRS coordinates."""

    from_name: str
    to_name: str
    kind: str
    mass_t: float
    length_m: float
    points: np.ndarray
    starts: int = 1  #: places that it comes from
    ends: int = 1

    @property
    def weight(self) -> float:
        return self.mass_t * self.length_m

    @property
    def label(self) -> str:
        """What it joins, such as ``C4 loess + 3 → I5 fill``."""
        names = ((self.from_name, self.starts), (self.to_name, self.ends))
        return " → ".join(name if count == 1 else f"{name} + {count - 1}" for name, count in names)


def flows_of(result: HaulResult) -> list[Flow]:
    """Moves between the same two points as one."""
    kinds = {block.block: block.kind for block in result.blocks}
    merged: dict[tuple, Flow] = {}
    for move in result.moves:
        kind = "in" if kinds.get(move.from_name) == "borrow" else "on site"
        if kinds.get(move.to_name) in ("disposal", "stockpile"):
            kind = "out"
        points = result.areas.frame.map(move.points)
        key = (kind, tuple(np.round(points[[0, -1]].ravel(), 3)))
        flow = Flow(move.from_name, move.to_name, kind, move.dry_mass_t, move.distance_m, points)
        known = merged.get(key)
        merged[key] = flow if known is None else replace(known, mass_t=known.mass_t + flow.mass_t)
    return list(merged.values())


def grid_around(result: HaulResult) -> Grid:
    """A grid over the blocks of the site with a margin; pits and tips that lie near are on the map as well."""
    grid = result.areas.frame.grid
    unit = grid.unit_m
    here = [b for b in result.blocks if b.kind in ("cut", "fill")]
    west, south, east, north = grid.bounds
    if here:
        places = np.array([[b.easting_m / unit, b.northing_m / unit] for b in here])
        layout = result.areas.layout
        side = max(layout.rows * grid.cell_north, layout.columns * grid.cell_east)
        low, high = places.min(axis=0) - side, places.max(axis=0) + side
        west, south, east, north = max(west, low[0]), max(south, low[1]), min(east, high[0]), min(north, high[1])
    margin = 0.06 * max(east - west, north - south)
    box = np.array([west - margin, south - margin, east + margin, north + margin])
    near = _NEAR_SHARE * max(east - west, north - south)
    reach = box + [-near, -near, near, near]
    for block in result.blocks:
        x, y = block.easting_m / unit, block.northing_m / unit
        if block.moved_t > 0 and reach[0] < x < reach[2] and reach[1] < y < reach[3]:
            box[:2] = np.minimum(box[:2], [x - margin, y - margin])
            box[2:] = np.maximum(box[2:], [x + margin, y + margin])
    # No map is longer than three times its width: beyond it the site would be a stripe.
    size = box[2:] - box[:2]
    lacking = np.maximum(size.max() / 3 - size, 0.0)
    box += np.concatenate([-lacking, lacking]) / 2
    return replace(
        grid, west=float(box[0]), north=float(box[3]), rows=1, columns=1, cell_east=float(box[2] - box[0]),
        cell_north=float(box[3] - box[1]),
    )  # fmt: skip


def bundled(flows: Sequence[Flow], frame: Frame) -> list[Flow]:
    """Moves from one neighbourhood to another as one, along the way of the heaviest, when there are many."""
    if len(flows) <= _FEW:
        return list(flows)
    west, east, south, north = frame.extent
    side = max(east - west, north - south) / _NEIGHBOURHOODS
    groups: dict[tuple, list[Flow]] = {}
    for flow in flows:
        cells = np.floor((np.clip(flow.points[[0, -1]], [west, south], [east, north]) - [west, south]) / side)
        key = (flow.kind, *cells.ravel().tolist())
        # What comes from or goes to a place off the site is one neighbourhood there.
        if flow.kind != "on site":
            key = (
                flow.kind,
                flow.from_name if flow.kind == "in" else flow.to_name,
                *cells[1 if flow.kind == "in" else 0],
            )
        groups.setdefault(key, []).append(flow)
    found = []
    for group in groups.values():
        mass = sum(f.mass_t for f in group)
        found.append(
            replace(
                max(group, key=lambda f: f.weight), mass_t=mass,
                length_m=sum(f.weight for f in group) / mass if mass > 0 else 0.0,
                starts=len({tuple(f.points[0]) for f in group}), ends=len({tuple(f.points[-1]) for f in group}),
            )
        )  # fmt: skip
    return found


def heaviest(flows: Sequence[Flow], most: int) -> list[Flow]:
    """The flows that carry most of the haul, the heaviest first."""
    ordered = sorted(flows, key=lambda f: -f.weight)
    total = sum(flow.weight for flow in flows)
    kept: list[Flow] = []
    for flow in ordered[:most]:
        if flow.weight <= 0 or sum(f.weight for f in kept) > _SHARE * total:
            break
        kept.append(flow)
    return kept


def stays_in_block(flow: Flow, result: HaulResult) -> bool:
    layout, grid = result.areas.layout, result.areas.frame.grid
    block = min(layout.rows * grid.cell_north_m, layout.columns * grid.cell_east_m)
    return flow.length_m < _DOT_SHARE * block
