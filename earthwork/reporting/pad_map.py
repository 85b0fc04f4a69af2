"""The map of pads: thickness of fill under each, its class, and what is flagged; and the pads as shapes."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from earthwork.files.gis import write_shapes
from earthwork.ground.grid import Grid
from earthwork.plan.pads import PadReport, PadsResult
from earthwork.quantities.pads import PadField
from earthwork.reporting import colors
from earthwork.reporting.display import display_table, show
from earthwork.reporting.figures import halo, new_figure, number, round_step, save_figure, wrapped
from earthwork.reporting.map_frame import Frame, draw_outline, legend_line, legend_panel, legend_swatch
from earthwork.site import Site

if TYPE_CHECKING:
    from matplotlib.axes import Axes

#: Outline of a pad by class: width, dash, colour; the class is written on the map as well.
_OUTLINES: dict[str, tuple[float, Any, str]] = {
    "deep fill": (2.6, "solid", colors.FILL[3]),
    "transition": (2.2, (0, (6, 2.5)), colors.EXPORT),
    "fill": (1.3, "solid", colors.FILL[2]),
    "cut": (1.3, (0, (1.5, 1.5)), colors.CUT[0]),
}
_SHADES = (colors.PAPER, *colors.FILL)
#: Most pads whose full label is tried; with more, only numbers are written.
_LABELLED = 60
#: Contours carry figures on pads that are at least so large on the map [pixels].
_CONTOUR_LABELS_FROM = 110


def draw_pad_map(site: Site, result: PadsResult, path: Path) -> None:
    """Draw the map as PNG: thickness in steps with contours, pads outlined by class, labels with class and thickness."""
    frame = Frame.around(_around(result), site.units)
    figure = new_figure(*frame.size)
    axes = frame.map_axes(figure)
    frame.draw_titles(
        figure, f"{site.name}: what the pads stand on", "Thickness of fill from removal bottom to subgrade"
    )
    factor = site.units.factor("length")
    step = _step(result.fields, factor)
    for place, report, field in zip(result.places, result.pads, result.fields, strict=True):
        _draw_thickness(axes, field, result.grid, step, factor)
        draw_outline(axes, place.footprint, color=colors.FAINT) if place.buildings else None
        _outline(axes, place.polygon, report.class_name)
    taken: list[Any] = []
    numbered = _label(axes, frame, result, taken, site)
    panel = legend_panel(figure, frame)
    _legend(panel, frame, result, step, numbered, site)
    frame.draw_scale_and_north(figure)
    save_figure(figure, path)


def _around(result: PadsResult) -> Grid:
    """The part of the grid that holds all pads, with a margin."""
    grid = result.grid
    bounds = np.array([place.polygon.bounds for place in result.places])
    west, south = bounds[:, :2].min(axis=0)
    east, north = bounds[:, 2:].max(axis=0)
    margin = 0.08 * max(east - west, north - south)
    top, left = grid.cell(west - margin, north + margin)
    bottom, right = grid.cell(east + margin, south - margin)
    row, column = max(int(np.floor(top)), 0), max(int(np.floor(left)), 0)
    rows, columns = min(int(np.ceil(bottom)), grid.rows) - row, min(int(np.ceil(right)), grid.columns) - column
    corner = grid.point(row, column)
    return Grid(rows, columns, *corner, grid.cell_east, grid.cell_north, grid.unit_m, grid.ground_scale, grid.crs)


def _step(fields: Sequence[PadField], factor: float) -> float:
    """A round step of thickness, of which the thickest fill has four or five, in display units."""
    greatest = max((float(np.nanmax(f.thickness)) for f in fields if f.thickness.size), default=1.0)
    return round_step(max(greatest / factor, 0.05), 4)


def _draw_thickness(axes: Axes, field: PadField, grid: Grid, step: float, factor: float) -> None:
    """Thickness in shades of fill, and contours at each step."""
    from matplotlib.colors import ListedColormap

    values = np.where(field.inside, field.thickness / factor, np.nan)
    index = np.where(np.isnan(values), np.nan, np.clip(np.floor(values / step + 1e-9) + (values > 1e-9), 0, 4))
    west, north = grid.point(field.row, field.column)
    height, width = values.shape
    east, south = grid.point(field.row + height * field.block, field.column + width * field.block)
    axes.imshow(
        index, cmap=ListedColormap(_SHADES), vmin=-0.5, vmax=4.5, extent=(west, east, south, north),
        interpolation="nearest", zorder=2,
    )  # fmt: skip
    if min(values.shape) < 3 or not np.isfinite(values).any():
        return
    low, high = float(np.nanmin(values)), float(np.nanmax(values))
    levels = np.arange(np.ceil(low / step + 1e-9), np.floor(high / step - 1e-9) + 1) * step
    if not len(levels):
        return
    x = west + (np.arange(width) + 0.5) * (east - west) / width
    y = north - (np.arange(height) + 0.5) * (north - south) / height
    lines = axes.contour(x, y, values, levels=levels, colors=colors.INK, linewidths=0.5, zorder=4)
    lines.set_path_effects(halo(1.3))
    if min(_pixels(axes, (west, south, east, north))) < _CONTOUR_LABELS_FROM:
        return
    texts = axes.clabel(lines, fmt=lambda v: number(v, step), fontsize=6, inline=True, inline_spacing=2)
    for text in texts:
        text.set_path_effects(halo(1.8))
        text.set_zorder(5)


def _pixels(axes: Axes, bounds: Sequence[float]) -> tuple[float, float]:
    """Width and height of a box [CRS unit] on the map."""
    (left, bottom), (right, top) = axes.transData.transform([bounds[:2], bounds[2:]])
    return right - left, top - bottom


def _outline(axes: Axes, shape: Any, class_name: str) -> None:
    width, style, color = _OUTLINES[class_name]
    for part in getattr(shape, "geoms", [shape]):
        for ring in (part.exterior, *part.interiors):
            x, y = np.asarray(ring.coords)[:, :2].T
            axes.plot(x, y, color=color, linewidth=width, linestyle=style, zorder=6)


def _label(axes: Axes, frame: Frame, result: PadsResult, taken: list[Any], site: Site) -> bool:
    """Write name, class and greatest thickness at each pad where there is room, else its row in the table.

    Tells whether there are such rows.
    """
    numbered = False
    boxes = [_box(axes, place.polygon.bounds) for place in result.places]
    order = sorted(range(len(result.pads)), key=lambda i: -result.places[i].polygon.area)
    for i in order:
        report, shape = result.pads[i], result.places[i].polygon
        others = boxes[:i] + boxes[i + 1 :]
        thickness = show(report.max_fill_m, "length", site.units)
        text = f"{wrapped(report.pad, 20, 2)}\n{report.class_name}, {thickness}"
        done = len(order) <= _LABELLED and _place(axes, frame, shape, text, taken, others)
        if not done:
            numbered |= _place(axes, frame, shape, str(i + 1), taken, None)
    return numbered


def _box(axes: Axes, bounds: Sequence[float]) -> Any:
    """A box [CRS unit] in pixels."""
    from matplotlib.transforms import Bbox

    return Bbox(axes.transData.transform([bounds[:2], bounds[2:]]))


def _place(axes: Axes, frame: Frame, shape: Any, text: str, taken: list[Any], others: list[Any] | None) -> bool:
    """Write a label beside a shape, clear of the other pads, or inside it; clear of what is written already.

    Without ``others`` it is written inside only.
    """
    west, south, east, north = shape.bounds
    inner = shape.representative_point()
    label = axes.text(
        inner.x, inner.y, text, fontsize=7.5, ha="center", va="center", linespacing=1.1,
        path_effects=halo(2.8), zorder=9,
    )  # fmt: skip
    box = label.get_window_extent()
    pixel_x = (axes.get_xlim()[1] - axes.get_xlim()[0]) / axes.get_window_extent().width
    pixel_y = (axes.get_ylim()[1] - axes.get_ylim()[0]) / axes.get_window_extent().height
    half_x, half_y = box.width * pixel_x / 2, box.height * pixel_y / 2
    gap = 5 * pixel_x
    middle_x, middle_y = (west + east) / 2, (south + north) / 2
    places = [(inner.x, inner.y)]
    if others is not None:
        inside = 2 * half_x < 0.9 * (east - west) and 2 * half_y < 0.9 * (north - south)
        around = [
            (middle_x, north + half_y + gap), (middle_x, south - half_y - gap),
            (east + half_x + gap, middle_y), (west - half_x - gap, middle_y),
            (east, north + half_y + gap), (west, north + half_y + gap),
            (east, south - half_y - gap), (west, south - half_y - gap),
        ]  # fmt: skip
        places = [*around, (inner.x, inner.y)] if inside else around
    for place in places:
        label.set_position(place)
        box = label.get_window_extent().expanded(1.02, 1.05)
        at_home = place == (inner.x, inner.y)
        clear = at_home or not any(box.overlaps(other) for other in others or ())
        if clear and frame.inside(axes, box) and not any(box.overlaps(other) for other in taken):
            taken.append(box)
            return True
    label.remove()
    return False


def _legend(panel: Axes, frame: Frame, result: PadsResult, step: float, numbered: bool, site: Site) -> None:
    columns = frame.columns if frame.legend_below else (0.0, 0.0, 0.0)
    unit = site.units.label("length")
    panel.text(columns[0], 0.9, "Thickness of fill", fontweight="bold")
    labels = ["none", *(f"{number(k * step, step)} to {number((k + 1) * step, step)} {unit}" for k in range(3))]
    labels.append(f"over {number(3 * step, step)} {unit}")
    y = 0.68
    for shade, label in zip(reversed(_SHADES), reversed(labels), strict=True):
        legend_swatch(panel, y, shade, label)
        y -= 0.22
    legend_line(panel, columns[0], y, f"contour, each {number(step, step)} {unit}", width=0.5)
    y = 0.9 if frame.legend_below else y - 0.5
    panel.text(columns[1], y, "Pads by class", fontweight="bold")
    y -= 0.22
    used = {report.class_name for report in result.pads}
    for name, (width, style, color) in _OUTLINES.items():
        if name in used:
            panel.plot([columns[1], columns[1] + 0.34], [y - 0.075] * 2, color=color, linewidth=width, linestyle=style)
            panel.text(columns[1] + 0.45, y - 0.075, name, va="center")
            y -= 0.22
    if any(place.buildings for place in result.places):
        legend_line(panel, columns[1], y, "judged: building and margin", color=colors.FAINT, width=1.1)
        y -= 0.22
    y = 0.9 if frame.legend_below else y - 0.2
    lines = _notes(result, site)
    if numbered:
        lines.append("A number is the pad's row in the table.")
    for line in lines:
        panel.text(columns[2], y, line, fontsize=7.5, va="top")
        y -= 0.2 + 0.14 * line.count("\n")


def _notes(result: PadsResult, site: Site) -> list[str]:
    lines = []
    for name in _OUTLINES:
        count = sum(report.class_name == name for report in result.pads)
        if count:
            lines.append(f"{count} {name}")
    differing = sum("differential fill" in report.flags for report in result.pads)
    lines = [f"{len(result.pads)} {'pad' if len(result.pads) == 1 else 'pads'}: " + ", ".join(lines)] if lines else []
    if differing:
        lines.append(f"{differing} with a difference of {show(_limit(site), 'length', site.units)} or more")
    grounds = sorted({flag for report in result.pads for flag in report.natural_ground.flags})
    if grounds:
        lines.append("natural ground flagged: " + ", ".join(grounds))
    return [wrapped(line, 40, 3) for line in [*lines, "A screen; the engineer of record governs."]]


def _limit(site: Site) -> float:
    assert site.model.pads is not None
    return site.model.pads.differential_fill


def write_pad_shapes(result: PadsResult, path: Path) -> None:
    """Write the pads with all attributes, the ground that was judged, and the steepest changes as a GeoPackage."""
    table = display_table(result.tables()["pads"], result.units)
    crs = result.grid.crs
    write_shapes(path, "pads", [place.polygon for place in result.places], table, crs=crs)
    judged = table[["pad", "judged_on", "class"]]
    write_shapes(path, "judged", [place.footprint for place in result.places], judged, crs=crs, append=True)
    steep = _steepest_lines(result.pads)
    if steep:
        import pandas as pd

        rows = pd.DataFrame({"pad": [name for name, _ in steep]})
        write_shapes(path, "steepest_change", [line for _, line in steep], rows, crs=crs, append=True)


def _steepest_lines(pads: Sequence[PadReport]) -> list[tuple[str, Any]]:
    from shapely.geometry import LineString

    return [
        (pad.pad, LineString([pad.steepest_change.start, pad.steepest_change.end]))
        for pad in pads
        if pad.steepest_change is not None
    ]
