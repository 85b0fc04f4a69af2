"""In-place density: raw readings to dry density, and what a set of tests says."""

from __future__ import annotations

import math
import statistics
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

from earthwork.errors import SoilError
from earthwork.soils.records import DensityTest

#: A test further than this from the median, in robust standard deviations, is named ([IGLEWICZ-HOAGLIN],
#: 3.5).
OUTLIER_SCORE = 3.5
#: Fewer tests than this cannot show an outlier.
OUTLIER_LEAST = 5
#: Median absolute deviation × this = standard deviation of a normal sample; 1.2533 for the mean one.
_MAD_TO_SD = 1.4826
_MEAN_AD_TO_SD = 1.2533


def sand_cone_moist_density(
    hole_soil_mass: float, sand_mass_used: float, cone_sand_mass: float, sand_density: float
) -> float:
    """Moist density by the sand cone ([ASTM-D1556]): mass / volume, V = (sand used − sand in cone) / sand density.

    Args:
        hole_soil_mass: moist soil out of the hole [kg].
        sand_mass_used: loss of the bottle [kg].
        cone_sand_mass: sand that fills cone and plate, from the calibration [kg].
        sand_density: loose density of the sand, from the calibration [kg/m³].

    Returns:
        Moist density [kg/m³].

    >>> round(sand_cone_moist_density(3.0, 4.0, 1.5, 1500.0), 6)
    1800.0
    """
    _need_positive("sand cone", soil=hole_soil_mass, cone=cone_sand_mass, sand_density=sand_density)
    if not sand_mass_used > cone_sand_mass:
        raise SoilError(
            f"sand cone: {sand_mass_used:g} kg of sand was used, which is not more than the "
            f"{cone_sand_mass:g} kg in the "
            "cone; check which is which"
        )
    return hole_soil_mass * sand_density / (sand_mass_used - cone_sand_mass)


def drive_cylinder_moist_density(cylinder_and_soil_mass: float, cylinder_mass: float, cylinder_volume: float) -> float:
    """Moist density by the drive cylinder ([ASTM-D2937]), also of a mould: (full − empty) / volume [kg, m³].

    >>> round(drive_cylinder_moist_density(3.0, 1.2, 0.001), 6)
    1800.0
    """
    _need_positive("drive cylinder", volume=cylinder_volume)
    if not cylinder_and_soil_mass > cylinder_mass >= 0:
        raise SoilError(
            f"drive cylinder: the full mass {cylinder_and_soil_mass:g} kg is not over the empty mass "
            f"{cylinder_mass:g} kg; "
            "check which is which"
        )
    return (cylinder_and_soil_mass - cylinder_mass) / cylinder_volume


def oven_water_content_percent(moist_and_tin: float, dry_and_tin: float, tin: float) -> float:
    """Water content by oven drying ([ASTM-D2216]): (moist − dry) / (dry − tin), percent; any one unit of mass.

    >>> oven_water_content_percent(125.0, 110.0, 10.0)
    15.0
    """
    if not 0 <= tin < dry_and_tin <= moist_and_tin:
        raise SoilError(
            f"water content: moist and tin {moist_and_tin:g}, dry and tin {dry_and_tin:g}, tin {tin:g}: "
            "they must fall in this order"
        )
    return 100 * (moist_and_tin - dry_and_tin) / (dry_and_tin - tin)


@dataclass(frozen=True)
class GaugeReduction:
    """A reduced nuclear gauge reading: dry density [kg/m³] and water content [%]."""

    dry_density_kg_m3: float
    water_content_percent: float


def reduce_gauge(moist_density: float, gauge_water: float, *, water_offset: float = 0.0) -> GaugeReduction:
    """Nuclear gauge reading to dry density ([ASTM-D6938]): ρd = ρ − M, w = M / ρd, M = gauge water + offset.

    The gauge counts all hydrogen, also that of clay minerals, gypsum, lime and organic matter, and so sees
    water that no oven drives out. The offset corrects that: see :func:`gauge_water_offset`.

    Args:
        moist_density: reading [kg/m³].
        gauge_water: reading, mass of water per volume [kg/m³].
        water_offset: added to every water reading of this soil [kg/m³], mostly negative.

    >>> reduction = reduce_gauge(1980.0, 200.0, water_offset=-20.0)
    >>> reduction.dry_density_kg_m3, reduction.water_content_percent
    (1800.0, 10.0)
    """
    _need_positive("nuclear gauge", moist_density=moist_density)
    water = gauge_water + water_offset
    dry = moist_density - water
    if water < 0 or not dry > 0:
        raise SoilError(
            f"nuclear gauge: water {gauge_water:g} kg/m³ with the offset {water_offset:g} in a moist "
            "density of "
            f"{moist_density:g} kg/m³ is impossible; check both and the offset"
        )
    return GaugeReduction(dry, 100 * water / dry)


def gauge_water_offset(readings: Sequence[tuple[float, float, float]]) -> float:
    """Water offset of a gauge on one soil [kg/m³], from readings with oven water contents of the same spots.

    True water per volume is ρ w / (1 + w); the offset is the mean of true less gauge ([ASTM-D6938], water
    content correction).

    Args:
        readings: (moist density [kg/m³], gauge water [kg/m³], oven water content [%]) per spot.

    >>> round(gauge_water_offset([(1980.0, 200.0, 10.0), (1980.0, 190.0, 10.0)]), 6)
    -15.0
    """
    if not readings:
        raise SoilError("nuclear gauge: no readings with an oven water content; the offset needs at least one")
    true = [moist * oven / (100 + oven) for moist, _, oven in readings]
    return statistics.fmean(t - gauge for t, (_, gauge, _) in zip(true, readings, strict=True))


@dataclass(frozen=True, kw_only=True)
class TestSummary:
    """What a set of tests says of one quantity. ``sd`` is the scatter, None for a single test."""

    __test__ = False  # not a test case, whatever its name begins with

    count: int
    mean: float
    sd: float | None
    low: float
    high: float
    outliers: tuple[str, ...] = ()  #: labels of tests that lie far from the others; they are in the mean

    @property
    def standard_error(self) -> float | None:
        """Standard deviation of the mean, tests taken as independent of one another."""
        return None if self.sd is None else self.sd / math.sqrt(self.count)


def summarise(values: Sequence[float], labels: Sequence[str] | None = None) -> TestSummary:
    """Mean, scatter and outliers of test values.

    Outliers are named and stay in the mean: a wild test may be a wild place. They are the values whose
    modified z-score, 0.6745 (x − median) / MAD, is over 3.5 ([IGLEWICZ-HOAGLIN]); with most values alike
    the mean absolute deviation stands in for the MAD.

    Raises:
        SoilError: no values.

    >>> s = summarise([1400.0, 1410.0, 1420.0, 1430.0, 1440.0, 1800.0], ["a", "b", "c", "d", "e", "f"])
    >>> s.count, round(s.mean, 1), s.outliers
    (6, 1483.3, ('f',))
    """
    if not values:
        raise SoilError("density tests: there are none; give at least one")
    labels = labels or [f"{value:g}" for value in values]
    sd = statistics.stdev(values) if len(values) > 1 else None
    return TestSummary(
        count=len(values), mean=statistics.fmean(values), sd=sd, low=min(values), high=max(values),
        outliers=tuple(labels[i] for i in _outliers(values)),
    )  # fmt: skip


def _outliers(values: Sequence[float]) -> list[int]:
    if len(values) < OUTLIER_LEAST:
        return []
    middle = statistics.median(values)
    away = [abs(value - middle) for value in values]
    spread = statistics.median(away) * _MAD_TO_SD or statistics.fmean(away) * _MEAN_AD_TO_SD
    return [i for i, distance in enumerate(away) if spread and distance / spread > OUTLIER_SCORE]


@dataclass(frozen=True, kw_only=True)
class TestSet:
    """A set of in-place tests of one material: dry density and water content, as a whole and by group."""

    __test__ = False

    tests: tuple[DensityTest, ...]
    dry_density: TestSummary
    water_content: TestSummary | None
    groups: tuple[tuple[str, TestSummary], ...] = ()  #: dry density by stratum or lift, where the crew notes one
    left_out: tuple[tuple[DensityTest, str], ...] = ()  #: impossible tests with the reason

    def to_dict(self) -> dict[str, Any]:
        return {
            "count": self.dry_density.count,
            "dry_density_kg_m3": self.dry_density.mean,
            "dry_density_sd_kg_m3": self.dry_density.sd,
            "dry_density_low_kg_m3": self.dry_density.low,
            "dry_density_high_kg_m3": self.dry_density.high,
            "water_content_percent": self.water_content.mean if self.water_content else None,
            "water_content_sd_percent": self.water_content.sd if self.water_content else None,
            "outliers": list(self.dry_density.outliers),
            "left_out": [f"{test.label}: {reason}" for test, reason in self.left_out],
            "groups": [
                {"group": name, "count": s.count, "dry_density_kg_m3": s.mean, "dry_density_sd_kg_m3": s.sd}
                for name, s in self.groups
            ],
        }


def summarise_tests(tests: Sequence[DensityTest], left_out: Sequence[tuple[DensityTest, str]] = ()) -> TestSet:
    """Mean and scatter of in-place tests, outliers named, by group where groups are noted."""
    labels = [test.label for test in tests]
    wet = [test for test in tests if test.water_content_percent is not None]
    names = dict.fromkeys(test.group for test in tests if test.group)
    groups = []
    for name in names if len(names) > 1 else ():
        members = [test for test in tests if test.group == name]
        groups.append((name, summarise([t.dry_density_kg_m3 for t in members], [t.label for t in members])))
    return TestSet(
        tests=tuple(tests),
        dry_density=summarise([test.dry_density_kg_m3 for test in tests], labels),
        water_content=summarise([t.water_content_percent or 0.0 for t in wet]) if wet else None,
        groups=tuple(groups),
        left_out=tuple(left_out),
    )


def _need_positive(where: str, **values: float) -> None:
    for name, value in values.items():
        if not value > 0:
            raise SoilError(f"{where}: {name.replace('_', ' ')} is {value:g}; it must be more than 0")
