"""What ``pads`` shows: what each pad stands on, why it is flagged, and what would mend it."""

from __future__ import annotations

import math
from typing import Any

from earthwork.files.output import OutputFolder
from earthwork.reporting.display import plain, show
from earthwork.reporting.page import Block, Column, Facts, Notes, Page, table_of
from earthwork.results import Result
from earthwork.site import Site
from earthwork.units import UNITS

_FILL_COLUMNS = (
    Column("pad", "pad"),
    Column("class", "class"),
    Column("class_before_undercut", "before undercut"),
    Column("footprint_m2", "judged on"),
    Column("cut_share_percent", "cut"),
    Column("fill_share_percent", "fill"),
    Column("min_fill_m", "least"),
    Column("mean_fill_m", "mean"),
    Column("p95_fill_m", "95th %"),
    Column("max_fill_m", "greatest"),
)
_CHANGE_COLUMNS = (
    Column("pad", "pad"),
    Column("ground", "natural ground"),
    Column("percent_of_maximum", "of its max."),
    Column("differential_fill_m", "difference"),
    Column("differential_distance_m", "over"),
    Column("settles", "settles"),
    Column("one_in", "distortion\n1 in"),
    Column("settlement_index", "index"),
)
_SLOPE_COLUMNS = (
    Column("pad", "pad"),
    Column("fill_height_m", "falls"),
    Column("cut_height_m", "rises"),
    Column("setback_from_top_m", "from top"),
    Column("setback_from_toe_m", "from toe"),
    Column("shortfall_m", "too near by"),
)
_KEY_COLUMNS = (
    Column("fill", "fill"),
    Column("area_m2", "on steep ground"),
    Column("greatest_height_m", "height"),
    Column("mean_gradient_percent", "ground"),
    Column("key_length_m", "key"),
    Column("key_m3", "key"),
    Column("benches_m3", "benches"),
)
_CAUTIONS = (
    "A screen by the rules in the site file, not a judgement that a pad, a slope or a fill is safe: local code and the "
    "geotechnical engineer of record govern.",
    "Compression of the ground below the removal bottom is not in it, nor seismic settlement, nor loads of buildings.",
)


def page(site: Site, result: Result) -> Page:
    """The page of a **pads** result."""
    found = result.to_dict()
    pads = found["pads"]
    blocks: list[Block] = [
        Notes(heading="What this is", lines=_basis(site, pads)),
        table_of(pads, _FILL_COLUMNS, site.units, heading="Fill under the pads", text_columns=3),
        table_of(
            [_change_row(pad, site) for pad in pads], _CHANGE_COLUMNS, site.units,
            heading="Differences and settlement", text_columns=2,
        ),
    ]  # fmt: skip
    flagged = tuple(line for pad in pads if (line := _flag_line(pad, site)))
    if flagged:
        blocks.append(Notes(heading="Why pads are flagged", lines=flagged))
    undercuts = tuple(_undercut_row(pad, site) for pad in pads if pad["undercut"])
    if undercuts:
        blocks.append(Facts(heading="Undercut that would mend a transition", rows=undercuts))
    rows = [{"pad": pad["pad"], **pad["slopes"]} for pad in pads]
    if any(row["fill_height_m"] or row["cut_height_m"] for row in rows):
        heading = "Slopes beside pads, and setbacks by the model code's formula (a screen)"
        blocks.append(table_of(rows, _SLOPE_COLUMNS, site.units, heading=heading))
    blocks += _keys(found["keys"], site)
    blocks.append(Notes(heading="Cautions", lines=_CAUTIONS))
    return Page(title=f"{site.name}: what the pads stand on", blocks=tuple(blocks))


def _basis(site: Site, pads: list[dict[str, Any]]) -> tuple[str, ...]:
    table = site.model.pads
    assert table is not None
    on_buildings = sum(pad["judged_on"] == "building" for pad in pads)
    margin = show(table.building_margin, "length", site.units)
    judged = "All pads are judged as a whole."
    if on_buildings:
        of = "All pads" if on_buildings == len(pads) else f"{on_buildings} of {len(pads)} pads"
        judged = f"{of} are judged under their building and {margin} around it"
        judged += "." if on_buildings == len(pads) else "; the others as a whole."
    deep, difference = (show(v, "length", site.units) for v in (table.deep_fill, table.differential_fill))
    return (
        "Thickness of fill is from the removal bottom (after stripping and undercut) to subgrade. " + judged,
        f"Deep fill: the 95th percentile of thickness reaches {deep}. Transition: cut and fill both over "
        f"{plain(table.transition_share, 1)} %. Differences are flagged from {difference}.",
        f"Distortion is measured over {show(table.gauge_length, 'length', site.units)} and flagged beyond 1 in "
        f"{table.distortion_limit:g}.",
    )


def _change_row(pad: dict[str, Any], site: Site) -> dict[str, Any]:
    natural = pad["natural_ground"]
    distortion = pad["max_distortion"]
    return {
        **pad,
        "settles": _settles(pad, site),
        "ground": natural["material"],
        "percent_of_maximum": natural["percent_of_maximum"],
        "one_in": None if distortion is None else round(distortion),
    }


def _settles(pad: dict[str, Any], site: Site) -> str | None:
    """The range of settlement after construction, in millimetres or inches."""
    if pad["settlement_high_m"] is None:
        return None
    unit, factor, places = ("mm", 1000.0, 0) if site.units.name == "metric" else ("in", 1 / UNITS["length"]["in"], 1)
    if pad["settlement_high_m"] * factor < 0.5 * 10**-places:
        return f"under {10**-places:g} {unit}"
    low, high = (plain(pad[f"settlement_{end}_m"] * factor, places) for end in ("low", "high"))
    return f"{low} to {high} {unit}"


def _flag_line(pad: dict[str, Any], site: Site) -> str:
    """The flags of one pad in words; empty for a pad with nothing to say."""
    quiet = ("cut", "fill", "distortion") if pad["distortion_limits"] else ("cut", "fill")
    said = [flag for flag in pad["flags"] if flag not in quiet]
    said += flagged_ground(pad["natural_ground"])
    if pad["distortion_limits"]:
        worst = pad["distortion_limits"][-1]
        said.append(f"distortion of 1 in {pad['max_distortion']:,.0f} ({worst['means']}: 1 in {worst['one_in']:g})")
    if pad["wait_days"]:
        said.append(f"wait {pad['wait_days']:,.0f} days from half-placed fill before building")
    return f"{pad['pad']}: {'; '.join(said)}." if said else ""


def flagged_ground(natural: dict[str, Any]) -> list[str]:
    """What is flagged of the natural ground under a pad, a phrase for each material that is."""
    said = []
    for row in natural["materials"]:
        if row["flags"]:
            share = "" if row["share_percent"] > 99.5 else f" ({row['share_percent']:.2g} % of it)"
            said.append(f"on {row['material']}{share}: {', '.join(row['flags'])}")
    return said


def _undercut_row(pad: dict[str, Any], site: Site) -> tuple[str, str, str]:
    undercut = pad["undercut"]
    # Rounded up: an undercut of the depth that is printed must mend the transition.
    depth = math.ceil(site.units.from_si(undercut["asked_m"], "length") * 100 - 1e-6) / 100
    asked = show(site.units.to_si(depth, "length"), "length", site.units)
    cost = undercut["compacted_cost_m3"]
    note = f"dug and refilled, for {asked} of fill everywhere (an [[over_excavation]] from subgrade)"
    if cost is not None:
        note += f"; it takes {show(cost, 'soil_volume', site.units)} of compacted soil from the balance"
    return pad["pad"], show(undercut["volume_m3"], "soil_volume", site.units), note


def _keys(keys: dict[str, Any], site: Site) -> list[Block]:
    if not keys["fills"]:
        return []
    counted = "counted in the balance" if keys["counted"] else "not counted in the balance"
    heading = f"Fill on ground steeper than {site.model.keys.steeper_than:g}:1: keys and benches, {counted}"
    blocks: list[Block] = [table_of(keys["fills"], _KEY_COLUMNS, site.units, heading=heading)]
    cost = keys["compacted_cost_m3"]
    volume = show(keys["volume_m3"], "soil_volume", site.units)
    note = "dug and refilled"
    if cost is not None:
        note += f"; {show(cost, 'soil_volume', site.units)} of compacted soil"
    return [*blocks, Facts(rows=(("keys and benches", volume, note),))]


def draw(site: Site, result: Any, folder: OutputFolder, tallies: Any) -> None:
    """Write the map, the sections and the shapes of a **pads** result."""
    from earthwork.reporting.pad_map import draw_pad_map, write_pad_shapes
    from earthwork.reporting.pad_sections import draw_pad_sections

    write_pad_shapes(result, folder.path("pads_shapes.gpkg"))
    if result.ground.design is not None:
        from earthwork.reporting.design_shapes import write_design

        write_design(result.ground.design, folder, "pads", site.units)
    draw_pad_map(site, result, folder.path("pads_map.png"))
    draw_pad_sections(site, result, folder.path("pads_sections.png"))
