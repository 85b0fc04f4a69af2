"""Trucks for a haul plan: cycles, how many match the loader, output, hours and cost, and the use of haul roads."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from earthwork.errors import Warning
from earthwork.plan.haul_moves import Move
from earthwork.plan.haul_ways import HaulWays
from earthwork.plan.trucks import loads_per_hour, match_factor, trucks_to_match
from earthwork.site.model import HaulTruck, SiteModel

if TYPE_CHECKING:
    import pandas


@dataclass(frozen=True, kw_only=True)
class FleetRow:
    """The trucks of one move. Times in minutes; None where the truck's speed or its loading time is not known."""

    from_name: str
    to_name: str
    material: str
    loads: float
    limited_by: str
    distance_m: float
    load_min: float | None
    haul_min: float | None
    dump_min: float
    return_min: float | None
    wait_min: float
    cycle_min: float | None
    trucks_to_match: float | None
    trucks: int | None
    match_factor: float | None
    loads_per_hour: float | None
    hours: float | None
    truck_hours: float | None
    cost: float | None

    def to_dict(self) -> dict[str, Any]:
        row = dict(self.__dict__)
        return {"from": row.pop("from_name"), "to": row.pop("to_name"), **row}


@dataclass(frozen=True, kw_only=True)
class RoadUse:
    """What a haul road carries over the job. ``use_percent``: loads an hour while it is used, of its capacity."""

    road: str
    dry_mass_t: float
    loads: float
    t_km: float
    use_percent: float | None


@dataclass(frozen=True, kw_only=True)
class Fleet:
    """The trucks of a plan; hours are those of one loader that serves the moves one after the other."""

    rows: tuple[FleetRow, ...]
    roads: tuple[RoadUse, ...]
    hours: float | None
    truck_hours: float | None
    cost: float | None
    most_trucks: int | None

    def to_dict(self) -> dict[str, Any]:
        return {
            "hours": self.hours,
            "truck_hours": self.truck_hours,
            "cost": self.cost,
            "most_trucks": self.most_trucks,
            "moves": [row.to_dict() for row in self.rows],
            "roads": [dict(road.__dict__) for road in self.roads],
        }

    def table(self) -> pandas.DataFrame:
        """One row for each move."""
        import pandas as pd

        return pd.DataFrame([row.to_dict() for row in self.rows])


def fleet_of(model: SiteModel, moves: Sequence[Move], ways: HaulWays) -> Fleet:
    """Trucks for the moves of a plan."""
    truck = model.haul.truck if model.haul else None
    assert truck is not None
    rows = tuple(_row(truck, move) for move in moves)
    return Fleet(
        rows=rows,
        roads=tuple(_road_use(moves, ways)),
        hours=_sum(row.hours for row in rows),
        truck_hours=_sum(row.truck_hours for row in rows),
        cost=_sum(row.cost for row in rows),
        most_trucks=max((row.trucks for row in rows if row.trucks is not None), default=None),
    )


def _sum(values) -> float | None:
    """Sum of values; None when one is not known or there are none."""
    known = list(values)
    return None if not known or any(v is None for v in known) else math.fsum(known)


def _row(truck: HaulTruck, move: Move) -> FleetRow:
    assert move.loads is not None
    assert move.limited_by is not None
    cycle = move.cycle
    load = cycle.load if cycle and cycle.load > 0 else None
    matched = trucks_to_match(cycle.total, load) if cycle and load else None
    count = truck.count or (math.ceil(matched - 1e-9) if matched else None)
    rate = hours = truck_hours = cost = None
    if cycle and count:
        rate = loads_per_hour(count, cycle.total, load or 0.0, efficiency=truck.efficiency)
        hours = move.loads / rate
        truck_hours = hours * count
        if truck.hour_cost is not None:
            cost = truck_hours * truck.hour_cost + hours * truck.loader_hour_cost
    return FleetRow(
        from_name=move.from_name,
        to_name=move.to_name,
        material=move.material,
        loads=move.loads,
        limited_by=move.limited_by,
        distance_m=move.distance_m,
        load_min=load,
        haul_min=cycle.haul if cycle else None,
        dump_min=truck.dump_time,
        return_min=cycle.back if cycle else None,
        wait_min=truck.wait_time,
        cycle_min=cycle.total if cycle else None,
        trucks_to_match=matched,
        trucks=count,
        match_factor=match_factor(count, cycle.total, load) if cycle and count and load else None,
        loads_per_hour=rate,
        hours=hours,
        truck_hours=truck_hours,
        cost=cost,
    )


def _road_use(moves: Sequence[Move], ways: HaulWays) -> list[RoadUse]:
    """What each haul road carries."""
    if ways.roads is None:
        return []
    found = []
    for index, road in enumerate(ways.roads.roads):
        users = [(move, float(_stretches(move)[move.roads == index].sum())) for move in moves]
        users = [(move, length) for move, length in users if length > 0]
        rates = [rate for move, _ in users if (rate := _rate(ways, move)) is not None]
        use = None
        if road.capacity_per_hour is not None and users and len(rates) == len(users):
            use = 100 * max(rates) / road.capacity_per_hour
        found.append(
            RoadUse(
                road=road.name,
                dry_mass_t=math.fsum(move.dry_mass_t for move, _ in users),
                loads=math.fsum(move.loads or 0.0 for move, _ in users),
                t_km=math.fsum(move.dry_mass_t * length / 1000 for move, length in users),
                use_percent=use,
            )
        )
    return found


def road_warnings(fleet: Fleet | None, moves: Sequence[Move], ways: HaulWays) -> list[Warning]:
    """Haul roads that would carry more loads an hour than they take, and those whose use cannot be told."""
    if ways.roads is None:
        return []
    limited = [(k, road) for k, road in enumerate(ways.roads.roads) if road.capacity_per_hour is not None]
    driven = [(k, road) for k, road in limited if any((move.roads == k).any() for move in moves)]
    use = {k: fleet.roads[k].use_percent if fleet else None for k, _ in driven}
    found = [
        Warning(
            "road-over-capacity",
            f'haul road "{road.name}": {percent / 100 * road.capacity_per_hour:.3g} loads an hour where it takes '
            f"{road.capacity_per_hour:.3g}; the plan does not mind. Take fewer trucks (haul.truck.count), or widen it",
        )
        for k, road in driven
        if road.capacity_per_hour is not None and (percent := use[k]) is not None and percent > 100 * (1 + 1e-9)
    ]
    blind = dict.fromkeys(f'"{road.name}"' for k, road in driven if use[k] is None)
    if blind:
        found.append(
            Warning(
                "road-capacity-unchecked",
                f"haul road {', '.join(blind)}: loads an hour are not known, so its capacity is not checked. "
                "Give haul.truck its speed_loaded and load_time or count",
            )
        )
    return found


def _stretches(move: Move) -> np.ndarray:
    return np.hypot(*np.diff(move.points, axis=0).T)


def _rate(ways: HaulWays, move: Move) -> float | None:
    truck = ways.haul.truck
    return _row(truck, move).loads_per_hour if truck else None
