"""The moves and the blocks of a haul plan as layers of a GeoPackage, in the site's units."""

from __future__ import annotations

from pathlib import Path

import shapely

from earthwork.files.gis import write_shapes
from earthwork.plan.haul import HaulResult
from earthwork.reporting.display import display_table


def write_haul_shapes(result: HaulResult, path: Path) -> None:
    """Write ``moves`` (lines along the ways driven) and ``blocks`` (centres of mass, pits and tips)."""
    import pandas as pd

    frame = result.areas.frame
    crs = frame.grid.crs
    layers = 0
    if result.moves:
        lines = [shapely.LineString(frame.map(move.points)) for move in result.moves]
        table = display_table(pd.DataFrame([move.to_dict() for move in result.moves]), result.units)
        write_shapes(path, "moves", lines, table, crs=crs)
        layers += 1
    if result.blocks:
        unit = frame.grid.unit_m
        points = [shapely.Point(block.easting_m / unit, block.northing_m / unit) for block in result.blocks]
        table = pd.DataFrame([block.to_dict() for block in result.blocks]).drop(columns=["easting_m", "northing_m"])
        write_shapes(path, "blocks", points, display_table(table, result.units), crs=crs, append=layers > 0)
