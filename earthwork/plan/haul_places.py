"""Where earth comes from and where it may go: the sources and sinks of a haul plan, in dry mass and compacted volume.

Every block gives one source for each material that is dug there, and one sink for each part of its fill. A tonne of one
soil fills less than a tonne of another, so each sink says what volume a kilogram of each material makes in it.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, field, replace

import numpy as np

from earthwork.errors import Warning
from earthwork.plan.account import unlayered_material
from earthwork.quantities.blocks import BlockTally
from earthwork.quantities.haul_areas import HaulAreas
from earthwork.site.haul_rules import ON_SITE_STOCKPILE
from earthwork.site.model import SiteModel
from earthwork.soils.card import SoilCard
from earthwork.units import UnitSystem

#: Amounts below this share of the site's are rounding.
_NOTHING = 1e-12


@dataclass(frozen=True, kw_only=True)
class Source:
    """Earth of one material at one place."""

    name: str
    kind: str  #: "cut" or "borrow"
    material: str
    place: tuple[float, float]  #: [m], see Frame
    mass_kg: float  #: dry, after loss; inf for a pit without limit
    phase: int | None = None  #: None: at any time
    cost_per_kg: float = 0.0
    opening: float = 0.0

    @property
    def spare(self) -> bool:
        """Whether a part of it may stay where it is."""
        return self.kind == "borrow"


@dataclass(frozen=True, kw_only=True)
class Sink:
    """A place that earth goes to."""

    name: str
    kind: str  #: "fill", "disposal" or "stockpile"
    place: tuple[float, float]
    volume_m3: float  #: compacted need of a fill, loose capacity of others; inf without limit
    m3_per_kg: dict[str, float]  #: by material that may go there
    phase: int | None = None
    cost_per_kg: dict[str, float] = field(default_factory=dict)
    opening: float = 0.0

    @property
    def spare(self) -> bool:
        """Whether it may stay unfilled."""
        return self.kind != "fill"


@dataclass(frozen=True)
class Places:
    """All sources and sinks of a site."""

    sources: tuple[Source, ...]
    sinks: tuple[Sink, ...]
    warnings: tuple[Warning, ...] = ()


def places_of(
    model: SiteModel, cards: dict[str, SoilCard], units: UnitSystem, areas: HaulAreas, tally: BlockTally
) -> Places:
    """Sources and sinks from what a walk over the ground has counted.

    Raises:
        PlanError: cut that nothing says the material of.
    """
    return _Builder(model, cards, units, areas, tally).build()


class _Builder:
    def __init__(
        self, model: SiteModel, cards: dict[str, SoilCard], units: UnitSystem, areas: HaulAreas, tally: BlockTally
    ) -> None:
        self.model = model
        self.cards = cards
        self.units = units
        self.areas = areas
        self.tally = tally
        self.cell_m2 = areas.frame.grid.cell_area_m2
        self.sources: list[Source] = []
        self.sinks: list[Sink] = []
        self.warnings: list[Warning] = []

    def build(self) -> Places:
        for key, sums in self.tally.amounts().items():
            self._block(key, sums)
        self._allowances()
        self._drop_rounding()
        self._borrow()
        self._disposal()
        return Places(*_told_apart(self.sources, self.sinks), tuple(self.warnings))

    # --- blocks ------------------------------------------------------------------------------------------------------

    def _block(self, key: tuple[int, int, int], sums: np.ndarray) -> None:
        name, phase = self.areas.name_of(key), self.areas.phase_of(key)
        dug: dict[str, np.ndarray] = {}
        filled: dict[int, dict[int, np.ndarray]] = {}
        scarified: dict[str, np.ndarray] = {}
        for channel, amount in zip(self.tally.channels, sums, strict=True):
            what, index, band = channel
            if amount[0] == 0.0:
                continue
            if what == "fill":
                filled.setdefault(index, {})[band] = amount * self.cell_m2
            elif what == "section":
                self._section(name, phase, index, amount)
            elif what == "scarify":
                material = self._material(index)
                taken = amount * self.cell_m2 * (1 - (self.cards[material].shrinkage_factor or 1.0))
                scarified[material] = scarified.get(material, np.zeros(3)) + taken
            else:
                material = self.model.strip[index].material if what == "strip" else self._material(index)
                density = self.cards[material].bank_dry_density_kg_m3
                dug[material] = dug.get(material, np.zeros(3)) + amount * self.cell_m2 * density
        for material, moments in dug.items():
            self._dig(f"{name} {material}", material, phase, moments)
        self._fill(name, phase, filled, scarified)

    def _material(self, stratum: int) -> str:
        return unlayered_material(self.model) if stratum < 0 else self.model.stratum[stratum].material

    def _dig(self, name: str, material: str, phase: int, moments: np.ndarray) -> None:
        mass = moments[0] * (1 - self.cards[material].loss_fraction)
        self.sources.append(
            Source(name=name, kind="cut", material=material, place=self._centre(moments), mass_kg=mass, phase=phase)
        )

    def _fill(
        self, name: str, phase: int, filled: dict[int, dict[int, np.ndarray]], scarified: dict[str, np.ndarray]
    ) -> None:
        """The parts of a block's fill; what scarifying takes (or gives) belongs to the one that no rule holds for."""
        rules = self.model.haul.rule if self.model.haul else ()
        extra = sum(scarified.values(), np.zeros(3))
        if extra[0] != 0.0:
            bands = filled.setdefault(len(rules), {})
            bands[-1] = bands.get(-1, np.zeros(3)) + extra
        for part, bands in sorted(filled.items()):
            total = sum(bands.values(), np.zeros(3))
            label = f"{name} fill" if part == len(rules) else f"{name} fill, {rules[part].name}"
            if total[0] < 0:
                self._give_bulking(label, min(scarified, key=lambda m: scarified[m][0]), phase, total)
                continue
            allowed = rules[part].materials if part < len(rules) else self.cards
            weights = {
                material: total[0] / self._band_mass(card, bands)
                for material in allowed
                if (card := self.cards[material]).use in ("fill", "rock") and card.fill_dry_density_kg_m3
            }
            self.sinks.append(
                Sink(
                    name=label, kind="fill", place=self._centre(total), volume_m3=float(total[0]), phase=phase,
                    m3_per_kg=weights,
                )
            )  # fmt: skip

    def _band_mass(self, card: SoilCard, bands: dict[int, np.ndarray]) -> float:
        """Dry mass that fills the bands of a part, each at its own density [kg]."""
        mass = 0.0
        for band, amount in bands.items():
            density = card.bands[band].fill_dry_density_kg_m3 if band >= 0 else None
            mass += float(amount[0]) * (density or card.fill_dry_density_kg_m3 or math.nan)
        return mass

    def _give_bulking(self, label: str, material: str, phase: int, moments: np.ndarray) -> None:
        """Ground that bulks when it is scarified fills more than the fill over it needs: the rest is hauled off."""
        mass = -float(moments[0]) * self.cards[material].dry_density_kg_m3("compacted")
        place = self._centre(moments)
        self.sources.append(
            Source(name=f"{label} bulking", kind="cut", material=material, place=place, mass_kg=mass, phase=phase)
        )

    def _section(self, name: str, phase: int, index: int, amount: np.ndarray) -> None:
        """A section that is made of the site's own soil."""
        section = self.model.section[index]
        if section.source not in self.cards:
            return
        card = self.cards[section.source]
        # Respread soil is loosely firmed; without a stated density it is taken at its bank density.
        density = card.fill_dry_density_kg_m3 or card.bank_dry_density_kg_m3
        self.sinks.append(
            Sink(
                name=f"{name} {section.name}", kind="fill", place=self._centre(amount),
                volume_m3=float(amount[0]) * self.cell_m2, phase=phase, m3_per_kg={section.source: 1 / density},
            )
        )  # fmt: skip

    def _centre(self, moments: np.ndarray) -> tuple[float, float]:
        """Centre of mass of an amount with its moments."""
        return self.areas.frame.of_cells(moments[1] / moments[0], moments[2] / moments[0])

    # --- lumps and places ----------------------------------------------------------------------------------------

    def _allowances(self) -> None:
        """Soil that no surface shows; without a place it lies in the middle of the cut."""
        unplaced = [a.name for a in self.model.allowance if a.at is None]
        if unplaced:
            names = ", ".join(f'"{name}"' for name in unplaced)
            self.warnings.append(
                Warning(
                    "place-assumed",
                    f"allowance {names}: no place is given; it is taken for the centre of the cut. Give at = [e, n]",
                )
            )
        middle = middle_of(self.sources, self.sinks)
        for allowance in self.model.allowance:
            card = self.cards[allowance.material]
            place = self._place(allowance.at) if allowance.at else middle
            mass = float(card.dry_mass_kg(abs(allowance.volume), allowance.state))
            if allowance.volume > 0:
                mass *= 1 - card.loss_fraction
                self.sources.append(
                    Source(name=allowance.name, kind="cut", material=card.material, place=place, mass_kg=mass, phase=0)
                )
            elif allowance.volume < 0:
                density = card.fill_dry_density_kg_m3 or card.bank_dry_density_kg_m3
                last = max(len(self.areas.phases) - 1, 0)
                self.sinks.append(
                    Sink(
                        name=allowance.name, kind="fill", place=place, volume_m3=mass / density, phase=last,
                        m3_per_kg={card.material: 1 / density},
                    )
                )  # fmt: skip

    def _drop_rounding(self) -> None:
        mass = sum(s.mass_kg for s in self.sources)
        volume = sum(s.volume_m3 for s in self.sinks)
        self.sources = [s for s in self.sources if s.mass_kg > _NOTHING * mass]
        self.sinks = [s for s in self.sinks if s.volume_m3 > _NOTHING * volume]

    def _place(self, at: tuple[float, float]) -> tuple[float, float]:
        east, north = self.areas.frame.local(np.array([at]))[0]
        return float(east), float(north)

    def _borrow(self) -> None:
        per_volume = 1 / self.units.factor("soil_volume")
        for pit in self.model.borrow:
            card = self.cards[pit.material]
            kept = 1 - card.loss_fraction
            if pit.price_per == "mass":
                price = pit.price / self.units.factor("mass")
            else:
                price = pit.price * per_volume / card.dry_density_kg_m3(pit.price_per)
            mass = math.inf if pit.capacity is None else pit.capacity * card.bank_dry_density_kg_m3 * kept
            self.sources.append(
                Source(
                    name=pit.name, kind="borrow", material=pit.material, place=self._place(pit.at), mass_kg=mass,
                    cost_per_kg=price / kept, opening=pit.opening,
                )
            )  # fmt: skip

    def _disposal(self) -> None:
        """Places that take what is over; without any the stockpiles do, or one that is assumed."""
        per_volume = 1 / self.units.factor("soil_volume")
        loose = {name: 1 / card.loose_dry_density_kg_m3 for name, card in self.cards.items()}
        for site in self.model.disposal:
            takes = {name: loose[name] for name in (site.accepts or self.cards)}
            self.sinks.append(
                Sink(
                    name=site.name, kind="disposal", place=self._place(site.at),
                    volume_m3=math.inf if site.capacity is None else site.capacity, m3_per_kg=takes,
                    cost_per_kg={name: site.price * per_volume * weight for name, weight in takes.items()},
                    opening=site.opening,
                )
            )  # fmt: skip
        if self.model.disposal:
            return
        for pile in self.model.stockpile:
            self.sinks.append(
                Sink(
                    name=pile.name, kind="stockpile", place=self._place(pile.at), m3_per_kg=loose,
                    volume_m3=math.inf if pile.capacity is None else pile.capacity,
                )
            )  # fmt: skip
        if not self.model.stockpile:
            self.sinks.append(
                Sink(
                    name=ON_SITE_STOCKPILE,
                    kind="disposal",
                    place=middle_of(self.sources, self.sinks),
                    volume_m3=math.inf,
                    m3_per_kg=loose,
                )
            )


def middle_of(sources: Sequence[Source], sinks: Sequence[Sink]) -> tuple[float, float]:
    """Centre of mass of the cut; of the fill where nothing is cut."""
    weights = [(s.mass_kg, s.place) for s in sources if s.kind == "cut"]
    weights = weights or [(s.volume_m3, s.place) for s in sinks if s.kind == "fill"]
    total = sum(w for w, _ in weights)
    if total <= 0:
        return 0.0, 0.0
    return sum(w * p[0] for w, p in weights) / total, sum(w * p[1] for w, p in weights) / total


def _told_apart(sources: Sequence[Source], sinks: Sequence[Sink]) -> tuple[tuple[Source, ...], tuple[Sink, ...]]:
    """The same places, with a number behind a name that another has: a zone may be called as a square is."""
    seen: dict[str, int] = {}

    def unique(name: str) -> str:
        seen[name] = seen.get(name, 0) + 1
        return name if seen[name] == 1 else unique(f"{name} ({seen[name]})")

    return (
        tuple(replace(source, name=unique(source.name)) for source in sources),
        tuple(replace(sink, name=unique(sink.name)) for sink in sinks),
    )
