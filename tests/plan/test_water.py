"""Water of a site worked out by hand: parts, tank, trucks, shortfall, remedies, limits; litre for litre."""

import math
from dataclasses import replace

import pytest

from earthwork.errors import SiteFileError
from earthwork.plan.water import water
from earthwork.plan.water_notes import remedy_figure
from earthwork.units import METRIC
from tests.plan.watered import site

# 1000 m³ × 119.7 L + 5 mm × 8000 m² + 4 × 5000 L, and 5 % of it: 119,700 + 40,000 + 20,000 + 8,985 = 188,685 L a day


def test_a_day_by_its_parts(tmp_path):
    result = water(site(tmp_path, {"water.supply.flow": 1000})).to_dict()
    assert len(result["days"]) == 6
    day = result["days"][0]
    assert day["compaction_l"] == pytest.approx(119_700)
    assert day["evaporation_l"] == pytest.approx(40_000)
    assert day["dust_l"] == pytest.approx(20_000)
    assert day["waste_l"] == pytest.approx(8_985)
    assert day["total_l"] == pytest.approx(188_685)
    assert day["truck_loads"] == 16  # 188,685 / 12,000 = 15.7
    assert result["peak_day_l"] == pytest.approx(188_685)
    assert result["total_l"] == pytest.approx(6 * 188_685)
    material = result["materials"][0]
    assert material["arriving_water_content_percent"] == 8.0
    assert material["target_water_content_percent"] == pytest.approx(15.0)
    assert material["water_to_add_l_per_m3"] == pytest.approx(119.7)
    assert material["water_to_add_bank_l_per_m3"] == pytest.approx(105.0)
    assert material["water_on_lift_mm"] == pytest.approx(23.94)
    assert result["first_short_day"] is None
    assert result["remedies"] == []


def test_trucks_and_standpipe(tmp_path):
    result = water(site(tmp_path, {"water.supply.flow": 1000})).to_dict()
    assert result["truck_cycle_min"] == pytest.approx(4 + 14 + 6)  # 12,000 L at 3,000 L/min
    assert result["truck_trips_per_day"] == 20  # 480 min / 24
    assert result["trucks"] == 1
    assert result["standpipe_use_percent"] == pytest.approx(100 * 188_685 / (1000 * 60 * 24))
    bare = water(site(tmp_path, {"water.supply.flow": 1000}, without=("water.tank",))).to_dict()
    assert bare["truck_cycle_min"] == pytest.approx(12 + 14 + 6)  # without a tank at the supply's flow
    assert bare["trucks"] == 2  # ⌊480 / 32⌋ = 15 trips of 16


def test_a_short_day_with_its_hour_and_what_the_water_allows(tmp_path):
    # 300 L/min: 18,000 L/h against 18,868.5 L/h in ten hours of work: 8,685 L are missing unless the tank holds them
    dry = water(site(tmp_path, without=("water.tank", "water.truck"))).to_dict()
    assert dry["first_short_day"] == 1
    assert dry["first_short_hour"] == 1
    day = dry["days"][0]
    assert day["shortfall_l"] == pytest.approx(8_685)
    # 180,000 L less 5 % and the fixed 60,000 L: (180,000 / 1.05 − 60,000) / 119.7
    assert day["achievable_m3"] == pytest.approx((180_000 / 1.05 - 60_000) / 119.7)
    assert day["limited_by"] == "water"
    assert dry["tank_needed_l"] == pytest.approx(8_685)
    kept = water(site(tmp_path)).to_dict()
    assert kept["first_short_day"] is None
    assert kept["days"][0]["tank_end_l"] == 100_000
    assert kept["days"][0]["limited_by"] == "placing rate"


def test_the_last_hours_go_short_when_the_tank_is_small(tmp_path):
    result = water(site(tmp_path, {"water.tank.volume": 4000})).to_dict()
    # 868.5 L an hour from 4,000 L: the fifth hour takes the last 526 L and is 342.5 L short
    assert (result["first_short_day"], result["first_short_hour"]) == (1, 5)
    assert result["days"][0]["shortfall_l"] == pytest.approx(8_685 - 4_000)
    assert result["first_short_clock"] == "11:00"


@pytest.mark.parametrize(
    ("changes", "impossible"),
    [
        # 192,000 L a day are enough over the job; a window at night fills no more than the small tank
        ({"water.supply.hours": 16, "water.tank.volume": 30000}, {"a longer fill window"}),
        # 144,000 L a day are not; the night would do it
        ({"water.supply.hours": 12, "water.tank.volume": 80000}, {"a larger tank"}),
    ],
)
def test_each_remedy_mends_it_and_a_little_less_does_not(tmp_path, changes, impossible):
    result = water(site(tmp_path, {"water.supply.flow": 200, **changes}))
    job = result.job
    assert job.is_short
    ways = {remedy.remedy: remedy for remedy in result.remedies}
    assert {name for name, way in ways.items() if not way.possible} == impossible
    pipes = ways["more standpipes"].standpipes
    assert not replace(job, standpipes=pipes).is_short
    assert replace(job, standpipes=pipes - 1).is_short
    flow = ways["a greater flow"].flow_l_s
    assert not replace(job, supply_l_s=flow).is_short
    assert replace(job, supply_l_s=0.999 * flow).is_short
    if "a larger tank" not in impossible:
        tank = ways["a larger tank"].tank_l
        assert not replace(job, tank_l=tank, tank_at_start_l=tank).is_short
        assert replace(job, tank_l=0.999 * tank, tank_at_start_l=0.999 * tank).is_short
    if "a longer fill window" not in impossible:
        hours = ways["a longer fill window"].supply_hours
        assert not replace(job, supply_hours=hours).is_short
        assert replace(job, supply_hours=hours - 0.05).is_short
    rate = ways["a slower placing rate"].placing_rate_per_day_m3
    assert not replace(job, placing_m3_day=rate).is_short
    assert replace(job, placing_m3_day=1.001 * rate).is_short
    assert "water-short" in {w.code for w in result.warnings}


def test_when_supply_over_the_job_is_below_demand_no_tank_helps(tmp_path):
    result = water(site(tmp_path, {"water.supply.flow": 100})).to_dict()  # 144,000 L a day
    assert result["tank_needed_l"] is None
    assert "no tank helps" in result["tank_note"]
    ways = {remedy["remedy"]: remedy for remedy in result["remedies"]}
    assert not ways["a larger tank"]["possible"]
    assert ways["a greater flow"]["possible"]
    assert ways["a slower placing rate"]["placing_rate_per_day_m3"] < 1000


@pytest.mark.parametrize("flow", [100, 300, 1000])
@pytest.mark.parametrize("tank", [0, 5_000, 500_000])
def test_every_litre_is_accounted_for(tmp_path, flow, tank):
    changes = {"water.supply.flow": flow, "water.supply.hours": 9.5}
    if tank:
        changes["water.tank"] = {"volume": tank, "at_start": tank / 2}
    result = water(site(tmp_path, changes, without=() if tank else ("water.tank", "water.truck"))).to_dict()
    totals = result["totals"]
    applied = sum(totals[part] for part in ("compaction_l", "evaporation_l", "dust_l", "waste_l"))
    assert applied == pytest.approx(result["total_l"], abs=1e-6)
    given = totals["tank_start_l"] + totals["drawn_l"]
    assert given == pytest.approx(result["total_l"] - totals["shortfall_l"] + totals["tank_end_l"], abs=1e-6)
    for day in result["days"]:
        parts = [day[key] for key in ("compaction_l", "evaporation_l", "dust_l", "waste_l")]
        assert day["total_l"] == pytest.approx(math.fsum(parts), abs=1e-6)


def test_hours_add_up_to_days(tmp_path):
    result = water(site(tmp_path, {"water.work_hours": 9.5}))
    hours = result.tables()["hours"]
    for day in result.days:
        own = hours[hours.day == day.demand.day.day]
        assert len(own) == 24
        assert own.demand_l.sum() == pytest.approx(day.demand.total_l)
        assert own.supply_l.sum() == pytest.approx(day.supply_l)
        assert (own.demand_l[10:] == 0).all()


def test_open_area_is_the_days_volume_over_a_lift_when_not_given(tmp_path):
    result = water(site(tmp_path, without=("water.open_area",))).to_dict()
    assert result["days"][0]["evaporation_l"] == pytest.approx(5.0 * 1000 / 0.2)


def test_limits_name_what_holds_the_day_back_first(tmp_path):
    roller = {"width": 2.0, "speed": 5.0, "passes": 8, "efficiency": 0.5, "count": 1}
    changes = {
        "plant": {"digging": 100, "hauling": 200}, "roller": [roller],
        "water.supply.flow": 1000, "water.tank.volume": 500_000,
    }  # fmt: skip
    day = water(site(tmp_path, changes)).to_dict()["days"][0]
    assert day["limits"]["digging"] == pytest.approx(100 * 10 / 1.14)  # 1710 / 1500 bank m³ a compacted one
    assert day["limits"]["hauling"] == pytest.approx(200 * 10 / 1.425)
    assert day["limits"]["rolling"] == pytest.approx(10 * 2.0 * 5000 * 0.2 * 0.5 / 8)
    assert day["held_back_first_by"] == "digging"
    assert day["limited_by"] == "digging"
    assert day["achievable_m3"] == pytest.approx(1000 / 1.14)


def test_water_on_the_cut_is_drawn_days_ahead(tmp_path):
    result = water(
        site(tmp_path, {"moisture": {"wet_in": "cut", "pre_wet_days": 2}, "water.supply.flow": 1000})
    ).to_dict()
    days = result["days"]
    assert [day["limited_by"] for day in days[:3]] == ["pre-wetting", "pre-wetting", "placing rate"]
    assert [round(day["compaction_l"]) for day in days] == [119_700] * 6 + [0, 0]
    assert [day["compacted_m3"] for day in days] == pytest.approx([0, 0] + [1000] * 6)
    assert days[0]["evaporation_l"] == 0


def test_too_much_water_for_a_lift_is_said(tmp_path):
    result = water(site(tmp_path))
    codes = {w.code: w.message for w in result.warnings}
    assert "7.0 points" in codes["wetting-runs-off"]
    assert "24 mm" in codes["wetting-runs-off"]
    cut = water(site(tmp_path, {"moisture.wet_in": "cut"}))
    assert "wetting-runs-off" not in {w.code for w in cut.warnings}


def test_wet_soil_gets_its_options_and_its_limit(tmp_path):
    changes = {
        "material.silt.bank.water_content": 20.0,
        "material.sand": {"use": "fill", "bank": {"dry_density": 1600, "water_content": 4.0},
                          "loose": {"swell_percent": 12},
                          "proctor": {"method": "ASTM D698", "max_dry_density": 1900, "optimum_water_content": 11}},
        "moisture.drying": {"spread": 0.2, "turns_per_day": 2, "area": 4000},
    }  # fmt: skip
    result = water(site(tmp_path, changes))
    turned, mixed = result.drying
    # 0.2 m × 1200 = 240 kg/m² of dry soil, 5 points too wet: 12 mm at 5 mm a day
    assert turned.water_l_m2 == pytest.approx(12.0)
    assert turned.days == pytest.approx(12 / 5)
    assert turned.area_m2 == pytest.approx(1000 * 2.4 / (240 / 1710))
    assert mixed.mix_dry_share == pytest.approx(5 / 16)
    assert mixed.note.startswith("0.45 of sand to 1 of silt by dry mass make a mix at 15.0 %")
    day = result.to_dict()["days"][0]
    assert day["compaction_l"] == 0
    assert day["water_to_dry_l"] == pytest.approx(1000 * 1710 * 0.05)
    assert day["limited_by"] == "drying"
    assert day["achievable_m3"] == pytest.approx(4000 * (240 / 1710) / 2.4)


def test_heavy_trucks_and_a_busy_fill_point_are_said(tmp_path):
    changes = {
        "water.truck.payload": 10, "water.truck.empty_mass": 14, "water.truck.road_limit": 25,
        "water.truck.fill_flow": 350, "water.supply.flow": 1000,
    }  # fmt: skip
    result = water(site(tmp_path, changes))
    messages = [w.message for w in result.warnings if w.code == "truck-overweight"]
    assert len(messages) == 2
    assert "it may carry 10,000 L" in messages[0]
    assert "it may carry 11,000 L" in messages[1]
    assert "fill-point-short" in {w.code for w in result.warnings}  # 34 min a truck: 14 of 16 loads


@pytest.mark.parametrize("bays", [2, 3])
def test_without_a_tank_the_bays_share_the_supply(tmp_path, bays):
    # 1000 L/min feed two trucks at 500 L/min: 24 min each; 16 loads of 480 min
    truck = {"water.supply.flow": 1000, "water.truck.fill_flow": 500, "water.truck.bays": bays}
    result = water(site(tmp_path, truck, without=("water.tank",))).to_dict()
    assert result["fill_point_use_percent"] == pytest.approx(100 * 16 * 24 / (2 * 480))
    assert result["truck_cycle_min"] == pytest.approx(24 + 14 + 6)
    alone = water(site(tmp_path, {**truck, "water.truck.fill_flow": 3000}, without=("water.tank",))).to_dict()
    assert alone["fill_point_use_percent"] == pytest.approx(100 * 16 * 12 / 480)  # all of the supply, one at a time


def test_a_short_day_that_places_nothing_tells_no_volume(tmp_path):
    changes = {"moisture": {"wet_in": "cut", "pre_wet_days": 2}, "water.supply.flow": 20}
    result = water(site(tmp_path, changes))
    (message,) = [w.message for w in result.warnings if w.code == "water-short"]
    assert result.first_short.demand.compacted_m3 == 0
    assert "are missing that day. It takes" in message


def test_what_the_water_is_enough_for_is_not_what_the_rollers_do(tmp_path):
    # rollers: 2 m × 3 km/h × 0.2 m × 0.5 / 20 = 30 m³/h, 300 m³ a day; the water: 932 m³ (the hand check above)
    roller = {"width": 2.0, "speed": 3.0, "passes": 20, "efficiency": 0.5}
    result = water(site(tmp_path, {"roller": [roller]}, without=("water.tank", "water.truck")))
    assert result.days[0].achievable_m3 == pytest.approx(300)
    (message,) = [w.message for w in result.warnings if w.code == "water-short"]
    assert "water for 931 m³ of 1,000" in message


def test_the_printed_figures_of_remedies_still_mend(tmp_path):
    given = {"water.supply.flow": 250, "water.supply.hours": 10}
    result = water(site(tmp_path, given))
    figures = {r.remedy: remedy_figure(r, METRIC) for r in result.remedies}
    flow = float(figures["a greater flow"].removesuffix(" L/min"))
    hours = float(figures["a longer fill window"])
    rate = float(figures["a slower placing rate"].removesuffix(" m³"))
    assert figures["a larger tank"] is None
    for change in ({"supply_l_s": flow / 60}, {"supply_hours": hours}, {"placing_m3_day": rate}):
        assert not replace(result.job, **change).is_short


@pytest.mark.parametrize(("evaporation", "said"), [(0.25, True), (0.5, False), (0.0, False)])
def test_evaporation_in_inches_of_a_metric_site_is_said(tmp_path, evaporation, said):
    result = water(site(tmp_path, {"water.evaporation": evaporation}))
    assert ("evaporation-low" in {w.code for w in result.warnings}) == said


def test_weather_takes_the_place_of_a_figure(tmp_path):
    rows = [
        "date,temperature_max_c,temperature_min_c,relative_humidity_percent,wind_speed_m_s,solar_radiation_mj_m2,rain_mm"
    ]
    rows += [f"2027-07-0{i},{30 if i < 4 else 38},15,40,3,26,{12 if i == 2 else 0}" for i in range(1, 6)]
    (tmp_path / "weather.csv").write_text("\n".join(rows) + "\n")
    changes = {"weather": {"file": "weather.csv", "rain_day": 10.0}, "water.supply.flow": 1000}
    result = water(site(tmp_path, changes, without=("water.evaporation",)))
    days = result.to_dict()["days"]
    assert [day["kind"] for day in days[:3]] == ["work", "rain", "work"]
    assert days[1]["total_l"] == 0
    assert days[4]["evaporation_mm_day"] > days[0]["evaporation_mm_day"] > 5
    assert days[0]["evaporation_l"] == pytest.approx(days[0]["evaporation_mm_day"] * 8000)
    codes = {w.code for w in result.warnings}
    assert {"start-assumed", "weather-ends"} <= codes  # five days of weather, seven of work


def test_a_night_shift_over_a_change_of_clocks(tmp_path):
    changes = {
        "calendar": {"start": "2027-03-12", "shift_start": "20:00", "time_zone": "America/Denver"},
        "water.supply.flow": 1000,
    }  # fmt: skip
    result = water(site(tmp_path, changes))
    hours = result.tables()["hours"]
    changed = hours[hours.day == 2]
    assert len(changed) == 23
    assert changed.clock.tolist()[5:7] == ["2027-03-14 01:00", "2027-03-14 03:00"]
    assert changed.demand_l.sum() == pytest.approx(188_685)


def test_no_fill_wants_no_water(tmp_path):
    given = site(tmp_path)
    (tmp_path / "finished.tif").write_bytes((tmp_path / "existing.tif").read_bytes())
    result = water(given).to_dict()
    assert result["days"] == []
    assert result["total_l"] == 0
    assert result["peak_day_l"] == 0
    assert result["trucks"] == 0
    assert result["first_short_day"] is None


def test_water_needs_its_table(tmp_path):
    with pytest.raises(SiteFileError, match=r"water needs \[water\]"):
        water(site(tmp_path, without=("water",)))
