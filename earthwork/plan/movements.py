"""Where the dry mass of a site goes: into the fill, away, lost; and what must come. The ledger of it closes.

Surplus leaves in equal shares of all fill and rock; a shortage is made up with one material, that of the first borrow
site or else the first fill material. Topsoil and waste are never fill.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

from earthwork.errors import PlanError
from earthwork.plan.account import Account, MaterialAccount, placed_density_kg_m3
from earthwork.quantities.area_volumes import AreaVolumes
from earthwork.site.model import HaulTruck, SiteModel
from earthwork.soils.card import SoilCard

#: A ledger that is open by more than this share of the mass in it is a program error.
CLOSURE = 1e-9


@dataclass(frozen=True)
class LedgerRow:
    """Dry mass that goes from one place to another."""

    source: str
    sink: str
    material: str
    dry_mass_kg: float


@dataclass(frozen=True)
class Movement:
    """Soil that comes to the site or leaves it; an import is counted where it is dug, before its loss."""

    material: str
    reason: str  #: shortage, surplus, waste or topsoil
    dry_mass_kg: float
    bank_m3: float
    loose_m3: float
    compacted_m3: float | None
    loads: int | None  #: whole; None without a truck

    def to_dict(self) -> dict[str, Any]:
        return {
            "material": self.material,
            "reason": self.reason,
            "dry_mass_t": self.dry_mass_kg / 1000,
            "bank_m3": self.bank_m3,
            "loose_m3": self.loose_m3,
            "compacted_m3": self.compacted_m3,
            "loads": self.loads,
        }


@dataclass(frozen=True)
class Topsoil:
    """Topsoil in bank volumes, as stripped."""

    stripped_m3: float
    respread_m3: float  #: as laid
    surplus_m3: float  #: after loss, less what the respread takes; negative is a shortage

    def to_dict(self) -> dict[str, float]:
        return dict(self.__dict__)


@dataclass(frozen=True)
class Settlement:
    """Imports, exports and the ledger of a site."""

    imports: tuple[Movement, ...]
    exports: tuple[Movement, ...]
    topsoil: Topsoil
    ledger: tuple[LedgerRow, ...]
    open_kg: float


def whole_loads(truck: HaulTruck | None, loose_m3: float, moist_kg: float) -> int | None:
    """Loads by loose volume or by moist weight, whichever are more, rounded up once.

    >>> whole_loads(HaulTruck(heaped_volume=7, payload=1e9), 605.26, 0.0)
    87
    """
    if truck is None:
        return None
    loads = max(loose_m3 / truck.heaped_volume, moist_kg / truck.payload)
    return math.ceil(loads - 1e-9 * max(loads, 1.0))


def settle(model: SiteModel, cards: dict[str, SoilCard], here: Account, volumes: AreaVolumes) -> Settlement:
    """Settle a site's account: what is placed, what leaves, what comes.

    Raises:
        PlanError: a shortage that no material can make up, or a ledger that does not close (a program error).
    """
    book = _Book(model, cards)
    in_hand = max(model.balance.target_surplus, 0.0)
    required, available = here.required_m3, here.available_m3
    used = min(required, available)
    kept = min(max(available - used, 0.0), in_hand)
    for entry in here.materials:
        if entry.is_fill and available > 0:
            book.place(entry, used / available, kept / available, here)
        elif entry.use == "waste":
            book.leave(entry, entry.delivered_kg, "waste")
    shortage = required + in_hand - available
    if shortage > 1e-9 * max(required, 1.0):
        book.bring(here, volumes, required - used, in_hand - kept)
    topsoil = _topsoil(book, here, volumes)
    return Settlement(tuple(book.imports), tuple(book.exports), topsoil, tuple(book.rows), book.close(here))


class _Book:
    """Rows of the ledger as they are written, with the movements that they mean."""

    def __init__(self, model: SiteModel, cards: dict[str, SoilCard]) -> None:
        self.model = model
        self.cards = cards
        self.truck = model.haul.truck if model.haul else None
        self.rows: list[LedgerRow] = []
        self.imports: list[Movement] = []
        self.exports: list[Movement] = []

    def spread(self, entry: MaterialAccount, sinks: dict[str, float]) -> None:
        """Write the dry mass of a material: from each of its sources to each sink, in equal shares."""
        sources = {
            "cut": entry.cut_bank_m3,
            "strip": entry.strip_bank_m3,
            "over-excavation": entry.over_excavation_bank_m3,
            "allowance": entry.allowance_bank_m3,
        }
        for source, bank in sources.items():
            for sink, mass in sinks.items():
                if bank > 0 and mass > 0:
                    self.rows.append(LedgerRow(source, sink, entry.material, mass * bank / entry.bank_m3))

    def place(self, entry: MaterialAccount, used: float, kept: float, here: Account) -> None:
        """Place a share of a fill material, keep a share in hand, and let the rest leave."""
        mass = entry.delivered_kg
        leaving = mass * max(1.0 - used - kept, 0.0)
        sinks = {"loss": entry.lost_kg, "in hand": mass * kept, "export": leaving}
        for name, share in required_shares(here).items():
            sinks[name] = mass * used * share
        self.spread(entry, sinks)
        if leaving > 1e-9 * max(mass, 1.0):
            self._move_out(entry, leaving, "surplus")

    def leave(self, entry: MaterialAccount, mass_kg: float, reason: str) -> None:
        """Let all of a material leave that is never fill."""
        if mass_kg > 0:
            self.spread(entry, {"loss": entry.lost_kg, "export": mass_kg})
            self._move_out(entry, mass_kg, reason)

    def _move_out(self, entry: MaterialAccount, mass_kg: float, reason: str) -> None:
        card = self.cards[entry.material]
        compacted = None if entry.placed_density_kg_m3 is None else mass_kg / entry.placed_density_kg_m3
        self.exports.append(self._movement(card, mass_kg, compacted, reason))

    def _movement(self, card: SoilCard, mass_kg: float, compacted_m3: float | None, reason: str) -> Movement:
        loose = mass_kg / card.loose_dry_density_kg_m3
        loads = whole_loads(self.truck, loose, float(card.loaded_moist_mass_kg(mass_kg)))
        bank = mass_kg / card.bank_dry_density_kg_m3
        return Movement(card.material, reason, mass_kg, bank, loose, compacted_m3, loads)

    def bring(self, here: Account, volumes: AreaVolumes, to_place_m3: float, to_keep_m3: float) -> None:
        """Import what is short."""
        card = self.cards[import_material(self.model, self.cards)]
        density = placed_density_kg_m3(card, volumes.bands_m3, volumes.refill_and_fill_m3)
        if density is None:
            raise PlanError(
                f"balance: the site is short of {to_place_m3 + to_keep_m3:,.0f} m³ of fill, and the import material "
                f"{card.material!r} (use {card.use}) cannot be placed. Give a [[borrow]] with a fill or rock material"
            )
        compacted = to_place_m3 + to_keep_m3
        delivered = compacted * density
        dug = delivered / (1 - card.loss_fraction)
        self.imports.append(self._movement(card, dug, compacted, "shortage"))
        self.rows.append(LedgerRow("import", "loss", card.material, dug - delivered))
        for name, share in required_shares(here).items():
            self.rows.append(LedgerRow("import", name, card.material, to_place_m3 * density * share))
        self.rows.append(LedgerRow("import", "in hand", card.material, to_keep_m3 * density))
        self.rows = [row for row in self.rows if row.dry_mass_kg != 0]

    def close(self, here: Account) -> float:
        """Open dry mass of the book [kg]: all that is dug or brought, less all that is written."""
        brought = sum(m.dry_mass_kg for m in self.imports)
        dug = sum(a.dry_mass_kg for a in here.materials)
        written = sum(r.dry_mass_kg for r in self.rows)
        open_kg = dug + brought - written
        if abs(open_kg) > CLOSURE * max(dug + brought, 1.0):
            raise PlanError(
                f"the dry-mass ledger does not close: {open_kg / 1000:.6f} t are open of {(dug + brought) / 1000:.1f} t. "
                "This is an error of the program; please report it with the site file"
            )
        return open_kg


def required_shares(here: Account) -> dict[str, float]:
    """How the required compacted volume divides; scarifying deepens the fill, or spares it where soil bulks."""
    parts = {
        "fill": here.fill_m3 + here.scarify_m3,
        "over-excavation refill": here.refill_m3,
        "allowances": here.allowance_m3,
        "sections": here.section_m3,
    }
    required = here.required_m3
    return {name: part / required for name, part in parts.items() if part != 0 and required > 0}


def import_material(model: SiteModel, cards: dict[str, SoilCard]) -> str:
    """Material of what must be brought: that of the first borrow site, else the first fill material.

    Raises:
        PlanError: there is neither.
    """
    if model.borrow:
        return model.borrow[0].material
    for name, card in cards.items():
        if card.use == "fill":
            return name
    raise PlanError('balance: the site is short, and no material has use = "fill"; give a [[borrow]] with its material')


def _topsoil(book: _Book, here: Account, volumes: AreaVolumes) -> Topsoil:
    """Topsoil stripped against respread; what is over leaves, what is short must come."""
    entries = [a for a in here.materials if a.use == "topsoil"]
    stripped = sum(a.strip_bank_m3 for a in entries)
    respread = {
        s.name: (s.source, volumes.sections.get(s.name, 0.0))
        for s in book.model.section
        if s.source in book.cards and book.cards[s.source].use == "topsoil"
    }
    surplus = 0.0
    names = dict.fromkeys([*(a.material for a in entries), *(source for source, _ in respread.values())])
    for name in names:
        card = book.cards[name]
        entry = next((a for a in entries if a.material == name), None)
        # Respread soil is loosely firmed; without a stated density it is taken at its bank density.
        density = card.fill_dry_density_kg_m3 or card.bank_dry_density_kg_m3
        laid = sum(volume for source, volume in respread.values() if source == name) * density
        delivered = entry.delivered_kg if entry else 0.0
        surplus += (delivered - laid) / card.bank_dry_density_kg_m3
        spare = delivered - laid
        if entry:
            sinks = {"loss": entry.lost_kg, "respread": min(laid, delivered), "export": max(spare, 0.0)}
            book.spread(entry, sinks)
        if spare > 1e-9 * max(delivered, 1.0):
            book.exports.append(book._movement(card, spare, None, "topsoil"))
        elif spare < -1e-9 * max(laid, 1.0):
            dug = -spare / (1 - card.loss_fraction)
            book.imports.append(book._movement(card, dug, None, "topsoil"))
            book.rows.append(LedgerRow("import", "respread", name, -spare))
            if dug + spare > 0:
                book.rows.append(LedgerRow("import", "loss", name, dug + spare))
    return Topsoil(stripped, sum(volume for _, volume in respread.values()), surplus)
