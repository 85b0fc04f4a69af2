"""The hand check: a cell, a material, a lift and a haul with the real numbers, to be followed with a pocket calculator.

Each line says what is worked out, writes the sum with the numbers of this site, and gives what the program has.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

from earthwork.quantities.cell_probe import ProbedCell
from earthwork.reporting.display import plain
from earthwork.reporting.report.parts import Parts


@dataclass(frozen=True)
class Line:
    """A sum: what, as written, and the program's figure with its unit."""

    what: str
    sum: str
    value: str


@dataclass(frozen=True)
class HandCheck:
    title: str
    lines: tuple[Line, ...]


def hand_checks(parts: Parts) -> tuple[HandCheck, ...]:
    """What this site gives to check: always a cell, the rest where its part of the report is there."""
    checks = []
    for cell, kind in ((parts.probe.fill, "fill"), (parts.probe.cut, "cut")):
        if cell is not None:
            checks.append(_cell(parts, cell, kind))
            break
    for make in (_material, _lift, _haul):
        check = make(parts)
        if check is not None:
            checks.append(check)
    return tuple(checks)


class _Numbers:
    """Numbers of this site's units as text."""

    def __init__(self, parts: Parts) -> None:
        self.units = parts.site.units

    def of(self, value: float, dimension: str, places: int, si: float = 1.0) -> str:
        return plain(self.units.from_si(value * si, dimension), places)

    def label(self, dimension: str) -> str:
        return self.units.label(dimension)


def _cell(parts: Parts, cell: ProbedCell, kind: str) -> HandCheck:
    n, grid = _Numbers(parts), parts.ground.stack.grid
    unit, volume = n.label("length"), n.label("soil_volume")

    def z(value: float, places: int = 3) -> str:
        return n.of(value, "length", places)

    depth = cell.fill_m if kind == "fill" else cell.cut_m
    area_m2 = grid.cell_area_m2
    sides = f"{z(grid.cell_east_m, 4)} × {z(grid.cell_north_m, 4)}"
    cubic = "" if n.units.name == "metric" else " ÷ 27"
    lines = [
        Line("stripped ground", f"{z(cell.existing_m)} − {z(cell.strip_m)}", f"{z(cell.stripped_m)} {unit}"),
        Line("subgrade", f"{z(cell.finished_m)} − {z(cell.section_m)}", f"{z(cell.subgrade_m)} {unit}"),
        Line("depth", f"{z(cell.subgrade_m)} − {z(cell.stripped_m)}", f"{z(cell.depth_m)} {unit}"),
        Line("ground area of the cell", sides, f"{n.of(area_m2, 'area', 4)} {n.label('area')}"),
        Line(
            f"{kind} of this cell",
            f"{z(abs(cell.depth_m))} × {n.of(area_m2, 'area', 4)}{cubic}",
            f"{n.of(depth * area_m2, 'soil_volume', 3)} {volume}",
        ),
    ]
    if cell.removal_bottom_m < min(cell.stripped_m, cell.subgrade_m):
        dug = min(cell.stripped_m, cell.subgrade_m) - cell.removal_bottom_m
        lines.append(
            Line(
                "refill of the over-excavation",
                f"({z(min(cell.stripped_m, cell.subgrade_m))} − {z(cell.removal_bottom_m)}) × "
                f"{n.of(area_m2, 'area', 4)}{cubic}",
                f"{n.of(dug * area_m2, 'soil_volume', 3)} {volume}",
            )
        )
    place = f"{cell.easting:.1f} E, {cell.northing:.1f} N (row {cell.row + 1}, column {cell.column + 1})"
    return HandCheck(f"A cell: the deepest {kind}, at {place}", tuple(lines))


def _material(parts: Parts) -> HandCheck | None:
    balance = parts.documents.get("balance")
    if not balance:
        return None
    rows = [m for m in balance["materials"] if m["use"] in ("fill", "rock") and m["compacted_m3"]]
    if not rows:
        return None
    row = max(rows, key=lambda m: m["dry_mass_t"])
    card, n = parts.cards[row["material"]], _Numbers(parts)
    density, volume, mass = n.label("density"), n.label("soil_volume"), n.label("mass")
    places = 1 if n.units.name == "metric" else 2
    bank_m3 = sum(row[f"{k}_bank_m3"] for k in ("cut", "strip", "over_excavation", "allowance"))
    delivered_t = row["dry_mass_t"] - row["lost_t"]
    placed = 1000 * delivered_t / row["compacted_m3"]
    to_mass = "× {} ÷ 1000" if n.units.name == "metric" else "× 27 × {} ÷ 2000"
    from_mass = "× 1000 ÷ {}" if n.units.name == "metric" else "× 2000 ÷ 27 ÷ {}"

    def rho(value: float) -> str:
        return n.of(value, "density", places)

    lines = []
    if card.max_dry_density_kg_m3 and card.expected_compaction_percent and card.fill_dry_density_kg_m3:
        lines.append(
            Line(
                "dry density in the fill",
                f"{plain(card.expected_compaction_percent / 100, 3)} × {rho(card.max_dry_density_kg_m3)}",
                f"{rho(card.fill_dry_density_kg_m3)} {density}",
            )
        )
    if card.shrinkage_factor and card.fill_dry_density_kg_m3:
        ratio = f"{rho(card.bank_dry_density_kg_m3)} ÷ {rho(card.fill_dry_density_kg_m3)}"
        lines.append(Line("compacted per bank volume", ratio, plain(card.shrinkage_factor, 4)))
    dug = n.of(bank_m3, "soil_volume", 0)
    lines += [
        Line(
            "dry mass",
            f"{dug} {to_mass.format(rho(card.bank_dry_density_kg_m3))}",
            f"{n.of(row['dry_mass_t'], 'mass', 0, 1000)} {mass}",
        ),
        Line(
            "after loss",
            f"{n.of(row['dry_mass_t'], 'mass', 0, 1000)} × (1 − {plain(card.loss_fraction, 3)})",
            f"{n.of(delivered_t, 'mass', 0, 1000)} {mass}",
        ),
        Line(
            "compacted, at the mean density of all depths",
            f"{n.of(delivered_t, 'mass', 0, 1000)} {from_mass.format(rho(placed))}",
            f"{n.of(row['compacted_m3'], 'soil_volume', 0)} {volume}",
        ),
    ]
    return HandCheck(f"A material: {row['material']}", tuple(lines))


def _lift(parts: Parts) -> HandCheck | None:
    lifts = parts.documents.get("lifts", {}).get("lifts")
    if not lifts:
        return None
    row = max(lifts, key=lambda r: r["compacted_m3"])
    n = _Numbers(parts)
    metric = n.units.name == "metric"
    volume, mass, unit = n.label("soil_volume"), n.label("mass"), n.label("length")
    compacted, dry = n.of(row["compacted_m3"], "soil_volume", 1), n.of(row["dry_mass_t"], "mass", 1, 1000)
    density = 1000 * row["dry_mass_t"] / row["compacted_m3"]
    lines = [
        Line(
            "thickness",
            f"{n.of(row['top_m'], 'length', 3)} − {n.of(row['bottom_m'], 'length', 3)}",
            f"{n.of(row['top_m'] - row['bottom_m'], 'length', 3)} {unit}",
        ),
        Line(
            "volume, at most area × thickness",
            f"{n.of(row['area_m2'], 'area', 0)} × {n.of(row['top_m'] - row['bottom_m'], 'length', 3)}"
            + ("" if metric else " ÷ 27"),
            f"{n.of(row['area_m2'] * (row['top_m'] - row['bottom_m']), 'soil_volume', 1)} {volume}; "
            f"the lift holds {compacted}",
        ),
        Line(
            "dry mass",
            f"{compacted} × {n.of(density, 'density', 0 if metric else 1)}" + (" ÷ 1000" if metric else " × 27 ÷ 2000"),
            f"{dry} {mass}",
        ),
    ]
    if row.get("water_to_add_l"):
        points = row["water_to_add_l"] / (row["dry_mass_t"] * 10)
        lines.append(
            Line(
                "water to add (1 point of 1 t is 10 L)" if metric else "water to add (1 point of a ton is 2.397 gal)",
                f"{dry} × {plain(points, 2)} × {'10' if metric else '2.3965'}",
                f"{n.of(row['water_to_add_l'], 'water_volume', 0)} {n.label('water_volume')}",
            )
        )
    return HandCheck(f"A lift: {row['fill']}, lift {row['lift']}", tuple(lines))


def _haul(parts: Parts) -> HandCheck | None:
    haul = parts.documents.get("haul")
    moves = haul.get("moves") if haul else None
    if not moves:
        return None
    row = max(moves, key=lambda m: m["dry_mass_t"] * m["distance_m"])
    n, card = _Numbers(parts), parts.cards[row["material"]]
    mass = n.label("mass")
    dry, loose = n.of(row["dry_mass_t"], "mass", 1, 1000), n.of(row["loose_m3"], "soil_volume", 1)
    lines = []
    model = parts.site.model.haul
    truck = model.truck if model else None
    if truck and row.get("loads") is not None:
        wet = card.bank_water_content_percent or 0.0
        by_volume = row["loose_m3"] / truck.heaped_volume
        by_weight = 1000 * row["dry_mass_t"] * (1 + wet / 100) / truck.payload
        lines += [
            Line("loads by volume", f"{loose} ÷ {n.of(truck.heaped_volume, 'soil_volume', 1)}", plain(by_volume, 1)),
            Line(
                "loads by weight, moist",
                f"{dry} × {plain(1 + wet / 100, 4)} ÷ {n.of(truck.payload, 'mass', 1)}",
                plain(by_weight, 1),
            ),
            Line("the greater one governs", row["limited_by"], plain(row["loads"], 1)),
        ]
    distance = n.units.from_si(row["distance_m"], "road")
    work = n.units.from_si(row["dry_mass_t"] * 1000, "mass") * distance
    lines.append(
        Line(
            "dry mass × distance",
            f"{dry} × {plain(distance, 3)}",
            f"{plain(work, 1)} {mass}·{n.label('road')}",
        )
    )
    return HandCheck(f"A haul: {row['material']} from {row['from']} to {row['to']}", tuple(lines))


def as_document(checks: tuple[HandCheck, ...]) -> list[dict[str, Any]]:
    """The checks as JSON."""
    return [
        {"title": c.title, "lines": [{"what": x.what, "sum": x.sum, "value": x.value} for x in c.lines]} for c in checks
    ]
