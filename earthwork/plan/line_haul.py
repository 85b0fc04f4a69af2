"""Haul along a baseline: its mass curve, what overhaul costs, and section volumes as a check of the grid."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from earthwork.plan.account import unlayered_material
from earthwork.plan.mass_curve import (
    MassCurve,
    Overhaul,
    average_end_area_m3,
    limit_of_economic_haul_m,
    prismoidal_m3,
)
from earthwork.quantities.haul_areas import HaulAreas
from earthwork.quantities.site_ground import SiteGround
from earthwork.quantities.stations import Baseline, SectionTally, StationTally
from earthwork.quantities.tile import Tile
from earthwork.site import Site
from earthwork.site.model import SiteModel
from earthwork.soils.card import SoilCard
from earthwork.units import UnitSystem

if TYPE_CHECKING:
    import pandas


class LineTally:
    """The tallies of a baseline as one."""

    def __init__(self, stations: StationTally, sections: SectionTally) -> None:
        self.stations = stations
        self.sections = sections

    @classmethod
    def of(cls, site: Site, ground: SiteGround, areas: HaulAreas) -> LineTally:
        """The tallies of a site's baseline."""
        spec, points = site.model.baseline, areas.baseline
        assert spec is not None
        assert points is not None
        line = Baseline.of(points, interval_m=spec.interval, width_m=spec.width)
        return cls(StationTally(ground.stack, line), SectionTally(ground.stack, line))

    def empty(self) -> LineTally:
        return LineTally(self.stations.empty(), self.sections.empty())

    def add(self, tile: Tile) -> None:
        self.stations.add(tile)
        self.sections.add(tile)

    def merge(self, other: LineTally) -> None:
        self.stations.merge(other.stations)
        self.sections.merge(other.sections)


@dataclass(frozen=True, kw_only=True)
class LineHaul:
    """The mass curve of a baseline.

    ``start_m``: station of its first point. ``sections_m2`` (2, 2k + 1): cut and fill of the cross-sections at stations
    and half-way. ``cut_m3``, ``fill_m3`` (k,): between stripped ground and subgrade, by the grid.
    """

    curve: MassCurve
    start_m: float
    station_m: float
    overhaul: Overhaul | None
    overhaul_cost: float | None
    economic_limit_m: float | None
    cut_m3: np.ndarray
    fill_m3: np.ndarray
    sections_m2: np.ndarray
    beyond_m3: tuple[float, float]  #: of the cut and the fill, what lies beyond the ends of the line
    outside_cut_m3: float
    outside_fill_m3: float

    @property
    def spacing_m(self) -> np.ndarray:
        return np.diff(self.curve.stations_m)

    def checks(self) -> dict[str, dict[str, float]]:
        """Cut and fill beside the line, not beyond its ends: by the grid, by end areas and by the prismoidal
        formula."""
        found = {}
        for i, (what, grid) in enumerate((("cut", self.cut_m3), ("fill", self.fill_m3))):
            ends, middles = self.sections_m2[i, ::2], self.sections_m2[i, 1::2]
            found[what] = {
                "grid_m3": float(grid.sum()) - self.beyond_m3[i],
                "end_area_m3": float(average_end_area_m3(ends, self.spacing_m).sum()),
                "prismoidal_m3": float(prismoidal_m3(ends, middles, self.spacing_m).sum()),
            }
        return found

    def to_dict(self) -> dict[str, Any]:
        curve, over = self.curve, self.overhaul
        return {
            "stations": self.table().to_dict("records"),
            "balance_points_m": [self.start_m + x for x in curve.balance_points_m],
            "hauled_compacted_m3": curve.volume_m3,
            "mean_haul_m": curve.mean_haul_m,
            "within_interval_m3": curve.within_m3,
            "rests": [
                {"kind": r.kind, "compacted_m3": r.volume_m3, "from_m": self.start_m + r.start_m,
                 "to_m": self.start_m + r.stop_m}
                for r in curve.rests
            ],
            "outside_cut_m3": self.outside_cut_m3,
            "outside_fill_m3": self.outside_fill_m3,
            "freehaul_m": over.freehaul_m if over else None,
            "freehaul_compacted_m3": over.freehaul_m3 if over else None,
            "overhaul_compacted_m3": over.volume_m3 if over else None,
            "overhaul_bank_m3": over.bank_m3 if over else None,
            "overhaul_bank_m3_stations": over.bank_stations(self.station_m) if over else None,
            "station_length_m": self.station_m,
            "overhaul_cost": self.overhaul_cost,
            "economic_limit_m": self.economic_limit_m,
            "check": self.checks(),
        }  # fmt: skip

    def table(self) -> pandas.DataFrame:
        """One row for each station: what lies between it and the one before, and the ordinate there."""
        import pandas as pd

        def at_end(values: np.ndarray) -> np.ndarray:
            return np.concatenate([[0.0], values])

        curve = self.curve
        return pd.DataFrame(
            {
                "station_m": self.start_m + curve.stations_m,
                "cut_bank_m3": at_end(curve.cut_m3),
                "cut_compacted_m3": at_end(curve.compacted_m3),
                "fill_compacted_m3": at_end(curve.fill_m3),
                "ordinate_compacted_m3": curve.ordinates_m3,
                "cut_area_m2": self.sections_m2[0, ::2],
                "fill_area_m2": self.sections_m2[1, ::2],
            }
        )


def line_haul(site: Site, cards: dict[str, SoilCard], tally: LineTally) -> LineHaul:
    """The mass curve of a baseline from tallies that have seen all of the ground.

    Only soils that are used as fill or rock stand in the curve; stripping, sections and allowances do not.
    """
    spec, model, stations = site.model.baseline, site.model, tally.stations
    assert spec is not None
    curve, cut, fill = _curve(model, cards, stations)
    cell = stations.stack.grid.cell_area_m2
    station = spec.station or _default_station(site.units)
    over = curve.overhaul(spec.freehaul) if spec.freehaul is not None else None
    price = None if spec.overhaul_price is None else spec.overhaul_price / site.units.factor("soil_volume")
    limit = None
    if spec.borrow_cost is not None and spec.overhaul_price is not None and spec.freehaul is not None:
        limit = limit_of_economic_haul_m(
            spec.freehaul, borrow_cost=spec.borrow_cost, overhaul_cost=spec.overhaul_price, station_m=station
        )
    beyond, outside = (_cut_and_fill(stations, sums * cell) for sums in (stations.beyond, stations.outside))
    return LineHaul(
        curve=curve,
        start_m=spec.start,
        station_m=station,
        overhaul=over,
        overhaul_cost=price * over.bank_stations(station) if price is not None and over is not None else None,
        economic_limit_m=limit,
        cut_m3=cut,
        fill_m3=fill,
        sections_m2=tally.sections.areas,
        beyond_m3=beyond,
        outside_cut_m3=outside[0],
        outside_fill_m3=outside[1],
    )


def _curve(
    model: SiteModel, cards: dict[str, SoilCard], stations: StationTally
) -> tuple[MassCurve, np.ndarray, np.ndarray]:
    """The mass curve, and cut and fill between stripped ground and subgrade by interval [m³]."""
    cell = stations.stack.grid.cell_area_m2
    count = len(stations.sums)
    dug, made, need, cut = (np.zeros(count) for _ in range(4))
    fill = np.zeros(count)
    for (what, index, _), amounts in zip(stations.channels, stations.sums.T * cell, strict=True):
        if what == "fill":
            need += amounts
            continue
        card = cards[unlayered_material(model) if index < 0 else model.stratum[index].material]
        factor = card.effective_factor
        if what == "scarify":
            need += amounts * (1 - (card.shrinkage_factor or 1.0))
        elif factor is not None and card.use in ("fill", "rock"):
            dug += amounts
            made += amounts * factor
        if what == "cut":
            cut += amounts
        elif what == "over_excavation":
            fill -= amounts
    fill += _of(stations, "fill") * cell
    curve = MassCurve(stations.line.edges, dug, made, need)
    return curve, cut, fill


def _cut_and_fill(stations: StationTally, sums: np.ndarray) -> tuple[float, float]:
    """Cut and fill between stripped ground and subgrade out of sums by channel."""
    found = dict.fromkeys(("cut", "fill", "over_excavation", "scarify"), 0.0)
    for (what, _, _), amount in zip(stations.channels, sums, strict=True):
        found[what] += float(amount)
    return found["cut"], found["fill"] - found["over_excavation"]


def _of(stations: StationTally, what: str) -> np.ndarray:
    return sum(
        (s for (name, _, _), s in zip(stations.channels, stations.sums.T, strict=True) if name == what),
        np.zeros(len(stations.sums)),
    )


def _default_station(units: UnitSystem) -> float:
    """100 m, or 100 ft."""
    return units.to_si(100.0, "length")
