"""report.html: one file with everything in it, made from the results and a template that escapes every name."""

from __future__ import annotations

import json
from collections.abc import Sequence
from dataclasses import dataclass
from importlib.resources import files
from pathlib import Path
from typing import Any

import earthwork
from earthwork.reporting.basis import not_counted
from earthwork.reporting.display import display_key, plain
from earthwork.reporting.page import LONGEST_TABLE, Block, Column, Notes, Table, table_of, unit_label
from earthwork.reporting.report import provenance
from earthwork.reporting.report.answers import answers, verdict
from earthwork.reporting.report.hand_check import HandCheck
from earthwork.reporting.report.map_content import map_view
from earthwork.reporting.report.map_data import map_document
from earthwork.reporting.report.parts import Parts
from earthwork.reporting.report.pictures import Picture, pictures_of
from earthwork.reporting.report.quantities import zone_materials
from earthwork.reporting.runner import module_of
from earthwork.reporting.volumes_page import AREA_COLUMNS

#: The page may take this many bytes, map and pictures included; and the map at least and at most this many of them.
PAGE_BYTES = 8_000_000
_MAP_LEAST, _MAP_MOST = 1_000_000, 4_500_000

_TITLES = {
    "soil": "Soil", "balance": "Balance", "haul": "Haul", "lifts": "Lifts", "water": "Water by day", "pads": "Pads",
}  # fmt: skip
_ORDER = ("soil", "balance", "haul", "lifts", "water", "pads")
_MARKS = {"good": "✓ in order", "look": "! look at this"}
_BY_MATERIAL = (
    Column("zone", "zone"), Column("material", "material"), Column("work", "work"), Column("bank_m3", "bank"),
    Column("loose_m3", "loose"), Column("compacted_m3", "compacted"), Column("dry_mass_t", "dry mass"),
)  # fmt: skip
_SIGNATURE = ("Prepared by", "Checked by", "Engineer of record, licence no.", "Date")
_CAUTIONS = (
    "Earth moving can kill. Before any digging: call for the location of buried services, shore or slope every trench "
    "as the code asks, keep people out of the swing and the travel of machines, and keep stockpiles and traffic back "
    "from edges.",
    "These are quantities and plans for estimating and scheduling, from the files and figures named here. They say "
    "nothing about the stability of a slope, a pad or a fill. Local codes and licensed engineers and surveyors govern; "
    "field tests decide what is accepted.",
)


@dataclass(frozen=True)
class Part:
    """A section of the page that shows one command."""

    id: str
    title: str
    blocks: tuple[Block, ...]
    pictures: tuple[Picture, ...] = ()
    matrix: Table | None = None


def page_text(parts: Parts, *, inputs: Sequence[dict[str, Any]], checks: Sequence[HandCheck], pictures: Path) -> str:
    """The text of report.html.

    Args:
        parts: the results.
        inputs: path, bytes and digest of every input.
        checks: the hand check.
        pictures: folder where the pictures of the parts lie.
    """
    import jinja2
    from markupsafe import Markup

    assets = files("earthwork.reporting.report") / "assets"
    loader = jinja2.PackageLoader("earthwork.reporting.report")
    environment = jinja2.Environment(
        loader=loader, autoescape=True, undefined=jinja2.StrictUndefined, trim_blocks=True, lstrip_blocks=True
    )
    context = _context(parts, inputs, checks, pictures)
    context["css"] = Markup((assets / "report.css").read_text("utf-8"))
    context["js"] = Markup((assets / "map.js").read_text("utf-8"))
    template = environment.get_template("report.html.j2")
    bare = len(template.render({**context, "map": None}).encode())
    room = min(max(PAGE_BYTES - bare - 200_000, _MAP_LEAST), _MAP_MOST)
    view = map_view(parts)
    document = map_document(parts.surfaces, view.content, most_characters=room)
    return template.render({**context, "map": {**view.__dict__, "data": Markup(_script_json(document))}})


def _script_json(document: dict[str, Any]) -> str:
    """JSON that can stand in a script element whatever the names in it."""
    text = json.dumps(document, ensure_ascii=False, separators=(",", ":"), allow_nan=False)
    return text.replace("&", "\\u0026").replace("<", "\\u003c").replace(">", "\\u003e")


def _context(
    parts: Parts, inputs: Sequence[dict[str, Any]], checks: Sequence[HandCheck], pictures: Path
) -> dict[str, Any]:
    site = parts.site
    sections = [_part(name, parts, pictures) for name in _ORDER if name in parts.results]
    contents = [("map-part", "Map"), ("quantities", "Quantities")]
    contents += [(part.id, part.title) for part in sections]
    contents += [("check", "Hand check"), ("basis", "Assumptions and inputs"), ("care", "Care")]
    return {
        "site": site.name,
        "verdict": verdict(parts),
        "answers": answers(parts),
        "marks": _MARKS,
        "basis": provenance.basis_rows(parts),
        "contents": contents,
        "warnings": parts.warnings,
        "map_pictures": pictures_of("volumes", pictures),
        "parts": {"volumes": _part("volumes", parts, pictures)},
        "all_zones": _all_zones(parts),
        "by_material": _by_material(parts),
        "sections": sections,
        "checks": checks,
        "assumed": provenance.assumptions(parts),
        "not_counted": not_counted(site),
        "left_out": [(name, why) for name, why in parts.left_out.items()],
        "method": provenance.method_notes(parts),
        "inputs": inputs,
        "cautions": _CAUTIONS,
        "signature": _SIGNATURE,
        "version": earthwork.__version__,
        "units_name": "US customary" if site.units.name == "us" else "metric",
    }


def _part(name: str, parts: Parts, pictures: Path) -> Part:
    """The blocks of a command's own page; what its volumes are is told once, under the quantities."""
    from earthwork.reporting.plain_page import page as plain_page

    module, result = module_of(name), parts.results[name]
    made = module.page(parts.site, result) if hasattr(module, "page") else plain_page(name, parts.site, result)
    blocks = made.blocks
    if name != "volumes":
        blocks = tuple(b for b in blocks if not (isinstance(b, Notes) and b.heading == "What these volumes are"))
    matrix = _matrix(parts) if name == "haul" else None
    return Part(name, _TITLES.get(name, name), blocks, tuple(pictures_of(name, pictures)), matrix)


def _all_zones(parts: Parts) -> Table | None:
    """Every zone, where there are more than the table of quantities shows."""
    zones = parts.documents["volumes"]["zones"]
    if len(zones) <= LONGEST_TABLE:
        return None
    heading = f"All {len(zones)} zones, in the order of their file"
    return table_of(zones, AREA_COLUMNS, parts.site.units, heading=heading, longest=len(zones))


def _by_material(parts: Parts) -> Table:
    rows = zone_materials(parts)
    heading = "Dug by zone and material, in every state"
    return table_of(rows, _BY_MATERIAL, parts.site.units, heading=heading, text_columns=3, longest=len(rows))


#: Places on a side of the haul matrix at most; the table of moves has them all.
_LARGEST_MATRIX = 14


def _matrix(parts: Parts) -> Table | None:
    """Dry mass from where to where, for the places that move most."""
    moves = parts.documents["haul"]["moves"]
    sources, sinks = _largest(moves, "from"), _largest(moves, "to")
    if not moves:
        return None
    key, site = "dry_mass_t", parts.site
    mass = {(s, t): 0.0 for s in sources for t in sinks}
    for move in moves:
        if (move["from"], move["to"]) in mass:
            mass[move["from"], move["to"]] += move[key]
    factor, unit = display_key(key, site.units)[1], unit_label(key, site.units)
    rows = [(s, *(plain(mass[s, t] * factor, 0) if mass[s, t] else "·" for t in sinks)) for s in sources]
    left = len({m["from"] for m in moves}) - len(sources)
    heading = f"Haul matrix: dry mass, {unit}, from (rows) to (columns)" + (
        ", the places that move most" if left or len({m["to"] for m in moves}) > len(sinks) else ""
    )
    return Table(columns=("from", *sinks), rows=tuple(rows), heading=heading)


def _largest(moves: Sequence[dict[str, Any]], end: str) -> list[str]:
    total: dict[str, float] = {}
    for move in moves:
        total[move[end]] = total.get(move[end], 0.0) + move["dry_mass_t"]
    kept = set(sorted(total, key=lambda name: -total[name])[:_LARGEST_MATRIX])
    return [name for name in total if name in kept]
