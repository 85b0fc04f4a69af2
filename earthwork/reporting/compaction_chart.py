"""The compaction chart: curve, lines of saturation, placing window, and where the soil is and shall be."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import TYPE_CHECKING, Any

from earthwork.reporting import colors
from earthwork.reporting.display import show
from earthwork.reporting.figures import halo, head_chart, new_figure, number, plain_axes, round_step, save_figure
from earthwork.soils import oversize, phase
from earthwork.units import UnitSystem

if TYPE_CHECKING:
    import numpy as np
    import shapely
    from matplotlib.axes import Axes

    from earthwork.soils.card import SoilCard
    from earthwork.soils.curve import CompactionCurve

#: Lines of equal saturation [%]: dash pattern, weight, and to which side of its end the name stands, so
#: that the names of lines that run close keep apart. 100 is zero air voids.
_LINES: tuple[tuple[float, Any, float, str], ...] = (
    (100.0, "-", 1.4, "left"),
    (90.0, (0, (6, 2)), 0.9, "center"),
    (80.0, (0, (2, 2)), 0.9, "right"),
)

#: Water content [%] under which a side of the window is none that a specification set.
_DRY = 0.5

State = tuple[float, float]  #: (water content [%], dry density [kg/m³])


@dataclass(frozen=True, kw_only=True)
class ChartContent:
    """What a chart shows, in SI; whatever is None or empty is left out."""

    title: str
    note: str
    specific_gravity: float
    points: tuple[State, ...] = ()
    left_out: tuple[State, ...] = ()
    curve: tuple[State, ...] = ()
    other_curves: tuple[tuple[State, ...], ...] = ()
    peak: State | None = None
    window: Any = None  #: a shapely polygon
    target: State | None = None
    bank: State | None = None
    field: tuple[State, ...] = field(default=())
    levels: tuple[tuple[str, float], ...] = ()  #: (name, dry density) of a soil that is judged without water content


def chart_of_card(card: SoilCard, site_name: str) -> ChartContent | None:
    """The chart of a material; None when it has no compaction maximum."""
    if card.max_dry_density_kg_m3 is None:
        return None
    window = card.placing_window()
    tests = card.field_log.tests.tests if card.field_log else ()
    target = bank = None
    if card.target_water_content_percent is not None and card.fill_dry_density_kg_m3 is not None:
        target = (card.target_water_content_percent, card.fill_dry_density_kg_m3)
    if card.bank_water_content_percent is not None:
        bank = (card.bank_water_content_percent, card.bank_dry_density_kg_m3)
    whole = _Whole(card)
    optimum = card.optimum_water_content_percent
    notes = [card.method or ("minimum and maximum density" if optimum is None else "typical values, no test")]
    if card.oversize is not None and card.oversize.percent:
        notes.append(f"corrected for {card.oversize.percent:g} % oversize")
    if card.relative_compaction_percent is not None:
        notes.append(
            f"required {card.relative_compaction_percent:.1f} %, expected {card.expected_compaction_percent:.1f} % "
            "of the maximum"
        )
    return ChartContent(
        title=f"{card.material}, {site_name}",
        note="; ".join(notes),
        specific_gravity=card.specific_gravity,
        **(whole.curve(card.curve) if card.curve else {}),
        peak=None if optimum is None else (optimum, card.max_dry_density_kg_m3),
        levels=_levels(card) if optimum is None else (),
        window=window.polygon if window else None,
        target=target,
        bank=bank,
        field=tuple(
            (t.water_content_percent, t.dry_density_kg_m3) for t in tests if t.water_content_percent is not None
        ),
    )


def _levels(card: SoilCard) -> tuple[tuple[str, float], ...]:
    """The dry densities that a free-draining soil is judged between."""
    named = (
        ("maximum", card.max_dry_density_kg_m3),
        ("expected", card.fill_dry_density_kg_m3),
        ("required", card.required_dry_density_kg_m3),
        ("minimum", card.min_dry_density_kg_m3),
    )
    return tuple((name, density) for name, density in named if density is not None)


def chart_of_curve(curve: CompactionCurve, title: str) -> ChartContent:
    """The chart of a compaction curve alone."""
    return ChartContent(
        title=title,
        note=f"{curve.method or 'method not stated'}; {curve.chosen.form} through {len(curve.points)} points",
        specific_gravity=curve.specific_gravity,
        peak=(curve.optimum_water_content_percent, curve.max_dry_density_kg_m3),
        **_Whole(None).curve(curve),
    )


class _Whole:
    """Turns states of the tested fraction to those of the whole soil, so that one chart holds both."""

    def __init__(self, card: SoilCard | None):
        self.coarse = card.oversize if card else None

    def state(self, water: float, density: float) -> State:
        if self.coarse is None or not self.coarse.percent:
            return water, density
        return (
            oversize.whole_water_content_percent(water, self.coarse.percent, self.coarse.water_content),
            oversize.whole_dry_density(density, self.coarse.percent, self.coarse.specific_gravity),
        )

    def curve(self, curve: CompactionCurve) -> dict[str, Any]:
        """Points and fitted lines of a curve, as arguments of :class:`ChartContent`."""
        import numpy as np

        waters = [p.water_content_percent for p in curve.points]
        span = max(waters) - min(waters)
        grid = np.linspace(max(min(waters) - 0.05 * span, 0.0), max(waters) + 0.05 * span, 121)
        lines = {fit.form: self._line(grid, fit.predict(grid)) for fit in curve.fits}
        chosen = curve.chosen.form
        return {
            "points": tuple(self.state(p.water_content_percent, p.dry_density_kg_m3) for p in curve.points),
            "left_out": tuple(self.state(p.water_content_percent, p.dry_density_kg_m3) for p, _ in curve.left_out),
            "curve": lines[chosen],
            "other_curves": tuple(line for form, line in lines.items() if form != chosen),
        }

    def _line(self, waters: np.ndarray, densities: np.ndarray) -> tuple[State, ...]:
        return tuple(self.state(float(w), float(d)) for w, d in zip(waters, densities, strict=True))


def draw_compaction_chart(content: ChartContent, path: Path, *, units: UnitSystem) -> None:
    """Draw a compaction chart as PNG.

    Args:
        content: what it shows.
        path: the PNG.
        units: of the density axis.
    """
    figure = new_figure(7.6, 5.6)
    axes = figure.add_axes((0.11, 0.2, 0.86, 0.66))
    plain_axes(axes)
    factor = units.factor("density")
    limits = _limits(content)
    axes.set_xlim(*limits[0])
    axes.set_ylim(limits[1][0] / factor, limits[1][1] / factor)
    _draw_saturation(axes, content, factor, limits[0])
    if content.window is not None and not content.window.is_empty:
        _draw_window(axes, content.window, factor)
    _draw_levels(axes, content.levels, factor, units)
    _draw_curve(axes, content, factor)
    _draw_states(axes, content, factor, units)
    axes.set_xlabel("water content, % of dry mass")
    axes.set_ylabel(f"dry density, {units.label('density')}")
    step = round_step((limits[1][1] - limits[1][0]) / factor, 6)
    axes.yaxis.set_major_formatter(lambda value, _: number(value, step))
    head_chart(figure, 0.11, content.title, content.note, (0.945, 0.905))
    handles, labels = axes.get_legend_handles_labels()
    figure.legend(
        handles, labels, loc="lower left", bbox_to_anchor=(0.1, 0.005), ncols=4, frameon=False, fontsize=8,
        handlelength=2.4, columnspacing=1.6,
    )  # fmt: skip
    save_figure(figure, path)


def _limits(content: ChartContent) -> tuple[tuple[float, float], tuple[float, float]]:
    """Ranges of water content and dry density that hold all states with some room, whatever the lines do."""
    states = [*content.points, *content.left_out, *content.field]
    states += [s for s in (content.peak, content.target, content.bank) if s is not None]
    if content.window is not None and not content.window.is_empty:
        top = max((density for _, density in states), default=content.window.bounds[3])
        corners = [corner for part in _parts(content.window) for corner in part.exterior.coords if corner[1] <= top]
        # A window that nothing limits on the dry side runs to bone dry; it may run out of the chart.
        states += [c for c in (min(corners, default=(0.0, 0.0)), max(corners, default=(0.0, 0.0))) if c[0] > _DRY]
    if content.levels:
        # Any water content goes, so the chart runs from bone dry to full voids at the loosest.
        loosest = min(density for _, density in content.levels)
        room_for = float(phase.zero_air_voids_water_content_percent(loosest, content.specific_gravity))
        states += [(w, d) for _, d in content.levels for w in (0.0, room_for)]
    waters, densities = [w for w, _ in states], [d for _, d in states]
    room = max(0.08 * (max(waters) - min(waters)), 1.0)
    height = max(max(densities) - min(densities), 60.0)
    return (
        (max(min(waters) - room, 0.0), max(waters) + room),
        (min(densities) - 0.12 * height, max(densities) + 0.2 * height),
    )


def _draw_saturation(axes: Axes, content: ChartContent, factor: float, span: tuple[float, float]) -> None:
    import numpy as np

    water = np.linspace(span[0], span[1], 200)
    for saturation, dashes, width, side in _LINES:
        density = phase.dry_density_at_saturation(water, content.specific_gravity, saturation)
        axes.plot(water, density / factor, color=colors.FAINT, linewidth=width, linestyle=dashes, zorder=2)
        name = "zero air voids" if saturation == 100 else f"{saturation:g} %"
        _name_line(axes, name, (water, density), factor, side)
    axes.plot([], [], color=colors.FAINT, linewidth=1.2, label="equal saturation")


def _name_line(axes: Axes, name: str, line: tuple[np.ndarray, np.ndarray], factor: float, side: str) -> None:
    """Name a line of saturation where it comes in: at the top of the chart, else at its left end."""
    import numpy as np

    water, density = line
    top = axes.get_ylim()[1] * factor
    # The lines fall to the right, so the top is crossed where the reversed density reaches it.
    at_top = bool(density[0] > top > density[-1])
    place = (float(np.interp(top, density[::-1], water[::-1])), top) if at_top else (float(water[0]), float(density[0]))
    axes.annotate(
        name, (place[0], place[1] / factor), xytext=(0, 2) if at_top else (4, 2), textcoords="offset points",
        ha=side if at_top else "left", va="bottom", fontsize=7.5, color=colors.FAINT,
        path_effects=halo(), zorder=3, annotation_clip=True,
    )  # fmt: skip


def _parts(window: shapely.Polygon) -> list[Any]:
    return [p for p in getattr(window, "geoms", [window]) if p.geom_type == "Polygon"]


def _draw_window(axes: Axes, window: shapely.Polygon, factor: float) -> None:
    for i, part in enumerate(_parts(window)):
        corners = [(w, d / factor) for w, d in part.exterior.coords]
        axes.fill(
            *zip(*corners, strict=True), facecolor=colors.FILL[0], edgecolor=colors.FILL[2], linewidth=1.0,
            hatch="//", alpha=0.55, zorder=1, label="placing window" if i == 0 else None,
        )  # fmt: skip


def _draw_levels(axes: Axes, levels: Sequence[tuple[str, float]], factor: float, units: UnitSystem) -> None:
    """Dry densities that hold at any water content, as lines across the chart, each with its name."""
    left, right = axes.get_xlim()
    for name, density in levels:
        ends = name in ("maximum", "minimum")
        axes.axhline(
            density / factor, color=colors.CUT[0] if ends else colors.FILL[3], linewidth=1.6 if ends else 1.1,
            linestyle="-" if ends else (0, (5, 2)), zorder=4,
        )  # fmt: skip
        # Expected and required run close: one is named over its line, the other under it.
        under = name == "required"
        axes.annotate(
            f"{name} {show(density, 'density', units)}", (left if ends else right, density / factor),
            xytext=(6 if ends else -6, -3 if under else 3), textcoords="offset points", ha="left" if ends else "right",
            va="top" if under else "bottom", fontsize=8, fontweight="bold", path_effects=halo(2.5), zorder=8,
        )  # fmt: skip


def _draw_curve(axes: Axes, content: ChartContent, factor: float) -> None:
    for i, line in enumerate(content.other_curves):
        axes.plot(
            *_split(line, factor), color=colors.CUT[1], linewidth=0.7, linestyle=(0, (1, 1.5)), zorder=3,
            label="other forms of the curve" if i == 0 else None,
        )  # fmt: skip
    if content.curve:
        axes.plot(
            *_split(content.curve, factor), color=colors.CUT[0], linewidth=1.8, zorder=4, label="compaction curve"
        )
    if content.points:
        axes.plot(
            *_split(content.points, factor), linestyle="none", marker="o", markersize=5.5, color=colors.CUT[0],
            markeredgecolor=colors.PAPER, markeredgewidth=0.8, zorder=6, label="laboratory points",
        )  # fmt: skip
    if content.left_out:
        axes.plot(
            *_split(content.left_out, factor), linestyle="none", marker="x", markersize=6, markeredgewidth=1.4,
            color=colors.EXPORT, zorder=6, label="left out",
        )  # fmt: skip


def _draw_states(axes: Axes, content: ChartContent, factor: float, units: UnitSystem) -> None:
    if content.field:
        many = len(content.field) > 60
        axes.plot(
            *_split(content.field, factor), linestyle="none", marker="^", markersize=3 if many else 4.5,
            color=colors.FILL[2], alpha=0.5 if many else 0.85, markeredgewidth=0, zorder=5, label="field tests",
        )  # fmt: skip
    named = (
        ("maximum", content.peak, "*", 11, colors.CUT[0], (0, 11), "center"),
        ("target", content.target, "D", 6.5, colors.FILL[3], (16, -40), "left"),
        ("bank", content.bank, "s", 7, colors.CUT[1], (9, -3), "left"),
    )
    middle = sum(axes.get_xlim()) / 2
    for name, state, marker, size, color, (right, up), side in named:
        if state is None:
            continue
        axes.plot(
            [state[0]], [state[1] / factor], linestyle="none", marker=marker, markersize=size, color=color,
            markeredgecolor=colors.PAPER, markeredgewidth=0.8, zorder=7,
        )  # fmt: skip
        # Texts of states on the right half run to the left, so that they stay in the chart.
        turned = side == "left" and state[0] > middle
        axes.annotate(
            f"{name} {show(state[1], 'density', units)}, {state[0]:.1f} %", (state[0], state[1] / factor),
            xytext=(-right if turned else right, up), textcoords="offset points", ha="right" if turned else side,
            fontsize=8, fontweight="bold", path_effects=halo(2.5), zorder=8,
            arrowprops={"arrowstyle": "-", "color": color, "linewidth": 0.8, "shrinkB": 4} if up < -10 else None,
        )  # fmt: skip


def _split(states: Sequence[State], factor: float) -> tuple[list[float], list[float]]:
    return [w for w, _ in states], [d / factor for _, d in states]
