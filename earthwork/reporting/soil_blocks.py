"""Parts of the soil page: what was tested, how sure the shrink is, what soil it is, and the charts."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from typing import TYPE_CHECKING, Any

from earthwork.reporting.display import plain, show
from earthwork.reporting.page import Block, Facts, Notes, Table
from earthwork.site import Site
from earthwork.units import UnitSystem

if TYPE_CHECKING:
    from earthwork.files.output import OutputFolder
    from earthwork.soils.bench import ProctorResult
    from earthwork.soils.result import SoilResult

Material = dict[str, Any]  #: an entry of ``result.materials``
Row = tuple[str, str, str]  #: label, value, note

#: One block of cautions for every soil page.
CAUTIONS = (
    "A card is as good as its samples: one curve stands for one soil, and the ground changes between the tests.",
    "Groups, suction and collapse are screens from index properties; they name what to test, and pass nothing.",
    "Density tests of the fill, by the standard that the specification names, decide whether it complies. "
    "Local code "
    "and the licensed geotechnical engineer govern.",
)


def soil_blocks(materials: Sequence[Material], site: Site) -> list[Block]:
    """The blocks that follow the cards."""
    blocks: list[Block] = []
    for material in materials:
        rows = [*_curve_rows(material, site.units), *_test_rows(material, site.units)]
        if rows:
            blocks.append(Facts(heading=f"{material['material']}: tests", rows=tuple(rows)))
    sure = [m for m in materials if m["uncertainty"]]
    if sure:
        blocks.append(_sureness(sure))
    blocks += [_kind(m, site.units) for m in materials if m["classification"]]
    blocks.append(Notes(heading="Care", lines=CAUTIONS))
    return blocks


def _curve_rows(material: Material, units: UnitSystem) -> Iterator[Row]:
    curve = material["tests"]["proctor"]
    if curve is None:
        return
    yield "compaction curve", f"{curve['count']} points, {curve['form']}", curve["method"]
    yield from curve_rows(curve, units)
    if material["oversize_percent"]:
        lab = show(material["laboratory_max_dry_density_kg_m3"], "density", units)
        optimum = plain(material["laboratory_optimum_water_content_percent"], 1)
        yield "of the finer fraction", f"{lab} at {optimum} %", f"before {material['oversize_percent']:g} % oversize"


def curve_rows(curve: dict[str, Any], units: UnitSystem) -> Iterator[Row]:
    """Maximum, optimum and doubts of one fitted curve."""
    error, spread = curve["max_dry_density_se_kg_m3"], curve["spread_kg_m3"]
    note = "" if error is None else f"± {_fine(error, units)} by the scatter of the points"
    yield "maximum dry density", show(curve["max_dry_density_kg_m3"], "density", units), note
    error = curve["optimum_water_content_se_percent"]
    note = "" if error is None else f"± {plain(error, 2)} points"
    yield "optimum water content", f"{plain(curve['optimum_water_content_percent'], 1)} %", note
    yield "saturation at the optimum", f"{plain(curve['saturation_at_optimum_percent'], 0)} %", "usually 70 to 95 %"
    forms = ", ".join(f"{f['form']} {show(f['max_dry_density_kg_m3'], 'density', units)}" for f in curve["fits"])
    yield "spread of the forms", _fine(spread, units), forms
    if curve["left_out"]:
        yield "left out", str(len(curve["left_out"])), "; ".join(curve["left_out"])


def _fine(error: float, units: UnitSystem) -> str:
    """A small difference of densities, with a decimal more than densities have."""
    places = 2 if units.name == "us" else 1
    return f"{plain(units.from_si(error, 'density'), places)} {units.label('density')}"


def _test_rows(material: Material, units: UnitSystem) -> Iterator[Row]:
    bank, log = material["tests"]["bank"], material["tests"]["field"]
    if bank is not None:
        yield _set_row("bank tests", bank, units)
        for group in bank["groups"]:
            sd = group["dry_density_sd_kg_m3"]
            scatter = "" if sd is None else f"± {show(sd, 'density', units)}, "
            yield (
                f"  {group['group']}",
                show(group["dry_density_kg_m3"], "density", units),
                f"{scatter}{group['count']} tests",
            )
        if bank["outliers"]:
            yield "  far from the others", ", ".join(bank["outliers"]), "kept in the mean"
    if log is None:
        return
    yield _set_row("tests in the fill", log, units)
    scatter = log["relative_compaction_sd_percent"]
    note = "" if scatter is None else f"± {plain(scatter, 1)}, "
    note += (
        f"{plain(log['relative_compaction_low_percent'], 1)} to {plain(log['relative_compaction_high_percent'], 1)} %"
    )
    yield "compaction reached", f"{plain(log['relative_compaction_percent'], 1)} %", note
    yield "  under the required", f"{log['short_count']} of {log['count']}", ", ".join(log["short"][:8])
    outside = log["outside_window"]
    if outside is not None:
        names = ", ".join(text.split(":")[0] for text in outside[:8])
        yield "  outside the window", f"{len(outside)} of {log['count']}", names


def _set_row(label: str, tests: dict[str, Any], units: UnitSystem) -> Row:
    sd, water = tests["dry_density_sd_kg_m3"], tests["water_content_percent"]
    note = f"{tests['count']} tests"
    note += "" if sd is None else f", scatter ± {show(sd, 'density', units)}"
    note += "" if water is None else f", water {plain(water, 1)} %"
    return label, show(tests["dry_density_kg_m3"], "density", units), note


def _sureness(materials: Sequence[Material]) -> Table:
    """How sure each shrinkage factor is, by its parts, and what would make it surer."""
    rows = []
    for material in materials:
        uncertainty = material["uncertainty"]
        parts = uncertainty["parts"]
        for part in parts:
            further = part["further_tests_to_halve"]
            rows.append(
                (
                    material["material"] if part is parts[0] else "",
                    part["part"],
                    f"{plain(part['relative_sd_percent'], 2)} %",
                    f"{plain(part['share_percent'], 0)} %",
                    "–" if part["tests"] is None else str(part["tests"]),
                    "–" if further is None else f"{further:,}",
                )
            )
        for name in uncertainty["not_included"]:
            rows.append(("", name, "not known", "–", "–", "–"))
    return Table(
        columns=("material", "part", "± of the factor", "share", "tests", "further tests\nto halve the whole"),
        rows=tuple(rows), heading="How sure the shrinkage factor is", text_columns=2,
    )  # fmt: skip


def _kind(material: Material, units: UnitSystem) -> Facts:
    soil, means, suction = material["classification"], material["consequences"], material["suction"]
    limits = "non-plastic"
    if soil["plasticity_index"] is not None:
        limits = f"LL {soil['liquid_limit']:g}, PI {soil['plasticity_index']:g}"
    parts = (("gravel_percent", "gravel"), ("sand_percent", "sand"), ("fines_percent", "fines"))
    grading = ", ".join(f"{name} {plain(soil[key], 0)} %" for key, name in parts if soil[key] is not None)
    rows: list[Row] = [
        ("group (ASTM D2487)", soil["symbol"], f"{soil['name']}; {grading}; {limits}"),
        ("governing test", "", means["governing_test"]),
        ("plant", "", means["plant"]),
        ("water in its fines", "", means["water_holding"]),
        ("binding", "", means["binding"]),
    ]
    if suction is not None:
        ends = f"at the target, {plain(suction['after_wetting_kpa'], 0)} kPa once wet: {suction['sensitivity']}"
        target = f"{plain(suction['target_kpa'], 0)} kPa"
        rows.append(("matric suction, estimate", target, f"{ends} ({suction['relation']})"))
    rows += [("beware" if i == 0 else "", "", caution) for i, caution in enumerate(means["cautions"])]
    return Facts(heading=f"{material['material']}: what soil it is", rows=tuple(rows))


def draw_cards(site: Site, result: SoilResult, folder: OutputFolder) -> None:
    """Write the compaction chart of each material that has one."""
    from earthwork.files.output import safe_file_name
    from earthwork.reporting.compaction_chart import chart_of_card, draw_compaction_chart

    names: list[str] = []
    for card in result.cards:
        content = chart_of_card(card, site.name)
        if content is not None:
            names.append(safe_file_name(card.material, names))
            draw_compaction_chart(content, folder.path(f"soil_{names[-1]}.png"), units=site.units)


def draw_curves(site: Site, result: ProctorResult, folder: OutputFolder) -> None:
    """Write the chart of each compaction curve."""
    from earthwork.files.output import safe_file_name
    from earthwork.reporting.compaction_chart import chart_of_curve, draw_compaction_chart

    names: list[str] = []
    for material, curve in result.curves:
        names.append(safe_file_name(material, names))
        title = material if material == site.name else f"{material}, {site.name}"
        draw_compaction_chart(chart_of_curve(curve, title), folder.path(f"proctor_{names[-1]}.png"), units=site.units)
