"""A surface of the site file on its way to the grid: its file, its CRS, and the cells that it can give."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any

from pyproj import CRS

from earthwork.crs import describe, parse_crs, same_place, tied_to_earth
from earthwork.errors import GroundError, SiteFileError, Warning
from earthwork.files.rasters import RasterInfo, RasterSource, raster_info
from earthwork.ground.grid import Grid
from earthwork.ground.scale import refuse_geographic
from earthwork.ground.surfaces import (
    LevelGround,
    PlaneGround,
    Surface,
    aligned_offset,
    raster_on_grid,
    raster_taps,
    require_north_up,
)
from earthwork.ground.vertical import VerticalFacts, vertical_facts
from earthwork.ground.warp import footprint, warped_raster

if TYPE_CHECKING:
    from earthwork.site.load import Site

#: ((first row, stop), (first column, stop)) of cells.
CellRange = tuple[tuple[int, int], tuple[int, int]]


@dataclass(frozen=True)
class Candidate:
    """A surface that has no file: a level or a plane.

    Args:
        spec: the surface in the site file.
        what: what it is to the user, such as ``"ground.existing"``.
    """

    spec: Any
    what: str

    def on(self, grid: Grid) -> Surface:
        """The surface on a grid."""
        if hasattr(self.spec, "level"):
            return LevelGround(self.spec.level)
        plane = self.spec.plane
        return PlaneGround(grid, plane.at, plane.elevation, plane.slope)

    def valid_range(self, grid: Grid) -> CellRange:
        """The cells of a grid that the surface can give: all."""
        return (0, grid.rows), (0, grid.columns)


@dataclass(frozen=True)
class RasterCandidate(Candidate):
    """A raster of the site file.

    Args:
        info: facts of the file.
        crs: its CRS, as far as it is known.
        unit_m: metres of the unit of its elevations.
    """

    info: RasterInfo
    crs: CRS | None = None
    unit_m: float = 1.0

    @property
    def name(self) -> str:
        """What it is and its file, for messages."""
        return f"{self.what}: {self.info.name}"

    @property
    def source(self) -> RasterSource:
        return RasterSource(self.info, self.spec.nodata, self.unit_m, self.what)

    @property
    def nodes(self) -> bool:
        """True when its values are points of the ground; else each stands for its cell."""
        return self.spec.sample == "node"

    def shares_crs(self, grid_crs: CRS | None) -> bool:
        """True when its coordinates are those of the grid."""
        if self.crs is None or grid_crs is None:
            return True
        try:
            return same_place(self.crs, grid_crs, self.info.bounds)
        except GroundError as error:
            raise GroundError(f"{self.name}: {error}") from None

    def on(self, grid: Grid) -> Surface:
        """The surface on a grid: as it is, resampled, or out of another CRS."""
        if self.crs is not None and not self.shares_crs(grid.crs):
            return warped_raster(self.source, self.crs, grid)
        return raster_on_grid(self.source, grid, nodes=self.nodes)

    def valid_range(self, grid: Grid) -> CellRange:
        """The run of rows and of columns of a grid that the raster reaches; (0, 0) where it reaches none."""
        if not self.shares_crs(grid.crs):
            return self._box_of_footprint(grid)
        offset = None if self.nodes else aligned_offset(self.info, grid)
        if offset is None:
            north, east = raster_taps(self.info, grid, nodes=self.nodes)
            return (north.first, north.stop), (east.first, east.stop)
        row, column = offset
        return (
            (max(-row, 0), min(self.info.rows - row, grid.rows)),
            (max(-column, 0), min(self.info.columns - column, grid.columns)),
        )

    def footprint(self, grid: Grid) -> Any:
        """The ground that it covers, as a polygon in the grid's CRS; only for a raster of another CRS."""
        assert self.crs is not None
        return footprint(self.source, self.crs, grid.crs)

    def _box_of_footprint(self, grid: Grid) -> CellRange:
        """Cells whose centres lie in the box around the footprint."""
        west, south, east, north = self.footprint(grid).bounds
        top, left = grid.cell(west, north)
        bottom, right = grid.cell(east, south)
        return (
            (max(math.ceil(top - 0.5), 0), min(math.floor(bottom + 0.5), grid.rows)),
            (max(math.ceil(left - 0.5), 0), min(math.floor(right + 0.5), grid.columns)),
        )


def candidate(site: Site, spec: Any, what: str) -> Candidate:
    """A surface of the site file, its file opened and looked at.

    Raises:
        FileError: missing, no raster, no such band.
        GroundError: rotated or without a place.
    """
    if not hasattr(spec, "file"):
        return Candidate(spec, what)
    info = raster_info(site.resolve(spec.file), band=spec.band, what=what)
    require_north_up(info, what)
    return RasterCandidate(spec, what, info, info.crs)


def stated_crs(site: Site) -> CRS | None:
    """The CRS that the site file names for surfaces that carry none.

    Raises:
        SiteFileError: it is not understood.
    """
    text = site.model.site.crs
    if text is None:
        return None
    try:
        return parse_crs(text)
    except ValueError as error:
        raise SiteFileError(f"{site.path or 'site'}: site.crs: {error}") from None


def with_crs(found: RasterCandidate, stated: CRS | None, others: CRS | None) -> RasterCandidate:
    """A raster with its own CRS, else the stated one; a local CRS counts as none where another is known.

    Raises:
        GroundError: it has none while other surfaces have one, or it is in degrees.
    """
    crs = found.crs if tied_to_earth(found.crs) or stated is None else stated
    if not tied_to_earth(crs):
        if not tied_to_earth(others):
            return replace(found, crs=crs)
        raise GroundError(
            f"{found.name}: it carries no CRS, while another surface is in {describe(others)}; all must have "
            "one. "
            'Name it in [site] crs, such as crs = "EPSG:32611"'
        )
    assert crs is not None
    west, south, east, north = found.info.bounds
    refuse_geographic(crs, (west + east) / 2, (south + north) / 2, found.name)
    return replace(found, crs=crs)


def with_one_crs(found: Sequence[Candidate], stated: CRS | None) -> tuple[list[Candidate], list[Warning]]:
    """Surfaces with the CRS of each: it must be known for all rasters, or for none."""
    rasters = [c for c in found if isinstance(c, RasterCandidate)]
    carrier = next((c for c in rasters if tied_to_earth(c.crs)), None)
    others = carrier.crs if carrier is not None else None
    out = [with_crs(c, stated, others) if isinstance(c, RasterCandidate) else c for c in found]
    if stated is None or carrier is None or others is None or carrier.shares_crs(stated):
        return out, []
    message = (
        f"{carrier.name}: the file carries {describe(others)}, and site.crs says {describe(stated)}; the file's is "
        "used. site.crs is for surfaces that carry none"
    )
    return out, [Warning("crs-differs", message)]


def with_unit(found: RasterCandidate, site: Site) -> tuple[RasterCandidate, VerticalFacts, tuple[Warning, ...]]:
    """A raster with the unit of its elevations, how it was found, and what is doubtful about it."""
    facts, doubts = vertical_facts(found.spec, found.info, found.crs, site.units, found.what)
    return replace(found, unit_m=facts.unit_m), facts, doubts


def no_overlap(found: RasterCandidate, other: str, grid: Grid) -> GroundError:
    """The error for a raster that shares no ground with another surface; both extents are named."""
    return GroundError(
        f"{found.name} covers {extent(found.info.bounds)} in {describe(found.crs)}, {other} {extent(grid.bounds)} in "
        f"{describe(grid.crs)}; they must overlap. Check that both are of this site and that each carries the right "
        "CRS"
    )


def too_coarse(found: RasterCandidate, grid: Grid) -> GroundError:
    """The error for a raster that lies on the site, but whose samples surround the centre of no cell."""
    return GroundError(
        f"{found.name}: its {found.info.rows} × {found.info.columns} samples surround the centre of no cell of the site "
        f"({extent(grid.bounds)}); at least 2 × 2 of them must, to interpolate between. Give more of it around the site"
    )


def extent(bounds: tuple[float, float, float, float]) -> str:
    """A rectangle in words."""
    west, south, east, north = bounds
    return f"easting {west:.10g} to {east:.10g} and northing {south:.10g} to {north:.10g}"
