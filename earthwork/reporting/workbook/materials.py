"""The sheets of materials and quantities: what an estimator changes, and what a bank volume becomes."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

from earthwork.reporting.report.parts import Parts
from earthwork.reporting.report.quantities import zone_materials
from earthwork.reporting.workbook.book import TONNE, Book, Head, Sheet
from earthwork.soils.card import SoilCard

_HEADS = (
    Head("material", None, 22), Head("use", None, 9), Head("bank dry density", "density"),
    Head("loose dry density", "density"), Head("fill dry density, expected", "density"),
    Head("deep fill factor", "factor"), Head("fill dry density, all depths", "density"),
    Head("water as loaded", "percent"), Head("loss", "percent"), Head("compacted per bank, from densities", "factor"),
    Head("your own compacted per bank", "factor"), Head("compacted per bank, used", "factor"),
    Head("shrink, of bank volume", "percent"), Head("loose per bank", "factor"), Head("swell, of bank volume", "percent"),
    Head("compacted per bank, after loss", "factor"), Head("the same at expected compaction", "factor"),
)  # fmt: skip


@dataclass(frozen=True)
class MaterialCells:
    """Where the figures of a material stand, as addresses for other sheets."""

    bank: str
    loss: str
    water: str
    used: str | None  #: compacted per bank volume at the mean density of all depths
    expected: str | None  #: the same at the expected compaction
    per_bank_loose: str


@dataclass(frozen=True)
class Materials:
    """The sheet of materials: addresses by name, and the factor from volume × density to mass."""

    cells: dict[str, MaterialCells]
    mass_factor: str


def materials_sheet(book: Book, parts: Parts) -> Materials:
    """Write the sheet of materials."""
    sheet = book.sheet("Materials", "Materials", "Yellow cells are yours to change; everything else follows.")
    units = book.units
    factor = units.factor("soil_volume") * units.factor("density") / units.factor("mass")
    sheet.text(2, 0, f"1 {units.label('soil_volume')} of 1 {units.label('density')} weighs, {units.label('mass')}")
    sheet.number(2, 2, factor, "factor")
    sheet.row = 4
    first = sheet.head(_HEADS, freeze=1)
    placed = {a.material: a.placed_density_kg_m3 for a in parts.results["balance"].account.materials}
    cells = {
        card.material: _material_row(sheet, first + i, card, placed.get(card.material))
        for i, card in enumerate(parts.cards.values())
    }
    sheet.text(
        first + len(cells) + 1,
        0,
        "Deep fill factor: mean density over all depths of fill / the density above the deep bands.",
        "note",
    )
    return Materials(cells, sheet.place(2, 2))


def _material_row(sheet: Sheet, row: int, card: SoilCard, placed: float | None) -> MaterialCells:
    fill, bank, loose = card.fill_dry_density_kg_m3, card.bank_dry_density_kg_m3, card.loose_dry_density_kg_m3
    sheet.text(row, 0, card.material)
    sheet.text(row, 1, card.use)
    c = sheet.number(row, 2, bank, "density", style="input")
    d = sheet.number(row, 3, loose, "density", style="input")
    h_value = 100 * (card.loaded_moist_factor - 1)
    sheet.number(row, 7, h_value, "percent", style="input")
    i = sheet.number(row, 8, 100 * card.loss_fraction, "percent", style="input")
    if fill is not None:
        placed = placed or fill
        e = sheet.number(row, 4, fill, "density", style="input")
        f = sheet.number(row, 5, placed / fill, "factor")
        g = sheet.formula(row, 6, f"{e}*{f}", placed, "density")
        j = sheet.formula(row, 9, f"{c}/{g}", bank / placed, "factor")
        k = sheet.number(row, 10, None, "factor", style="input")
        used = sheet.formula(row, 11, f"IF(ISNUMBER({k}),{k},{j})", bank / placed, "factor")
        sheet.formula(row, 12, f"100*(1-{used})", 100 * (1 - bank / placed), "percent")
        sheet.formula(row, 15, f"{used}*(1-{i}/100)", bank / placed * (1 - card.loss_fraction), "factor")
        sheet.formula(row, 16, f"IF(ISNUMBER({k}),{k},{c}/{e})", bank / fill, "factor")
    n = sheet.formula(row, 13, f"{c}/{d}", bank / loose, "factor")
    sheet.formula(row, 14, f"100*({n}-1)", 100 * (bank / loose - 1), "percent")
    return MaterialCells(
        bank=sheet.place(row, 2),
        loss=sheet.place(row, 8),
        water=sheet.place(row, 7),
        used=sheet.place(row, 11) if fill is not None else None,
        expected=sheet.place(row, 16) if fill is not None else None,
        per_bank_loose=sheet.place(row, 13),
    )


_AREAS: tuple[tuple[str, str, str], ...] = (
    ("area_m2", "area", "area"), ("cut_m3", "cut, bank", "soil_volume"), ("fill_m3", "fill, compacted", "soil_volume"),
    ("strip_m3", "stripping", "soil_volume"), ("section_m3", "sections", "soil_volume"),
    ("over_excavation_m3", "over-excavation", "soil_volume"), ("scarify_m3", "scarified", "soil_volume"),
)  # fmt: skip


def quantities_sheet(book: Book, parts: Parts) -> None:
    """Cut, fill and the lines of their own by zone; the total is a sum."""
    sheet = book.sheet(
        "Quantities",
        f"{parts.site.name}: quantities",
        "Stripped ground to subgrade. Cut is bank volume, fill compacted.",
    )
    heads = [Head("zone", None, 34), *(Head(title, kind) for _, title, kind in _AREAS)]
    heads += [Head("cut − fill", "soil_volume"), Head("deepest cut", "length"), Head("highest fill", "length")]
    first = sheet.head(heads, freeze=1)
    volumes = parts.documents["volumes"]
    zones = list(volumes["zones"])
    if volumes["outside_zones"]:
        zones.append({**volumes["outside_zones"], "zone": "outside all zones"})
    zones = zones or [{**volumes["total"], "zone": "whole site"}]
    for row, zone in enumerate(zones, start=first):
        sheet.text(row, 0, zone["zone"])
        for column, (key, _, kind) in enumerate(_AREAS, start=1):
            sheet.number(row, column, zone[key], kind)
        sheet.formula(row, 8, f"C{row + 1}-D{row + 1}", zone["cut_minus_fill_m3"], "soil_volume")
        sheet.number(row, 9, zone["max_cut_m"], "length")
        sheet.number(row, 10, zone["max_fill_m"], "length")
    last = first + len(zones) - 1
    total = volumes["total"]
    sheet.text(last + 1, 0, "whole site", "key")
    for column, (key, _, kind) in enumerate(_AREAS, start=1):
        sheet.sum_of(last + 1, column, first, last, total[key], kind)
    sheet.sum_of(last + 1, 8, first, last, total["cut_minus_fill_m3"], "soil_volume")
    for column, key in ((9, "max_cut_m"), (10, "max_fill_m")):
        cells = f"{'JK'[column - 9]}{first + 1}:{'JK'[column - 9]}{last + 1}"
        sheet.formula(last + 1, column, f"MAX({cells})", total[key], "length", style="total")


def by_material_sheet(book: Book, parts: Parts, materials: Materials) -> None:
    """What is dug by zone and material, in every state, before loss."""
    sheet = book.sheet("By material", "Dug by zone and material", "Before loss. The states follow the sheet Materials.")
    heads = [
        Head("zone", None, 34), Head("material", None, 18), Head("work", None, 16), Head("bank", "soil_volume"),
        Head("loose", "soil_volume"), Head("compacted", "soil_volume"), Head("dry mass", "mass"),
    ]  # fmt: skip
    first = sheet.head(heads, freeze=3)
    rows = [r for r in zone_materials(parts) if r["material"] in materials.cells]
    for row, entry in enumerate(rows, start=first):
        _dug_row(sheet, row, entry, materials)
    last = first + len(rows) - 1
    sheet.text(last + 1, 0, "all", "key")
    sums: dict[int, tuple[str, str, float]] = {
        3: ("bank_m3", "soil_volume", 1.0), 4: ("loose_m3", "soil_volume", 1.0), 6: ("dry_mass_t", "mass", TONNE),
    }  # fmt: skip
    for column, (key, kind, si) in sums.items():
        sheet.sum_of(last + 1, column, first, last, sum(r[key] or 0.0 for r in rows), kind, si=si)


def _dug_row(sheet: Sheet, row: int, entry: dict[str, Any], materials: Materials) -> None:
    cells = materials.cells[entry["material"]]
    for column, key in enumerate(("zone", "material", "work")):
        sheet.text(row, column, entry[key])
    bank = sheet.number(row, 3, entry["bank_m3"], "soil_volume")
    sheet.formula(row, 4, f"{bank}*{cells.per_bank_loose}", entry["loose_m3"], "soil_volume")
    if cells.expected is not None:
        sheet.formula(row, 5, f"{bank}*{cells.expected}", entry["compacted_m3"], "soil_volume")
    sheet.formula(row, 6, f"{bank}*{cells.bank}*{materials.mass_factor}", entry["dry_mass_t"], "mass", si=TONNE)
