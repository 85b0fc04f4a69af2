"""What the samples are there to show of lifts and water."""

import datetime
from dataclasses import replace
from pathlib import Path

import pytest

import earthwork

SAMPLES = Path(__file__).parents[2] / "samples"


@pytest.fixture(scope="module")
def larkspur():
    return earthwork.water(SAMPLES / "larkspur-campus" / "site.toml")


@pytest.fixture(scope="module")
def cooper():
    return earthwork.water(SAMPLES / "cooper-ridge" / "site.toml")


def test_larkspur_goes_short_in_its_driest_week(larkspur):
    short = [day.demand.day.date for day in larkspur.days if day.shortfall_l > 0]
    assert short
    assert datetime.date(2026, 7, 12) <= min(short)
    assert max(short) <= datetime.date(2026, 7, 21)
    driest = max(larkspur.days, key=lambda day: day.demand.evaporation_mm).demand.day.date
    assert abs((driest - min(short)).days) <= 4
    assert "water-short" in {w.code for w in larkspur.warnings}


def test_what_larkspur_is_told_mends_it(larkspur):
    ways = {way.remedy: way for way in larkspur.remedies}
    assert ways["more standpipes"].standpipes == 2
    for changes in (
        {"standpipes": 2},
        {"supply_l_s": ways["a greater flow"].flow_l_s},
        {"tank_l": ways["a larger tank"].tank_l, "tank_at_start_l": ways["a larger tank"].tank_l},
        {"placing_m3_day": ways["a slower placing rate"].placing_rate_per_day_m3},
    ):
        assert not replace(larkspur.job, **changes).is_short


def test_larkspur_wets_its_cut_ahead_and_stops_for_rain(larkspur):
    assert [day.limited_by for day in larkspur.days[:3]] == ["pre-wetting"] * 3
    assert "rain" in {day.demand.day.kind for day in larkspur.days}


def test_the_lifts_of_both_are_their_fill(larkspur, cooper):
    for result in (larkspur, cooper):
        total = result.lifts.volumes.total
        assert result.lifts.total["compacted_m3"] == pytest.approx(total.refill_and_fill_m3, rel=1e-9)


def test_larkspur_places_what_the_haul_plan_brings(larkspur):
    assert larkspur.lifts.material_rule == "haul plan"


def test_cooper_dries_its_clay_and_wets_none(cooper):
    totals = cooper.to_dict()["totals"]
    assert totals["compaction_l"] == pytest.approx(0.0, abs=1.0)
    assert totals["dust_l"] > 0
    assert {option.material for option in cooper.drying} == {"lean clay", "river clay"}
    assert all(option.days > 1 for option in cooper.drying if option.method == "turned lifts")
    assert {day.limited_by for day in cooper.days if day.demand.compacted_m3 > 0} >= {"drying"}
    assert "too-wet" in {w.code for w in cooper.warnings}
