"""What ``lifts`` gives: the lifts in placing order with their days, mixes and fill areas."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any

from earthwork.plan.fill_areas import FillArea
from earthwork.plan.fill_mix import MixPart
from earthwork.plan.lift_rows import Lift, totals
from earthwork.plan.lift_shapes import LiftShapes
from earthwork.plan.schedule import DayPieces
from earthwork.plan.work_days import WorkDays
from earthwork.quantities.volumes import VolumesResult
from earthwork.results import Result
from earthwork.soils.card import SoilCard

if TYPE_CHECKING:
    import pandas


@dataclass(frozen=True, kw_only=True)
class LiftsResult(Result):
    """Lifts in placing order, with the days that place them where a placing rate is given; see the JSON of ``lifts``."""

    lifts: tuple[Lift, ...]
    days: tuple[DayPieces, ...]
    areas: tuple[FillArea, ...]
    coarse_side: int  #: grid cells along a cell on which fill areas are told apart
    coarse_side_m: float
    lift_m: float
    loose_lift_m: dict[str, float]  #: by material: thickness as spread
    material_rule: str
    mixes: Mapping[str, tuple[MixPart, ...]]  #: by fill area
    rolled_m3_h: float | None
    work: WorkDays
    ledger_t: dict[str, float]  #: dry mass that the ledger, or the haul plan, puts into fill and refill, by material
    scarify_m3: float  #: compacted volume that scarifying takes: part of the ledger's fill, but of no lift
    volumes: VolumesResult
    cards: dict[str, SoilCard]
    shapes: LiftShapes
    own_kg: dict[str, float]  #: by material: dry mass of the site's own ground that fill can take, after loss
    imported_kg: dict[str, float]  #: likewise of what the ledger imports

    @property
    def total(self) -> dict[str, Any]:
        return totals(self.lifts)

    @property
    def mix(self) -> tuple[MixPart, ...]:
        """The materials of all fill, each with its share of it."""
        parts: dict[str, MixPart] = {}
        whole = sum(area.compacted_m3 for area in self.areas)
        for area in self.areas:
            for part in self.mixes[area.name]:
                known = parts[part.material].share if part.material in parts else 0.0
                parts[part.material] = replace(part, share=known + part.share * area.compacted_m3 / whole)
        return tuple(parts.values())

    @property
    def scarify_t(self) -> dict[str, float]:
        """Dry mass that makes up for what scarifying takes, by material: with the lifts it is the ledger's."""
        placed = sum(area.compacted_m3 for area in self.areas)
        share = self.scarify_m3 / (placed + self.scarify_m3) if placed > 0 and self.material_rule == "pro rata" else 0.0
        return {name: mass * share for name, mass in self.ledger_t.items()}

    def to_dict(self) -> dict[str, Any]:
        return {
            "lifts": [lift.to_dict() for lift in self.lifts],
            "total": self.total,
            "material_rule": self.material_rule,
            "lift_thickness_m": self.lift_m,
            "loose_lift_thickness": [{"material": name, "loose_m": loose} for name, loose in self.loose_lift_m.items()],
            "fills": [
                {
                    "fill": area.name,
                    "lifts": len(area.benches),
                    "bottom_m": area.bottom_m,
                    "top_m": area.benches[-1].top_m,
                    "compacted_m3": area.compacted_m3,
                }
                for area in self.areas
            ],
            "told_apart_on_m": self.coarse_side_m,
            "rolled_m3_per_hour": self.rolled_m3_h,
            "ledger": [{"material": name, "dry_mass_t": mass} for name, mass in self.ledger_t.items()],
            "scarify_m3": self.scarify_m3,
            "scarify": [{"material": name, "dry_mass_t": mass} for name, mass in self.scarify_t.items()],
            "days": [self._day(day) for day in self.days],
        }

    def _day(self, pieces: DayPieces) -> dict[str, Any]:
        day = pieces.day
        return {
            "day": day.day,
            "date": None if day.date is None else day.date.isoformat(),
            "kind": day.kind,
            "compacted_m3": pieces.compacted_m3,
            "lifts": [
                {"fill": self.lifts[i].fill, "lift": self.lifts[i].lift, "compacted_m3": volume}
                for i, volume in pieces.pieces
            ],
        }

    def tables(self) -> dict[str, pandas.DataFrame]:
        import pandas as pd

        rows = []
        for lift in self.lifts:
            row = lift.to_dict()
            row["flags"] = ", ".join(row["flags"])
            for part in row.pop("materials"):
                row[f"dry_mass_{part['material']}_t"] = part["dry_mass_t"]
            for i, band in enumerate(row.pop("bands_m3"), start=1):
                row[f"depth_row_{i}_m3"] = band
            rows.append(row)
        tables = {"lifts": pd.DataFrame(rows)}
        if self.days:
            tables["days"] = pd.DataFrame(
                [
                    {"day": day.day.day, "date": day.day.date, "kind": day.day.kind, **_piece(self.lifts, piece)}
                    for day in self.days
                    for piece in (day.pieces or ((None, 0.0),))
                ]
            )
        return tables


def _piece(lifts: Sequence[Lift], piece: tuple[int | None, float]) -> dict[str, Any]:
    index, volume = piece
    lift = None if index is None else lifts[index]
    return {
        "fill": lift.fill if lift else None,
        "lift": lift.lift if lift else None,
        "compacted_m3": volume,
    }
