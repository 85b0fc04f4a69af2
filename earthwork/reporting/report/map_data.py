"""What the interactive map of a page holds: packed surfaces, outlines, haul moves and lifts."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field, replace
from typing import Any

import numpy as np

from earthwork.ground.grid import Grid
from earthwork.quantities.surface_map import SurfaceMap
from earthwork.reporting.report.planes import Plane, pack, packed_size, whole_steps

#: Steps of the elevations, finest first [m].
_STEPS_M = (0.001, 0.002, 0.005, 0.01)
#: Outlines are drawn to this part of a cell.
_PART = 16
_SURFACES = ("existing", "stripped", "removal_bottom", "subgrade", "finished")


@dataclass(frozen=True)
class Outline:
    """A polygon or line to draw over the map."""

    layer: str
    name: str
    shape: Any
    note: str = ""


@dataclass(frozen=True)
class Arrow:
    """Earth that moves: along ``path`` when it is known, else straight; coordinates in CRS units."""

    path: tuple[tuple[float, float], ...]
    label: str
    mass_t: float
    kind: str  #: site, import or export


@dataclass(frozen=True)
class LiftRow:
    """A lift in placing order."""

    fill: int  #: number of its fill area in :attr:`MapContent.fills`, from 1
    label: str
    bottom_m: float
    top_m: float


@dataclass(frozen=True)
class MapContent:
    """Everything that is drawn over the surfaces."""

    outlines: Sequence[Outline] = ()
    arrows: Sequence[Arrow] = ()
    lifts: Sequence[LiftRow] = ()
    fills: np.ndarray | None = None  #: (rows, columns) of the overview: number of the fill area, 0 for none
    extra: dict[str, Any] = field(default_factory=dict)


def coarser(surfaces: SurfaceMap) -> SurfaceMap:
    """The overview with cells of twice the side."""
    grid = surfaces.grid
    rows, columns = -(-grid.rows // 2), -(-grid.columns // 2)
    small = replace(grid, rows=rows, columns=columns, cell_east=2 * grid.cell_east, cell_north=2 * grid.cell_north)

    def halves(values: np.ndarray, fill: float) -> np.ndarray:
        padded = np.full((2 * rows, 2 * columns), fill, dtype=values.dtype)
        padded[: values.shape[0], : values.shape[1]] = values
        return padded.reshape(rows, 2, columns, 2)

    def mean(values: np.ndarray) -> np.ndarray:
        parts = halves(values, np.nan)
        known = np.isfinite(parts).sum(axis=(1, 3))
        total = np.nansum(parts, axis=(1, 3))
        return np.where(known > 0, total / np.maximum(known, 1), np.nan)

    means = {name: mean(getattr(surfaces, name)) for name in _SURFACES}
    stratum = halves(surfaces.stratum, -1).max(axis=(1, 3))
    return SurfaceMap(small, 2 * surfaces.every, **means, stratum=stratum, materials=surfaces.materials)


def surface_planes(surfaces: SurfaceMap, step_m: float) -> dict[str, Plane]:
    """The surfaces as planes: existing, and the others as the differences that are nothing over most of a site."""
    whole = {name: whole_steps(getattr(surfaces, name), step_m) for name in _SURFACES}
    lower = np.minimum(whole["stripped"], whole["subgrade"])
    known = np.isfinite(surfaces.depth)
    parts = {
        "existing": whole["existing"],
        "strip": whole["existing"] - whole["stripped"],
        "depth": whole["subgrade"] - whole["stripped"],
        "section": whole["finished"] - whole["subgrade"],
        "refill": lower - whole["removal_bottom"],
    }
    planes = {name: pack(values, step_m) for name, values in parts.items()}
    planes["stratum"] = pack(np.where(known, surfaces.stratum, -1), 1.0)
    return planes


def fitting_planes(surfaces: SurfaceMap, most_characters: int) -> tuple[SurfaceMap, dict[str, Plane]]:
    """The surfaces in the finest steps and cells that take at most so many characters."""
    while True:
        for step in _STEPS_M:
            try:
                planes = surface_planes(surfaces, step)
            except ValueError:
                continue
            if packed_size(planes) <= most_characters:
                return surfaces, planes
        if surfaces.grid.rows * surfaces.grid.columns <= 4096:
            return surfaces, surface_planes(surfaces, _STEPS_M[-1])
        surfaces = coarser(surfaces)


def map_document(surfaces: SurfaceMap, content: MapContent, *, most_characters: int) -> dict[str, Any]:
    """The data of the map, as the page's script reads it.

    Args:
        surfaces: the overview.
        content: what is drawn over it.
        most_characters: that the surfaces may take; they are coarsened until they fit.
    """
    fills = content.fills
    shown, planes = fitting_planes(surfaces, most_characters)
    if fills is not None:
        ratio = shown.every // surfaces.every
        rows, columns = (np.arange(n) * ratio + ratio // 2 for n in (shown.grid.rows, shown.grid.columns))
        near = np.ix_(np.minimum(rows, fills.shape[0] - 1), np.minimum(columns, fills.shape[1] - 1))
        planes["fill"] = pack(fills[near], 1.0)
    grid = shown.grid
    return {
        "grid": {
            "rows": grid.rows, "columns": grid.columns, "west": grid.west, "north": grid.north,
            "cell_east": grid.cell_east, "cell_north": grid.cell_north,
            "ground_m": grid.unit_m * grid.ground_scale, "every": shown.every,
        },
        "planes": {name: plane.to_dict() for name, plane in planes.items()},
        "materials": list(shown.materials),
        "outlines": [_outline(o, grid) for o in content.outlines],
        "arrows": [
            {"path": _line(a.path, grid), "label": a.label, "mass": round(a.mass_t, 1), "kind": a.kind}
            for a in content.arrows
        ],
        "lifts": [
            {"fill": r.fill, "label": r.label, "bottom": round(r.bottom_m, 4), "top": round(r.top_m, 4)}
            for r in content.lifts
        ],
        **content.extra,
    }  # fmt: skip


def _outline(outline: Outline, grid: Grid) -> dict[str, Any]:
    shape = outline.shape.simplify(0.15 * min(grid.cell_east, grid.cell_north))
    rings = [list(ring.coords) for ring in _rings(shape)]
    return {
        "layer": outline.layer,
        "name": outline.name,
        "note": outline.note,
        "closed": shape.geom_type.endswith("Polygon"),
        "rings": [_line(ring, grid) for ring in rings],
    }


def _rings(shape: Any) -> list[Any]:
    if hasattr(shape, "geoms"):
        return [ring for part in shape.geoms for ring in _rings(part)]
    if shape.is_empty:
        return []
    return [shape.exterior, *shape.interiors] if shape.geom_type == "Polygon" else [shape]


def _line(points: Sequence[Sequence[float]], grid: Grid) -> list[int]:
    """Points as differences in parts of a cell: column, row, column, row …"""
    cells = np.array([grid.cell(p[0], p[1])[::-1] for p in points]).reshape(-1, 2)
    whole = np.rint(cells * _PART).astype(int)
    return [int(v) for v in np.diff(whole, axis=0, prepend=np.zeros((1, 2), dtype=int)).ravel()]
