"""Brings the surfaces of a site together on one grid: CRS, extent, cells, ground scale, vertical units."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field, replace
from typing import TYPE_CHECKING, Any

from pyproj import CRS

from earthwork.crs import describe, horizontal, shift_doubt
from earthwork.errors import Warning
from earthwork.ground.candidates import (
    Candidate,
    RasterCandidate,
    candidate,
    no_overlap,
    stated_crs,
    with_crs,
    with_one_crs,
    with_unit,
)
from earthwork.ground.grid import Grid
from earthwork.ground.lattice import (
    common_window,
    cut,
    grid_of_limits,
    lattice_of,
    leading_raster,
    window_of_limits,
)
from earthwork.ground.sampling import sampled_elevation
from earthwork.ground.scale import ground_scale, scale_warnings
from earthwork.ground.surfaces import Surface
from earthwork.ground.vertical import VerticalFacts, one_sided_datum, refuse_other_datum

if TYPE_CHECKING:
    from earthwork.files.vectors import NamedPolygon
    from earthwork.site.load import Site

_WAYS = {
    "bilinear": "interpolated between the four samples around each cell's centre",
    "average": "averaged over each cell, since it is finer than the cells",
    "nodes": "read as nodes: the value of a cell is the mean of the patch between its nodes",
}


@dataclass(frozen=True)
class SurfaceSet:
    """The surfaces of a site on one grid.

    Attributes:
        grid: with its ground scale and unit.
        existing: ground as surveyed.
        finished: proposed finished grade; None where the site has a [design] instead.
        sample: what a value of the raster that gives the grid stands for, "cell" or "node".
        mean_elevation_m: sampled mean of the existing ground [m], used for the ground scale.
        vertical: unit and datum of each raster.
        limits: polygons within which ground counts, in the grid's CRS; None where the site names none.
        limits_outside_m2: ground inside the limits that the surfaces do not cover, and so no cell shows [m²].
        footprint: ground that all surfaces cover, where it is not the grid's whole rectangle (a raster in another
            CRS), else None.
        notes: how surfaces came onto the grid, as sentences for reports.
        warnings: what is doubtful.
    """

    grid: Grid
    existing: Surface
    finished: Surface | None
    sample: str
    mean_elevation_m: float
    vertical: tuple[VerticalFacts, ...]
    limits: tuple[NamedPolygon, ...] | None
    limits_outside_m2: float
    footprint: Any
    notes: tuple[str, ...]
    warnings: tuple[Warning, ...]
    site: Site = field(repr=False)

    def surface(self, spec: Any, what: str, *, warnings: list[Warning] | None = None) -> Surface:
        """A further surface (bottom of a stratum or of an over-excavation) on the same grid.

        Ground that its file does not cover has no data.

        Args:
            spec: the surface in the site file.
            what: what it is to the user, for messages.
            warnings: a list to which doubts are added.

        Raises:
            FileError, GroundError: as for the main surfaces.
        """
        found = candidate(self.site, spec, what)
        if not isinstance(found, RasterCandidate):
            return found.on(self.grid)
        found = with_crs(found, stated_crs(self.site), self.grid.crs)
        found, facts, doubts = with_unit(found, self.site)
        refuse_other_datum([*self.vertical, facts])
        if warnings is not None:
            warnings.extend(doubts)
        rows, columns = found.valid_range(self.grid)
        if rows[1] <= rows[0] or columns[1] <= columns[0]:
            raise no_overlap(found, "the site", self.grid)
        return found.on(self.grid)


def open_ground(site: Site) -> SurfaceSet:
    """The surfaces of a site on one grid.

    The grid is that of the finer of the existing and the finished raster (ties: existing), or ``ground.cell`` on its
    lattice, cut to the cells that all of them give and to the box around the limits.

    Raises:
        FileError: a file that is missing, no raster, or damaged.
        GroundError: surfaces that do not fit: CRS missing on one side, degrees, other vertical datum, rotated, no
            overlap.
        SiteFileError: ``site.crs`` is not a CRS.
    """
    found, vertical, doubts = _found(site)
    lead = leading_raster(found)
    doubts += _reprojection_doubts(found, lead)
    crs = lead.crs if lead is not None else stated_crs(site)
    limits, area = _limits(site, horizontal(crs) if crs is not None else None, doubts)
    base = lattice_of(lead, site) if lead is not None else grid_of_limits(site, crs, area)
    window = common_window(base, found, lead)
    covered = cut(base, window)
    grid = cut(base, window_of_limits(base, window, area)) if area is not None else covered
    elevation = _mean_elevation(found, grid, doubts)
    grid = replace(grid, ground_scale=_scale(site, grid, elevation, doubts))
    surfaces = [c.on(grid) for c in found]
    return SurfaceSet(
        grid=grid,
        existing=surfaces[0],
        finished=surfaces[1] if len(surfaces) > 1 else None,
        sample="node" if lead is not None and lead.nodes else "cell",
        mean_elevation_m=elevation,
        vertical=vertical,
        limits=limits,
        limits_outside_m2=_outside_m2(area, covered, grid),
        footprint=_common_footprint(found, grid),
        notes=_notes(found, surfaces, lead),
        warnings=tuple(dict.fromkeys(doubts)),
        site=site,
    )


def _found(site: Site) -> tuple[list[Candidate], tuple[VerticalFacts, ...], list[Warning]]:
    """Existing and finished surface with CRS and unit of each, the facts of their units, and doubts."""
    ground = site.model.ground
    specs = [(ground.existing, "ground.existing")]
    specs += [(ground.finished, "ground.finished")] if ground.finished is not None else []
    found, doubts = with_one_crs([candidate(site, spec, what) for spec, what in specs], stated_crs(site))
    vertical: list[VerticalFacts] = []
    for i, surface in enumerate(found):
        if isinstance(surface, RasterCandidate):
            found[i], facts, more = with_unit(surface, site)
            vertical.append(facts)
            doubts += more
    refuse_other_datum(vertical)
    doubts += one_sided_datum(vertical)
    return found, tuple(vertical), doubts


def _reprojection_doubts(found: Sequence[Candidate], lead: RasterCandidate | None) -> list[Warning]:
    """What the user must know of rasters in another CRS than that of the grid."""
    doubts: list[Warning] = []
    if lead is None or lead.crs is None:
        return doubts
    for raster in found:
        if not isinstance(raster, RasterCandidate) or raster.crs is None or raster.shares_crs(lead.crs):
            continue
        west, south, east, north = raster.info.bounds
        shift = shift_doubt(raster.crs, lead.crs, (west + east) / 2, (south + north) / 2)
        message = (
            f"{raster.name}: it is in {describe(raster.crs)} and is reprojected to {describe(lead.crs)}, the CRS of "
            f"{lead.what}, in which all coordinates of the site file are understood" + (f"; {shift}" if shift else "")
        )
        doubts.append(Warning("reprojected", message))
    return doubts


def _limits(site: Site, crs: CRS | None, doubts: list[Warning]) -> tuple[tuple[NamedPolygon, ...] | None, Any]:
    """The polygons of the limits and their union; (None, None) without limits."""
    spec = site.model.ground.limits
    if spec is None:
        return None, None
    from earthwork.files.vectors import read_polygons
    from earthwork.ground.areas import union_area

    polygons = read_polygons(spec, site.directory, crs=crs, what="ground.limits", warnings=doubts)
    return tuple(polygons), union_area(polygons)


def _outside_m2(area: Any, covered: Grid, grid: Grid) -> float:
    """Ground area of the limits beyond the ground that the surfaces cover [m²]."""
    if area is None:
        return 0.0
    import shapely

    outside = shapely.area(shapely.difference(area, shapely.box(*covered.bounds)))
    return float(outside) * (grid.unit_m * grid.ground_scale) ** 2


def _mean_elevation(found: Sequence[Candidate], grid: Grid, doubts: list[Warning]) -> float:
    """Sampled mean elevation [m] of the existing ground, else of the finished; 0 with a doubt where none has data."""
    for surface in found:
        mean = sampled_elevation(surface.on(grid), grid)
        if mean is not None:
            return mean
    message = "no data was found where the surfaces were sampled; elevation 0 is taken for the ground scale"
    doubts.append(Warning("elevation-unknown", message))
    return 0.0


def _scale(site: Site, grid: Grid, elevation: float, doubts: list[Warning]) -> float:
    """The ground scale that the site states, or that of its centre."""
    west, south, east, north = grid.bounds
    centre = ((west + east) / 2, (south + north) / 2)
    doubts += scale_warnings(grid.crs, *centre)
    stated = site.model.ground.ground_scale
    return ground_scale(grid.crs, *centre, elevation) if stated == "auto" else float(stated)


def _common_footprint(found: Sequence[Candidate], grid: Grid) -> Any:
    """The ground that all rasters of another CRS cover; None when there is none in another CRS."""
    others = [c for c in found if isinstance(c, RasterCandidate) and not c.shares_crs(grid.crs)]
    if not others:
        return None
    import shapely

    return shapely.intersection_all([c.footprint(grid) for c in others])


def _notes(found: Sequence[Candidate], surfaces: Sequence[Surface], lead: RasterCandidate | None) -> tuple[str, ...]:
    """One sentence for each raster that is not read as it is."""
    notes = []
    for raster, surface in zip(found, surfaces, strict=True):
        if not isinstance(raster, RasterCandidate) or surface.resampling not in _WAYS:
            continue
        onto = f", onto the grid of {lead.info.name}" if lead is not None and lead is not raster else ""
        shares = lead is None or raster.shares_crs(lead.crs)
        out_of = "" if shares else f", out of {describe(raster.crs)}"
        notes.append(f"{raster.what} ({raster.info.name}) is {_WAYS[surface.resampling]}{onto}{out_of}")
    return tuple(notes)
