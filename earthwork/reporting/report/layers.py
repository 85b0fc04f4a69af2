"""site.gpkg: every layer of a report with its figures, and styles for those programs that read them from the file."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any
from xml.sax.saxutils import escape

from earthwork.files.gis import write_shapes
from earthwork.reporting import colors
from earthwork.reporting.display import display_table
from earthwork.reporting.report.map_content import haul_paths, move_kind
from earthwork.reporting.report.parts import Parts

if TYPE_CHECKING:
    import pandas

    from earthwork.reporting.report.exchange import Exchange

#: By layer: kind of geometry, line colour, fill colour or None, line width in mm.
_STYLES: dict[str, tuple[str, str, str | None, float]] = {
    "limits": ("Polygon", colors.LIMITS, None, 0.5),
    "zones": ("Polygon", "#4A4A48", None, 0.4),
    "pads": ("Polygon", colors.INK, colors.FILL[0], 0.6),
    "buildings": ("Polygon", "#4A4A48", "#DDDDDD", 0.3),
    "barriers": ("Polygon", "#8A1C1C", "#F3DCDC", 0.4),
    "breaklines": ("Line", colors.FILL[2], None, 0.4),
    "moves": ("Line", "#3B3B8F", None, 0.7),
    "places": ("Point", "#3B3B8F", "#FFFFFF", 0.3),
}


def write_layers(made: Exchange, path: Path) -> None:
    """Write all layers, in the site's units; a layer without shapes is left out."""
    layers = _Layers(made.parts, path)
    by_layer: dict[str, list[Any]] = {}
    for outline in made.outlines:
        by_layer.setdefault(outline.layer, []).append(outline)
    for name in ("limits", "zones", "pads", "buildings", "barriers"):
        found = by_layer.get(name, [])
        layers.add(name, [o.shape for o in found], _table(made.parts, name, [o.name for o in found]))
    _add_lines(layers, made)
    _add_haul(layers)
    layers.write_styles()


class _Layers:
    """Layers as they are added to one file."""

    def __init__(self, parts: Parts, path: Path) -> None:
        self.parts = parts
        self.path = path
        self.written: list[str] = []

    def add(self, name: str, shapes: Sequence[Any], table: pandas.DataFrame) -> None:
        if not len(shapes):
            return
        crs = self.parts.ground.stack.grid.crs
        shown = display_table(table, self.parts.site.units)
        write_shapes(self.path, name, shapes, shown, crs=crs, append=bool(self.written))
        self.written.append(name)

    def write_styles(self) -> None:
        """The table ``layer_styles``: a style in SLD (an open standard) and in QML for each layer."""
        import numpy as np
        import pyogrio.raw

        names = self.written
        fields = {
            "f_table_name": names,
            "f_geometry_column": ["geom"] * len(names),
            "styleName": names,
            "styleQML": [_qml(name) for name in names],
            "styleSLD": [_sld(name) for name in names],
            "description": ["earthwork"] * len(names),
        }
        pyogrio.raw.write(
            self.path,
            geometry=None,
            field_data=[*(np.array(v, dtype=object) for v in fields.values()), np.ones(len(names), dtype=bool)],
            fields=[*fields, "useAsDefault"],
            layer="layer_styles",
            driver="GPKG",
            geometry_type=None,
            append=True,
        )


def _table(parts: Parts, layer: str, names: Sequence[str]) -> pandas.DataFrame:
    """Names with the figures of the result that tells of them."""
    import pandas as pd

    rows: list[dict[str, Any]] = [{"name": name} for name in names]
    if layer == "zones":
        figures = {z.zone: z.to_dict() for z in parts.volumes.zones}
        rows = [{"name": n, **{k: v for k, v in figures[n].items() if not isinstance(v, list)}} for n in names]
    elif layer == "pads" and "pads" in parts.documents:
        pads = {p["pad"]: p for p in parts.documents["pads"]["pads"]}
        rows = [{"name": n, **_flat(pads.get(n, {}))} for n in names]
    return pd.DataFrame(rows)


def _flat(row: dict[str, Any]) -> dict[str, Any]:
    """Single values of a row; lists of names as one text."""
    flat = {}
    for key, value in row.items():
        if isinstance(value, list) and all(isinstance(v, str) for v in value):
            flat[key] = ", ".join(value)
        elif not isinstance(value, list | dict):
            flat[key] = value
    return flat


def _add_lines(layers: _Layers, made: Exchange) -> None:
    import pandas as pd
    import shapely

    lines = [line for line in made.breaklines if len(line.points) > 1]
    table = pd.DataFrame([{"name": line.name, "kind": line.kind} for line in lines])
    layers.add("breaklines", [shapely.LineString(line.points) for line in lines], table)


def _add_haul(layers: _Layers) -> None:
    import pandas as pd
    import shapely

    haul = layers.parts.documents.get("haul")
    if not haul:
        return
    kinds = {b["block"]: b["kind"] for b in haul["blocks"]}
    rows, shapes = [], []
    for move, path in zip(haul["moves"], haul_paths(layers.parts), strict=True):
        if len(path) > 1:
            rows.append({**_flat(move), "kind": move_kind(move, kinds)})
            shapes.append(shapely.LineString(path))
    layers.add("moves", shapes, pd.DataFrame(rows))
    unit = layers.parts.ground.stack.grid.unit_m
    points = [shapely.Point(b["easting_m"] / unit, b["northing_m"] / unit) for b in haul["blocks"]]
    places = [{k: v for k, v in _flat(b).items() if k not in ("easting_m", "northing_m")} for b in haul["blocks"]]
    layers.add("places", points, pd.DataFrame(places))


# --- styles ---------------------------------------------------------------------------------------------------------


def _sld(name: str) -> str:
    kind, line, fill, width = _STYLES[name]
    pixels = width * 96 / 25.4
    stroke = f"<Stroke>{_css('stroke', line)}{_css('stroke-width', f'{pixels:.2f}')}</Stroke>"
    inner = f"<Fill>{_css('fill', fill)}</Fill>" if fill else ""
    if kind == "Point":
        mark = f"<Mark><WellKnownName>circle</WellKnownName>{inner}{stroke}</Mark>"
        symbol = f"<PointSymbolizer><Graphic>{mark}<Size>7</Size></Graphic></PointSymbolizer>"
    elif kind == "Line":
        symbol = f"<LineSymbolizer>{stroke}</LineSymbolizer>"
    else:
        symbol = f"<PolygonSymbolizer>{inner}{stroke}</PolygonSymbolizer>"
    return (
        '<StyledLayerDescriptor xmlns="http://www.opengis.net/sld" version="1.0.0">'
        f"<NamedLayer><Name>{escape(name)}</Name><UserStyle><FeatureTypeStyle><Rule>{symbol}</Rule>"
        "</FeatureTypeStyle></UserStyle></NamedLayer></StyledLayerDescriptor>"
    )


def _css(name: str, value: str) -> str:
    return f'<CssParameter name="{name}">{value}</CssParameter>'


def _qml(name: str) -> str:
    kind, line, fill, width = _STYLES[name]
    red, green, blue = (int(line[i : i + 2], 16) for i in (1, 3, 5))
    rgb = f"{red},{green},{blue},255"
    inner = ",".join(str(int(fill[i : i + 2], 16)) for i in (1, 3, 5)) + ",160" if fill else "0,0,0,0"
    sort, layer = {"Point": ("marker", "SimpleMarker"), "Line": ("line", "SimpleLine")}.get(
        kind, ("fill", "SimpleFill")
    )
    options = {
        "marker": {"color": inner, "outline_color": rgb, "size": "2.2"},
        "line": {"line_color": rgb, "line_width": str(width)},
        "fill": {"color": inner, "outline_color": rgb, "outline_width": str(width)},
    }[sort]
    rows = "".join(f'<Option name="{key}" type="QString" value="{value}"/>' for key, value in options.items())
    return (
        '<qgis><renderer-v2 type="singleSymbol"><symbols>'
        f'<symbol name="0" type="{sort}"><layer class="{layer}" enabled="1"><Option type="Map">{rows}</Option></layer>'
        "</symbol></symbols></renderer-v2></qgis>"
    )
