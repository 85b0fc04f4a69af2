"""Whether there is enough of the dry material that wet soil is to be mixed with: what the mix takes against the ledger."""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass

from earthwork.plan.account import Account
from earthwork.plan.movements import LedgerRow
from earthwork.site.haul_model import Borrow
from earthwork.soils.card import SoilCard

#: Where the ledger puts soil that a mix can take instead: sections, allowances and losses have theirs already.
_FREE = ("over-excavation refill", "in hand", "export")


@dataclass(frozen=True)
class WetSoil:
    """A wet material of the fill: its dry mass there, its density there, and what a mix takes by dry mass of it."""

    dry_mass_kg: float
    density_kg_m3: float
    ratio: float


@dataclass(frozen=True)
class MixSupply:
    """Dry material that a mix takes, and what there is of it; ``available_kg`` is None where that has no limit [kg]."""

    needed_kg: float
    available_kg: float | None
    displaced_kg: float  #: of the wet material, left over since the mix takes its place

    @property
    def missing_kg(self) -> float:
        short = 0.0 if self.available_kg is None else self.needed_kg - self.available_kg
        return short if short > 1e-9 * self.needed_kg else 0.0


def mix_supply(
    wet: Sequence[WetSoil], *, placed_kg: float, density_kg_m3: float, available_kg: float | None
) -> MixSupply:
    """Dry material that it takes to mix all wet soil of a fill.

    What of the dry material goes into the fill anyhow is mixed first, shared out as the wet materials ask for it
    (``P``). Where that is not enough, more of it takes the place of the wet soil that it is mixed with, volume for
    volume, so that the fill holds as much as before: of a wet material the share
    ``f = min(1, (m / ρ + P / ρ_dry) / (m / ρ + r·m / ρ_dry))`` remains, and takes ``f·r·m``. That the parts of a mix
    take the room that they take alone is an estimate, no single source.

    Args:
        wet: the wet materials that are mixed with it.
        placed_kg: of the dry material, in the fill already [kg].
        density_kg_m3: of the dry material in the fill [kg/m³], more than 0.
        available_kg: of the dry material in all, what is in the fill included [kg]; None for no limit.

    >>> clay = WetSoil(dry_mass_kg=900.0, density_kg_m3=1500.0, ratio=0.5)
    >>> supply = mix_supply([clay], placed_kg=0.0, density_kg_m3=1500.0, available_kg=100.0)
    >>> round(supply.needed_kg, 6), round(supply.displaced_kg, 6), round(supply.missing_kg, 6)
    (300.0, 300.0, 200.0)
    >>> mix_supply([clay], placed_kg=450.0, density_kg_m3=1500.0, available_kg=500.0).displaced_kg
    0.0
    """
    if not density_kg_m3 > 0:
        raise ValueError(f"fill dry density is {density_kg_m3:g} kg/m³; it must be more than 0")
    whole = math.fsum(w.ratio * w.dry_mass_kg for w in wet)
    there = placed_kg / whole if whole > 0 else 1.0
    needed = displaced = 0.0
    for soil in wet:
        asked = soil.ratio * soil.dry_mass_kg
        own_m3 = soil.dry_mass_kg / soil.density_kg_m3
        kept = min((own_m3 + there * asked / density_kg_m3) / (own_m3 + asked / density_kg_m3), 1.0) if own_m3 > 0 else 1.0
        needed += kept * asked
        displaced += (1.0 - kept) * soil.dry_mass_kg
    return MixSupply(needed, available_kg, displaced)


def free_kg(ledger: Iterable[LedgerRow], here: Account, *, imported: bool) -> dict[str, float]:
    """Dry mass by material that fill can take, after loss: placed in fill and refill, kept in hand or sent away [kg].

    What makes up for scarified ground is not in it.

    Args:
        imported: whether of the imports, else of the site's own ground.
    """
    deepened = here.fill_m3 + here.scarify_m3
    shares = {**dict.fromkeys(_FREE, 1.0), "fill": here.fill_m3 / deepened if deepened > 0 else 0.0}
    masses: dict[str, float] = {}
    for row in ledger:
        if (row.source == "import") == imported and row.sink in shares:
            masses[row.material] = masses.get(row.material, 0.0) + shares[row.sink] * row.dry_mass_kg
    return masses


def available_kg(
    card: SoilCard, borrows: Sequence[Borrow], own_kg: Mapping[str, float], imported_kg: Mapping[str, float]
) -> float | None:
    """Dry mass of a material that fill can take, of the site's own ground and of borrow sites [kg]; None for no limit.

    Without a borrow site of it, an import that the ledger plans counts as it is planned.
    """
    own = own_kg.get(card.material, 0.0)
    sites = [borrow for borrow in borrows if borrow.material == card.material]
    if not sites:
        return own + imported_kg.get(card.material, 0.0)
    if any(borrow.capacity is None for borrow in sites):
        return None
    dug = math.fsum(borrow.capacity or 0.0 for borrow in sites) * card.bank_dry_density_kg_m3
    return own + dug * (1.0 - card.loss_fraction)
