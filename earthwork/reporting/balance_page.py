"""What ``balance`` shows: the answer, what it is made of, and what a point or a centimetre is worth."""

from __future__ import annotations

from typing import Any

from earthwork.files.output import OutputFolder
from earthwork.reporting.basis import basis
from earthwork.reporting.display import decimals, display_key, plain, show
from earthwork.reporting.page import Block, Column, Facts, Notes, Page, table_of
from earthwork.results import Result
from earthwork.site import Site
from earthwork.units import UnitSystem

_MATERIAL_COLUMNS = (
    Column("material", "material"),
    Column("use", "use"),
    Column("cut_bank_m3", "cut"),
    Column("strip_bank_m3", "strip"),
    Column("over_excavation_bank_m3", "over-\nexcavation"),
    Column("allowance_bank_m3", "allow-\nance", sign=True),
    Column("dry_mass_t", "dry\nmass"),
    Column("lost_t", "lost"),
    Column("compacted_m3", "compacted"),
    Column("loose_m3", "loose"),
)
_MOVE_COLUMNS = (
    Column("way", ""),
    Column("material", "material"),
    Column("reason", "reason"),
    Column("bank_m3", "bank"),
    Column("loose_m3", "loose"),
    Column("compacted_m3", "compacted"),
    Column("dry_mass_t", "dry mass"),
    Column("loads", "truck loads"),
)


def page(site: Site, result: Any) -> Page:
    """The page of a **balance** result."""
    balance = result.to_dict()
    volumes = result.volumes.to_dict()
    heading = "Earth at hand, by material: bank volumes, and what they become"
    blocks: list[Block] = [
        basis(site, volumes),
        Facts(heading="Balance", rows=_answer(site, balance)),
        table_of(balance["materials"], _MATERIAL_COLUMNS, site.units, heading=heading, text_columns=2),
    ]
    moves = [{"way": "in", **m} for m in balance["imports"]] + [{"way": "out", **m} for m in balance["exports"]]
    if moves:
        blocks.append(table_of(moves, _MOVE_COLUMNS, site.units, heading="Over the gate", text_columns=3))
    else:
        blocks.append(Notes(heading="Over the gate", lines=("Nothing comes in and nothing leaves.",)))
    blocks.append(Facts(heading="What would mend it", rows=_remedies(site, balance)))
    if balance["pad_grades"]:
        blocks += _pad_grades(balance["pad_grades"], site)
    return Page(title=f"{site.name}: earthwork balance", blocks=tuple(blocks))


_PAD_COLUMNS = (
    Column("pad", "pad"),
    Column("held_by", "held by"),
    Column("elevation_before_m", "drawn at"),
    Column("elevation_after_m", "move to"),
    Column("shift_m", "shift", sign=True),
    Column("saves", "saves\nmoney"),
)


def _pad_grades(grades: dict[str, Any], site: Site) -> list[Block]:
    """Each pad's own grade, and what the site becomes by them."""
    units = site.units
    pads = [{**pad, "held_by": pad["held_by"] or "nothing", "saves": round(pad["saves"])} for pad in grades["pads"]]

    def change(key: str, **options: Any) -> str:
        before, after = (
            show(grades[f"{key}_{when}_m3"], "soil_volume", units, **options) for when in ("before", "after")
        )
        return f"{before} → {after}"

    rows = (
        ("cut, bank", change("cut"), ""),
        ("fill, compacted", change("fill"), ""),
        ("surplus", change("surplus", sign=True), "compacted; volumes are exact, of the design built again"),
        (
            "cost",
            f"{plain(grades['cost_before'], 0)} → {plain(grades['cost_after'], 0)}",
            "money, by simple unit costs",
        ),
    )
    return [
        table_of(pads, _PAD_COLUMNS, units, heading="Each pad at its own grade, at least cost", text_columns=2),
        Facts(rows=rows),
    ]


def _answer(site: Site, balance: dict[str, Any]) -> tuple[tuple[str, str, str], ...]:
    units = site.units
    surplus, sd = balance["surplus_compacted_m3"], balance["surplus_compacted_sd_m3"]
    rows = [
        (
            "fill-grade soil at hand",
            show(balance["available_compacted_m3"], "soil_volume", units),
            "compacted, after shrink and loss",
        ),
        (
            "needed",
            show(balance["required_compacted_m3"], "soil_volume", units),
            f"compacted: {_needs(balance['required'], units)}",
        ),
    ]
    word = "SURPLUS" if surplus >= 0 else "SHORTAGE"
    note = "compacted"
    if sd is not None:
        note += f", ± {show(sd, 'soil_volume', units)} (one standard deviation, from the soil tests alone)"
    rows.append((word, show(abs(surplus), "soil_volume", units), note))
    topsoil = balance["topsoil"]
    if topsoil and (topsoil["stripped_m3"] or topsoil["respread_m3"]):
        respread = show(topsoil["respread_m3"], "soil_volume", units)
        left = show(topsoil["surplus_m3"], "soil_volume", units, sign=True)
        note = f"stripped; {respread} respread, {left} left over"
        rows.append(("topsoil", show(topsoil["stripped_m3"], "soil_volume", units), note))
    return tuple(rows)


_NEEDS = {
    "fill_m3": "fill", "over_excavation_refill_m3": "over-excavation refill", "scarify_m3": "scarifying",
    "allowance_m3": "allowances", "section_m3": "sections",
}  # fmt: skip


def _needs(required: dict[str, float], units: UnitSystem) -> str:
    """What the site needs compacted soil for, each with its volume."""
    shown = {name: units.from_si(required[key], "soil_volume") for key, name in _NEEDS.items() if required[key]}
    places = decimals(shown.values(), "soil_volume")
    return ", ".join(f"{name} {plain(volume, places)}" for name, volume in shown.items()) or "nothing"


def _remedies(site: Site, balance: dict[str, Any]) -> tuple[tuple[str, str, str], ...]:
    units = site.units
    rows = []
    shift = balance["grade_shift"]
    if shift is not None:
        rows.append(("grade shift", shift_text(shift, site), _shift_note(shift, site)))
    else:
        note = balance["grade_shift_note"] or ""
        nearest = balance["grade_shift_nearest"]
        if nearest:
            left = show(nearest["surplus_compacted_m3"], "soil_volume", units, sign=True)
            note += f"; nearest {shift_text(nearest, site)}, leaving {left}"
        rows.append(("grade shift", "none", note))
    any_shift = shift or balance["grade_shift_nearest"]
    if any_shift:
        rows.append((*_per_step(any_shift, site), "compacted, for raising what may move by that much"))
    point = show(balance["per_shrink_point_m3"], "soil_volume", units)
    rows.append(("one point of shrinkage", point, "compacted"))
    return tuple(rows)


def shift_text(shift: dict[str, Any], site: Site) -> str:
    """A grade shift in words: which way, and by how much."""
    value = shift["shift_m"]
    if not value:
        return "0 " + site.units.label("length")
    return f"{'raise' if value > 0 else 'lower'} {show(abs(value), 'length', site.units)}"


def _shift_note(shift: dict[str, Any], site: Site) -> str:
    left = show(shift["surplus_compacted_m3"], "soil_volume", site.units, sign=True)
    area = show(shift["area_m2"], "area", site.units)
    step = shift.get("edge_step_m")
    edge = f"; a step of up to {show(abs(step), 'length', site.units)} at its edge" if step else ""
    return f"over {area}, leaving {left}{edge}"


def _per_step(shift: dict[str, Any], site: Site) -> tuple[str, str]:
    """What one centimetre, or one tenth of a foot, of grade is worth."""
    key = "surplus_change_per_cm_m3"
    name, factor = display_key(key, site.units)
    label = "one centimetre of grade" if name == key else "a tenth of a foot of grade"
    unit = site.units.label("soil_volume")
    worth = shift[key] * factor
    return label, f"{plain(worth, decimals([worth], 'soil_volume'), sign=True)} {unit}"


def title_of(result: Result) -> str:
    """One line that says how the site stands, for pictures."""
    surplus = result.to_dict()["surplus_compacted_m3"]
    word = "Surplus" if surplus >= 0 else "Shortage"
    return f"{word} {show(abs(surplus), 'soil_volume', result.units)} compacted"


def tallies(site: Site, folder: OutputFolder) -> tuple[Any, ...]:
    """What gathers the maps while the ground is walked."""
    from earthwork.reporting.maps import map_tallies

    return map_tallies(site, folder, "balance")


def draw(site: Site, result: Any, folder: OutputFolder, gathered: Any) -> None:
    """Write the maps and the curve of a **balance** result."""
    from earthwork.reporting.maps import write_maps

    write_maps(site, result.volumes, folder, "balance", gathered, subtitle=title_of(result))
    draw_curve(site, result, folder)


def draw_curve(site: Site, result: Result, folder: OutputFolder) -> None:
    """Write the curve of surplus against shift."""
    from earthwork.reporting.balance_curve import draw_balance_curve

    content = result.to_dict()
    curve = [(point["shift_m"], point["surplus_compacted_m3"]) for point in content["grade_curve"]]
    if len(curve) > 1:
        shift = content["grade_shift"]
        draw_balance_curve(
            curve,
            folder.path("balance_curve.png"),
            units=site.units,
            title=f"{site.name}: what a shift of grade does",
            target_m3=site.model.balance.target_surplus,
            shift_m=shift["shift_m"] if shift else None,
            sd_m3=content["surplus_compacted_sd_m3"],
        )
