"""The lifts of a site, bottom up and in placing order: ``earthwork.lifts(site)``."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from pathlib import Path
from typing import TYPE_CHECKING

from earthwork.errors import PlanError, SiteFileError, Warning
from earthwork.plan.account import account
from earthwork.plan.fill_areas import FillArea, fill_areas
from earthwork.plan.fill_mix import MixPart, placed_kg, pro_rata
from earthwork.plan.lift_materials import planned_mixes
from earthwork.plan.lift_rows import Lift, LiftMaker
from earthwork.plan.lift_shapes import LiftShapes
from earthwork.plan.lifts_result import LiftsResult
from earthwork.plan.mix_supply import free_kg
from earthwork.plan.moisture import drying_on_the_way_points
from earthwork.plan.movements import settle
from earthwork.plan.schedule import DayPieces, placing_order, schedule
from earthwork.plan.work_days import WorkDays, work_days
from earthwork.quantities.engine import Progress, Tally, walk
from earthwork.quantities.lift_tally import LiftTally
from earthwork.quantities.placed_tests import site_cards
from earthwork.quantities.site_ground import SiteGround, open_site
from earthwork.quantities.volumes import VolumesResult, VolumesTally, volumes_result
from earthwork.site import Site, load_site
from earthwork.soils.card import SoilCard, soil_warnings
from earthwork.units import FOOT_M

if TYPE_CHECKING:
    from earthwork.plan.haul import HaulTallies

_DEFAULT_LIFT_M = {"metric": 0.20, "us": 8 * FOOT_M / 12}
#: Lifts named in a warning; the rest is counted.
_NAMED = 6


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
    hauled = _haul_tallies(site, cards, ground)
    # lifts first: on plain ground the volumes come of the same rows
    asked: list[Tally] = [tally, main, *(hauled.all if hauled else []), *tallies]
    walk(ground.stack, asked, threads=threads, progress=progress)
    return lifts_result(site, cards, ground, volumes_result(site, ground, main), tally, hauled, threads=threads)


def _haul_tallies(site: Site, cards: Mapping[str, SoilCard], ground: SiteGround) -> HaulTallies | None:
    """What the haul plan asks of the ground; None where there is no plan, or it makes no difference to the lifts."""
    if site.model.haul is None or sum(card.use in ("fill", "rock") for card in cards.values()) < 2:
        return None
    from earthwork.plan.haul import HaulTallies

    return HaulTallies(site, ground)


def lifts_result(
    site: Site,
    cards: dict[str, SoilCard],
    ground: SiteGround,
    volumes: VolumesResult,
    tally: LiftTally,
    hauled: HaulTallies | None = None,
    *,
    threads: int | None = None,
) -> LiftsResult:
    """The lifts from tallies that have seen all of the ground; see :func:`lifts`.

    Args:
        hauled: what a haul plan needs; None mixes all materials pro rata.
    """
    model = site.model
    areas = fill_areas(tally)
    here = account(model, cards, volumes.total)
    ledger = settle(model, cards, here, volumes.total).ledger
    middle = sum(a.bottom_m + a.benches[-1].top_m for a in areas) / (2 * len(areas)) if areas else 0.0
    work = work_days(site, ground.stack.grid, middle)
    drying = _drying_points(site, cards, work, tally.lift_m)
    even = pro_rata(ledger, cards, volumes.total, drying)
    rated = _Mixed({area.name: even for area in areas}, "pro rata", placed_kg(ledger))
    mixed = _mixed(site, cards, volumes, tally, areas, rated, drying, hauled, threads)
    parts = {part.material: part for mix in mixed.mixes.values() for part in mix}
    shapes = LiftShapes(tally)
    maker = _maker(site, tally.lift_m, areas, shapes)
    made = [lift for area in areas for lift in maker.lifts(area, mixed.mixes[area.name])]
    ordered, days = _in_order(site, areas, made, work)
    return LiftsResult(
        units=site.units,
        warnings=tuple(
            dict.fromkeys(
                [*volumes.warnings, *soil_warnings(cards), *work.warnings, *mixed.notes, *_warnings(site, ordered)]
            )
        ),
        lifts=tuple(ordered),
        days=days,
        areas=areas,
        coarse_side=tally.coarse.side,
        coarse_side_m=tally.coarse.side_m,
        lift_m=tally.lift_m,
        loose_lift_m={name: tally.lift_m * _loose_ratio(part.card) for name, part in parts.items()},
        material_rule=mixed.rule,
        mixes=mixed.mixes,
        rolled_m3_h=maker.rolled_m3_h,
        work=work,
        scarify_m3=here.scarify_m3,
        ledger_t={name: mass / 1000.0 for name, mass in mixed.placed_kg.items()},
        volumes=volumes,
        cards=cards,
        shapes=shapes,
        own_kg=free_kg(ledger, here, imported=False),
        imported_kg=free_kg(ledger, here, imported=True),
    )


@dataclass(frozen=True)
class _Mixed:
    """The mix of each fill area, the rule that it follows, and the dry mass by material that it answers to."""

    mixes: dict[str, tuple[MixPart, ...]]
    rule: str
    placed_kg: dict[str, float]
    notes: tuple[Warning, ...] = ()


def _mixed(
    site: Site,
    cards: dict[str, SoilCard],
    volumes: VolumesResult,
    tally: LiftTally,
    areas: Sequence[FillArea],
    even: _Mixed,
    drying: float,
    hauled: HaulTallies | None,
    threads: int | None,
) -> _Mixed:
    """The mixes by the haul plan where there is one, else ``even``."""
    if hauled is None or len(even.placed_kg) < 2 or not areas:
        return even
    from earthwork.plan.haul import haul_result

    try:
        plan = haul_result(site, cards, volumes, hauled, threads=threads)
    except PlanError as error:
        note = Warning("no-haul-plan", f"materials go into lifts pro rata: {error}")
        return replace(even, notes=(note,))
    planned = planned_mixes(plan, areas, tally.coarse, cards, drying)
    return even if planned is None else _Mixed(planned.mixes, "haul plan", planned.placed_kg)


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


def _warnings(site: Site, lifts: Sequence[Lift]) -> list[Warning]:
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
