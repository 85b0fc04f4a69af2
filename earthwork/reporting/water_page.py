"""What ``water`` shows: whether the water suffices, each day's water, wetting and drying, and what mends a shortage."""

from __future__ import annotations

from typing import Any

from earthwork.files.output import OutputFolder
from earthwork.plan.drying import DryingOption
from earthwork.plan.remedies import Remedy
from earthwork.plan.water import WaterResult
from earthwork.plan.water_days import WaterDay
from earthwork.plan.water_notes import remedy_figure, tank_figure
from earthwork.reporting.display import plain, show
from earthwork.reporting.page import Block, Column, Facts, Notes, Page, table_of
from earthwork.site import Site
from earthwork.units import UnitSystem

_DAY_COLUMNS = (
    Column("day", "day"),
    Column("compacted_m3", "placed"),
    Column("compaction_l", "compaction"),
    Column("evaporation_l", "evaporation"),
    Column("other_l", "dust, waste"),
    Column("total_l", "in all"),
    Column("tank_end_l", "tank"),
    Column("shortfall_l", "short"),
    Column("limited_by", "held by"),
)
_MATERIAL_COLUMNS = (
    Column("material", "material"),
    Column("arriving_water_content_percent", "arrives"),
    Column("target_water_content_percent", "target"),
    Column("water_to_add_l_per_m3", "to add\ncompacted"),
    Column("water_to_add_bank_l_per_m3", "to add\nbank"),
    Column("water_to_dry_l_per_m3", "to dry\ncompacted"),
    Column("water_on_lift", "on a lift"),
    Column("passes", "passes"),
)
_LONGEST = 40
_NBSP = "\u00a0"


def page(site: Site, result: WaterResult) -> Page:
    """The page of a **water** result."""
    document = result.to_dict()
    blocks: list[Block] = [Facts(heading="Water", rows=_answer(site, result))]
    if result.remedies:
        blocks.append(Facts(heading="What mends the shortage, each by itself", rows=_remedies(site, result)))
    total = {**document["totals"], "day": "all", "total_l": document["total_l"]}
    total["compacted_m3"] = sum(day["compacted_m3"] for day in document["days"])
    total["other_l"] = total["dust_l"] + total["waste_l"]
    rows = [_day_row(day, shown, site.units) for day, shown in zip(document["days"], result.days, strict=True)]
    blocks += [
        table_of(rows, _DAY_COLUMNS, site.units, heading="Day by day", totals=[total], longest=_LONGEST),
        table_of(
            [_material_row(m, site) for m in document["materials"]], _MATERIAL_COLUMNS, site.units,
            heading="Water of the materials",
        ),
    ]  # fmt: skip
    if result.drying:
        ways = tuple(_drying_row(option, site) for option in result.drying)
        blocks.append(Facts(heading="Soil that arrives too wet: the ways there are", rows=ways))
    blocks.append(Notes(heading="What this is", lines=_basis(site, result)))
    return Page(title=f"{site.name}: compaction water", blocks=tuple(blocks))


def _answer(site: Site, result: WaterResult) -> tuple[tuple[str, str, str], ...]:
    units, days = site.units, result.days
    total = sum(day.demand.total_l for day in days)
    working = sum(1 for day in days if day.demand.compacted_m3 > 0)
    placing = "in 1 day that places fill" if working == 1 else f"in {working:,} days that place fill"
    rows = [
        ("over the job", show(total, "water_volume", units), placing),
        ("on the peak day", show(result.peak_day_l, "water_volume", units), ""),
        ("the supply gives", show(max((d.supply_l for d in days), default=0.0), "water_volume", units), "a day"),
    ]
    use = result.standpipe_use_percent
    if use is not None:
        rows.append(("standpipe use", f"{plain(use, 0)} %", "the peak day's water of what the supply gives that day"))
    rows.append(_short_row(site, result))
    needed = result.tank_needed_l
    if needed is None:
        rows.append(("tank that bridges it", "none", result.tank_note or ""))
    else:
        rows.append(("tank that bridges it", tank_figure(needed, units), "full at the start"))
    if result.trucks is not None:
        cycle, trips = result.trucks.cycle_min, result.trucks.trips_per_truck
        note = f"{plain(cycle, 1)} min a trip, {trips} trip{'' if trips == 1 else 's'} a day; fill point used "
        rows.append(
            ("water trucks", f"{result.trucks.trucks:,}", note + f"{plain(result.trucks.fill_point_use_percent, 0)} %")
        )
    return tuple(rows)


def _short_row(site: Site, result: WaterResult) -> tuple[str, str, str]:
    day = result.first_short
    if day is None or day.first_short_hour is None:
        return ("goes short", "never", "")
    clock = result.job.calendar.clock(day.demand.day, day.first_short_hour - 1)
    when = f"day {day.demand.day.day}, {clock:%H:%M}"
    missing = show(day.shortfall_l, "water_volume", site.units)
    allows = day.limits["water"]
    enough = "" if allows is None else f"; its water is enough for {show(allows, 'soil_volume', site.units)}"
    return ("goes short", when, f"by {missing} that day{enough}")


def _remedies(site: Site, result: WaterResult) -> tuple[tuple[str, str, str], ...]:
    return tuple((r.remedy, _figure(r, site), r.note) for r in result.remedies)


def _figure(remedy: Remedy, site: Site) -> str:
    figure = remedy_figure(remedy, site.units) or "no"
    if remedy.standpipes is not None:
        return f"{figure} in all"
    if remedy.supply_hours is not None:
        return f"{figure} h a day"
    return f"{figure} a day" if remedy.placing_rate_per_day_m3 is not None else figure


def _day_row(row: dict[str, Any], day: WaterDay, units: UnitSystem) -> dict[str, Any]:
    date = day.demand.day.date
    return {
        **row,
        "day": str(row["day"]) + (f"{_NBSP}{_NBSP}{date:%d}{_NBSP}{date:%b}" if date else ""),
        "other_l": row["dust_l"] + row["waste_l"],
        "shortfall_l": row["shortfall_l"] or None,
        "limited_by": row["limited_by"] + _held_at(day, units),
    }


def _held_at(day: WaterDay, units: UnitSystem) -> str:
    """The volume that a day is held to, where it is less than what is to be placed."""
    if day.achievable_m3 >= day.demand.compacted_m3 * (1 - 1e-9):
        return ""
    return f"{_NBSP}{show(day.achievable_m3, 'soil_volume', units, unit=False)}"


def _material_row(row: dict[str, Any], site: Site) -> dict[str, Any]:
    depth = row["water_on_lift_mm"]
    on_lift = f"{depth / 25.4:.2f} in" if site.units.name == "us" else f"{depth:.0f} mm"
    return {**row, "water_on_lift": on_lift if depth else None, "passes": row["passes_in_lift"] or None}


def _drying_row(option: DryingOption, site: Site) -> tuple[str, str, str]:
    label = f"{option.material}: {option.method}" + (f" with {option.mix_with}" if option.mix_with else "")
    if not option.possible:
        return label, "no", option.note
    if option.mix_dry_ratio is not None:
        return label, f"{option.mix_dry_ratio:.2f} to 1", f"{option.note}. {_taken(option, site)}"
    ground = show(option.area_m2, "area", site.units)
    ready = option.volume_per_day_m3
    kept = "" if ready is None else f", the ground kept for it does {show(ready, 'soil_volume', site.units)} a day"
    note = f"of drying weather; {ground} of ground to keep up with the placing rate{kept}"
    return label, f"{plain(option.days, 1)} days", note


def _taken(option: DryingOption, site: Site) -> str:
    """What a mix takes of the drier material, what there is, and what of the wet one is left over."""

    def mass(tonnes: float | None) -> str:
        return show(tonnes, "mass", site.units, si=1000.0)

    text = f"Takes {mass(option.mix_needed_t)} of {option.mix_with}"
    if option.mix_missing_t:
        text += f", {mass(option.mix_available_t)} are there: {mass(option.mix_missing_t)} are missing"
    elif option.mix_available_t is not None:
        text += f", {mass(option.mix_available_t)} are there"
    if option.mix_displaced_t:
        text += f"; {mass(option.mix_displaced_t)} of {option.material} are left over"
    return f"{text} (dry mass)"


def _basis(site: Site, result: WaterResult) -> tuple[str, ...]:
    work, moisture = result.lifts.work, site.model.moisture
    if work.weather is not None:
        source = f"from {work.weather.table.path.name} by FAO-56, bare wet ground at 1.2 times the reference"
    else:
        source = "as given"
    lines = [
        "Water goes with dry mass: target less arriving water content, whatever state the volume is in. What is to wet "
        "and what is to dry never offset each other.",
        f"Evaporation {source}, times the open ground of the day. Days run at the placing rate; 'held by' names what "
        "would hold a day under it, and the volume that it allows.",
    ]
    if moisture.wet_in == "cut" and moisture.pre_wet_days:
        lines.append(f"Water goes onto the cut {moisture.pre_wet_days} working days before the soil is placed.")
    lines.append("Check the water content in the lift before rolling; the placing window is on the soil page.")
    return tuple(lines)


def draw(site: Site, result: WaterResult, folder: OutputFolder, tallies: Any) -> None:
    """Write the charts and the day sheets of a **water** result."""
    from earthwork.reporting.day_sheet import write_day_sheets
    from earthwork.reporting.water_chart import draw_tank, draw_water_days

    if not result.days:
        return
    draw_water_days(result, folder.path("water_days.png"), units=site.units, title=f"{site.name}: water by day")
    if result.job.tank_l > 0:
        draw_tank(result, folder.path("water_tank.png"), units=site.units, title=f"{site.name}: water in the tank")
    write_day_sheets(site, result, folder.path("water_day_sheets.html"))
