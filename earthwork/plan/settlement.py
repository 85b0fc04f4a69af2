"""Settlement of fills: a screen, pure formulas. It never replaces the geotechnical engineer of record.

Compression of the ground under the fill is in none of these. Lengths in m, stresses in kPa, strains in percent,
times in days unless a name says otherwise. Keys in brackets are those of docs/sources.md.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from earthwork.errors import PlanError
from earthwork.units import FOOT_M, STANDARD_GRAVITY_M_S2

Value = Any  #: a float or an array of floats


def settlement_of_strain(thickness_m: Value, strain_percent: Value) -> Value:
    """Settlement of a fill that shortens by a percentage of its thickness: ``s = ε H / 100`` [m].

    Args:
        thickness_m: thickness of fill [m], ≥ 0.
        strain_percent: vertical strain [% of thickness], ≥ 0.

    >>> settlement_of_strain(6.0, 0.5)
    0.03
    """
    _at_least("thickness", thickness_m, 0.0, "m")
    _at_least("strain", strain_percent, 0.0, "%")
    return thickness_m * strain_percent / 100


def unit_weight_kn_m3(dry_density_kg_m3: float, water_content_percent: float) -> float:
    """Weight of a moist soil by volume: ``γ = ρd (1 + w/100) g`` [kN/m³].

    >>> round(unit_weight_kn_m3(1700.0, 16.0), 2)
    19.34
    """
    return dry_density_kg_m3 * (1 + water_content_percent / 100) * STANDARD_GRAVITY_M_S2 / 1000


def compression_during_placing(
    height_m: Value, thickness_m: float, unit_weight: float, modulus_kpa: float
) -> Value:
    """How far a point of a fill goes down under what is placed on top of it, by one-dimensional elasticity.

    ``s(z) = γ z (H − z) / M``: the column of height z under the point is loaded by H − z of soil. It is greatest half
    way up, ``γ H² / 4M``, and nothing at the surface, which is made up to grade as it rises [elasticity].

    Args:
        height_m: height z of the point above the base of the fill [m], 0 to H.
        thickness_m: thickness H of the fill [m].
        unit_weight: γ [kN/m³]; modulus_kpa: constrained modulus M [kPa], > 0.

    >>> compression_during_placing(10.0, 20.0, 20.0, 20000.0)
    0.1
    """
    _above("constrained modulus", modulus_kpa, "kPa")
    _at_least("height", height_m, 0.0, "m")
    if np.any(np.asarray(height_m) > thickness_m):
        raise PlanError(f"height is over the fill's thickness of {thickness_m:g} m; it must be 0 to that")
    return unit_weight * height_m * (thickness_m - height_m) / modulus_kpa


def compression_at_once(thickness_m: Value, unit_weight: float, modulus_kpa: float) -> Value:
    """Settlement of the surface of a fill that is placed all at once: ``γ H² / 2M`` [m] [elasticity].

    An upper bound for what self-weight can still do after a fill is finished.

    >>> compression_at_once(20.0, 20.0, 20000.0)
    0.2
    """
    _above("constrained modulus", modulus_kpa, "kPa")
    _at_least("thickness", thickness_m, 0.0, "m")
    return unit_weight * thickness_m**2 / (2 * modulus_kpa)


def creep_settlement(thickness_m: Value, creep_percent: Value, start_days: float, end_days: float) -> Value:
    """Long-term creep of a fill under its own weight: ``s = α H log10(t2 / t1)`` [m] [charles-watts].

    Args:
        thickness_m: thickness H [m], ≥ 0.
        creep_percent: α, strain in a log cycle of time [%]: about 0.2 (heavily compacted) to 1 (poorly compacted).
        start_days, end_days: time since the fill was half placed [days], 0 < start ≤ end.

    >>> round(creep_settlement(15.0, 0.3, 1.0, 100.0), 12)
    0.09
    """
    _above("start", start_days, "days")
    if end_days < start_days:
        raise PlanError(f"creep: the end is {end_days:g} days; it must be at least the start, {start_days:g} days")
    return settlement_of_strain(thickness_m, creep_percent) * math.log10(end_days / start_days)


def creep_rate_m_per_year(thickness_m: float, creep_percent: float, time_days: float) -> float:
    """How fast a fill creeps at a time: ``ds/dt = α H / (t ln 10)`` [m/year].

    >>> round(creep_rate_m_per_year(15.0, 0.3, 365.25), 5)
    0.01954
    """
    _above("time", time_days, "days")
    return settlement_of_strain(thickness_m, creep_percent) / (math.log(10) * time_days) * 365.25


def wait_before_building(
    thickness_m: float, creep_percent: float, allowed_m: float, life_days: float, *, least_days: float = 0.0
) -> float:
    """Days to wait after the fill is half placed, so that creep in the building's life stays under a figure.

    From ``α H log10((t + life) / t) = allowed``:  ``t = life / (10^(allowed / αH) − 1)``.

    >>> wait = wait_before_building(10.0, 0.5, 0.02, 50 * 365.25)
    >>> round(wait / 365.25, 1)
    33.1
    >>> round(creep_settlement(10.0, 0.5, wait, wait + 50 * 365.25), 9)
    0.02
    """
    _above("allowed settlement", allowed_m, "m")
    _above("life", life_days, "days")
    whole = settlement_of_strain(thickness_m, creep_percent)
    if whole == 0.0:
        return least_days
    power = allowed_m / whole
    return max(least_days, 0.0 if power > 300 else life_days / (10**power - 1))


def wetting_settlement(
    thickness_m: Value, unit_weight: float, tests: Sequence[tuple[float, float]], *, pieces: int = 64
) -> Value:
    """Settlement of a fill that becomes wet all through, from wetted oedometer tests [m].

    The strain on wetting depends on the vertical stress γ z: ``s = ∫ ε(γ z) dz / 100`` over the thickness, with straight
    lines between the tests, and the nearest test outside their range of stress [brandon-1990].

    Args:
        thickness_m: thickness [m], scalar or array.
        unit_weight: γ of the moist fill [kN/m³], > 0.
        tests: (vertical stress [kPa], strain on wetting [%], + compression, − swell) in rising order of stress.
        pieces: Simpson's rule has this many (even).

    >>> round(float(wetting_settlement(10.0, 20.0, [(0.0, 0.0), (200.0, 2.0)])), 9)    # ε = z/5 %, so s = 10²/10 %
    0.1
    """
    _above("unit weight", unit_weight, "kN/m³")
    stress, strain = np.array(tests, float).T
    if len(stress) < 2 or (np.diff(stress) <= 0).any():
        raise PlanError("wetting tests: give two or more, in rising order of stress")
    thickness = np.asarray(thickness_m, float)
    part = np.linspace(0.0, 1.0, pieces + 1)
    weights = np.r_[1.0, np.tile([4.0, 2.0], pieces // 2)[:-1], 1.0] / (3 * pieces)
    at = np.interp(thickness[..., None] * unit_weight * part, stress, strain)
    return thickness * (at @ weights) / 100


@dataclass(frozen=True)
class DistortionLimit:
    """A published limit of angular distortion, 1 in ``x``."""

    x: float
    means: str
    source: str


#: Limits of angular distortion (relative rotation), the sharpest first. [bjerrum-1963] and [skempton-macdonald-1956],
#: as taken up in [rne-e.050]; 1/600 as quoted.
DISTORTION_LIMITS = (
    DistortionLimit(750, "trouble with machinery that is sensitive to settlement", "bjerrum-1963"),
    DistortionLimit(600, "danger for frames with diagonals", "bjerrum-1963"),
    DistortionLimit(500, "safe limit for buildings where cracking is not allowed", "bjerrum-1963"),
    DistortionLimit(300, "first cracking of panel walls", "skempton-macdonald-1956"),
    DistortionLimit(250, "tilting of high, rigid buildings becomes visible", "bjerrum-1963"),
    DistortionLimit(150, "considerable cracking of panel and brick walls; structural damage", "skempton-macdonald-1956"),
)


def angular_distortion(difference_m: Value, length_m: float) -> Value:
    """Difference in settlement over the distance in which it occurs: ``β = Δs / L``.

    >>> round(angular_distortion(0.01 * 20 * 0.3048, 100 * 0.3048), 9)
    0.002
    """
    _above("length", length_m, "m")
    return difference_m / length_m


def limits_exceeded(distortion: float) -> tuple[DistortionLimit, ...]:
    """The published limits that an angular distortion reaches or exceeds, the worst last.

    >>> [limit.x for limit in limits_exceeded(1 / 400)]
    [750, 600, 500]
    """
    return tuple(limit for limit in DISTORTION_LIMITS if distortion * limit.x >= 1 - 1e-12)


#: Setbacks hold for slopes steeper than this ratio H:V [ibc-1808.7].
SETBACK_STEEPER_THAN = 3.0


def setback_from_top_m(slope_height_m: Value, steeper_by_m: Value = 0.0) -> Value:
    """Least distance of footings from a descending slope: a third of its height, at most 40 ft [ibc-1808.7, fig. 1].

    A slope steeper than 1:1 is measured from a plane of 45° through its toe; ``steeper_by_m`` is how far inside the top
    that plane comes out: height less run, 0 for flatter slopes [ibc-1808.7].

    >>> round(float(setback_from_top_m(30 * 0.3048) / 0.3048), 9)
    10.0
    >>> float(setback_from_top_m(6.0, 6.0 - 3.0))    # a slope of ½:1, 6 m high
    5.0
    """
    _at_least("slope height", slope_height_m, 0.0, "m")
    _at_least("height less run", steeper_by_m, 0.0, "m")
    return np.minimum(np.asarray(slope_height_m) / 3, 40 * FOOT_M) + steeper_by_m


def setback_from_toe_m(slope_height_m: Value, steeper_by_m: Value = 0.0) -> Value:
    """Least distance of buildings from an ascending slope: half of its height, at most 15 ft [ibc-1808.7, fig. 1].

    The toe of a slope steeper than 1:1 is taken where the plane of 45° that touches it meets the ground;
    ``steeper_by_m`` is how far in front of the toe that is: the most by which a place of the slope is higher than far,
    0 for flatter slopes [ibc-1808.7].

    >>> round(float(setback_from_toe_m(12 * 0.3048) / 0.3048), 9)
    6.0
    >>> float(setback_from_toe_m(6.0, 6.0 - 3.0))    # a slope of ½:1, 6 m high
    6.0
    """
    _at_least("slope height", slope_height_m, 0.0, "m")
    _at_least("height less run", steeper_by_m, 0.0, "m")
    return np.minimum(np.asarray(slope_height_m) / 2, 15 * FOOT_M) + steeper_by_m


def blanket_asked_m(greatest_thickness_m: float, blanket_m: float, blanket_ratio: float) -> float:
    """Least fill under the whole footprint that mends a transition: a depth, or a share of the greatest thickness.

    [common practice, no single source]; the depth of 3 ft for one is in [san-joaquin-grading, p. D-4].

    >>> blanket_asked_m(9.0, 0.9, 1 / 3)
    3.0
    """
    return max(blanket_m, blanket_ratio * greatest_thickness_m)


def _above(name: str, value: float, unit: str) -> None:
    if not value > 0:
        raise PlanError(f"{name} is {value:g} {unit}; it must be more than 0")


def _at_least(name: str, value: Value, least: float, unit: str) -> None:
    values = np.asarray(value, float)
    if np.any(values < least):
        raise PlanError(f"{name} is {float(np.min(values)):g} {unit}; it must be at least {least:g}")
