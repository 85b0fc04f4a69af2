"""The grid on which surfaces meet: whose cells, how large, and which of them all surfaces can give."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import replace
from typing import TYPE_CHECKING, Any

from pyproj import CRS

from earthwork.crs import describe, horizontal, horizontal_unit_m
from earthwork.errors import GroundError
from earthwork.ground.candidates import Candidate, RasterCandidate, extent, no_overlap, too_coarse
from earthwork.ground.grid import Grid, Window
from earthwork.ground.scale import ground_scale, refuse_geographic

if TYPE_CHECKING:
    from earthwork.site.load import Site

#: Rasters whose cells differ in area by less than this part are equally fine, and the existing one gives the
#: grid.
_EQUALLY_FINE = 0.01

#: A cell size that is this close to a whole multiple (or part) of the raster's is that multiple.
_WHOLE = 1e-6

#: Least side of a stated cell, as a part of the raster's: finer ones hold no more ground, and run for days.
_LEAST_CELL = 0.01

#: Most cells of a grid that no raster gives: about a day's work.
_MOST_CELLS = 1e11


def leading_raster(found: Sequence[Candidate]) -> RasterCandidate | None:
    """The raster that gives the grid: the finer, or the first when equally fine; None without rasters."""
    rasters = [c for c in found if isinstance(c, RasterCandidate)]
    if len(rasters) < 2:
        return rasters[0] if rasters else None
    first, second = rasters
    return second if _cell_area(second) < (1.0 - _EQUALLY_FINE) * _cell_area(first) else first


def _cell_area(raster: RasterCandidate) -> float:
    """Area of a raster's cell on the ground, as far as cells of two CRS must be compared [m²]."""
    area = raster.info.cell_east * raster.info.cell_north
    if raster.crs is None:
        return area
    west, south, east, north = raster.info.bounds
    unit = horizontal_unit_m(raster.crs) or 1.0
    return area * (unit * ground_scale(raster.crs, (west + east) / 2, (south + north) / 2, 0.0)) ** 2


def lattice_of(lead: RasterCandidate, site: Site) -> Grid:
    """The whole grid of the leading raster, with the cell that the site asks for.

    A raster of nodes gives the patches between its nodes, so the grid ends at the outermost ones.

    Raises:
        GroundError: the cell is larger than the site, or far finer than the raster; a single row of nodes.
    """
    info = lead.info
    crs = horizontal(lead.crs) if lead.crs is not None else None
    unit = horizontal_unit_m(crs) or site.units.factor("length")
    inset, fewer = (0.5, 1) if lead.nodes else (0.0, 0)
    rows, columns = info.rows - fewer, info.columns - fewer
    if rows < 1 or columns < 1:
        raise GroundError(f"{lead.name}: it has {info.rows} × {info.columns} nodes; at least 2 × 2 make a patch")
    cell_east, cell_north = info.cell_east, info.cell_north
    if site.model.ground.cell is not None:
        side = site.model.ground.cell / unit
        cell_east, cell_north = _whole(side, info.cell_east), _whole(side, info.cell_north)
        finest = min(info.cell_east, info.cell_north)
        if side < _LEAST_CELL * (1.0 - _WHOLE) * finest:
            raise GroundError(
                f"ground.cell is {side:g} CRS units; it must be at least a hundredth of the {finest:g} of {lead.name}, "
                "since smaller cells hold no more ground. Give a larger cell, or leave it out"
            )
        tall, wide = rows * info.cell_north, columns * info.cell_east
        rows, columns = math.floor(tall / cell_north + _WHOLE), math.floor(wide / cell_east + _WHOLE)
        if rows < 1 or columns < 1:
            raise GroundError(
                f"ground.cell is {side:g} CRS units; it must be at most the site's {wide:g} × {tall:g}. Give a "
                "smaller cell"
            )
    west, north = info.west + inset * info.cell_east, info.north - inset * info.cell_north
    return Grid(rows, columns, west, north, cell_east, cell_north, unit, 1.0, crs)


def _whole(side: float, cell: float) -> float:
    """A side, or the whole multiple or part of a cell that it means."""
    for ratio, exact in ((side / cell, cell), (cell / side, 0.0)):
        near = round(ratio)
        if near >= 1 and abs(ratio - near) < _WHOLE:
            return near * exact if exact else cell / near
    return side


def grid_of_limits(site: Site, crs: CRS | None, area: Any) -> Grid:
    """A grid for surfaces that have no extent: the box of the limits, in cells that the site states.

    Raises:
        GroundError: no limits or no cell is given, or the cell makes more cells than can be counted.
    """
    side = site.model.ground.cell
    if area is None or side is None:
        raise GroundError(
            "ground.existing and ground.finished are levels or planes, which have no extent; give ground.limits and "
            "ground.cell, or a raster for one of the two"
        )
    flat = horizontal(crs) if crs is not None else None
    west, south, east, north = area.bounds
    if flat is not None:
        refuse_geographic(flat, (west + east) / 2, (south + north) / 2, "site.crs")
    unit = horizontal_unit_m(flat) or site.units.factor("length")
    cell = side / unit
    rows = max(1, math.ceil((north - south) / cell - _WHOLE))
    columns = max(1, math.ceil((east - west) / cell - _WHOLE))
    if rows * columns > _MOST_CELLS:
        raise GroundError(
            f"ground.cell is {cell:g} CRS units; the box around ground.limits would have {rows:,} × {columns:,} cells of "
            f"it, and it must have at most {_MOST_CELLS:.0e}. Give a larger cell"
        )
    return Grid(rows, columns, west, north, cell, cell, unit, 1.0, flat)


def common_window(base: Grid, found: Sequence[Candidate], lead: RasterCandidate | None) -> Window:
    """The cells of a lattice that every surface can give.

    Raises:
        GroundError: there are none; both extents are named.
    """
    top, bottom, left, right = 0, base.rows, 0, base.columns
    for surface in found:
        rows, columns = surface.valid_range(base)
        top, bottom = max(top, rows[0]), min(bottom, rows[1])
        left, right = max(left, columns[0]), min(right, columns[1])
        if (bottom <= top or right <= left) and isinstance(surface, RasterCandidate):
            if surface.shares_crs(base.crs) and _touch(surface.info.bounds, base.bounds):
                raise too_coarse(surface, base)
            raise no_overlap(surface, lead.what if lead is not None else "the site", base)
    return Window(top, left, bottom - top, right - left)


def _touch(a: tuple[float, float, float, float], b: tuple[float, float, float, float]) -> bool:
    """True when two rectangles (west, south, east, north) share an area."""
    return min(a[2], b[2]) > max(a[0], b[0]) and min(a[3], b[3]) > max(a[1], b[1])


def window_of_limits(base: Grid, window: Window, area: Any) -> Window:
    """The cells of a window that the box around the limits touches.

    Raises:
        GroundError: there are none; both extents are named.
    """
    west, south, east, north = area.bounds
    first_row, first_column = base.cell(west, north)
    last_row, last_column = base.cell(east, south)
    top = max(window.row, math.floor(first_row + _WHOLE))
    bottom = min(window.row + window.height, math.ceil(last_row - _WHOLE))
    left = max(window.column, math.floor(first_column + _WHOLE))
    right = min(window.column + window.width, math.ceil(last_column - _WHOLE))
    if bottom <= top or right <= left:
        raise GroundError(
            f"ground.limits covers {extent(area.bounds)}, the surfaces {extent(cut(base, window).bounds)} in "
            f"{describe(base.crs)}; they must overlap. Check that the limits are of this site and carry the "
            "right CRS"
        )
    return Window(top, left, bottom - top, right - left)


def cut(base: Grid, window: Window) -> Grid:
    """The part of a grid that a window shows."""
    west, north = base.point(window.row, window.column)
    return replace(base, rows=window.height, columns=window.width, west=west, north=north)
