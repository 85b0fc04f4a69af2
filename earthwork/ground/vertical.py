"""Vertical units and datums: how the elevations of files become metres that may be compared."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

from pyproj import CRS

from earthwork.crs import horizontal_unit_m, unit_from_text, unit_label, vertical_reference
from earthwork.errors import GroundError, Warning
from earthwork.files.rasters import RasterInfo
from earthwork.units import FOOT_M, US_SURVEY_FOOT_M, UnitSystem

if TYPE_CHECKING:
    from earthwork.site.model import RasterSurface

_STATED = {"m": 1.0, "ft": FOOT_M, "ftUS": US_SURVEY_FOOT_M}
_FEET = (FOOT_M, US_SURVEY_FOOT_M)


@dataclass(frozen=True)
class VerticalFacts:
    """How the elevations of one surface were understood.

    Attributes:
        surface: what the surface is to the user.
        unit_m: metres of its unit.
        unit: name of the unit.
        source: who says so: "site file", "band", "vertical CRS", "horizontal CRS" or "site units".
        datum: name of the vertical datum; None where the file names none.
    """

    surface: str
    unit_m: float
    unit: str
    source: str
    datum: str | None


def vertical_facts(
    spec: RasterSurface, info: RasterInfo, crs: CRS | None, units: UnitSystem, what: str
) -> tuple[VerticalFacts, tuple[Warning, ...]]:
    """Unit and datum of a raster's elevations; the first that speaks of the unit is believed.

    Order: ``vertical_unit`` of the site file, the band's unit, the vertical CRS, the horizontal CRS, the site's
        units.

    Args:
        spec: the surface in the site file.
        info: facts of the file.
        crs: its CRS, as far as it is known.
        units: the site's unit system.
        what: what the surface is to the user.

    Raises:
        GroundError: a unit that is not understood, or a vertical CRS that counts downwards.
    """
    reference = vertical_reference(crs)
    if reference is not None and not reference.upwards:
        raise GroundError(
            f"{what}: {info.name}: its vertical CRS {reference.name!r} counts depths downwards; it must give "
            "elevations upwards. Turn the sign and name the right vertical CRS"
        )
    unit, source = _unit(spec, info, crs, units, what)
    facts = VerticalFacts(what, unit, unit_label(unit), source, reference.datum if reference else None)
    expected = _FEET if units.name == "us" else (1.0,)
    if source in ("site file", "site units") or unit in expected:
        return facts, ()
    message = (
        f"{what}: {info.name}: elevations are in {facts.unit}, as the {source} says, and the site's units "
        "are "
        f'"{units.name}"; they are converted. If that is wrong, state vertical_unit for this surface'
    )
    return facts, (Warning("vertical-unit", message),)


def _unit(spec: RasterSurface, info: RasterInfo, crs: CRS | None, units: UnitSystem, what: str) -> tuple[float, str]:
    if spec.vertical_unit is not None:
        return _STATED[spec.vertical_unit], "site file"
    if info.unit:
        metres = unit_from_text(info.unit)
        if metres is None:
            raise GroundError(
                f"{what}: {info.name}: the unit of its band is {info.unit!r}; it must be a unit of length. "
                "If the band holds "
                'elevations, state vertical_unit = "m", "ft" or "ftUS" for this surface'
            )
        return metres, "band"
    reference = vertical_reference(crs)
    if reference is not None:
        return reference.unit_m, "vertical CRS"
    flat = horizontal_unit_m(crs)
    if flat is None:
        return units.factor("length"), "site units"
    if flat not in (1.0, *_FEET):
        raise GroundError(
            f"{what}: {info.name}: its CRS counts in units of {flat:g} m, and nothing says in what its "
            "elevations are; "
            'state vertical_unit = "m", "ft" or "ftUS" for this surface'
        )
    return flat, "horizontal CRS"


def refuse_other_datum(facts: Sequence[VerticalFacts]) -> None:
    """Raise a GroundError when two surfaces name different vertical datums; none named is let pass."""
    named = [f for f in facts if f.datum is not None]
    for other in named[1:]:
        if other.datum != named[0].datum:
            raise GroundError(
                f"{named[0].surface} is in the vertical datum {named[0].datum!r}, {other.surface} in "
                f"{other.datum!r}; they must be the same, since datums differ by decimetres to tens of metres. "
                "Transform one of the two first"
            )


def one_sided_datum(facts: Sequence[VerticalFacts]) -> list[Warning]:
    """A warning where one surface names its vertical datum and another does not."""
    named = [f for f in facts if f.datum is not None]
    silent = [f for f in facts if f.datum is None]
    if not named or not silent:
        return []
    message = (
        f"{named[0].surface} is in the vertical datum {named[0].datum!r}, {silent[0].surface} names none and is taken "
        "to be in the same; if it is not, all volumes are wrong by the whole difference. Name the datum in the file's "
        "CRS, or transform one of the two"
    )
    return [Warning("vertical-datum", message)]
