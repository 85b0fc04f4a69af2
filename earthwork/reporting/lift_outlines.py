"""Outlines of lifts as a layer of a GeoPackage, with the figures of each lift."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import shapely

from earthwork.files.gis import write_shapes
from earthwork.plan.fill_areas import Bench, FillArea
from earthwork.plan.lift_shapes import LiftShapes
from earthwork.plan.lifts import LiftsResult
from earthwork.reporting.display import display_table


def write_lift_outlines(result: LiftsResult, path: Path) -> None:
    """Write ``lifts``: the ground on which each lift has any thickness, in placing order, and its figures."""
    shapes, kept = [], []
    areas = {area.name: area for area in result.areas}
    for index, lift in enumerate(result.lifts):
        outline = lift_outline(result.shapes, areas[lift.fill], lift.bench)
        if outline is not None:
            shapes.append(outline)
            kept.append(index)
    if shapes:
        table = result.tables()["lifts"].iloc[kept].assign(order=[k + 1 for k in kept])
        crs = result.volumes.ground.stack.grid.crs
        write_shapes(path, "lifts", shapes, display_table(table, result.units), crs=crs)


def lift_outline(shapes: LiftShapes, area: FillArea, bench: Bench) -> Any:
    """The outline of a lift as a multi-polygon in CRS units; None where the overview has no cell of it."""
    from affine import Affine
    from rasterio.features import shapes as trace

    mask = shapes.mask(area, bench)
    if not mask.any():
        return None
    rows, columns, _ = shapes.window(area)
    fine, grid = shapes.coarse.fine, shapes.coarse.grid
    west, north = grid.point(rows.start * fine, columns.start * fine)
    transform = Affine(grid.cell_east * fine, 0.0, west, 0.0, -grid.cell_north * fine, north)
    parts = [
        shapely.geometry.shape(found)
        for found, value in trace(mask.astype(np.uint8), mask=mask, connectivity=4, transform=transform)
        if value
    ]
    return shapely.MultiPolygon([part for part in parts if isinstance(part, shapely.Polygon)])
