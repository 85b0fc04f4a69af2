"""Reads polygons and lines of vector files (GeoPackage, GeoJSON, Shapefile, …) into the surfaces' CRS."""

from __future__ import annotations

import warnings as python_warnings
from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
import shapely
from pyproj import CRS

from earthwork.crs import describe, horizontal_unit_m, parse_crs, same_place, shift_doubt, transformer
from earthwork.errors import FileError, GroundError, Warning
from earthwork.files.paths import nearest, require_file

if TYPE_CHECKING:
    from earthwork.site.model import AreaSpec

#: Edges are cut into pieces no longer than this before they are reprojected [m]: a straight line of one CRS
#: is a curve in another, but over 50 m the two part by less than 0.1 mm.
_EDGE_M = 50.0
_METRES_PER_DEGREE = 111_320.0

_POLYGONS = {"Polygon", "MultiPolygon"}
_LINES = {"LineString", "MultiLineString", "LinearRing"}


@dataclass(frozen=True)
class Feature:
    """One feature of a vector file, in the CRS of the surfaces.

    Attributes:
        name: value of the name attribute as text; ``"feature 3"`` where no attribute was asked for.
        geometry: its shape without heights.
        heights: the same shape with the heights that the file carries, in the file's unit; None where it has none.
        attributes: all its attributes.
        where: what the features are to the user and their file, for messages.
    """

    name: str
    geometry: Any
    heights: Any = None
    attributes: Mapping[str, Any] = field(default_factory=dict)
    where: str = ""

    @property
    def label(self) -> str:
        """What it is, its file and its name, for messages."""
        return f"{self.where}, {self.name!r}"


@dataclass(frozen=True)
class NamedPolygon(Feature):
    """A polygon or multi-polygon with its name; valid, and with an area."""

    @property
    def polygon(self) -> shapely.Polygon | shapely.MultiPolygon:
        return self.geometry


@dataclass(frozen=True)
class NamedLine(Feature):
    """A line or multi-line with its name."""

    @property
    def line(self) -> shapely.LineString | shapely.MultiLineString:
        return self.geometry


def read_polygons(
    spec: AreaSpec,
    directory: Path,
    *,
    crs: CRS | None,
    name: str | None = None,
    what: str = "area",
    warnings: list[Warning] | None = None,
) -> list[NamedPolygon]:
    """The polygons of a vector file.

    Args:
        spec: file, layer and filter.
        directory: folder that the file's name is relative to.
        crs: CRS of the surfaces, or None for a local grid.
        name: attribute with the name of each polygon; None numbers them.
        what: what the polygons are to the user, for messages.
        warnings: a list to which doubts are added.

    Raises:
        FileError: no such file, layer or attribute (with the nearest), not a vector file, a filter that cannot be
            read, or that nothing passes, or a layer without features.
        GroundError: a feature that is no polygon, or one that crosses itself (with its name, the reason and the
            place).
    """
    features = _read(spec, directory, crs, name, what, warnings, _POLYGONS, "a polygon")
    return [NamedPolygon(**f) for f in features]


def read_lines(
    spec: AreaSpec,
    directory: Path,
    *,
    crs: CRS | None,
    name: str | None = None,
    what: str = "lines",
    warnings: list[Warning] | None = None,
) -> list[NamedLine]:
    """The lines of a vector file; arguments and errors as in :func:`read_polygons`."""
    features = _read(spec, directory, crs, name, what, warnings, _LINES, "a line")
    return [NamedLine(**f) for f in features]


def _read(
    spec: AreaSpec,
    directory: Path,
    crs: CRS | None,
    name: str | None,
    what: str,
    warnings: list[Warning] | None,
    kinds: set[str],
    kind: str,
) -> list[dict[str, Any]]:
    path = directory / spec.file
    warnings = [] if warnings is None else warnings
    require_file(path, what)
    where = f"{what}: {path}" + (f", layer {spec.layer!r}" if spec.layer else "")
    layer = _layer(spec, path, what)
    meta, fids, shapes, columns = _table(path, layer, spec.where, where)
    fields = [str(f) for f in meta["fields"]]
    if name is not None and name not in fields and name != "fid":
        raise FileError(f"{where}: there is no attribute {name!r}; {nearest(name, fields)}")
    if len(shapes) == 0:
        passed = f"no feature passes where = {spec.where!r}" if spec.where else "the layer holds no feature"
        raise FileError(f"{where}: {passed}; it must hold at least one. Check the file, its layer and the filter")
    attributes = [dict(zip(fields, row, strict=True)) for row in zip(*columns, strict=True)] or [{}] * len(shapes)
    names = [_name(attributes[i], name, int(fids[i]), where) for i in range(len(shapes))]
    with np.errstate(invalid="ignore"):  # a coordinate that is no number is refused below, with its feature
        shapes = shapely.from_wkb(shapes)
    kept = _kept(shapes, names, where, kinds, kind, warnings)
    if not kept:
        raise FileError(f"{where}: no feature has a shape; it must hold at least one")
    _refuse_invalid(shapes[kept], [names[i] for i in kept], where)
    there = _file_crs(meta, path, shapes[kept], crs, where, warnings)
    moved = _reprojected(shapes[kept], there, crs, where, warnings)
    _refuse_invalid(moved, [names[i] for i in kept], where)
    flat = shapely.force_2d(moved)
    return [
        {
            "name": names[i],
            "geometry": flat[k],
            "heights": moved[k] if shapely.has_z(moved[k]) else None,
            "attributes": attributes[i],
            "where": where,
        }
        for k, i in enumerate(kept)
    ]


def _layer(spec: AreaSpec, path: Path, what: str) -> str | None:
    """The layer to read: the one that is named, or the only one."""
    import pyogrio

    try:
        layers = [str(row[0]) for row in pyogrio.list_layers(path)]
    except Exception as error:  # pyogrio raises its own and GDAL's kinds
        raise FileError(f"{what}: {path}: not a vector file, or damaged ({_line(error)})") from None
    if spec.layer is not None:
        if spec.layer not in layers:
            raise FileError(f"{what}: {path}: there is no layer {spec.layer!r}; {nearest(spec.layer, layers)}")
        return spec.layer
    if len(layers) > 1:
        raise FileError(
            f"{what}: {path}: the file has {len(layers)} layers; name one: "
            f'{{ file = "{spec.file}", layer = "{layers[0]}" }}. There are: {", ".join(layers)}'
        )
    if not layers:
        raise FileError(f"{what}: {path}: the file holds no layer of shapes")
    return layers[0]


def _table(path: Path, layer: str | None, where_sql: str | None, where: str) -> tuple[dict, Any, Any, list[Any]]:
    """Facts, feature numbers, shapes (WKB) and attribute columns of a layer."""
    import pyogrio.raw
    from pyogrio.errors import DataLayerError, DataSourceError

    try:
        with python_warnings.catch_warnings():
            python_warnings.simplefilter("ignore")
            meta, fids, shapes, columns = pyogrio.raw.read(path, layer=layer, where=where_sql, return_fids=True)
    except (ValueError, DataLayerError, DataSourceError) as error:
        if where_sql is not None:
            fields = ", ".join(map(str, pyogrio.read_info(path, layer=layer)["fields"]))
            raise FileError(
                f'{where}: where = "{where_sql}" cannot be used ({_line(error)}); write it like "phase = 1" '
                f"or \"kind = 'road'\". Attributes are: {fields}"
            ) from None
        raise FileError(f"{where}: cannot be read ({_line(error)})") from None
    if shapes is None:
        raise FileError(f"{where}: the layer is a table without shapes")
    return meta, fids, shapes, list(columns)


def _line(error: Exception) -> str:
    return " ".join(str(error).split()).rstrip(".")


def _name(attributes: dict[str, Any], name: str | None, fid: int, where: str) -> str:
    """The name of a feature as text."""
    if name is None:
        return f"feature {fid}"
    value = attributes.get(name, fid)
    missing = value is None or (isinstance(value, float | np.floating) and np.isnan(value))
    if missing or not str(value).strip():
        raise FileError(
            f"{where}: feature {fid} has no value in {name!r}; each one must have a name. Fill it in, or "
            "leave the feature "
            f'out with where = "{name} IS NOT NULL"'
        )
    if isinstance(value, float | np.floating) and float(value).is_integer():
        return str(int(value))
    return str(value).strip()


def _kept(
    shapes: np.ndarray, names: list[str], where: str, kinds: set[str], kind: str, warnings: list[Warning]
) -> list[int]:
    """Numbers of the features that have a shape; those of another kind are refused."""
    kept, empty = [], []
    for i, shape in enumerate(shapes):
        if shape is None or shape.is_empty:
            empty.append(names[i])
        elif shape.geom_type not in kinds:
            raise GroundError(
                f"{where}: {names[i]!r} is a {shape.geom_type}; it must be {kind}. Take it out of the layer, or "
                "filter it with where"
            )
        else:
            kept.append(i)
    if empty:
        shown = ", ".join(empty[:5]) + (f" and {len(empty) - 5} more" if len(empty) > 5 else "")
        warnings.append(Warning("shape-missing", f"{where}: features without a shape are left out: {shown}"))
    return kept


def _refuse_invalid(shapes: np.ndarray, names: list[str], where: str) -> None:
    """Raise a GroundError that names every shape that crosses itself, with the reason and the place."""
    bad = np.flatnonzero(~shapely.is_valid(shapes))
    if bad.size == 0:
        return
    faults = []
    for i in bad[:5]:
        reason, _, place = str(shapely.is_valid_reason(shapes[i])).partition("[")
        at = ", ".join(f"{float(v):.10g}" for v in place.rstrip("]").split()[:2])
        faults.append(f"{names[i]!r}: {reason.strip()}" + (f" at ({at})" if at else ""))
    more = f"; and {bad.size - 5} more" if bad.size > 5 else ""
    raise GroundError(
        f"{where}: {'; '.join(faults)}{more}. Polygons must not cross themselves; repair them in your GIS or CAD"
    )


#: What the GeoPackage standard calls the lack of a CRS (srs_id 0 and −1); some readers hand it on as if it were one.
_UNDEFINED = ("Undefined geographic SRS", "Undefined Cartesian SRS")


def _file_crs(
    meta: dict, path: Path, shapes: np.ndarray, crs: CRS | None, where: str, warnings: list[Warning]
) -> CRS | None:
    """CRS to reproject from; None when the coordinates are taken as they stand."""
    text = meta.get("crs")
    there = None
    if text:
        try:
            there = parse_crs(text)
        except ValueError:
            there = None
    if there is not None and there.name in _UNDEFINED:
        there = None
    if there is not None and there.is_geographic and path.suffix.lower() in (".geojson", ".json"):
        # a GeoJSON without a CRS counts as degrees by its standard; many programs write map coordinates all
        # the same
        west, south, east, north = shapely.total_bounds(shapes)
        if west < -360 or east > 360 or south < -90 or north > 90:
            there = None
    if there is not None and crs is not None:
        return there
    if there is None and crs is not None:
        message = f"{where}: the file names no CRS; that of the surfaces, {describe(crs)}, is taken"
        warnings.append(Warning("crs-missing", message))
    if there is not None and crs is None and not there.is_geographic:
        message = f"{where}: its CRS {describe(there)} is left aside, since the surfaces name none"
        warnings.append(Warning("crs-missing", message))
    if there is not None and crs is None and there.is_geographic:
        raise GroundError(
            f"{where}: its coordinates are in degrees ({describe(there)}), and the surfaces name no CRS to bring "
            "them to. Name the CRS of the surfaces in [site] crs"
        )
    return None


def _reprojected(
    shapes: np.ndarray, there: CRS | None, crs: CRS | None, where: str, warnings: list[Warning]
) -> np.ndarray:
    """Shapes in the CRS of the surfaces; edges are cut into short pieces when the CRS really differs."""
    if there is None or crs is None:
        return shapes
    try:
        if same_place(there, crs, tuple(shapely.total_bounds(shapes).tolist())):
            return shapes
        forward = transformer(there, crs)
        doubt = shift_doubt(there, crs, *shapely.get_coordinates(shapes[0])[0])
    except GroundError as error:
        raise GroundError(f"{where}: {error}") from None
    if doubt is not None:
        warnings.append(Warning("datum-shift-unknown", f"{where}: {doubt}"))
    unit = horizontal_unit_m(there) or _METRES_PER_DEGREE
    longest = float(shapely.length(shapes).max())
    pieces = shapely.segmentize(shapes, max(_EDGE_M / unit, longest / 100_000))
    points = shapely.get_coordinates(pieces, include_z=True)
    east, north = forward.transform(points[:, 0], points[:, 1])
    if not (np.isfinite(east).all() and np.isfinite(north).all()):
        raise GroundError(f"{where}: its coordinates cannot be brought from {describe(there)} to {describe(crs)}")
    has_z = shapely.has_z(pieces)
    flat = np.column_stack([east, north])
    out = shapely.set_coordinates(shapely.force_2d(pieces), flat)
    if has_z.any():
        deep = shapely.set_coordinates(shapely.force_3d(pieces), np.column_stack([flat, points[:, 2]]))
        out = np.where(has_z, deep, out)
    return out
