"""Tank, supply and trucks against brute force and against a simulation minute by minute."""

import math

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from earthwork.errors import PlanError
from earthwork.plan import water_supply, water_trucks
from tests.published import water as published

HOURS = st.lists(st.tuples(st.integers(0, 60), st.integers(0, 90)), min_size=1, max_size=40)


@given(HOURS, st.integers(0, 200), st.floats(0, 1))
def test_every_litre_is_accounted_for(hours, volume, share):
    supply, demand = zip(*hours, strict=True)
    start = share * volume
    run = water_supply.run_tank(supply, demand, volume=volume, at_start=start)
    assert start + sum(run.drawn) == pytest.approx(sum(demand) - sum(run.shortfall) + run.level[-1], abs=1e-9)
    assert all(0 <= level <= volume + 1e-9 for level in run.level)
    assert all(0 <= d <= s + 1e-9 for d, s in zip(run.drawn, supply, strict=True))


@given(HOURS)
def test_sequent_peak_is_the_smallest_tank_that_never_runs_dry(hours):
    supply, demand = zip(*hours, strict=True)
    size = water_supply.sequent_peak(supply, demand)
    if size is None:
        assert sum(supply) < sum(demand)
        return
    assert not any(
        s > 1e-9 for s in water_supply.run_tank(supply, demand, volume=size, at_start=size).shortfall
    )
    if size >= 1:
        smaller = water_supply.run_tank(supply, demand, volume=size - 0.5, at_start=size - 0.5)
        assert sum(smaller.shortfall) > 0


@given(HOURS, st.integers(0, 150), st.floats(0, 1), st.lists(st.integers(0, 5), min_size=40, max_size=40))
def test_most_without_shortfall_is_where_brute_force_finds_it(hours, volume, share, units):
    supply, fixed = zip(*hours, strict=True)
    fixed = [f // 4 for f in fixed]
    units = units[: len(fixed)]
    most = water_supply.most_without_shortfall(supply, fixed, units, volume=volume, at_start=share * volume)

    def short(x):
        demand = [f + x * u for f, u in zip(fixed, units, strict=True)]
        return sum(water_supply.run_tank(supply, demand, volume=volume, at_start=share * volume).shortfall)

    if most is None:
        assert not any(units)
        return
    if most > 0:
        assert short(most * (1 - 1e-9)) <= 1e-6
    last = max(i for i, u in enumerate(units) if u)
    if short(0) == 0 and last >= 0:
        assert short(most + 0.01) > 0


def test_a_tank_by_hand():
    # 10 work hours of 30 m³ on a supply of 15 m³/h around the clock: a tank of 150 m³ bridges the shift
    supply, demand = [15.0] * 24, [30.0] * 10 + [0.0] * 14
    assert water_supply.sequent_peak(supply, demand) == 150.0
    run = water_supply.run_tank(supply, demand, volume=100.0, at_start=100.0)
    assert run.shortfall[6:10] == (5.0, 15.0, 15.0, 15.0)  # 100 + 7 × 15 − 7 × 30 = −5
    assert (
        water_supply.most_without_shortfall(supply, [0] * 24, [1] * 10 + [0] * 14, volume=150, at_start=150)
        == 30
    )


def simulate_minutes(trucks, bays, fill, rest, minutes):
    """Loads brought in a day, a tenth of a minute at a time: each truck waits for a bay, fills, and comes back."""
    step = 10
    bay_free = [0] * bays
    ready = [0] * trucks
    loads = 0
    for tick in range(round(minutes * step) + 1):
        for k in range(trucks):
            if ready[k] is not None and ready[k] <= tick:
                for b in range(bays):
                    if bay_free[b] <= tick:
                        bay_free[b] = tick + round(fill * step)
                        back = bay_free[b] + round(rest * step)
                        if back <= round(minutes * step) + slack(trucks, bays, fill, step):
                            loads += 1
                        ready[k] = back
                        break
    return loads


def slack(trucks, bays, fill, step):
    """Trucks fill for the first time before the shift begins, one after another: the wait of the last of them."""
    return round((math.ceil(trucks / bays) - 1) * fill * step)


@settings(deadline=None, max_examples=60)
@given(st.integers(1, 30), st.integers(2, 8), st.integers(8, 40), st.integers(1, 2), st.integers(200, 700))
def test_trucks_bring_their_loads_in_a_simulation_of_the_fill_point(loads, fill, rest, bays, minutes):
    plan = water_trucks.truck_plan(
        loads * 1000.0, capacity_l=1000.0, fill_flow_l_s=1000 / 60 / fill, bays=bays, travel_min=rest,
        spread_min=0.0, work_min=minutes, efficiency=1.0,
    )  # fmt: skip
    brought = simulate_minutes(plan.trucks, bays, fill, rest, minutes)
    if plan.fill_point_is_short:
        assert brought <= plan.fill_point_loads + plan.trucks
    elif plan.trucks * fill <= bays * (fill + rest):  # no queue: the plain formula
        assert plan.trucks == math.ceil(loads / (minutes // (fill + rest)))
        assert brought >= loads
        if plan.trucks > 1:
            assert (plan.trucks - 1) * (minutes // (fill + rest)) < loads
    else:
        assert brought >= min(loads, plan.trucks * plan.trips_per_truck)


def test_trucks_by_the_formula():
    # 480 min at 0.75 = 360 min; fill 10, travel 16, spread 4: cycle 30, 12 trips; 100 m³ in 8 m³ = 13 loads:
    # 2 trucks
    plan = water_trucks.truck_plan(
        100_000.0, capacity_l=8000.0, fill_flow_l_s=8000 / 600, bays=1, travel_min=16, spread_min=4, work_min=480,
        efficiency=0.75,
    )  # fmt: skip
    assert (plan.trucks, plan.loads, plan.trips_per_truck) == (2, 13, 12)
    assert plan.cycle_min == pytest.approx(30)
    assert plan.fill_point_use_percent == pytest.approx(100 * 130 / 360)


def test_trips_at_a_whole_number_are_not_lost_to_rounding():
    plan = water_trucks.truck_plan(
        20 * 700.0, capacity_l=700.0, fill_flow_l_s=700 / 60 / 0.1, bays=1, travel_min=0.1, spread_min=0.1,
        work_min=6.0, efficiency=1.0,
    )  # fmt: skip
    assert plan.trips_per_truck == 20
    assert plan.trucks == 1


def test_a_fill_point_that_is_the_limit_takes_more_trucks_or_says_so():
    # fill 10, cycle 20: two trucks keep one bay busy; 45 loads need 45 fills of 10 min in 480 min
    plan = water_trucks.truck_plan(
        45_000.0, capacity_l=1000.0, fill_flow_l_s=1000 / 600, bays=1, travel_min=5, spread_min=5, work_min=480,
        efficiency=1.0,
    )  # fmt: skip
    assert plan.trucks == 2
    assert not plan.fill_point_is_short
    short = water_trucks.truck_plan(
        60_000.0, capacity_l=1000.0, fill_flow_l_s=1000 / 600, bays=1, travel_min=5, spread_min=5, work_min=480,
        efficiency=1.0,
    )  # fmt: skip
    assert short.fill_point_is_short
    assert short.fill_point_loads == 48


def test_impossible_trips_are_refused():
    given = {"capacity_l": 9000.0, "bays": 1, "travel_min": 300, "spread_min": 8, "work_min": 300}
    with pytest.raises(PlanError, match=r"a trip takes 309.0 min and the day has 300.0 min at efficiency 1"):
        water_trucks.truck_plan(9000.0, fill_flow_l_s=150.0, efficiency=1.0, **given)
    with pytest.raises(PlanError, match=r"fill flow is 0 L/s; it must be more than 0"):
        water_trucks.truck_plan(9000.0, fill_flow_l_s=0.0, efficiency=1.0, **given)


@pytest.mark.parametrize(("gallons", "pounds"), published.FULL_TANK.items())
def test_a_full_tank_weighs_what_its_water_weighs(gallons, pounds):
    litres = gallons * published.GAL_L
    assert litres / 0.45359237 == pytest.approx(pounds, rel=1e-4)
    notes = water_trucks.payload_notes(litres, payload_kg=litres - 1, empty_kg=None, road_limit_kg=None)
    assert "payload" in notes[0][0]
    assert not water_trucks.payload_notes(litres, payload_kg=litres + 1, empty_kg=None, road_limit_kg=None)
