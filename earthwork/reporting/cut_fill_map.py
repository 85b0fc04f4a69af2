"""The cut-and-fill map: depths in classes, the zero line, zones and spot depths."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from earthwork.reporting import colors
from earthwork.reporting.figures import halo, new_figure, number, round_step, save_figure, wrapped
from earthwork.reporting.map_frame import Frame, draw_outline, legend_line, legend_panel, legend_swatch
from earthwork.units import UnitSystem

if TYPE_CHECKING:
    from matplotlib.axes import Axes

    from earthwork.quantities.depth_map import DepthMap

#: Depths under this count as no change [m].
NO_CHANGE_M = 0.01
_SPOTS = 16


@dataclass(frozen=True)
class Classes:
    """Four classes of depth on each side of no change, in display units."""

    step: float
    least: float

    @property
    def bounds(self) -> list[float]:
        """Ten bounds of nine classes, from the deepest cut to the highest fill."""
        side = [self.least, self.step, 2 * self.step, 3 * self.step, np.inf]
        return [-b for b in reversed(side)] + side

    def labels(self, unit: str) -> list[str]:
        """Names of the classes from the highest fill down to the deepest cut; each says its sign."""
        marks = [number(k * self.step, self.step) for k in (1, 2, 3)]
        spans = [
            f"over {marks[2]} {unit}",
            f"{marks[1]} to {marks[2]} {unit}",
            f"{marks[0]} to {marks[1]} {unit}",
        ]
        spans.append(f"under {marks[0]} {unit}")
        none = f"no change (under {self.least:.2f} {unit})"
        return [f"+ fill {s}" for s in spans] + [none] + [f"− cut {s}" for s in reversed(spans)]


COLORS = (*colors.CUT, colors.NO_CHANGE, *colors.FILL)


def classes_for(depth: np.ndarray, no_change: float) -> Classes:
    """Round class bounds, the same for cut and fill, for depths in display units."""
    known = np.abs(depth[np.isfinite(depth)])
    known = known[known > no_change]
    reach = float(np.percentile(known, 98)) if known.size else 4 * no_change
    return Classes(step=max(round_step(reach, 4), 2 * no_change), least=no_change)


def draw_cut_fill_map(
    depths: DepthMap,
    path: Path,
    *,
    units: UnitSystem,
    title: str,
    subtitle: str = "",
    zones: Sequence[tuple[str, Any]] = (),
    limits: Any = None,
    notes: Sequence[str] = (),
) -> None:
    """Draw the map of a site as PNG.

    Args:
        depths: mean depths [m] on a coarse grid.
        path: the PNG.
        units: of the legend and the labels.
        title, subtitle: over the map.
        zones: (name, polygon in CRS coordinates).
        limits: polygon in CRS coordinates.
        notes: short lines under the legend, such as the totals.
    """
    depth = depths.depth / units.factor("length")
    classes = classes_for(depth, NO_CHANGE_M / units.factor("length"))
    frame = Frame.around(depths.grid, units)
    figure = new_figure(*frame.size)
    axes = frame.map_axes(figure)
    frame.draw_titles(figure, title, subtitle)
    _draw_depths(axes, depth, classes, frame)
    _draw_zero_line(axes, depth, classes, frame)
    if limits is not None:
        draw_outline(axes, limits, dashed=True)
    for _, shape in zones:
        draw_outline(axes, shape)
    taken: list[Any] = []
    _draw_spots(axes, depth, classes, frame, taken)
    frame.label_zones(axes, zones, taken)
    shown = ["zero line: neither cut nor fill"]
    shown += ["zone"] * bool(zones) + ["limits of the ground that counts"] * (limits is not None)
    shown += ["no data"] * bool(np.isnan(depth).any())
    _draw_legend(legend_panel(figure, frame), frame, classes, shown, notes)
    frame.draw_scale_and_north(figure)
    save_figure(figure, path)


def _draw_depths(axes: Axes, depth: np.ndarray, classes: Classes, frame: Frame) -> None:
    # Colours rather than numbers: a picture of bytes is drawn with an eighth of the memory.
    palette = np.array([[int(color[i : i + 2], 16) for i in (1, 3, 5)] + [255] for color in COLORS], np.uint8)
    picture = palette[np.digitize(np.nan_to_num(depth), classes.bounds[1:-1])]
    picture[~np.isfinite(depth), 3] = 0
    axes.imshow(picture, extent=frame.extent, aspect="auto", interpolation="nearest", zorder=1)
    coarse, east, north = frame.thinned(depth, 500)
    # Few cells are drawn as the squares that they are, and so is their hatching.
    coarse, east, north = frame.to_edges(*_as_squares(coarse, east, north))
    low = float(np.nanmin(coarse)) if np.isfinite(coarse).any() else 0.0
    # Dark lines on the light classes, light lines on the dark ones: the hatching shows on both.
    for deep, shallow, color in (
        (-2 * classes.step, -classes.least, colors.CUT[0]),
        (low - 1.0, -2 * classes.step, colors.CUT[3]),
    ):
        if low < shallow:
            filled = axes.contourf(
                east,
                north,
                coarse,
                levels=[min(deep, shallow - 1e-9), shallow],
                colors="none",
                hatches=["////"],
            )
            filled.set_edgecolor(color)
            filled.set_linewidth(0.0)
            filled.set_zorder(2)


def _draw_zero_line(axes: Axes, depth: np.ndarray, classes: Classes, frame: Frame) -> None:
    """Where cut meets fill, and where either meets untouched ground; specks of survey noise are left out.

    Ground without data is neither: no line runs around it, and specks of it do not break the line.
    """
    thin, east, north = frame.to_edges(*frame.thinned(depth, 900))
    sign = np.ma.masked_invalid(np.clip(_specks_closed(thin) / classes.least, -1.0, 1.0))
    if not sign.count():
        return
    shortest = 0.03 * max(frame.extent[1] - frame.extent[0], frame.extent[3] - frame.extent[2])
    for level in (-0.5, 0.5):
        if not (sign.min() < level < sign.max()):
            continue
        drawn = axes.contour(east, north, sign, levels=[level], colors=colors.INK, linewidths=0.9)
        lines = [np.asarray(p) for path in drawn.get_paths() for p in path.to_polygons(closed_only=False)]
        drawn.remove()
        for line in lines:
            if _length(line) <= shortest:
                continue
            axes.plot(line[:, 0], line[:, 1], color=colors.INK, linewidth=0.9, zorder=4)


def _as_squares(field: np.ndarray, east: np.ndarray, north: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """A coarse field with every cell divided, so that contours follow the edges of its cells."""
    parts = -(-200 // max(field.shape))
    if parts == 1:
        return field, east, north

    def divided(centres: np.ndarray, step: float) -> np.ndarray:
        inner = ((np.arange(parts) + 0.5) / parts - 0.5) * step
        return (centres[:, None] + inner).ravel()

    across = east[1] - east[0] if east.size > 1 else north[0] - north[1] if north.size > 1 else 1.0
    down = north[1] - north[0] if north.size > 1 else -across
    return np.repeat(np.repeat(field, parts, 0), parts, 1), divided(east, across), divided(north, down)


def _specks_closed(field: np.ndarray, reach: float = 2.0) -> np.ndarray:
    """The field with gaps of up to ``reach`` cells filled by what is next to them."""
    from scipy.ndimage import distance_transform_edt

    missing = np.isnan(field)
    if not missing.any() or missing.all():
        return field
    away, nearest = distance_transform_edt(missing, return_indices=True)
    return np.where(away <= reach, field[tuple(nearest)], np.nan)


def _length(line: np.ndarray) -> float:
    return float(np.hypot(*np.diff(line, axis=0).T).sum())


def _draw_spots(axes: Axes, depth: np.ndarray, classes: Classes, frame: Frame, taken: list[Any]) -> None:
    """C and F with the depth at the deepest places that are far enough apart, clear of what is written already."""
    for row, column in spots(depth, max(classes.step / 2, 5 * classes.least)):
        value = depth[row, column]
        east, north = frame.grid.point(row + 0.5, column + 0.5)
        text = f"{'C' if value < 0 else 'F'} {number(abs(value), 0.1)}"
        for right, above in ((1, 1), (-1, 1), (1, -1), (-1, -1)):
            label = axes.annotate(
                text,
                (east, north),
                xytext=(3 * right, 3 * above),
                textcoords="offset points",
                ha="left" if right > 0 else "right",
                va="bottom" if above > 0 else "top",
                fontsize=7.5,
                fontweight="bold",
                path_effects=halo(2.2),
                zorder=7,
            )
            box = label.get_window_extent()
            if frame.inside(axes, box) and not any(box.overlaps(other) for other in taken):
                taken.append(box)
                axes.plot([east], [north], marker="+", markersize=5, color=colors.INK, zorder=7, path_effects=halo(1.6))
                break
            label.remove()


def spots(depth: np.ndarray, least: float, count: int = _SPOTS) -> list[tuple[int, int]]:
    """(row, column) of the deepest cuts and highest fills around, no two nearer than a tenth of the longer side.

    >>> field = np.zeros((40, 40))
    >>> field[5, 5], field[6, 6], field[30, 30] = -3.0, -2.9, 2.0
    >>> spots(field, 0.5)
    [(5, 5), (30, 30)]
    """
    size = max(depth.shape)
    reach = max(1, size // 12)
    candidates = []
    for sign in (-1.0, 1.0):
        wing = np.nan_to_num(sign * depth)
        for row in range(0, depth.shape[0], reach):
            for column in range(0, depth.shape[1], reach):
                part = wing[row : row + reach, column : column + reach]
                at = np.unravel_index(int(part.argmax()), part.shape)
                r, c = row + int(at[0]), column + int(at[1])
                around = wing[max(0, r - reach) : r + reach + 1, max(0, c - reach) : c + reach + 1]
                if least <= wing[r, c] >= around.max():
                    candidates.append((float(wing[r, c]), r, c))
    candidates.sort(key=lambda found: (-found[0], found[1], found[2]))
    kept: list[tuple[int, int]] = []
    for _, row, column in candidates:
        if all(np.hypot(row - r, column - c) >= size / 10 for r, c in kept):
            kept.append((row, column))
    return kept[:count]


def _draw_legend(panel: Axes, frame: Frame, classes: Classes, shown: Sequence[str], notes: Sequence[str]) -> None:
    """The legend: classes, then lines and spots, then notes; side by side where it stands under the map."""
    unit = frame.units.label("length")
    y = _legend_classes(panel, classes, unit, "no data" in shown)
    x = 0.0
    if frame.legend_below:
        x, y = frame.columns[1], 1.0
    for label, style in _LINES.items():
        if label in shown:
            legend_line(panel, x, y, label, **style)
            y -= 0.22
    spot = f"C 1.2   cut at this spot, {unit}\nF 1.2   fill at this spot, {unit}"
    panel.text(x, y, spot, va="top", linespacing=1.5)
    y -= 0.5
    for note in notes:
        text = wrapped(note, 40, 4)
        panel.text(x, y, text, va="top", linespacing=1.4)
        y -= 0.21 * (text.count("\n") + 1)


#: Lines of the legend, with how they are drawn.
_LINES: dict[str, dict[str, Any]] = {
    "zero line: neither cut nor fill": {},
    "zone": {"color": colors.FAINT, "width": 1.1},
    "limits of the ground that counts": {"dashed": True},
}


def _legend_classes(panel: Axes, classes: Classes, unit: str, no_data: bool) -> float:
    y = 1.0
    panel.text(0.0, y, "Depth = subgrade − stripped ground", fontweight="bold", va="top")
    panel.text(0.0, y - 0.24, "+ is fill, − is cut (hatched)", va="top", color=colors.FAINT)
    y -= 0.58
    for i, label in enumerate(classes.labels(unit)):
        place = 8 - i
        hatch = colors.CUT[0] if place in (2, 3) else colors.CUT[3] if place < 2 else None
        legend_swatch(panel, y, COLORS[place], label, hatch=hatch)
        y -= 0.22
    if no_data:
        legend_swatch(panel, y, colors.PAPER, "no data, or outside the limits")
        y -= 0.22
    return y - 0.1
