"""Brings the surfaces of a site together on one grid: CRS, extent, cells, ground scale, vertical units."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, field, replace
from typing import TYPE_CHECKING, Any

import shapely
from pyproj import CRS

from earthwork.crs import describe, horizontal, horizontal_unit_m, parse_crs, same_place
from earthwork.errors import GroundError, SiteFileError, Warning
from earthwork.files.rasters import RasterInfo, RasterSource, raster_info
from earthwork.ground.areas import union_area
from earthwork.ground.grid import Grid, Window
from earthwork.ground.sampling import sampled_elevation
from earthwork.ground.scale import ground_scale, refuse_geographic, scale_warnings
from earthwork.ground.surfaces import (
    LevelGround,
    PlaneGround,
    Surface,
    aligned_offset,
    raster_on_grid,
    raster_taps,
    require_north_up,
)
from earthwork.ground.vertical import VerticalFacts, refuse_other_datum, vertical_facts
from earthwork.ground.warp import footprint, warped_raster

if TYPE_CHECKING:
    from earthwork.files.vectors import NamedPolygon
    from earthwork.site.load import Site
    from earthwork.site.model import LevelSurface, PlaneSurface, RasterSurface

    SurfaceSpec = RasterSurface | LevelSurface | PlaneSurface

#: Rasters whose cells differ in area by less than this part are equally fine, and the existing one gives the grid.
_EQUALLY_FINE = 0.01

#: A cell size that is this close to a whole multiple (or part) of the raster's is that multiple.
_WHOLE = 1e-6


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
        limits_outside_m2: ground area inside the limits that no cell of the grid reaches [m²].
        footprint: ground that all surfaces cover, where it is not the grid's whole rectangle (another CRS), else None.
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

    def surface(self, spec: SurfaceSpec, what: str, *, warnings: list[Warning] | None = None) -> Surface:
        """A further surface (bottom of a stratum or of an over-excavation) on the same grid.

        Ground that its file does not cover has no data.

        Args:
            spec: the surface in the site file.
            what: what it is to the user, for messages.
            warnings: a list to which doubts are added.

        Raises:
            FileError, GroundError: as for the main surfaces.
        """
        found = _Candidate.of(self.site, spec, what)
        if found.info is None:
            return found.on(self.grid)
        stated = _stated_crs(self.site)
        found = _with_crs(found, stated, self.grid.crs)
        facts, doubts = _vertical(found, self.site)
        refuse_other_datum([*self.vertical, facts])
        if warnings is not None:
            warnings.extend(doubts)
        rows, columns = found.valid_range(self.grid)
        if rows[1] <= rows[0] or columns[1] <= columns[0]:
            raise GroundError(_no_overlap(what, found.info, "the site", self.grid.bounds, self.grid.crs))
        return replace(found, unit_m=facts.unit_m).on(self.grid)


@dataclass(frozen=True)
class _Candidate:
    """A surface of the site file on its way to the grid."""

    spec: Any
    what: str
    info: RasterInfo | None = None
    crs: CRS | None = None
    unit_m: float = 1.0

    @classmethod
    def of(cls, site: Site, spec: Any, what: str) -> _Candidate:
        if not hasattr(spec, "file"):
            return cls(spec, what)
        info = raster_info(site.resolve(spec.file), band=spec.band, what=what)
        require_north_up(info, what)
        return cls(spec, what, info, info.crs)

    @property
    def source(self) -> RasterSource:
        assert self.info is not None
        return RasterSource(self.info, self.spec.nodata, self.unit_m, self.what)

    @property
    def nodes(self) -> bool:
        return getattr(self.spec, "sample", "cell") == "node"

    def same_crs(self, grid: Grid) -> bool:
        if self.crs is None or grid.crs is None:
            return True
        assert self.info is not None
        return same_place(self.crs, grid.crs, self.info.bounds)

    def on(self, grid: Grid) -> Surface:
        """The surface on a grid."""
        if self.info is None:
            if hasattr(self.spec, "level"):
                return LevelGround(self.spec.level)
            plane = self.spec.plane
            return PlaneGround(grid, plane.at, plane.elevation, plane.slope)
        if not self.same_crs(grid):
            assert self.crs is not None
            return warped_raster(self.source, self.crs, grid)
        return raster_on_grid(self.source, grid, nodes=self.nodes)

    def valid_range(self, grid: Grid) -> tuple[tuple[int, int], tuple[int, int]]:
        """((first row, stop), (first column, stop)) of the cells of a grid that the surface can give."""
        if self.info is None:
            return (0, grid.rows), (0, grid.columns)
        if not self.same_crs(grid):
            west, south, east, north = self.footprint(grid).bounds
            rows = math.ceil((grid.north - north) / grid.cell_north - 0.5), (grid.north - south) / grid.cell_north + 0.5
            columns = math.ceil((west - grid.west) / grid.cell_east - 0.5), (east - grid.west) / grid.cell_east + 0.5
            return (max(rows[0], 0), min(math.floor(rows[1]), grid.rows)), (
                max(columns[0], 0),
                min(math.floor(columns[1]), grid.columns),
            )
        offset = None if self.nodes else aligned_offset(self.info, grid)
        if offset is not None:
            row, column = offset
            return (max(-row, 0), min(self.info.rows - row, grid.rows)), (
                max(-column, 0),
                min(self.info.columns - column, grid.columns),
            )
        north_taps, east_taps = raster_taps(self.info, grid, nodes=self.nodes)
        return (north_taps.first, north_taps.stop), (east_taps.first, east_taps.stop)

    def footprint(self, grid: Grid) -> shapely.Polygon:
        assert self.crs is not None
        return footprint(self.source, self.crs, grid.crs)


def open_ground(site: Site) -> SurfaceSet:
    """The surfaces of a site on one grid.

    The grid is that of the finer of the existing and the finished raster (ties: existing), or ``ground.cell`` on its
    lattice, cut to the cells that all of them give and to the box of the limits.

    Raises:
        FileError: a file that is missing, no raster, or damaged.
        GroundError: surfaces that do not fit: CRS missing on one side, degrees, other vertical datum, rotated, no overlap.
        SiteFileError: ``site.crs`` is not a CRS.
    """
    ground = site.model.ground
    doubts: list[Warning] = []
    found = [_Candidate.of(site, ground.existing, "ground.existing")]
    if ground.finished is not None:
        found.append(_Candidate.of(site, ground.finished, "ground.finished"))
    stated = _stated_crs(site)
    found, crs_doubts = _with_one_crs(found, stated)
    doubts += crs_doubts
    vertical: list[VerticalFacts] = []
    for i, candidate in enumerate(found):
        if candidate.info is not None:
            facts, more = _vertical(candidate, site)
            vertical.append(facts)
            doubts += more
            found[i] = replace(candidate, unit_m=facts.unit_m)
    refuse_other_datum(vertical)
    lead = _lead(found)
    limits, limits_area = _limits(site, lead.crs if lead else stated, doubts)
    base = _lattice(lead, site) if lead else _grid_of_limits(site, stated, limits_area)
    window = _common_window(base, found, lead)
    covered = replace(_cut(base, window))
    if limits_area is not None:
        window = _within_limits(base, window, limits_area)
    grid = _cut(base, window)
    elevation, more = _mean_elevation(found, grid)
    doubts += more
    west, south, east, north = grid.bounds
    centre = ((west + east) / 2, (south + north) / 2)
    doubts += scale_warnings(grid.crs, *centre)
    scale = ground.ground_scale
    grid = replace(grid, ground_scale=ground_scale(grid.crs, *centre, elevation) if scale == "auto" else scale)
    surfaces = [c.on(grid) for c in found]
    outside = 0.0
    if limits_area is not None:
        outside = float(shapely.area(shapely.difference(limits_area, shapely.box(*covered.bounds))))
        outside *= (grid.unit_m * grid.ground_scale) ** 2
    return SurfaceSet(
        grid=grid,
        existing=surfaces[0],
        finished=surfaces[1] if len(surfaces) > 1 else None,
        sample="node" if lead is not None and lead.nodes else "cell",
        mean_elevation_m=elevation,
        vertical=tuple(vertical),
        limits=limits,
        limits_outside_m2=outside,
        footprint=_common_footprint(found, grid),
        notes=_notes(found, surfaces, lead),
        warnings=tuple(dict.fromkeys(doubts)),
        site=site,
    )


# --- coordinates -----------------------------------------------------------------------------------------------------


def _stated_crs(site: Site) -> CRS | None:
    text = site.model.site.crs
    if text is None:
        return None
    try:
        return parse_crs(text)
    except ValueError as error:
        raise SiteFileError(f"{site.path or 'site'}: site.crs: {error}") from None


def _with_one_crs(found: list[_Candidate], stated: CRS | None) -> tuple[list[_Candidate], list[Warning]]:
    """Candidates with the CRS of each; it must be known for all rasters or for none."""
    doubts = []
    rasters = [c for c in found if c.info is not None]
    carried = next((c for c in rasters if c.crs is not None), None)
    out = [_with_crs(c, stated, carried.crs if carried else None) if c.info is not None else c for c in found]
    if stated is not None and carried is not None and carried.crs is not None and carried.info is not None:
        if not same_place(carried.crs, stated, carried.info.bounds):
            message = (
                f"{carried.what}: {carried.info.name}: the file carries {describe(carried.crs)}, and site.crs says "
                f"{describe(stated)}; the file's is used. site.crs is for surfaces that carry none"
            )
            doubts.append(Warning("crs-differs", message))
    for candidate in out:
        if candidate.crs is not None and candidate.info is not None:
            west, south, east, north = candidate.info.bounds
            name = f"{candidate.what}: {candidate.info.name}"
            refuse_geographic(candidate.crs, (west + east) / 2, (south + north) / 2, name)
    return out, doubts


def _with_crs(candidate: _Candidate, stated: CRS | None, others: CRS | None) -> _Candidate:
    """A raster with its own CRS, else the stated one; missing while others have one is an error."""
    assert candidate.info is not None
    crs = candidate.crs if candidate.crs is not None else stated
    if crs is None and others is not None:
        raise GroundError(
            f"{candidate.what}: {candidate.info.name}: it carries no CRS, while another surface is in {describe(others)}; "
            'all must have one. Name it in [site] crs, such as crs = "EPSG:32611"'
        )
    return replace(candidate, crs=crs)


def _vertical(candidate: _Candidate, site: Site) -> tuple[VerticalFacts, tuple[Warning, ...]]:
    assert candidate.info is not None
    return vertical_facts(candidate.spec, candidate.info, candidate.crs, site.units, candidate.what)


# --- the lattice -----------------------------------------------------------------------------------------------------


def _lead(found: Sequence[_Candidate]) -> _Candidate | None:
    """The raster that gives the grid: the finer one, the existing one when they are equally fine."""
    rasters = [c for c in found if c.info is not None]
    if len(rasters) < 2:
        return rasters[0] if rasters else None
    first, second = rasters
    return second if _cell_area(second) < (1.0 - _EQUALLY_FINE) * _cell_area(first) else first


def _cell_area(candidate: _Candidate) -> float:
    """Area of a raster's cell on the ground, as far as cells of two CRS must be compared [m²]."""
    info = candidate.info
    assert info is not None
    area = info.cell_east * info.cell_north
    if candidate.crs is None:
        return area
    west, south, east, north = info.bounds
    unit = horizontal_unit_m(candidate.crs) or 1.0
    return area * (unit * ground_scale(candidate.crs, (west + east) / 2, (south + north) / 2, 0.0)) ** 2


def _lattice(lead: _Candidate, site: Site) -> Grid:
    """The whole grid of the leading raster, with the cell that the site asks for."""
    info = lead.info
    assert info is not None
    inset = 0.5 if lead.nodes else 0.0
    fewer = 1 if lead.nodes else 0
    crs = horizontal(lead.crs) if lead.crs is not None else None
    unit = horizontal_unit_m(crs) or site.units.factor("length")
    rows, columns = info.rows - fewer, info.columns - fewer
    if rows < 1 or columns < 1:
        raise GroundError(f"{lead.what}: {info.name}: {info.rows} × {info.columns} nodes; at least 2 × 2 make a patch")
    cell_east, cell_north = info.cell_east, info.cell_north
    if site.model.ground.cell is not None:
        side = site.model.ground.cell / unit
        cell_east, cell_north = _whole(side, info.cell_east), _whole(side, info.cell_north)
        rows = math.floor(rows * info.cell_north / cell_north + _WHOLE)
        columns = math.floor(columns * info.cell_east / cell_east + _WHOLE)
        if rows < 1 or columns < 1:
            raise GroundError(
                f"ground.cell is {side:g} CRS units; it must be at most the site's size, "
                f"{info.columns * info.cell_east:g} × {info.rows * info.cell_north:g}. Give a smaller cell"
            )
    west, north = info.west + inset * info.cell_east, info.north - inset * info.cell_north
    return Grid(rows, columns, west, north, cell_east, cell_north, unit, 1.0, crs)


def _whole(side: float, cell: float) -> float:
    """A side, or the whole multiple or part of a cell that it means."""
    for ratio, exact in ((side / cell, lambda n: n * cell), (cell / side, lambda n: cell / n)):
        near = round(ratio)
        if near >= 1 and abs(ratio - near) < _WHOLE:
            return exact(near)
    return side


def _grid_of_limits(site: Site, crs: CRS | None, area: Any) -> Grid:
    """A grid for surfaces that have no extent: the box of the limits, in cells that the site states."""
    side = site.model.ground.cell
    if area is None or side is None:
        raise GroundError(
            "ground.existing and ground.finished are both levels or planes, which have no extent; give ground.limits and "
            "ground.cell, or a raster for one of the two"
        )
    flat = horizontal(crs) if crs is not None else None
    unit = horizontal_unit_m(flat) or site.units.factor("length")
    cell = side / unit
    west, south, east, north = area.bounds
    if flat is not None:
        refuse_geographic(flat, (west + east) / 2, (south + north) / 2, "site.crs")
    rows = max(1, math.ceil((north - south) / cell - _WHOLE))
    columns = max(1, math.ceil((east - west) / cell - _WHOLE))
    return Grid(rows, columns, west, north, cell, cell, unit, 1.0, flat)


def _common_window(base: Grid, found: Sequence[_Candidate], lead: _Candidate | None) -> Window:
    """The cells of the lattice that every surface can give."""
    top, bottom, left, right = 0, base.rows, 0, base.columns
    for candidate in found:
        rows, columns = candidate.valid_range(base)
        top, bottom = max(top, rows[0]), min(bottom, rows[1])
        left, right = max(left, columns[0]), min(right, columns[1])
        if bottom <= top or right <= left:
            assert candidate.info is not None
            assert lead is not None
            raise GroundError(_no_overlap(candidate.what, candidate.info, lead.what, base.bounds, base.crs))
    return Window(top, left, bottom - top, right - left)


def _no_overlap(
    what: str, info: RasterInfo, other: str, bounds: tuple[float, float, float, float], crs: CRS | None
) -> str:
    return (
        f"{what}: {info.name} covers {_extent(info.bounds)} in {describe(info.crs or crs)}, {other} {_extent(bounds)} in "
        f"{describe(crs)}; they must overlap. Check that both files are of this site and that each carries the right CRS"
    )


def _extent(bounds: tuple[float, float, float, float]) -> str:
    west, south, east, north = bounds
    return f"easting {west:.10g} to {east:.10g} and northing {south:.10g} to {north:.10g}"


def _cut(base: Grid, window: Window) -> Grid:
    west, north = base.point(window.row, window.column)
    return replace(base, rows=window.height, columns=window.width, west=west, north=north)


# --- limits ----------------------------------------------------------------------------------------------------------


def _limits(
    site: Site, crs: CRS | None, doubts: list[Warning]
) -> tuple[tuple[NamedPolygon, ...] | None, Any]:
    """The polygons of the limits and their union; (None, None) without limits."""
    spec = site.model.ground.limits
    if spec is None:
        return None, None
    from earthwork.files.vectors import read_polygons

    flat = horizontal(crs) if crs is not None else None
    polygons = read_polygons(spec, site.directory, crs=flat, what="ground.limits", warnings=doubts)
    return tuple(polygons), union_area(polygons)


def _within_limits(base: Grid, window: Window, area: Any) -> Window:
    """The cells of a window that the box of the limits touches."""
    west, south, east, north = area.bounds
    low_row, low_column = base.cell(west, north)
    high_row, high_column = base.cell(east, south)
    top = max(window.row, math.floor(low_row + _WHOLE))
    bottom = min(window.row + window.height, math.ceil(high_row - _WHOLE))
    left = max(window.column, math.floor(low_column + _WHOLE))
    right = min(window.column + window.width, math.ceil(high_column - _WHOLE))
    if bottom <= top or right <= left:
        raise GroundError(
            f"ground.limits covers {_extent(area.bounds)}, the surfaces {_extent(_cut(base, window).bounds)} in "
            f"{describe(base.crs)}; they must overlap. Check that the limits are of this site and carry the right CRS"
        )
    return Window(top, left, bottom - top, right - left)


# --- what is told ----------------------------------------------------------------------------------------------------


def _mean_elevation(found: Sequence[_Candidate], grid: Grid) -> tuple[float, list[Warning]]:
    """Sampled mean elevation [m] of the first surface that has data, after every raster was looked at for markers."""
    means = [sampled_elevation(c.on(grid), grid, c.what, c.source if c.info is not None else None) for c in found]
    known = next((m for m in means if m is not None), None)
    if known is not None:
        return known, []
    message = "no data was found where the surfaces were sampled for the ground scale; elevation 0 is taken for it"
    return 0.0, [Warning("elevation-unknown", message)]


def _common_footprint(found: Sequence[_Candidate], grid: Grid) -> Any:
    """The ground that all surfaces of another CRS cover; None when there is none in another CRS."""
    shapes = [c.footprint(grid) for c in found if c.info is not None and not c.same_crs(grid)]
    return shapely.intersection_all(shapes) if shapes else None


def _notes(found: Sequence[_Candidate], surfaces: Sequence[Surface], lead: _Candidate | None) -> tuple[str, ...]:
    notes = []
    for candidate, surface in zip(found, surfaces, strict=True):
        if candidate.info is None or surface.resampling == "none":
            continue
        way = {
            "bilinear": "interpolated between the four samples around each cell's centre",
            "average": "averaged over each cell, since it is finer than the cells",
            "nodes": "read as nodes: the value of a cell is the mean of the patch between its nodes",
        }[surface.resampling]
        onto = "" if lead is candidate or lead is None or lead.info is None else f" onto the grid of {lead.info.name}"
        notes.append(f"{candidate.what} ({candidate.info.name}) is {way}{onto}")
    return tuple(notes)
