"""Where the figures come from: surfaces with their dates and datums, standards, assumptions and method."""

from __future__ import annotations

import datetime
from pathlib import Path
from typing import Any

from earthwork.reporting.basis import missing_line, not_counted_line, sample_line, scale_line, subgrade_line
from earthwork.reporting.display import plain, show
from earthwork.reporting.report.parts import Parts
from earthwork.site import Site

_METHOD = (
    "Cut and fill are between stripped ground and subgrade, cell by cell; cells that cross the zero line are split by "
    "the plane through them, and zones are cut exactly at their edges.",
    "Only dry mass is conserved: bank, loose and compacted volumes are views of it through dry densities. The ledger of "
    "dry mass closes to rounding.",
    "Shrinkage is bank dry density over the fill dry density that crews will reach, not the one that is required.",
    "Cut is bank volume, fill is compacted volume; stripping, over-excavation, scarifying and sections are lines of "
    "their own.",
)


def basis_rows(parts: Parts) -> list[tuple[str, str, str]]:
    """The facts under the answer box: (label, value, note)."""
    site, volumes = parts.site, parts.documents["volumes"]
    rows = [("surfaces", "; ".join(_surfaces(parts)), "")]
    rows.append(("coordinates", *_coordinates(parts)))
    rows += [
        ("to subgrade", subgrade_line(site), ""),
        ("ground scale", scale_line(site, volumes), ""),
        ("missing ground", missing_line(site, volumes), ""),
        ("cells", sample_line(site, volumes), ""),
    ]
    rows += _topsoil(parts)
    rows += _shrinkage(parts)
    rows.append(("not counted", not_counted_line(site).removeprefix("Not counted: "), ""))
    return rows


def _surfaces(parts: Parts) -> list[str]:
    ground = parts.site.model.ground
    texts = []
    for name in ("existing", "finished"):
        spec = getattr(ground, name)
        if spec is None:
            texts.append(f"{name}: built from [design]")
            continue
        file = getattr(spec, "file", None)
        if file is None:
            texts.append(f"{name}: {'a level' if hasattr(spec, 'level') else 'a tilted plane'}")
        else:
            texts.append(f"{name}: {file}{_dated(parts.site.resolve(file))}")
    return texts


def inputs_date(site: Site) -> datetime.date | None:
    """Date of the newest surface file of a site; None without any."""
    dates = []
    for name in ("existing", "finished"):
        file = getattr(getattr(site.model.ground, name), "file", None)
        if file is not None and site.resolve(file).exists():
            changed = site.resolve(file).stat().st_mtime
            dates.append(datetime.datetime.fromtimestamp(changed, tz=datetime.UTC).date())
    return max(dates, default=None)


def _dated(path: Path) -> str:
    """The date that a raster carries, else that of the file."""
    import rasterio

    try:
        with rasterio.open(path) as raster:
            date = raster.tags().get("TIFFTAG_DATETIME") or raster.tags().get("ACQUISITION_DATE")
        if date:
            return f", dated {date[:10].replace(':', '-')}"
        changed = datetime.datetime.fromtimestamp(path.stat().st_mtime, tz=datetime.UTC)
        return f", file of {changed:%Y-%m-%d} (it carries no survey date)"
    except (OSError, rasterio.errors.RasterioError):
        return ""


def _coordinates(parts: Parts) -> tuple[str, str]:
    crs = parts.ground.stack.grid.crs
    if crs is None:
        return "local grid", "no CRS is given"
    horizontal = crs.sub_crs_list[0] if crs.is_compound else crs
    text = f"{horizontal.name}, datum {horizontal.datum.name if horizontal.datum else 'unknown'}"
    vertical = next((s.name for s in crs.sub_crs_list if s.is_vertical), None)
    note = f"heights: {vertical}" if vertical else "heights: the files name no vertical datum"
    return text, note


def _topsoil(parts: Parts) -> list[tuple[str, str, str]]:
    balance = parts.documents.get("balance")
    if not balance or not balance["topsoil"]:
        return []
    topsoil, units = balance["topsoil"], parts.site.units
    respread = show(topsoil["respread_m3"], "soil_volume", units)
    left = show(topsoil["surplus_m3"], "soil_volume", units, sign=True)
    text = f"{show(topsoil['stripped_m3'], 'soil_volume', units)} stripped"
    return [("topsoil", text, f"{respread} respread, {left} left over")]


def _shrinkage(parts: Parts) -> list[tuple[str, str, str]]:
    rows = []
    for card in parts.cards.values():
        if card.use not in ("fill", "rock") or card.shrinkage_factor is None:
            continue
        factor, sd = card.shrinkage_factor * (1 - card.loss_fraction), card.shrinkage_factor_sd
        text = f"{card.material}: {plain(factor, 3)} compacted per bank after loss"
        if sd:
            low, high = (factor + k * sd * (1 - card.loss_fraction) for k in (-2, 2))
            text += f", between {plain(low, 3)} and {plain(high, 3)}"
        note = f"{plain(100 * (1 - card.shrinkage_factor), 1)} % of bank volume"
        if card.method and card.relative_compaction_percent is not None:
            note += (
                f"; {card.method}, {plain(card.relative_compaction_percent, 1)} % required, "
                f"{plain(card.expected_compaction_percent, 1)} % expected"
            )
        rows.append(("effective shrinkage", text, note))
    return rows


def assumptions(parts: Parts) -> list[str]:
    """What is taken for granted, by name."""
    lines = [
        f"{card.material}: not from tests or the site file: {', '.join(card.assumed)}"
        for card in parts.cards.values()
        if card.assumed
    ]
    model = parts.site.model
    if model.fill is not None and model.fill.expected_compaction is not None:
        lines.append(f"crews reach {plain(model.fill.expected_compaction, 1)} % of the maximum on average")
    lines += [
        f"{card.material}: {plain(100 * card.loss_fraction, 1)} % of dry mass is lost in digging and hauling"
        for card in parts.cards.values()
        if card.loss_fraction
    ]
    if model.haul is not None:
        lines.append("haul costs are by dry mass and distance, loads by volume or moist weight, whichever is more")
    return lines or ["nothing beyond the site file"]


def method_notes(parts: Parts) -> list[str]:
    """How it was worked out, in a few lines."""
    notes = list(_METHOD)
    resampled = {name: how for name, how in parts.ground.resampling.items() if how not in ("none", "exact")}
    if resampled:
        notes.append("Resampled: " + ", ".join(f"{name} ({how})" for name, how in resampled.items()) + ".")
    lifts: dict[str, Any] = parts.documents.get("lifts", {})
    if lifts.get("material_rule"):
        notes.append(f"Materials go into lifts by the rule: {lifts['material_rule']}.")
    return notes
