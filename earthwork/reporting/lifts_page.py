"""What ``lifts`` shows: the benches of each fill, bottom up in placing order, and what each takes."""

from __future__ import annotations

from typing import Any

from earthwork.files.output import OutputFolder
from earthwork.plan.lifts import LiftsResult
from earthwork.reporting.display import plain, show
from earthwork.reporting.page import Block, Column, Facts, Notes, Page, table_of
from earthwork.site import Site
from earthwork.units import FOOT_M, UnitSystem

_FILL_COLUMNS = (
    Column("fill", "fill"),
    Column("lifts", "lifts"),
    Column("bottom_m", "from"),
    Column("top_m", "to"),
    Column("compacted_m3", "compacted"),
    Column("days", "days"),
)


def page(site: Site, result: LiftsResult) -> Page:
    """The page of a **lifts** result."""
    document = result.to_dict()
    rows = [_row(row) for row in document["lifts"]]
    wet = any(row["water_to_dry_l"] > 0 for row in rows)
    total = {**document["total"], "name": "all", "loads": _whole(document["total"]["loads"])}
    blocks: list[Block] = [
        Facts(heading="Lifts", rows=_answer(site, result)),
        table_of([_fill_row(row, result) for row in document["fills"]], _FILL_COLUMNS, site.units, heading="Fills"),
        table_of(
            rows,
            _columns(result, wet=wet),
            site.units,
            heading="Lifts in placing order",
            totals=[total],
            text_columns=1,
        ),
        Notes(heading="What this is", lines=_basis(site, result)),
    ]
    return Page(title=f"{site.name}: lifts", blocks=tuple(blocks))


def _columns(result: LiftsResult, *, wet: bool) -> tuple[Column, ...]:
    return (
        Column("name", "lift"),
        Column("bottom_m", "from"),
        Column("top_m", "to"),
        Column("area_m2", "area"),
        Column("compacted_m3", "compacted"),
        Column("dry_mass_t", "dry mass"),
        *([Column("loads", "loads")] if result.lifts and result.lifts[0].loads is not None else []),
        Column("water_to_add_l", "water"),
        *([Column("water_to_dry_l", "to dry")] if wet else []),
        *([Column("rolling", "rolling\nh")] if result.rolled_m3_h else []),
        *([Column("days", "days")] if result.days else []),
    )


def _row(row: dict[str, Any]) -> dict[str, Any]:
    first, last = row["first_day"], row["last_day"]
    days = None if first is None else str(first) if first == last else f"{first}–{last}"
    hours = row["roller_hours"]
    return {
        **row,
        "name": f"{row['fill']} · {row['lift']}".replace(" ", "\u00a0"),
        "days": days,
        "rolling": None if hours is None else plain(hours, 1),
        "loads": None if row["loads"] is None else plain(row["loads"], 1),
    }


def _whole(loads: float | None) -> str | None:
    return None if loads is None else plain(loads, 0)


def _fill_row(row: dict[str, Any], result: LiftsResult) -> dict[str, Any]:
    own = [lift for lift in result.lifts if lift.fill == row["fill"] and lift.first_day is not None]
    days = f"{own[0].first_day}–{max(lift.last_day or 0 for lift in own)}" if own else None
    return {**row, "days": days}


def thickness(value_m: float, units: UnitSystem) -> str:
    """A thickness as crews stake it: in metres, or in inches.

    >>> from earthwork.units import METRIC, US
    >>> thickness(0.2, METRIC), thickness(0.1524, US)
    ('0.20 m', '6.0 in')
    """
    return f"{value_m / FOOT_M * 12:.1f} in" if units.name == "us" else f"{value_m:.2f} m"


def _answer(site: Site, result: LiftsResult) -> tuple[tuple[str, str, str], ...]:
    units, total = site.units, result.total
    loose = ", ".join(f"{name} {thickness(thick, units)}" for name, thick in result.loose_lift_m.items())
    rows = [
        ("lifts", f"{len(result.lifts):,}", "in 1 fill" if len(result.areas) == 1 else f"in {len(result.areas)} fills"),
        ("compacted thickness", thickness(result.lift_m, units), f"spread loose: {loose}" if loose else ""),
        ("compacted volume", show(total["compacted_m3"], "soil_volume", units), "fill and over-excavation refill"),
    ]
    if result.days:
        working = sum(1 for day in result.days if day.pieces)
        last = result.days[-1].day
        until = f"until {last.date:%a %d %b %Y}" if last.date else f"until day {last.day}"
        rows.append(("working days", f"{working}", f"at the placing rate, {until}"))
    if result.rolled_m3_h is not None:
        rolled = show(result.rolled_m3_h, "soil_volume", units)
        rows.append(("all rollers", f"{rolled}/h", "width × speed × lift × efficiency / passes"))
    return tuple(rows)


def _basis(site: Site, result: LiftsResult) -> tuple[str, ...]:
    apart = show(result.coarse_side_m, "length", site.units)
    lines = [
        "Lifts are level benches; those of a fill start at its lowest removal bottom, and together they are the fill "
        "and the refill exactly. The area of a lift is the ground on which it has any thickness.",
        f"Fills are told apart on a grid of {apart}: what touches there is one fill. Slivers are summed as small fills.",
        "Which material goes into which lift follows the haul plan."
        if result.material_rule == "haul plan"
        else "Each lift takes each material in the share that it has of all fill (pro rata).",
    ]
    if result.scarify_m3:
        taken = show(result.scarify_m3, "soil_volume", site.units)
        lines.append(f"Not in the lifts: {taken} of compacted soil that makes up for scarified ground.")
    lines.append(
        "Slopes, trenches and traffic can kill: local code and the engineer of record govern how fill is placed."
    )
    return tuple(lines)


def draw(site: Site, result: LiftsResult, folder: OutputFolder, tallies: Any) -> None:
    """Write the chart and the outlines of a **lifts** result."""
    from earthwork.reporting.lift_chart import draw_lift_chart
    from earthwork.reporting.lift_outlines import write_lift_outlines

    if not result.lifts:
        return
    draw_lift_chart(result, folder.path("lifts_chart.png"), units=site.units, title=f"{site.name}: lifts by elevation")
    write_lift_outlines(result, folder.path("lifts_outlines.gpkg"))
