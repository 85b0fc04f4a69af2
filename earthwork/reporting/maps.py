"""The maps of a run: depth raster, cut-and-fill map, and zones with their results."""

from __future__ import annotations

from functools import reduce
from typing import TYPE_CHECKING, Any

from earthwork.files.gis import write_shapes
from earthwork.files.output import OutputFolder
from earthwork.quantities.depth_map import DepthMapTally
from earthwork.reporting.basis import scale_line
from earthwork.reporting.cut_fill_map import draw_cut_fill_map
from earthwork.reporting.depth_raster import DepthRasterTally
from earthwork.reporting.display import display_table, show
from earthwork.site import Site

if TYPE_CHECKING:
    from earthwork.quantities.volumes import VolumesResult


def map_tallies(site: Site, folder: OutputFolder, command: str) -> tuple[DepthMapTally, DepthRasterTally]:
    """What gathers the maps of a command while the ground is walked."""
    raster = DepthRasterTally(folder.path(f"{command}_depth.tif"), site.units)
    folder.close_with(raster.abandon)
    return DepthMapTally(), raster


def write_maps(
    site: Site,
    volumes: VolumesResult,
    folder: OutputFolder,
    command: str,
    tallies: tuple[DepthMapTally, DepthRasterTally],
    *,
    subtitle: str = "",
) -> None:
    """Write ``<command>_depth.tif``, ``<command>_map.png`` and, where the site has zones, ``<command>_zones.gpkg``."""
    depths, raster = tallies
    raster.finish()
    ground = volumes.ground
    zones = list(zip(ground.zone_names, ground.zone_shapes, strict=True))
    if zones:
        write_zones(volumes, folder, command)
    if ground.design is not None:
        from earthwork.reporting.design_shapes import write_design

        write_design(ground.design, folder, command, site.units)
    picture = depths.map
    if picture is None:
        return
    draw_cut_fill_map(
        picture,
        folder.path(f"{command}_map.png"),
        units=site.units,
        title=f"{site.name}: cut and fill",
        subtitle=subtitle or "Stripped ground to subgrade",
        zones=zones,
        limits=limits_shape(ground),
        notes=_notes(site, volumes),
    )


def write_zones(volumes: VolumesResult, folder: OutputFolder, command: str) -> None:
    """Write each zone with its results, in the site's units, as a layer of a GeoPackage."""
    ground = volumes.ground
    table = display_table(volumes.tables()["volumes"], volumes.units)
    rows = table.iloc[1 : 1 + len(ground.zone_names)]
    write_shapes(folder.path(f"{command}_zones.gpkg"), "zones", ground.zone_shapes, rows, crs=ground.stack.grid.crs)


def limits_shape(ground: Any) -> Any:
    """The polygon of the limits in CRS coordinates, or None where all of the grid counts."""
    import shapely

    rings, grid = ground.stack.limits, ground.stack.grid
    if rings is None:
        return None
    parts = []
    for start, stop in zip(rings.ring_offsets, rings.ring_offsets[1:], strict=False):
        east = grid.west + rings.xs[start:stop] * grid.cell_east
        north = grid.north - rings.ys[start:stop] * grid.cell_north
        parts.append(shapely.Polygon(list(zip(east, north, strict=True))))
    # Rings of holes lie inside the others: the symmetric difference takes them out.
    return reduce(shapely.symmetric_difference, parts)


def _notes(site: Site, volumes: VolumesResult) -> list[str]:
    total = volumes.total
    notes = [
        f"Cut {show(total.cut_m3, 'soil_volume', site.units)}, bank",
        f"Fill {show(total.fill_m3, 'soil_volume', site.units)}, compacted",
    ]
    if total.missing_area_m2:
        notes.append(f"No data on {show(total.missing_area_m2, 'area', site.units)}")
    return [*notes, scale_line(site, volumes.to_dict()).split(" (")[0].rstrip(".")]
