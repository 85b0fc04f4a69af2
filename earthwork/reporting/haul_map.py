"""The haul map: moves drawn along the ways that are really driven, wider where more is moved.

Hundreds of moves stay readable because only the heaviest carry arrows and numbers; the others are thin and pale, and
earth that stays within its block is a dot.
"""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from earthwork.plan.haul import HaulResult
from earthwork.reporting import colors
from earthwork.reporting.display import show
from earthwork.reporting.figures import DPI, halo, new_figure, save_figure, shorten_to, slant, wrapped
from earthwork.reporting.haul_flows import Flow, bundled, flows_of, grid_around, heaviest, stays_in_block
from earthwork.reporting.map_frame import Frame, legend_line, legend_panel, legend_swatch
from earthwork.site import Site

if TYPE_CHECKING:
    from matplotlib.axes import Axes

    from earthwork.quantities.depth_map import DepthMap

#: Moves with an arrow and a number.
_NUMBERED = 12
_WIDEST, _THINNEST = 5.0, 0.5
#: Inches of a line of the legend, and of a move in it.
_LINE, _ENTRY = 0.2, 0.295
#: Length of the name of a numbered move.
_LABEL_INCHES = 2.6
#: By whether a move stays on the site, comes or leaves: name, colour, dash.
_KINDS: dict[str, tuple[str, str, Any]] = {
    "on site": ("on the site", colors.INK, "solid"),
    "in": ("brought to the site", colors.IMPORT, (0, (5, 1.5))),
    "out": ("taken off the site, or to a stockpile", colors.EXPORT, (0, (2, 1.2))),
}
_BARRIER = "#B9B9B3"


def draw_haul_map(site: Site, result: HaulResult, depths: DepthMap | None, path: Path) -> None:
    """Draw the map of a haul plan as PNG.

    Args:
        depths: cut and fill for the ground of the map; None: none is drawn.
    """
    flows = flows_of(result)
    frame = Frame.around(grid_around(result), site.units)
    figure = new_figure(*frame.size)
    axes = frame.map_axes(figure)
    count = len(result.moves)
    told = f"{count:,} move{'' if count == 1 else 's'}, drawn along the ways driven; width by dry mass"
    frame.draw_titles(figure, f"{site.name}: haul plan", told)
    if depths is not None:
        _draw_ground(axes, depths)
    _draw_ways(axes, result)
    numbered = heaviest(bundled(flows, frame), _room_for_moves(frame, result))
    most = max((flow.mass_t for flow in [*flows, *numbered]), default=1.0)
    for flow in sorted(flows, key=lambda f: f.mass_t):
        _draw_flow(axes, flow, most, strong=False, dot=stays_in_block(flow, result))
    for flow in reversed(numbered):
        _draw_flow(axes, flow, most, strong=True, dot=False)
    taken: list[Any] = []
    _draw_places(axes, result, flows, frame, taken, site)
    _draw_numbers(axes, numbered, frame, taken)
    _draw_legend(legend_panel(figure, frame), frame, result, numbered, flows, site)
    frame.draw_scale_and_north(figure)
    save_figure(figure, path)


# --- drawing ------------------------------------------------------------------------------------------------------


def _draw_ground(axes: Axes, depths: DepthMap) -> None:
    """Cut and fill as two pale tints, cut hatched."""
    from matplotlib.colors import ListedColormap

    grid = depths.grid
    west, south, east, north = grid.bounds
    sign = np.where(np.abs(depths.depth) > 0.05, np.sign(depths.depth), np.nan)
    tints = ListedColormap([colors.CUT[3], colors.FILL[0]])
    axes.imshow(
        sign, cmap=tints, vmin=-1, vmax=1, extent=(west, east, south, north), interpolation="nearest", aspect="auto",
        zorder=1,
    )  # fmt: skip
    every = max(1, -(-max(sign.shape) // 500))
    thin = np.nan_to_num(sign[every // 2 :: every, every // 2 :: every])
    if min(thin.shape) < 2 or not (thin < 0).any():
        return
    x = west + (np.arange(thin.shape[1]) * every + every // 2 + 0.5) * grid.cell_east
    y = north - (np.arange(thin.shape[0]) * every + every // 2 + 0.5) * grid.cell_north
    hatched = axes.contourf(x, y, thin, levels=[-1.5, -0.5], colors="none", hatches=["////"])
    hatched.set_edgecolor(colors.CUT[2])
    hatched.set_linewidth(0.0)
    hatched.set_zorder(2)


def _draw_ways(axes: Axes, result: HaulResult) -> None:
    """Barriers and haul roads."""
    import shapely
    from matplotlib.patches import PathPatch
    from matplotlib.path import Path as Outline

    to_map = result.areas.frame.map
    for shape in result.areas.barriers:
        for part in getattr(shape, "geoms", [shape]):
            rings = [to_map(shapely.get_coordinates(ring)) for ring in (part.exterior, *part.interiors)]
            codes = [[Outline.MOVETO, *[Outline.LINETO] * (len(r) - 2), Outline.CLOSEPOLY] for r in rings]
            outline = Outline(np.concatenate(rings), np.concatenate(codes))
            axes.add_patch(
                PathPatch(outline, facecolor="none", edgecolor=colors.FAINT, hatch="xxx", linewidth=0.8, zorder=3)
            )
    for road in result.areas.roads:
        for part in getattr(road.geometry, "geoms", [road.geometry]):
            x, y = to_map(shapely.get_coordinates(part)).T
            axes.plot(x, y, color=colors.FAINT, linewidth=3.2, solid_capstyle="butt", zorder=3)
            axes.plot(x, y, color=colors.PAPER, linewidth=1.8, solid_capstyle="butt", zorder=3.1)


def _draw_flow(axes: Axes, flow: Flow, most: float, *, strong: bool, dot: bool) -> None:
    _, color, dash = _KINDS[flow.kind]
    width = max(_THINNEST, _WIDEST * float(np.sqrt(flow.mass_t / most)))
    if dot:
        x, y = flow.points.mean(axis=0)
        axes.plot([x], [y], marker="o", markersize=1.5 + width, color=color, alpha=0.55, zorder=4, linewidth=0)
        return
    x, y = flow.points.T
    if not strong:
        axes.plot(x, y, color=color, linewidth=min(width, 1.2), alpha=0.35, linestyle=dash, zorder=4)
        return
    axes.plot(x, y, color=color, linewidth=width, linestyle=dash, zorder=6, path_effects=halo(width + 1.6), alpha=0.95)
    _draw_head(axes, flow, color, width)


def _draw_head(axes: Axes, flow: Flow, color: str, width: float) -> None:
    """An arrow head at the end of a way."""
    step = np.hypot(*np.diff(flow.points, axis=0).T)
    last = int(np.flatnonzero(step > 0)[-1])
    start, end = flow.points[last], flow.points[last + 1]
    axes.annotate(
        "",
        end,
        end - (end - start) * 1e-3,
        arrowprops={
            "arrowstyle": f"-|>,head_length={0.5 + 0.09 * width:.2f},head_width={0.26 + 0.07 * width:.2f}",
            "color": color, "lw": 0, "shrinkA": 0, "shrinkB": 0,
        },
        zorder=7,
    )  # fmt: skip


def _draw_numbers(axes: Axes, numbered: Sequence[Flow], frame: Frame, taken: list[Any]) -> None:
    """Numbers on the arrows, each where it lies clear of the others."""
    for number, flow in enumerate(numbered, 1):
        seen = _seen(flow.points, frame)
        for share in (0.5, 0.35, 0.65, 0.22, 0.78, 0.1, 0.9):
            label = axes.annotate(
                str(number),
                _along(seen, share),
                ha="center",
                va="center",
                fontsize=7.5,
                fontweight="bold",
                color=colors.PAPER,
                bbox={"boxstyle": "circle,pad=0.22", "facecolor": _KINDS[flow.kind][1], "edgecolor": colors.PAPER,
                      "linewidth": 0.8},
                zorder=9,
            )  # fmt: skip
            box = label.get_window_extent().expanded(1.6, 1.6)
            clear = frame.inside(axes, box) and not any(box.overlaps(other) for other in taken)
            if clear or share == 0.9:
                taken.append(box)
                break
            label.remove()


def _seen(points: np.ndarray, frame: Frame) -> np.ndarray:
    """The longest part of a line that lies on the map."""
    import shapely

    west, east, south, north = frame.extent
    parts = shapely.get_parts(shapely.LineString(points) & shapely.box(west, south, east, north))
    lines = [part for part in parts if part.geom_type == "LineString" and part.length > 0]
    return shapely.get_coordinates(max(lines, key=lambda line: line.length)) if lines else points


def _along(points: np.ndarray, share: float) -> tuple[float, float]:
    """The place at a share of a line's length."""
    step = np.hypot(*np.diff(points, axis=0).T)
    at = np.concatenate([[0.0], np.cumsum(step)])
    x, y = (float(np.interp(share * at[-1], at, points[:, k])) for k in (0, 1))
    return x, y


def _draw_places(
    axes: Axes, result: HaulResult, flows: Sequence[Flow], frame: Frame, taken: list[Any], site: Site
) -> None:
    """Pits, tips and stockpiles with their names; those off the map stand at its edge, with what lies beyond it."""
    marks = {"borrow": ("^", colors.IMPORT), "disposal": ("v", colors.EXPORT), "stockpile": ("s", colors.EXPORT)}
    grid = result.areas.frame.grid
    for block in result.blocks:
        if block.kind not in marks or block.moved_t <= 0:
            continue
        marker, color = marks[block.kind]
        place = np.array([block.easting_m, block.northing_m]) / grid.unit_m
        at, beyond = _on_map(place, block.block, flows, frame)
        name = wrapped(block.block)
        if beyond > 0:
            far = site.units.from_si(beyond * grid.unit_m * grid.ground_scale, "length")
            name += f"\n{far:,.0f} {site.units.label('length')} on"
        axes.plot(*at, marker=marker, markersize=8, color=color, markeredgecolor=colors.PAPER, zorder=8, clip_on=False)
        _name_place(axes, name, at, frame, taken)


def _name_place(axes: Axes, name: str, at: tuple[float, float], frame: Frame, taken: list[Any]) -> None:
    """A name beside a mark, on the side that has room."""
    sides = (((9, 0), "left", "center"), ((-9, 0), "right", "center"), ((0, 9), "center", "bottom"),
             ((0, -9), "center", "top"), ((9, -8), "left", "top"), ((-9, -8), "right", "top"),
             ((9, 8), "left", "bottom"), ((-9, 8), "right", "bottom"))  # fmt: skip
    for shift, across, up in sides:
        label = axes.annotate(
            name, at, xytext=shift, textcoords="offset points", ha=across, va=up, fontsize=7.5, fontstyle=slant(name),
            zorder=9, linespacing=1.05, annotation_clip=False,
            bbox={"boxstyle": "round,pad=0.15", "facecolor": colors.PAPER, "edgecolor": "none", "alpha": 0.85},
        )  # fmt: skip
        box = label.get_window_extent()
        if frame.inside(axes, box) and not any(box.overlaps(other) for other in taken):
            taken.append(box)
            return
        label.remove()


def _on_map(place: np.ndarray, name: str, flows: Sequence[Flow], frame: Frame) -> tuple[tuple[float, float], float]:
    """A place, or where the ways to it leave the map; and how far it lies beyond, in CRS units."""
    import shapely

    west, east, south, north = frame.extent
    if west <= place[0] <= east and south <= place[1] <= north:
        return (float(place[0]), float(place[1])), 0.0
    inset = 0.015 * max(east - west, north - south)
    box = shapely.box(west + inset, south + inset, east - inset, north - inset)
    ends = [
        (f.points[-1] if f.from_name == name else f.points[0], f.mass_t)
        for f in flows
        if name in (f.from_name, f.to_name)
    ]
    middle = np.average([p for p, _ in ends], axis=0, weights=[w for _, w in ends])
    line = shapely.LineString([middle, place]) & box
    at = shapely.get_coordinates(shapely.shortest_line(line if not line.is_empty else box, shapely.Point(place)))[0]
    return (float(at[0]), float(at[1])), float(np.hypot(*(place - at)))


# --- the legend ---------------------------------------------------------------------------------------------------


def _draw_legend(
    panel: Axes, frame: Frame, result: HaulResult, numbered: Sequence[Flow], flows: Sequence[Flow], site: Site
) -> None:
    y = _list_moves(panel, result, numbered, flows, site) - 0.08
    x = 0.0
    if frame.legend_below:
        x, y = frame.columns[1], 1.0
    for kind, (name, color, dash) in _KINDS.items():
        if any(flow.kind == kind for flow in flows):
            panel.plot([x, x + 0.34], [y - 0.075] * 2, color=color, linewidth=2.4, linestyle=dash)
            panel.text(x + 0.45, y - 0.075, name, va="center")
            y -= _LINE
    if any(stays_in_block(flow, result) for flow in flows):
        panel.plot([x + 0.17], [y - 0.075], marker="o", markersize=5, color=colors.INK, alpha=0.55)
        panel.text(x + 0.45, y - 0.075, "stays within its block", va="center")
        y -= _LINE
    if result.areas.roads:
        legend_line(panel, x, y, "haul road", color=colors.FAINT, width=2.6)
        y -= _LINE
    y = _legend_ground(panel, x, y, result)
    for note in _notes(result, site):
        panel.text(x, y, note, va="top")
        y -= _LINE


def _list_moves(panel: Axes, result: HaulResult, numbered: Sequence[Flow], flows: Sequence[Flow], site: Site) -> float:
    """The numbered moves, and what share of the haul they are; gives the height that is left."""
    y = 1.0
    panel.text(0.0, y, "Most of the haul", fontweight="bold", va="top")
    y -= 0.25
    total = sum(flow.weight for flow in flows) or 1.0
    for number, flow in enumerate(numbered, 1):
        color = _KINDS[flow.kind][1]
        panel.text(0.0, y, f"{number}", va="top", fontweight="bold", fontsize=7.5, color=color)
        mass = show(flow.mass_t, "mass", site.units, si=1000.0)
        far = site.units.from_si(flow.length_m, "length")
        label = panel.text(0.2, y, wrapped(flow.label, 1000, 1), va="top", fontsize=7.5)
        shorten_to(label, _LABEL_INCHES * DPI, 7.0)
        told = f"{mass} over {far:,.0f} {site.units.label('length')}"
        panel.text(0.2, y - 0.135, told, va="top", fontsize=7, color=colors.FAINT)
        y -= _ENTRY
    share = 100 * sum(flow.weight for flow in numbered) / total
    told = f"{share:.0f} % of the haul; thin lines are single moves"
    panel.text(0.0, y, told, va="top", fontsize=7, color=colors.FAINT)
    return y - 0.2


def _room_for_moves(frame: Frame, result: HaulResult) -> int:
    """How many moves the legend can list above its other lines."""
    lines = 3 + 1 + 2 + 3 + bool(result.areas.roads) + bool(result.areas.barriers)
    panel = frame.size[1] - 1.65
    if frame.legend_below:
        return 8
    return int(np.clip((panel - 0.25 - 0.4 - lines * _LINE) / _ENTRY, 3, _NUMBERED))


def _legend_ground(panel: Axes, x: float, y: float, result: HaulResult) -> float:
    from matplotlib.patches import Rectangle

    if x:
        for color, hatch, name in (
            (colors.FILL[0], None, "+ fill"), (colors.CUT[3], colors.CUT[2], "− cut"),
        ):  # fmt: skip
            panel.add_patch(
                Rectangle(
                    (x, y - 0.16), 0.34, 0.17, facecolor=color, edgecolor=hatch or "none", hatch="////" if hatch else ""
                )
            )
            panel.text(x + 0.45, y - 0.075, name, va="center")
            y -= _LINE
    else:
        legend_swatch(panel, y, colors.FILL[0], "+ fill")
        legend_swatch(panel, y - _LINE, colors.CUT[3], "− cut", hatch=colors.CUT[2])
        y -= 2 * _LINE
    if result.areas.barriers:
        panel.add_patch(
            Rectangle((x, y - 0.16), 0.34, 0.17, facecolor="none", edgecolor=colors.FAINT, hatch="xxx", linewidth=0.8)
        )
        panel.text(x + 0.45, y - 0.075, "no crossing", va="center")
        y -= _LINE
    return y - 0.08


def _notes(result: HaulResult, site: Site) -> list[str]:
    units = site.units
    notes = [f"Hauled {show(result.dry_mass_t, 'mass', units, si=1000.0)} of dry mass"]
    if result.mean_distance_m is not None:
        far = units.from_si(result.mean_distance_m, "length")
        notes.append(f"over {far:,.0f} {units.label('length')} on average")
    if result.loads is not None:
        notes.append(f"in {result.loads:,} truck loads")
    return notes
