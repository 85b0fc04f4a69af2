"""What to do with soil that arrives too wet: spread it, turn it, or mix in drier soil; each an option."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Any

from earthwork.plan.bare_soil import SurfaceSoil, days_to_dry
from earthwork.plan.mix_supply import MixSupply
from earthwork.plan.moisture import dry_share_of_mix


@dataclass(frozen=True, kw_only=True)
class DryingOption:
    """One way to bring a wet material to its target; figures that do not belong to it are None.

    ``days`` is drying weather, the time that a spread layer lies; ``area_m2`` the ground under soil that
    dries at one time so that a day's volume becomes ready each day. ``mix_needed_t`` is the dry mass of the drier
    material that all of the wet one takes, ``mix_available_t`` what there is of it (None for no limit, too), and
    ``mix_displaced_t`` what of the wet one is left over, since the mix takes its place in the fill.
    """

    material: str
    method: str
    possible: bool
    note: str
    water_l_m2: float | None = None
    days: float | None = None
    area_m2: float | None = None
    volume_per_day_m3: float | None = None
    mix_with: str | None = None
    mix_dry_share: float | None = None
    mix_dry_ratio: float | None = None
    mix_needed_t: float | None = None
    mix_available_t: float | None = None
    mix_missing_t: float | None = None
    mix_displaced_t: float | None = None
    result_water_content_percent: float | None = None

    def to_dict(self) -> dict[str, Any]:
        return dict(vars(self))


def spreading(
    *,
    material: str,
    to_dry_l_per_m3: float,
    fill_dry_density_kg_m3: float,
    loose_dry_density_kg_m3: float,
    spread_m: float,
    reference_mm_day: float,
    turns_per_day: float,
    surface: SurfaceSoil | None,
    placing_m3_day: float,
    area_m2: float | None,
) -> DryingOption:
    """Dry soil spread in a loose layer, turned or not.

    The layer holds ``spread × loose dry density`` of dry soil on a square metre, and has to lose ``to dry /
    fill dry density`` of that mass in water. ``area = placing rate × days × (compacted volume per spread
    area)``.

    Args:
        placing_m3_day: wet compacted volume needed in a day.
        area_m2: ground kept for drying, None for no limit.
    """
    per_area_kg = spread_m * loose_dry_density_kg_m3
    compacted_m = per_area_kg / fill_dry_density_kg_m3
    water = to_dry_l_per_m3 * compacted_m
    days = days_to_dry(water, reference_mm_day, surface, turns_per_day=turns_per_day)
    method = "turned lifts" if turns_per_day > 0 else "spread"
    if days is None:
        why = "nothing evaporates" if reference_mm_day <= 0 else "its surface dries and seals before all has left"
        return DryingOption(
            material=material, method=method, possible=False, water_l_m2=water,
            note=f"{why}; spread it thinner, or turn it",
        )  # fmt: skip
    ready = None if area_m2 is None or days == 0 else area_m2 * compacted_m / days
    note = f"dry after {days:.1f} days of drying weather"
    if ready is not None and ready < placing_m3_day:
        note += "; the ground kept for it is too small for the placing rate"
    return DryingOption(
        material=material, method=method, possible=True, note=note, water_l_m2=water, days=days,
        area_m2=placing_m3_day * days / compacted_m, volume_per_day_m3=ready,
    )  # fmt: skip


def supplied(option: DryingOption, supply: MixSupply) -> DryingOption:
    """A mixing option with what it takes of the drier material, and whether that is there."""
    available = supply.available_kg
    note = option.note
    if supply.missing_kg > 0:
        share = f"enough for {100.0 * available / supply.needed_kg:.2g} %" if available else "nothing"
        note += f"; of {option.mix_with} there is {share}"
    return replace(
        option,
        note=note,
        mix_needed_t=supply.needed_kg / 1000.0,
        mix_available_t=None if available is None else available / 1000.0,
        mix_missing_t=supply.missing_kg / 1000.0,
        mix_displaced_t=supply.displaced_kg / 1000.0,
    )


def mixing(*, material: str, arriving: float, target: float, other: str, other_arriving: float | None) -> DryingOption:
    """Mix a wet material with a drier one; water contents in % of dry mass, masses dry."""
    if other_arriving is None:
        return DryingOption(
            material=material, method="mixing", possible=False, mix_with=other,
            note=f"the water content of {other} is not known; give material.{other}.bank.water_content",
        )  # fmt: skip
    share = dry_share_of_mix(arriving, other_arriving, target)
    if share is None:
        return DryingOption(
            material=material, method="mixing", possible=False, mix_with=other,
            note=f"{other} arrives at {other_arriving:.1f} %, no drier than the target {target:.1f} %",
        )  # fmt: skip
    ratio = share / (1.0 - share)
    result = share * other_arriving + (1.0 - share) * arriving
    return DryingOption(
        material=material, method="mixing", possible=True, mix_with=other, mix_dry_share=share,
        mix_dry_ratio=ratio, result_water_content_percent=result,
        note=f"{ratio:.2f} of {other} to 1 of {material} by dry mass make a mix at {result:.1f} %; test it as a soil",
    )  # fmt: skip
