"""DXF of release 12, which every design program reads: faces, lines in space, outlines and names by layer."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from pathlib import Path
from typing import Any

from earthwork.files.landxml import Breakline, Triangles

#: Colours of the layers by their kind (DXF colour numbers).
_COLORS = {"surface": 8, "line": 3, "outline": 7, "point": 1}


def write_dxf(
    path: Path,
    surfaces: Sequence[Triangles],
    breaklines: Sequence[Breakline],
    outlines: Sequence[tuple[str, str, Any]] = (),
) -> None:
    """Write a drawing.

    Args:
        path: the file.
        surfaces: as 3D faces, each on a layer of its name.
        breaklines: as polylines in space, on the layer of their kind.
        outlines: (layer, name, polygon): closed polylines with the name as a text inside.
    """
    from ezdxf.addons.r12writer import r12writer

    with open(path, "w", encoding="ascii", errors="replace", newline="\n") as file, r12writer(file) as drawing:
        for surface in surfaces:
            file.writelines(_faces(surface))
        for line in breaklines:
            points = line.points.round(4).tolist()
            drawing.add_polyline(points, layer=layer_name(line.kind), color=_COLORS["line"])
        for layer, name, shape in outlines:
            for ring in _rings(shape):
                drawing.add_polyline_2d(
                    [(round(x, 4), round(y, 4)) for x, y, *_ in ring], layer=layer_name(layer), closed=True,
                    color=_COLORS["outline"],
                )  # fmt: skip
            if name:
                inner = shape.representative_point()
                size = max(0.02 * max(shape.bounds[2] - shape.bounds[0], shape.bounds[3] - shape.bounds[1]), 0.5)
                drawing.add_text(
                    plain_text(name), insert=(inner.x, inner.y), height=size, layer=layer_name(f"{layer} names")
                )


def _faces(surface: Triangles) -> Iterator[str]:
    """The faces of a surface as entities; a triangle's last corner is written twice, as the format asks."""
    head = f"0\n3DFACE\n8\n{layer_name(surface.name)}\n62\n{_COLORS['surface']}\n"
    corners = [f"{x:.4f}\n2{{0}}\n{y:.4f}\n3{{0}}\n{z:.4f}\n" for x, y, z in surface.vertices.tolist()]
    for a, b, c in surface.triangles.tolist():
        ends = zip((a, b, c, c), "0123", strict=True)
        yield head + "".join(f"1{k}\n{corners[i].replace('{0}', k)}" for i, k in ends)


def _rings(shape: Any) -> list[list[tuple[float, ...]]]:
    if hasattr(shape, "geoms"):
        return [ring for part in shape.geoms for ring in _rings(part)]
    return [list(ring.coords)[:-1] for ring in (shape.exterior, *shape.interiors)]


def layer_name(text: str) -> str:
    """A layer name that release 12 takes: letters, digits, hyphens and underscores, at most 31.

    >>> layer_name("removal bottom"), layer_name("a <b>\\n0")
    ('REMOVAL_BOTTOM', 'A__B__0')
    """
    plain = "".join(c if c.isascii() and (c.isalnum() or c in "-_") else "_" for c in text)
    return plain.upper()[:31] or "0"


def plain_text(text: str) -> str:
    """A text on one line; what is not ASCII as the escapes that drawings use.

    >>> plain_text("Höfe\\n2")
    'H\\\\U+00F6fe 2'
    """
    line = " ".join("".join(c if c.isprintable() else " " for c in text).split())
    return "".join(c if c.isascii() else f"\\U+{ord(c):04X}" if ord(c) <= 0xFFFF else "?" for c in line)[:250]
