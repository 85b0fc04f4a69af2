"""What must be said of a site's water: what runs off, what is too wet and how it dries, what goes short and what mends it."""

from __future__ import annotations

import datetime
import math
from collections.abc import Callable, Sequence
from typing import TYPE_CHECKING

from earthwork.errors import Warning
from earthwork.plan.drying import DryingOption, spreading
from earthwork.plan.fill_mix import MixPart
from earthwork.plan.lifts import LiftsResult
from earthwork.plan.mixes import mix_warnings, mixing_options
from earthwork.plan.moisture import Wetting, water_need, wetting
from earthwork.plan.remedies import Remedy
from earthwork.plan.water_trucks import payload_notes
from earthwork.site import Site
from earthwork.units import UnitSystem

if TYPE_CHECKING:
    from earthwork.plan.water import WaterResult


def wetting_of(site: Site, part: MixPart, lift_m: float) -> Wetting:
    """Where a material's water is added."""
    given = site.model.moisture
    density = part.card.dry_density_kg_m3("compacted")
    need = water_need(density, part.arriving_percent, part.card.target_water_content_percent)
    return wetting(
        need.to_add_l_per_m3,
        fill_dry_density_kg_m3=density,
        lift_thickness_m=lift_m,
        limit_points=given.lift_limit_points,
        limit_depth_mm=given.lift_limit_depth,
        wet_in=given.wet_in,
    )


# --- soil that is too wet -------------------------------------------------------------------------------------------


def drying_options(site: Site, placed: LiftsResult) -> tuple[DryingOption, ...]:
    """For every material that arrives too wet: spread, turn, or mix with what is drier."""
    water, given = site.model.water, site.model.moisture.drying
    assert water is not None
    options: list[DryingOption] = []
    for part in _wet(placed):
        card, density = part.card, part.card.dry_density_kg_m3("compacted")
        need = water_need(density, part.arriving_percent, card.target_water_content_percent)
        surface = placed.work.weather.surface if placed.work.weather else None
        # how fast unturned soil seals is only known of a surface that the site file describes
        for turns in dict.fromkeys((*((0.0,) if surface else ()), given.turns_per_day)):
            options.append(
                spreading(
                    material=part.material,
                    to_dry_l_per_m3=need.to_dry_l_per_m3,
                    fill_dry_density_kg_m3=density,
                    loose_dry_density_kg_m3=card.loose_dry_density_kg_m3,
                    spread_m=given.spread or placed.loose_lift_m[part.material],
                    reference_mm_day=placed.work.reference_mm_day,
                    turns_per_day=turns,
                    surface=surface,
                    placing_m3_day=water.placing_rate * part.share,
                    area_m2=given.area,
                )
            )
        options += mixing_options(site, placed, part)
    return tuple(options)


def _wet(placed: LiftsResult) -> list[MixPart]:
    """Materials of the fill that arrive above their target."""
    return [
        part
        for part in placed.mix
        if part.arriving_percent is not None
        and part.card.target_water_content_percent is not None
        and part.arriving_percent > part.card.target_water_content_percent
    ]


def drying_m3_day(site: Site, options: Sequence[DryingOption]) -> float | None:
    """Compacted volume of fill that the ground kept for drying allows in a day; None where it has no limit.

    All wet materials share the ground, each by the fastest way that it has; what never dries when it is spread takes
    none where there is enough to mix it with.
    """
    area, water = site.model.moisture.drying.area, site.model.water
    assert water is not None
    if area is None:
        return None
    needed = []
    for name in dict.fromkeys(option.material for option in options):
        mine = [o for o in options if o.material == name]
        ways = [o.area_m2 for o in mine if o.area_m2 is not None]
        if ways:
            needed.append(min(ways))
        elif not any(o.possible and o.mix_missing_t == 0 for o in mine):
            return 0.0
    return water.placing_rate * area / sum(needed) if sum(needed) > 0 else None


# --- warnings -------------------------------------------------------------------------------------------------------


def water_warnings(site: Site, result: WaterResult) -> list[Warning]:
    """The warnings of a site's water."""
    mixes = mix_warnings(site, result.lifts, result.drying)
    found = [*_runs_off(site, result), *_too_wet(site, result), *mixes, *_short(site, result), *_trucks(site, result)]
    ends = result.lifts.work.ends_before(len(result.days))
    return [*found, *([ends] if ends else [])]


def _runs_off(site: Site, result: WaterResult) -> list[Warning]:
    found = []
    units, given = site.units, site.model.moisture
    for material in result.materials:
        split = material.wetting
        if given.wet_in != "lift" or split.in_cut_l_per_m3 <= 0:
            continue
        points = 100.0 * (split.in_lift_l_per_m3 + split.in_cut_l_per_m3)
        points /= material.part.card.dry_density_kg_m3("compacted")
        found.append(
            Warning(
                "wetting-runs-off",
                f"{material.part.material} wants {points:.1f} points of water, {_depth(split.lift_depth_mm, units)} on a "
                f"lift: more than {_depth(split.lift_takes_l_per_m3 * result.lifts.lift_m, units)} in one pass runs off. "
                f'Pre-wet the cut (moisture.wet_in = "cut"), or let {split.passes_in_lift} passes soak in, one after '
                "the other",
            )
        )
    return found


def _too_wet(site: Site, result: WaterResult) -> list[Warning]:
    found = []
    for part in _wet(result.lifts):
        ways = [o for o in result.drying if o.material == part.material]
        best = min((o for o in ways if o.possible and o.days is not None), key=lambda o: o.days or 0.0, default=None)
        how = f"; {best.method}: {best.note}" if best else "; spreading alone does not dry it"
        found.append(
            Warning(
                "too-wet",
                f"{part.material} arrives at {part.arriving_percent:.1f} % and is to be placed at "
                f"{part.card.target_water_content_percent:.1f} %{how}. See the drying options",
            )
        )
    return found


def _short(site: Site, result: WaterResult) -> list[Warning]:
    day, units = result.first_short, site.units
    if day is None or day.first_short_hour is None:
        return []
    when = f"day {day.demand.day.day}"
    clock = result.job.calendar.clock(day.demand.day, day.first_short_hour - 1)
    if isinstance(clock, datetime.datetime):
        when += f" ({clock:%a %d %b %Y}), from {clock:%H:%M} on"
    else:
        when += f", from its hour {day.first_short_hour} on ({clock:%H:%M})"
    mends = "; or ".join(text for remedy in result.remedies if (text := _mend(remedy, units)))
    allows = day.limits["water"]
    volume = "" if allows is None else (
        f", which has water for {units.from_si(allows, 'soil_volume'):,.0f} {units.label('soil_volume')} of "
        f"{units.from_si(day.demand.compacted_m3, 'soil_volume'):,.0f}"
    )  # fmt: skip
    return [
        Warning(
            "water-short",
            f"water runs short first on {when}: {litres(day.shortfall_l, units)} are missing that day{volume}. "
            f"It takes {mends or 'less open ground and dust control: no other remedy does'}",
        )
    ]


def _mend(remedy: Remedy, units: UnitSystem) -> str | None:
    """A remedy in words; None where it is impossible."""
    figure = remedy_figure(remedy, units)
    if figure is None:
        return None
    if remedy.standpipes is not None:
        return f"{figure} standpipes"
    if remedy.flow_l_s is not None:
        return f"a flow of {figure}"
    if remedy.tank_l is not None:
        return f"a tank of {figure}, full at the start"
    if remedy.supply_hours is not None:
        return f"a fill window of {figure} hours"
    return f"placing {figure} a day ({remedy.note})"


def remedy_figure(remedy: Remedy, units: UnitSystem) -> str | None:
    """The figure of a remedy with its unit, rounded to the side that still mends; None where it is impossible.

    >>> from earthwork.units import METRIC
    >>> tank = Remedy(remedy="a larger tank", possible=True, note="", tank_l=401761.3)
    >>> remedy_figure(tank, METRIC)
    '401,762 L'
    """
    if not remedy.possible:
        return None
    if remedy.standpipes is not None:
        return f"{remedy.standpipes}"
    if remedy.supply_hours is not None:
        return _rounded(remedy.supply_hours, math.ceil, 1)
    if remedy.flow_l_s is not None:
        flow = units.from_si(remedy.flow_l_s, "flow")
        return f"{_rounded(flow, math.ceil, 0 if flow >= 10 else 2)} {units.label('flow')}"
    if remedy.tank_l is not None:
        return tank_figure(remedy.tank_l, units)
    assert remedy.placing_rate_per_day_m3 is not None
    rate = units.from_si(remedy.placing_rate_per_day_m3, "soil_volume")
    return f"{_rounded(rate, math.floor, 0 if rate >= 10 else 2)} {units.label('soil_volume')}"


def tank_figure(volume_l: float, units: UnitSystem) -> str:
    """The size of a tank that is enough, rounded up."""
    return f"{_rounded(units.from_si(volume_l, 'water_volume'), math.ceil)} {units.label('water_volume')}"


def _rounded(value: float, way: Callable[[float], int], places: int = 0) -> str:
    """Rounded up or down, but not over a last digit that is itself rounding."""
    scaled = value * 10**places
    near = round(scaled)
    whole = near if math.isclose(scaled, near, rel_tol=1e-9) else way(scaled)
    return f"{whole / 10**places:,.{places}f}"


def _trucks(site: Site, result: WaterResult) -> list[Warning]:
    plan, truck = result.trucks, site.model.water.truck if site.model.water else None
    if plan is None or truck is None:
        return []
    found = []
    if plan.fill_point_is_short:
        found.append(
            Warning(
                "fill-point-short",
                f"the fill point fills {plan.fill_point_loads:,} trucks a day and the peak day needs {plan.loads:,}, however "
                "many trucks there are: add a bay, or fill faster",
            )
        )
    notes = payload_notes(
        truck.capacity, payload_kg=truck.payload, empty_kg=truck.empty_mass, road_limit_kg=truck.road_limit
    )
    for broken, allowed in notes:
        found.append(
            Warning(
                "truck-overweight",
                f"a full water truck holds {litres(truck.capacity, site.units)} and breaks {broken}; it may carry "
                f"{litres(max(allowed, 0.0), site.units)}. The truck count here takes full tanks",
            )
        )
    return found


def _depth(mm: float, units: UnitSystem) -> str:
    return f"{mm / 25.4:.2f} in" if units.name == "us" else f"{mm:.0f} mm"


def litres(volume_l: float, units: UnitSystem) -> str:
    """A volume of water in the site's unit."""
    return f"{units.from_si(volume_l, 'water_volume'):,.0f} {units.label('water_volume')}"
