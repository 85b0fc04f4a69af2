"""Layers and surfaces for GIS, design and stake-out, and the 3D model: thinned surfaces, lines, points."""

from __future__ import annotations

import datetime
import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np

import earthwork
from earthwork.files.dxf import write_dxf
from earthwork.files.glb import ModelSurface, write_glb
from earthwork.files.landxml import Breakline, Triangles, write_landxml
from earthwork.files.output import OutputFolder
from earthwork.files.points import StakePoint, write_pnezd
from earthwork.ground.thin_mesh import thin_mesh
from earthwork.quantities.surface_map import SurfaceMap
from earthwork.reporting.cut_fill_map import COLORS
from earthwork.reporting.display import plain
from earthwork.reporting.report.map_content import depth_scale, outlines_of
from earthwork.reporting.report.map_data import Outline
from earthwork.reporting.report.parts import Parts
from earthwork.reporting.report.provenance import inputs_date
from earthwork.units import UnitSystem

#: Where thinning starts [m], and the triangles that a surface takes at most: of LandXML, which is built from and takes
#: 50 bytes a triangle; of DXF, where it is ten times as many; and of the model.
TOLERANCE_M = 0.01
LANDXML_TRIANGLES = 200_000
DXF_TRIANGLES = 50_000
MODEL_TRIANGLES = 60_000
#: Worked ground is written with a margin of so many cells of the overview.
_MARGIN_CELLS = 3
_STAKES_ALONG = 40  #: stakes of the grid along the longer side of the worked ground, about


def _bound_text(bound_m: float, units: UnitSystem) -> str:
    """A bound in the site's units, rounded up to a thousandth.

    >>> from earthwork.units import METRIC, US
    >>> _bound_text(0.134543, METRIC), _bound_text(0.03048, US)
    ('0.135 m', '0.1 ft')
    """
    value = units.from_si(bound_m, "length")
    return f"{math.ceil(round(value * 1000, 6)) / 1000:g} {units.label('length')}"


@dataclass(frozen=True)
class Exchange:
    """The surfaces and lines of a site, made once for all files."""

    parts: Parts

    @property
    def surfaces(self) -> SurfaceMap:
        return self.parts.surfaces

    @property
    def unit_m(self) -> float:
        """Metres in the unit of the coordinates, which the elevations share."""
        return self.surfaces.grid.unit_m

    @cached_property
    def worked(self) -> np.ndarray:
        """Cells of the overview where anything is built or dug, with a margin; all of them where nothing is."""
        s = self.surfaces
        changed = np.abs(s.finished - s.existing) > 0.01
        changed |= np.abs(s.finished - s.subgrade) > 0.01
        changed |= np.abs(np.minimum(s.stripped, s.subgrade) - s.removal_bottom) > 0.01
        if not changed.any():
            return np.isfinite(s.depth)
        return _widened(changed, _MARGIN_CELLS) & np.isfinite(s.depth)

    def triangles(self, names: Sequence[str], most: int) -> list[Triangles]:
        """Surfaces in the coordinates of the site, of at most so many triangles each.

        Existing ground everywhere; the others where the ground is worked.
        """
        found = []
        for name in names:
            heights = getattr(self.surfaces, name)
            mesh = thin_mesh(
                heights if name == "existing" else np.where(self.worked, heights, np.nan), TOLERANCE_M, most
            )
            east, north = mesh.places(self.surfaces.grid)
            vertices = np.column_stack([east, north, mesh.heights / self.unit_m])
            note = f"thinned: no cell is farther than {_bound_text(mesh.tolerance_m, self.parts.site.units)} from it"
            found.append(Triangles(name.replace("_", " "), vertices, mesh.triangles, note))
        return found

    @cached_property
    def outlines(self) -> list[Outline]:
        return outlines_of(self.parts)

    @cached_property
    def breaklines(self) -> list[Breakline]:
        """Toe, top and daylight lines of a design; else the outlines of pads on the finished grade."""
        design = self.parts.ground.design
        if design is not None:
            found = []
            for line in design.lines.lines:
                points = np.array(line.geometry.coords)
                points[:, 2] /= self.unit_m
                found.append(Breakline(line.name, points, line.kind))
            return found
        return [
            Breakline(o.name, ring, "pad edge")
            for o in self.outlines
            if o.layer == "pads"
            for ring in self._on(self.surfaces.finished, o.shape)
        ]

    def _on(self, heights: np.ndarray, shape: Any) -> Iterator[np.ndarray]:
        """Rings of a polygon with the heights of a surface, where it has data all along."""
        for part in getattr(shape, "geoms", [shape]):
            for ring in (part.exterior, *part.interiors):
                xy = np.asarray(ring.segmentize(self._spacing).coords)[:, :2]
                z = heights_at(self.surfaces, heights, xy)
                if np.isfinite(z).all():
                    yield np.column_stack([xy, z / self.unit_m])

    @property
    def _spacing(self) -> float:
        grid = self.surfaces.grid
        return 5.0 * max(grid.cell_east, grid.cell_north)

    # --- stake-out --------------------------------------------------------------------------------------------------

    def stakes(self) -> Iterator[StakePoint]:
        """Corners of pads at subgrade, then a grid over the worked ground with cut or fill to subgrade."""
        for outline in self.outlines:
            if outline.layer == "pads":
                yield from self._corners(outline)
        yield from self._grid_stakes()

    def _corners(self, outline: Outline) -> Iterator[StakePoint]:
        number = 0
        for part in getattr(outline.shape, "geoms", [outline.shape]):
            corners = np.asarray(part.exterior.coords)[:-1, :2]
            z = heights_at(self.surfaces, self.surfaces.subgrade, corners)
            for (east, north), height in zip(corners, z, strict=True):
                number += 1
                if np.isfinite(height):
                    code = f"SG {outline.name} corner {number}"
                    yield StakePoint(float(north), float(east), float(height) / self.unit_m, code)

    def _grid_stakes(self) -> Iterator[StakePoint]:
        s = self.surfaces
        rows, columns = np.nonzero(self.worked)
        if not len(rows):
            return
        span = max(int(np.ptp(rows)), int(np.ptp(columns))) + 1
        every = max(1, round(span / _STAKES_ALONG))
        chosen = (rows % every == every // 2) & (columns % every == every // 2)
        depth = s.depth
        for row, column in zip(rows[chosen].tolist(), columns[chosen].tolist(), strict=True):
            d = depth[row, column]
            if abs(d) < 0.01:
                continue
            east, north = s.grid.point(row + 0.5, column + 0.5)
            code = f"{'F' if d > 0 else 'C'} {plain(abs(d) / self.unit_m, 2)} to SG"
            yield StakePoint(north, east, float(s.subgrade[row, column]) / self.unit_m, code)


def _widened(mask: np.ndarray, cells: int) -> np.ndarray:
    """A mask with all cells within so many rows and columns of it."""
    wide = np.pad(mask, cells)
    for axis in (0, 1):
        wide = np.any([np.roll(wide, k, axis) for k in range(-cells, cells + 1)], axis=0)
    return wide[cells:-cells, cells:-cells]


def heights_at(surfaces: SurfaceMap, heights: np.ndarray, places: np.ndarray) -> np.ndarray:
    """A surface of the overview at places (n, 2) in CRS coordinates, bilinear between centres; NaN outside [m]."""
    grid = surfaces.grid
    column = (places[:, 0] - grid.west) / grid.cell_east - 0.5
    row = (grid.north - places[:, 1]) / grid.cell_north - 0.5
    r0 = np.clip(np.floor(row).astype(int), 0, max(grid.rows - 2, 0))
    c0 = np.clip(np.floor(column).astype(int), 0, max(grid.columns - 2, 0))
    r1, c1 = np.minimum(r0 + 1, grid.rows - 1), np.minimum(c0 + 1, grid.columns - 1)
    v, u = np.clip(row - r0, 0.0, 1.0), np.clip(column - c0, 0.0, 1.0)
    z = (heights[r0, c0] * (1 - u) + heights[r0, c1] * u) * (1 - v)
    z = z + (heights[r1, c0] * (1 - u) + heights[r1, c1] * u) * v
    inside = (row >= -0.5) & (row <= grid.rows - 0.5) & (column >= -0.5) & (column <= grid.columns - 0.5)
    return np.where(inside, z, np.nan)


# --- files ----------------------------------------------------------------------------------------------------------


def write_exchange(parts: Parts, folder: OutputFolder) -> None:
    """Write surfaces.xml, surfaces.dxf, stakeout.txt and site.gpkg."""
    from earthwork.reporting.report.layers import write_layers

    made = Exchange(parts)
    crs = parts.ground.stack.grid.crs
    authority = crs.to_authority() if crs is not None else None
    write_landxml(
        folder.path("surfaces.xml"),
        made.triangles(("existing", "removal_bottom", "subgrade", "finished"), LANDXML_TRIANGLES),
        made.breaklines,
        project=parts.site.name,
        program=f"earthwork {earthwork.__version__}",
        unit_m=made.unit_m,
        date=f"{inputs_date(parts.site) or datetime.date(2000, 1, 1):%Y-%m-%d}",
        crs_name=crs.name if crs is not None else None,
        epsg=authority[1] if authority and authority[0] == "EPSG" else None,
    )
    outlines = [(o.layer, o.name, o.shape) for o in made.outlines]
    drawn = made.triangles(("existing", "subgrade"), DXF_TRIANGLES)
    write_dxf(folder.path("surfaces.dxf"), drawn, made.breaklines, outlines)
    write_pnezd(folder.path("stakeout.txt"), made.stakes())
    write_layers(made, folder.path("site.gpkg"))


def write_model(parts: Parts, folder: OutputFolder) -> None:
    """Write site.glb: existing ground, subgrade and removal bottom, coloured by depth."""
    s, grid = parts.surfaces, parts.surfaces.grid
    made = Exchange(parts)
    scale = depth_scale(parts)
    palette = np.array([[int(c[i : i + 2], 16) for i in (1, 3, 5)] + [255] for c in COLORS])
    middle = (grid.rows / 2, grid.columns / 2)
    origin_up = float(np.floor(np.nanmin(s.removal_bottom)))
    fields = {"existing": s.existing, "removal bottom": np.where(made.worked, s.removal_bottom, np.nan),
              "subgrade": np.where(made.worked, s.subgrade, np.nan)}  # fmt: skip
    surfaces = []
    for name, heights in fields.items():
        mesh = thin_mesh(heights, TOLERANCE_M, MODEL_TRIANGLES)
        vertices = np.column_stack([
            (mesh.columns + 0.5 - middle[1]) * grid.cell_east_m,
            (middle[0] - mesh.rows - 0.5) * grid.cell_north_m,
            mesh.heights - origin_up,
        ])  # fmt: skip
        depth = s.depth[mesh.rows, mesh.columns]
        colors = palette[np.searchsorted(scale.bounds, depth, side="left")]
        surfaces.append(ModelSurface(name, vertices, mesh.triangles, colors))
    east, north = grid.point(*middle)
    facts = {
        "site": parts.site.name, "origin_easting": east, "origin_northing": north, "origin_elevation_m": origin_up,
        "colours": "depth of cut (brown) and fill (teal) between stripped ground and subgrade", "unit": "metre",
    }  # fmt: skip
    write_glb(folder.path("site.glb"), surfaces, facts)
