"""What a truck carries, how fast it drives, how long its cycle takes, and how many match the loader.

The method of resistances: a truck meets rolling resistance and grade resistance; the effective grade is their sum as a
share of the weight. Speed follows from a performance table by effective grade, or from the power that is left at the
wheels, up to a speed limit [nunnally2007, ch. 4]. Output and fleet by the match factor [morgan1968].
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from earthwork.units import STANDARD_GRAVITY_M_S2

Array = np.ndarray
Value = float | Array


# --- loads --------------------------------------------------------------------------------------------------------


@dataclass(frozen=True)
class Load:
    """What one truck carries of a soil: loose volume, dry mass, and which limit governs."""

    loose_m3: float
    dry_mass_kg: float
    limited_by: str  #: "volume" or "weight"


def truck_load(
    *, heaped_volume_m3: float, payload_kg: float, loose_dry_density_kg_m3: float, moist_factor: float
) -> Load:
    """The load of a soil: as much as the heaped body holds, or as the payload allows.

    Args:
        heaped_volume_m3: loose volume of a heaped body, > 0.
        payload_kg: greatest moist mass, > 0.
        loose_dry_density_kg_m3: of the soil as loaded.
        moist_factor: moist mass / dry mass as loaded, 1 + w/100.

    14 loose yards of a soil of 3,200 lb/yd³ would weigh 44,800 lb; a payload of 40,000 lb takes 12.5 of them:

    >>> load = truck_load(heaped_volume_m3=14, payload_kg=40_000, loose_dry_density_kg_m3=3_200, moist_factor=1.0)
    >>> load.loose_m3, load.limited_by
    (12.5, 'weight')
    """
    by_weight = payload_kg / (loose_dry_density_kg_m3 * moist_factor)
    volume = min(heaped_volume_m3, by_weight)
    limit = "weight" if by_weight < heaped_volume_m3 else "volume"
    return Load(volume, volume * loose_dry_density_kg_m3, limit)


# --- resistances --------------------------------------------------------------------------------------------------


def rolling_resistance_percent(penetration_m: Value) -> Value:
    """Rolling resistance from how deep the tires sink [% of weight].

    2 % for the flexing of tires and the drive, and 1.5 % for each inch of penetration (40 lb/ton + 30 lb/ton per inch)
    [nunnally2007, eq. 4-2].

    Args:
        penetration_m: ≥ 0 [m].

    >>> rolling_resistance_percent(2 * 0.0254)  # 2 in: 100 lb/ton of 2,000 lb
    5.0
    """
    if np.any(np.asarray(penetration_m) < 0):
        raise ValueError(f"tire penetration is {penetration_m} m; it must be 0 or more")
    return 2.0 + 1.5 * penetration_m / 0.0254


def rolling_resistance_from_tow(*, mass_kg: float, pull_kg: float, grade_percent: float) -> float:
    """Rolling resistance from the pull that tows a vehicle up a grade at constant speed [% of weight].

    The pull is a force as the weight of a mass. Grade resistance is 1 % of the weight per percent of grade.

    >>> rolling_resistance_from_tow(mass_kg=12_000, pull_kg=720, grade_percent=2)
    4.0
    """
    return 100.0 * pull_kg / mass_kg - grade_percent


def grade_resistance_share(grade_percent: Value) -> Value:
    """Grade resistance as a share of the weight, sin(atan(grade)): exact.

    The rule of 20 lb/ton per percent is the tangent in place of the sine: 0.5 % more at a grade of 10 %.

    >>> round(float(2000 * grade_resistance_share(10.0)), 3)  # lb per ton of 2,000 lb
    199.007
    """
    grade = np.asarray(grade_percent, float) / 100
    return grade / np.sqrt(1 + grade * grade)


def effective_grade_percent(grade_percent: Value, rolling_percent: Value) -> Value:
    """Grade that would resist as much without rolling resistance [%]; negative downhill is an assistance.

    >>> effective_grade_percent(5.0, 5.0), effective_grade_percent(-5.0, 5.0)
    (10.0, 0.0)
    """
    return grade_percent + rolling_percent


# --- speed --------------------------------------------------------------------------------------------------------


def speed_from_power_m_s(
    *, power_w: float, drive_efficiency: float, mass_kg: float, resistance_share: Value, limit_m_s: float
) -> Value:
    """Speed at which the power at the wheels balances the resistance [m/s], up to a limit.

    ``v = η P / (m g r)``; in US units the 375 hp·η / mph of usable rimpull [nunnally2007, eq. 4-6]. Where the
    resistance is zero or helps, the limit holds: brakes do.

    Args:
        power_w: flywheel power [W], > 0.
        resistance_share: rolling and grade resistance as a share of the weight.

    >>> float(speed_from_power_m_s(power_w=300e3, drive_efficiency=0.8, mass_kg=40_000,
    ...                            resistance_share=0.1, limit_m_s=15.0)) == 240e3 / (4000 * 9.80665)
    True
    """
    resistance = np.maximum(np.asarray(resistance_share, float) * mass_kg * STANDARD_GRAVITY_M_S2, 1e-9)
    return np.minimum(power_w * drive_efficiency / resistance, limit_m_s)


def speed_from_table_m_s(effective_percent: Value, table: Sequence[tuple[float, float]]) -> Value:
    """Speed from rows of (effective grade [%], speed [m/s]), straight between them and level beyond.

    >>> float(speed_from_table_m_s(5.0, [(0.0, 12.0), (10.0, 4.0)]))
    8.0
    """
    rows = sorted(table)
    return np.interp(effective_percent, [row[0] for row in rows], [row[1] for row in rows])


@dataclass(frozen=True)
class Drive:
    """How fast a truck drives, loaded or empty.

    ``limit_m_s``: its greatest speed. Either ``table`` (effective grade [%] → speed), or ``power_w`` with ``mass_kg``
    and ``drive_efficiency``, or neither: then it always drives at its limit.
    """

    limit_m_s: float
    rolling_percent: float = 0.0
    table: tuple[tuple[float, float], ...] = ()
    power_w: float | None = None
    mass_kg: float | None = None
    drive_efficiency: float = 1.0

    def speed_m_s(self, grade_percent: Value, *, limit_m_s: Value = np.inf) -> Array:
        """Speed on a grade [m/s], within the truck's limit and that of the way."""
        limit = np.minimum(self.limit_m_s, limit_m_s)
        grade = np.asarray(grade_percent, float)
        if self.table:
            return np.minimum(
                speed_from_table_m_s(effective_grade_percent(grade, self.rolling_percent), self.table), limit
            )
        if self.power_w is None or self.mass_kg is None:
            return np.minimum(np.full(grade.shape, self.limit_m_s), limit)
        share = self.rolling_percent / 100 + grade_resistance_share(grade)
        return np.minimum(
            speed_from_power_m_s(
                power_w=self.power_w, drive_efficiency=self.drive_efficiency, mass_kg=self.mass_kg,
                resistance_share=share, limit_m_s=self.limit_m_s,
            ),
            limit,
        )  # fmt: skip

    def minutes(self, length_m: Array, grade_percent: Array, *, limit_m_s: Value = np.inf) -> float:
        """Time over stretches of a way [min]; starts and stops are part of the fixed times."""
        return float(np.sum(length_m / self.speed_m_s(grade_percent, limit_m_s=limit_m_s)) / 60)


# --- cycle and fleet ----------------------------------------------------------------------------------------------


@dataclass(frozen=True)
class Cycle:
    """The cycle of a truck [min].

    >>> Cycle(load=10, haul=15, dump=5, back=0.8 * 15).total
    42.0
    """

    load: float
    haul: float
    dump: float
    back: float
    wait: float = 0.0

    @property
    def total(self) -> float:
        return self.load + self.haul + self.dump + self.back + self.wait


def match_factor(trucks: float, cycle_min: float, load_min: float) -> float:
    """Trucks × loading time / cycle: 1 where loader and trucks keep each other busy [morgan1968].

    Above 1 trucks wait for the loader, below 1 the loader waits for trucks.

    >>> match_factor(5, 20.0, 4.0)
    1.0
    """
    return trucks * load_min / cycle_min


def trucks_to_match(cycle_min: float, load_min: float) -> float:
    """Trucks that keep the loader busy, as a decimal.

    >>> round(trucks_to_match(12.4, 2.4), 4)
    5.1667
    """
    return cycle_min / load_min


def loads_per_hour(trucks: float, cycle_min: float, load_min: float, *, efficiency: float = 1.0) -> float:
    """Loads that a fleet moves in an hour: the lesser of what the trucks carry and what the loader fills.

    Args:
        efficiency: share of an hour that is worked, such as 50/60.

    >>> loads_per_hour(5, 20.0, 4.0) * 12  # five trucks of 12 m³ that match their loader [m³/h]
    180.0
    """
    return 60.0 * efficiency * min(trucks / cycle_min, 1.0 / load_min if load_min > 0 else np.inf)
