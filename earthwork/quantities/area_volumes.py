"""Volumes of one area, from sums in cells: ground areas and volumes by layer and material."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

from earthwork.quantities.fields import Sums, field_names
from earthwork.quantities.site_ground import SiteGround


@dataclass(frozen=True)
class AreaVolumes:
    """Volumes of one zone, of what is outside all zones, or of the whole site; ground quantities."""

    zone: str | None
    area_m2: float
    cut_m3: float
    fill_m3: float
    cut_area_m2: float
    fill_area_m2: float
    max_cut_m: float
    max_fill_m: float
    missing_area_m2: float
    strip_m3: float
    section_m3: float
    over_excavation_m3: float
    scarify_m3: float
    strips: dict[str, float]  #: by material [m³ bank]
    sections: dict[str, float]  #: by name [m³]
    cut_by_material: dict[str, float]  #: [m³ bank]
    over_excavation_by_material: dict[str, float]  #: [m³ bank]
    scarify_by_material: dict[str, float]  #: [m³ compacted]
    bands_m3: tuple[float, ...]  #: compacted volume in each by_depth row
    disturbed_area_m2: float
    move_area_m2: float  #: what a grade shift moves; 0 where that was not asked
    unsplit_cut_m3: float
    unsplit_fill_m3: float

    @property
    def cut_minus_fill_m3(self) -> float:
        """Geometric difference, bank less compacted: not a balance."""
        return self.cut_m3 - self.fill_m3

    @property
    def mean_depth_m(self) -> float | None:
        """Mean of subgrade − stripped over the area with data."""
        return -self.cut_minus_fill_m3 / self.area_m2 if self.area_m2 > 0 else None

    @property
    def refill_and_fill_m3(self) -> float:
        """Compacted volume to be placed: fill and over-excavation refill."""
        return self.fill_m3 + self.over_excavation_m3

    def to_dict(self) -> dict[str, Any]:
        """The keys of the JSON document."""
        keys = ("area_m2", "cut_m3", "fill_m3", "cut_minus_fill_m3", "cut_area_m2", "fill_area_m2", "max_cut_m",
                "max_fill_m", "mean_depth_m", "missing_area_m2", "strip_m3", "section_m3", "over_excavation_m3",
                "scarify_m3")  # fmt: skip
        row: dict[str, Any] = {} if self.zone is None else {"zone": self.zone}
        row.update({key: getattr(self, key) for key in keys})
        row["materials"] = [{"material": name, "cut_m3": cut} for name, cut in self.cut_by_material.items()]
        return row


def area_volumes(ground: SiteGround, sums: Sums, zone: str | None, missing_area_m2: float) -> AreaVolumes:
    """Turn sums in cells into ground areas and volumes."""
    stack = ground.stack
    cell = stack.grid.cell_area_m2
    at = {name: float(value) * cell for name, value in zip(field_names(stack), sums.values, strict=True)}
    strips: dict[str, float] = {}
    for i, strip in enumerate(stack.strips):
        strips[strip.material] = strips.get(strip.material, 0.0) + at[f"strip{i}"]
    cut, dug, scarified = (dict.fromkeys(stack.materials, 0.0) for _ in range(3))
    for k, stratum in enumerate(stack.strata):
        cut[stratum.material] += at[f"cut:{k}"]
        dug[stratum.material] += at.get(f"over_excavation:{k}", 0.0)
        scarified[stratum.material] += at.get(f"scarify:{k}", 0.0)
    return AreaVolumes(
        zone=zone,
        area_m2=at["area"],
        cut_m3=at["cut"],
        fill_m3=at["fill"],
        cut_area_m2=at["cut_area"],
        fill_area_m2=at["fill_area"],
        max_cut_m=max(-sums.low_m, 0.0),
        max_fill_m=max(sums.high_m, 0.0),
        missing_area_m2=missing_area_m2,
        strip_m3=sum(strips.values()),
        section_m3=sum(at[f"section{i}"] for i in range(len(stack.sections))),
        over_excavation_m3=at.get("over_excavation", 0.0),
        scarify_m3=at.get("scarify", 0.0),
        strips=strips,
        sections={s.name: at[f"section{i}"] for i, s in enumerate(stack.sections)},
        cut_by_material=cut,
        over_excavation_by_material=dug,
        scarify_by_material=scarified,
        bands_m3=tuple(at[f"band{i}"] for i in range(len(stack.bands_below_m))),
        disturbed_area_m2=at["disturbed"],
        move_area_m2=at.get("move", 0.0),
        unsplit_cut_m3=at["plain_cut"],
        unsplit_fill_m3=at["plain_fill"],
    )
