"""The mass curve as a chart: ordinates, balance points and the freehaul chord, over cut and fill by station."""

from __future__ import annotations

from collections.abc import Sequence
from itertools import pairwise
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from earthwork.plan.line_haul import LineHaul
from earthwork.reporting import colors
from earthwork.reporting.display import show
from earthwork.reporting.figures import (
    halo,
    head_chart,
    make_room,
    new_figure,
    number,
    plain_axes,
    round_step,
    save_figure,
)
from earthwork.units import UnitSystem

if TYPE_CHECKING:
    from matplotlib.axes import Axes


def draw_mass_curve(line: LineHaul, path: Path, *, units: UnitSystem, title: str) -> None:
    """Draw the mass curve of a baseline as PNG."""
    length, volume = units.factor("length"), units.factor("soil_volume")
    stations = (line.start_m + line.curve.stations_m) / length
    ordinates = line.curve.ordinates_m3 / volume
    figure = new_figure(9.6, 6.0)
    above = figure.add_axes((0.115, 0.4, 0.86, 0.47))
    below = figure.add_axes((0.115, 0.1, 0.86, 0.22), sharex=above)
    for axes in (above, below):
        plain_axes(axes)
    _draw_curve(above, stations, ordinates, line, units)
    _draw_bars(below, stations, line, volume)
    above.set_xlim(stations[0], stations[-1])
    above.tick_params(labelbottom=False)
    unit, cubic = units.label("length"), units.label("soil_volume")
    above.set_ylabel(f"ordinate, {cubic} compacted")
    below.set_ylabel(f"{cubic} in an interval,\ncompacted")
    below.set_xlabel(f"station, {unit}")
    for axis, values in ((above.yaxis, ordinates), (below.xaxis, stations)):
        axis.set_major_formatter(_plain_numbers(round_step(float(np.ptp(values)) or 1.0, 6)))
    head_chart(figure, 0.115, title, _told(line, units), (0.955, 0.915))
    make_room(figure, above, below)
    save_figure(figure, path)


def _plain_numbers(step: float) -> Any:
    return lambda value, _: number(value, step).replace("-", "−")


def _told(line: LineHaul, units: UnitSystem) -> str:
    curve = line.curve
    told = f"{show(curve.volume_m3, 'soil_volume', units)} hauled along the line"
    if curve.mean_haul_m is not None:
        told += f", {units.from_si(curve.mean_haul_m, 'length'):,.0f} {units.label('length')} on average"
    over = line.overhaul
    if over is not None:
        told += f"; {show(over.volume_m3, 'soil_volume', units)} of it beyond freehaul"
    return told + ". Compacted-equivalent volume: cut × effective factor"


def _draw_curve(axes: Axes, stations: np.ndarray, ordinates: np.ndarray, line: LineHaul, units: UnitSystem) -> None:
    axes.axhline(0.0, color=colors.INK, linewidth=0.9)
    room = 0.12 * (float(np.ptp(ordinates)) or 1.0)
    axes.set_ylim(min(ordinates.min(), 0.0) - room, max(ordinates.max(), 0.0) + room)
    for where, color in ((ordinates >= 0, colors.CUT[3]), (ordinates <= 0, colors.FILL[0])):
        axes.fill_between(stations, ordinates, 0.0, where=where, interpolate=True, color=color, linewidth=0)
    _draw_chords(axes, line, units)
    axes.plot(stations, ordinates, color=colors.INK, linewidth=1.8)
    for point in line.curve.balance_points_m:
        x = (line.start_m + point) / units.factor("length")
        axes.plot([x], [0.0], marker="o", markersize=6, color=colors.INK, markerfacecolor=colors.PAPER, zorder=6)
    crossings = [(line.start_m + p) / units.factor("length") for p in line.curve.balance_points_m]
    _name_loops(axes, stations, ordinates, crossings)
    _name_end(axes, stations, ordinates, units)


def _draw_chords(axes: Axes, line: LineHaul, units: UnitSystem) -> None:
    """Chords as long as the freehaul distance: what lies beyond them is overhaul."""
    if line.overhaul is None:
        return
    freehaul, length = line.overhaul.freehaul_m, units.factor("length")
    for layer in line.curve.layers:
        short, far = sorted(layer.lengths_m)
        if not short <= freehaul <= far or far == short:
            continue
        inner, outer = layer.lengths_m
        t = (freehaul - inner) / (outer - inner)
        ends = [
            layer.cut_from + t * (layer.cut_to - layer.cut_from),
            layer.fill_from + t * (layer.fill_to - layer.fill_from),
        ]
        level = np.interp(ends[0], line.curve.stations_m, line.curve.ordinates_m3) / units.factor("soil_volume")
        x = [(line.start_m + e) / length for e in ends]
        axes.plot(x, [level] * 2, color=colors.EXPORT, linewidth=1.4, linestyle=(0, (4, 2)), zorder=5)
        axes.annotate(
            f"freehaul {units.from_si(freehaul, 'length'):,.0f} {units.label('length')}",
            (sum(x) / 2, level), xytext=(0, 4), textcoords="offset points", ha="center", va="bottom", fontsize=7.5,
            color=colors.EXPORT, path_effects=halo(), zorder=7,
        )  # fmt: skip


def _name_loops(axes: Axes, stations: np.ndarray, ordinates: np.ndarray, crossings: Sequence[float]) -> None:
    """Which way the earth goes, in the largest closed loop on each side of the line."""
    edges = [float(stations[0]), *crossings]
    best: dict[bool, tuple[float, float, float]] = {}
    for start, stop in pairwise(edges):
        middle = 0.5 * (start + stop)
        inside = (stations > start) & (stations < stop)
        values = ordinates[inside] if inside.any() else np.array([np.interp(middle, stations, ordinates)])
        peak = float(values[np.abs(values).argmax()])
        area = abs(peak) * (stop - start)
        if area > best.get(peak > 0, (0.0,))[0]:
            best[peak > 0] = area, middle, peak
    height, width = float(np.ptp(ordinates)) or 1.0, float(np.ptp(stations)) or 1.0
    for forward, (area, middle, peak) in best.items():
        if abs(peak) > 0.1 * height and area > 0.02 * height * width:
            word = "hauled forward →" if forward else "← hauled back"
            axes.annotate(
                word, (middle, 0.4 * peak), ha="center", va="center", fontweight="bold", path_effects=halo(), zorder=7
            )


def _name_end(axes: Axes, stations: np.ndarray, ordinates: np.ndarray, units: UnitSystem) -> None:
    """What is over or lacking at the end of the line."""
    rest = float(ordinates[-1])
    if abs(rest) < 0.005 * float(np.abs(ordinates).max(initial=0.0)):
        return
    text = f"{'over' if rest > 0 else 'lacking'}: {show(abs(rest) * units.factor('soil_volume'), 'soil_volume', units)}"
    axes.annotate(
        text, (stations[-1], rest), xytext=(-8, 8 if rest > 0 else -8), textcoords="offset points", ha="right",
        va="bottom" if rest > 0 else "top", path_effects=halo(), zorder=7,
    )  # fmt: skip


def _draw_bars(axes: Axes, stations: np.ndarray, line: LineHaul, volume: float) -> None:
    """Cut up, fill down, by interval."""
    left, width = stations[:-1], np.diff(stations)
    cut, fill = line.curve.compacted_m3 / volume, line.curve.fill_m3 / volume
    bars = axes.bar(
        left, cut, width, align="edge", color=colors.CUT[2], edgecolor=colors.PAPER, linewidth=0.4, label="cut"
    )
    for bar in bars:
        bar.set_hatch("////")
        bar.set_edgecolor(colors.CUT[0])
        bar.set_linewidth(0.3)
    axes.bar(
        left, -fill, width, align="edge", color=colors.FILL[1], edgecolor=colors.PAPER, linewidth=0.4, label="fill"
    )
    axes.axhline(0.0, color=colors.INK, linewidth=0.9)
    most = float(max(cut.max(initial=0.0), fill.max(initial=0.0), 1e-9))
    axes.yaxis.set_major_formatter(_plain_numbers(round_step(2 * most, 4)))
    axes.legend(loc="lower right", bbox_to_anchor=(1.0, 1.0), ncols=2, frameon=False, fontsize=7.5, borderaxespad=0.2)
