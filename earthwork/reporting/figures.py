"""What all figures share: a canvas without a window system, plain type, round numbers, readable text."""

from __future__ import annotations

import math
import textwrap
import warnings
from functools import lru_cache
from pathlib import Path
from typing import TYPE_CHECKING, Any

from earthwork.reporting.colors import FAINT, INK, PAPER

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

DPI = 150
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

    >>> number(2.0, 0.5), number(1200.0, 200.0)
    ('2.0', '1,200')
    """
    places = max(0, -math.floor(math.log10(abs(step)) + 1e-9))
    return f"{value:,.{places}f}"


@lru_cache(maxsize=1)
def _glyphs() -> frozenset[int]:
    """The characters that the font of pictures has."""
    from matplotlib.font_manager import findfont
    from matplotlib.ft2font import FT2Font

    return frozenset(FT2Font(findfont("DejaVu Sans")).get_charmap())


def drawable(text: str) -> str:
    """A text with a box for each character that the font of pictures does not have, and "?" for one that is none.

    Without that such characters take no room, and lie on top of their neighbours.

    >>> drawable("\U0001f3d7\ufe0f pad")
    '□ pad'
    """
    shown = (c if c.isprintable() else "?" for c in text if not "\ufe00" <= c <= "\ufe0f")
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


def halo(width: float = 2.0) -> list[Any]:
    """A light rim around text or lines, so that they are read on any ground."""
    from matplotlib import patheffects

    return [patheffects.withStroke(linewidth=width, foreground=PAPER)]
