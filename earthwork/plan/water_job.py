"""A watered job as numbers: what each day wants, hour by hour, what the supply gives, and how the tank stands."""

from __future__ import annotations

import datetime
import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import cached_property

from earthwork.plan.calendar import CalendarDay, WorkCalendar, work_share
from earthwork.plan.schedule import DayPieces, schedule
from earthwork.plan.water_supply import TankRun, run_tank, sequent_peak
from earthwork.plan.weather import OpenGround


@dataclass(frozen=True, kw_only=True)
class WaterJob:
    """Everything that the water of a job depends on; a remedy is a job with one of these changed.

    ``pieces`` are (index of the lift, compacted volume [m³]) in placing order and ``add_l`` the water to add to each
    lift [L/m³]. ``open_area_m2`` None is the day's volume / lift thickness.
    """

    pieces: tuple[tuple[int, float], ...]
    add_l_per_m3: tuple[float, ...]
    placing_m3_day: float
    work_hours: float
    calendar: WorkCalendar
    open_ground: Callable[[CalendarDay], OpenGround]
    lift_m: float
    open_area_m2: float | None = None
    waste_share: float = 0.0
    dust_l_day: float = 0.0
    pre_wet_days: int = 0
    in_cut_share: tuple[float, ...] = ()  #: of each lift's water, what is put on the cut; needed with pre_wet_days
    supply_l_s: float = 0.0
    supply_hours: float = 24.0
    supply_start: datetime.time | None = None
    standpipes: int = 1
    tank_l: float = 0.0
    tank_at_start_l: float = 0.0

    @cached_property
    def placed(self) -> tuple[DayPieces, ...]:
        """What is placed on each day."""
        return schedule(self.pieces, self.placing_m3_day, self.calendar, self.pre_wet_days)

    @cached_property
    def demands(self) -> tuple[DayDemand, ...]:
        """What each day wants."""
        compaction = self._compaction()
        return tuple(self._demand(day, water) for day, water in zip(self.placed, compaction, strict=True))

    def _compaction(self) -> list[float]:
        """Compaction water drawn on each day [L]; what is put on the cut is drawn so many working days ahead."""
        drawn = [0.0] * len(self.placed)
        working = [i for i, day in enumerate(self.placed) if day.day.kind == "work"]
        for n, i in enumerate(working):
            for lift, volume in self.placed[i].pieces:
                water = volume * self.add_l_per_m3[lift]
                ahead = water * self.in_cut_share[lift] if self.pre_wet_days else 0.0
                drawn[i] += water - ahead
                drawn[working[n - self.pre_wet_days]] += ahead
        return drawn

    def _demand(self, placed: DayPieces, compaction_l: float) -> DayDemand:
        day, volume = placed.day, placed.compacted_m3
        works = day.kind == "work"
        lost = self.open_ground(day)
        area = volume / self.lift_m if self.open_area_m2 is None else self.open_area_m2 if volume > 0 else 0.0
        return DayDemand(
            day=day,
            compacted_m3=volume,
            compaction_l=compaction_l,
            evaporation_l=lost.day_mm * area,
            dust_l=self.dust_l_day if works else 0.0,
            waste_share=self.waste_share,
            evaporation_mm=lost.day_mm,
            open_area_m2=area,
            work_hours=self.work_hours,
            lost_by_hour=lost.hours_mm,
        )

    @cached_property
    def hours(self) -> tuple[list[float], list[float]]:
        """(supply, demand) of every hour of the job [L]."""
        supply: list[float] = []
        demand: list[float] = []
        for day in self.demands:
            supply += self.supply_by_hour(day.day)
            demand += day.by_hour
        return supply, demand

    def supply_by_hour(self, day: CalendarDay) -> list[float]:
        """What the supply can give in each elapsed hour of a day [L]."""
        rate = self.supply_l_s * 3600.0 * self.standpipes
        return [rate * h for h in self.calendar.open_share(day, start=self.supply_start, hours=self.supply_hours)]

    @cached_property
    def run(self) -> TankRun:
        """The tank through the job."""
        supply, demand = self.hours
        return run_tank(supply, demand, volume=self.tank_l, at_start=self.tank_at_start_l)

    @property
    def shortfall_l(self) -> float:
        return math.fsum(self.run.shortfall)

    @property
    def is_short(self) -> bool:
        """Whether any hour goes short; a millilitre in a thousand litres is rounding."""
        _, demand = self.hours
        return self.shortfall_l > 1e-6 * max(1.0, math.fsum(demand))

    @property
    def tank_needed_l(self) -> float | None:
        """Smallest tank, full at the start, that bridges the job; None when supply over the job is below demand."""
        return sequent_peak(*self.hours)


@dataclass(frozen=True, kw_only=True)
class DayDemand:
    """Water of a day by its parts [L]."""

    day: CalendarDay
    compacted_m3: float
    compaction_l: float
    evaporation_l: float
    dust_l: float
    waste_share: float
    evaporation_mm: float
    open_area_m2: float
    work_hours: float
    lost_by_hour: tuple[float, ...]

    @property
    def waste_l(self) -> float:
        """A share of the three parts."""
        return self.waste_share * (self.compaction_l + self.evaporation_l + self.dust_l)

    @property
    def total_l(self) -> float:
        return self.compaction_l + self.evaporation_l + self.dust_l + self.waste_l

    @cached_property
    def by_hour(self) -> list[float]:
        """Demand of each elapsed hour [L]: in the hours of work, evenly; what evaporates follows the sun."""
        evaporation = spread(self.evaporation_l, self.day.hours, self.work_hours, self.lost_by_hour)
        rest = spread(self.compaction_l + self.dust_l, self.day.hours, self.work_hours)
        return [(1.0 + self.waste_share) * (a + b) for a, b in zip(evaporation, rest, strict=True)]


def spread(amount: float, hours: float, work_hours: float, weights: Sequence[float] | None = None) -> list[float]:
    """Spread an amount over the hours of work, evenly or by weight.

    >>> spread(30.0, 4.0, 2.5)
    [12.0, 12.0, 6.0, 0.0]
    """
    share = work_share(hours, work_hours)
    parts = share if weights is None else [s * w for s, w in zip(share, weights, strict=True)]
    whole = math.fsum(parts)
    if whole <= 0:
        parts, whole = share, math.fsum(share)
    return [amount * part / whole if whole > 0 else 0.0 for part in parts]
