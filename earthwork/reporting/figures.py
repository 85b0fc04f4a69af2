"""What all figures share: a canvas without a window system, plain type, round numbers, readable text."""

from __future__ import annotations

import math
import textwrap
import warnings
from functools import lru_cache
from pathlib import Path
from typing import TYPE_CHECKING, Any, Literal

from earthwork.reporting.colors import FAINT, INK, PAPER

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

DPI = 150
#: What a sheet shows, behind the name of its site; and a title before it is measured [letters].
_LONGEST_TAIL, _LONGEST_TITLE = 40, 1000
#: Names from people's files must not be read as formulas by the text engine.
_RC: dict[Any, Any] = {
    "font.family": "DejaVu Sans",
    "font.size": 8.5,
    "axes.edgecolor": FAINT,
    "axes.labelcolor": INK,
    "text.color": INK,
    "xtick.color": FAINT,
    "ytick.color": FAINT,
    "axes.linewidth": 0.7,
    "hatch.linewidth": 0.5,
    "svg.hashsalt": "earthwork",
    "text.parse_math": False,
}


def new_figure(width: float, height: float) -> Figure:
    """An empty figure [inches]; it is drawn by the file writer alone, whatever screen there is."""
    import matplotlib
    from matplotlib.backends.backend_agg import FigureCanvasAgg
    from matplotlib.figure import Figure

    matplotlib.rcParams.update(_RC)
    # A name may hold characters that the font lacks; it shows boxes for them.
    warnings.filterwarnings("ignore", message="Glyph .* missing from", category=UserWarning)
    figure = Figure(figsize=(width, height), dpi=DPI, facecolor=PAPER)
    FigureCanvasAgg(figure)
    return figure


def save_figure(figure: Figure, path: Path) -> None:
    """Write a figure as PNG; the same figure gives the same bytes."""
    figure.savefig(path, dpi=DPI, metadata={"Software": None})


def plain_axes(axes: Axes) -> None:
    """Axes with the frame at left and bottom only, and numbers in full."""
    for side in ("top", "right"):
        axes.spines[side].set_visible(False)
    axes.grid(True, color="#E4E4E0", linewidth=0.6)
    axes.set_axisbelow(True)
    axes.tick_params(length=3)


def round_step(span: float, parts: float) -> float:
    """A round step (1, 2 or 5 times a power of ten) that cuts a span into about so many parts.

    >>> round_step(7.3, 4), round_step(930, 5)
    (2.0, 200.0)
    """
    rough = span / parts
    power = 10.0 ** math.floor(math.log10(rough))
    return min((1.0, 2.0, 5.0, 10.0), key=lambda m: abs(math.log(m * power / rough))) * power


def number(value: float, step: float) -> str:
    """A number with as many decimals as its step needs.

    >>> number(2.0, 0.5), number(1200.0, 200.0), number(-0.01, 0.5)
    ('2.0', '1,200', '0.0')
    """
    places = max(0, -math.floor(math.log10(abs(step)) + 1e-9))
    text = f"{value:,.{places}f}"
    return text if text.strip("-0.,") else text.lstrip("-")


def tick_step(low: float, high: float, inches: float, *, parts: float = 5.0, size: float = 8.5) -> float:
    """A round step for the marks under an axis so long that their numbers stay apart.

    >>> tick_step(0, 9.6e4, 3.7), tick_step(0, 1.5e9, 3.7)
    (20000.0, 500000000.0)
    """
    span = max(high - low, 1e-9)
    step = round_step(span, parts)
    while step < span and _number_inches(max(abs(low), abs(high)), step, size) > inches * step / span:
        step = round_step(2.3 * step, 1.0)
    return step


def _number_inches(value: float, step: float, size: float) -> float:
    """Room that a number needs, its gap to the next included: a digit of the font is 0.64 of its size wide."""
    return (len(number(value, step)) + 2) * 0.64 * size / 72


#: Soft hyphen, (non-)joiners, marks of direction: they take no room.
_UNSEEN = "\u00ad\u200b\u200c\u200d\u200e\u200f\u2060\ufeff"


@lru_cache(maxsize=2)
def _glyphs(style: Literal["normal", "italic"] = "normal") -> frozenset[int]:
    """The characters that the font of pictures has, upright or slanted."""
    from matplotlib.font_manager import FontProperties, findfont
    from matplotlib.ft2font import FT2Font

    return frozenset(FT2Font(findfont(FontProperties(family="DejaVu Sans", style=style))).get_charmap())


def slant(text: str) -> str:
    """The style of a name on a map: slanted where the slanted font has all of its letters, for it has fewer.

    >>> slant("east pit"), slant("\u0645\u0628\u0646\u0649")
    ('italic', 'normal')
    """
    return "italic" if all(ord(c) in _glyphs("italic") for c in text if c != "\n") else "normal"


def drawable(text: str) -> str:
    """A text with a box for each character that the font of pictures does not have, and "?" for one that is none.

    Without that such characters take no room, and lie on top of their neighbours.

    >>> drawable("\U0001f3d7\ufe0f pad"), drawable("east\u00adern")
    ('□ pad', 'eastern')
    """
    shown = (c if c.isprintable() else "?" for c in text if c not in _UNSEEN and not "\ufe00" <= c <= "\ufe0f")
    return "".join(c if ord(c) in _glyphs() else "□" for c in shown)


def wrapped(name: str, width: int = 18, lines: int = 3) -> str:
    """A name on short lines, cut with an ellipsis where it is too long for a picture.

    >>> wrapped("Building C, north wing and its yard", 14, 2)
    'Building C,\\nnorth wing and…'
    """
    pieces = textwrap.wrap(" ".join(drawable(name).split()), width) or [""]
    if len(pieces) > lines:
        pieces = [*pieces[: lines - 1], pieces[lines - 1][:width].rstrip() + "…"]
    return "\n".join(pieces)


def shorten_to(text: Any, pixels: float, least_size: float = 9.0) -> None:
    """Make one line of text fit into a width: smaller letters first, then fewer of them.

    What stands behind the last colon, which says what the sheet shows, stays whole behind a long name of a site; so
    does where a move goes to.
    """
    name, colon, what = text.get_text().rpartition(" → " if " → " in text.get_text() else ": ")
    if not name or len(what) > _LONGEST_TAIL:
        name, colon, what = text.get_text(), "", ""
    while text.get_window_extent().width > pixels and name.strip("…"):
        if text.get_fontsize() > least_size:
            text.set_fontsize(max(text.get_fontsize() - 1.0, least_size))
        else:
            name = name.removesuffix("…")[:-1].rstrip() + "…"
            text.set_text(name + colon + what)


def head_chart(figure: Figure, left: float, title: str, note: str, tops: tuple[float, float]) -> None:
    """The title and the note over a chart, which end where the sheet does.

    A title is made smaller, and cut where that is not enough; a note, for it holds numbers, goes on on a second line.

    Args:
        figure: the sheet.
        left: where both begin [share of its width].
        title: in bold.
        note: in small letters under it.
        tops: where each stands [share of the height].
    """
    pixels = (0.985 - left) * figure.get_figwidth() * figure.dpi
    shorten_to(figure.text(left, tops[0], wrapped(title, _LONGEST_TITLE, 1), fontsize=12, fontweight="bold"), pixels)
    told = figure.text(left, tops[1], wrapped(note, 400, 1), fontsize=8.5, color=FAINT)
    if told.get_window_extent().width > pixels:
        told.set_fontsize(7.5)
    letters = len(told.get_text())
    while told.get_window_extent().width > pixels and letters > 20:
        letters -= 4
        told.set_text(wrapped(note, letters, 9))
    if "\n" in told.get_text():
        told.set_position((left, tops[1] + 0.025))
        told.set_verticalalignment("top")


def make_room(figure: Figure, *charts: Axes, gap: float = 0.08) -> None:
    """Move the sides of charts so far in that the numbers and names of their axes stand on the sheet.

    Args:
        figure: the sheet.
        charts: below one another; their sides stay in line.
        gap: what stays free at the edges [inches].
    """
    from matplotlib.transforms import Bbox

    renderer = figure.canvas.get_renderer()  # type: ignore[attr-defined]
    boxes = [box for axes in charts for axis in (axes.xaxis, axes.yaxis) if (box := axis.get_tightbbox(renderer))]
    width, free = figure.get_figwidth() * figure.dpi, gap * figure.dpi
    left = max(free - min(box.x0 for box in boxes), 0.0) / width
    right = max(max(box.x1 for box in boxes) - (width - free), 0.0) / width
    for axes in charts:
        box = axes.get_position()
        axes.set_position(Bbox.from_extents(box.x0 + left, box.y0, box.x1 - right, box.y1))


def halo(width: float = 2.0) -> list[Any]:
    """A light rim around text or lines, so that they are read on any ground."""
    from matplotlib import patheffects

    return [patheffects.withStroke(linewidth=width, foreground=PAPER)]
