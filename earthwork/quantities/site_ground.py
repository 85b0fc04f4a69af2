"""From a site to the ground that is walked: surfaces on one grid, layers, limits and zones."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import shapely

from earthwork.errors import GroundError, Warning
from earthwork.files.vectors import NamedPolygon, read_polygons
from earthwork.ground import areas
from earthwork.ground.areas import Rings
from earthwork.ground.meet import SurfaceSet, open_ground
from earthwork.ground.stack import (
    ExcavationLayer,
    ScarifyLayer,
    SectionLayer,
    Stack,
    StratumLayer,
    StripLayer,
)
from earthwork.ground.surfaces import Surface
from earthwork.quantities.coverage import area_share
from earthwork.quantities.sharing import SHARED
from earthwork.site import Site
from earthwork.site.model import AreaSpec

if TYPE_CHECKING:
    from earthwork.ground.open_design import BuiltDesign


@dataclass(frozen=True)
class SiteGround:
    """Everything of a site that has a place: the stack, the zones, and what must be said about them."""

    stack: Stack
    surfaces: SurfaceSet
    worked_shape: Any = None  #: areas of sections and over-excavations, where they count as disturbed [CRS unit]
    design: BuiltDesign | None = None  #: what is built, where the site has a [design]
    zone_names: tuple[str, ...] = ()
    zones: Rings | None = None
    zone_shapes: tuple[Any, ...] = ()
    zone_areas_m2: tuple[float, ...] = ()  #: inside the ground that counts
    zone_beyond_m2: tuple[float, ...] = ()  #: beyond what the surfaces cover, where the site has no limits
    limits_area_m2: float | None = None
    warnings: tuple[Warning, ...] = ()

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
        self._read: dict[tuple[AreaSpec, str | None], list[NamedPolygon]] = {}

    def polygons(self, spec: AreaSpec, what: str, name: str | None = None) -> list[NamedPolygon]:
        key = (spec, name)
        if key not in self._read:
            self._read[key] = read_polygons(
                spec, self.site.directory, crs=self.grid.crs, name=name, what=what, warnings=self.warnings
            )
        return self._read[key]

    def shape(self, spec: AreaSpec, what: str, spread_m: float = 0.0) -> Any:
        """The union of an area's polygons and all ground within a distance of it, one shape."""
        return areas.spread(areas.union_area(self.polygons(spec, what)), spread_m, self.grid)

    def rings(self, spec: AreaSpec | None, what: str, spread_m: float = 0.0) -> Rings | None:
        if spec is None:
            return None
        shape = self.shape(spec, what, spread_m)
        return areas.rings_on(self.grid, [shape])


def open_site(site: Site, *, moving: bool = False) -> SiteGround:
    """Open the surfaces and areas of a site.

    Args:
        site: a checked site.
        moving: whether the share that a grade shift moves is wanted as well.

    Raises:
        FileError, GroundError: a file or an area that does not fit; the message says which and why.
    """
    shared = SHARED.get()
    ground = shared.ground(site) if shared else None
    if ground is not None and (ground.stack.moving or not moving):
        return ground
    opener = _Opener(site)
    model = site.model
    # Without limits the site is what all surfaces cover: in another CRS that is not a whole rectangle of cells.
    limits = opener.shape(model.ground.limits, "ground.limits") if model.ground.limits else opener.surfaces.footprint
    design = _design(opener, limits)
    disturbed = opener.rings(model.ground.disturbed, "ground.disturbed")
    worked = None if model.ground.disturbed else areas.union_area(_worked(opener))
    if design is not None and disturbed is None:
        disturbed = areas.rings_on(opener.grid, [areas.union_area([design.area, worked])])
    stack = Stack(
        grid=opener.grid,
        existing=opener.surfaces.existing,
        finished=_finished(opener, design),
        built_to_subgrade=design is not None and design.elevation_is == "subgrade",
        coverage=area_share,
        limits=areas.rings_on(opener.grid, [limits]) if limits is not None else None,
        disturbed=disturbed,
        worked=None if worked is None or worked.is_empty else areas.rings_on(opener.grid, [worked]),
        move=opener.rings(model.balance.shift_area, "balance.shift_area") if moving else None,
        moving=moving,
        bands_below_m=tuple((row.below, row.measured_from) for row in model.fill.by_depth) if model.fill else (),
        **_layers(opener),
    )
    zones = _zones(opener, limits)
    return SiteGround(
        stack=stack,
        surfaces=opener.surfaces,
        design=design,
        worked_shape=worked,
        limits_area_m2=areas.ground_area_m2(limits, opener.grid) if limits is not None else None,
        warnings=tuple(dict.fromkeys(opener.warnings)),
        **zones,
    )


def _design(opener: _Opener, limits: Any) -> BuiltDesign | None:
    """The pads and roads of a site that is designed by them, with what they cannot do as drawn among the warnings."""
    site, surfaces = opener.site, opener.surfaces
    if site.model.design is None:
        return None
    from earthwork.ground.open_design import open_design

    design = open_design(site, opener.grid, surfaces.existing, opener.polygons, limits=limits)
    opener.warnings += design.warnings
    opener.warnings += [finding.warning(site.units) for finding in design.inspection.findings]
    return design


def _finished(opener: _Opener, design: BuiltDesign | None) -> Surface:
    surface = opener.surfaces.finished if design is None else design.design
    if surface is None:
        raise GroundError(f"{opener.site.name}: there is no finished surface; give ground.finished or a [design]")
    return surface


def _worked(opener: _Opener) -> list[Any]:
    """Areas that sections and over-excavations name: disturbed whatever the surfaces say."""
    model = opener.site.model
    shapes = [opener.shape(s.area, f'section "{s.name}"') for s in model.section if s.area]
    shapes += [opener.shape(o.area, f'over_excavation "{o.name}"', o.spread) for o in model.over_excavation if o.area]
    return shapes


def _layers(opener: _Opener) -> dict[str, Any]:
    model, surface, rings = opener.site.model, opener.surfaces.surface, opener.rings
    strips = [StripLayer(s.material, s.depth, rings(s.area, f'strip "{s.material}"')) for s in model.strip]
    sections = [
        SectionLayer(s.name, s.source, s.thickness, rings(s.area, f'section "{s.name}"')) for s in model.section
    ]
    excavations = []
    for o in model.over_excavation:
        what = f'over_excavation "{o.name}"'
        bottom = surface(o.bottom, f"{what} bottom", warnings=opener.warnings) if o.bottom else None
        excavations.append(ExcavationLayer(o.name, o.depth, bottom, o.measured_from, rings(o.area, what, o.spread)))
    strata = []
    for stratum in model.stratum:
        what = f'stratum "{stratum.material}" bottom'
        bottom = surface(stratum.bottom, what, warnings=opener.warnings) if stratum.bottom else None
        strata.append(StratumLayer(stratum.material, bottom, stratum.thickness))
    return {
        "strips": tuple(strips),
        "sections": tuple(sections),
        "excavations": tuple(excavations),
        "scarifies": tuple(ScarifyLayer(s.depth, rings(s.area, "scarify")) for s in model.scarify),
        "strata": tuple(strata),
    }


def _zones(opener: _Opener, limits: Any) -> dict[str, Any]:
    zones = opener.site.model.zones
    if zones is None:
        return {}
    polygons, warnings = areas.check_overlaps(
        opener.polygons(zones.area, "zones", zones.name), square_m=areas.square_metres(opener.grid)
    )
    opener.warnings += warnings
    # Without stated limits a zone may reach beyond what the surfaces cover; that part is missing in the zone alone.
    stated = opener.site.model.ground.limits is not None
    ground = shapely.box(*opener.grid.bounds) if limits is None else limits
    inside = [areas.only_polygons(p.geometry & ground) for p in polygons]
    beyond = [0.0 if stated else areas.ground_area_m2(p.geometry - ground, opener.grid) for p in polygons]
    opener.warnings += _zone_warnings(opener, [p.name for p in polygons], inside, beyond)
    shapes = [p.geometry for p in polygons] if limits is None else inside
    return {
        "zone_names": tuple(p.name for p in polygons),
        "zone_shapes": tuple(shapes),
        "zones": areas.rings_on(opener.grid, shapes),
        "zone_areas_m2": tuple(areas.ground_area_m2(s, opener.grid) for s in inside),
        "zone_beyond_m2": tuple(beyond),
    }


def _zone_warnings(opener: _Opener, names: list[str], inside: list[Any], beyond: list[float]) -> list[Warning]:
    """Zones that have no ground at all, and zones of which a part has none."""
    warnings = []
    units = opener.site.units
    without = [name for name, shape in zip(names, inside, strict=True) if shape.is_empty]
    if without:
        listed = ", ".join(repr(n) for n in without[:3]) + (f" and {len(without) - 3} more" if len(without) > 3 else "")
        message = f"no ground of the site lies in zone {listed}; check that the zones are of this site and carry the right CRS"
        warnings.append(Warning("zone-without-ground", message))
    partly = [
        (lost, name)
        for name, shape, lost in zip(names, inside, beyond, strict=True)
        if not shape.is_empty and lost > max(0.01, 1e-6 * areas.ground_area_m2(shape, opener.grid))
    ]
    if partly:
        lost, name = max(partly)
        share = f"{units.from_si(lost, 'area'):,.0f} {units.label('area')}"
        which = f"zone {name!r} reaches" if len(partly) == 1 else f"{len(partly)} zones reach"
        most = f"by {share}" if len(partly) == 1 else f"the most {name!r}, by {share}"
        message = f"{which} beyond what the surfaces cover, {most}; that part has no data and is in no figure"
        warnings.append(Warning("zone-beyond-ground", message))
    return warnings
