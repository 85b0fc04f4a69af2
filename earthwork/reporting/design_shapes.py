"""A design as shapes: toe, top and daylight lines, the ground that it takes up, and where walls would be needed."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from earthwork.files.dxf_lines import write_lines
from earthwork.files.gis import write_shapes
from earthwork.files.output import OutputFolder
from earthwork.units import UnitSystem

if TYPE_CHECKING:
    from earthwork.ground.open_design import BuiltDesign


def write_design(design: BuiltDesign, folder: OutputFolder, command: str, units: UnitSystem) -> None:
    """Write ``<command>_design.gpkg`` and ``<command>_design.dxf``; elevations in the site's unit."""
    import pandas as pd
    import shapely

    crs = design.design.grid.crs
    factor = units.factor("length")
    unit = units.unit("length")
    lines = design.lines.lines
    shapes = [shapely.transform(line.geometry, lambda c: c / [1.0, 1.0, factor], include_z=True) for line in lines]
    path = folder.path(f"{command}_design.gpkg")
    append = False
    if lines:
        rows = pd.DataFrame({"name": [line.name for line in lines], "kind": [line.kind for line in lines]})
        write_shapes(path, "lines", shapes, rows, crs=crs)
        write_lines(folder.path(f"{command}_design.dxf"), shapes, [line.kind.upper() for line in lines])
        append = True
    taken = pd.DataFrame({"what": ["pads, roads and their slopes"]})
    write_shapes(path, "area", [design.lines.area], taken, crs=crs, append=append)
    findings = design.inspection.findings
    if findings:
        table: dict[str, list[Any]] = {
            "what": [f.code for f in findings],
            "names": [", ".join(f.names) for f in findings],
            "slope": [f.kind or None for f in findings],
            f"height_{unit}": [f.height_m / factor for f in findings],
            "text": [f.text(units) for f in findings],
        }
        places = [shapely.Point(f.easting, f.northing) for f in findings]
        write_shapes(path, "walls_needed", places, pd.DataFrame(table), crs=crs, append=True)
