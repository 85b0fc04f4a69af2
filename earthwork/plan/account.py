"""The dry-mass account of a site: what is dug, what it becomes, and what is needed.

Pure arithmetic on bank volumes, compacted volumes and soil cards. Masses are kg of dry solids inside, tonnes outside.
"""

from __future__ import annotations

from dataclasses import dataclass

from earthwork.errors import PlanError
from earthwork.quantities.area_volumes import AreaVolumes
from earthwork.site.model import SiteModel
from earthwork.soils.card import SoilCard, State


@dataclass(frozen=True)
class MaterialAccount:
    """What the site's own ground gives of one material."""

    material: str
    use: str
    cut_bank_m3: float
    strip_bank_m3: float
    over_excavation_bank_m3: float
    allowance_bank_m3: float  #: soil added to the site, + only
    dry_mass_kg: float
    lost_kg: float
    compacted_m3: float | None  #: after loss, at the placed density; None for topsoil and waste without one
    loose_m3: float
    placed_density_kg_m3: float | None

    @property
    def bank_m3(self) -> float:
        """Bank volume of all that is dug."""
        return self.cut_bank_m3 + self.strip_bank_m3 + self.over_excavation_bank_m3 + self.allowance_bank_m3

    @property
    def delivered_kg(self) -> float:
        """Dry mass after loss."""
        return self.dry_mass_kg - self.lost_kg

    @property
    def is_fill(self) -> bool:
        """Whether it may be placed as fill."""
        return self.use in ("fill", "rock")


@dataclass(frozen=True)
class Account:
    """Available against required compacted volume at one position of the grade."""

    materials: tuple[MaterialAccount, ...]
    fill_m3: float
    refill_m3: float
    scarify_m3: float  #: what scarifying takes
    allowance_m3: float  #: what negative allowances take
    section_m3: float  #: sections made of the site's own fill or rock
    available_m3: float
    per_shrink_point_m3: float
    sd_m3: float | None

    @property
    def required_m3(self) -> float:
        """Compacted volume that the site needs."""
        return self.fill_m3 + self.refill_m3 + self.scarify_m3 + self.allowance_m3 + self.section_m3

    @property
    def surplus_m3(self) -> float:
        """Available − required; negative is a shortage."""
        return self.available_m3 - self.required_m3


def placed_density_kg_m3(card: SoilCard, bands_m3: tuple[float, ...], placed_m3: float) -> float | None:
    """Mean fill dry density of a material placed in equal shares over all depth bands [kg/m³].

    Args:
        bands_m3: compacted volume in each ``by_depth`` row.
        placed_m3: all compacted volume, that above the bands included.

    >>> from types import SimpleNamespace as N
    >>> card = N(fill_dry_density_kg_m3=1700.0, bands=(N(fill_dry_density_kg_m3=1800.0),))
    >>> placed_density_kg_m3(card, (25.0,), 100.0)
    1725.0
    """
    density = card.fill_dry_density_kg_m3
    if density is None or placed_m3 <= 0:
        return density
    mass = density * (placed_m3 - sum(bands_m3))
    for band, volume in zip(card.bands, bands_m3, strict=True):
        mass += volume * (density if band.fill_dry_density_kg_m3 is None else band.fill_dry_density_kg_m3)
    return mass / placed_m3


def account(model: SiteModel, cards: dict[str, SoilCard], volumes: AreaVolumes) -> Account:
    """Available and required compacted volume of a site with the given quantities.

    Raises:
        PlanError: cut of a material that no stratum and no borrow names.
    """
    placed = volumes.refill_and_fill_m3
    names = list(dict.fromkeys([*volumes.cut_by_material, *volumes.strips, *(a.material for a in model.allowance)]))
    cut, dug, scarified = volumes.cut_by_material, volumes.over_excavation_by_material, volumes.scarify_by_material
    if not model.stratum:
        ground = unlayered_material(model)
        names = list(dict.fromkeys([ground, *names]))
        cut, dug = {ground: volumes.cut_m3}, {ground: volumes.over_excavation_m3}
        scarified = {ground: volumes.scarify_m3}
    accounts = []
    for name in names:
        card = cards[name]
        density = placed_density_kg_m3(card, volumes.bands_m3, placed)
        accounts.append(
            _material(model, card, density, cut.get(name, 0.0), volumes.strips.get(name, 0.0), dug.get(name, 0.0))
        )
    usable = [a for a in accounts if a.is_fill and a.compacted_m3 is not None]
    variance = [
        (a.bank_m3 * (1 - cards[a.material].loss_fraction) * sd) ** 2
        for a in usable
        if (sd := cards[a.material].shrinkage_factor_sd) is not None
    ]
    return Account(
        materials=tuple(accounts),
        fill_m3=volumes.fill_m3,
        refill_m3=volumes.over_excavation_m3,
        scarify_m3=sum(v * (1 - (cards[n].shrinkage_factor or 1.0)) for n, v in scarified.items()),
        allowance_m3=sum(_taken_m3(a.volume, a.state, cards[a.material]) for a in model.allowance if a.volume < 0),
        section_m3=_own_sections_m3(model, cards, volumes),
        available_m3=sum(a.compacted_m3 or 0.0 for a in usable),
        per_shrink_point_m3=sum(0.01 * a.bank_m3 * (1 - cards[a.material].loss_fraction) for a in usable),
        sd_m3=sum(variance) ** 0.5 if variance else None,
    )


def unlayered_material(model: SiteModel) -> str:
    """The material of ground without strata: that of the first borrow site."""
    if not model.borrow:
        raise PlanError(
            "balance: the cut has no material. Add a [[stratum]] that says what the ground is, "
            "or a [[borrow]] whose material it shares"
        )
    return model.borrow[0].material


def _material(
    model: SiteModel, card: SoilCard, density: float | None, cut: float, strip: float, dug: float
) -> MaterialAccount:
    added = sum(
        card.dry_mass_kg(a.volume, a.state) / card.bank_dry_density_kg_m3
        for a in model.allowance
        if a.material == card.material and a.volume > 0
    )
    mass = card.bank_dry_density_kg_m3 * (cut + strip + dug + added)
    lost = mass * card.loss_fraction
    return MaterialAccount(
        material=card.material,
        use=card.use,
        cut_bank_m3=cut,
        strip_bank_m3=strip,
        over_excavation_bank_m3=dug,
        allowance_bank_m3=added,
        dry_mass_kg=mass,
        lost_kg=lost,
        compacted_m3=None if density is None else (mass - lost) / density,
        loose_m3=mass / card.loose_dry_density_kg_m3,
        placed_density_kg_m3=density,
    )


def _taken_m3(volume_m3: float, state: State, card: SoilCard) -> float:
    """Compacted volume that a negative allowance takes; topsoil and waste take none of the fill."""
    if card.use not in ("fill", "rock") or card.fill_dry_density_kg_m3 is None:
        return 0.0
    return card.dry_mass_kg(-volume_m3, state) / card.fill_dry_density_kg_m3


def _own_sections_m3(model: SiteModel, cards: dict[str, SoilCard], volumes: AreaVolumes) -> float:
    own = [s for s in model.section if s.source in cards and cards[s.source].use in ("fill", "rock")]
    return sum(volumes.sections.get(s.name, 0.0) for s in own)
