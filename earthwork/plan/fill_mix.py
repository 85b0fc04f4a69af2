"""Which material goes into the fill, and what a compacted volume of that mix weighs, wants and takes."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass

from earthwork.plan.account import placed_density_kg_m3
from earthwork.plan.moisture import WaterNeed, water_need
from earthwork.plan.movements import LedgerRow
from earthwork.quantities.area_volumes import AreaVolumes
from earthwork.site.model import HaulTruck
from earthwork.soils.card import SoilCard

#: Where soil of a lift goes in the ledger.
_SINKS = ("fill", "over-excavation refill")


@dataclass(frozen=True)
class MixPart:
    """A material of the fill: its share of the compacted volume, and its water content as it arrives [%]."""

    card: SoilCard
    share: float
    arriving_percent: float | None

    @property
    def material(self) -> str:
        return self.card.material

    def dry_masses_kg(self, compacted_m3: float, bands_m3: Sequence[float]) -> list[float]:
        """Dry mass in a volume above all depth rows, then in each row [kg]; of ``bands_m3`` too only its share."""
        volumes = [compacted_m3 - math.fsum(bands_m3), *bands_m3]
        return [self.share * v * d for v, d in zip(volumes, self._densities(len(bands_m3)), strict=True)]

    def dry_mass_kg(self, compacted_m3: float, bands_m3: Sequence[float]) -> float:
        return math.fsum(self.dry_masses_kg(compacted_m3, bands_m3))

    def water(self, compacted_m3: float, bands_m3: Sequence[float]) -> WaterNeed:
        """Water to add to, or to dry from, the part's share of a volume [L, not L/m³]."""
        volumes = [compacted_m3 - math.fsum(bands_m3), *bands_m3]
        add = dry = 0.0
        for volume, density in zip(volumes, self._densities(len(bands_m3)), strict=True):
            need = water_need(density, self.arriving_percent, self.card.target_water_content_percent)
            add += self.share * volume * need.to_add_l_per_m3
            dry += self.share * volume * need.to_dry_l_per_m3
        return WaterNeed(add, dry)

    def _densities(self, bands: int) -> list[float]:
        """Fill dry density above all depth rows, then in each."""
        plain = self.card.dry_density_kg_m3("compacted")
        if not self.card.bands:
            return [plain] * (bands + 1)
        return [
            plain,
            *(plain if b.fill_dry_density_kg_m3 is None else b.fill_dry_density_kg_m3 for b in self.card.bands),
        ]

    def loads(self, dry_mass_kg: float, truck: HaulTruck) -> float:
        """Loads by loose volume or by moist weight, whichever are more; decimal."""
        moist = 1.0 + (self.arriving_percent or 0.0) / 100.0
        return max(
            dry_mass_kg / self.card.loose_dry_density_kg_m3 / truck.heaped_volume, dry_mass_kg * moist / truck.payload
        )


def placed_kg(ledger: Sequence[LedgerRow]) -> dict[str, float]:
    """Dry mass of each material that the ledger puts into fill and refill [kg]."""
    masses: dict[str, float] = {}
    for row in ledger:
        if row.sink in _SINKS:
            masses[row.material] = masses.get(row.material, 0.0) + row.dry_mass_kg
    return masses


def pro_rata(
    ledger: Sequence[LedgerRow], cards: Mapping[str, SoilCard], volumes: AreaVolumes, drying_points: float
) -> tuple[MixPart, ...]:
    """Every lift takes each material in the share that it has of all fill.

    Args:
        drying_points: water content lost between the cut and the lift [points].
    """
    compacted = {}
    for material, mass in placed_kg(ledger).items():
        density = placed_density_kg_m3(cards[material], volumes.bands_m3, volumes.refill_and_fill_m3)
        if density is not None and mass > 0:
            compacted[material] = mass / density
    whole = math.fsum(compacted.values())
    return tuple(
        MixPart(cards[material], volume / whole, arriving(cards[material], drying_points))
        for material, volume in compacted.items()
    )


def arriving(card: SoilCard, drying_points: float) -> float | None:
    """Water content of a material when it reaches the lift [%]: of the bank, less what dries on the way."""
    bank = card.bank_water_content_percent
    return None if bank is None else max(bank - drying_points, 0.0)
