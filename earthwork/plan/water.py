"""Compaction water of a site, day by day and hour by hour: ``earthwork.water(site)``."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import cached_property
from pathlib import Path
from typing import TYPE_CHECKING, Any

from earthwork.errors import SiteFileError
from earthwork.plan.drying import DryingOption
from earthwork.plan.fill_mix import MixPart
from earthwork.plan.lifts import LiftsResult, lead_days, lifts
from earthwork.plan.moisture import Wetting, water_need
from earthwork.plan.remedies import Remedy, remedies
from earthwork.plan.water_days import DayLimits, WaterDay, hour_rows, water_days
from earthwork.plan.water_job import WaterJob
from earthwork.plan.water_notes import drying_m3_day, drying_options, litres, water_warnings, wetting_of
from earthwork.plan.water_trucks import TruckPlan, truck_plan
from earthwork.quantities.engine import Progress, Tally
from earthwork.results import Result
from earthwork.site import Site, load_site
from earthwork.site.model import Water

if TYPE_CHECKING:
    import pandas


@dataclass(frozen=True)
class MaterialWater:
    """Water of one material of the fill, per compacted cubic metre above all depth rows."""

    part: MixPart
    wetting: Wetting

    def to_dict(self) -> dict[str, Any]:
        card, density = self.part.card, self.part.card.dry_density_kg_m3("compacted")
        need = water_need(density, self.part.arriving_percent, card.target_water_content_percent)
        bank = water_need(card.bank_dry_density_kg_m3, self.part.arriving_percent, card.target_water_content_percent)
        return {
            "material": self.part.material,
            "share_percent": 100.0 * self.part.share,
            "arriving_water_content_percent": self.part.arriving_percent,
            "target_water_content_percent": card.target_water_content_percent,
            "window_water_content_percent": (
                None if card.window_water_content_percent is None else list(card.window_water_content_percent)
            ),
            "water_to_add_l_per_m3": need.to_add_l_per_m3,
            "water_to_dry_l_per_m3": need.to_dry_l_per_m3,
            "water_to_add_bank_l_per_m3": bank.to_add_l_per_m3,
            "water_to_dry_bank_l_per_m3": bank.to_dry_l_per_m3,
            "water_on_lift_mm": self.wetting.lift_depth_mm,
            "in_lift_l_per_m3": self.wetting.in_lift_l_per_m3,
            "in_cut_l_per_m3": self.wetting.in_cut_l_per_m3,
            "lift_takes_l_per_m3": self.wetting.lift_takes_l_per_m3,
            "passes_in_lift": self.wetting.passes_in_lift,
        }


@dataclass(frozen=True, kw_only=True)
class WaterResult(Result):
    """Water of a job; see the JSON of ``water``."""

    materials: tuple[MaterialWater, ...]
    days: tuple[WaterDay, ...]
    job: WaterJob
    trucks: TruckPlan | None
    remedies: tuple[Remedy, ...]
    drying: tuple[DryingOption, ...]
    lifts: LiftsResult

    @property
    def peak_day_l(self) -> float:
        return max((day.demand.total_l for day in self.days), default=0.0)

    @property
    def first_short(self) -> WaterDay | None:
        """The first day that goes short."""
        return next((day for day in self.days if day.first_short_hour is not None), None)

    @property
    def standpipe_use_percent(self) -> float | None:
        """The peak day's water, of what the supply gives on that day in its hours."""
        if not self.days:
            return 0.0
        peak = max(self.days, key=lambda day: day.demand.total_l)
        return 100.0 * peak.demand.total_l / peak.supply_l if peak.supply_l > 0 else None

    @cached_property
    def tank_needed_l(self) -> float | None:
        return self.job.tank_needed_l

    @property
    def tank_note(self) -> str | None:
        if self.tank_needed_l is not None:
            return None
        supply = math.fsum(day.supply_l for day in self.days)
        demand = math.fsum(day.demand.total_l for day in self.days)
        return (
            f"the supply gives {litres(supply, self.units)} over the job, and {litres(demand, self.units)} are wanted: no "
            "tank helps, it takes a greater flow or a slower placing rate"
        )

    def to_dict(self) -> dict[str, Any]:
        short = self.first_short
        sums = {key: math.fsum(getattr(d.demand, key) for d in self.days) for key in _PARTS}
        return {
            "materials": [material.to_dict() for material in self.materials],
            "days": [day.to_dict() for day in self.days],
            "total_l": math.fsum(sums.values()),
            "totals": {
                **sums,
                "drawn_l": math.fsum(day.drawn_l for day in self.days),
                "shortfall_l": math.fsum(day.shortfall_l for day in self.days),
                "tank_start_l": self.job.tank_at_start_l,
                "tank_end_l": self.days[-1].tank_end_l if self.days else self.job.tank_at_start_l,
            },
            "peak_day_l": self.peak_day_l,
            "trucks": self.trucks.trucks if self.trucks else None,
            "truck_cycle_min": self.trucks.cycle_min if self.trucks else None,
            "truck_trips_per_day": self.trucks.trips_per_truck if self.trucks else None,
            "fill_point_use_percent": self.trucks.fill_point_use_percent if self.trucks else None,
            "standpipe_use_percent": self.standpipe_use_percent,
            "tank_needed_l": self.tank_needed_l,
            "tank_note": self.tank_note,
            "first_short_day": short.demand.day.day if short else None,
            "first_short_hour": short.first_short_hour if short else None,
            "first_short_clock": self._clock(short),
            "remedies": [remedy.to_dict() for remedy in self.remedies],
            "drying": [option.to_dict() for option in self.drying],
        }

    def _clock(self, short: WaterDay | None) -> str | None:
        if short is None or short.first_short_hour is None:
            return None
        clock = self.job.calendar.clock(short.demand.day, short.first_short_hour - 1)
        return clock.isoformat(timespec="minutes")

    def tables(self) -> dict[str, pandas.DataFrame]:
        import pandas as pd

        days = []
        for day in self.days:
            row = day.to_dict()
            row.update({f"allowed_by_{name}_m3": v for name, v in row.pop("limits").items()})
            days.append(row)
        materials = [m.to_dict() for m in self.materials]
        for row in materials:
            row["water_on_lift_l_m2"] = row.pop("water_on_lift_mm")
        for row in materials:
            window = row.pop("window_water_content_percent") or (None, None)
            row["driest_water_content_percent"], row["wettest_water_content_percent"] = window
        tables = {
            "days": pd.DataFrame(days),
            "hours": pd.DataFrame(hour_rows(self.job)),
            "materials": pd.DataFrame(materials),
        }
        if self.remedies:
            tables["remedies"] = pd.DataFrame([_remedy_row(r) for r in self.remedies])
        if self.drying:
            tables["drying"] = pd.DataFrame([o.to_dict() for o in self.drying])
        return tables


def _remedy_row(remedy: Remedy) -> dict[str, Any]:
    """A remedy with its flow in the unit that tables know."""
    row = remedy.to_dict()
    flow = row.pop("flow_l_s")
    return {**row, "flow_l_min": None if flow is None else 60.0 * flow}


_PARTS = ("compaction_l", "evaporation_l", "dust_l", "waste_l")


def water(
    site: Site | str | Path,
    *,
    threads: int | None = None,
    progress: Progress | None = None,
    tallies: Sequence[Tally] = (),
) -> WaterResult:
    """Water of a site by day and hour: demand, supply, tank, trucks, shortfall and what mends it.

    Args:
        site: a checked site, or the path of its file.
        threads, progress, tallies: as for :func:`earthwork.volumes`.

    Raises:
        EarthworkError: bad input; the message says what, where and how to mend it.
    """
    site = site if isinstance(site, Site) else load_site(site)
    if site.model.water is None:
        raise SiteFileError(f"{site.path or site.name}: water needs [water] with placing_rate and supply")
    return water_result(site, lifts(site, threads=threads, progress=progress, tallies=tallies))


def water_result(site: Site, placed: LiftsResult) -> WaterResult:
    """The water of lifts that are known; see :func:`water`."""
    given = site.model.water
    assert given is not None
    wettings = {part.material: wetting_of(site, part, placed.lift_m) for part in placed.mix}
    job = water_job(site, given, placed, wettings)
    peak = max((day.total_l for day in job.demands), default=0.0)
    trucks = _trucks(given, peak)
    drying = drying_options(site, placed)
    limits = DayLimits(
        plant=site.model.plant,
        cards=placed.cards,
        lifts=placed.lifts,
        rolled_m3_h=placed.rolled_m3_h,
        drying_m3_day=drying_m3_day(site, drying),
        fill_point_l=trucks.fill_point_loads * given.truck.capacity if trucks and given.truck else None,
    )
    days = water_days(job, limits, given.truck.capacity if given.truck else None)
    result = WaterResult(
        units=site.units,
        materials=tuple(MaterialWater(part, wettings[part.material]) for part in placed.mix),
        days=days,
        job=job,
        trucks=trucks,
        remedies=remedies(job),
        drying=drying,
        lifts=placed,
    )
    warnings = (*placed.warnings, *water_warnings(site, result))
    return WaterResult(**{**vars(result), "warnings": tuple(dict.fromkeys(warnings))})


def water_job(site: Site, given: Water, placed: LiftsResult, wettings: Mapping[str, Wetting]) -> WaterJob:
    """The job that the lifts make of a site's water."""
    tank, dust = given.tank, given.dust
    pieces = tuple(piece for day in placed.days for piece in day.pieces)
    volume = tank.volume if tank else 0.0
    held = volume if tank is None or tank.at_start is None else tank.at_start
    known: dict[int, Any] = {}

    def open_ground(day):
        if day.day not in known:
            known[day.day] = placed.work.open_ground(day)
        return known[day.day]

    return WaterJob(
        pieces=pieces,
        add_l_per_m3=tuple(lift.water_to_add_l / lift.compacted_m3 for lift in placed.lifts),
        in_cut_share=tuple(_in_cut(placed.mixes[lift.fill], wettings) for lift in placed.lifts),
        pre_wet_days=lead_days(site, placed.lifts),
        placing_m3_day=given.placing_rate,
        work_hours=given.work_hours,
        calendar=placed.work.calendar,
        open_ground=open_ground,
        lift_m=placed.lift_m,
        open_area_m2=given.open_area,
        waste_share=given.waste_percent / 100.0,
        dust_l_day=dust.area * dust.rate * dust.passes_per_day if dust else 0.0,
        supply_l_s=given.supply.flow,
        supply_hours=given.supply.hours,
        supply_start=given.supply.start,
        standpipes=given.supply.count,
        tank_l=volume,
        tank_at_start_l=held,
    )


def _in_cut(mix: Sequence[MixPart], wettings: Mapping[str, Wetting]) -> float:
    """Share of a lift's water that is put on the cut."""
    cut = math.fsum(p.share * wettings[p.material].in_cut_l_per_m3 for p in mix)
    lift = math.fsum(p.share * wettings[p.material].in_lift_l_per_m3 for p in mix)
    return cut / (cut + lift) if cut > 0 else 0.0


def _trucks(given: Water, peak_l: float) -> TruckPlan | None:
    truck = given.truck
    if truck is None:
        return None
    supply = given.supply.flow * given.supply.count
    flow, bays = truck.fill_flow or given.supply.flow, truck.bays
    if given.tank is None:
        flow = min(flow, supply)
        # without a tank the bays share the supply: no more fill at one time than it feeds at that flow
        bays = min(bays, math.floor(supply / flow * (1 + 1e-12))) if flow > 0 else bays
    return truck_plan(
        peak_l,
        capacity_l=truck.capacity,
        fill_flow_l_s=flow,
        bays=bays,
        travel_min=truck.travel_time,
        spread_min=truck.spread_time,
        work_min=60.0 * given.work_hours,
        efficiency=truck.efficiency,
    )
