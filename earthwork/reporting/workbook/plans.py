"""The sheets of haul, lifts, water and pads: the plan's figures, and what follows from them by formula."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Any

from earthwork.reporting.report.map_content import move_kind
from earthwork.reporting.report.parts import Parts
from earthwork.reporting.workbook.book import TONNE, Book, Head, Sheet, at
from earthwork.reporting.workbook.materials import Materials

Row = dict[str, Any]
#: Makes a formula of a row from the letters of its columns and its number: ``{a}{n}*2`` with keys as names.
Formula = Callable[[Callable[[str], str], Row], str | None]


@dataclass(frozen=True)
class Column:
    """A column of a plan: the key in the rows, and how it is worked out where it is a formula."""

    key: str
    head: Head
    si: float = 1.0
    formula: Formula | None = None
    value: Callable[[Row], float | None] | None = None  #: of a formula without a key in the rows
    total: bool = False


def plan_sheet(sheet: Sheet, rows: Sequence[Row], columns: Sequence[Column], *, freeze: int = 1) -> int:
    """Write rows under heads, with totals; the row of the totals."""
    first = sheet.head([c.head for c in columns], freeze=freeze)
    letters = {c.key: i for i, c in enumerate(columns)}

    def in_row(row: int) -> Callable[[str], str]:
        return lambda key: at(row, letters[key])

    for row, entry in enumerate(rows, start=first):
        for i, column in enumerate(columns):
            _cell(sheet, row, i, column, entry, in_row(row))
    last = first + len(rows) - 1
    sheet.text(last + 1, 0, "all", "key")
    for i, column in enumerate(columns):
        if column.total and column.head.kind:
            value = sum(_value(column, entry) or 0.0 for entry in rows)
            sheet.sum_of(last + 1, i, first, last, value, column.head.kind, si=column.si)
    sheet.row = last + 3
    return last + 1


def _value(column: Column, entry: Row) -> float | None:
    value = column.value(entry) if column.value else entry.get(column.key)
    return value


def _cell(sheet: Sheet, row: int, i: int, column: Column, entry: Row, cell: Callable[[str], str]) -> None:
    value, kind = _value(column, entry), column.head.kind
    if kind is None:
        text = ", ".join(map(str, value)) if isinstance(value, list) else "" if value is None else str(value)
        sheet.text(row, i, text)
        return
    formula = column.formula(cell, entry) if column.formula else None
    if formula is None:
        sheet.number(row, i, value, kind, si=column.si)
    else:
        sheet.formula(row, i, formula, value, kind, si=column.si)


# --- haul -----------------------------------------------------------------------------------------------------------


class HaulSheet:
    """Moves with loads, work and cost: they follow the truck, the rate and the materials."""

    def __init__(self, book: Book, parts: Parts, materials: Materials) -> None:
        haul = parts.site.model.haul
        assert haul is not None
        self.book, self.parts, self.materials, self.haul = book, parts, materials, haul
        self.kinds = {b["block"]: b["kind"] for b in parts.documents["haul"]["blocks"]}
        note = "Delivered, after loss. Loads are decimal per move; a move over the gate keeps to the road payload."
        self.sheet = book.sheet("Haul", f"{parts.site.name}: haul", note)

    def write(self) -> None:
        """Write all of the sheet."""
        sheet, truck = self.sheet, self.haul.truck
        sheet.text(2, 0, f"money per {self.book.unit('mass')}·{self.book.unit('road')} of dry mass")
        sheet.number(2, 2, self.haul.cost, "price", style="input")
        if truck is not None:
            road = truck.payload if truck.road_payload is None else truck.road_payload
            for column, label, value, kind in (
                (3, "heaped volume", truck.heaped_volume, "soil_volume"), (5, "payload, moist", truck.payload, "mass"),
                (7, "payload on roads", road, "mass"),
            ):  # fmt: skip
                sheet.text(2, column, label)
                sheet.number(2, column + 1, value, kind, style="input")
        sheet.row = 4
        plan_sheet(sheet, self.parts.documents["haul"]["moves"], self._columns(), freeze=3)

    def _columns(self) -> list[Column]:
        by_distance = self.haul.cost_by == "distance"
        return [
            Column("from", Head("from", None, 26)), Column("to", Head("to", None, 26)),
            Column("material", Head("material", None, 16)),
            Column("dry_mass_t", Head("dry mass", "mass"), TONNE, total=True),
            Column("bank_m3", Head("bank", "soil_volume"), formula=self._bank, total=True),
            Column("loose_m3", Head("loose", "soil_volume"), formula=self._loose, total=True),
            Column("compacted_m3", Head("compacted", "soil_volume"), total=True),
            Column("distance_m", Head("distance", "road")),
            Column("loads", Head("loads", "decimal"), formula=self._loads, total=self.haul.truck is not None),
            Column("work", Head("dry mass × distance", "decimal", unit=f"{self.book.unit('mass')}·{self.book.unit('road')}"),
                   formula=lambda cell, move: f"{cell('dry_mass_t')}*{cell('distance_m')}", value=self._work, total=True),
            Column("hauling", Head("cost of hauling", "money"), value=self._hauling, total=True,
                   formula=(lambda cell, move: f"{cell('work')}*$C$3") if by_distance else None),
            Column("other", Head("prices and rehandling", "money"), total=True,
                   value=lambda move: move["cost"] - self._hauling(move)),
            Column("cost", Head("cost", "money"), total=True,
                   formula=lambda cell, move: f"{cell('hauling')}+{cell('other')}"),
        ]  # fmt: skip

    def _bank(self, cell: Callable[[str], str], move: Row) -> str:
        return f"{cell('dry_mass_t')}/({self.materials.cells[move['material']].bank}*{self.materials.mass_factor})"

    def _loose(self, cell: Callable[[str], str], move: Row) -> str:
        return f"{cell('bank_m3')}*{self.materials.cells[move['material']].per_bank_loose}"

    def _loads(self, cell: Callable[[str], str], move: Row) -> str | None:
        if self.haul.truck is None:
            return None
        payload = "$G$3" if move_kind(move, self.kinds) == "site" else "$I$3"
        moist = f"{cell('dry_mass_t')}*(1+{self.materials.cells[move['material']].water}/100)"
        return f"MAX({cell('loose_m3')}/$E$3,{moist}/{payload})"

    def _work(self, move: Row) -> float:
        mass = self.book.shown(move["dry_mass_t"], "mass", TONNE)
        return mass * self.book.shown(move["distance_m"], "road")

    def _hauling(self, move: Row) -> float:
        """Money for the way alone; by truck hours all of the cost is in it."""
        return float(move["cost"] if self.haul.cost_by == "time" else self._work(move) * self.haul.cost)


# --- lifts ----------------------------------------------------------------------------------------------------------


def lifts_sheet(book: Book, parts: Parts) -> None:
    """Lifts in placing order with what is placed so far."""
    sheet = book.sheet("Lifts", f"{parts.site.name}: lifts", "In placing order.")
    rows, so_far = [], 0.0
    for entry in parts.documents["lifts"]["lifts"]:
        so_far += entry["compacted_m3"]
        rows.append({**entry, "so_far_m3": so_far})

    def running(cell: Callable[[str], str], entry: Row) -> str:
        here = cell("compacted_m3")
        letter = here.rstrip("0123456789")
        return f"SUM({letter}${first + 1}:{here})"

    first = sheet.row + 2
    columns = [
        Column("fill", Head("fill", None, 22)), Column("lift", Head("lift", "count", 7)),
        Column("bottom_m", Head("bottom", "length")), Column("top_m", Head("top", "length")),
        Column("thickness", Head("thickness", "length"), formula=lambda c, e: f"{c('top_m')}-{c('bottom_m')}",
               value=lambda e: e["top_m"] - e["bottom_m"]),
        Column("area_m2", Head("area", "area")),
        Column("compacted_m3", Head("compacted", "soil_volume"), total=True),
        Column("so_far_m3", Head("placed so far", "soil_volume"), formula=running),
        Column("dry_mass_t", Head("dry mass", "mass"), TONNE, total=True),
        Column("bank_m3", Head("bank", "soil_volume"), total=True),
        Column("loose_m3", Head("loose", "soil_volume"), total=True),
        Column("loads", Head("loads", "decimal"), total=True),
        Column("water_to_add_l", Head("water to add", "water_volume"), total=True),
        Column("water_to_dry_l", Head("water to dry off", "water_volume"), total=True),
    ]  # fmt: skip
    plan_sheet(sheet, rows, columns, freeze=2)


# --- water ----------------------------------------------------------------------------------------------------------


def water_sheet(book: Book, parts: Parts) -> None:
    """Water by day: waste and totals follow the parts."""
    model = parts.site.model.water
    assert model is not None
    sheet = book.sheet("Water", f"{parts.site.name}: water by day", "Total = compaction, evaporation, dust and waste.")
    sheet.text(2, 0, "waste, % of the three")
    sheet.number(2, 3, model.waste_percent, "percent", style="input")
    sheet.row = 4

    def waste(cell: Callable[[str], str], day: Row) -> str:
        return f"({cell('compaction_l')}+{cell('evaporation_l')}+{cell('dust_l')})*$D$3/100"

    def total(cell: Callable[[str], str], day: Row) -> str:
        return f"SUM({cell('compaction_l')}:{cell('waste_l')})"

    columns = [
        Column("day", Head("day", "count", 7)), Column("compacted_m3", Head("compacted", "soil_volume"), total=True),
        Column("compaction_l", Head("compaction", "water_volume"), total=True),
        Column("evaporation_l", Head("evaporation", "water_volume"), total=True),
        Column("dust_l", Head("dust", "water_volume"), total=True),
        Column("waste_l", Head("waste", "water_volume"), formula=waste, total=True),
        Column("total_l", Head("total", "water_volume"), formula=total, total=True),
        Column("supply_l", Head("supply", "water_volume"), total=True),
        Column("tank_end_l", Head("tank at the end", "water_volume")),
        Column("shortfall_l", Head("short by", "water_volume"), total=True),
        Column("achievable_m3", Head("volume that the water allows", "soil_volume")),
        Column("truck_loads", Head("water truck loads", "count"), total=True),
        Column("limited_by", Head("held back by", None, 14)),
    ]  # fmt: skip
    plan_sheet(sheet, parts.documents["water"]["days"], columns, freeze=1)


# --- pads -----------------------------------------------------------------------------------------------------------


def pads_sheet(book: Book, parts: Parts) -> None:
    """What each pad stands on."""
    sheet = book.sheet("Pads", f"{parts.site.name}: pads", "A screen; the geotechnical engineer of record governs.")
    rows = parts.documents["pads"]["pads"]
    columns = [
        Column("pad", Head("pad", None, 30)), Column("class", Head("class", None, 14)),
        Column("class_before_undercut", Head("class before undercut", None, 14)),
        Column("area_m2", Head("area", "area"), total=True), Column("footprint_m2", Head("footprint", "area"), total=True),
        Column("min_fill_m", Head("least fill", "length")), Column("max_fill_m", Head("greatest fill", "length")),
        Column("mean_fill_m", Head("mean fill", "length")), Column("p95_fill_m", Head("95th percentile", "length")),
        Column("differential_fill_m", Head("differential fill", "length"),
               formula=lambda c, e: f"{c('max_fill_m')}-{c('min_fill_m')}" if _is_range(e) else None),
        Column("max_cut_m", Head("deepest cut", "length")),
        Column("cut_share_percent", Head("cut share", "percent")), Column("fill_share_percent", Head("fill share", "percent")),
        Column("settlement_low_m", Head("settlement, low", "length")),
        Column("settlement_high_m", Head("settlement, high", "length")),
        Column("max_distortion", Head("distortion, 1 in", "count")), Column("flags", Head("flags", None, 50)),
    ]  # fmt: skip
    plan_sheet(sheet, rows, columns, freeze=1)


def _is_range(pad: Row) -> bool:
    """Whether the differential is the greatest less the least thickness, as it is over the whole footprint."""
    if pad.get("differential_fill_m") is None or pad.get("min_fill_m") is None:
        return False
    return bool(abs(pad["max_fill_m"] - pad["min_fill_m"] - pad["differential_fill_m"]) < 1e-9)
