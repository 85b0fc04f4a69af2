"""What ``haul`` shows: the answer, the moves, the trucks and the mass curve."""

from __future__ import annotations

from typing import Any

from earthwork.files.output import OutputFolder
from earthwork.plan.haul import HaulResult
from earthwork.reporting.display import plain, show
from earthwork.reporting.page import Block, Column, Facts, Notes, Page, table_of
from earthwork.site import Site

_TRUCK_COLUMNS = (
    Column("from", "from"),
    Column("to", "to"),
    Column("full", "loads"),
    Column("cycle", "cycle\nmin"),
    Column("matched", "trucks to\nmatch"),
    Column("trucks", "trucks"),
    Column("match_factor", "match\nfactor"),
    Column("loads_per_hour", "loads\nper hour"),
    Column("worked", "hours"),
)
_MASS_NAME = {"metric": "tonne", "us": "ton"}
_NO_HEIGHTS = {"rise_m": 0.0, "fall_m": 0.0}
_ROAD_COLUMNS = (
    Column("road", "haul road"),
    Column("dry_mass_t", "carries"),
    Column("whole", "loads"),
    Column("haul", "haul"),
    Column("use_percent", "of its capacity"),
)


def page(site: Site, result: HaulResult) -> Page:
    """The page of a **haul** result."""
    rows = [_whole(row, site) for row in result.to_dict()["moves"]]
    columns = _move_columns(site, phased=bool(result.areas.phases))
    heading = "Moves, the heaviest first" + (" within each phase" if result.areas.phases else "")
    blocks: list[Block] = [
        Facts(heading="Haul plan", rows=_answer(site, result)),
        table_of(rows, columns, site.units, heading=heading, text_columns=3),
        Facts(heading=f"What one more {_MASS_NAME[site.units.name]} costs", rows=_marginals(site, result)),
    ]
    if result.fleet is not None and result.fleet.hours is not None:
        blocks += _trucks(site, result)
    if result.line is not None:
        blocks.append(Facts(heading="Along the baseline", rows=_line(site, result)))
    blocks.append(Notes(heading="How it was found", lines=_proof(result)))
    return Page(title=f"{site.name}: haul plan", blocks=tuple(blocks))


def _move_columns(site: Site, *, phased: bool) -> tuple[Column, ...]:
    unit = site.units.label("length")
    return (
        Column("from", "from"),
        Column("to", "to"),
        Column("material", "material"),
        *([Column("phase", "phase")] if phased else []),
        Column("dry_mass_t", "dry mass"),
        Column("bank_m3", "bank"),
        Column("compacted_m3", "compacted"),
        Column("far", f"distance\n{unit}"),
        Column("up", f"rise\n{unit}"),
        Column("down", f"fall\n{unit}"),
        Column("full", "loads"),
        Column("limited_by", "limit"),
    )


def _whole(row: dict[str, Any], site: Site) -> dict[str, Any]:
    """A move with distances and loads as exact as they deserve."""
    shown = dict(row)
    for key, name, places in (("distance_m", "far", 0), ("rise_m", "up", 0), ("fall_m", "down", 0)):
        shown[name] = plain(site.units.from_si(row[key], "length"), places)
    for key, name in (("loads", "full"), ("cycle_min", "cycle"), ("hours", "worked"), ("trucks_to_match", "matched")):
        shown[name] = plain(row.get(key), 1)
    return shown


def _answer(site: Site, result: HaulResult) -> tuple[tuple[str, str, str], ...]:
    units, haul = site.units, site.model.haul
    assert haul is not None
    hauled = result.total_t_km * 1e6 / units.factor("mass") / units.factor("road")
    t_km = plain(hauled, _places(hauled))
    far = result.mean_distance_m
    rows = [
        ("earth moved", show(result.dry_mass_t, "mass", units, si=1000.0), "dry mass, each move counted"),
        ("mean distance", _distance(far, site) if far is not None else "–", "by dry mass, as driven"),
        ("haul", f"{t_km} {units.label('mass')}·{units.label('road')}", ""),
        ("cost", plain(result.cost, 0), "money: hauls, rehandling, prices of pits and tips"),
    ]
    if haul.distance == "straight":
        factor = f" × {haul.straight_factor:g}" if haul.straight_factor != 1 else ""
        rows[1] = ("mean distance", rows[1][1], f"straight lines{factor}, through everything")
    if result.loads is not None:
        by_weight = sum(m.loads or 0.0 for m in result.moves if m.limited_by == "weight")
        total = sum(m.loads or 0.0 for m in result.moves) or 1.0
        rows.append(("truck loads", f"{result.loads:,}", f"{100 * by_weight / total:.0f} % of them full by weight"))
    if result.opened:
        rows.append(("opened", ", ".join(result.opened), "places with an opening cost that are used"))
    return tuple(rows)


def _distance(value: float, site: Site) -> str:
    return f"{site.units.from_si(value, 'length'):,.0f} {site.units.label('length')}"


def _marginals(site: Site, result: HaulResult) -> tuple[tuple[str, str, str], ...]:
    """The dearest and the cheapest place of each kind for one more unit of dry mass."""
    rows = []
    name, per_tonne = _MASS_NAME[site.units.name], site.units.factor("mass") / 1000
    for kind, what in (("fill", "more fill"), ("cut", "more cut")):
        known = [b for b in result.blocks if b.kind == kind and b.marginal_cost is not None]
        if not known:
            continue
        low = min(known, key=lambda b: b.marginal_cost or 0.0)
        high = max(known, key=lambda b: b.marginal_cost or 0.0)
        least, most = ((b.marginal_cost or 0.0) * per_tonne for b in (low, high))
        text = f"{plain(least, 2)} to {plain(most, 2)} a {name}"
        rows.append((what, text, f"least at {low.block}, most at {high.block}"))
    shut = sum(1 for b in result.blocks if b.kind in ("cut", "fill") and b.marginal_cost is None)
    if shut:
        rows.append(("not possible", f"{shut} blocks", f"one more {name} there has no source or no place to go"))
    return tuple(rows)


def _places(value: float | None) -> int:
    """Decimals of a total: a small job is told in tenths.

    >>> _places(3.25), _places(1234.5)
    (1, 0)
    """
    return 1 if value is not None and abs(value) < 10 else 0


def _trucks(site: Site, result: HaulResult) -> list[Block]:
    fleet = result.fleet
    assert fleet is not None
    rows = [
        (
            "hours of the loader",
            plain(fleet.hours, _places(fleet.hours)),
            "one loader serves the moves one after the other",
        ),
        (
            "truck hours",
            plain(fleet.truck_hours, _places(fleet.truck_hours)),
            f"at most {fleet.most_trucks} trucks at a time",
        ),
    ]
    if fleet.cost is not None:
        rows.append(("trucks and loader", plain(fleet.cost, 0), "money, by their hours"))
    blocks: list[Block] = [
        Facts(heading="Trucks", rows=tuple(rows)),
        table_of(
            [_whole({**row.to_dict(), **_NO_HEIGHTS}, site) for row in fleet.rows],
            _TRUCK_COLUMNS,
            site.units,
            text_columns=2,
            longest=12,
        ),
    ]
    if fleet.roads:
        factor = 1e6 / site.units.factor("mass") / site.units.factor("road")
        unit = f"{site.units.label('mass')}·{site.units.label('road')}"
        roads = [
            {**road.__dict__, "whole": plain(road.loads, 0), "haul": f"{plain(road.t_km * factor, 0)} {unit}"}
            for road in fleet.roads
        ]
        blocks.append(table_of(roads, _ROAD_COLUMNS, site.units, heading="Haul roads"))
    return blocks


def _line(site: Site, result: HaulResult) -> tuple[tuple[str, str, str], ...]:
    line, units = result.line, site.units
    assert line is not None
    curve = line.curve
    points = [line.start_m + p for p in curve.balance_points_m]
    shown = ", ".join(_distance(p, site) for p in points[:6]) + (", …" if len(points) > 6 else "")
    rows = [
        ("hauled along it", show(curve.volume_m3, "soil_volume", units), "compacted-equivalent"),
        ("mean haul", "–" if curve.mean_haul_m is None else _distance(curve.mean_haul_m, site), ""),
        ("balance points", shown or "none", "stations where the curve comes back to zero"),
    ]
    for kind in ("waste", "borrow"):
        rest = sum(r.volume_m3 for r in curve.rests if r.kind == kind)
        if rest > 0:
            rows.append((kind, show(rest, "soil_volume", units), "compacted-equivalent, left over on the line"))
    over = line.overhaul
    if over is not None:
        rows.append(
            ("freehaul", show(over.freehaul_m3, "soil_volume", units), f"up to {_distance(over.freehaul_m, site)}")
        )
        stations = over.bank_stations(line.station_m) / units.factor("soil_volume")
        note = f"bank, × stations of {_distance(line.station_m, site)}: {plain(stations, 0)}"
        rows.append(("overhaul", show(over.bank_m3, "soil_volume", units), note))
    if line.overhaul_cost is not None:
        rows.append(("cost of overhaul", plain(line.overhaul_cost, 0), ""))
    if line.economic_limit_m is not None:
        rows.append(
            ("economic limit", _distance(line.economic_limit_m, site), "beyond it waste and borrow are cheaper")
        )
    for what, volumes in line.checks().items():
        grid, ends, prism = (
            show(volumes[key], "soil_volume", units) for key in ("grid_m3", "end_area_m3", "prismoidal_m3")
        )
        rows.append((f"{what} by sections", ends, f"average end area; prismoidal {prism}; grid {grid}"))
    return tuple(rows)


def _proof(result: HaulResult) -> tuple[str, ...]:
    proof = result.certificate
    lines = [
        f"No plan is cheaper: prices of {proof.moves_checked:,} possible moves bound the cost to within "
        f"{_gap(proof.relative_gap)} of it ({proof.method}).",
        "Flow is counted in compacted-equivalent volume, so that soils with different shrink are compared fairly.",
    ]
    if result.ties:
        count = len(result.ties)
        lines.append(
            f"{count:,} other move{'' if count == 1 else 's'} could be part of a plan of the same cost; they are in the JSON."
        )
    return tuple(lines)


def _gap(relative: float) -> str:
    """How far a bound may lie from the cost; what is less than a billionth is rounding, and says no more.

    >>> _gap(4e-15), _gap(0.00031)
    ('1e-09', '3e-04')
    """
    return f"{max(relative, 1e-9):.0e}"


def tallies(site: Site, folder: OutputFolder) -> tuple[Any, ...]:
    """What gathers the ground of the map while it is walked."""
    from earthwork.quantities.depth_map import DepthMapTally

    return (DepthMapTally(),)


def draw(site: Site, result: HaulResult, folder: OutputFolder, gathered: Any) -> None:
    """Write the maps, the chart and the shapes of a **haul** result."""
    from earthwork.reporting.haul_map import draw_haul_map
    from earthwork.reporting.haul_shapes import write_haul_shapes
    from earthwork.reporting.mass_curve_chart import draw_mass_curve

    write_haul_shapes(result, folder.path("haul_moves.gpkg"))
    depths = gathered[0].map if gathered else None
    draw_haul_map(site, result, depths, folder.path("haul_map.png"))
    if result.line is not None:
        draw_mass_curve(
            result.line, folder.path("haul_mass_curve.png"), units=site.units, title=f"{site.name}: mass curve"
        )
