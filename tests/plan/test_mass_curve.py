"""The mass curve against definitions, hand-worked loops and a transportation plan on the line."""

import numpy as np
import pytest
from scipy.integrate import trapezoid

from earthwork.plan.mass_curve import (
    MassCurve,
    average_end_area_m3,
    limit_of_economic_haul_m,
    prismoidal_m3,
)
from earthwork.plan.transport import solve_transport
from earthwork.plan.transport_costs import Costs
from tests.published.hauling import OVERHAUL


def curve_of(stations, net, *, factor=1.0):
    """A curve whose intervals gain (+ cut) or lose (− fill) the given compacted-equivalent volumes."""
    net = np.asarray(net, float)
    made = np.maximum(net, 0.0)
    return MassCurve(np.asarray(stations, float), made / factor, made, np.maximum(-net, 0.0))


def loop(heights, length):
    """A curve through the given ordinates at even stations."""
    return curve_of(np.linspace(0, length, len(heights)), np.diff(heights))


def test_average_haul_of_a_parabolic_loop_is_its_area_over_its_peak():
    x = np.linspace(0, 1, 4001)
    curve = loop(4 * 10_000 * x * (1 - x), 800.0)
    assert curve.moment_m4 == pytest.approx(2 / 3 * 10_000 * 800, rel=1e-6)
    assert curve.mean_haul_m == pytest.approx(533.33, rel=1e-5)


def test_freehaul_splits_the_peak_at_its_chord():
    # A triangular loop, 10,000 high and 1,000 long: the chord of 300 lies at 7,000.
    over = loop([0, 10_000, 0], 1000.0).overhaul(300.0)
    assert (over.freehaul_m3, over.volume_m3) == (pytest.approx(3000), pytest.approx(7000))
    # Chords of the layers from 0 to 7,000 run from 1,000 to 300: mean 650, 350 beyond freehaul.
    assert over.mean_m == pytest.approx(350)
    assert over.moment_m4 == pytest.approx(7000 * 350)


def test_method_of_moments_centres_of_cut_and_fill():
    # Rectangular cut and fill blocks, 100 m long and 500 apart: all is hauled 600 − … centre to centre 600 on average.
    curve = curve_of([0, 100, 600, 700], [1000.0, 0.0, -1000.0])
    assert curve.mean_haul_m == pytest.approx(600)
    over = curve.overhaul(500.0)
    assert over.volume_m3 == pytest.approx(1000)
    assert over.moment_m4 == pytest.approx(1000 * 100)


def test_overhaul_is_paid_in_bank_volume_and_station():
    # 900 compacted are 1,000 bank; 200 m over freehaul are 10 stations of 20 m.
    curve = curve_of([0, 100, 400, 500], [900.0, 0.0, -900.0], factor=0.9)
    over = curve.overhaul(200.0)
    assert over.bank_m3 == pytest.approx(1000)
    assert over.bank_stations(20.0) == pytest.approx(1000 * 10)


def test_published_overhaul_cost():
    assert sum(OVERHAUL["moments"]) * OVERHAUL["unit_cost"] == pytest.approx(OVERHAUL["cost"])
    assert round(OVERHAUL["cost"]) == OVERHAUL["printed"]


def test_ordinates_with_shrinkage():
    # Bank cut 1000, 500, 0 at 0.9; fill 0, 600, 900. In bank measure: 1000, 833.333, −166.667.
    cut = np.array([1000.0, 500.0, 0.0])
    curve = MassCurve(np.arange(4.0), cut, 0.9 * cut, np.array([0.0, 600.0, 900.0]))
    assert curve.ordinates_m3[1:] / 0.9 == pytest.approx([1000, 833.333, -166.667], rel=1e-5)


def test_limit_of_economic_haul():
    limit = limit_of_economic_haul_m(5 * 30.48, borrow_cost=5, overhaul_cost=0.25, station_m=30.48)
    assert limit / 30.48 == pytest.approx(25)
    with pytest.raises(ValueError, match="overhaul cost is 0; it must be more than 0"):
        limit_of_economic_haul_m(100, borrow_cost=5, overhaul_cost=0, station_m=20)


def test_balance_points():
    curve = curve_of([0, 10, 20, 30, 40], [100.0, -150.0, 50.0, 20.0])
    # 0, 100, −50, 0, 20: through zero two thirds into the second interval, and back to it at 30.
    assert curve.balance_points_m == [pytest.approx(10 + 10 * 100 / 150), 30.0]


def test_valleys_are_paired_within_the_loop():
    # 0, 100, 40, 90, 0 at 0, 10, 20, 30, 40: the second hump above 40 is served inside, the rest over it.
    curve = curve_of([0, 10, 20, 30, 40], [100.0, -60.0, 50.0, -90.0])
    assert curve.moment_m4 == pytest.approx(trapezoid(curve.ordinates_m3, curve.stations_m))
    assert curve.rests == []


def test_what_is_left_is_waste_or_borrow():
    waste = curve_of([0, 10, 20], [100.0, -60.0])
    assert [(r.kind, r.volume_m3) for r in waste.rests] == [("waste", 40.0)]
    # The cut nearest to the fill serves it: the first 4 m are wasted.
    assert (waste.rests[0].start_m, waste.rests[0].stop_m) == (0.0, pytest.approx(4.0))
    borrow = curve_of([0, 10, 20], [-60.0, 20.0])
    assert [(r.kind, r.volume_m3) for r in borrow.rests] == [("borrow", 40.0)]


@pytest.mark.parametrize("seed", range(10))
def test_haul_on_a_line_is_the_area_of_the_curve_and_the_cheapest_plan(seed):
    rng = np.random.default_rng(seed)
    net = rng.integers(-50, 50, 30).astype(float)
    net[-1] -= net.sum()
    curve = curve_of(np.arange(31.0) * 10, net)
    y = curve.ordinates_m3
    cross = (y[:-1] * y[1:]) < 0
    area = (np.abs(y[:-1]) + np.abs(y[1:])) / 2 * 10
    area[cross] = (y[:-1][cross] ** 2 + y[1:][cross] ** 2) / np.abs(y[1:] - y[:-1])[cross] / 2 * 10
    assert curve.moment_m4 == pytest.approx(area.sum())
    # Each interval spread over 50 points: the plan on the line has the same haul.
    fine = np.repeat(net / 50, 50)
    at = np.column_stack([(np.arange(1500) + 0.5) * 0.2, np.zeros(1500)])
    plan = solve_transport(fine[fine > 0], -fine[fine < 0], Costs.straight(at[fine > 0], at[fine < 0]))
    assert plan.cost == pytest.approx(curve.moment_m4, rel=1e-3)


def test_turning_the_line_round_changes_no_haul():
    rng = np.random.default_rng(3)
    net = rng.normal(0, 100, 20)
    forth = curve_of(np.arange(21.0), net)
    back = curve_of(np.arange(21.0), net[::-1])
    # What is left over lies at the end of the line, so only the paired haul of a closed curve is the same.
    net[-1] -= net.sum()
    forth, back = curve_of(np.arange(21.0), net), curve_of(np.arange(21.0), net[::-1])
    assert forth.moment_m4 == pytest.approx(back.moment_m4)
    assert forth.overhaul(3.0).moment_m4 == pytest.approx(back.overhaul(3.0).moment_m4)


def test_end_areas_against_exact_solids():
    # A wedge is exact by end areas; a pyramid is a third of base × height, end areas say half.
    assert average_end_area_m3([0, 12], 10).sum() == pytest.approx(60)
    assert prismoidal_m3([0, 12], [6], 10).sum() == pytest.approx(60)
    assert prismoidal_m3([0, 20], [5], 30).sum() == pytest.approx(200)
    assert average_end_area_m3([0, 20], 30).sum() == pytest.approx(300)
    # End areas do not always over-estimate: a barrel between equal ends is under-estimated.
    middle, ends = 20.0, 10.0
    assert average_end_area_m3([ends, ends], 30).sum() < prismoidal_m3([ends, ends], [middle], 30).sum()
