"""The lifts of a site, bottom up and in placing order: ``earthwork.lifts(site)``."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from pathlib import Path
from typing import TYPE_CHECKING, Any

from earthwork.errors import PlanError, SiteFileError, Warning
from earthwork.plan.account import account
from earthwork.plan.fill_areas import FillArea, fill_areas
from earthwork.plan.fill_mix import MixPart, placed_kg, pro_rata
from earthwork.plan.lift_rows import Lift, LiftMaker, totals
from earthwork.plan.lift_shapes import LiftShapes
from earthwork.plan.moisture import drying_on_the_way_points
from earthwork.plan.movements import settle
from earthwork.plan.schedule import DayPieces, placing_order, schedule
from earthwork.plan.work_days import WorkDays, work_days
from earthwork.quantities.engine import Progress, Tally, walk
from earthwork.quantities.lift_tally import LiftTally
from earthwork.quantities.placed_tests import site_cards
from earthwork.quantities.site_ground import SiteGround, open_site
from earthwork.quantities.volumes import VolumesResult, VolumesTally, volumes_result
from earthwork.results import Result
from earthwork.site import Site, load_site
from earthwork.soils.card import SoilCard, soil_warnings
from earthwork.units import FOOT_M

if TYPE_CHECKING:
    import pandas

_DEFAULT_LIFT_M = {"metric": 0.20, "us": 8 * FOOT_M / 12}
#: Lifts named in a warning; the rest is counted.
_NAMED = 6


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
    ledger_t: dict[str, float]  #: dry mass that the ledger puts into fill and refill, by material
    scarify_m3: float  #: compacted volume that scarifying takes: part of the ledger's fill, but of no lift
    volumes: VolumesResult
    cards: dict[str, SoilCard]
    shapes: LiftShapes

    @property
    def total(self) -> dict[str, Any]:
        return totals(self.lifts)

    @property
    def scarify_t(self) -> dict[str, float]:
        """Dry mass that makes up for what scarifying takes, by material: with the lifts it is the ledger's."""
        placed = sum(area.compacted_m3 for area in self.areas)
        share = self.scarify_m3 / (placed + self.scarify_m3) if placed > 0 else 0.0
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


def lifts(
    site: Site | str | Path,
    *,
    threads: int | None = None,
    progress: Progress | None = None,
    tallies: Sequence[Tally] = (),
) -> LiftsResult:
    """The lifts of a site: area, volume, mass, loads, rolling and water of each, in placing order.

    Args:
        site: a checked site, or the path of its file.
        threads, progress, tallies: as for :func:`earthwork.volumes`.

    Raises:
        EarthworkError: bad input; the message says what, where and how to mend it.
    """
    site = site if isinstance(site, Site) else load_site(site)
    if not site.model.stratum and not site.model.borrow:
        raise SiteFileError(
            f"{site.path or site.name}: lifts needs at least one [[stratum]] (what the cut is made of), "
            "or a [[borrow]] with its material"
        )
    cards = site_cards(site)
    thickness = lift_thickness_m(site, cards)
    ground = open_site(site)
    main, tally = VolumesTally(ground), LiftTally(ground.stack, thickness)
    walk(ground.stack, [main, tally, *tallies], threads=threads, progress=progress)
    return lifts_result(site, cards, ground, volumes_result(site, ground, main), tally)


def lifts_result(
    site: Site, cards: dict[str, SoilCard], ground: SiteGround, volumes: VolumesResult, tally: LiftTally
) -> LiftsResult:
    """The lifts from tallies that have seen all of the ground; see :func:`lifts`."""
    model = site.model
    areas = fill_areas(tally)
    here = account(model, cards, volumes.total)
    ledger = settle(model, cards, here, volumes.total).ledger
    middle = sum(a.bottom_m + a.benches[-1].top_m for a in areas) / (2 * len(areas)) if areas else 0.0
    work = work_days(site, ground.stack.grid, middle)
    drying = _drying_points(site, cards, work, tally.lift_m)
    mix = pro_rata(ledger, cards, volumes.total, drying)
    shapes = LiftShapes(tally)
    maker = _maker(site, tally.lift_m, areas, shapes)
    made = [lift for area in areas for lift in maker.lifts(area, mix)]
    ordered, days = _in_order(site, areas, made, work)
    return LiftsResult(
        units=site.units,
        warnings=tuple(
            dict.fromkeys(
                [*volumes.warnings, *soil_warnings(cards), *work.warnings, *_warnings(site, ordered, areas, cards)]
            )
        ),
        lifts=tuple(ordered),
        days=days,
        areas=areas,
        coarse_side=tally.coarse.side,
        coarse_side_m=tally.coarse.side_m,
        lift_m=tally.lift_m,
        loose_lift_m={p.material: tally.lift_m * _loose_ratio(p.card) for p in mix},
        material_rule="pro rata",
        mixes={area.name: mix for area in areas},
        rolled_m3_h=maker.rolled_m3_h,
        work=work,
        scarify_m3=here.scarify_m3,
        ledger_t={name: mass / 1000.0 for name, mass in placed_kg(ledger).items()},
        volumes=volumes,
        cards=cards,
        shapes=shapes,
    )


def lift_thickness_m(site: Site, cards: Mapping[str, SoilCard]) -> float:
    """Compacted thickness of a lift: as given, of the loose one by the first fill material, or the usual one.

    Raises:
        PlanError: thicker than a roller works.
    """
    fill = site.model.fill
    assert fill is not None
    if fill.lift_thickness is not None:
        thickness = fill.lift_thickness
    elif fill.loose_lift_thickness is not None:
        card = next((c for c in cards.values() if c.use == "fill"), None) or next(iter(cards.values()))
        thickness = fill.loose_lift_thickness / _loose_ratio(card)
    else:
        thickness = _DEFAULT_LIFT_M[site.units.name]
    for roller in site.model.roller:
        if roller.lift_limit is not None and thickness > roller.lift_limit * (1 + 1e-9):
            length = site.units.label("length")
            show = [site.units.from_si(v, "length") for v in (thickness, roller.lift_limit)]
            key = "loose_lift_thickness" if fill.lift_thickness is None and fill.loose_lift_thickness else "lift_thickness"
            raise PlanError(
                f"lifts: a lift is {show[0]:.3g} {length} compacted; the {roller.name} works at most {show[1]:.3g} "
                f"{length}. Give a thinner fill.{key}, or another roller"
            )
    return thickness


def _loose_ratio(card: SoilCard) -> float:
    """Loose thickness of a compacted one."""
    return float(card.dry_density_kg_m3("compacted") / card.loose_dry_density_kg_m3)


def _drying_points(site: Site, cards: Mapping[str, SoilCard], work: WorkDays, lift_m: float) -> float:
    """Water content lost between the cut and the lift [points]: given, or estimated from the time it lies open."""
    given = site.model.moisture
    if given.drying_on_the_way is not None:
        return given.drying_on_the_way
    water = site.model.water
    if given.exposed_time is None or water is None:
        return 0.0
    card = next((c for c in cards.values() if c.use == "fill"), None)
    if card is None:
        return 0.0
    rate = work.mean_mm_day / water.work_hours
    return drying_on_the_way_points(given.exposed_time, rate, lift_m * _loose_ratio(card), card.loose_dry_density_kg_m3)


def _maker(site: Site, lift_m: float, areas: Sequence[FillArea], shapes: LiftShapes) -> LiftMaker:
    model = site.model
    widths = {}
    if model.plant.least_width is not None:
        widths = {
            (area.name, number): shapes.widest_m(area, bench)
            for area in areas
            if not area.is_small
            for number, bench in enumerate(area.benches, start=1)
        }
    return LiftMaker(
        lift_m=lift_m,
        truck=model.haul.truck if model.haul else None,
        rollers=model.roller,
        least_area_m2=model.plant.least_area,
        least_width_m=model.plant.least_width,
        widths=widths,
    )


def _in_order(
    site: Site, areas: Sequence[FillArea], made: Sequence[Lift], work: WorkDays
) -> tuple[list[Lift], tuple[DayPieces, ...]]:
    """Lifts in the order that they are started, and the days that place them."""
    by_fill = [[lift for lift in made if lift.fill == area.name] for area in areas]
    volumes = [[lift.compacted_m3 for lift in fill] for fill in by_fill]
    order = placing_order(volumes, site.model.plant.fills_at_once)
    started = list(dict.fromkeys((fill, lift) for fill, lift, _ in order))
    index = {place: i for i, place in enumerate(started)}
    lifts = [by_fill[fill][lift] for fill, lift in started]
    if site.model.water is None:
        return lifts, ()
    pieces = [(index[fill, lift], volume) for fill, lift, volume in order]
    days = schedule(pieces, site.model.water.placing_rate, work.calendar, lead_days(site, lifts))
    placed: dict[int, list[int]] = {}
    for day in days:
        for i, _ in day.pieces:
            placed.setdefault(i, []).append(day.day.day)
    dated = [
        replace(lift, first_day=placed[i][0], last_day=placed[i][-1]) if i in placed else lift
        for i, lift in enumerate(lifts)
    ]
    return dated, days


def lead_days(site: Site, lifts: Sequence[Lift]) -> int:
    """Working days before the first lift on which the cut is wetted."""
    return site.model.moisture.pre_wet_days if any(lift.water_to_add_l > 0 for lift in lifts) else 0


def _warnings(
    site: Site, lifts: Sequence[Lift], areas: Sequence[FillArea], cards: Mapping[str, SoilCard]
) -> list[Warning]:
    found = []
    fill = site.model.fill
    assert fill is not None
    if fill.lift_thickness is None and fill.loose_lift_thickness is None:
        usual = site.units.from_si(_DEFAULT_LIFT_M[site.units.name], "length")
        found.append(
            Warning(
                "lift-thickness-assumed",
                f"fill.lift_thickness is not given: lifts of {usual:.2f} {site.units.label('length')}, compacted",
            )
        )
    for flag, code, what in (
        ("too small for the plant", "small-lifts", "are smaller than plant.least_area"),
        ("too narrow for the plant", "narrow-lifts", "are narrower than plant.least_width"),
    ):
        names = [f"{lift.fill} lift {lift.lift}" for lift in lifts if flag in lift.flags]
        if names:
            more = f" and {len(names) - _NAMED} more" if len(names) > _NAMED else ""
            found.append(
                Warning(
                    code, f"{', '.join(names[:_NAMED])}{more} {what}: place them with smaller plant, or by benching"
                )
            )
    return found
