"""LandXML 1.2: surfaces as triangles and breaklines, for those who build from them.

Coordinates are northing, easting, elevation, as the standard orders them, with four decimals, in the unit of the CRS.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import IO
from xml.sax.saxutils import quoteattr

import numpy as np

_NAMESPACE = "http://www.landxml.org/schema/LandXML-1.2"
#: Metres in a unit → the standard's name of the unit; feet make the others imperial.
_METRIC = (
    '<Metric areaUnit="squareMeter" linearUnit="meter" volumeUnit="cubicMeter" temperatureUnit="celsius" '
    'pressureUnit="HPA" angularUnit="decimal degrees" directionUnit="decimal degrees"/>'
)
_FEET = (
    '<Imperial areaUnit="squareFoot" linearUnit="{}" volumeUnit="cubicYard" temperatureUnit="fahrenheit" '
    'pressureUnit="inHG" angularUnit="decimal degrees" directionUnit="decimal degrees"/>'
)


@dataclass(frozen=True)
class Triangles:
    """A surface: vertices (n, 3) of easting, northing, elevation and triangles (m, 3) of their indices."""

    name: str
    vertices: np.ndarray
    triangles: np.ndarray
    note: str = ""


@dataclass(frozen=True)
class Breakline:
    """A line in space, (n, 3) of easting, northing, elevation."""

    name: str
    points: np.ndarray
    kind: str = "line"


def write_landxml(
    path: Path,
    surfaces: Sequence[Triangles],
    breaklines: Sequence[Breakline],
    *,
    project: str,
    program: str,
    unit_m: float,
    date: str,
    crs_name: str | None = None,
    epsg: str | None = None,
) -> None:
    """Write surfaces and breaklines.

    Args:
        path: the file.
        surfaces: the breaklines are written with the last of them.
        breaklines: lines in space.
        project, program: names told in the file; any text.
        unit_m: metres in the unit of the coordinates: 1, 0.3048 or 1200/3937.
        date: of the survey or the inputs, as YYYY-MM-DD.
        crs_name, epsg: of the CRS.
    """
    with open(path, "w", encoding="utf-8", newline="\n") as file:
        file.write('<?xml version="1.0" encoding="UTF-8"?>\n')
        file.write(f'<LandXML xmlns="{_NAMESPACE}" version="1.2" date="{date}" time="00:00:00" readOnly="false">\n')
        file.write(f"<Units>{_units(unit_m)}</Units>\n")
        if crs_name:
            code = f" epsgCode={_attribute(epsg)}" if epsg else ""
            file.write(f"<CoordinateSystem name={_attribute(crs_name)}{code}/>\n")
        file.write(f"<Project name={_attribute(project)}/>\n<Application name={_attribute(program)}/>\n<Surfaces>\n")
        for i, surface in enumerate(surfaces):
            _write_surface(file, surface, breaklines if i == len(surfaces) - 1 else ())
        file.write("</Surfaces>\n</LandXML>\n")


def _units(unit_m: float) -> str:
    if math.isclose(unit_m, 1.0, rel_tol=1e-9):
        return _METRIC
    return _FEET.format("foot" if math.isclose(unit_m, 0.3048, rel_tol=1e-9) else "USSurveyFoot")


def _attribute(text: str) -> str:
    """A quoted attribute; what XML cannot hold becomes a question mark."""
    return quoteattr("".join(c if _is_xml(ord(c)) else "?" for c in text))


def _is_xml(code: int) -> bool:
    """Whether XML 1.0 has a character."""
    return code in (9, 10, 13) or 32 <= code < 0xD800 or 0xE000 <= code < 0xFFFE or code > 0xFFFF


def _write_surface(file: IO[str], surface: Triangles, breaklines: Sequence[Breakline]) -> None:
    file.write(f"<Surface name={_attribute(surface.name)} desc={_attribute(surface.note)}>\n")
    if breaklines:
        file.write("<SourceData><Breaklines>\n")
        for line in breaklines:
            points = " ".join(_point(p) for p in line.points)
            file.write(f'<Breakline brkType="standard" name={_attribute(line.name)} desc={_attribute(line.kind)}>')
            file.write(f"<PntList3D>{points}</PntList3D></Breakline>\n")
        file.write("</Breaklines></SourceData>\n")
    z = surface.vertices[:, 2]
    span = f' elevMin="{z.min():.4f}" elevMax="{z.max():.4f}"' if len(z) else ""
    file.write(f'<Definition surfType="TIN"{span}><Pnts>\n')
    file.writelines(f'<P id="{i}">{_point(p)}</P>\n' for i, p in enumerate(surface.vertices.tolist(), start=1))
    file.write("</Pnts><Faces>\n")
    file.writelines(f"<F>{a} {b} {c}</F>\n" for a, b, c in (surface.triangles + 1).tolist())
    file.write("</Faces></Definition>\n</Surface>\n")


def _point(point: Sequence[float]) -> str:
    return f"{point[1]:.4f} {point[0]:.4f} {point[2]:.4f}"
