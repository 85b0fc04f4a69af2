"""Quantities by zone and material, in every state: bank, loose, compacted and dry mass."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from earthwork.quantities.area_volumes import AreaVolumes
from earthwork.reporting.report.parts import Parts
from earthwork.soils.card import SoilCard

#: What is dug of a material, and where :class:`AreaVolumes` has it.
_DUG = (("cut", "cut_by_material"), ("stripping", "strips"), ("over-excavation", "over_excavation_by_material"))


def zone_materials(parts: Parts) -> list[dict[str, Any]]:
    """A row for each zone, material and kind of digging; the whole site where there are no zones. SI."""
    volumes = parts.volumes
    areas = [(zone.zone or "", zone) for zone in volumes.zones]
    if volumes.outside_zones is not None:
        areas.append(("outside all zones", volumes.outside_zones))
    if not areas:
        areas = [("whole site", volumes.total)]
    return [row for name, area in areas for row in _rows(name, area, parts.cards)]


def _rows(name: str, area: AreaVolumes, cards: Mapping[str, SoilCard]) -> list[dict[str, Any]]:
    rows = []
    for kind, attribute in _DUG:
        for material, bank_m3 in getattr(area, attribute).items():
            if bank_m3 > 0:
                rows.append({"zone": name, "material": material, "work": kind, **states(bank_m3, cards.get(material))})
    return rows


def states(bank_m3: float, card: SoilCard | None) -> dict[str, float | None]:
    """A bank volume in the other states, before loss; None where the card does not say."""
    if card is None:
        return {"bank_m3": bank_m3, "loose_m3": None, "compacted_m3": None, "dry_mass_t": None}
    mass_kg = bank_m3 * card.bank_dry_density_kg_m3
    fill = card.fill_dry_density_kg_m3
    return {
        "bank_m3": bank_m3,
        "loose_m3": mass_kg / card.loose_dry_density_kg_m3,
        "compacted_m3": mass_kg / fill if fill else None,
        "dry_mass_t": mass_kg / 1000,
    }
