"""Sections through flagged pads along the steepest change of thickness: ground, removal bottom, subgrade, pad."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
import shapely

from earthwork.ground.grid import Grid, Window
from earthwork.plan.pad_measures import profile
from earthwork.plan.pads import PadReport, PadsResult
from earthwork.quantities.pad_ground import PadPlace
from earthwork.reporting import colors
from earthwork.reporting.display import show
from earthwork.reporting.figures import new_figure, plain_axes, save_figure, shorten_to, wrapped
from earthwork.site import Site

if TYPE_CHECKING:
    from matplotlib.axes import Axes

#: Flags that call for a section.
_CALLS = ("deep fill", "transition", "differential fill", "distortion")
#: Most sections on the sheet; the worst pads come first.
_MOST = 8
#: How far a section goes on beyond the pad [m].
_BEYOND_M = 12.0


@dataclass(frozen=True)
class PadSection:
    """One section; elevations [m] at stations [m] from the first edge of the pad."""

    report: PadReport
    station: np.ndarray
    existing: np.ndarray
    bottom: np.ndarray
    subgrade: np.ndarray
    finished: np.ndarray
    pad: tuple[float, float]  #: stations of the pad's edges
    judged: tuple[float, float]  #: stations of the footprint's
    steepest: tuple[float, float]  #: stations of the gauge


def pad_sections(result: PadsResult) -> list[PadSection]:
    """Sections through the flagged pads, those with the greatest settlement index first."""
    flagged = [
        (report, place)
        for report, place in zip(result.pads, result.places, strict=True)
        if report.steepest_change is not None and set(report.flags) & set(_CALLS)
    ]
    flagged.sort(key=lambda pair: (-pair[0].settlement_index, pair[0].pad))
    reader = result.ground.stack.reader()
    try:
        return [_section(result, report, place, reader) for report, place in flagged[:_MOST]]
    finally:
        reader.close()


def _section(result: PadsResult, report: PadReport, place: PadPlace, reader: Any) -> PadSection:
    """Cut all surfaces along the line of the steepest change, carried on across the whole pad."""
    change = report.steepest_change
    assert change is not None
    grid, stack = result.grid, result.ground.stack
    metres = grid.unit_m * grid.ground_scale
    start, way = np.array(change.start), np.array(change.end) - np.array(change.start)
    way = way / np.hypot(*way)
    reach = (
        float(np.hypot(*(np.array(place.polygon.bounds[2:]) - np.array(place.polygon.bounds[:2])))) + change.length_m
    )
    line = shapely.LineString([start - reach / metres * 2 * way, start + reach / metres * 2 * way])

    def span(shape: Any) -> tuple[float, float]:
        cut = shapely.get_coordinates(line.intersection(shape)) - start
        along = cut @ way * metres
        return (float(along.min()), float(along.max())) if len(along) else (0.0, change.length_m)

    first, last = span(place.polygon)
    judged = span(place.footprint)
    ends = tuple(tuple(start + s / metres * way) for s in (first, last))
    places = list(profile(ends[0], ends[1], grid, _BEYOND_M))
    station, rows, columns = (np.array(v) for v in zip(*places, strict=True))
    window = _window(rows, columns, grid)
    arrays = reader.read(window)
    existing, bottom, subgrade, finished = (
        _between_centres(a, rows - window.row, columns - window.column)
        for a in (arrays["existing"], stack.removal_bottom(arrays), stack.subgrade(arrays), arrays["finished"])
    )
    return PadSection(
        report, station, existing, bottom, subgrade, finished, (0.0, last - first),
        (judged[0] - first, judged[1] - first), (-first, change.length_m - first),
    )  # fmt: skip


def _window(rows: np.ndarray, columns: np.ndarray, grid: Grid) -> Window:
    """The cells around places given by row and column."""
    top, left = max(int(rows.min() - 0.5), 0), max(int(columns.min() - 0.5), 0)
    bottom = min(int(rows.max() + 0.5) + 1, grid.rows)
    right = min(int(columns.max() + 0.5) + 1, grid.columns)
    return Window(top, left, bottom - top, right - left)


def _between_centres(values: np.ndarray, rows: np.ndarray, columns: np.ndarray) -> np.ndarray:
    """Values (h, w) at places, bilinear between cell centres: by the nearest cell an oblique slope would go down in steps.

    Beside missing ground it is the value of the cell that the place lies in.
    """
    height, width = values.shape
    i = np.clip(np.floor(rows - 0.5).astype(int), 0, max(height - 2, 0))
    j = np.clip(np.floor(columns - 0.5).astype(int), 0, max(width - 2, 0))
    down, right = np.clip(rows - 0.5 - i, 0, 1), np.clip(columns - 0.5 - j, 0, 1)
    i2, j2 = np.minimum(i + 1, height - 1), np.minimum(j + 1, width - 1)
    upper = (1 - right) * values[i, j] + right * values[i, j2]
    lower = (1 - right) * values[i2, j] + right * values[i2, j2]
    smooth = (1 - down) * upper + down * lower
    own = values[np.minimum(rows.astype(int), height - 1), np.minimum(columns.astype(int), width - 1)]
    return np.where(np.isfinite(smooth), smooth, own)


def draw_pad_sections(site: Site, result: PadsResult, path: Path) -> None:
    """Draw the sections as PNG, all to one scale; nothing where no pad is flagged."""
    sections = pad_sections(result)
    if not sections:
        return
    rows = -(-len(sections) // 2)
    columns = min(len(sections), 2)
    height = 1.1 + rows * 2.5
    width = 5.6 * columns + 0.3
    figure = new_figure(width, height)
    heading = wrapped(f"{site.name}: sections through flagged pads", 1000, 1)
    room = (width - 0.05 * width - 0.15) * figure.dpi
    shorten_to(figure.text(0.05, 1 - 0.27 / height, heading, fontsize=13, fontweight="bold"), room)
    subtitle = "Along the steepest change of fill thickness, which the bar shows; heights are drawn larger than lengths"
    shorten_to(figure.text(0.05, 1 - 0.5 / height, subtitle, fontsize=9, color=colors.FAINT), room, 6.0)
    for k, section in enumerate(sections):
        left = (0.62 + 5.6 * (k % 2)) / width
        bottom = 1 - (0.75 + 2.5 * (k // 2) + 2.02) / height
        axes = figure.add_axes((left, bottom, 4.75 / width, 1.62 / height))
        _draw(axes, section, site)
    handles, labels = figure.axes[0].get_legend_handles_labels()
    figure.legend(
        handles, labels, loc="lower left", bbox_to_anchor=(0.62 / width, 0.1 / height), ncols=4 if columns == 1 else 7,
        fontsize=7, frameon=False, handlelength=2.4, columnspacing=1.2, borderaxespad=0,
    )  # fmt: skip
    save_figure(figure, path)


def _draw(axes: Axes, section: PadSection, site: Site) -> None:
    factor = site.units.factor("length")
    station = section.station / factor
    existing, bottom, subgrade, finished = (
        a / factor for a in (section.existing, section.bottom, section.subgrade, section.finished)
    )
    on_pad = (section.station >= section.pad[0]) & (section.station <= section.pad[1])
    axes.fill_between(station, bottom, subgrade, where=subgrade > bottom, color=colors.FILL[0], linewidth=0, zorder=1)
    dug = existing > subgrade
    axes.fill_between(
        station, subgrade, existing, where=dug, facecolor=colors.CUT[3], edgecolor=colors.CUT[1], hatch="////",
        linewidth=0, zorder=1,
    )  # fmt: skip
    axes.plot(station, existing, color=colors.CUT[0], linewidth=1.1, linestyle=(0, (4, 2)), label="existing", zorder=3)
    axes.plot(
        station, bottom, color=colors.EXPORT, linewidth=1.1, linestyle=(0, (1, 1.2)), label="removal bottom", zorder=3
    )
    axes.plot(station, subgrade, color=colors.FILL[3], linewidth=1.3, label="subgrade", zorder=4)
    if np.nanmax(np.abs(finished - subgrade)) * factor > 0.02 or site.model.section:
        axes.plot(station, finished, color=colors.FAINT, linewidth=0.9, label="finished", zorder=3)
    axes.plot(
        station[on_pad],
        subgrade[on_pad],
        color=colors.FILL[3],
        linewidth=3.2,
        solid_capstyle="butt",
        label="pad",
        zorder=5,
    )
    low, high = _span([existing, bottom, subgrade, finished])
    axes.set_ylim(low, high + 0.12 * (high - low))
    axes.set_xlim(station[0], station[-1])
    for i, edge in enumerate(section.judged):
        label = None if i else "ground that is judged"
        axes.axvline(edge / factor, color=colors.FAINT, linewidth=0.7, linestyle=(0, (2, 2)), zorder=2, label=label)
    y = high + 0.07 * (high - low)
    a, b = (s / factor for s in section.steepest)
    axes.annotate(
        "", (b, y), (a, y), arrowprops={"arrowstyle": "|-|,widthA=0.25,widthB=0.25", "color": colors.INK, "lw": 0.9}
    )
    _title(axes, section, site)
    plain_axes(axes)
    unit = site.units.label("length")
    axes.set_xlabel(f"station, {unit}", fontsize=7.5, labelpad=1)
    axes.set_ylabel(f"elevation, {unit}", fontsize=7.5, labelpad=2)
    axes.tick_params(labelsize=7)
    axes.ticklabel_format(useOffset=False)


def _span(lines: list[np.ndarray]) -> tuple[float, float]:
    low, high = min(float(np.nanmin(a)) for a in lines), max(float(np.nanmax(a)) for a in lines)
    room = max(0.04 * (high - low), 0.1)
    return low - room, high + room


def _title(axes: Axes, section: PadSection, site: Site) -> None:
    report, change = section.report, section.report.steepest_change
    assert change is not None
    flags = ", ".join(flag for flag in report.flags if flag in _CALLS)
    title = axes.set_title(wrapped(report.pad, 80, 1), loc="left", fontsize=8.5, fontweight="bold", pad=14)
    shorten_to(title, axes.get_window_extent().width, 8.5)
    note = f"{flags}; changes by {show(change.change, 'length', site.units)} in "
    note += show(change.length_m, "length", site.units)
    if report.max_distortion is not None:
        note += f"; 1 in {report.max_distortion:,.0f}"
    told = axes.text(0, 1.03, wrapped(note, 160, 1), transform=axes.transAxes, fontsize=7, color=colors.FAINT)
    shorten_to(told, axes.get_window_extent().width, 5.0)
