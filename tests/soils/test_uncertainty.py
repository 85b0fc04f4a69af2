"""Uncertainty of shrink: parts in squares, tests that would halve it, and what a point of compaction costs."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from earthwork.soils.typical import TYPICAL, Range
from earthwork.soils.uncertainty import Part, ShrinkUncertainty, bank_volume_per_point


def made(bank: float, maximum: float, compaction: float, *, factor: float = 0.84) -> ShrinkUncertainty:
    return ShrinkUncertainty(
        shrinkage_factor=factor,
        parts=(
            Part(name="bank", relative_sd=bank, tests=9),
            Part(name="maximum", relative_sd=maximum, tests=6),
            Part(name="compaction", relative_sd=compaction, tests=16),
        ),
    )


def test_parts_add_in_squares() -> None:
    whole = made(0.03, 0.0, 0.04, factor=0.8)
    assert whole.relative_sd == pytest.approx(0.05)
    assert whole.sd == pytest.approx(0.04)


def test_by_simulation() -> None:
    random = np.random.default_rng(3)
    n = 200_000
    factors = (1430 * (1 + 0.01 * random.standard_normal(n))) / (
        1760 * (1 + 0.006 * random.standard_normal(n)) * 0.965 * (1 + 0.004 * random.standard_normal(n))
    )
    assert made(0.01, 0.006, 0.004, factor=1430 / 1698.4).sd == pytest.approx(factors.std(), rel=0.01)


def test_one_kind_of_test_alone() -> None:
    # Only the bank part: a quarter of its variance needs four times the tests, 27 more than 9.
    alone = ShrinkUncertainty(shrinkage_factor=0.8, parts=(Part(name="bank", relative_sd=0.02, tests=9),))
    assert alone.further_tests_to_halve("bank") == 27
    # 0.03² + 0.01² = 0.001; a quarter is 0.00025; less 0.0001 leaves 0.00015: 9 · 0.0009 / 0.00015 = 54.
    two = made(0.03, 0.01, 0.0)
    assert two.further_tests_to_halve("bank") == 45
    assert two.further_tests_to_halve("compaction") is None
    assert two.further_tests_to_halve("maximum") is None


@given(st.floats(0.001, 0.05), st.floats(0.0, 0.05), st.floats(0.0, 0.05))
def test_that_many_tests_halve_and_one_less_does_not(bank: float, maximum: float, compaction: float) -> None:
    now = made(bank, maximum, compaction)
    more = now.further_tests_to_halve("bank")
    if more is None:
        assert now.relative_sd**2 / 4 <= (maximum**2 + compaction**2) * (1 + 1e-9)
        return

    def after(tests: int) -> float:
        return math.sqrt(bank**2 * 9 / (9 + tests) + maximum**2 + compaction**2)

    assert after(more) <= now.relative_sd / 2 * (1 + 1e-6)
    assert after(more - 1) > now.relative_sd / 2 * (1 - 1e-6)


def test_both_kinds_together() -> None:
    both = made(0.02, 0.0, 0.02)
    assert both.further_tests_to_halve("bank") is None
    assert both.further_tests_of_all_to_halve() == {"bank": 27, "compaction": 48}
    assert made(0.01, 0.05, 0.01).further_tests_of_all_to_halve() is None


def test_what_a_point_costs() -> None:
    # 1,760 · 1 % = 17.6 kg per m³, dug at 1,430 kg/m³: 12.3 L of bank soil; with 2 % loss 12.6 L.
    assert bank_volume_per_point(1760, 1430) == pytest.approx(0.0123077, abs=1e-7)
    assert bank_volume_per_point(1760, 1430, 0.02) == pytest.approx(0.0123077 / 0.98, abs=1e-7)
    # The same as the difference of two shrinkage factors.
    assert pytest.approx(bank_volume_per_point(1760, 1430), rel=1e-9) == 1760 * 0.97 / 1430 - 1760 * 0.96 / 1430


def test_an_even_range() -> None:
    assert Range(0, 12, "x").sd == pytest.approx(math.sqrt(12))
    assert Range(10, 20, "x").middle == 15


@pytest.mark.parametrize("soil", TYPICAL.values(), ids=TYPICAL)
def test_typical_values_are_ranges_that_can_be(soil) -> None:
    grain = soil.specific_gravity.low * 1000
    ranges = [soil.specific_gravity, soil.bank_dry_density_kg_m3, soil.swell_percent]
    ranges += [r for r in (soil.max_dry_density_kg_m3, soil.optimum_water_content_percent) if r]
    assert all(r.low < r.high and r.source for r in ranges)
    assert soil.bank_dry_density_kg_m3.high < soil.specific_gravity.high * 1000
    if soil.max_dry_density_kg_m3 and soil.optimum_water_content_percent:
        middle = 1000 / soil.max_dry_density_kg_m3.middle - 1000 / grain
        assert soil.optimum_water_content_percent.middle < 100 * middle
