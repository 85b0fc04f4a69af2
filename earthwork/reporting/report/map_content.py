"""What the interactive map shows of a site: scales with their legends, outlines, moves and lifts."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
import shapely

from earthwork.reporting import colors
from earthwork.reporting.cut_fill_map import COLORS, NO_CHANGE_M, classes_for
from earthwork.reporting.display import show
from earthwork.reporting.figures import number, round_step
from earthwork.reporting.maps import limits_shape
from earthwork.reporting.report.map_data import Arrow, LiftRow, MapContent, Outline
from earthwork.reporting.report.parts import Parts
from earthwork.site.haul_rules import ON_SITE_STOCKPILE

#: Ground by stratum, from the top down: earths of our own, apart in lightness.
_GROUND = ("#E3C78F", "#8C8FA3", "#B98B73", "#5E6B5A", "#D8D4C8", "#7A5C86")
_LIFTS = ("#CBE5E2", "#6FB3AC", "#237872", "#F0C534")
_MOVES = {"site": "#3B3B8F", "import": colors.IMPORT, "export": colors.EXPORT}
_MOVE_NAMES = {"site": "moved on the site", "import": "comes to the site", "export": "leaves the site"}
_LIFT_NAMES = ("waits for its turn", "partly built", "at grade", "this lift")


@dataclass(frozen=True)
class Scale:
    """Colours of a layer: ``bounds`` [m] between its classes, from low to high."""

    bounds: tuple[float, ...]
    colors: tuple[str, ...]
    labels: tuple[str, ...]  #: as the legend lists them, from the highest down
    outside: str = ""

    def to_dict(self) -> dict[str, Any]:
        return {"bounds": list(self.bounds), "colors": list(self.colors), "outside": self.outside or None}


@dataclass(frozen=True)
class MapView:
    """The page's side of the map: what can be chosen and read, and the legends."""

    layers: tuple[tuple[str, str], ...]
    overlays: tuple[tuple[str, str, bool], ...]
    readings: tuple[tuple[str, str], ...]
    legends: tuple[tuple[str, tuple[tuple[str, str, bool], ...]], ...]
    moves: tuple[tuple[str, str], ...]  #: colours of the haul, by where it goes
    lifts: int
    note: str
    unit: str
    content: MapContent


def map_view(parts: Parts) -> MapView:
    """What the map of a report shows."""
    units = parts.site.units
    scales = {"depth": depth_scale(parts), "thickness": _thickness_scale(parts)}
    layers = [("depth", "Depth"), ("thickness", "Fill thickness")]
    if parts.surfaces.materials:
        scales["material"] = _material_scale(parts.surfaces.materials)
        layers.append(("material", "Material"))
    lifts, fills = _lifts(parts)
    if lifts:
        scales["lifts"] = Scale((), _LIFTS, _LIFT_NAMES, outside="#EFEEE9")
        layers.append(("lifts", "Lifts"))
    layers += [("finished", "Finished grade"), ("existing", "Existing ground")]
    outlines, arrows = outlines_of(parts), _arrows(parts)
    content = MapContent(outlines=outlines, arrows=arrows, lifts=lifts, fills=fills, extra=_extra(parts, scales))
    every = parts.surfaces.every
    cells = "one cell" if every == 1 else f"{every} × {every} cells, of which it shows the mean,"
    side = show(parts.surfaces.grid.cell_east_m, "length", units)
    return MapView(
        layers=tuple(layers),
        overlays=_overlays(outlines, bool(arrows)),
        readings=_readings(parts, outlines),
        legends=tuple((name, _legend(name, scale)) for name, scale in scales.items()),
        moves=tuple((_MOVES[kind], _MOVE_NAMES[kind]) for kind in _MOVES if any(a.kind == kind for a in arrows)),
        lifts=len(lifts),
        note=f"A point of the map is {cells} of the analysis grid, {side} wide.",
        unit=units.label("length"),
        content=content,
    )


def _overlays(outlines: list[Outline], arrows: bool) -> tuple[tuple[str, str, bool], ...]:
    titles = {"limits": "Limits", "zones": "Zones", "pads": "Pads", "buildings": "Buildings", "barriers": "No-go areas"}
    there = {outline.layer for outline in outlines}
    shown = [(name, title, name in ("limits", "pads") or "pads" not in there) for name, title in titles.items()]
    shown = [entry for entry in shown if entry[0] in there]
    if arrows:
        shown.append(("haul", "Haul", False))
    return (*shown, ("contours", "Contours", False))


def _readings(parts: Parts, outlines: list[Outline]) -> tuple[tuple[str, str], ...]:
    there = {outline.layer for outline in outlines}
    rows = [
        ("place", "place"), ("depth", "depth"), ("existing", "existing ground"), ("stripped", "stripped ground"),
        ("bottom", "removal bottom"), ("subgrade", "subgrade"), ("finished", "finished grade"),
        ("thickness", "fill thickness, with refill"),
    ]  # fmt: skip
    if parts.surfaces.materials:
        rows.append(("material", "ground here is"))
    rows += [(name, title) for name, title in (("zones", "zone"), ("pads", "pad")) if name in there]
    return tuple(rows)


def _legend(name: str, scale: Scale) -> tuple[tuple[str, str, bool], ...]:
    if name in ("material", "lifts"):
        return tuple((c, label, False) for c, label in zip(scale.colors, scale.labels, strict=False))
    rows = zip(reversed(scale.colors), scale.labels, strict=True)
    return tuple((color, label, "cut" in label) for color, label in rows)


def depth_scale(parts: Parts) -> Scale:
    """The classes of depth that all maps of a report share."""
    factor = parts.site.units.factor("length")
    classes = classes_for(parts.surfaces.depth / factor, NO_CHANGE_M / factor)
    bounds = tuple(float(b) * factor for b in classes.bounds[1:-1])
    return Scale(bounds, COLORS, tuple(classes.labels(parts.site.units.label("length"))))


def _thickness_scale(parts: Parts) -> Scale:
    units = parts.site.units
    factor = units.factor("length")
    thickness = parts.surfaces.fill_thickness / factor
    known = thickness[np.isfinite(thickness) & (thickness > 0.01)]
    step = round_step(float(np.percentile(known, 99)) if known.size else 4.0, 4)
    unit = units.label("length")
    marks = [number(k * step, step) for k in (1, 2, 3)]
    labels = (
        f"over {marks[2]} {unit}", f"{marks[1]} to {marks[2]} {unit}", f"{marks[0]} to {marks[1]} {unit}",
        f"under {marks[0]} {unit}", "no fill",
    )  # fmt: skip
    bounds = (0.005 / factor, step, 2 * step, 3 * step)
    return Scale(tuple(b * factor for b in bounds), (colors.NO_CHANGE, *colors.FILL), labels)


def _material_scale(materials: tuple[str, ...]) -> Scale:
    chosen = tuple(_GROUND[i % len(_GROUND)] for i in range(len(materials)))
    return Scale((), chosen, materials)


def _extra(parts: Parts, scales: Mapping[str, Scale]) -> dict[str, Any]:
    units = parts.site.units
    finished = parts.surfaces.finished
    known = finished[np.isfinite(finished)]
    return {
        "length": {"unit": units.label("length"), "si": units.factor("length")},
        "least": NO_CHANGE_M,
        "relief": float(np.ptp(known)) or 1.0,
        "scales": {name: scale.to_dict() for name, scale in scales.items()},
        "arrow_colors": _MOVES,
    }


# --- over the surfaces ----------------------------------------------------------------------------------------------


def outlines_of(parts: Parts) -> list[Outline]:
    """Limits, zones, pads, buildings and barriers of a site."""
    ground, model = parts.ground, parts.site.model
    found = []
    limits = limits_shape(ground)
    if limits is not None:
        found.append(Outline("limits", "", limits))
    units = parts.site.units
    zones = {zone.zone: zone for zone in parts.volumes.zones}
    for name, shape in zip(ground.zone_names, ground.zone_shapes, strict=True):
        if shape.is_empty:  # no ground of the site lies in it
            continue
        volumes = zones[name]
        note = f"cut {show(volumes.cut_m3, 'soil_volume', units)}, fill {show(volumes.fill_m3, 'soil_volume', units)}"
        found.append(Outline("zones", name, shape, note))
    if model.pads is not None:
        found += _layer(parts, "pads", model.pads.area, model.pads.name, _pad_notes(parts))
        if model.pads.building is not None:
            found += _layer(parts, "buildings", model.pads.building, None, {})
    elif ground.design is not None:
        found += [Outline("pads", pad.name, shapely.force_2d(pad.polygon)) for pad in ground.design.pads]
    if model.haul is not None and model.haul.barriers is not None:
        found += _layer(parts, "barriers", model.haul.barriers, None, {})
    return found


def _layer(parts: Parts, layer: str, spec: Any, name: str | None, notes: Mapping[str, str]) -> list[Outline]:
    from earthwork.files.vectors import read_polygons

    read = read_polygons(
        spec, parts.site.directory, crs=parts.ground.stack.grid.crs, name=name, what=layer, warnings=[]
    )
    return [Outline(layer, p.name if name else "", p.geometry, notes.get(p.name, "")) for p in read]


def _pad_notes(parts: Parts) -> dict[str, str]:
    pads = parts.documents.get("pads", {}).get("pads", ())
    return {pad["pad"]: ", ".join(dict.fromkeys([pad["class"], *pad["flags"]])) for pad in pads}


def _arrows(parts: Parts) -> list[Arrow]:
    haul = parts.documents.get("haul")
    if not haul:
        return []
    kinds = {b["block"]: b["kind"] for b in haul["blocks"]}
    arrows = []
    for move, path in zip(haul["moves"], haul_paths(parts), strict=True):
        kind = move_kind(move, kinds)
        mass = show(move["dry_mass_t"], "mass", parts.site.units, si=1000.0)
        label = f"{move['material']}: {move['from']} to {move['to']}, {mass} dry"
        arrows.append(Arrow(path, label, move["dry_mass_t"], kind))
    return arrows


def move_kind(move: Mapping[str, Any], kinds: Mapping[str, str]) -> str:
    """Whether a move comes to the site, leaves it or stays on it: import, export or site."""
    if kinds.get(move["from"]) == "borrow":
        return "import"
    off_site = kinds.get(move["to"]) == "disposal" and move["to"] != ON_SITE_STOCKPILE
    return "export" if off_site else "site"


def haul_paths(parts: Parts) -> list[tuple[tuple[float, float], ...]]:
    """The way of each move as driven, CRS coordinates."""
    result = parts.results["haul"]
    frame = result.areas.frame
    return [tuple((float(e), float(n)) for e, n in frame.map(move.points)) for move in result.moves]


def _lifts(parts: Parts) -> tuple[list[LiftRow], np.ndarray | None]:
    document = parts.documents.get("lifts")
    if not document or not document["lifts"]:
        return [], None
    fills, names = _fill_numbers(parts)
    units = parts.site.units
    counts: dict[str, int] = {}
    for row in document["lifts"]:
        counts[row["fill"]] = counts.get(row["fill"], 0) + 1
    rows = [
        LiftRow(
            fill=names.get(row["fill"], 1),
            label=(
                f"{row['fill']}, lift {row['lift']} of {counts[row['fill']]}: "
                f"{show(row['bottom_m'], 'length', units, unit=False)} to {show(row['top_m'], 'length', units)}, "
                f"{show(row['area_m2'], 'area', units)}, {show(row['compacted_m3'], 'soil_volume', units)} compacted"
            ),
            bottom_m=row["bottom_m"],
            top_m=row["top_m"],
        )
        for row in document["lifts"]
    ]
    return rows, fills


def _fill_numbers(parts: Parts) -> tuple[np.ndarray, dict[str, int]]:
    """Which fill area each cell of the overview lies in, from 1, and their numbers by name."""
    surfaces = parts.surfaces
    areas = getattr(parts.results["lifts"], "areas", ())
    numbers = np.zeros((surfaces.grid.rows, surfaces.grid.columns), dtype=np.int64)
    if not areas:
        numbers[:] = 1
        return numbers, {}
    side = getattr(parts.results["lifts"], "coarse_side", 1)
    rows = (np.arange(surfaces.grid.rows) * surfaces.every + surfaces.every // 2) // side
    columns = (np.arange(surfaces.grid.columns) * surfaces.every + surfaces.every // 2) // side
    names = {}
    for i, area in enumerate(areas, start=1):
        names[area.name] = i
        r, c = np.minimum(rows, area.cells.shape[0] - 1), np.minimum(columns, area.cells.shape[1] - 1)
        numbers[area.cells[np.ix_(r, c)]] = i
    return numbers, names
