"""Matric suction: the retention curve at points worked by hand, its inverse, and its range."""

from __future__ import annotations

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from earthwork.errors import SoilError
from earthwork.soils.suction import RetentionCurve, estimate_suction, granular_curve, plastic_curve


def test_fredlund_and_xing_at_the_air_entry_parameter() -> None:
    # At ψ = a the inner part is 1 / ln(e + 1)^c, whatever b: ln(e + 1) = 1.31326.
    curve = RetentionCurve(a_kpa=50, b=2.0, c=1.5, hr_kpa=2000)
    left = 1 - math.log(1 + 50 / 2000) / math.log(1 + 1e6 / 2000)
    assert curve.saturation_percent(50) == pytest.approx(100 * left / 1.3132616875**1.5, rel=1e-9)
    assert curve.saturation_percent(0) == 100
    assert curve.saturation_percent(1e6) == pytest.approx(0, abs=1e-9)


def test_parameters_by_hand() -> None:
    # wPI = 0.8 · 25 = 20: 0.00364 · 20^3.35 = 83.09; a = 174.09. c = 0.0514 · 20^0.465 + 0.5 = 0.7070.
    curve = plastic_curve(80.0, 25.0)
    assert curve.a_kpa == pytest.approx(0.00364 * math.exp(3.35 * math.log(20)) + 91, rel=1e-12)
    assert curve.a_kpa == pytest.approx(174.1, abs=0.2)
    assert curve.c == pytest.approx(0.7070, abs=2e-4)
    assert curve.hr_kpa / curve.a_kpa == pytest.approx(32.44 * math.exp(0.372), rel=1e-12)


@given(st.floats(0.1, 50), st.floats(8, 99))
def test_suction_and_saturation_are_inverse(weighted: float, saturation: float) -> None:
    curve = plastic_curve(100.0, weighted)
    assert curve.saturation_percent(curve.suction_kpa(saturation)) == pytest.approx(saturation, abs=1e-6)


@given(st.floats(1, 50), st.floats(10, 90))
def test_drier_soil_pulls_harder_and_clay_more_than_silt(weighted: float, saturation: float) -> None:
    curve = plastic_curve(100.0, weighted)
    assert curve.suction_kpa(saturation) > curve.suction_kpa(saturation + 5)
    assert plastic_curve(100.0, 50.0).suction_kpa(80.0) > plastic_curve(100.0, 5.0).suction_kpa(80.0)
    assert plastic_curve(100.0, 5.0).suction_kpa(80.0) > granular_curve(0.3).suction_kpa(80.0)


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (lambda: plastic_curve(80, 0.0), "holds for 0.1 to 50"),
        (lambda: plastic_curve(100, 50.1), "holds for 0.1 to 50"),
        (lambda: granular_curve(0.09), "holds for 0.1 to 1 mm"),
        (lambda: granular_curve(1.01), "holds for 0.1 to 1 mm"),
        (lambda: granular_curve(float("nan")), "D60 is nan"),
        (lambda: granular_curve(0.5).suction_kpa(0.0), "saturation is 0"),
        (lambda: granular_curve(0.5).suction_kpa(100.5), "saturation is 100.5"),
        (lambda: granular_curve(0.5).saturation_percent(-1), "suction is -1"),
    ],
)
def test_outside_the_range_of_the_relation(call, message: str) -> None:
    with pytest.raises(SoilError, match=message):
        call()


def test_what_wetting_takes_away() -> None:
    clay = estimate_suction(plastic_curve(90, 30), "x", target=70.0, wet_end=90.0, dry_end=60.0)
    assert clay.dry_end_kpa > clay.target_kpa > clay.wet_end_kpa > clay.after_wetting_kpa
    assert clay.sensitivity.startswith("high")
    sand = estimate_suction(granular_curve(0.4), "x", target=70.0)
    assert sand.sensitivity.startswith("little")
    wet = estimate_suction(plastic_curve(90, 30), "x", target=98.0)
    assert wet.after_wetting_kpa == wet.target_kpa
