"""Days of a watered job as they are shown: parts of the water, tank, shortfall, and what holds the day back first."""

from __future__ import annotations

import datetime
import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

from earthwork.plan.calendar import slot_hours
from earthwork.plan.lift_rows import Lift
from earthwork.plan.placing import first_limit
from earthwork.plan.water_job import DayDemand, WaterJob, spread
from earthwork.plan.water_supply import most_without_shortfall
from earthwork.site.model import Plant
from earthwork.soils.card import SoilCard

#: A shortfall under this share of an hour's demand is rounding.
_ROUNDING = 1e-9


@dataclass(frozen=True, kw_only=True)
class WaterDay:
    """A day of the job. ``limits`` are compacted volumes that each part of the work allows [m³], None where unknown."""

    demand: DayDemand
    supply_l: float
    drawn_l: float
    tank_end_l: float
    shortfall_l: float
    first_short_hour: int | None
    truck_loads: int | None
    limits: dict[str, float | None]
    water_to_dry_l: float

    @property
    def achievable_m3(self) -> float:
        """Of the day's volume, what all limits allow."""
        _, volume = first_limit(self.limits)
        planned = self.demand.compacted_m3
        return planned if volume is None else min(volume, planned)

    @property
    def limited_by(self) -> str:
        """The limit that is under the day's volume, or the placing rate; of a day that places nothing, why."""
        if self.demand.day.kind != "work":
            return self.demand.day.kind
        if self.demand.compacted_m3 == 0:
            return "pre-wetting"
        name, volume = first_limit(self.limits)
        planned = self.demand.compacted_m3
        return name if name and volume is not None and volume < planned * (1 - 1e-9) else "placing rate"

    def to_dict(self) -> dict[str, Any]:
        demand, day = self.demand, self.demand.day
        first, at = first_limit(self.limits)
        return {
            "day": day.day,
            "date": None if day.date is None else day.date.isoformat(),
            "kind": day.kind,
            "compacted_m3": demand.compacted_m3,
            "compaction_l": demand.compaction_l,
            "evaporation_l": demand.evaporation_l,
            "dust_l": demand.dust_l,
            "waste_l": demand.waste_l,
            "total_l": demand.total_l,
            "supply_l": self.supply_l,
            "drawn_l": self.drawn_l,
            "tank_end_l": self.tank_end_l,
            "shortfall_l": self.shortfall_l,
            "first_short_hour": self.first_short_hour,
            "achievable_m3": self.achievable_m3,
            "limited_by": self.limited_by,
            "held_back_first_by": first,
            "held_back_at_m3": at,
            "limits": dict(self.limits),
            "truck_loads": self.truck_loads,
            "evaporation_mm_day": demand.evaporation_mm,
            "open_area_m2": demand.open_area_m2,
            "water_to_dry_l": self.water_to_dry_l,
        }


@dataclass(frozen=True)
class DayLimits:
    """What the plant allows in a day of work, by the lifts that are placed on it."""

    plant: Plant
    cards: dict[str, SoilCard]
    lifts: Sequence[Lift]
    rolled_m3_h: float | None
    drying_m3_day: float | None
    fill_point_l: float | None  #: water that the trucks can fill in a day

    def of(self, job: WaterJob, index: int, tank_l: float) -> dict[str, float | None]:
        """Limits of day ``index`` of a job that has ``tank_l`` in its tank in the morning."""
        pieces = [(i, v) for i, v in job.placed[index].pieces if v > 0]
        if job.placed[index].day.kind != "work" or not pieces:
            return dict.fromkeys(("digging", "hauling", "water", "rolling", "drying"))
        hours = job.work_hours
        dug, loose = self._per_compacted(pieces)
        digging, hauling = self.plant.digging, self.plant.hauling
        return {
            "digging": None if digging is None or dug <= 0 else digging * hours / dug,
            "hauling": None if hauling is None or loose <= 0 else hauling * hours / loose,
            "water": self._water(job, index, tank_l),
            "rolling": None if self.rolled_m3_h is None else self.rolled_m3_h * hours,
            "drying": self.drying_m3_day,
        }

    def _per_compacted(self, pieces: Sequence[tuple[int, float]]) -> tuple[float, float]:
        """Bank volume dug, loss included, and loose volume hauled for a compacted volume [-]."""
        placed = math.fsum(v for _, v in pieces)
        dug = loose = 0.0
        for i, volume in pieces:
            lift = self.lifts[i]
            share = volume / lift.compacted_m3
            loose += share * lift.loose_m3
            for name, mass in lift.dry_mass_by_material_t.items():
                card = self.cards[name]
                dug += share * mass * 1000.0 / card.bank_dry_density_kg_m3 / (1.0 - card.loss_fraction)
        return dug / placed, loose / placed

    def _water(self, job: WaterJob, index: int, tank_l: float) -> float | None:
        demand = job.demands[index]
        per_m3 = demand.compaction_l / demand.compacted_m3 if demand.compacted_m3 else 0.0
        fixed = demand.dust_l
        by_hour = spread(per_m3, demand.day.hours, job.work_hours)
        evaporation = spread(
            demand.evaporation_l / demand.compacted_m3 if job.open_area_m2 is None else 0.0,
            demand.day.hours, job.work_hours, demand.lost_by_hour,
        )  # fmt: skip
        more = 1.0 + job.waste_share
        per_unit = [more * (a + b) for a, b in zip(by_hour, evaporation, strict=True)]
        held = [more * h for h in spread(fixed, demand.day.hours, job.work_hours)]
        if job.open_area_m2 is not None:
            lost = spread(demand.evaporation_l, demand.day.hours, job.work_hours, demand.lost_by_hour)
            held = [a + more * b for a, b in zip(held, lost, strict=True)]
        most = most_without_shortfall(
            job.supply_by_hour(demand.day), held, per_unit, volume=job.tank_l, at_start=tank_l
        )
        if self.fill_point_l is None or not any(per_unit):
            return most
        by_trucks = max(self.fill_point_l - math.fsum(held), 0.0) / math.fsum(per_unit)
        return by_trucks if most is None else min(most, by_trucks)


def water_days(job: WaterJob, limits: DayLimits, capacity_l: float | None) -> tuple[WaterDay, ...]:
    """The days of a job after its tank has been run through."""
    run, days = job.run, []
    at, tank = 0, job.tank_at_start_l
    for i, demand in enumerate(job.demands):
        count = len(slot_hours(demand.day.hours))
        part = slice(at, at + count)
        short = run.shortfall[part]
        dry = [
            volume / limits.lifts[k].compacted_m3 * limits.lifts[k].water_to_dry_l
            for k, volume in job.placed[i].pieces
            if limits.lifts[k].compacted_m3 > 0
        ]
        days.append(
            WaterDay(
                demand=demand,
                supply_l=math.fsum(job.supply_by_hour(demand.day)),
                drawn_l=math.fsum(run.drawn[part]),
                tank_end_l=run.level[at + count - 1],
                shortfall_l=_known(math.fsum(short), demand.total_l),
                first_short_hour=next((h + 1 for h, s in enumerate(short) if _known(s, demand.by_hour[h]) > 0), None),
                truck_loads=None if capacity_l is None else loads(demand.total_l, capacity_l),
                limits=limits.of(job, i, tank),
                water_to_dry_l=math.fsum(dry),
            )
        )
        at, tank = at + count, run.level[at + count - 1]
    return tuple(days)


def loads(litres: float, capacity_l: float) -> int:
    """Whole truck loads.

    >>> loads(30000.0, 15000.0), loads(30001.0, 15000.0)
    (2, 3)
    """
    return math.ceil(litres / capacity_l * (1 - 1e-12) - 1e-12)


def _known(shortfall: float, demand: float) -> float:
    return shortfall if shortfall > _ROUNDING * demand else 0.0


def hour_rows(job: WaterJob) -> list[dict[str, Any]]:
    """Every hour of the job: clock, supply, demand, tank, shortfall."""
    supply, demand = job.hours
    rows, at = [], 0
    for day in job.demands:
        for hour in range(len(slot_hours(day.day.hours))):
            clock = job.calendar.clock(day.day, hour)
            rows.append(
                {
                    "day": day.day.day,
                    "hour": hour + 1,
                    "clock": f"{clock:%Y-%m-%d %H:%M}" if isinstance(clock, datetime.datetime) else f"{clock:%H:%M}",
                    "supply_l": supply[at],
                    "demand_l": demand[at],
                    "drawn_l": job.run.drawn[at],
                    "tank_l": job.run.level[at],
                    "shortfall_l": job.run.shortfall[at],
                }
            )
            at += 1
    return rows
