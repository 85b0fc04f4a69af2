"""Settlement formulas against published figures, closed forms and properties."""

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from earthwork.errors import PlanError
from earthwork.plan import settlement as s
from tests.published import settlement as published


@pytest.mark.parametrize(("what", "inputs", "expected", "rel", "source", "provenance"), published.COMPRESSION)
def test_compression_while_placing(what, inputs, expected, rel, source, provenance):
    assert s.compression_during_placing(**inputs) == pytest.approx(expected, rel=rel)


def test_compression_at_once():
    thickness, weight, modulus, expected = published.COMPRESSION_AT_ONCE
    assert s.compression_at_once(thickness, weight, modulus) == pytest.approx(expected)


@pytest.mark.parametrize(("thickness", "percent", "start", "end", "expected"), published.CREEP)
def test_creep(thickness, percent, start, end, expected):
    assert s.creep_settlement(thickness, percent, start, end) == pytest.approx(expected)


def test_creep_of_the_stated_range_holds_what_was_observed():
    (early, before), (late, after) = published.CREEP_OBSERVED.items()
    careful, careless = (s.creep_settlement(100.0, percent, early, late) for percent in (0.2, 1.0))
    for first, second in zip(before, after, strict=True):
        assert careful < second - first < careless


def test_creep_rate_is_the_slope_of_creep():
    rate = s.creep_rate_m_per_year(12.0, 0.4, 200.0)
    step = s.creep_settlement(12.0, 0.4, 200.0, 200.01)
    assert rate == pytest.approx(step / 0.01 * 365.25, rel=1e-4)


def test_wedge():
    thickness, length, percent, difference, distortion = published.WEDGE
    assert s.settlement_of_strain(thickness, percent) == pytest.approx(difference)
    assert s.angular_distortion(difference, length) == pytest.approx(distortion)


def test_distortion_limits():
    assert {limit.x: limit.source for limit in s.DISTORTION_LIMITS} == published.LIMITS
    assert [limit.x for limit in s.limits_exceeded(1 / 500)] == [750, 600, 500]
    assert [limit.x for limit in s.limits_exceeded(1 / 501)] == [750, 600]
    assert s.limits_exceeded(0.0) == ()
    assert s.limits_exceeded(1 / 100)[-1].x == 150


@pytest.mark.parametrize(("height", "top", "toe"), published.SETBACKS)
def test_setbacks(height, top, toe):
    assert s.setback_from_top_m(height * 0.3048) == pytest.approx(top * 0.3048)
    assert s.setback_from_toe_m(height * 0.3048) == pytest.approx(toe * 0.3048)


@pytest.mark.parametrize(("greatest", "third", "half"), published.BLANKETS)
def test_blankets(greatest, third, half):
    assert s.blanket_asked_m(greatest, 3.0, 1 / 3) == pytest.approx(max(third, 3.0))
    assert s.blanket_asked_m(greatest, 3.0, 1 / 2) == pytest.approx(half)


def test_wetting_settlement_of_linear_strain():
    # ε = 0.01 %/kPa · σ: over H at γ, s = 0.01 γ H²/2 / 100.
    tests = [(0.0, 0.0), (1000.0, 10.0)]
    thickness = np.array([0.0, 5.0, 10.0, 20.0])
    np.testing.assert_allclose(s.wetting_settlement(thickness, 19.0, tests), 0.0001 * 19 * thickness**2 / 2, rtol=1e-12)
    assert s.wetting_settlement(8.0, 20.0, [(10.0, -1.0), (20.0, -1.0)]) == pytest.approx(-0.08)


@given(
    thickness=st.floats(1, 40), percent=st.floats(0.05, 1.0), allowed=st.floats(0.001, 0.2), life=st.floats(1, 100)
)
def test_wait_is_the_inverse_of_creep(thickness, percent, allowed, life):
    days = life * 365.25
    wait = s.wait_before_building(thickness, percent, allowed, days)
    if wait > 0.01:
        assert s.creep_settlement(thickness, percent, wait, wait + days) == pytest.approx(allowed, rel=1e-6)
    assert s.wait_before_building(thickness, percent, allowed * 1.1, days) <= wait
    assert s.wait_before_building(thickness, percent, allowed, days, least_days=10 * wait + 1) == 10 * wait + 1


@given(k=st.floats(0.5, 3), thickness=st.floats(0.1, 30))
def test_scaling(k, thickness):
    assert s.settlement_of_strain(k * thickness, 0.7) == pytest.approx(k * s.settlement_of_strain(thickness, 0.7))
    whole = s.compression_at_once(k * thickness, 19.0, 3e4)
    assert whole == pytest.approx(k**2 * s.compression_at_once(thickness, 19.0, 3e4))
    # Half way up is the greatest, and a quarter of γH²/M.
    heights = np.linspace(0, thickness, 21)
    placed = s.compression_during_placing(heights, thickness, 19.0, 3e4)
    assert placed.max() == pytest.approx(19.0 * thickness**2 / 4 / 3e4)
    assert placed[0] == placed[-1] == 0


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (lambda: s.settlement_of_strain(-1.0, 0.5), r"thickness is -1 m; it must be at least 0"),
        (lambda: s.settlement_of_strain(1.0, -0.5), r"strain is -0\.5 %"),
        (lambda: s.compression_during_placing(5.0, 4.0, 20.0, 1e4), r"over the fill's thickness of 4 m"),
        (lambda: s.compression_at_once(4.0, 20.0, 0.0), r"constrained modulus is 0 kPa; it must be more than 0"),
        (lambda: s.creep_settlement(4.0, 0.3, 0.0, 10.0), r"start is 0 days"),
        (lambda: s.creep_settlement(4.0, 0.3, 10.0, 5.0), r"the end is 5 days; it must be at least the start"),
        (lambda: s.wait_before_building(4.0, 0.3, 0.0, 10.0), r"allowed settlement is 0 m"),
        (lambda: s.angular_distortion(0.1, 0.0), r"length is 0 m"),
        (lambda: s.wetting_settlement(4.0, 20.0, [(100.0, 1.0), (50.0, 2.0)]), r"in rising order of stress"),
        (lambda: s.setback_from_top_m(math.nextafter(0, -1)), r"slope height is .* it must be at least 0"),
    ],
)
def test_out_of_range(call, message):
    with pytest.raises(PlanError, match=message):
        call()
