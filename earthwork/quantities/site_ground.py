"""From a site to the ground that is walked: surfaces on one grid, layers, limits and zones."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any

import shapely

from earthwork.errors import GroundError, Warning
from earthwork.files.vectors import NamedPolygon, read_polygons
from earthwork.ground import areas
from earthwork.ground.areas import Rings
from earthwork.ground.stack import (
    ExcavationLayer,
    ScarifyLayer,
    SectionLayer,
    Stack,
    StratumLayer,
    StripLayer,
)
from earthwork.ground.surfaces import SurfaceSet, open_ground
from earthwork.quantities.coverage import area_share
from earthwork.site import Site
from earthwork.site.model import AreaSpec


@dataclass(frozen=True)
class SiteGround:
    """Everything of a site that has a place: the stack, the zones, and what must be said about them."""

    stack: Stack
    surfaces: SurfaceSet
    zone_names: tuple[str, ...] = ()
    zones: Rings | None = None
    zone_shapes: tuple[Any, ...] = ()
    zone_areas_m2: tuple[float, ...] = ()
    limits_area_m2: float | None = None
    warnings: tuple[Warning, ...] = ()
    inputs: tuple[str, ...] = field(default=())

    @property
    def sample(self) -> str:
        return self.surfaces.sample

    @property
    def resampling(self) -> dict[str, str]:
        """How each surface came onto the grid."""
        return {"existing": self.stack.existing.resampling, "finished": self.stack.finished.resampling}

    @property
    def crs_name(self) -> str | None:
        crs = self.stack.grid.crs
        if crs is None:
            return None
        return ":".join(crs.to_authority()) if crs.to_authority() else crs.name


class _Opener:
    """Reads each area of a site once and brings it onto the grid."""

    def __init__(self, site: Site) -> None:
        self.site = site
        self.surfaces = open_ground(site)
        self.grid = self.surfaces.grid
        self.warnings: list[Warning] = list(self.surfaces.warnings)
        self._read: dict[AreaSpec, list[NamedPolygon]] = {}

    def polygons(self, spec: AreaSpec, name: str | None = None) -> list[NamedPolygon]:
        if name is None and spec in self._read:
            return self._read[spec]
        found, warnings = read_polygons(spec, self.site.directory, crs=self.grid.crs, name=name)
        self.warnings += [w for w in warnings if w not in self.warnings]
        if name is None:
            self._read[spec] = found
        return found

    def shape(self, spec: AreaSpec) -> Any:
        """The union of an area's polygons, one shape."""
        return areas.union_area(self.polygons(spec))

    def rings(self, spec: AreaSpec | None, spread_m: float = 0.0) -> Rings | None:
        if spec is None:
            return None
        shape = self.shape(spec)
        if spread_m:
            shape = areas.spread(shape, spread_m, self.grid)
        return areas.rings([shape], self.grid)

    def area_m2(self, shape: Any) -> float:
        return float(shapely.area(shape)) * (self.grid.unit_m * self.grid.ground_scale) ** 2


def open_site(site: Site, *, moving: bool = False) -> SiteGround:
    """Open the surfaces and areas of a site.

    Args:
        site: a checked site.
        moving: whether the share that a grade shift moves is wanted as well.

    Raises:
        FileError, GroundError: a file or an area that does not fit; the message says which and why.
    """
    opener = _Opener(site)
    model = site.model
    if opener.surfaces.finished is None:
        raise GroundError(f"{site.name}: [design] gives no finished surface here; give ground.finished")
    limits = opener.shape(model.ground.limits) if model.ground.limits else None
    worked = _worked(opener)
    stack = Stack(
        grid=opener.grid,
        existing=opener.surfaces.existing,
        finished=opener.surfaces.finished,
        coverage=area_share,
        limits=areas.rings([limits], opener.grid) if limits is not None else None,
        disturbed=opener.rings(model.ground.disturbed),
        worked=worked,
        move=opener.rings(model.balance.shift_area) if moving else None,
        moving=moving,
        bands_below_m=tuple((row.below, row.measured_from) for row in model.fill.by_depth) if model.fill else (),
        **_layers(opener),
    )
    ground = SiteGround(
        stack=stack,
        surfaces=opener.surfaces,
        limits_area_m2=opener.area_m2(limits) if limits is not None else None,
        **_zones(opener, limits),
    )
    return _with_warnings(ground, opener.warnings)


def _with_warnings(ground: SiteGround, warnings: list[Warning]) -> SiteGround:
    from dataclasses import replace

    return replace(ground, warnings=tuple(warnings))


def _worked(opener: _Opener) -> Rings | None:
    """Areas that sections and over-excavations name: disturbed whatever the surfaces say."""
    model = opener.site.model
    if model.ground.disturbed is not None:
        return None
    shapes = [opener.shape(s.area) for s in model.section if s.area]
    shapes += [
        areas.spread(opener.shape(o.area), o.spread, opener.grid) for o in model.over_excavation if o.area
    ]
    return areas.rings([shapely.union_all(shapes)], opener.grid) if shapes else None


def _layers(opener: _Opener) -> dict[str, Any]:
    model, surface = opener.site.model, opener.surfaces.surface
    return {
        "strips": tuple(StripLayer(s.material, s.depth, opener.rings(s.area)) for s in model.strip),
        "sections": tuple(SectionLayer(s.name, s.source, s.thickness, opener.rings(s.area)) for s in model.section),
        "excavations": tuple(
            ExcavationLayer(
                o.name,
                o.depth,
                surface(o.bottom, f'over_excavation "{o.name}" bottom') if o.bottom else None,
                o.measured_from,
                opener.rings(o.area, o.spread),
            )
            for o in model.over_excavation
        ),
        "scarifies": tuple(ScarifyLayer(s.depth, opener.rings(s.area)) for s in model.scarify),
        "strata": tuple(
            StratumLayer(
                s.material, surface(s.bottom, f'stratum "{s.material}" bottom') if s.bottom else None, s.thickness
            )
            for s in model.stratum
        ),
    }


def _zones(opener: _Opener, limits: Any) -> dict[str, Any]:
    zones = opener.site.model.zones
    if zones is None:
        return {}
    polygons = opener.polygons(zones.area, zones.name)
    polygons, warnings = areas.check_overlaps(polygons, opener.grid)
    opener.warnings += warnings
    shapes = [p.shape if limits is None else shapely.intersection(p.shape, limits) for p in polygons]
    return {
        "zone_names": tuple(p.name for p in polygons),
        "zone_shapes": tuple(shapes),
        "zones": areas.rings(shapes, opener.grid),
        "zone_areas_m2": tuple(opener.area_m2(s) for s in shapes),
    }
