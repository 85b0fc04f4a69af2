"""What it costs to haul a kilogram from each source to each sink, at once or over a stockpile."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from earthwork.plan import phases
from earthwork.plan.haul_places import Places, Sink, Source
from earthwork.plan.haul_ways import HaulWays
from earthwork.plan.trucks import Load, truck_load
from earthwork.site.haul_rules import ON_SITE_STOCKPILE
from earthwork.site.model import HaulTruck, SiteModel, Stockpile
from earthwork.soils.card import SoilCard

Array = np.ndarray


class HaulCosts:
    """Costs of hauls by distance, or by truck hours.

    A haul takes *units*: metres, or minutes out and back with what a load takes in any case. A kilogram of a material
    has a price per unit: the same for all by distance, less for what fills a truck better by time.
    """

    def __init__(
        self, model: SiteModel, cards: dict[str, SoilCard], places: Places, ways: HaulWays, piles: Sequence[Stockpile]
    ) -> None:
        assert model.haul is not None
        self.model = model
        self.haul = model.haul
        self.cards = cards
        self.places = places
        self.ways = ways
        self.piles = tuple(piles)
        self.from_place = np.array([s.place for s in places.sources], float).reshape(-1, 2)
        self.to_place = np.array([s.place for s in places.sinks], float).reshape(-1, 2)
        self.pile_place = ways.areas.frame.local(np.array([p.at for p in self.piles], float).reshape(-1, 2))
        self.dug = phases.phase_numbers([s.phase for s in places.sources])
        self.filled = phases.phase_numbers([s.phase for s in places.sinks])

    @property
    def by_time(self) -> bool:
        return self.haul.cost_by == "time"

    def price(self, material: str, *, on_road: bool = False) -> float:
        """Money for a kilogram of a material over one unit."""
        if not self.by_time:
            units = self.ways.units
            return self.haul.cost / (units.factor("mass") * units.factor("road"))
        truck = self.haul.truck
        assert truck is not None
        assert truck.hour_cost is not None
        carried = load_of(truck, self.cards[material], on_road=on_road).dry_mass_kg
        return truck.hour_cost / (60 * truck.efficiency * carried)

    def fixed_units(self, material: str) -> float:
        """Units that a haul of a material takes whatever its length: minutes to load, dump and wait."""
        truck = self.haul.truck
        if not self.by_time or truck is None:
            return 0.0
        return (load_minutes(self.model, self.cards[material]) or 0.0) + truck.dump_time + truck.wait_time

    def units(self, start: Array, end: Array, phase: Array) -> Array:
        """Metres, or minutes of travel out and back, from each start to each end; ``inf`` where there is no way."""
        length, minutes = self.ways.tables(start, end, phase)
        return length if minutes is None else minutes

    def per_kg(self) -> Array:
        """Cost of a kilogram from each source to each sink (n, m), over the best stockpile where it has to wait."""
        phase = phases.hauled_in(self.dug[:, None], self.filled[None, :])
        price = self._prices()
        fixed = np.array([self.fixed_units(s.material) for s in self.places.sources], float)
        cost = (self.units(self.from_place, self.to_place, phase) + fixed[:, None]) * price
        waiting = phases.waits(self.dug[:, None], self.filled[None, :])
        if waiting.any():
            rounds = self.rounds()
            cost = np.where(waiting, rounds.cost, cost)
        return cost

    def _prices(self) -> Array:
        """Money for a kilogram over one unit (n, m): loads to and from places off the site keep to the road's limit."""
        sources, sinks = self.places.sources, self.places.sinks
        site = np.array([self.price(s.material) for s in sources], float)[:, None]
        road = np.array([self.price(s.material, on_road=True) for s in sources], float)[:, None]
        comes = np.array([s.kind == "borrow" for s in sources], bool)
        leaves = np.array([off_site(s) for s in sinks], bool)
        off = comes[:, None] | leaves[None, :]
        return np.where(off, road, site)

    def rounds(self) -> phases.Rounds:
        """The cheapest way over a stockpile of each pair."""
        sources = self.places.sources
        n, m, k = len(self.from_place), len(self.to_place), len(self.piles)
        out = np.broadcast_to(np.maximum(self.dug, 0)[:, None], (n, k))
        home = np.broadcast_to(np.maximum(self.filled, 0)[None, :], (k, m))
        price = np.array([self.price(s.material) for s in sources])
        fixed = np.array([self.fixed_units(s.material) for s in sources])
        loose = np.array([1 / self.cards[s.material].loose_dry_density_kg_m3 for s in sources])
        again = loose[:, None] * self.rehandling[None, :]
        return phases.over_stockpiles(
            (self.units(self.from_place, self.pile_place, out) + fixed[:, None]) * price[:, None],
            self.units(self.pile_place, self.to_place, home), again, price=price, fixed=fixed,
        )  # fmt: skip

    @property
    def rehandling(self) -> Array:
        """Money for a loose m³ that is loaded again, by stockpile."""
        return np.array([p.rehandling for p in self.piles]) / self.ways.units.factor("soil_volume")


def off_site(place: Source | Sink) -> bool:
    """Whether what goes there leaves the site."""
    return place.kind in ("borrow", "disposal") and place.name != ON_SITE_STOCKPILE


def load_of(truck: HaulTruck, card: SoilCard, *, on_road: bool = False) -> Load:
    """A truck's load of a material; on public roads the legal payload holds."""
    payload = truck.road_payload if on_road and truck.road_payload is not None else truck.payload
    return truck_load(
        heaped_volume_m3=truck.heaped_volume, payload_kg=payload,
        loose_dry_density_kg_m3=card.loose_dry_density_kg_m3, moist_factor=card.loaded_moist_factor,
    )  # fmt: skip


def load_minutes(model: SiteModel, card: SoilCard) -> float | None:
    """Time to load a truck with a material [min]: as given, or by the bank volume that the plant digs in an hour."""
    truck = model.haul.truck if model.haul else None
    if truck is None:
        return None
    if truck.load_time is not None:
        return truck.load_time
    if model.plant.digging is None:
        return None
    return 60 * load_of(truck, card).dry_mass_kg / card.bank_dry_density_kg_m3 / model.plant.digging
