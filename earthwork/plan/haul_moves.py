"""The moves of a plan: how far, up and down, in how many loads, how long a truck takes, at what cost."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from earthwork.plan.haul_costs import HaulCosts, load_minutes, load_of, off_site
from earthwork.plan.haul_plan import HaulPlan, Leg
from earthwork.plan.haul_ways import empty_drive, loaded_drive
from earthwork.plan.paths import Way
from earthwork.plan.trucks import Cycle

Array = np.ndarray


@dataclass(frozen=True, kw_only=True)
class Move:
    """Earth of one material that goes from one place to another; masses and volumes as delivered, after loss.

    ``loads``, ``limited_by`` are None without a truck; ``cycle`` where its speed is not known. ``points`` (k, 2) and
    ``roads`` (k − 1,) are the way driven, see :class:`earthwork.plan.paths.Way`.
    """

    from_name: str
    to_name: str
    material: str
    dry_mass_t: float
    bank_m3: float
    compacted_m3: float | None
    loose_m3: float
    distance_m: float
    rise_m: float
    fall_m: float
    unknown_m: float  #: length over ground of unknown height
    loads: float | None
    limited_by: str | None
    cost: float
    phase: str | None
    cycle: Cycle | None
    points: Array
    roads: Array

    def to_dict(self) -> dict[str, Any]:
        return {
            "from": self.from_name,
            "to": self.to_name,
            "material": self.material,
            "dry_mass_t": self.dry_mass_t,
            "bank_m3": self.bank_m3,
            "compacted_m3": self.compacted_m3,
            "loose_m3": self.loose_m3,
            "distance_m": self.distance_m,
            "loads": self.loads,
            "limited_by": self.limited_by,
            "rise_m": self.rise_m,
            "fall_m": self.fall_m,
            "cost": self.cost,
            "phase": self.phase,
            "cycle_min": self.cycle.total if self.cycle else None,
        }


def moves_of(costs: HaulCosts, plan: HaulPlan) -> tuple[Move, ...]:
    """The moves of a plan, the heaviest first within each phase."""
    legs = sorted(plan.legs, key=lambda leg: (leg.phase, -leg.mass_kg, leg.from_name, leg.to_name))
    if not legs:
        return ()
    start, end = np.array([leg.start for leg in legs]), np.array([leg.end for leg in legs])
    phase = np.array([leg.phase for leg in legs])
    ways = costs.ways.ways(start, end, phase)
    timed = costs.haul.truck is not None and costs.haul.truck.speed_loaded is not None
    back: Sequence[Way | None] = costs.ways.ways(end, start, phase, empty=True) if timed else [None] * len(legs)
    return tuple(_Describer(costs).move(leg, way, home) for leg, way, home in zip(legs, ways, back, strict=True))


class _Describer:
    def __init__(self, costs: HaulCosts) -> None:
        self.costs = costs
        self.truck = costs.haul.truck
        self.factor = costs.ways.factor

    def move(self, leg: Leg, way: Way, back: Way | None) -> Move:
        source, sink = self.costs.places.sources[leg.source], self.costs.places.sinks[leg.sink]
        card = self.costs.cards[source.material]
        mass = leg.mass_kg
        arrives = leg.to_name == sink.name
        if arrives and sink.kind == "fill":
            compacted: float | None = mass * sink.m3_per_kg[source.material]
        else:
            density = card.fill_dry_density_kg_m3
            compacted = None if density is None else mass / density
        on_road = (off_site(source) and leg.pile is None) or (arrives and off_site(sink))
        load = load_of(self.truck, card, on_road=on_road) if self.truck else None
        rise, fall, unknown = self.costs.ways.relief.rise_and_fall(way.points)
        cycle = self._cycle(way, back, card) if back is not None else None
        phases = self.costs.ways.areas.phases
        return Move(
            from_name=leg.from_name,
            to_name=leg.to_name,
            material=source.material,
            dry_mass_t=mass / 1000,
            bank_m3=mass / card.bank_dry_density_kg_m3,
            compacted_m3=compacted,
            loose_m3=mass / card.loose_dry_density_kg_m3,
            distance_m=self.factor * way.length_m,
            rise_m=rise,
            fall_m=fall,
            unknown_m=unknown,
            loads=mass / load.dry_mass_kg if load else None,
            limited_by=load.limited_by if load else None,
            cost=mass * self._cost_per_kg(leg, way, cycle, on_road),
            phase=phases[leg.phase] if phases else None,
            cycle=cycle,
            points=way.points,
            roads=way.road,
        )

    def _cost_per_kg(self, leg: Leg, way: Way, cycle: Cycle | None, on_road: bool) -> float:
        """Haul, rehandling, and the prices of the places where it begins and ends."""
        source, sink = self.costs.places.sources[leg.source], self.costs.places.sinks[leg.sink]
        price = self.costs.price(source.material, on_road=on_road)
        if self.costs.by_time:
            assert cycle is not None
            cost = price * (cycle.haul + cycle.back + self.costs.fixed_units(source.material))
        else:
            cost = price * self.factor * way.length_m
        if leg.pile is None:
            cost += source.cost_per_kg
        else:
            cost += self.costs.rehandling[leg.pile] / self.costs.cards[source.material].loose_dry_density_kg_m3
        if leg.to_name == sink.name:
            cost += sink.cost_per_kg.get(source.material, 0.0)
        return float(cost)

    def _cycle(self, way: Way, back: Way, card: Any) -> Cycle:
        truck = self.truck
        assert truck is not None
        return Cycle(
            load=load_minutes(self.costs.model, card) or 0.0,
            haul=self.factor * self._minutes(way, loaded=True),
            dump=truck.dump_time,
            back=self.factor * self._minutes(back, loaded=False),
            wait=truck.wait_time,
        )

    def _minutes(self, way: Way, *, loaded: bool) -> float:
        """Time over a way, within the limits of the ground and of its roads."""
        ground = self.costs.haul.ground_speed or math.inf
        roads = self.costs.ways.roads
        limits = [ground if r < 0 or roads is None else roads.roads[r].speed_m_s for r in way.road.tolist()]
        drive = loaded_drive(self.truck) if loaded else empty_drive(self.truck)
        relief = self.costs.ways.relief
        return float(relief.minutes(drive, way.points[:-1], way.points[1:], np.array(limits)).sum())
