"""Water trucks: their cycle, whole trips, whole trucks, and the queue at the fill point."""

from __future__ import annotations

import math
from dataclasses import dataclass

from earthwork.errors import PlanError


@dataclass(frozen=True, kw_only=True)
class TruckPlan:
    """Trucks for the peak day; ``cycle_min`` is at efficiency 1."""

    trucks: int
    loads: int
    trips_per_truck: int
    cycle_min: float
    fill_min: float
    fill_point_use_percent: float
    fill_point_loads: int

    @property
    def fill_point_is_short(self) -> bool:
        """Whether the fill point cannot fill the peak day's loads, however many trucks there are."""
        return self.loads > self.fill_point_loads


def fill_minutes(capacity_l: float, flow_l_s: float) -> float:
    """Minutes to fill a truck.

    >>> fill_minutes(15000.0, 50.0)
    5.0
    """
    if not flow_l_s > 0:
        raise PlanError(f"water truck: fill flow is {flow_l_s:g} L/s; it must be more than 0")
    return capacity_l / flow_l_s / 60.0


def truck_plan(
    peak_day_l: float,
    *,
    capacity_l: float,
    fill_flow_l_s: float,
    bays: int,
    travel_min: float,
    spread_min: float,
    work_min: float,
    efficiency: float,
) -> TruckPlan:
    """Trucks that carry the peak day's water; method.md 16.

    ``trucks = ⌈⌈water / capacity⌉ / ⌊work minutes × efficiency / cycle⌋⌉`` with whole trips and whole loads.
    Where that many trucks would queue, n trucks come round every ``max(cycle, n × fill / bays)`` minutes and
    the trips shrink; the smallest n that still carries all loads is taken.

    Raises:
        PlanError: a trip takes longer than the working day.

    >>> truck = dict(capacity_l=15000, fill_flow_l_s=3500 / 60, bays=1, travel_min=12, spread_min=8)
    >>> p = truck_plan(306000.0, **truck, work_min=600, efficiency=0.83)
    >>> p.trucks, p.loads, p.trips_per_truck, round(p.cycle_min, 2)
    (2, 21, 20, 24.29)
    """
    fill = fill_minutes(capacity_l, fill_flow_l_s)
    cycle = fill + travel_min + spread_min
    minutes = work_min * efficiency
    trips = _floor(minutes / cycle)
    if trips < 1:
        raise PlanError(
            f"water truck: a trip takes {cycle:.1f} min and the day has {minutes:.1f} min at efficiency "
            f"{efficiency:g}; it must fit in. Shorten the trip, fill faster, or work longer"
        )
    loads = _ceil(peak_day_l / capacity_l)
    point = bays * _floor(minutes / fill)
    count = max(-(-loads // trips), 1 if loads else 0)
    trucks, per_truck = _with_queue(count, loads, cycle, fill, bays, minutes)
    return TruckPlan(
        trucks=trucks,
        loads=loads,
        trips_per_truck=per_truck,
        cycle_min=cycle,
        fill_min=fill,
        fill_point_use_percent=100.0 * loads * fill / (bays * minutes),
        fill_point_loads=point,
    )


def _with_queue(count: int, loads: int, cycle: float, fill: float, bays: int, minutes: float) -> tuple[int, int]:
    """Trucks and trips of each from ``count`` on, when n trucks share the bays; see :func:`truck_plan`."""
    enough = max(count, _ceil(cycle * bays / fill))  # more than this only wait longer
    for n in range(count, enough + 1):
        trips = _floor(minutes / max(cycle, n * fill / bays))
        if n * trips >= loads:
            return n, trips
    return enough, _floor(minutes / max(cycle, enough * fill / bays))


def payload_notes(
    capacity_l: float,
    *,
    payload_kg: float | None,
    empty_kg: float | None,
    road_limit_kg: float | None,
) -> list[tuple[str, float]]:
    """What a full tank breaks: (what, most litres that keep it); empty when nothing is broken or known.

    >>> payload_notes(15000, payload_kg=14000, empty_kg=12000, road_limit_kg=26000)
    [('the payload of 14,000 kg', 14000.0), ('the road limit of 26,000 kg gross', 14000.0)]
    """
    broken = []
    if payload_kg is not None and capacity_l > payload_kg:
        broken.append((f"the payload of {payload_kg:,.0f} kg", float(payload_kg)))
    if empty_kg is not None and road_limit_kg is not None and capacity_l > road_limit_kg - empty_kg:
        broken.append((f"the road limit of {road_limit_kg:,.0f} kg gross", float(road_limit_kg - empty_kg)))
    return broken


def _floor(x: float) -> int:
    """Floor that forgives the last digit: 20.000000000000004 and 19.999999999999996 are both 20."""
    return math.floor(x * (1 + 1e-12) + 1e-12)


def _ceil(x: float) -> int:
    return math.ceil(x * (1 - 1e-12) - 1e-12)
