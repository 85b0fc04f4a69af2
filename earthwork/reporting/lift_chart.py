"""The lift chart: area of every lift and volume placed up to it, against elevation."""

from __future__ import annotations

import math
from collections.abc import Callable
from itertools import pairwise
from pathlib import Path
from typing import TYPE_CHECKING, Any

from earthwork.plan.fill_areas import FillArea
from earthwork.plan.lifts import LiftsResult
from earthwork.reporting import colors
from earthwork.reporting.figures import head_chart, make_room, new_figure, number, plain_axes, save_figure, tick_step
from earthwork.reporting.lifts_page import thickness
from earthwork.units import UnitSystem

if TYPE_CHECKING:
    from matplotlib.axes import Axes

_SHOWN = 4  #: fills that have a name in the chart; the others are drawn alike
_MARKS = ("o", "s", "^", "D")


def draw_lift_chart(result: LiftsResult, path: Path, *, units: UnitSystem, title: str) -> None:
    """Draw area by lift on the left and volume up to an elevation on the right, one line a fill.

    Args:
        result: with at least one lift.
        path: the PNG.
        units: of the axes.
    """
    from matplotlib.ticker import MultipleLocator

    figure = new_figure(9.2, 5.4)
    left, right = figure.add_axes((0.09, 0.12, 0.41, 0.72)), figure.add_axes((0.57, 0.12, 0.4, 0.72))
    fills = [area for area in result.areas if not area.is_small] or list(result.areas)
    for axes in (left, right):
        plain_axes(axes)
    for k, area in reversed(list(enumerate(fills))):
        _draw_area(left, area, k, units)
        _draw_volume(right, area, k, units)
    for axes in (left, right):
        axes.set_xlim(left=0)
        for axis in (axes.xaxis, axes.yaxis):
            low, high = axis.get_view_interval()
            step = tick_step(low, high, 3.7 if axis is axes.xaxis else math.inf)
            axis.set_major_locator(MultipleLocator(step))
            axis.set_major_formatter(_numbers(step))
        axes.set_ylabel(f"elevation, {units.label('length')}")
    handles, names = right.get_legend_handles_labels()
    right.legend(handles[::-1], names[::-1], loc="lower right", frameon=False, handlelength=1.2)
    left.set_xlabel(f"area of a lift, {units.label('area')}")
    right.set_xlabel(f"compacted volume placed up to there, {units.label('soil_volume')}")
    thick = thickness(result.lift_m, units)
    note = f"Lifts of {thick} compacted, level; each fill from its lowest removal bottom up"
    if len(fills) > _SHOWN:
        note += f"; the {_SHOWN} largest fills are named"
    head_chart(figure, 0.09, title, note, (0.945, 0.9))
    make_room(figure, left)
    make_room(figure, right)
    save_figure(figure, path)


def _numbers(step: float) -> Callable[[float, Any], str]:
    return lambda value, _: number(value, step).replace("-", "−")


def _style(k: int) -> dict[str, Any]:
    shade = (colors.FILL[3], colors.FILL[2], colors.FILL[1], colors.CUT[1])
    return {
        "color": shade[k] if k < _SHOWN else "#B9B9B4",
        "linewidth": 1.5 if k < _SHOWN else 0.8,
        "zorder": 10 - min(k, 8),
    }


def _draw_area(axes: Axes, area: FillArea, k: int, units: UnitSystem) -> None:
    """Steps: the area of each lift between its bottom and its top."""
    length, square = units.factor("length"), units.factor("area")
    x, y = [0.0], [area.benches[0].bottom_m / length]
    for before, bench in pairwise((None, *area.benches)):
        if before is not None and bench is not None and bench.bottom_m > before.top_m + 1e-9:
            x += [0.0, 0.0]
            y += [before.top_m / length, bench.bottom_m / length]
        assert bench is not None
        x += [bench.area_m2 / square] * 2
        y += [bench.bottom_m / length, bench.top_m / length]
    axes.plot([*x, 0.0], [*y, y[-1]], **_style(k))


def _draw_volume(axes: Axes, area: FillArea, k: int, units: UnitSystem) -> None:
    length, cubic = units.factor("length"), units.factor("soil_volume")
    x, y, total = [0.0], [area.benches[0].bottom_m / length], 0.0
    for bench in area.benches:
        total += bench.compacted_m3
        x.append(total / cubic)
        y.append(bench.top_m / length)
    axes.plot(x, y, **_style(k))
    if k < _SHOWN:
        axes.plot(x[-1:], y[-1:], marker=_MARKS[k], markersize=5.5, label=area.name, **{**_style(k), "linewidth": 0})
