"""Which ground each pad is judged on: its polygon, or the buildings on it with a margin."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np
import shapely

from earthwork.errors import GroundError, Warning
from earthwork.files.vectors import NamedPolygon, read_polygons
from earthwork.ground import areas
from earthwork.ground.grid import Grid

if TYPE_CHECKING:
    from earthwork.site import Site

#: A building stands on a pad when at least this share of it does.
_STANDS = 0.01


@dataclass(frozen=True)
class PadPlace:
    """A pad and the part of it that is judged, both polygons in CRS coordinates."""

    name: str
    polygon: Any
    footprint: Any
    buildings: tuple[str, ...]
    building: Any  #: the buildings' own outline, None where the whole pad is judged


def open_pads(site: Site, grid: Grid, warnings: list[Warning]) -> tuple[PadPlace, ...]:
    """The pads of a site, in the order of their file.

    Raises:
        FileError: a file, layer or attribute that is not there.
        GroundError: pads that overlap or share a name, or one wholly outside the ground that is known.
    """
    table = site.model.pads
    assert table is not None
    features = read_polygons(
        table.area, site.directory, crs=grid.crs, name=table.name, what="pads.area", warnings=warnings
    )
    where = f"{site.path or site.name}: pads.area"
    _refuse(features, grid, where)
    buildings: list[NamedPolygon] = []
    if table.building is not None:
        buildings = read_polygons(
            table.building, site.directory, crs=grid.crs, what="pads.building", warnings=warnings
        )
    homeless = {b.name for b in buildings}
    places = []
    for feature in features:
        own = [b for b in buildings if _stands_on(b.geometry, feature.geometry)]
        homeless -= {b.name for b in own}
        place = _place(feature, own, table.building_margin, grid)
        places.append(place)
        spread = areas.spread(place.building, table.building_margin, grid) if own else None
        if spread is not None and spread.difference(feature.geometry).area > 1e-3 * spread.area:
            message = (
                f'pad "{place.name}": its building with the margin of '
                f"{site.units.from_si(table.building_margin, 'length'):.3g} {site.units.label('length')} reaches over "
                "the pad's edge; it is judged on the pad only"
            )
            warnings.append(Warning("building-over-pad-edge", message))
    for name in sorted(homeless):
        warnings.append(Warning("building-off-pads", f"pads.building: {name} stands on no pad and is not judged"))
    return tuple(places)


def _stands_on(building: Any, pad: Any) -> bool:
    return building.intersects(pad) and building.intersection(pad).area >= _STANDS * building.area


def _place(feature: NamedPolygon, own: Sequence[NamedPolygon], margin_m: float, grid: Grid) -> PadPlace:
    if not own:
        return PadPlace(feature.name, feature.geometry, feature.geometry, (), None)
    outline = areas.union_area([b.geometry for b in own])
    footprint = areas.only_polygons(areas.spread(outline, margin_m, grid).intersection(feature.geometry))
    return PadPlace(feature.name, feature.geometry, footprint, tuple(b.name for b in own), outline)


def _refuse(features: Sequence[NamedPolygon], grid: Grid, where: str) -> None:
    """Names given twice, overlaps, and pads outside the ground: all in one message."""
    faults = []
    names = [f.name for f in features]
    for name in sorted({n for n in names if names.count(n) > 1}):
        faults.append(f'the name "{name}" is given {names.count(name)} times; names must be unique')
    box = shapely.box(*grid.bounds)
    for feature in features:
        if not box.intersects(feature.geometry):
            east, north = feature.geometry.centroid.coords[0]
            faults.append(f'pad "{feature.name}" at ({east:.2f}, {north:.2f}) lies outside the ground that is known')
    shapes = np.array([f.geometry for f in features], dtype=object)
    scale = areas.square_metres(grid)
    for one, other in zip(*shapely.STRtree(shapes).query(shapes, predicate="intersects"), strict=True):
        if one < other:
            common = shapes[one].intersection(shapes[other])
            area = common.area * scale
            if area > max(0.01, 1e-6 * min(shapes[one].area, shapes[other].area) * scale):
                east, north = common.representative_point().coords[0]
                faults.append(
                    f'pads "{features[one].name}" and "{features[other].name}" overlap by {area:.3g} m² near '
                    f"({east:.2f}, {north:.2f}); trim one of them"
                )
    if faults:
        raise GroundError(f"{where}: " + "\n  ".join(faults))
