"""Matric suction of a compacted soil, estimated from its grading and plasticity.

Suction holds an unsaturated fill together. Water that gets in after construction takes it away, and a fill
that was placed dry then settles or swells. The estimate is a screen: the retention curve of [FREDLUND-XING]
with the parameters that [ZAPATA] correlated with index properties, for soils as they dry; wetting curves
lie lower, by up to a factor of ten.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

from earthwork.errors import SoilError

#: Suction [kPa] at which any soil is dry.
_DRY_KPA = 1.0e6
#: Ranges of the data behind the correlation ([ZAPATA], from memory): weighted plasticity index, D60 [mm].
PLASTIC_RANGE = (0.1, 50.0)
GRANULAR_RANGE_MM = (0.1, 1.0)


@dataclass(frozen=True)
class RetentionCurve:
    """Water retention S(ψ) = C(ψ) / ln(e + (ψ/a)^b)^c, C(ψ) = 1 − ln(1 + ψ/hr) / ln(1 + 10⁶/hr), ψ in kPa.

    Source: [FREDLUND-XING], equations with the correction factor C.
    """

    a_kpa: float
    b: float
    c: float
    hr_kpa: float

    def saturation_percent(self, suction_kpa: float) -> float:
        """Degree of saturation [%] at a suction of 0 to 10⁶ kPa.

        >>> curve = RetentionCurve(100.0, 1.0, 1.0, 3000.0)
        >>> curve.saturation_percent(0.0)
        100.0
        >>> curve.saturation_percent(1e6)
        0.0
        """
        if not 0 <= suction_kpa <= _DRY_KPA:
            raise SoilError(f"suction is {suction_kpa:g} kPa; it must be 0 to {_DRY_KPA:g} kPa")
        left = 1 - math.log1p(suction_kpa / self.hr_kpa) / math.log1p(_DRY_KPA / self.hr_kpa)
        return 100 * left / math.log(math.e + (suction_kpa / self.a_kpa) ** self.b) ** self.c

    def suction_kpa(self, saturation_percent: float) -> float:
        """Suction [kPa] at a degree of saturation; the inverse of :meth:`saturation_percent`.

        Raises:
            SoilError: a saturation that is not between 0 and 100 %.
        """
        if not 0 < saturation_percent <= 100:
            raise SoilError(f"saturation is {saturation_percent:g} %; it must be more than 0 and at most 100 %")
        # The curve falls steadily with the logarithm of suction: halve the interval to the last digit.
        low, high = math.log(1e-6), math.log(_DRY_KPA)
        if saturation_percent >= self.saturation_percent(math.exp(low)):
            return 0.0
        for _ in range(80):
            middle = (low + high) / 2
            if self.saturation_percent(min(math.exp(middle), _DRY_KPA)) > saturation_percent:
                low = middle
            else:
                high = middle
        return math.exp((low + high) / 2)


def plastic_curve(fines_percent: float, plasticity_index: float) -> RetentionCurve:
    """Retention curve of a soil with plastic fines, by its weighted plasticity index wPI = fines share × PI.

    a = 0.00364 wPI^3.35 + 4 wPI + 11 kPa, b/c = 5 − 2.313 wPI^0.14, c = 0.0514 wPI^0.465 + 0.5,
    hr/a = 32.44 exp(0.0186 wPI). Source: [ZAPATA] (from memory). Range: wPI 0.1 to 50.

    >>> curve = plastic_curve(100.0, 10.0)
    >>> round(curve.a_kpa, 2), round(curve.c, 3)
    (59.15, 0.65)
    """
    weighted = fines_percent / 100 * plasticity_index
    low, high = PLASTIC_RANGE
    if not low <= weighted <= high:
        raise SoilError(
            f"suction: the weighted plasticity index is {weighted:g}; the correlation holds for {low:g} to {high:g}"
        )
    a = 0.00364 * weighted**3.35 + 4 * weighted + 11
    c = 0.0514 * weighted**0.465 + 0.5
    b = c * (5 - 2.313 * weighted**0.14)
    return RetentionCurve(a, b, c, a * 32.44 * math.exp(0.0186 * weighted))


def granular_curve(d60_mm: float) -> RetentionCurve:
    """Retention curve of a soil without plastic fines, by D60 [mm].

    a = 0.8627 D60^−0.751 kPa, b = 7.5, c = 0.1772 ln D60 + 0.7734, hr/a = 1 / (D60 + 0.00097). Source:
    [ZAPATA] (from memory). Range: D60 0.1 to 1 mm.

    >>> round(granular_curve(1.0).a_kpa, 4), round(granular_curve(1.0).c, 4)
    (0.8627, 0.7734)
    """
    low, high = GRANULAR_RANGE_MM
    if not low <= d60_mm <= high:
        raise SoilError(f"suction: D60 is {d60_mm:g} mm; the correlation holds for {low:g} to {high:g} mm")
    a = 0.8627 * d60_mm**-0.751
    return RetentionCurve(a, 7.5, 0.1772 * math.log(d60_mm) + 0.7734, a / (d60_mm + 0.00097))


@dataclass(frozen=True, kw_only=True)
class SuctionEstimate:
    """Suction [kPa] at the placing condition, and what is left of it when the fill gets wet."""

    relation: str
    target_kpa: float
    target_saturation_percent: float
    wet_end_kpa: float | None  #: at the wet end of the placing window
    dry_end_kpa: float | None
    after_wetting_kpa: float  #: at 95 % saturation, as soaked fills reach

    @property
    def sensitivity(self) -> str:
        """How much a fill depends on staying dry, in words, by the suction that wetting takes away."""
        lost = self.target_kpa - self.after_wetting_kpa
        if lost < 50:
            return "little to lose when it is wetted"
        if lost < 300:
            return "some: keep water off it, drain it"
        return "high: placed dry, it may settle or swell when it is wetted"

    def to_dict(self) -> dict[str, Any]:
        return {
            "relation": self.relation, "target_kpa": self.target_kpa,
            "target_saturation_percent": self.target_saturation_percent, "wet_end_kpa": self.wet_end_kpa,
            "dry_end_kpa": self.dry_end_kpa, "after_wetting_kpa": self.after_wetting_kpa,
            "sensitivity": self.sensitivity,
        }  # fmt: skip


#: Saturation [%] that fills reach when water gets in, less than 100 because some air stays trapped (common
#: practice).
SOAKED_PERCENT = 95.0


def estimate_suction(
    curve: RetentionCurve,
    relation: str,
    *,
    target: float,
    wet_end: float | None = None,
    dry_end: float | None = None,
) -> SuctionEstimate:
    """Suction at saturations [%] of the placing condition.

    Args:
        curve: the retention curve.
        relation: what the estimate rests on, for the reader.
        target, wet_end, dry_end: saturation at the target and at the ends of the window [%].
    """
    return SuctionEstimate(
        relation=relation, target_kpa=curve.suction_kpa(target), target_saturation_percent=target,
        wet_end_kpa=None if wet_end is None else curve.suction_kpa(min(wet_end, 100.0)),
        dry_end_kpa=None if dry_end is None else curve.suction_kpa(dry_end),
        after_wetting_kpa=min(curve.suction_kpa(SOAKED_PERCENT), curve.suction_kpa(target)),
    )  # fmt: skip
