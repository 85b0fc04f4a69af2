"""Mixing wet soil with drier soil of the site: which mixes there are, and whether there is enough to mix in."""

from __future__ import annotations

from collections.abc import Sequence

from earthwork.errors import Warning
from earthwork.plan.account import placed_density_kg_m3
from earthwork.plan.drying import DryingOption, mixing, supplied
from earthwork.plan.fill_mix import MixPart, arriving
from earthwork.plan.lifts_result import LiftsResult
from earthwork.plan.mix_supply import MixSupply, WetSoil, available_kg, mix_supply
from earthwork.site import Site
from earthwork.soils.card import SoilCard
from earthwork.units import UnitSystem


def mixing_options(site: Site, placed: LiftsResult, part: MixPart) -> list[DryingOption]:
    """Mixes of a material that arrives too wet: with the named material, else with every drier one of the fill's use."""
    named = site.model.moisture.drying.mix_with
    others = [c for c in placed.cards.values() if c.material != part.material]
    others = [c for c in others if (c.material == named if named else c.use == "fill")]
    options = [_mix(site, placed, part, card) for card in others]
    return options if named else [o for o in options if o.possible]


def _mix(site: Site, placed: LiftsResult, part: MixPart, other: SoilCard) -> DryingOption:
    assert part.arriving_percent is not None
    assert part.card.target_water_content_percent is not None
    if other.use not in ("fill", "rock"):
        return DryingOption(
            material=part.material, method="mixing", possible=False, mix_with=other.material,
            note=f"{other.material} is {other.use}, which is never fill",
        )  # fmt: skip
    option = mixing(
        material=part.material,
        arriving=part.arriving_percent,
        target=part.card.target_water_content_percent,
        other=other.material,
        other_arriving=arriving(other, 0.0),
    )
    return supplied(option, _supply(site, placed, [option])) if option.possible else option


def _supply(site: Site, placed: LiftsResult, options: Sequence[DryingOption]) -> MixSupply:
    """What all of some mixes with one dry material take of it."""
    masses = {row["material"]: 1000.0 * row["dry_mass_t"] for row in placed.total["materials"]}
    other = placed.cards[options[0].mix_with or ""]
    return mix_supply(
        [
            WetSoil(masses[o.material], _density(placed, placed.cards[o.material]), o.mix_dry_ratio or 0.0)
            for o in options
        ],
        placed_kg=masses.get(other.material, 0.0),
        density_kg_m3=_density(placed, other),
        available_kg=available_kg(other, site.model.borrow, placed.own_kg, placed.imported_kg),
    )


def _density(placed: LiftsResult, card: SoilCard) -> float:
    """Mean dry density of a material in the fill."""
    total = placed.volumes.total
    density = placed_density_kg_m3(card, total.bands_m3, total.refill_and_fill_m3)
    return card.dry_density_kg_m3("compacted") if density is None else density


def mix_warnings(site: Site, placed: LiftsResult, options: Sequence[DryingOption]) -> list[Warning]:
    """Every dry material of which there is not enough for the mixes that it is in, of all wet materials together."""
    found = []
    mixes = [option for option in options if option.mix_with and option.mix_needed_t is not None]
    for name in dict.fromkeys(option.mix_with for option in mixes):
        mine = [option for option in mixes if option.mix_with == name]
        supply = _supply(site, placed, mine)
        if name is not None and supply.missing_kg > 0:
            found.append(_short(site, placed.own_kg.get(name, 0.0), name, [o.material for o in mine], supply))
    return found


def _short(site: Site, own_kg: float, name: str, wet: Sequence[str], supply: MixSupply) -> Warning:
    units, available = site.units, supply.available_kg or 0.0
    pits = [borrow.name for borrow in site.model.borrow if borrow.material == name]
    soils = " and ".join(wet)
    if pits:
        there = (
            f"{_mass(own_kg, units)} of the site's own ground, {_mass(available - own_kg, units)} of {', '.join(pits)}"
        )
        more = f"Raise the capacity of a borrow of {name} if its pit gives more"
    else:
        there = f"of the site's own ground{'' if available <= own_kg else ' and as import'}; no borrow site gives it"
        more = f"Give a [[borrow]] of {name}"
    return Warning(
        "mix-material-short",
        f"drying {soils} by mixing takes {_mass(supply.needed_kg, units)} of {name} by dry mass, and "
        f"{_mass(available, units)} are there ({there}): {_mass(supply.missing_kg, units)} are missing. {more}, name a "
        f"drier material (moisture.drying.mix_with), or spread and turn what is not mixed",
    )


def _mass(kg: float, units: UnitSystem) -> str:
    return f"{units.from_si(kg, 'mass'):,.0f} {units.label('mass')}"
