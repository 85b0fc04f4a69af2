"""What ``soil`` shows: a card of each material, side by side."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

from earthwork.reporting.page import Block, Notes, Page, Table, column_texts, unit_label
from earthwork.reporting.soil_blocks import draw_cards, soil_blocks
from earthwork.results import Result
from earthwork.site import Site

if TYPE_CHECKING:
    from earthwork.files.output import OutputFolder

#: (key, label) in the order of a laboratory card; None starts a new part.
_ROWS: tuple[tuple[str, str] | None, ...] = (
    ("use", "use"),
    ("bank_dry_density_kg_m3", "dry density, bank"),
    ("loose_dry_density_kg_m3", "dry density, loose"),
    ("fill_dry_density_kg_m3", "dry density, fill as it will be"),
    ("max_dry_density_kg_m3", "maximum dry density"),
    ("min_dry_density_kg_m3", "minimum dry density"),
    ("optimum_water_content_percent", "optimum water content"),
    None,
    ("relative_compaction_percent", "compaction required"),
    ("expected_compaction_percent", "compaction expected"),
    ("target_water_content_percent", "water content to place at"),
    ("bank_water_content_percent", "water content arriving"),
    ("zero_air_voids_water_content_percent", "water content, no air left"),
    ("fill_saturation_percent", "saturation of the fill"),
    ("bank_void_ratio", "void ratio, bank"),
    ("fill_void_ratio", "void ratio, fill"),
    ("specific_gravity", "specific gravity of the grains"),
    ("bank_percent_of_maximum", "bank, of the maximum"),
    ("fill_relative_density_percent", "relative density, fill"),
    ("bank_relative_density_percent", "relative density, bank"),
    ("lee_singh_relative_density_percent", "relative density, Lee and Singh"),
    None,
    ("shrinkage_factor", "compacted per bank volume"),
    ("shrinkage_factor_sd", "± standard deviation"),
    ("effective_factor", "the same, after loss"),
    ("shrink_percent_of_bank", "shrink, of bank volume"),
    ("shrink_percent_of_fill", "shrink, of fill volume"),
    ("swell_percent", "swell, of bank volume"),
    ("load_factor", "load factor, loose / bank"),
    ("bank_m3_per_compacted_m3_per_point", "bank per fill volume, for a point more"),
)


def page(site: Site, result: Result) -> Page:
    """The page of a **soil** result."""
    materials = result.to_dict()["materials"]
    blocks: list[Block] = []
    for i in range(0, len(materials), 5):
        blocks.append(_cards(materials[i : i + 5], site))
    compacted = [m for m in materials if m["expected_compaction_percent"] is not None]
    bands = [(m["material"], band) for m in compacted for band in m["bands"]]
    if bands:
        blocks.append(_bands(bands, site))
    notes = tuple(
        f"{m['material']}: not from tests or the site file: {', '.join(m['assumed'])}"
        for m in materials
        if m["assumed"]
    )
    if notes:
        blocks.append(Notes(heading="Assumed", lines=notes))
    blocks += soil_blocks(materials, site)
    return Page(title=f"{site.name}: soil cards", blocks=tuple(blocks))


def draw(site: Site, result: Any, folder: OutputFolder, tallies: Sequence[Any]) -> None:
    """Write the compaction charts."""
    draw_cards(site, result, folder)


def _cards(materials: Sequence[dict[str, Any]], site: Site) -> Table:
    rows: list[tuple[str, ...]] = []
    for row in _ROWS:
        if row is None:
            rows.append(("",) * (len(materials) + 2))
            continue
        key, label = row
        values = [m.get(key) for m in materials]
        if any(v is not None for v in values):
            rows.append((label, unit_label(key, site.units), *column_texts(key, values, site.units)))
    return Table(columns=("", "", *(m["material"] for m in materials)), rows=tuple(rows), text_columns=2)


def _bands(bands: Sequence[tuple[str, dict[str, Any]]], site: Site) -> Table:
    keys = (
        "relative_compaction_percent",
        "expected_compaction_percent",
        "fill_dry_density_kg_m3",
        "shrinkage_factor",
    )
    labels = ("required", "expected", "fill dry density", "compacted per bank")
    depths = column_texts("below_m", [b.get("below_m") for _, b in bands], site.units)
    texts = [column_texts(key, [b[key] for _, b in bands], site.units) for key in keys]
    columns = [f"below\n{unit_label('below_m', site.units)}"]
    columns += [f"{label}\n{unit_label(key, site.units)}".rstrip() for key, label in zip(keys, labels, strict=True)]
    rows = zip([name for name, _ in bands], depths, *texts, strict=True)
    return Table(columns=("material", *columns), rows=tuple(rows), heading="Deep fill")
