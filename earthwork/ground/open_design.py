"""From the ``[design]`` of a site to pads and roads that are built: attributes, units, and every fault at once."""

from __future__ import annotations

import difflib
import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from functools import cached_property, partial
from typing import TYPE_CHECKING, Any

import numpy as np
import shapely
from shapely.geometry import LineString

from earthwork.errors import GroundError, Warning
from earthwork.files.vectors import NamedLine, NamedPolygon, read_lines
from earthwork.ground.design import Design, build_design, pad_faults
from earthwork.ground.design_checks import Inspection, inspect_design
from earthwork.ground.design_lines import DesignLines, design_area, design_lines
from earthwork.ground.elements import PadShape, RoadShape, SideSlope
from earthwork.ground.grid import Grid
from earthwork.ground.surfaces import Surface

if TYPE_CHECKING:
    from earthwork.site import Site
    from earthwork.site.model import AreaSpec
    from earthwork.site.model import Design as DesignModel

Polygons = Callable[["AreaSpec", str, str | None], list[NamedPolygon]]

#: Elevations that a pad can have [m]: from the deepest pits to the highest summits.
_LOWEST_M, _HIGHEST_M = -1500.0, 9000.0
#: Side slopes H:V; as for ``design.cut_slope``.
_STEEPEST, _FLATTEST = 0.05, 100.0
#: Falls over this are believed to be percent; a fall under 1 % of a percent to be a slip [%].
_LEAST_FALL_PERCENT = 0.1


@dataclass(frozen=True)
class BuiltDesign:
    """What a ``[design]`` gives: the surface, the shapes that it was built of, and what must be said about it."""

    design: Design
    pads: tuple[PadShape, ...]
    roads: tuple[RoadShape, ...]
    limits: Any
    elevation_is: str
    warnings: tuple[Warning, ...] = ()
    mitred: bool = False
    retaining: Any = None

    @cached_property
    def inspection(self) -> Inspection:
        """Walls that would be needed, slopes that leave the data or the limits, slope heights."""
        return inspect_design(self.design, self.limits)

    @cached_property
    def area(self) -> Any:
        """The ground that pads, roads and their slopes take up, a polygon in CRS coordinates."""
        return design_area(self.design)

    @cached_property
    def lines(self) -> DesignLines:
        """Toe, top and daylight lines, and the ground that the design takes up."""
        return design_lines(self.design, self.area)

    def raised(self, shifts_m: dict[str, float]) -> BuiltDesign:
        """The same design with some pads at other elevations.

        Args:
            shifts_m: rise of pads by name [m].

        Raises:
            GroundError: a name that is no pad of the design.
        """
        for name in shifts_m:
            self.design.index(name)
        pads = tuple(pad.raised(shifts_m.get(pad.name, 0.0)) for pad in self.pads)
        design = build_design(
            self.design.grid, self.design.existing, pads, self.roads, mitred=self.mitred, retaining=self.retaining
        )
        return BuiltDesign(
            design, pads, self.roads, self.limits, self.elevation_is, self.warnings, self.mitred, self.retaining
        )


def open_design(
    site: Site, grid: Grid, existing: Surface, polygons: Polygons, *, limits: Any = None
) -> BuiltDesign:
    """Read the pads and roads of a site and build them.

    Args:
        site: a site with a ``[design]``.
        grid, existing: the analysis grid, and the ground on it.
        polygons: reads an area: ``polygons(spec, what, name)``.
        limits: the ground that counts [CRS unit], or None.

    Raises:
        FileError: a file, layer or attribute that is not there.
        GroundError: pads that overlap or share a name, a missing or wrong attribute; all faults in one message.
    """
    model = site.model.design
    assert model is not None
    warnings: list[Warning] = []
    faults: list[str] = []
    pads = _pads(site, model, polygons(model.pads, "design.pads", model.name), faults)
    roads: list[RoadShape] = []
    if model.roads is not None:
        lines = read_lines(
            model.roads.lines, site.directory, crs=grid.crs, name=model.roads.name, what="design.roads",
            warnings=warnings,
        )  # fmt: skip
        roads = _roads(site, model, lines, grid, faults)
    retaining = None
    if model.retaining is not None:
        found = read_lines(
            model.retaining, site.directory, crs=grid.crs, what="design.retaining", warnings=warnings
        )
        retaining = shapely.union_all([line.geometry for line in found])
    # A grade that is missing is among the faults already.
    known = [pad if math.isfinite(pad.elevation_m) else replace(pad, elevation_m=0.0) for pad in pads]
    faults += pad_faults(grid, known, roads)
    if faults:
        raise GroundError(f"{site.path or site.name}: design:\n  " + "\n  ".join(faults))
    mitred = model.corners == "mitred"
    design = build_design(grid, existing, pads, roads, mitred=mitred, retaining=retaining)
    return BuiltDesign(
        design, tuple(pads), tuple(roads), limits, model.elevation_is, tuple(warnings), mitred, retaining
    )


class _Attributes:
    """Numbers among the attributes of one feature; faults are gathered."""

    def __init__(self, feature: NamedPolygon | NamedLine, what: str, faults: list[str]) -> None:
        self.feature = feature
        self.what = f'{what} "{feature.name}"'
        self.faults = faults

    def number(self, key: str, rule: str, ok: Callable[[float], bool], missing: float | None = None) -> float:
        """The number in an attribute; NaN, with a fault noted, where there is none that keeps the rule."""
        attributes = self.feature.attributes
        if key not in attributes:
            near = difflib.get_close_matches(key, [str(k) for k in attributes], n=1)
            hint = f'; did you mean "{near[0]}"?' if near else f"; there are: {', '.join(map(str, attributes))}"
            self.faults.append(f'{self.what}: there is no attribute "{key}"{hint}')
            return math.nan
        value = attributes[key]
        number = _as_number(value)
        if number is None and missing is not None and (value is None or str(value).strip() == ""):
            return missing
        if number is None:
            shown = "empty" if value is None or str(value).strip() in ("", "nan") else f'"{value}"'
            self.faults.append(f"{self.what}: {key} is {shown}; it must be {rule}")
            return math.nan
        if not ok(number):
            self.faults.append(f"{self.what}: {key} is {number:g}; it must be {rule}")
            return math.nan
        return number


def _between(value: float, low: float, high: float) -> bool:
    return low <= value <= high


def _as_number(value: Any) -> float | None:
    if value is None or isinstance(value, bool):
        return None
    try:
        number = float(value)
    except (TypeError, ValueError):
        return None
    return number if math.isfinite(number) else None


def _pads(site: Site, model: DesignModel, features: Sequence[NamedPolygon], faults: list[str]) -> list[PadShape]:
    foot = site.units.factor("length")
    pads = []
    for feature in features:
        read = _Attributes(feature, "pad", faults)
        warped = model.elevation_from == "vertices"
        elevation, polygon = math.nan, feature.geometry
        if warped:
            polygon = _warped(feature, foot, faults)
        else:
            rule = f"its elevation, {_LOWEST_M / foot:,.0f} to {_HIGHEST_M / foot:,.0f} {site.units.label('length')}"
            possible = partial(_between, low=_LOWEST_M / foot, high=_HIGHEST_M / foot)
            elevation = read.number(model.elevation, rule, possible) * foot
        fall = azimuth = 0.0
        if model.fall is not None and model.fall_direction is not None:
            rule = f"0, or a percentage from {_LEAST_FALL_PERCENT:g} to 50"
            fall = read.number(model.fall, rule, lambda v: v == 0 or _LEAST_FALL_PERCENT <= v <= 50, missing=0.0) / 100
            azimuth = read.number(
                model.fall_direction, "degrees from north, -360 to 360", lambda v: -360 <= v <= 360,
                missing=0.0 if fall == 0 else None,
            )  # fmt: skip
        pads.append(
            PadShape(feature.name, polygon, elevation, _slope(model, read), fall, azimuth, warped=warped)
        )
    return pads


def _slope(model: DesignModel, read: _Attributes | None) -> SideSlope:
    cut, fill = model.cut_slope, model.fill_slope
    rule = f"a ratio of run to height, {_STEEPEST:g} to {_FLATTEST:g} (2 for 2:1)"
    possible = partial(_between, low=_STEEPEST, high=_FLATTEST)
    if read is not None and model.own_cut_slope is not None:
        cut = read.number(model.own_cut_slope, rule, possible, missing=cut)
    if read is not None and model.own_fill_slope is not None:
        fill = read.number(model.own_fill_slope, rule, possible, missing=fill)
    return SideSlope(cut, fill, model.bench_every, model.bench_width or 0.0)


def _warped(feature: NamedPolygon, foot: float, faults: list[str]) -> Any:
    if feature.heights is None or not np.isfinite(shapely.get_coordinates(feature.heights, include_z=True)).all():
        faults.append(f'pad "{feature.name}": its vertices carry no heights; draw it in 3D, or give an attribute')
        return feature.geometry
    return shapely.transform(feature.heights, lambda c: c * [1.0, 1.0, foot], include_z=True)


def _roads(
    site: Site, model: DesignModel, lines: Sequence[NamedLine], grid: Grid, faults: list[str]
) -> list[RoadShape]:
    table = model.roads
    assert table is not None
    foot = site.units.factor("length")
    profiles = {profile.road: profile.points for profile in table.profile}
    names = [line.name for line in lines]
    for name in profiles:
        if name not in names:
            near = difflib.get_close_matches(name, names, n=1)
            hint = f'did you mean "{near[0]}"?' if near else f"there are: {', '.join(names)}"
            faults.append(f'design.roads.profile: there is no road "{name}"; {hint}')
    roads = []
    for feature in lines:
        read = _Attributes(feature, "road", faults)
        width = table.width
        if table.own_width is not None:
            width = read.number(table.own_width, "a width, more than 0", lambda v: v > 0, missing=width / foot) * foot
        line = _profiled(feature, profiles.get(feature.name), grid, foot, faults)
        if line is not None:
            one_way = table.falls == "left to right"
            slope = _slope(model, None)
            roads.append(RoadShape(feature.name, line, width, slope, table.crossfall / 100, one_way))
    return roads


def _profiled(
    feature: NamedLine, profile: tuple[tuple[float, float], ...] | None, grid: Grid, foot: float, faults: list[str]
) -> LineString | None:
    """A road's line with elevations [m], of its own vertices or of a profile whose points become vertices too."""
    line = feature.heights if profile is None else feature.geometry
    if line is None:
        faults.append(
            f'road "{feature.name}": its vertices carry no heights; draw it in 3D, or give design.roads.profile'
        )
        return None
    line = shapely.line_merge(line) if line.geom_type == "MultiLineString" else line
    if line.geom_type != "LineString":
        faults.append(f'road "{feature.name}": it has {len(line.geoms)} parts that do not join; draw it as one line')
        return None
    if profile is None:
        return shapely.transform(line, lambda c: c * [1.0, 1.0, foot], include_z=True)
    metres = grid.unit_m * grid.ground_scale
    length = line.length * metres
    at, z = np.array(profile).T
    if at[0] > 0.01 or at[-1] < length - 0.01:
        faults.append(
            f'road "{feature.name}": its profile runs from {at[0] / foot:g} to {at[-1] / foot:g}; the line is '
            f"{length / foot:.2f} long. Give a point at 0 and one at its end or beyond"
        )
        return None
    points = shapely.get_coordinates(line)
    stations = np.r_[0.0, np.cumsum(np.hypot(*np.diff(points, axis=0).T))] * metres
    every = np.union1d(stations, at[(at > 0) & (at < length)])
    places = shapely.get_coordinates(shapely.line_interpolate_point(line, every / metres))
    return LineString(np.column_stack([places, np.interp(every, at, z)]))
