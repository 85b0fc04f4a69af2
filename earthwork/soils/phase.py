"""Phase relations: solids, water and air in a volume of soil, one formula per function.

States are floats or numpy arrays of one shape, and the answer has that shape. Water content is percent
of dry mass. Densities are kg/m³; any other unit works as long as ``water_density`` is given in it too (unit
weights as well, since the formulas are ratios). Grain density is specific gravity × water density.

All are definitions of the three phases ([DAS], ch. 3; [HOLTZ-KOVACS], ch. 2): none has a range of soils,
only the physical range that each function checks. NaN is out of range.
"""

from __future__ import annotations

from typing import Any, TypeVar

import numpy as np

from earthwork.errors import SoilError
from earthwork.units import WATER_DENSITY_KG_M3

Value = TypeVar("Value", float, np.ndarray)


def _need(holds: Any, name: str, value: Any, rule: str) -> None:
    if not np.all(holds):
        wrong = np.atleast_1d(value)[~np.atleast_1d(np.broadcast_to(holds, np.shape(value)))]
        shown = f"{wrong[0]:g}" if wrong.size else f"{value}"
        raise SoilError(f"phase relations: {name} is {shown}; it must be {rule}")


def _need_positive(name: str, value: Any) -> None:
    _need(np.greater(value, 0) & np.isfinite(value), name, value, "more than 0")


def _need_not_negative(name: str, value: Any) -> None:
    _need(np.greater_equal(value, 0) & np.isfinite(value), name, value, "0 or more")


def _need_below_grains(dry_density: Any, specific_gravity: Any, water_density: float) -> None:
    _need_positive("dry density", dry_density)
    _need_positive("specific gravity", specific_gravity)
    grain = np.multiply(specific_gravity, water_density)
    _need(
        np.less_equal(dry_density, grain), "dry density", dry_density,
        f"at most the grain density {np.min(grain):g} (specific gravity × density of water)",
    )  # fmt: skip


def dry_density(moist_density: Value, water_content_percent: Value) -> Value:
    """Dry density of a moist soil: ρd = ρ / (1 + w).

    >>> round(dry_density(1760.0, 10.0), 6)
    1600.0
    """
    _need_positive("moist density", moist_density)
    _need_not_negative("water content", water_content_percent)
    return moist_density / (1 + water_content_percent / 100)


def moist_density(dry_density: Value, water_content_percent: Value) -> Value:
    """Moist density of a soil: ρ = ρd (1 + w).

    >>> round(moist_density(1600.0, 10.0), 6)
    1760.0
    """
    _need_positive("dry density", dry_density)
    _need_not_negative("water content", water_content_percent)
    return dry_density * (1 + water_content_percent / 100)


def void_ratio(dry_density: Value, specific_gravity: float, *, water_density: float = WATER_DENSITY_KG_M3) -> Value:
    """Volume of voids per volume of solids: e = Gs ρw / ρd − 1.

    Raises:
        SoilError: a dry density above that of the grains.

    >>> round(void_ratio(1600.0, 2.7), 6)
    0.6875
    """
    _need_below_grains(dry_density, specific_gravity, water_density)
    return specific_gravity * water_density / dry_density - 1


def dry_density_of_void_ratio(
    void_ratio: Value, specific_gravity: float, *, water_density: float = WATER_DENSITY_KG_M3
) -> Value:
    """Dry density at a void ratio: ρd = Gs ρw / (1 + e).

    >>> round(dry_density_of_void_ratio(0.6875, 2.7), 6)
    1600.0
    """
    _need_not_negative("void ratio", void_ratio)
    _need_positive("specific gravity", specific_gravity)
    return specific_gravity * water_density / (1 + void_ratio)


def porosity(void_ratio: Value) -> Value:
    """Volume of voids per whole volume: n = e / (1 + e).

    >>> porosity(1.0)
    0.5
    """
    _need_not_negative("void ratio", void_ratio)
    return void_ratio / (1 + void_ratio)


def saturation_percent(
    dry_density: Value,
    water_content_percent: Value,
    specific_gravity: float,
    *,
    water_density: float = WATER_DENSITY_KG_M3,
) -> Value:
    """Share of the voids that water fills [%]: S = w Gs / e. Over 100 % is impossible and is the caller's to judge.

    Raises:
        SoilError: a dry density at or above that of the grains.

    >>> round(saturation_percent(1600.0, 10.0, 2.7), 2)
    39.27
    """
    _need_not_negative("water content", water_content_percent)
    _need_below_grains(dry_density, specific_gravity, water_density)
    e = specific_gravity * water_density / dry_density - 1
    _need(np.greater(e, 0), "dry density", dry_density, "below the grain density, or there are no voids to fill")
    return water_content_percent * specific_gravity / e


def zero_air_voids_water_content_percent(
    dry_density: Value, specific_gravity: float, *, water_density: float = WATER_DENSITY_KG_M3
) -> Value:
    """The greatest water content that a dry density has room for [%]: w = ρw/ρd − 1/Gs.

    >>> round(zero_air_voids_water_content_percent(1600.0, 2.5), 6)
    22.5
    """
    _need_below_grains(dry_density, specific_gravity, water_density)
    return 100 * (water_density / dry_density - 1 / specific_gravity)


def zero_air_voids_dry_density(
    water_content_percent: Value, specific_gravity: float, *, water_density: float = WATER_DENSITY_KG_M3
) -> Value:
    """The greatest dry density at a water content: ρd = Gs ρw / (1 + w Gs).

    >>> round(zero_air_voids_dry_density(22.5, 2.5), 6)
    1600.0
    """
    return dry_density_at_saturation(water_content_percent, specific_gravity, 100.0, water_density=water_density)


def dry_density_at_saturation(
    water_content_percent: Value,
    specific_gravity: float,
    saturation_percent: float,
    *,
    water_density: float = WATER_DENSITY_KG_M3,
) -> Value:
    """Dry density on a line of equal saturation: ρd = Gs ρw / (1 + w Gs / S).

    >>> round(dry_density_at_saturation(20.25, 2.5, 90.0), 6)
    1600.0
    """
    _need_not_negative("water content", water_content_percent)
    _need_positive("specific gravity", specific_gravity)
    _need(0 < saturation_percent <= 100, "saturation", saturation_percent, "more than 0 and at most 100 %")
    return specific_gravity * water_density / (1 + water_content_percent * specific_gravity / saturation_percent)


def air_voids_percent(
    dry_density: Value,
    water_content_percent: Value,
    specific_gravity: float,
    *,
    water_density: float = WATER_DENSITY_KG_M3,
) -> Value:
    """Share of the whole volume that is air [%]: A = 1 − ρd/ρw (1/Gs + w). Negative above zero air voids.

    >>> round(air_voids_percent(1600.0, 12.5, 2.5), 6)
    16.0
    """
    _need_not_negative("water content", water_content_percent)
    _need_below_grains(dry_density, specific_gravity, water_density)
    return 100 * (1 - dry_density / water_density * (1 / specific_gravity + water_content_percent / 100))


def dry_density_at_air_voids(
    water_content_percent: Value,
    specific_gravity: float,
    air_voids_percent: float,
    *,
    water_density: float = WATER_DENSITY_KG_M3,
) -> Value:
    """Dry density on a line of equal air voids: ρd = (1 − A) Gs ρw / (1 + w Gs).

    >>> round(dry_density_at_air_voids(12.5, 2.5, 16.0), 6)
    1600.0
    """
    _need_not_negative("water content", water_content_percent)
    _need_positive("specific gravity", specific_gravity)
    _need(0 <= air_voids_percent < 100, "air voids", air_voids_percent, "0 or more and below 100 %")
    grain = specific_gravity * water_density
    return (1 - air_voids_percent / 100) * grain / (1 + water_content_percent * specific_gravity / 100)


def saturated_density(
    void_ratio: Value, specific_gravity: float, *, water_density: float = WATER_DENSITY_KG_M3
) -> Value:
    """Density with all voids full of water: ρsat = ρw (Gs + e) / (1 + e).

    >>> round(saturated_density(0.5, 2.5), 6)
    2000.0
    """
    _need_not_negative("void ratio", void_ratio)
    _need_positive("specific gravity", specific_gravity)
    return water_density * (specific_gravity + void_ratio) / (1 + void_ratio)


def combined_specific_gravity(percent_second: float, first: float, second: float) -> float:
    """Specific gravity of a mixture by dry mass: 1/G = (1 − p)/G₁ + p/G₂.

    >>> round(combined_specific_gravity(50.0, 2.0, 3.0), 6)
    2.4
    """
    _need(0 <= percent_second <= 100, "share of the second", percent_second, "0 to 100 %")
    _need_positive("specific gravity", np.array([first, second]))
    share = percent_second / 100
    return 1 / ((1 - share) / first + share / second)


def possible_if_moist(density: float, water_content_percent: float, specific_gravity: float) -> bool:
    """Whether a state beyond zero air voids would be possible if its density were moist: a common slip.

    >>> possible_if_moist(2050.0, 15.0, 2.7), possible_if_moist(2650.0, 40.0, 2.7)
    (True, False)
    """
    dried = density / (1 + water_content_percent / 100)
    grain = specific_gravity * WATER_DENSITY_KG_M3
    return dried < grain and saturation_percent(dried, water_content_percent, specific_gravity) <= 100
