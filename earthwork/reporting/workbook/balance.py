"""The balance as a sheet: at hand, needed, over the gate in loads and money; all of it follows the yellow cells."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

from earthwork.plan.account import unlayered_material
from earthwork.plan.movements import import_material
from earthwork.reporting.report.parts import Parts
from earthwork.reporting.workbook.book import TONNE, Book, Head, Sheet, at
from earthwork.reporting.workbook.materials import MaterialCells, Materials

_DUG = ("cut_bank_m3", "strip_bank_m3", "over_excavation_bank_m3", "allowance_bank_m3")
_HEADS = (
    Head("material", None, 30), Head("use", None, 12), Head("cut", "soil_volume"), Head("stripping", "soil_volume"),
    Head("over-excavation", "soil_volume"), Head("allowances", "soil_volume"), Head("bank, all", "soil_volume"),
    Head("dry mass", "mass"), Head("lost", "mass"), Head("compacted", "soil_volume"), Head("loose", "soil_volume"),
)  # fmt: skip
_GATE = (
    Head("material"), Head("way"), Head("reason"), Head("dry mass", "mass"), Head("bank", "soil_volume"),
    Head("loose", "soil_volume"), Head("compacted", "soil_volume"), Head("truck loads", "count"), Head("price", "price"),
    Head("price is per"), Head("cost", "money"),
)  # fmt: skip


@dataclass(frozen=True)
class Trucks:
    """Where the hauling truck's figures stand; None without a truck."""

    heaped: str
    payload: str


class BalanceSheet:
    """Writes the balance. Rows of the material table are kept by name, for the rows that follow from them."""

    def __init__(self, book: Book, parts: Parts, materials: Materials) -> None:
        self.parts = parts
        self.materials = materials
        self.model = parts.site.model
        self.result = parts.results["balance"]
        self.content: dict[str, Any] = parts.documents["balance"]
        note = "Available after shrink and loss against required; negative is a shortage."
        self.sheet: Sheet = book.sheet("Balance", f"{parts.site.name}: balance", note)
        self.rows: dict[str, int] = {}
        self.values: dict[str, str] = {}  #: addresses of available, required, surplus and the like
        self.trucks: Trucks | None = None

    def write(self) -> None:
        """Write all of the sheet."""
        self._materials()
        self._account()
        self._truck()
        self._gate()

    # --- at hand ----------------------------------------------------------------------------------------------------

    def _materials(self) -> None:
        sheet = self.sheet
        first = sheet.head(_HEADS, freeze=1)
        for row, entry in enumerate(self.content["materials"], start=first):
            self.rows[entry["material"]] = row
            self._material(row, entry)
        last = first + len(self.rows) - 1
        sheet.text(last + 1, 0, "all", "key")
        for column, key in ((6, None), (7, "dry_mass_t"), (8, "lost_t"), (10, "loose_m3")):
            rows = self.content["materials"]
            value = sum(sum(r[k] for k in _DUG) if key is None else r[key] for r in rows)
            kind, si = ("mass", TONNE) if key and key.endswith("_t") else ("soil_volume", 1.0)
            sheet.sum_of(last + 1, column, first, last, value, kind, si=si)
        sheet.row = last + 3

    def _material(self, row: int, entry: dict[str, Any]) -> None:
        sheet, cells = self.sheet, self.materials.cells[entry["material"]]
        sheet.text(row, 0, entry["material"])
        sheet.text(row, 1, entry["use"])
        for column, key in enumerate(_DUG, start=2):
            sheet.number(row, column, entry[key], "soil_volume")
        bank = sum(entry[key] for key in _DUG)
        g = sheet.formula(row, 6, f"SUM({at(row, 2)}:{at(row, 5)})", bank, "soil_volume")
        h = sheet.formula(
            row, 7, f"{g}*{cells.bank}*{self.materials.mass_factor}", entry["dry_mass_t"], "mass", si=TONNE
        )
        sheet.formula(row, 8, f"{h}*{cells.loss}/100", entry["lost_t"], "mass", si=TONNE)
        if cells.used is not None and entry["compacted_m3"] is not None:
            sheet.formula(row, 9, f"{g}*{cells.used}*(1-{cells.loss}/100)", entry["compacted_m3"], "soil_volume")
        sheet.formula(row, 10, f"{g}*{cells.per_bank_loose}", entry["loose_m3"], "soil_volume")

    # --- needed -----------------------------------------------------------------------------------------------------

    def _line(
        self, name: str, label: str, formula: str | None, value: float, kind: str = "soil_volume", **how: Any
    ) -> str:
        """A line of the account: label, figure, unit."""
        sheet, row = self.sheet, self.sheet.row
        sheet.text(row, 0, label, "key" if how.get("style") == "total" else "text")
        if formula is None:
            sheet.number(row, 2, value, kind, **how)
        else:
            sheet.formula(row, 2, formula, value, kind, **how)
        sheet.text(row, 3, sheet.book.unit(kind), "note")
        sheet.row += 1
        self.values[name] = at(row, 2, fixed=True)
        return self.values[name]

    def _account(self) -> None:
        content, required = self.content, self.content["required"]
        usable = [m for m in content["materials"] if m["use"] in ("fill", "rock") and m["compacted_m3"] is not None]
        available = "+".join(at(self.rows[m["material"]], 9) for m in usable) or "0"
        self._line("target", "surplus wanted in hand", None, max(content["target_surplus_m3"], 0.0), style="input")
        self._line("available", "available, compacted", available, content["available_compacted_m3"], style="total")
        start = self.sheet.row
        self._line("fill", "fill", None, required["fill_m3"])
        self._line("refill", "refill of over-excavation", None, required["over_excavation_refill_m3"])
        self._scarify()
        self._line("allowance", "taken by allowances", None, required["allowance_m3"])
        self._line("section", "sections of the site's own soil", None, required["section_m3"])
        summed = f"SUM({at(start, 2)}:{at(self.sheet.row - 1, 2)})"
        self._line("required", "required, compacted", summed, content["required_compacted_m3"], style="total")
        surplus = f"{self.values['available']}-{self.values['required']}"
        self._line("surplus", "surplus (negative: shortage)", surplus, content["surplus_compacted_m3"], style="total")
        self._line("reported", "surplus as reported by the program", None, content["surplus_compacted_m3"])
        change = f"{self.values['surplus']}-{self.values['reported']}"
        self._line("change", "change by what you changed", change, 0.0)
        point = "+".join(
            f"0.01*{at(self.rows[m['material']], 6)}*(1-{self.materials.cells[m['material']].loss}/100)" for m in usable
        )
        self._line("point", "one point of shrinkage is worth", point or "0", content["per_shrink_point_m3"])
        self.sheet.row += 1

    def _scarify(self) -> None:
        """What scarifying takes: the volume of each material × (1 − compacted per bank)."""
        total = self.parts.volumes.total
        volumes: dict[str, float] = dict(total.scarify_by_material)
        if not self.model.stratum:
            volumes = {unlayered_material(self.model): total.scarify_m3}
        terms, sheet = [], self.sheet
        for name, volume in volumes.items():
            cells = self.materials.cells[name]
            if volume > 0 and cells.expected is not None:
                terms.append(f"{sheet.book.shown(volume, 'soil_volume')!r}*(1-{cells.expected})")
        self._line("scarify", "taken by scarifying", "+".join(terms) or "0", self.content["required"]["scarify_m3"])

    # --- over the gate ----------------------------------------------------------------------------------------------

    def _truck(self) -> None:
        truck = self.model.haul.truck if self.model.haul else None
        if truck is None:
            return
        self._line("heaped", "truck: heaped volume, loose", None, truck.heaped_volume, style="input")
        self._line("payload", "truck: payload, moist", None, truck.payload, "mass", style="input")
        self.trucks = Trucks(self.values["heaped"], self.values["payload"])
        self.sheet.row += 1

    def _gate(self) -> None:
        sheet = self.sheet
        sheet.text(sheet.row, 0, "Over the gate", "key")
        sheet.row += 1
        first = sheet.head(_GATE)
        for material, way, reason, mass in self._gate_rows():
            self._gate_row(sheet.row, material, way, reason, mass)
            sheet.row += 1
        last = sheet.row - 1
        sheet.text(sheet.row, 0, "all", "key")
        moves = [*self.content["imports"], *self.content["exports"]]
        if self.trucks is not None:
            loads = sum(m["loads"] or 0 for m in moves)
            sheet.sum_of(sheet.row, 7, first, last, loads, "count")
        cost = sum(self._cost(m, way) for way in ("in", "out") for m in self._moves(way))
        sheet.sum_of(sheet.row, 10, first, last, cost, "money")

    def _moves(self, way: str) -> list[dict[str, Any]]:
        rows: list[dict[str, Any]] = self.content["imports" if way == "in" else "exports"]
        return rows

    def _gate_rows(self) -> list[tuple[str, str, str, str]]:
        """(material, way, reason, formula of the dry mass) of all that may cross the gate."""
        v, k = self.values, self.materials.mass_factor
        rows = []
        brought = self._importable()
        if brought is not None:
            cells = self.materials.cells[brought]
            short = f"MAX({v['required']}+{v['target']}-{v['available']},0)"
            # compacted / (compacted per bank × (1 − loss)) is the bank volume to dig
            rows.append((brought, "in", "shortage", f"{short}/({cells.used}*(1-{cells.loss}/100))*{cells.bank}*{k}"))
        for entry in self.content["materials"]:
            row = self.rows[entry["material"]]
            delivered = f"({at(row, 7)}-{at(row, 8)})"
            if entry["use"] in ("fill", "rock"):
                left = f"MAX({v['available']}-{v['required']}-{v['target']},0)/MAX({v['available']},0.000001)"
                rows.append((entry["material"], "out", "surplus", f"{delivered}*{left}"))
            elif entry["use"] == "waste":
                rows.append((entry["material"], "out", "waste", delivered))
        return rows + self._topsoil_rows()

    def _importable(self) -> str | None:
        """The material that a shortage is made up with, where there is one that can be placed."""
        name = import_material(self.model, self.parts.cards) if self.model.borrow or self._has_fill() else None
        return name if name and self.materials.cells[name].used is not None else None

    def _has_fill(self) -> bool:
        return any(card.use == "fill" for card in self.parts.cards.values())

    def _topsoil_rows(self) -> list[tuple[str, str, str, str]]:
        cards, sections = self.parts.cards, self.parts.volumes.total.sections
        rows = []
        for name, card in cards.items():
            if card.use != "topsoil":
                continue
            laid_m3 = sum(sections.get(s.name, 0.0) for s in self.model.section if s.source == name)
            density = card.fill_dry_density_kg_m3 or card.bank_dry_density_kg_m3
            book, cells = self.sheet.book, self.materials.cells[name]
            # respread soil without a stated density is taken at its bank density
            rho = cells.bank if card.fill_dry_density_kg_m3 is None else repr(book.shown(density, "density"))
            laid = f"{book.shown(laid_m3, 'soil_volume')!r}*{rho}*{self.materials.mass_factor}"
            delivered = "0"
            if name in self.rows:
                delivered = f"({at(self.rows[name], 7)}-{at(self.rows[name], 8)})"
            rows.append((name, "out", "topsoil", f"MAX({delivered}-{laid},0)"))
            rows.append((name, "in", "topsoil", f"MAX({laid}-{delivered},0)/(1-{cells.loss}/100)"))
        return rows

    def _gate_row(self, row: int, material: str, way: str, reason: str, mass: str) -> None:
        sheet, cells, k = self.sheet, self.materials.cells[material], self.materials.mass_factor
        found = next((m for m in self._moves(way) if m["material"] == material and m["reason"] == reason), None)
        move = found or dict.fromkeys(("dry_mass_t", "bank_m3", "loose_m3", "compacted_m3", "loads"), 0.0)
        for column, text in enumerate((material, way, reason)):
            sheet.text(row, column, text)
        d = sheet.formula(row, 3, mass, move["dry_mass_t"], "mass", si=TONNE)
        e = sheet.formula(row, 4, f"{d}/({cells.bank}*{k})", move["bank_m3"], "soil_volume")
        f = sheet.formula(row, 5, f"{e}*{cells.per_bank_loose}", move["loose_m3"], "soil_volume")
        if cells.used is not None and reason != "topsoil":
            self._compacted(row, e, cells, way, move["compacted_m3"])
        if self.trucks is not None:
            sheet.formula(row, 7, _loads(self.trucks, d, f, cells), move["loads"] or 0, "count")
        price, per = self._price(material, way)
        i = sheet.number(row, 8, price, "price", style="input")
        sheet.text(row, 9, per)
        sheet.formula(
            row, 10, f"{i}*{ {'bank': e, 'loose': f, 'dry mass': d}[per] }", self._cost(move, way, material), "money"
        )

    def _compacted(self, row: int, bank: str, cells: MaterialCells, way: str, value: float | None) -> None:
        # what comes is counted where it is dug, before its loss; what leaves has had its loss
        loss = f"*(1-{cells.loss}/100)" if way == "in" else ""
        self.sheet.formula(row, 6, f"{bank}*{cells.used}{loss}", value or 0.0, "soil_volume")

    def _price(self, material: str, way: str) -> tuple[float, str]:
        """Money per unit, and what the unit is: of the first place that gives or takes the material."""
        if way == "in":
            for pit in self.model.borrow:
                if pit.material == material:
                    return pit.price, "dry mass" if pit.price_per == "mass" else pit.price_per
            return 0.0, "bank"
        for place in self.model.disposal:
            if place.accepts is None or material in place.accepts:
                return place.price, "loose"
        return 0.0, "loose"

    def _cost(self, move: dict[str, Any], way: str, material: str | None = None) -> float:
        price, per = self._price(material or move["material"], way)
        book = self.sheet.book
        amount = {
            "bank": book.shown(move["bank_m3"], "soil_volume"),
            "loose": book.shown(move["loose_m3"], "soil_volume"),
            "dry mass": book.shown(move["dry_mass_t"], "mass", TONNE),
        }
        return price * amount[per]


def _loads(trucks: Trucks, mass: str, loose: str, cells: MaterialCells) -> str:
    """Whole loads, by loose volume or moist weight, whichever are more."""
    most = f"MAX({loose}/{trucks.heaped},{mass}*(1+{cells.water}/100)/{trucks.payload})"
    return f"MAX(ROUNDUP({most}-0.000000001*MAX({most},1),0),0)"
