"""The day sheet: one printed page for each working day, with what the crew places, wets, rolls and must look out for."""

from __future__ import annotations

import math
from collections.abc import Sequence
from html import escape
from pathlib import Path

from earthwork.plan.lift_rows import Lift
from earthwork.plan.placing import first_limit
from earthwork.plan.water import WaterResult
from earthwork.plan.water_days import WaterDay
from earthwork.reporting.display import plain, show
from earthwork.reporting.lifts_page import thickness
from earthwork.site import Site

_CAUTIONS = (
    "Slopes and trench walls fail without warning; nobody works at their foot unshored. Know the buried services.",
    "Keep people out of the swing and the path of plant; water trucks need firm ground and room to turn.",
    "Check water content and density of the lift before the next goes on. Local code and the engineer of record govern.",
)
#: Lines of a page that lifts and soils share, and the fewest lifts that have a row of their own.
_LINES, _LEAST_ROWS = 13, 4
_STYLE = """
@page { size: PAPER; margin: 11mm 15mm; }
body { font: 9pt/1.25 "DejaVu Sans", Arial, sans-serif; color: #1F1F1F; margin: 0; }
section { page-break-after: always; break-after: page; max-width: 180mm; margin: 0 auto 12mm; }
p, li, h1, td:first-child, .look { overflow-wrap: anywhere; }
section:last-child { page-break-after: auto; break-after: auto; }
h1 { font-size: 15pt; margin: 0; } h2 { font-size: 10pt; margin: 3mm 0 1mm; border-bottom: 1.2pt solid #237872; }
p.what { margin: 0.5mm 0 3mm; color: #55554F; }
table { border-collapse: collapse; width: 100%; } th, td { padding: 0.6mm 1.6mm; text-align: right; vertical-align:
top; } th { border-bottom: 0.6pt solid #1F1F1F; font-weight: 600; } td { border-bottom: 0.3pt solid #D5D5D0; }
th:first-child, td:first-child { text-align: left; } tr.total td { border-top: 0.6pt solid #1F1F1F; font-weight: 600;
} .look { border: 1.4pt solid #B5501A; padding: 2mm 3mm; margin: 3mm 0; } .look b { color: #B5501A; } ul { margin: 1mm
0; padding-left: 5mm; } .sign { display: flex; gap: 12mm; margin-top: 8mm; color: #55554F; } .sign span { flex: 1;
border-top: 0.6pt solid #1F1F1F; padding-top: 1mm; font-size: 9pt; }
"""


def write_day_sheets(site: Site, result: WaterResult, path: Path) -> None:
    """Write the sheets of all days that place fill or wet the cut: an HTML file that prints one page a day.

    A4, and letter where the site is in US units.
    """
    pages = [_sheet(site, result, index) for index, day in enumerate(result.days) if day.demand.day.kind == "work"]
    title = escape(f"{site.name}: day sheets")
    style = _STYLE.replace("PAPER", "letter" if site.units.name == "us" else "A4")
    head = f'<meta charset="utf-8"><title>{title}</title><style>{style}</style>'
    path.write_text(
        f'<!doctype html><html lang="en"><head>{head}</head><body>{"".join(pages)}</body></html>\n', "utf-8"
    )


def _sheet(site: Site, result: WaterResult, index: int) -> str:
    day, placed = result.days[index], result.job.placed[index]
    pieces = [(result.lifts.lifts[i], volume) for i, volume in placed.pieces]
    date = day.demand.day.date
    when = f"Day {day.demand.day.day}" + (f", {date:%A %d %B %Y}" if date else "")
    volume = show(placed.compacted_m3, "soil_volume", site.units)
    look = _look(site, day)
    soils = {name for lift, _ in pieces for name in lift.dry_mass_by_material_t}
    rows = _LINES - len(soils) - (2 if look else 0)
    what = f"{len(pieces)} lifts, {volume} compacted" if pieces else "no fill: the cut is wetted ahead of the work"
    return (
        f"<section><h1>{escape(when)}</h1><p class='what'>{escape(site.name)} · {escape(what)}</p>"
        + look
        + (_lift_table(site, pieces, max(rows, _LEAST_ROWS)) if pieces else "")
        + _water_table(site, result, day)
        + (_material_table(site, result, pieces) if pieces else "")
        + _plant(site, result, day, pieces)
        + "<h2>Look out</h2><ul>"
        + "".join(f"<li>{escape(line)}</li>" for line in _CAUTIONS)
        + "</ul><div class='sign'><span>foreman</span><span>compaction tests, results</span>"
        "<span>water used</span></div></section>"
    )


def _look(site: Site, day: WaterDay) -> str:
    """What will hold the day up."""
    lines = []
    if day.first_short_hour is not None:
        missing = show(day.shortfall_l, "water_volume", site.units)
        allows = day.limits["water"]
        enough = "" if allows is None else f"; there is water for {show(allows, 'soil_volume', site.units)}"
        lines.append(f"<b>Water runs short</b> from hour {day.first_short_hour} on: {missing} are missing{enough}.")
    elif day.limited_by not in ("placing rate", "pre-wetting"):
        lines.append(f"<b>{escape(day.limited_by.capitalize())}</b> holds the day to "
                     f"{show(day.achievable_m3, 'soil_volume', site.units)}.")  # fmt: skip
    return f"<div class='look'>{' '.join(lines)}</div>" if lines else ""


def _lift_table(site: Site, pieces: Sequence[tuple[Lift, float]], most: int) -> str:
    units = site.units
    head = [
        "lift", f"from, {units.label('length')}", f"to, {units.label('length')}", f"area, {units.label('area')}",
        f"compacted, {units.label('soil_volume')}", f"loose, {units.label('soil_volume')}", "loads", "passes",
        "required, %",
    ]  # fmt: skip
    plain_lifts = [piece for piece in pieces if not piece[0].flags]
    fit = most if len(plain_lifts) > most + 1 else most + 1  # the row of the others holds one as well
    shown, more = plain_lifts[:fit], plain_lifts[fit:]
    rows = [_lift_row(site, f"{lift.fill}, lift {lift.lift}", [(lift, volume)]) for lift, volume in shown]
    if more:
        rows.append(_lift_row(site, f"{len(more):,} more lifts", more))
    small = [piece for piece in pieces if piece[0].flags]
    if small:
        rows.append(_lift_row(site, f"{len(small)} too small or narrow for the plant", small))
    return _table("Lifts, bottom up", head, rows, _lift_row(site, "all", pieces, alone=False))


def _lift_row(site: Site, name: str, pieces: Sequence[tuple[Lift, float]], *, alone: bool = True) -> list[str]:
    """A lift, or several as one row, of which elevations and area are left out."""
    units = site.units
    lift = pieces[0][0] if alone and len(pieces) == 1 else None
    shares = [volume / lift.compacted_m3 for lift, volume in pieces]
    loads = [share * piece[0].loads for share, piece in zip(shares, pieces, strict=True) if piece[0].loads is not None]
    loose = math.fsum(share * piece[0].loose_m3 for share, piece in zip(shares, pieces, strict=True))
    return [
        name,
        show(lift.bench.bottom_m, "length", units, unit=False) if lift else "",
        show(lift.bench.top_m, "length", units, unit=False) if lift else "",
        show(lift.bench.area_m2, "area", units, unit=False) if lift else "",
        show(math.fsum(volume for _, volume in pieces), "soil_volume", units, unit=False),
        show(loose, "soil_volume", units, unit=False),
        plain(math.fsum(loads), 1) if loads else "–",
        f"{pieces[0][0].passes:g}" if alone and pieces[0][0].passes is not None else "",
        _required(site, [lift for lift, _ in pieces]) if alone else "",
    ]


def _required(site: Site, lifts: Sequence[Lift]) -> str:
    """Relative compaction that lifts have to reach, % of the maximum; several where depth rows part them."""
    fill = site.model.fill
    assert fill is not None
    wanted = set()
    for lift in lifts:
        least = 1e-6 * lift.compacted_m3
        bands = lift.bench.bands_m3
        wanted |= {row.relative_compaction for row, v in zip(fill.by_depth, bands, strict=True) if v > least}
        wanted |= {fill.relative_compaction} if lift.compacted_m3 - math.fsum(bands) > least else set()
    return ", ".join(f"{percent:g}" for percent in sorted(wanted))


def _water_table(site: Site, result: WaterResult, day: WaterDay) -> str:
    units, demand = site.units, day.demand
    parts = [
        ("compaction" + (" (on the cut, ahead of placing)" if result.job.pre_wet_days else ""), demand.compaction_l),
        (f"evaporation from {show(demand.open_area_m2, 'area', units)} of open ground", demand.evaporation_l),
        ("dust", demand.dust_l),
        ("spilt and drifted", demand.waste_l),
    ]
    rows = [[name, show(litres, "water_volume", units), ""] for name, litres in parts]
    rows.append(["the supply gives", "", show(day.supply_l, "water_volume", units)])
    if result.job.tank_l > 0:
        rows.append(["in the tank at the end", "", show(day.tank_end_l, "water_volume", units)])
    loads = "" if day.truck_loads is None else f"{day.truck_loads:,} truck load{'' if day.truck_loads == 1 else 's'}"
    total = ["in all", show(demand.total_l, "water_volume", units), loads]
    return _table("Water", ["", "wanted", "there is"], rows, total)


def _material_table(site: Site, result: WaterResult, pieces: Sequence[tuple[Lift, float]]) -> str:
    used = {name for lift, _ in pieces for name in lift.dry_mass_by_material_t}
    rows = []
    for material in result.materials:
        row = material.to_dict()
        if row["material"] not in used:
            continue
        window = row["window_water_content_percent"]
        add, dry = row["water_to_add_l_per_m3"], row["water_to_dry_l_per_m3"]
        volume, water = site.units.factor("soil_volume"), site.units.factor("water_volume")
        unit = f"{site.units.label('water_volume')}/{site.units.label('soil_volume')}"
        need = (
            f"add {add * volume / water:,.0f} {unit}"
            if add
            else f"dry {dry * volume / water:,.0f} {unit}"
            if dry
            else "–"
        )
        rows.append([
            row["material"], _percent(row["arriving_water_content_percent"]), _percent(row["target_water_content_percent"]),
            "–" if window is None else f"{window[0]:.1f} to {window[1]:.1f} %", need,
            thickness(result.lifts.loose_lift_m[row["material"]], site.units),
        ])  # fmt: skip
    return _table("Soil", ["material", "arrives", "target", "window", "water, compacted", "spread loose"], rows, None)


def _percent(value: float | None) -> str:
    return "–" if value is None else f"{value:.1f} %"


def _plant(site: Site, result: WaterResult, day: WaterDay, pieces: Sequence[tuple[Lift, float]]) -> str:
    lines = []
    hours = [v / lift.compacted_m3 * lift.roller_hours for lift, v in pieces if lift.roller_hours is not None]
    if hours:
        lines.append(f"Rolling {plain(math.fsum(hours), 1)} h with all rollers.")
    if result.trucks is not None:
        lines.append(f"Water trucks: {result.trucks.trucks:,}, a trip each {plain(result.trucks.cycle_min, 0)} min.")
    name, volume = first_limit(day.limits)
    if name and volume is not None:
        lines.append(
            f"{name.capitalize()} is the first to hold the work: {show(volume, 'soil_volume', site.units)} a day."
        )
    if day.water_to_dry_l > 0:
        lines.append(f"{show(day.water_to_dry_l, 'water_volume', site.units)} must dry out of the day's soil.")
    return f"<h2>Plant</h2><p>{escape(' '.join(lines))}</p>" if lines else ""


def _table(heading: str, head: Sequence[str], rows: Sequence[Sequence[str]], total: Sequence[str] | None) -> str:
    def cells(row: Sequence[str], tag: str = "td") -> str:
        return "".join(f"<{tag}>{escape(cell)}</{tag}>" for cell in row)

    body = "".join(f"<tr>{cells(row)}</tr>" for row in rows)
    foot = f"<tr class='total'>{cells(total)}</tr>" if total else ""
    return f"<h2>{escape(heading)}</h2><table><tr>{cells(head, 'th')}</tr>{body}{foot}</table>"
