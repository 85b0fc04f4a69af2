"""The areas and lines that a haul plan needs: how the ground is divided into blocks, barriers, roads and baseline.

Shapes come out in metres on the ground, east and north of the grid's north-west corner, as hauls are measured.
"""

from __future__ import annotations

import datetime
import re
import string
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
import shapely

from earthwork.errors import GroundError, SiteFileError, Warning
from earthwork.files.vectors import NamedLine, NamedPolygon, read_lines, read_polygons
from earthwork.ground import areas
from earthwork.ground.grid import Grid
from earthwork.quantities.blocks import BlockKey, BlockLayout, PartRule
from earthwork.quantities.site_ground import SiteGround
from earthwork.site import Site
from earthwork.site.model import AreaSpec

#: Squares that a site may be divided into.
_MOST_SQUARES = 250_000
#: Stations that a baseline may have: its chart and its table are read by people.
_MOST_STATIONS = 20_000


@dataclass(frozen=True)
class Frame:
    """Metres on the ground, east and north of the grid's north-west corner; north is negative on the grid."""

    grid: Grid

    @property
    def metres_per_unit(self) -> float:
        """Ground metres of a CRS unit."""
        return self.grid.unit_m * self.grid.ground_scale

    def local(self, points: np.ndarray) -> np.ndarray:
        """Places (n, 2) from CRS coordinates."""
        return (np.asarray(points, float) - [self.grid.west, self.grid.north]) * self.metres_per_unit

    def map(self, points: np.ndarray) -> np.ndarray:
        """CRS coordinates of places (n, 2)."""
        return np.asarray(points, float) / self.metres_per_unit + [self.grid.west, self.grid.north]

    def shape(self, geometry: Any) -> Any:
        """A shape from CRS coordinates."""
        return shapely.transform(geometry, self.local)

    def of_cells(self, column: float, row: float) -> tuple[float, float]:
        """Place of a column and row in cells, with fractions."""
        return column * self.grid.cell_east_m, -row * self.grid.cell_north_m


@dataclass(frozen=True)
class HaulAreas:
    """Everything of a haul plan that has a place beside the ground itself.

    ``region_names``, ``region_phases``: of the layout's regions. ``phases``: labels, the earliest first; ground outside
    all belongs to the first. ``built``: (shape, phase) of ground that is closed once its phase is built.
    """

    layout: BlockLayout
    frame: Frame
    region_names: tuple[str | None, ...] = ()
    region_phases: tuple[int, ...] = ()
    phases: tuple[str, ...] = ()
    barriers: tuple[Any, ...] = ()
    built: tuple[tuple[Any, int], ...] = ()
    roads: tuple[NamedLine, ...] = ()
    baseline: np.ndarray | None = None
    warnings: tuple[Warning, ...] = ()

    def phase_of(self, key: BlockKey) -> int:
        """Phase of a block."""
        return self.region_phases[key[0]] if key[0] >= 0 else 0

    def name_of(self, key: BlockKey) -> str:
        """Name of a block: its zone or pad, or the letters of its column and the number of its row."""
        region, row, column = key
        name = self.region_names[region] if region >= 0 else None
        square = f"{column_letters(column)}{row + 1}" if row >= 0 else None
        text = " ".join(part for part in (name, square) if part) or "site"
        return f"{text} phase {self.phases[self.phase_of(key)]}" if self.phases else text


def column_letters(column: int) -> str:
    """Letters of a block column, as a spreadsheet has them.

    >>> column_letters(0), column_letters(25), column_letters(26)
    ('A', 'Z', 'AA')
    """
    letters = ""
    column += 1
    while column > 0:
        column, rest = divmod(column - 1, 26)
        letters = string.ascii_uppercase[rest] + letters
    return letters


def open_haul_areas(site: Site, ground: SiteGround) -> HaulAreas:
    """Read the areas of a haul plan.

    Raises:
        FileError, GroundError, SiteFileError: an area that does not fit; the message says which and why.
    """
    return _Opener(site, ground).open()


class _Opener:
    def __init__(self, site: Site, ground: SiteGround) -> None:
        self.site = site
        self.ground = ground
        self.grid = ground.stack.grid
        self.frame = Frame(self.grid)
        self.warnings: list[Warning] = []

    def open(self) -> HaulAreas:
        model = self.site.model
        haul = model.haul
        block = haul.block if haul else 50.0
        phases, labels = self._phases()
        names, shapes, of_phase, divided = self._regions(phases)
        rules = tuple(
            PartRule(rule.top, rule.measured_from, self._rings(rule.area, f'haul.rule "{rule.name}"'))
            for rule in (haul.rule if haul else ())
        )
        rows, columns = (max(1, round(block / side)) for side in (self.grid.cell_north_m, self.grid.cell_east_m))
        self._check_count(rows, columns)
        layout = BlockLayout(
            rows=rows,
            columns=columns,
            regions=areas.rings_on(self.grid, shapes) if shapes else None,
            divided=tuple(divided),
            rules=rules,
        )
        return HaulAreas(
            layout=layout,
            frame=self.frame,
            region_names=tuple(names),
            region_phases=tuple(of_phase),
            phases=labels,
            barriers=tuple(self._shapes(haul.barriers if haul else None, "haul.barriers")),
            built=self._built(phases),
            roads=self._roads(),
            baseline=self._baseline(),
            warnings=tuple(dict.fromkeys(self.warnings)),
        )

    # --- blocks ------------------------------------------------------------------------------------------------------

    def _check_count(self, rows: int, columns: int) -> None:
        """Refuse a division into more squares than a plan can hold."""
        count = -(-self.grid.rows // rows) * -(-self.grid.columns // columns)
        if count > _MOST_SQUARES:
            units = self.site.units
            side = (self.grid.rows * self.grid.columns * self.grid.cell_area_m2 / _MOST_SQUARES) ** 0.5
            block = self.site.model.haul.block if self.site.model.haul else 50.0
            raise SiteFileError(
                f"{self.site.path or self.site.name}: haul.block = {units.from_si(block, 'length'):g} "
                f"{units.label('length')}: it makes {count:,} blocks; the most is {_MOST_SQUARES:,}. "
                f"Take {units.from_si(side, 'length'):.2g} {units.label('length')} or more"
            )

    def _regions(self, phases: list[Any]) -> tuple[list[str | None], list[Any], list[int], list[bool]]:
        """Names, shapes, phases of the regions, and whether squares divide them: whole areas, cut by phases."""
        wholes = self._wholes()
        names: list[str | None] = []
        shapes: list[Any] = []
        of_phase: list[int] = []
        left = [areas.only_polygons(shape) for shape in phases]
        for whole in wholes:
            rest = whole.geometry
            for k, phase in enumerate(phases):
                names.append(whole.name)
                shapes.append(areas.only_polygons(rest & phase))
                of_phase.append(k)
                rest = rest - phase
                left[k] = areas.only_polygons(left[k] - whole.geometry)
            names.append(whole.name)
            shapes.append(areas.only_polygons(rest))
            of_phase.append(0)
        divided = [False] * len(shapes)
        for k, shape in enumerate(left):
            names.append(None)
            shapes.append(shape)
            of_phase.append(k)
            divided.append(True)
        keep = [i for i, shape in enumerate(shapes) if not shape.is_empty]
        return ([names[i] for i in keep], [shapes[i] for i in keep], [of_phase[i] for i in keep],
                [divided[i] for i in keep])  # fmt: skip

    def _wholes(self) -> list[NamedPolygon]:
        """Zones or pads that are blocks of their own."""
        model = self.site.model
        by = model.haul.by if model.haul else "blocks"
        if by == "zones" and model.zones:
            polygons = self._polygons(model.zones.area, "zones", model.zones.name)
        elif by == "pads" and model.pads:
            polygons = self._polygons(model.pads.area, "pads", model.pads.name)
        elif by == "pads" and model.design:
            polygons = self._polygons(model.design.pads, "design.pads", model.design.name)
        else:
            return []
        found, warnings = areas.check_overlaps(polygons, square_m=areas.square_metres(self.grid))
        self.warnings += warnings
        return found

    def _phases(self) -> tuple[list[Any], tuple[str, ...]]:
        """Shapes and labels of the phases, the earliest first."""
        phases = self.site.model.phases
        if phases is None:
            return [], ()
        polygons = self._polygons(phases.area, "phases", phases.order)
        found, warnings = areas.check_overlaps(polygons, square_m=areas.square_metres(self.grid))
        self.warnings += warnings
        ranks = {p.name: _rank(p.attributes[phases.order], f"{p.where}: {phases.order}") for p in found}
        if len({type(rank) for rank in ranks.values()}) > 1:
            raise SiteFileError(
                f"{self.site.path or self.site.name}: phases: {phases.order!r} holds numbers and dates; "
                "it must be one kind, so that the phases have an order"
            )
        ordered = sorted(found, key=lambda p: ranks[p.name])
        return [p.geometry for p in ordered], tuple(p.name for p in ordered)

    def _built(self, phases: list[Any]) -> tuple[tuple[Any, int], ...]:
        """Ground that is closed once built, each piece with the phase that it lies in."""
        haul = self.site.model.haul
        if haul is None or haul.built is None:
            return ()
        found = []
        for polygon in self._polygons(haul.built, "haul.built"):
            shares = [shapely.area(polygon.geometry & phase) for phase in phases]
            found.append((self.frame.shape(polygon.geometry), int(np.argmax(shares)) if any(shares) else 0))
        return tuple(found)

    # --- ways --------------------------------------------------------------------------------------------------------

    def _roads(self) -> tuple[NamedLine, ...]:
        haul = self.site.model.haul
        if haul is None or haul.roads is None:
            return ()
        lines = read_lines(
            haul.roads, self.site.directory, crs=self.grid.crs, name=haul.roads.name, what="haul.roads",
            warnings=self.warnings,
        )  # fmt: skip
        return tuple(replace(line, geometry=self.frame.shape(line.geometry)) for line in lines)

    def _baseline(self) -> np.ndarray | None:
        spec = self.site.model.baseline
        if spec is None:
            return None
        lines = read_lines(spec.line, self.site.directory, crs=self.grid.crs, what="baseline", warnings=self.warnings)
        shape = shapely.line_merge(shapely.union_all([line.geometry for line in lines]))
        if len(lines) == 1 and lines[0].geometry.geom_type == "LineString":
            shape = lines[0].geometry
        if shape.geom_type != "LineString":
            raise GroundError(
                f"baseline: {spec.line.file}: it has {len(shapely.get_parts(shape))} pieces; it must be one line. "
                "Join them, or pick one with where"
            )
        if not shape.is_simple:
            at = _crossing(shape)
            raise GroundError(
                f"baseline: {spec.line.file}: the line crosses itself at ({at[0]:.10g}, {at[1]:.10g}); stations would "
                "not be clear there. Take a line that does not, or two with a site file each"
            )
        points = self.frame.local(shapely.get_coordinates(shape))
        self._check_stations(float(np.hypot(*np.diff(points, axis=0).T).sum()), spec.interval)
        return points

    def _check_stations(self, length_m: float, interval_m: float) -> None:
        """Refuse more stations than a mass curve can hold."""
        if length_m > _MOST_STATIONS * interval_m:
            units = self.site.units
            raise SiteFileError(
                f"{self.site.path or self.site.name}: baseline.interval = {units.from_si(interval_m, 'length'):g} "
                f"{units.label('length')}: it makes {length_m / interval_m:,.0f} stations; the most is "
                f"{_MOST_STATIONS:,}. Take {units.from_si(length_m / _MOST_STATIONS, 'length'):.2g} "
                f"{units.label('length')} or more"
            )

    # --- files -------------------------------------------------------------------------------------------------------

    def _polygons(self, spec: AreaSpec, what: str, name: str | None = None) -> list[NamedPolygon]:
        return read_polygons(spec, self.site.directory, crs=self.grid.crs, name=name, what=what, warnings=self.warnings)

    def _shapes(self, spec: AreaSpec | None, what: str) -> list[Any]:
        return [] if spec is None else [self.frame.shape(p.geometry) for p in self._polygons(spec, what)]

    def _rings(self, spec: AreaSpec | None, what: str) -> areas.Rings | None:
        if spec is None:
            return None
        return areas.rings_on(self.grid, [areas.union_area(self._polygons(spec, what))])


def _crossing(line: Any) -> np.ndarray:
    """A place where a line crosses or touches itself: where more than two of its simple pieces end."""
    pieces = shapely.get_parts(shapely.node(line))
    ends = np.concatenate([shapely.get_coordinates(piece)[[0, -1]] for piece in pieces])
    places, counts = np.unique(np.round(ends, 9), axis=0, return_counts=True)
    return places[np.argmax(counts)]


def _rank(value: Any, where: str) -> float | datetime.date:
    """The order of a phase: a date, or the number that its name is or begins with."""
    if isinstance(value, np.datetime64):
        value = value.astype("datetime64[s]").item()
    if isinstance(value, datetime.datetime):
        return value.date()
    if isinstance(value, datetime.date):
        return value
    text = str(value).strip()
    try:
        return datetime.date.fromisoformat(text[:10])
    except ValueError:
        pass
    number = re.match(r"[+-]?\d+(\.\d+)?(?![\d-])", text)
    if number is None:
        raise SiteFileError(
            f"{where} is {value!r}; it must be a date such as 2025-04-01, or a number or a name that begins with one, "
            "so that the phases have an order"
        )
    return float(number.group())
