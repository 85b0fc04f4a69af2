"""Oversize particles: from the fraction that fits the mould to the whole soil, and back ([ASTM-D4718]; equations
as in [UFC-3-220-20], 3-6 and 3-7).

The laboratory takes out what is larger than the sieve of its method and reports on the finer fraction; the
field test measures the whole. The two are comparable only after this correction.
"""

from __future__ import annotations

from earthwork.errors import SoilError
from earthwork.units import WATER_DENSITY_KG_M3

#: Largest share of oversize [% of dry mass] for which the correction holds, by the sieve that splits
#: ([ASTM-D4718], scope). Beyond it the coarse particles touch and the finer fraction is not
#: compacted between them.
OVERSIZE_LIMIT_PERCENT = {"4.75 mm": 40.0, "19 mm": 30.0}
#: Below this share the standard lets the correction be left out ([ASTM-D4718], scope).
OVERSIZE_MATTERS_PERCENT = 5.0


def whole_dry_density(
    fine_dry_density: float,
    oversize_percent: float,
    oversize_specific_gravity: float,
    *,
    water_density: float = WATER_DENSITY_KG_M3,
) -> float:
    """Dry density of the whole soil from that of its finer fraction: 100 / (Pf/ρf + Pc/(Gm ρw)).

    Args:
        fine_dry_density: of the finer fraction, as tested [kg/m³].
        oversize_percent: coarse particles, percent of the dry mass, 0 to 40.
        oversize_specific_gravity: bulk (oven-dry) specific gravity of the coarse particles.

    Raises:
        SoilError: more oversize than the standard covers.

    >>> round(whole_dry_density(2000.0, 20.0, 2.5), 3)
    2083.333
    """
    _need_covered(oversize_percent)
    coarse = oversize_percent / 100
    return 1 / ((1 - coarse) / fine_dry_density + coarse / (oversize_specific_gravity * water_density))


def fine_dry_density(
    whole_dry_density: float,
    oversize_percent: float,
    oversize_specific_gravity: float,
    *,
    water_density: float = WATER_DENSITY_KG_M3,
) -> float:
    """Dry density of the finer fraction in a field test of the whole soil; the inverse of :func:`whole_dry_density`.

    Raises:
        SoilError: more oversize than the standard covers, or a density that leaves no room for the finer
            fraction.

    >>> round(fine_dry_density(2083.3333333, 20.0, 2.5), 3)
    2000.0
    """
    _need_covered(oversize_percent)
    coarse = oversize_percent / 100
    room = 1 / whole_dry_density - coarse / (oversize_specific_gravity * water_density)
    if not room > 0:
        raise SoilError(
            f"oversize: {oversize_percent:g} % of particles with specific gravity "
            f"{oversize_specific_gravity:g} fill "
            f"the whole volume at a dry density of {whole_dry_density:g}; check the share of oversize and "
            "the density"
        )
    return (1 - coarse) / room


def whole_water_content_percent(
    fine_water_content_percent: float, oversize_percent: float, oversize_water_content_percent: float
) -> float:
    """Water content of the whole soil from those of its fractions: Pf wf + Pc wc.

    >>> round(whole_water_content_percent(12.0, 25.0, 2.0), 9)
    9.5
    """
    _need_covered(oversize_percent)
    coarse = oversize_percent / 100
    return (1 - coarse) * fine_water_content_percent + coarse * oversize_water_content_percent


def fine_water_content_percent(
    whole_water_content_percent: float, oversize_percent: float, oversize_water_content_percent: float
) -> float:
    """Water content of the finer fraction in a test of the whole soil; inverse of :func:`whole_water_content_percent`.

    Raises:
        SoilError: the coarse particles alone would hold more water than was measured.

    >>> round(fine_water_content_percent(9.5, 25.0, 2.0), 9)
    12.0
    """
    _need_covered(oversize_percent)
    coarse = oversize_percent / 100
    water = whole_water_content_percent - coarse * oversize_water_content_percent
    if water < 0:
        raise SoilError(
            f"oversize: {oversize_percent:g} % of particles at {oversize_water_content_percent:g} % hold "
            "more water "
            f"than the whole soil at {whole_water_content_percent:g} %; check both water contents"
        )
    return water / (1 - coarse)


def _need_covered(oversize_percent: float) -> None:
    limit = max(OVERSIZE_LIMIT_PERCENT.values())
    if not 0 <= oversize_percent <= limit:
        raise SoilError(
            f"oversize: percent is {oversize_percent:g} %; it must be 0 to {limit:g} % (ASTM D4718). "
            "Test the whole soil in a larger mould, or control the fill by a trial embankment"
        )
