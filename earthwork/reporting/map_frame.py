"""The frame of a map: size, axes, titles, outlines with names, scale bar and north arrow."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from earthwork.ground.grid import Grid
from earthwork.reporting import colors
from earthwork.reporting.figures import halo, number, round_step, shorten_to, slant, wrapped
from earthwork.units import UnitSystem

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

#: Inches around the map.
_LEFT, _RIGHT, _TOP, _BOTTOM, _PANEL, _GAP = 0.75, 0.2, 0.75, 0.55, 2.75, 0.25
_MAP_WIDTH, _MAP_HEIGHT, _LEAST_HEIGHT = 7.6, 7.2, 4.9
#: Least sides of the map: a strip has empty paper beside it, where its labels and coordinates find room.
_LEAST_MAP_WIDTH, _LEAST_MAP_HEIGHT = 1.8, 1.2
#: A site wider than this share of its height has its legend under the map.
_WIDE, _WIDE_WIDTH, _LEGEND_HEIGHT = 0.5, 9.8, 3.0


@dataclass(frozen=True)
class Frame:
    """Where things go on the sheet of a map, in inches, for a grid drawn true to scale."""

    grid: Grid
    units: UnitSystem
    map_width: float
    map_height: float
    legend_below: bool = False

    @classmethod
    def around(cls, grid: Grid, units: UnitSystem) -> Frame:
        """The frame of a grid: as large as fits, never distorted."""
        west, south, east, north = grid.bounds
        ratio = (north - south) / (east - west)
        if ratio < _WIDE:
            return cls(grid, units, _WIDE_WIDTH, max(_WIDE_WIDTH * ratio, _LEAST_MAP_HEIGHT), legend_below=True)
        width = min(_MAP_WIDTH, _MAP_HEIGHT / ratio)
        return cls(grid, units, max(width, _LEAST_MAP_WIDTH), width * ratio)

    @property
    def columns(self) -> tuple[float, float, float]:
        """Where the columns of a legend under the map start."""
        return 0.0, 3.3, 6.6

    @property
    def size(self) -> tuple[float, float]:
        """Width and height of the sheet."""
        if self.legend_below:
            height = _TOP + self.map_height + _BOTTOM + _LEGEND_HEIGHT
            return _LEFT + self.map_width + _RIGHT, height
        height = max(self.map_height, _LEAST_HEIGHT)
        return _LEFT + self.map_width + _GAP + _PANEL + _RIGHT, _TOP + height + _BOTTOM

    @property
    def extent(self) -> tuple[float, float, float, float]:
        """(west, east, south, north) of the grid, as pictures are placed."""
        west, south, east, north = self.grid.bounds
        return west, east, south, north

    @property
    def view(self) -> tuple[float, float, float, float]:
        """(west, east, south, north) of the map: the grid in the middle, true to scale."""
        west, east, south, north = self.extent
        per_inch = max((east - west) / self.map_width, (north - south) / self.map_height)
        beside = (per_inch * self.map_width - (east - west)) / 2
        above = (per_inch * self.map_height - (north - south)) / 2
        return west - beside, east + beside, south - above, north + above

    def map_axes(self, figure: Figure) -> Axes:
        """Axes for the map, with a few coordinates."""
        width, height = self.size
        bottom = height - _TOP - self.map_height
        axes = figure.add_axes((_LEFT / width, bottom / height, self.map_width / width, self.map_height / height))
        west, east, south, north = self.view
        axes.set_xlim(west, east)
        axes.set_ylim(south, north)
        axes.set_aspect("auto")
        # Upright northings need room above the first easting, which stands at the same corner.
        for axis, low, high, inches, room in (
            (axes.xaxis, west, east, self.map_width, 0.0),
            (axes.yaxis, south, north, self.map_height, 0.32),
        ):
            step = round_step(high - low, min(4.0, inches / 0.85))
            ticks = np.arange(np.ceil(low / step) * step, high, step)
            ticks = ticks[ticks >= low + room * (high - low) / inches]
            axis.set_ticks(ticks, [number(t, step) for t in ticks])
        axes.tick_params(length=3, labelsize=7)
        for label in axes.get_yticklabels():
            label.set_rotation(90)
            label.set_verticalalignment("center")
        axes.set_facecolor("#FFFFFF")
        return axes

    def draw_titles(self, figure: Figure, title: str, subtitle: str) -> None:
        """A heading over the map, and the unit of the coordinates under it."""
        width, height = self.size
        heading = figure.text(_LEFT / width, 1 - 0.26 / height, wrapped(title, 1000, 1), fontsize=13, fontweight="bold")
        shorten_to(heading, (width - _LEFT - _RIGHT) * figure.dpi)
        if subtitle:
            figure.text(_LEFT / width, 1 - 0.5 / height, subtitle, fontsize=9, color=colors.FAINT)
        unit = "m" if abs(self.grid.unit_m - 1) < 1e-12 else "ft"
        note = f"easting and northing, {unit}"
        if self.grid.crs is not None:
            authority = self.grid.crs.to_authority()
            note += ", " + (":".join(authority) if authority else self.grid.crs.name)
        y = height - _TOP - self.map_height - 0.38
        figure.text(_LEFT / width, y / height, note, fontsize=7, color=colors.FAINT)

    def thinned(self, field: np.ndarray, most: int) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        """A field with at most so many rows and columns, and the eastings and northings of its points."""
        every = max(1, -(-max(field.shape) // most))
        rows = np.arange(every // 2, field.shape[0], every)
        columns = np.arange(every // 2, field.shape[1], every)
        north = self.grid.north - (rows + 0.5) * self.grid.cell_north
        east = self.grid.west + (columns + 0.5) * self.grid.cell_east
        return field[np.ix_(rows, columns)], east, north

    def to_edges(
        self, field: np.ndarray, east: np.ndarray, north: np.ndarray
    ) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        """A field of cell centres with its outer values repeated on the edges of the grid: contours reach them."""
        west_edge, east_edge, south_edge, north_edge = self.extent
        return (
            np.pad(field, 1, mode="edge"),
            np.concatenate([[west_edge], east, [east_edge]]),
            np.concatenate([[north_edge], north, [south_edge]]),
        )

    def label_zones(self, axes: Axes, zones: Sequence[tuple[str, Any]], taken: list[Any]) -> None:
        """Write each zone's name inside it, the largest first, clear of the boxes taken (pixels).

        A long name is shortened until it fits into its zone; one that finds no room is left out, for the tables have it,
        and so is a zone without ground.
        """
        for name, shape in sorted((z for z in zones if not z[1].is_empty), key=lambda z: -z[1].area):
            places = places_in(shape)
            for k, text in enumerate(shorter(name)):
                label = axes.text(0.0, 0.0, text, fontstyle=slant(text), **_ZONE_LABEL, path_effects=halo(2.6))
                box = self._place(axes, label, shape, places, taken, within=k < len(shorter(name)) - 1)
                if box is not None:
                    taken.append(box)
                    break
                label.remove()

    def _place(
        self, axes: Axes, label: Any, shape: Any, places: list[tuple[float, float]], taken: list[Any], *, within: bool
    ) -> Any:
        """Put a label at the first place where it fits; its box in pixels, or None where there is none."""
        import shapely
        from matplotlib.transforms import Bbox

        size = label.get_window_extent()
        to_map = axes.transData.inverted()
        others = np.array([other.extents for other in taken]).reshape(-1, 4)
        for place in places:
            x, y = axes.transData.transform(place)
            box = Bbox.from_bounds(x - size.width / 2, y - size.height / 2, size.width, size.height)
            if not self.inside(axes, box) or _meets(box, others):
                continue
            if within:
                west, south = to_map.transform((box.x0, box.y0))
                east, north = to_map.transform((box.x1, box.y1))
                if not shape.contains(shapely.box(west, south, east, north)):
                    continue
            label.set_position(place)
            return box
        return None

    def inside(self, axes: Axes, box: Any) -> bool:
        """Whether a box in pixels lies on the map."""
        frame = axes.get_window_extent()
        return bool(frame.x0 <= box.x0 and box.x1 <= frame.x1 and frame.y0 <= box.y0 and box.y1 <= frame.y1)

    def draw_scale_and_north(self, figure: Figure) -> None:
        """A bar of a round ground length and an arrow to grid north, under the legend."""
        width, height = self.size
        length = self.units.factor("length")
        ground = (self.view[1] - self.view[0]) * self.grid.unit_m * self.grid.ground_scale / length
        bar = round_step(ground, self.map_width / 1.5)
        inches = bar / ground * self.map_width
        axes = figure.add_axes((0, 0, 1, 1))
        axes.set_xlim(0, width)
        axes.set_ylim(0, height)
        axes.axis("off")
        left, bottom = _LEFT + self.map_width + _GAP, 0.3
        if self.legend_below:
            left, bottom = _LEFT + self.columns[2], _LEGEND_HEIGHT - 0.7
        for i, color in enumerate((colors.INK, colors.PAPER)):
            axes.fill_between(
                [left + i * inches / 2, left + (i + 1) * inches / 2],
                bottom,
                bottom + 0.07,
                facecolor=color,
                edgecolor=colors.INK,
                linewidth=0.7,
            )
        for x, text in ((0.0, "0"), (inches, f"{number(bar, bar)} {self.units.label('length')}")):
            axes.text(left + x, bottom + 0.12, text, ha="center" if x else "left", fontsize=7.5)
        east = left + _PANEL - 0.3
        axes.annotate(
            "",
            (east, bottom + 0.5),
            (east, bottom),
            arrowprops={"arrowstyle": "-|>", "color": colors.INK, "lw": 1.2},
        )
        axes.text(east, bottom + 0.52, "N", ha="center", fontweight="bold")


_ZONE_LABEL: dict[str, Any] = {
    "fontsize": 7.5, "ha": "center", "va": "center", "zorder": 8, "linespacing": 1.05
}  # fmt: skip


def shorter(name: str) -> list[str]:
    """A name for a map, from whole to short.

    >>> shorter("Lot 01, Cooper Ridge Section 4")
    ['Lot 01, Cooper\\nRidge Section 4', 'Lot 01,\\nCooper Ridge\\nSection 4', 'Lot 01']
    """
    first = name.split(",")[0].split(":")[0].split(" - ")[0]
    texts = [wrapped(name, 18), wrapped(name, 12, 4), wrapped(first, 14, 1)]
    return list(dict.fromkeys(texts))


def _meets(box: Any, others: np.ndarray) -> bool:
    """Whether a box overlaps any of others, (n, 4) as left, bottom, right, top."""
    left, bottom, right, top = others.T
    return bool(((left <= box.x1) & (box.x0 <= right) & (bottom <= box.y1) & (box.y0 <= top)).any())


def places_in(shape: Any, along: int = 9) -> list[tuple[float, float]]:
    """Places inside a polygon for its name, the best first: its own inner point, then others from the middle out."""
    import shapely

    inner = shape.representative_point()
    west, south, east, north = shape.bounds
    steps = (np.arange(along) + 0.5) / along
    points = [(west + u * (east - west), south + v * (north - south)) for u in steps for v in steps]
    points = [p for p in points if shapely.contains_xy(shape, *p)]
    points.sort(key=lambda p: (p[0] - inner.x) ** 2 + (p[1] - inner.y) ** 2)
    return [(inner.x, inner.y), *points]


def draw_outline(axes: Axes, shape: Any, *, dashed: bool = False, color: str | None = None) -> None:
    """The rings of a polygon."""
    style = (0, (5, 3)) if dashed else "solid"
    color = color or (colors.LIMITS if dashed else colors.FAINT)
    for part in getattr(shape, "geoms", [shape]):
        for ring in (part.exterior, *part.interiors):
            x, y = np.asarray(ring.coords)[:, :2].T
            axes.plot(
                x,
                y,
                color=color,
                linewidth=1.1,
                linestyle=style,
                zorder=5,
                path_effects=None if dashed else halo(2.2),
            )


def legend_panel(figure: Figure, frame: Frame) -> Axes:
    """Axes for a legend beside the map; y is inches under its top plus one."""
    width, height = frame.size
    if frame.legend_below:
        panel = figure.add_axes((_LEFT / width, 0.1 / height, frame.map_width / width, (_LEGEND_HEIGHT - 0.2) / height))
        panel.set_xlim(0, frame.map_width)
        panel.set_ylim(1 - (_LEGEND_HEIGHT - 0.2), 1)
        panel.axis("off")
        return panel
    inches = height - _TOP - 0.9
    left = _LEFT + frame.map_width + _GAP
    panel = figure.add_axes((left / width, 0.9 / height, _PANEL / width, inches / height))
    panel.set_xlim(0, _PANEL)
    panel.set_ylim(1 - inches, 1)
    panel.axis("off")
    return panel


def legend_swatch(panel: Axes, y: float, color: str, label: str, *, hatch: str | None = None) -> None:
    """A patch of colour with its label; ``hatch`` is the colour of lines at 45°."""
    from matplotlib.patches import Rectangle

    panel.add_patch(Rectangle((0.0, y - 0.16), 0.34, 0.17, facecolor=color, edgecolor="none"))
    if hatch:
        panel.add_patch(
            Rectangle((0.0, y - 0.16), 0.34, 0.17, facecolor="none", edgecolor=hatch, hatch="////", linewidth=0)
        )
    panel.add_patch(Rectangle((0.0, y - 0.16), 0.34, 0.17, facecolor="none", edgecolor=colors.FAINT, linewidth=0.5))
    panel.text(0.45, y - 0.075, label, va="center")


def legend_line(
    panel: Axes,
    x: float,
    y: float,
    label: str,
    *,
    color: str = colors.INK,
    width: float = 0.9,
    dashed: bool = False,
) -> None:
    """A piece of line with its label."""
    style = (0, (5, 3)) if dashed else "solid"
    panel.plot([x, x + 0.34], [y - 0.075] * 2, color=color, linewidth=width, linestyle=style)
    panel.text(x + 0.45, y - 0.075, label, va="center")
