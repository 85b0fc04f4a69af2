"""Loads, resistances, speeds, cycles and fleets against published and hand-worked examples."""

import numpy as np
import pytest

from earthwork.plan import trucks
from earthwork.plan.trucks import Cycle, Drive
from earthwork.units import POUND_KG
from tests.published.hauling import CYCLES, FLEET, GRADES, HIGHWAY_TRUCK, RESISTANCE


@pytest.mark.parametrize(("what", "parts", "expected", "tolerance", "source"), CYCLES)
def test_cycle(what, parts, expected, tolerance, source):
    assert Cycle(**parts).total == pytest.approx(expected, rel=tolerance)


def test_haulage_rate_of_one_truck():
    # 10 yd³ every 42 minutes.
    assert 10 * trucks.loads_per_hour(1, 42.0, 10.0) == pytest.approx(14.286, rel=1e-4)


def test_highway_truck():
    t = HIGHWAY_TRUCK
    load = 60 * t["capacity"] / t["loader_per_hour"]
    cycle = Cycle(
        load=load, haul=60 * t["miles"] / t["out_mph"], dump=t["dump_min"], back=60 * t["miles"] / t["back_mph"]
    ).total
    assert cycle / 60 == pytest.approx(t["cycle_h"], rel=2e-4)
    assert trucks.trucks_to_match(cycle, load) == pytest.approx(t["trucks"], rel=2e-4)


def test_fleet_short_of_its_loader():
    t = FLEET
    load = 60 * t["capacity"] / t["loader_per_hour"]
    cycle = load + t["travel_min"] + t["fixed_min"]
    assert (load, cycle) == (t["load_min"], pytest.approx(t["cycle_min"]))
    assert trucks.trucks_to_match(cycle, load) == pytest.approx(t["needed"], rel=1e-4)
    production = t["capacity"] * trucks.loads_per_hour(t["trucks"], cycle, load, efficiency=t["efficiency"])
    assert production == pytest.approx(t["production"], rel=1e-4)
    assert (t["loader_cost"] + t["trucks"] * t["truck_cost"]) / production == pytest.approx(t["cost"], rel=1e-4)


def test_more_trucks_than_the_loader_fills_move_no_more():
    assert trucks.loads_per_hour(9, 20.0, 4.0) == trucks.loads_per_hour(5, 20.0, 4.0) == 15.0
    assert trucks.match_factor(9, 20.0, 4.0) == pytest.approx(1.8)


def test_total_resistance_of_a_scraper():
    t = RESISTANCE
    rolling = trucks.rolling_resistance_percent(t["penetration_in"] * 0.0254)
    assert rolling * 20 == pytest.approx(t["rolling_lb_ton"])
    up = trucks.effective_grade_percent(t["grade"], rolling)
    down = trucks.effective_grade_percent(-t["grade"], rolling)
    assert (up, down) == (pytest.approx(t["up_percent"]), pytest.approx(t["down_percent"]))
    assert up * 20 * t["weight_ton"] == pytest.approx(t["up_lb"])
    assert down * 20 * t["weight_ton"] == pytest.approx(t["down_lb"], abs=1e-9)


@pytest.mark.parametrize(("grade", "exact", "rule"), GRADES)
def test_grade_resistance_is_the_sine(grade, exact, rule):
    assert 2000 * trucks.grade_resistance_share(grade) == pytest.approx(exact, rel=1e-5)
    assert 20 * grade == rule


def test_rolling_resistance_from_a_tow():
    # 720 kg tow 12,000 kg up 2 %: 60 kg/t in all, 20 of them grade: 40 kg/t, 4 %.
    assert trucks.rolling_resistance_from_tow(mass_kg=12_000, pull_kg=720, grade_percent=2) == pytest.approx(4.0)


def test_a_negative_penetration_is_refused():
    with pytest.raises(ValueError, match=r"tire penetration is -0.1 m; it must be 0 or more"):
        trucks.rolling_resistance_percent(-0.1)


def test_payload_governs_heavy_soil_and_the_moist_weight_counts():
    args = {"heaped_volume_m3": 14, "payload_kg": 40_000, "loose_dry_density_kg_m3": 3_200}
    load = trucks.truck_load(**args, moist_factor=1.0)
    assert (load.loose_m3, load.dry_mass_kg, load.limited_by) == (12.5, 40_000, "weight")
    wet = trucks.truck_load(**args, moist_factor=1.25)
    assert (wet.loose_m3, wet.dry_mass_kg) == (10.0, 32_000)
    light = trucks.truck_load(**{**args, "loose_dry_density_kg_m3": 1_000}, moist_factor=1.1)
    assert (light.loose_m3, light.limited_by) == (14, "volume")


def test_power_in_us_units_is_375_horsepower_over_speed():
    # 300 hp at 0.8, 90,000 lb at 10 %: 375 × 240 / 9,000 = 10 mph.
    share = 0.10
    speed = trucks.speed_from_power_m_s(
        power_w=300 * 745.6998715822702, drive_efficiency=0.8, mass_kg=90_000 * POUND_KG, resistance_share=share,
        limit_m_s=100.0,
    )  # fmt: skip
    assert speed / 0.44704 == pytest.approx(10.0, rel=1e-9)


def test_speeds_keep_to_the_limits_of_truck_and_way():
    drive = Drive(limit_m_s=12.0, rolling_percent=4.0, power_w=250e3, mass_kg=45e3, drive_efficiency=0.8)
    speeds = drive.speed_m_s(np.array([-10.0, 0.0, 8.0]), limit_m_s=np.array([20.0, 5.0, 20.0]))
    # Downhill the truck's limit, on the level the road's, uphill 200 kW / (45 t g (0.04 + sin atan 0.08)).
    assert speeds == pytest.approx([12.0, 5.0, 200e3 / (45e3 * 9.80665 * (0.04 + 0.08 / np.hypot(1, 0.08)))])
    assert drive.minutes(np.array([600.0, 300.0]), np.array([-10.0, 0.0]), limit_m_s=np.array([20.0, 5.0])) == (
        pytest.approx(50 / 60 + 60 / 60)
    )


def test_speeds_from_a_table_run_straight_between_rows():
    drive = Drive(limit_m_s=15.0, rolling_percent=2.0, table=((0.0, 20.0), (10.0, 4.0)))
    assert drive.speed_m_s(np.array([-8.0, 3.0, 20.0])) == pytest.approx([15.0, 12.0, 4.0])
