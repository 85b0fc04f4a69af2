"""Lifts as the crew needs them: masses, volumes in each state, loads, water, rolling, and what is wrong with them."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import Any

from earthwork.plan.fill_areas import Bench, FillArea
from earthwork.plan.fill_mix import MixPart
from earthwork.plan.placing import roller_output_m3_h
from earthwork.site.model import HaulTruck, Roller


@dataclass(frozen=True, kw_only=True)
class Lift:
    """A lift of one fill area."""

    fill: str
    lift: int
    bench: Bench
    dry_mass_by_material_t: dict[str, float]
    bank_m3: float
    loose_m3: float
    loads: float | None
    water_to_add_l: float
    water_to_dry_l: float
    passes: float | None
    roller_hours: float | None
    width_m: float | None = None
    flags: tuple[str, ...] = ()
    first_day: int | None = None
    last_day: int | None = None

    @property
    def compacted_m3(self) -> float:
        return self.bench.compacted_m3

    @property
    def dry_mass_t(self) -> float:
        return math.fsum(self.dry_mass_by_material_t.values())

    def to_dict(self) -> dict[str, Any]:
        return {
            "fill": self.fill,
            "lift": self.lift,
            "bottom_m": self.bench.bottom_m,
            "top_m": self.bench.top_m,
            "area_m2": self.bench.area_m2,
            "compacted_m3": self.compacted_m3,
            "dry_mass_t": self.dry_mass_t,
            "bank_m3": self.bank_m3,
            "loose_m3": self.loose_m3,
            "loads": self.loads,
            "water_to_add_l": self.water_to_add_l,
            "water_to_dry_l": self.water_to_dry_l,
            "passes": self.passes,
            "roller_hours": self.roller_hours,
            "width_m": self.width_m,
            "flags": list(self.flags),
            "first_day": self.first_day,
            "last_day": self.last_day,
            "materials": [{"material": name, "dry_mass_t": mass} for name, mass in self.dry_mass_by_material_t.items()],
            "bands_m3": list(self.bench.bands_m3),
        }


@dataclass(frozen=True, kw_only=True)
class LiftMaker:
    """Turns benches into lifts: what they are made of, rolled and hauled with, and which are too small."""

    lift_m: float
    truck: HaulTruck | None
    rollers: tuple[Roller, ...]
    least_area_m2: float
    least_width_m: float | None
    widths: dict[tuple[str, int], float] = field(default_factory=dict)

    def lifts(self, area: FillArea, mix: Sequence[MixPart]) -> list[Lift]:
        """Lifts of a fill area, bottom up, all of one mix."""
        return [self._lift(area, number, bench, mix) for number, bench in enumerate(area.benches, start=1)]

    def _lift(self, area: FillArea, number: int, bench: Bench, mix: Sequence[MixPart]) -> Lift:
        masses = {part.material: part.dry_mass_kg(bench.compacted_m3, bench.bands_m3) for part in mix}
        waters = [part.water(bench.compacted_m3, bench.bands_m3) for part in mix]
        width = self.widths.get((area.name, number))
        rolled = self.rolled_m3_h
        return Lift(
            fill=area.name,
            lift=number,
            bench=bench,
            dry_mass_by_material_t={name: mass / 1000.0 for name, mass in masses.items()},
            bank_m3=math.fsum(masses[p.material] / p.card.bank_dry_density_kg_m3 for p in mix),
            loose_m3=math.fsum(masses[p.material] / p.card.loose_dry_density_kg_m3 for p in mix),
            loads=None if self.truck is None else math.fsum(p.loads(masses[p.material], self.truck) for p in mix),
            water_to_add_l=math.fsum(w.to_add_l_per_m3 for w in waters),
            water_to_dry_l=math.fsum(w.to_dry_l_per_m3 for w in waters),
            passes=max(r.passes for r in self.rollers) if self.rollers else None,
            roller_hours=None if rolled is None else bench.compacted_m3 / rolled,
            width_m=width,
            flags=() if area.is_small else self._flags(bench, width),
        )

    @property
    def rolled_m3_h(self) -> float | None:
        """Compacted volume that all rollers finish in an hour; None without rollers."""
        if not self.rollers:
            return None
        return sum(
            r.count * roller_output_m3_h(r.width, r.speed, self.lift_m, r.efficiency, r.passes) for r in self.rollers
        )

    def _flags(self, bench: Bench, width: float | None) -> tuple[str, ...]:
        flags = []
        if bench.area_m2 < self.least_area_m2:
            flags.append("too small for the plant")
        if width is not None and self.least_width_m is not None and width < self.least_width_m:
            flags.append("too narrow for the plant")
        return tuple(flags)


def totals(lifts: Sequence[Lift]) -> dict[str, Any]:
    """Sums of the lifts; None where a figure is not known of any."""
    keys = ("compacted_m3", "dry_mass_t", "bank_m3", "loose_m3", "loads", "water_to_add_l", "water_to_dry_l",
            "roller_hours")  # fmt: skip
    rows = [lift.to_dict() for lift in lifts]
    sums: dict[str, Any] = {
        key: None if any(row[key] is None for row in rows) else math.fsum(row[key] for row in rows) for key in keys
    }
    masses: dict[str, float] = {}
    for lift in lifts:
        for name, mass in lift.dry_mass_by_material_t.items():
            masses[name] = masses.get(name, 0.0) + mass
    sums["materials"] = [{"material": name, "dry_mass_t": mass} for name, mass in masses.items()]
    return sums
