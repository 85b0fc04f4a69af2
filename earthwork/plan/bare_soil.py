"""Evaporation from bare soil in two stages, as FAO-56 chapter 7 has it ([fao56]).

Wet ground loses water at the energy-limited rate (stage 1) until the readily evaporable water is gone; then
the rate falls linearly to nothing at the total evaporable water (stage 2). Depths in mm.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

#: evaporation / reference evaporation of wet bare soil; [fao56] eq. 72 with plants of no height
BARE_SOIL_MAXIMUM = 1.20
#: thickness of the layer that dries by evaporation [m]; [fao56] chapter 7: 0.10 to 0.15 m
SURFACE_DEPTH_M = 0.10


@dataclass(frozen=True)
class SurfaceSoil:
    """Water that a bare surface can lose: ``readily_mm`` at full rate, ``total_mm`` in the end."""

    readily_mm: float
    total_mm: float

    def __post_init__(self) -> None:
        if not 0 < self.readily_mm <= self.total_mm:
            raise ValueError(
                f"readily evaporable water is {self.readily_mm:g} mm and total evaporable water "
                f"{self.total_mm:g} mm; the first must be more than 0 and at most the second"
            )


#: texture → (field capacity, wilting point [m³/m³], readily evaporable water [mm]): ranges of [fao56] table
#: 19
TEXTURES: dict[str, tuple[tuple[float, float], tuple[float, float], tuple[float, float]]] = {
    "sand": ((0.07, 0.17), (0.02, 0.07), (2, 7)),
    "loamy sand": ((0.11, 0.19), (0.03, 0.10), (4, 8)),
    "sandy loam": ((0.18, 0.28), (0.06, 0.16), (6, 10)),
    "loam": ((0.20, 0.30), (0.07, 0.17), (8, 10)),
    "silt loam": ((0.22, 0.36), (0.09, 0.21), (8, 11)),
    "silt": ((0.28, 0.36), (0.12, 0.22), (8, 11)),
    "silty clay loam": ((0.30, 0.37), (0.17, 0.24), (8, 11)),
    "silty clay": ((0.30, 0.42), (0.17, 0.29), (8, 12)),
    "clay": ((0.32, 0.40), (0.20, 0.24), (8, 12)),
}


def total_evaporable_mm(field_capacity: float, wilting_point: float, depth_m: float = SURFACE_DEPTH_M) -> float:
    """Most water that the surface layer can lose by evaporation [mm]; [fao56] eq. 73.

    >>> round(total_evaporable_mm(0.25, 0.12), 6)
    19.0
    """
    return 1000.0 * (field_capacity - 0.5 * wilting_point) * depth_m


def surface_of_texture(texture: str) -> SurfaceSoil:
    """Typical surface of a soil texture: the middles of the ranges in [fao56] table 19.

    >>> surface_of_texture("loam")
    SurfaceSoil(readily_mm=9.0, total_mm=19.0)
    """
    if texture not in TEXTURES:
        raise ValueError(f"texture is {texture!r}; it must be one of {', '.join(TEXTURES)}")
    capacity, wilting, readily = ((low + high) / 2 for low, high in TEXTURES[texture])
    return SurfaceSoil(readily, round(total_evaporable_mm(capacity, wilting), 6))


def reduction(depletion_mm: float, soil: SurfaceSoil) -> float:
    """Share of the full rate at a depletion of the surface layer [-]; [fao56] eq. 74.

    >>> reduction(9.0, SurfaceSoil(9.0, 20.0)), reduction(14.5, SurfaceSoil(9.0, 20.0))
    (1.0, 0.5)
    """
    if depletion_mm <= soil.readily_mm:
        return 1.0
    if depletion_mm >= soil.total_mm:
        return 0.0
    return (soil.total_mm - depletion_mm) / (soil.total_mm - soil.readily_mm)


def evaporation_series(
    reference_mm: Sequence[float],
    wetting_mm: Sequence[float],
    soil: SurfaceSoil,
    *,
    depletion_mm: float = 0.0,
    maximum: float = BARE_SOIL_MAXIMUM,
) -> list[float]:
    """Evaporation of bare ground [mm] in consecutive steps; [fao56] eqs 71, 74 and 77.

    Args:
        reference_mm: reference evaporation in each step.
        wetting_mm: rain and sprinkling at the start of each step, ``inf`` for ground that starts it fully
            wet.
        depletion_mm: of the surface layer before the first step, 0 (wet) to ``soil.total_mm``.
        maximum: evaporation / reference evaporation of wet ground.

    >>> [round(e, 2) for e in evaporation_series([4.5] * 4, [0] * 4, SurfaceSoil(9.0, 20.0))]
    [5.4, 5.4, 4.52, 2.3]
    """
    lost: list[float] = []
    depletion = depletion_mm
    for reference, wetting in zip(reference_mm, wetting_mm, strict=True):
        depletion = max(depletion - wetting, 0.0)
        step = min(reduction(depletion, soil) * maximum * reference, soil.total_mm - depletion)
        depletion = min(depletion + step, soil.total_mm)  # rounding must not leave less than nothing for the next
        lost.append(step)
    return lost


def days_to_dry(
    water_mm: float, reference_mm_day: float, soil: SurfaceSoil | None, *, turns_per_day: float
) -> float | None:
    """Days to evaporate a depth of water from a spread layer; None where it never leaves.

    Turned ground brings up moist soil, which starts again in stage 1; between turns the surface dries as
    :func:`evaporation_series` has it, in steps of one turn. Without turning the surface layer is all that
    dries.

    Args:
        water_mm: water over the spread area, 0 or more.
        reference_mm_day: reference evaporation of a drying day, more than 0.
        soil: None counts stage 1 throughout.
        turns_per_day: times that the layer is turned in a day, 0 or more.

    >>> round(days_to_dry(10.8, 4.5, SurfaceSoil(9.0, 20.0), turns_per_day=1), 9)
    2.0
    """
    if water_mm <= 0:
        return 0.0
    if reference_mm_day <= 0:
        return None
    rate = BARE_SOIL_MAXIMUM * reference_mm_day
    if soil is None:
        return water_mm / rate
    if turns_per_day > 0:
        return water_mm / (turns_per_day * lost_from_wet(soil, rate, 1.0 / turns_per_day))
    return _unturned_days(water_mm, rate, soil)


def lost_from_wet(soil: SurfaceSoil, rate: float, days: float) -> float:
    """Depth that wet ground loses in a time [mm]: the continuous form of [fao56] eq. 74; stage 2 is exponential.

    Args:
        rate: of wet ground [mm/day], 0 or more.

    >>> lost_from_wet(SurfaceSoil(9.0, 20.0), 6.0, 1.5)
    9.0
    """
    if rate <= 0:
        return 0.0
    first = soil.readily_mm / rate
    if days <= first:
        return rate * days
    rest = soil.total_mm - soil.readily_mm
    if rest == 0:
        return soil.readily_mm
    return soil.readily_mm + rest * (1.0 - math.exp(-rate * (days - first) / rest))


def _unturned_days(water_mm: float, rate: float, soil: SurfaceSoil) -> float | None:
    if water_mm <= soil.readily_mm:
        return water_mm / rate
    if water_mm >= soil.total_mm:
        return None
    rest = soil.total_mm - soil.readily_mm
    return soil.readily_mm / rate - rest / rate * math.log(1.0 - (water_mm - soil.readily_mm) / rest)
