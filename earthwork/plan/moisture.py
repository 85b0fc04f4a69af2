"""Moisture arithmetic: water to add or to dry, as litres, as millimetres on a lift, and what a lift takes.

Water goes with dry mass: a kilogram of water per hundred kilograms of dry soil is one point of water content,
in the bank, in the truck and in the fill alike. A litre is a kilogram, and a litre on a square metre a
millimetre.
"""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True)
class WaterNeed:
    """What a cubic metre of compacted soil lacks or has too much; one of the two is 0 [L/m³]."""

    to_add_l_per_m3: float
    to_dry_l_per_m3: float


def water_need(
    fill_dry_density_kg_m3: float, arriving_percent: float | None, target_percent: float | None
) -> WaterNeed:
    """Water to add to, or to dry from, a compacted cubic metre; method.md 13.

    ``litres = dry density × (target − arriving) / 100``, the positive part to add, the negative part to dry.
    A material without a target (rock) or of unknown water content needs neither.

    Args:
        fill_dry_density_kg_m3: in the fill [kg/m³], more than 0.
        arriving_percent, target_percent: water content [% of dry mass].

    >>> water_need(1700.0, 7.5, 16.5)
    WaterNeed(to_add_l_per_m3=153.0, to_dry_l_per_m3=0.0)
    """
    if not fill_dry_density_kg_m3 > 0:
        raise ValueError(f"fill dry density is {fill_dry_density_kg_m3:g} kg/m³; it must be more than 0")
    if arriving_percent is None or target_percent is None:
        return WaterNeed(0.0, 0.0)
    litres = fill_dry_density_kg_m3 * (target_percent - arriving_percent) / 100.0
    return WaterNeed(max(litres, 0.0), max(-litres, 0.0))


def depth_on_lift_mm(litres_per_m3: float, lift_thickness_m: float) -> float:
    """Water of a compacted cubic metre as a depth on a lift [mm = L/m²].

    >>> depth_on_lift_mm(153.0, 0.2)
    30.6
    """
    return round(litres_per_m3 * lift_thickness_m, 12)


def points_of(litres_per_m3: float, fill_dry_density_kg_m3: float) -> float:
    """Water of a compacted cubic metre as points of water content [% of dry mass].

    >>> points_of(153.0, 1700.0)
    9.0
    """
    return 100.0 * litres_per_m3 / fill_dry_density_kg_m3


@dataclass(frozen=True)
class Wetting:
    """Where the water of a compacted cubic metre is added, and in how many passes on the lift."""

    in_lift_l_per_m3: float
    in_cut_l_per_m3: float
    lift_takes_l_per_m3: float
    lift_depth_mm: float
    passes_in_lift: int


def wetting(
    need_l_per_m3: float,
    *,
    fill_dry_density_kg_m3: float,
    lift_thickness_m: float,
    limit_points: float,
    limit_depth_mm: float,
    wet_in: str = "lift",
) -> Wetting:
    """Split the water of a lift between lift and cut, by what a lift takes before it runs off; method.md 16.

    A lift takes the smaller of ``limit_points`` of its dry mass and ``limit_depth_mm`` on its surface in one
    pass of the truck. With ``wet_in = "lift"`` the lift takes that much and the cut the rest; with ``"cut"``
    all goes to the cut. ``passes_in_lift`` is how many passes the whole need would take, each let in before
    the next.

    >>> lift = dict(fill_dry_density_kg_m3=1700, lift_thickness_m=0.2, limit_points=3, limit_depth_mm=10)
    >>> split = wetting(153.0, **lift)
    >>> split.in_lift_l_per_m3, split.in_cut_l_per_m3, split.passes_in_lift
    (50.0, 103.0, 4)
    """
    by_points = limit_points / 100.0 * fill_dry_density_kg_m3
    takes = min(by_points, limit_depth_mm / lift_thickness_m)
    passes = 0 if need_l_per_m3 <= 0 else -int(-need_l_per_m3 / takes // 1)
    in_lift = min(need_l_per_m3, takes) if wet_in == "lift" else 0.0
    return Wetting(
        in_lift_l_per_m3=in_lift,
        in_cut_l_per_m3=need_l_per_m3 - in_lift,
        lift_takes_l_per_m3=takes,
        lift_depth_mm=depth_on_lift_mm(need_l_per_m3, lift_thickness_m),
        passes_in_lift=passes,
    )


def drying_on_the_way_points(
    exposed_minutes: float, evaporation_mm_h: float, loose_thickness_m: float, loose_dry_density_kg_m3: float
) -> float:
    """Points of water content that loose soil loses while it lies open [% of dry mass].

    ``100 × evaporation × time / (loose thickness × loose dry density)``: the surface loses at the full rate.
    An estimate, no single source.

    Args:
        evaporation_mm_h: of wet bare ground in the hours of work.

    >>> round(drying_on_the_way_points(60.0, 0.6, 0.25, 1200.0), 6)
    0.2
    """
    return 100.0 * evaporation_mm_h * exposed_minutes / 60.0 / (loose_thickness_m * loose_dry_density_kg_m3)


def dry_share_of_mix(wet_percent: float, dry_percent: float, target_percent: float) -> float | None:
    """Share of the dry material in the dry mass of a mix that has the target water content [-].

    ``x = (wet − target) / (wet − dry)``; None where the other material is not drier than the target.

    >>> dry_share_of_mix(24.0, 8.0, 20.0)
    0.25
    """
    if wet_percent <= target_percent:
        return 0.0
    if dry_percent >= target_percent:
        return None
    return (wet_percent - target_percent) / (wet_percent - dry_percent)


def water_content_of_mix(masses_kg: list[float], percents: list[float]) -> float:
    """Water content of a mix of dry masses [% of dry mass].

    >>> water_content_of_mix([300.0, 100.0], [24.0, 8.0])
    20.0
    """
    return sum(m * w for m, w in zip(masses_kg, percents, strict=True)) / sum(masses_kg)
