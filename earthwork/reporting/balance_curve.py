"""The curve of surplus against grade shift."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any

from earthwork.reporting import colors
from earthwork.reporting.display import plain, show
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


def draw_balance_curve(
    curve: Sequence[tuple[float, float]],
    path: Path,
    *,
    units: UnitSystem,
    title: str,
    target_m3: float = 0.0,
    shift_m: float | None = None,
    sd_m3: float | None = None,
) -> None:
    """Draw surplus against shift as PNG.

    Args:
        curve: (shift [m], surplus [m³ compacted]), at least two, from the lowest shift up.
        path: the PNG.
        units: of the axes.
        title: over the chart.
        target_m3: surplus wanted in hand.
        shift_m: the shift that gives it, if any does.
        sd_m3: standard deviation of the surplus, drawn as a band.
    """
    length, volume = units.factor("length"), units.factor("soil_volume")
    x = [shift / length for shift, _ in curve]
    y = [surplus / volume for _, surplus in curve]
    figure = new_figure(7.6, 4.8)
    axes = figure.add_axes((0.13, 0.13, 0.84, 0.73))
    plain_axes(axes)
    target = target_m3 / volume
    axes.fill_between(x, y, target, where=[v >= target for v in y], interpolate=True, color=colors.CUT[3], linewidth=0)
    axes.fill_between(x, y, target, where=[v < target for v in y], interpolate=True, color=colors.FILL[0], linewidth=0)
    if sd_m3:
        band = sd_m3 / volume
        axes.plot(x, [v + band for v in y], color=colors.FAINT, linewidth=0.7, linestyle=(0, (2, 2)))
        axes.plot(x, [v - band for v in y], color=colors.FAINT, linewidth=0.7, linestyle=(0, (2, 2)))
    axes.plot(x, y, color=colors.INK, linewidth=1.6)
    axes.axhline(target, color=colors.INK, linewidth=0.8)
    axes.set_xlim(min(x), max(x))
    _name_sides(axes, y, target)
    at = 0.0 if shift_m is None else shift_m / length
    near = abs(at) < 0.25 * (max(x) - min(x))
    _mark(axes, x, y, 0.0, "as designed", units, above=at <= 0.0 or not near)
    if shift_m is not None:
        _mark(axes, x, y, at, "balanced", units, above=at > 0.0 or not near)
    unit = units.label("length")
    axes.set_xlabel(f"shift of the grade that may move, {unit}   (+ raises it)")
    axes.set_ylabel(f"surplus of compacted fill, {units.label('soil_volume')}")
    for axis, values in ((axes.xaxis, x), (axes.yaxis, y)):
        axis.set_major_formatter(_plain_numbers(round_step(max(values) - min(values) or 1.0, 6)))
    note = "Surplus after shrink and loss" + (
        f"; dotted: ± {show(sd_m3, 'soil_volume', units)}, one standard deviation from the soil tests" if sd_m3 else ""
    )
    head_chart(figure, 0.13, title, note, (0.94, 0.895))
    make_room(figure, axes)
    save_figure(figure, path)


def _plain_numbers(step: float) -> Callable[[float, Any], str]:
    return lambda value, _: number(value, step).replace("-", "−")


def _name_sides(axes: Axes, y: Sequence[float], target: float) -> None:
    """Name what is above and below the target, at the end that is farther from where the curve crosses it."""
    low, high = axes.get_xlim()
    at_left = sum(value >= target for value in y) > len(y) / 2
    for text, above in (("▲ surplus", True), ("▼ shortage", False)):
        axes.annotate(
            text,
            (low if at_left else high, target),
            xytext=(6 if at_left else -6, 5 if above else -5),
            textcoords="offset points",
            ha="left" if at_left else "right",
            va="bottom" if above else "top",
            fontweight="bold",
            path_effects=halo(),
        )


def _mark(
    axes: Axes, x: Sequence[float], y: Sequence[float], at: float, word: str, units: UnitSystem, *, above: bool
) -> None:
    """A dot on the curve with its name, above to the right or below to the left: the curve always falls."""
    import numpy as np

    if not x[0] <= at <= x[-1]:
        return
    value = float(np.interp(at, x, y))
    axes.plot([at], [value], marker="o", markersize=5.5, color=colors.INK, markerfacecolor=colors.PAPER, zorder=6)
    text = f"{word}: {plain(at, 2)} {units.label('length')}"
    if word != "balanced":
        text = f"{word}: {show(value * units.factor('soil_volume'), 'soil_volume', units)}"
    axes.annotate(
        text,
        (at, value),
        xytext=(8, 7) if above else (-8, -7),
        textcoords="offset points",
        ha="left" if above else "right",
        va="bottom" if above else "top",
        path_effects=halo(),
        zorder=7,
    )
