"""Charts of water: each day's water by its parts against the supply, and the level of the tank."""

from __future__ import annotations

from pathlib import Path

from earthwork.plan.water import WaterResult
from earthwork.plan.water_days import WaterDay
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
from earthwork.reporting.water_page import tank_figure
from earthwork.units import UnitSystem

#: Parts of the water: key, name, colour, hatch (each is told by its hatch as well).
_PARTS = (
    ("compaction_l", "compaction", colors.WATER, ""),
    ("evaporation_l", "evaporation", "#BFDDF5", "///"),
    ("dust_l", "dust", colors.CUT[3], "..."),
    ("waste_l", "spilt and drifted", "#D5D5D0", "xxx"),
)


def draw_water_days(result: WaterResult, path: Path, *, units: UnitSystem, title: str) -> None:
    """Draw the water of each day as a stack of its parts, with what the supply gives and what goes short.

    Args:
        result: with at least one day.
        path: the PNG.
        units: of the axes.
    """
    figure = new_figure(9.6, 5.0)
    axes = figure.add_axes((0.1, 0.2, 0.87, 0.62))
    plain_axes(axes)
    axes.grid(False, axis="x")
    factor = units.factor("water_volume")
    x = [day.demand.day.day for day in result.days]
    below = [0.0] * len(x)
    for key, name, color, hatch in _PARTS:
        part = [getattr(day.demand, key) / factor for day in result.days]
        axes.bar(
            x, part, bottom=below, width=0.86, color=color, hatch=hatch, edgecolor="#7A97AC", linewidth=0.3, label=name
        )
        below = [a + b for a, b in zip(below, part, strict=True)]
    dry = [-day.water_to_dry_l / factor for day in result.days]
    if any(dry):
        axes.bar(
            x,
            dry,
            width=0.86,
            color=colors.DRYING,
            hatch="\\\\",
            edgecolor="#9A7F1E",
            linewidth=0.3,
            label="must dry out",
        )
        axes.axhline(0.0, color=colors.INK, linewidth=0.8)
    supply = [day.supply_l / factor for day in result.days]
    edges = [x[0] - 0.5, *(v + 0.5 for v in x)]
    axes.stairs(supply, edges, color=colors.INK, linewidth=1.6, baseline=None, label="the supply gives")
    short = [(day.demand.day.day, day) for day in result.days if day.shortfall_l > 0]
    for at, day in short:
        axes.bar(
            [at], [day.shortfall_l / factor], bottom=[(day.demand.total_l - day.shortfall_l) / factor], width=0.86,
            facecolor="none", edgecolor=colors.EXPORT, linewidth=1.6, zorder=4,
        )  # fmt: skip
    top = max([*below, *supply, 1e-9])
    axes.set_ylim(1.12 * min(dry, default=0.0), 1.12 * top)
    axes.set_xlim(edges[0], edges[-1])
    if short:
        _name_short(axes, short[0][1], factor, units)
    _idle(axes, result, top - min(dry, default=0.0))
    _day_axis(axes, result)
    if any(day.demand.day.kind != "work" for day in result.days):
        axes.set_xlabel("r: rain day   ·: idle day")
    _litres_axis(axes, 1.12 * (top - min(dry, default=0.0)), f"water in a day, {units.label('water_volume')}")
    axes.legend(ncols=6, loc="upper left", bbox_to_anchor=(0.0, -0.16), frameon=False, fontsize=8.5, handlelength=1.8)
    peak = show(result.peak_day_l, "water_volume", units)
    note = f"Peak day {peak}" + ("; outlined: what is missing" if short else "")
    note += "; under the line: what must dry out of the soil of the day" if any(dry) else ""
    head_chart(figure, 0.1, title, note, (0.93, 0.875))
    make_room(figure, axes)
    save_figure(figure, path)


def draw_tank(result: WaterResult, path: Path, *, units: UnitSystem, title: str) -> None:
    """Draw the level of the tank hour by hour.

    Args:
        result: with a tank and at least one day.
    """
    figure = new_figure(9.6, 3.9)
    axes = figure.add_axes((0.1, 0.17, 0.87, 0.62))
    plain_axes(axes)
    factor, job = units.factor("water_volume"), result.job
    hours = len(job.run.level)
    x, at = [0.5], 0
    for day in job.demands:
        count = len(day.by_hour)
        x += [day.day.day - 0.5 + (h + 1) / count for h in range(count)]
        at += count
    level = [v / factor for v in (job.tank_at_start_l, *job.run.level)]
    assert at == hours
    axes.fill_between(x, level, color=colors.WATER, alpha=0.55, linewidth=0)
    axes.plot(x, level, color="#2F6FA3", linewidth=0.9)
    full = job.tank_l / factor
    axes.axhline(full, color=colors.INK, linewidth=1.0)
    axes.annotate(
        f"full: {show(job.tank_l, 'water_volume', units)}", (x[0], full), xytext=(4, 3), textcoords="offset points",
        va="bottom", fontsize=8.5, path_effects=halo(),
    )  # fmt: skip
    dry = [p for p, short in zip(x[1:], job.run.shortfall, strict=True) if short > 0]
    if dry:
        axes.plot(dry, [0.0] * len(dry), marker="v", linestyle="none", markersize=5, color=colors.EXPORT, clip_on=False)
        side = "left" if dry[0] < (x[0] + x[-1]) / 2 else "right"
        axes.annotate("runs dry", (dry[0], 0.0), xytext=(-4, 7), textcoords="offset points", color=colors.EXPORT,
                      fontweight="bold", ha=side, va="bottom", path_effects=halo(3))  # fmt: skip
    axes.set_xlim(x[0], x[-1])
    axes.set_ylim(0, 1.15 * max(full, 1e-9))
    _day_axis(axes, result)
    _litres_axis(axes, 1.15 * full, f"in the tank, {units.label('water_volume')}")
    needed = result.tank_needed_l
    text = (
        "no tank bridges this job"
        if needed is None
        else f"a tank that bridges it: {tank_figure(needed, units)}"
    )
    head_chart(figure, 0.1, title, f"Hour by hour; {text}", (0.91, 0.845))
    make_room(figure, axes)
    save_figure(figure, path)


def _name_short(axes, day: WaterDay, factor: float, units: UnitSystem) -> None:
    text = f"short by {show(day.shortfall_l, 'water_volume', units)}"
    low, high = axes.get_xlim()
    side = "left" if day.demand.day.day < (low + high) / 2 else "right"
    axes.annotate(
        text, (day.demand.day.day, day.demand.total_l / factor), xytext=(0, 7), textcoords="offset points", ha=side,
        va="bottom", color=colors.EXPORT, fontweight="bold", path_effects=halo(), zorder=8,
    )  # fmt: skip


def _idle(axes, result: WaterResult, top: float) -> None:
    """Mark days without work at the foot of the chart: r for rain, a dot for idle."""
    for day in result.days:
        if day.demand.day.kind != "work":
            mark = "r" if day.demand.day.kind == "rain" else "·"
            axes.text(day.demand.day.day, 0.012 * top, mark, ha="center", va="bottom", color=colors.FAINT, fontsize=9)


def _day_axis(axes, result: WaterResult) -> None:
    """Days, or dates where they are known, on round places."""
    days = [day.demand.day for day in result.days]
    if days[0].date is None:
        axes.set_xlabel("day")
        step = max(1, round(round_step(max(len(days), 2), 8)))
        axes.set_xticks([d.day for d in days if d.day % step == 0 or step == 1])
        return
    mondays = [d for d in days if d.date is not None and d.date.weekday() == 0] or days[:1]
    every = max(1, -(-len(mondays) // 10))
    kept = mondays[::every]
    axes.set_xticks([d.day for d in kept], [f"{d.date:%d %b}" for d in kept])


def _litres_axis(axes, top: float, label: str) -> None:
    from matplotlib.ticker import MultipleLocator

    step = round_step(max(top, 1e-9), 5)
    axes.yaxis.set_major_locator(MultipleLocator(step))
    axes.yaxis.set_major_formatter(lambda value, _: number(abs(value), step))
    axes.set_ylabel(label)
