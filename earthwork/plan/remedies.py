"""What mends a shortage of water: each remedy is worked out by running the job again with it."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from typing import Any

from earthwork.plan.water_job import WaterJob

_MOST_STANDPIPES = 20
_MOST_WORKING_DAYS = 1000  #: of the slowest rate that is tried
_STEPS = 40  #: bisections: a thousandth of a thousandth of the range and less


@dataclass(frozen=True, kw_only=True)
class Remedy:
    """One way to have water enough; the figure that belongs to it, None for the others."""

    remedy: str
    possible: bool
    note: str
    standpipes: int | None = None
    flow_l_s: float | None = None
    tank_l: float | None = None
    supply_hours: float | None = None
    placing_rate_per_day_m3: float | None = None
    working_days: int | None = None

    def to_dict(self) -> dict[str, Any]:
        return dict(vars(self))


def remedies(job: WaterJob) -> tuple[Remedy, ...]:
    """What would mend a job that goes short; none for one that does not."""
    if not job.is_short:
        return ()
    return (_standpipes(job), _flow(job), _tank(job), _hours(job), _rate(job))


def _standpipes(job: WaterJob) -> Remedy:
    name = "more standpipes"
    if job.supply_l_s > 0:
        for count in range(job.standpipes + 1, _MOST_STANDPIPES + 1):
            if not replace(job, standpipes=count).is_short:
                more = count - job.standpipes
                note = f"{more} more of the same flow" if more > 1 else "a second one of the same flow"
                return Remedy(remedy=name, possible=True, standpipes=count, note=note)
    return Remedy(remedy=name, possible=False, note=f"not even {_MOST_STANDPIPES} of them would do")


def _flow(job: WaterJob) -> Remedy:
    name = "a greater flow"
    if not any(job.hours[0]) and job.supply_l_s > 0:
        return Remedy(remedy=name, possible=False, note="the supply is never open during the job")
    high = max(job.supply_l_s * job.standpipes, 1e-6)
    for _ in range(60):
        if not replace(job, standpipes=1, supply_l_s=high).is_short:
            break
        high *= 2.0
    else:
        return Remedy(
            remedy=name, possible=False,
            note="no flow does: water is wanted in hours when the supply is shut and the tank cannot bridge",
        )  # fmt: skip
    flow = _least(lambda f: not replace(job, standpipes=1, supply_l_s=f).is_short, 0.0, high)
    return Remedy(remedy=name, possible=True, flow_l_s=flow, note="in all, in the same hours")


def _tank(job: WaterJob) -> Remedy:
    name = "a larger tank"
    size = job.tank_needed_l
    if size is None:
        return Remedy(remedy=name, possible=False, note="supply over the job is below demand: no tank helps")
    size = max(size, job.tank_l)
    filled = replace(job, tank_l=size, tank_at_start_l=size)
    if filled.is_short:  # rounding of the sequent peak
        size *= 1.0 + 1e-9
    return Remedy(remedy=name, possible=True, tank_l=size, note="full at the start")


def _hours(job: WaterJob) -> Remedy:
    name = "a longer fill window"
    if job.supply_hours >= 24:
        return Remedy(remedy=name, possible=False, note="the supply is open around the clock already")
    if replace(job, supply_hours=24.0).is_short:
        return Remedy(remedy=name, possible=False, note="not even 24 hours a day would do")
    hours = _least(lambda h: not replace(job, supply_hours=h).is_short, job.supply_hours, 24.0)
    return Remedy(remedy=name, possible=True, supply_hours=hours, note="a day, from the same time on")


def _rate(job: WaterJob) -> Remedy:
    name = "a slower placing rate"

    def enough(rate: float) -> bool:
        return not replace(job, placing_m3_day=rate).is_short

    volume = sum(v for _, v in job.pieces)
    slowest = max(job.placing_m3_day / 100.0, volume / _MOST_WORKING_DAYS)
    if not enough(slowest):
        return Remedy(
            remedy=name, possible=False,
            note="evaporation and dust alone take more than the supply gives; keep less ground open",
        )  # fmt: skip
    low, high = slowest, job.placing_m3_day
    for _ in range(_STEPS):
        middle = 0.5 * (low + high)
        low, high = (middle, high) if enough(middle) else (low, middle)
    days = sum(1 for day in replace(job, placing_m3_day=low).placed if day.day.kind == "work")
    now = sum(1 for day in job.placed if day.day.kind == "work")
    return Remedy(
        remedy=name, possible=True, placing_rate_per_day_m3=low, working_days=days,
        note=f"{days} working days instead of {now}",
    )  # fmt: skip


def _least(enough: Callable[[float], bool], low: float, high: float) -> float:
    """Smallest value that is enough, from above: ``high`` is enough, ``low`` is not."""
    for _ in range(_STEPS):
        middle = 0.5 * (low + high)
        low, high = (low, middle) if enough(middle) else (middle, high)
    return high
