"""In-place tests: reductions by hand, and summaries that name what is far off."""

from __future__ import annotations

import statistics

import pytest
from hypothesis import given
from hypothesis import strategies as st

from earthwork.errors import SoilError
from earthwork.soils import in_place
from earthwork.soils.records import DensityTest


def test_sand_cone_by_hand() -> None:
    # 4.9 kg used less 1.5 kg in the cone at 1,400 kg/m³ fill 2.43 L; 4.6 kg of soil: 1,894 kg/m³.
    assert in_place.sand_cone_moist_density(4.6, 4.9, 1.5, 1400) == pytest.approx(4.6 / (3.4 / 1400), rel=1e-12)


def test_nuclear_gauge_and_its_water_correction() -> None:
    # 2,050 kg/m³ with 230 kg/m³ of water read, of which 20 are bound in clay: 1,840 dry, 210 / 1,840 =
    # 11.41 %.
    reduction = in_place.reduce_gauge(2050, 230, water_offset=-20)
    assert reduction.dry_density_kg_m3 == 1840
    assert reduction.water_content_percent == pytest.approx(11.413, abs=1e-3)


@given(st.floats(1700, 2300), st.floats(2, 30), st.floats(-60, 60))
def test_the_offset_brings_the_gauge_to_the_oven(moist: float, oven: float, error: float) -> None:
    true_water = moist * oven / (100 + oven)
    if true_water + error < 0:
        return
    offset = in_place.gauge_water_offset([(moist, true_water + error, oven)] * 3)
    reduction = in_place.reduce_gauge(moist, true_water + error, water_offset=offset)
    assert reduction.water_content_percent == pytest.approx(oven, rel=1e-6)


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (lambda: in_place.sand_cone_moist_density(4.6, 1.5, 4.9, 1400), "check which is which"),
        (lambda: in_place.sand_cone_moist_density(0, 4.9, 1.5, 1400), "soil is 0; it must be more than 0"),
        (lambda: in_place.drive_cylinder_moist_density(1.2, 3.0, 0.001), "is not over the empty mass"),
        (lambda: in_place.drive_cylinder_moist_density(3.0, 1.2, 0), "volume is 0"),
        (lambda: in_place.oven_water_content_percent(100, 110, 10), "they must fall in this order"),
        (lambda: in_place.oven_water_content_percent(120, 10, 10), "they must fall in this order"),
        (lambda: in_place.reduce_gauge(1900, 10, water_offset=-20), "is impossible"),
        (lambda: in_place.gauge_water_offset([]), "needs at least one"),
        (lambda: in_place.summarise([]), "there are none"),
    ],
)
def test_readings_that_cannot_be(call, message: str) -> None:
    with pytest.raises(SoilError, match=message):
        call()


@given(st.lists(st.floats(1200, 2000), min_size=2, max_size=30))
def test_mean_and_scatter(values: list[float]) -> None:
    summary = in_place.summarise(values)
    assert summary.mean == pytest.approx(statistics.fmean(values))
    assert summary.sd == pytest.approx(statistics.stdev(values))
    assert summary.standard_error == pytest.approx(statistics.stdev(values) / len(values) ** 0.5)
    assert (summary.low, summary.high, summary.count) == (min(values), max(values), len(values))


def test_outliers_are_named_and_kept() -> None:
    # Median 1425, deviations 25 15 5 5 15 375: MAD 15, 0.6745 · 375 / 15 = 16.9, over 3.5; the next is 1.1.
    values = [1400.0, 1410.0, 1420.0, 1430.0, 1440.0, 1800.0]
    summary = in_place.summarise(values, list("abcdef"))
    assert summary.outliers == ("f",)
    assert summary.count == 6
    assert summary.mean == pytest.approx(8900 / 6)


def test_alike_values_do_not_hide_an_outlier() -> None:
    assert in_place.summarise([1500.0] * 7 + [1900.0], list("abcdefgh")).outliers == ("h",)
    assert in_place.summarise([1500.0] * 8).outliers == ()


def test_few_tests_show_no_outlier() -> None:
    assert in_place.summarise([1500.0, 1510.0, 1505.0, 2500.0]).outliers == ()


def test_one_test_has_no_scatter() -> None:
    summary = in_place.summarise([1500.0])
    assert summary.sd is None
    assert summary.standard_error is None


def test_by_stratum() -> None:
    tests = [DensityTest(d, w, group=g) for d, w, g in ((1400, 8, "top"), (1420, 9, "top"), (1500, 12, "deep"))]
    whole = in_place.summarise_tests(tests)
    assert [(name, s.mean, s.count) for name, s in whole.groups] == [("top", 1410, 2), ("deep", 1500, 1)]
    assert whole.dry_density.mean == 1440
    assert whole.water_content is not None
    assert whole.water_content.mean == pytest.approx(29 / 3)
    assert in_place.summarise_tests(tests[:2]).groups == ()
