"""What ``volumes`` shows: what the volumes are, then cut and fill by zone and by material."""

from __future__ import annotations

from typing import Any

from earthwork.files.output import OutputFolder
from earthwork.reporting.basis import basis
from earthwork.reporting.display import show
from earthwork.reporting.page import Block, Column, Facts, Page, table_of
from earthwork.results import Result
from earthwork.site import Site
from earthwork.units import UNITS

AREA_COLUMNS = (
    Column("zone", "zone"),
    Column("area_m2", "area"),
    Column("cut_m3", "cut,\nbank"),
    Column("fill_m3", "fill,\ncompacted"),
    Column("cut_minus_fill_m3", "cut −\nfill", sign=True),
    Column("max_cut_m", "deepest\ncut"),
    Column("max_fill_m", "highest\nfill"),
    Column("missing_area_m2", "no data"),
)
_MATERIAL_COLUMNS = (
    Column("material", "material"),
    Column("cut_m3", "cut"),
    Column("strip_m3", "stripping"),
    Column("over_excavation_m3", "over-excavation"),
)


def page(site: Site, result: Result) -> Page:
    """The page of a **volumes** result."""
    volumes = result.to_dict()
    blocks: list[Block] = [basis(site, volumes), _areas(site, volumes)]
    if len(volumes["materials"]) > 1 or site.model.stratum:
        blocks.append(table_of(volumes["materials"], _MATERIAL_COLUMNS, site.units, heading="By material, bank volume"))
    lines = other_lines(site, volumes)
    if lines:
        blocks.append(Facts(heading="Lines of their own, in neither cut nor fill", rows=lines))
    return Page(title=f"{site.name}: cut and fill", blocks=tuple(blocks))


def _areas(site: Site, volumes: dict[str, Any]) -> Block:
    missing = any(area["missing_area_m2"] for area in (volumes["total"], *volumes["zones"]))
    columns = [c for c in AREA_COLUMNS if c.key != "missing_area_m2" or missing]
    zones = sorted(volumes["zones"], key=lambda z: -(z["cut_m3"] + z["fill_m3"]))
    zones = zones if len(zones) > 24 else volumes["zones"]
    totals = []
    outside = volumes["outside_zones"]
    if outside is not None and (outside["area_m2"] or outside["missing_area_m2"]):
        totals.append({**volumes["outside_zones"], "zone": "outside all zones"})
    totals.append({**volumes["total"], "zone": "whole site"})
    heading = "Cut and fill" + (", the largest zones first" if len(zones) > 24 else "")
    return table_of(zones, columns, site.units, heading=heading, totals=totals)


def other_lines(site: Site, volumes: dict[str, Any]) -> tuple[tuple[str, str, str], ...]:
    """The volumes that are never folded into cut or fill, as far as the site has them."""
    units, model = site.units, site.model
    rows = []
    if model.strip:
        names = ", ".join(dict.fromkeys(s.material for s in model.strip))
        rows.append(("stripping", show(volumes["strip_m3"], "soil_volume", units), f"bank, of {names}"))
    if model.section:
        rows.append(("sections", show(volumes["section_m3"], "soil_volume", units), "laid on the subgrade"))
    if model.over_excavation:
        note = "dug (bank) and refilled (compacted)"
        rows.append(("over-excavation", show(volumes["over_excavation_m3"], "soil_volume", units), note))
    if model.scarify:
        rows.append(("scarifying", show(volumes["scarify_m3"], "soil_volume", units), "recompacted in place"))
    area = show(volumes["disturbed_area_m2"], "area", units)
    rows.append(("disturbed area", area, _acreage(volumes["disturbed_area_m2"], site)))
    return tuple(rows)


def _acreage(area_m2: float, site: Site) -> str:
    """A large area as people say it; nothing for a small one."""
    unit, name = ("ha", "ha") if site.units.name == "metric" else ("acre", "acres")
    area = area_m2 / UNITS["area"][unit]
    return f"{area:,.2f} {name}" if area >= 0.1 else ""


def tallies(site: Site, folder: OutputFolder) -> tuple[Any, ...]:
    """What gathers the maps while the ground is walked."""
    from earthwork.reporting.maps import map_tallies

    return map_tallies(site, folder, "volumes")


def draw(site: Site, result: Any, folder: OutputFolder, gathered: Any) -> None:
    """Write the maps of a **volumes** result."""
    from earthwork.reporting.maps import write_maps

    write_maps(site, result, folder, "volumes", gathered)
