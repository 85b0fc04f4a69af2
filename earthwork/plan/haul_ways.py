"""What it costs to haul a kilogram from each source to each sink, and the ways that are driven."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from functools import cached_property
from typing import Any

import numpy as np

from earthwork.errors import FileError, PlanError, Warning
from earthwork.plan.barriers import Barriers
from earthwork.plan.paths import Way, Ways, metres, seconds
from earthwork.plan.relief import Relief
from earthwork.plan.roads import Road, RoadNet
from earthwork.plan.trucks import Drive
from earthwork.quantities.haul_areas import HaulAreas
from earthwork.site.model import Haul, HaulTruck
from earthwork.units import UnitSystem

Array = np.ndarray
_YES = {"1", "true", "yes", "y", "t"}
_NO = {"0", "false", "no", "n", "f", ""}


@dataclass(frozen=True)
class HaulWays:
    """The ways of a site, phase by phase: ground that is built is a barrier afterwards."""

    haul: Haul
    units: UnitSystem
    areas: HaulAreas
    relief: Relief
    threads: int | None = None
    _made: dict[int, Any] = field(default_factory=dict)

    @cached_property
    def roads(self) -> RoadNet | None:
        """The haul roads."""
        if self.straight or not self.areas.roads:
            return None
        return RoadNet.of(roads_of(self.haul, self.units, self.areas), elevations=self.relief.at)

    @property
    def warnings(self) -> tuple[Warning, ...]:
        return self.roads.warnings if self.roads is not None else ()

    @property
    def straight(self) -> bool:
        """Whether distances run through everything, times a factor."""
        return self.haul.distance == "straight"

    @property
    def factor(self) -> float:
        """What lengths and times of the ways are multiplied by."""
        return self.haul.straight_factor if self.straight else 1.0

    @property
    def by_time(self) -> bool:
        """Whether hauls cost time rather than distance."""
        return self.haul.cost_by == "time"

    def at(self, phase: int) -> Ways:
        """The ways in a phase, loaded."""
        known = phase if any(built < phase for _, built in self.areas.built) else 0
        if known not in self._made:
            shapes = [*self.areas.barriers, *(shape for shape, built in self.areas.built if built < known)]
            shapes = [] if self.straight else shapes
            speed = self.haul.ground_speed or np.inf
            effort: Any = metres
            if self.by_time:
                effort = self._minutes(loaded_drive(self.haul.truck))
            elif self.roads is not None and self.haul.ground_speed:
                effort = seconds
            self._made[known] = Ways(
                Barriers.of(shapes), self.roads, effort=effort, ground_speed_m_s=speed, threads=self.threads
            )
        return self._made[known]

    def back_at(self, phase: int) -> Ways:
        """The ways in a phase, empty."""
        loaded = self.at(phase)
        return loaded.chosen_by(self._minutes(empty_drive(self.haul.truck))) if self.by_time else loaded

    def _minutes(self, drive: Drive) -> Any:
        def minutes(start: Array, end: Array, limit_m_s: Array) -> Array:
            return self.relief.minutes(drive, start, end, limit_m_s)

        return minutes

    def tables(self, sources: Array, sinks: Array, phase: Array) -> tuple[Array, Array | None]:
        """Lengths [m] (n, m) in the phase (n, m) of each haul, and where time counts minutes out and back."""
        length = np.full(phase.shape, np.inf)
        minutes = np.full(phase.shape, np.inf) if self.by_time else None
        for ways, back, rows, columns, where in self._by_ground(phase):
            out = ways.table(sources[rows], sinks[columns])
            here = np.ix_(rows, columns)
            length[here] = np.where(where[here], out.length, length[here])
            if minutes is not None:
                home = back.table(sinks[columns], sources[rows]).effort.T
                minutes[here] = np.where(where[here], out.effort + home, minutes[here])
        return self.factor * length, None if minutes is None else self.factor * minutes

    def _by_ground(self, phase: Array):
        """Ways with the rows and columns that use them: one set where no ground is closed."""
        if self.straight or not self.areas.built:
            phase = np.zeros_like(phase)
        for number in np.unique(phase):
            where = phase == number
            rows, columns = np.flatnonzero(where.any(axis=1)), np.flatnonzero(where.any(axis=0))
            back = self.back_at(int(number))
            yield self.at(int(number)), back, rows, columns, where

    def ways(self, sources: Array, sinks: Array, phase: Array, *, empty: bool = False) -> list[Way]:
        """The way of each haul that a table says is possible, phase (k,)."""
        if self.straight:
            return [Way(np.vstack([a, b]), np.array([-1])) for a, b in zip(sources, sinks, strict=True)]
        found: list[Way | None] = [None] * len(sources)
        for number in np.unique(phase):
            some = np.flatnonzero(phase == number)
            ways = self.back_at(int(number)) if empty else self.at(int(number))
            for k, way in zip(some, ways.ways(sources[some], sinks[some]), strict=True):
                found[int(k)] = way
        if any(way is None for way in found):
            raise PlanError("haul: a haul of the plan has no way back. Make a road of haul.roads two-way")
        return [way for way in found if way is not None]


def loaded_drive(truck: HaulTruck | None) -> Drive:
    """How a truck drives with a load."""
    assert truck is not None
    mass = None if truck.empty_mass is None else truck.empty_mass + truck.payload
    return _drive(truck, truck.speed_loaded, truck.speeds_loaded, mass)


def empty_drive(truck: HaulTruck | None) -> Drive:
    """How a truck drives without a load."""
    assert truck is not None
    return _drive(truck, truck.speed_empty or truck.speed_loaded, truck.speeds_empty, truck.empty_mass)


def _drive(truck: HaulTruck, limit: float | None, table: Sequence[tuple[float, float]], mass: float | None) -> Drive:
    return Drive(
        limit_m_s=limit or np.inf, rolling_percent=truck.rolling_resistance or 0.0, table=tuple(table),
        power_w=truck.power, mass_kg=mass, drive_efficiency=truck.drive_efficiency,
    )  # fmt: skip


def roads_of(haul: Haul, units: UnitSystem, areas: HaulAreas) -> list[Road]:
    """Roads from the lines of a file and the attributes that the site file names.

    Raises:
        FileError: an attribute that is not there, or with a value that makes no sense.
    """
    spec = haul.roads
    assert spec is not None
    found = []
    for line in areas.roads:
        speed = _number(line, spec.speed, "speed", above=0.0)
        limit = _number(line, spec.grade_limit, "grade_limit", above=0.0)
        capacity = _number(line, spec.capacity, "capacity", above=0.0)
        speed_m_s = spec.default_speed if speed is None else units.to_si(speed, "speed")
        parts = line.geometry.geoms if line.geometry.geom_type == "MultiLineString" else [line.geometry]
        for part in parts:
            found.append(
                Road(
                    name=line.name, points=np.asarray(part.coords)[:, :2],
                    speed_m_s=speed_m_s or haul.ground_speed or np.inf, one_way=_flag(line, spec.one_way),
                    grade_limit=None if limit is None else limit / 100, capacity_per_hour=capacity,
                )
            )  # fmt: skip
    return found


def _value(line: Any, attribute: str | None) -> Any:
    if attribute is None:
        return None
    if attribute not in line.attributes:
        from earthwork.files.paths import nearest

        raise FileError(
            f"{line.where}: there is no attribute {attribute!r}; {nearest(attribute, list(line.attributes))}"
        )
    value = line.attributes[attribute]
    missing = value is None or (isinstance(value, float | np.floating) and np.isnan(value))
    return None if missing else value


def _number(line: Any, attribute: str | None, key: str, *, above: float) -> float | None:
    value = _value(line, attribute)
    if value is None:
        return None
    try:
        number = float(value)
    except (TypeError, ValueError):
        number = np.nan
    if not number > above:
        raise FileError(
            f"{line.where}: {attribute} is {_shown(value)}; haul.roads.{key} must be a number over {above:g}. "
            "Leave it empty where it does not apply"
        )
    return number


def _flag(line: Any, attribute: str | None) -> bool:
    value = _value(line, attribute)
    text = "" if value is None else str(value).strip().lower()
    if text.removesuffix(".0") in _YES:
        return True
    if text.removesuffix(".0") in _NO:
        return False
    raise FileError(
        f"{line.where}: {attribute} is {_shown(value)}; haul.roads.one_way must be true or false, 1 or 0, yes or no"
    )


def _shown(value: Any) -> str:
    """A value as its file has it: 0.0, 'maybe'."""
    return repr(value.item() if isinstance(value, np.generic) else value)
