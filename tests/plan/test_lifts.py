"""Lifts of a site worked out by hand; masses against the ledger; the order and the days of placing."""

import datetime
import math

import numpy as np
import pytest
import rasterio
from hypothesis import given
from hypothesis import strategies as st

from earthwork.errors import PlanError, SiteFileError
from earthwork.plan.calendar import WorkCalendar
from earthwork.plan.lift_materials import fitted_shares
from earthwork.plan.lift_shapes import widest_cells
from earthwork.plan.lifts import lifts
from earthwork.plan.schedule import placing_order, schedule
from earthwork.site import Site
from tests.plan.watered import site


def test_lifts_by_hand(tmp_path):
    result = lifts(site(tmp_path))
    rows = result.to_dict()["lifts"]
    assert [row["lift"] for row in rows] == [1, 2, 3, 4, 5]
    for row in rows:
        assert row["fill"] == "fill 1"
        assert row["area_m2"] == pytest.approx(6000)
        assert row["compacted_m3"] == pytest.approx(1200)
        assert row["dry_mass_t"] == pytest.approx(1200 * 1.71)
        assert row["bank_m3"] == pytest.approx(1200 * 1710 / 1500)
        assert row["loose_m3"] == pytest.approx(1200 * 1710 / 1200)
        # by volume 1710 / 12 = 142.5 loads, by weight 2052 × 1.08 / 15 = 147.7
        assert row["loads"] == pytest.approx(2052 * 1.08 / 15)
        assert row["water_to_add_l"] == pytest.approx(1200 * 119.7)
        assert row["water_to_dry_l"] == 0
    assert rows[0]["bottom_m"] == pytest.approx(50.0)
    assert rows[-1]["top_m"] == pytest.approx(51.0)
    total = result.total
    assert total["compacted_m3"] == pytest.approx(6000)
    assert result.material_rule == "pro rata"
    assert result.loose_lift_m["silt"] == pytest.approx(0.2 * 1710 / 1200)


def test_masses_of_the_lifts_are_those_of_the_ledger(tmp_path):
    result = lifts(site(tmp_path, {"stratum": [{"material": "silt", "thickness": 1.2}, {"material": "shale"}],
        "material.shale": {"use": "rock", "bank": {"dry_density": 2200}, "loose": {"swell_percent": 40},
                           "fill": {"dry_density": 2000}},
        "over_excavation": [{"name": "pad", "depth": 0.5}],
        "fill.by_depth": [{"below": 0.6, "measured_from": "subgrade", "relative_compaction": 98,
                           "expected_compaction": 98}]}, without=("haul",)))  # fmt: skip
    assert result.material_rule == "pro rata"
    lifted = {part["material"]: part["dry_mass_t"] for part in result.total["materials"]}
    assert set(lifted) == {"silt", "shale"}
    for name, mass in result.ledger_t.items():
        assert lifted[name] == pytest.approx(mass, rel=1e-9)
    assert result.total["compacted_m3"] == pytest.approx(result.volumes.total.refill_and_fill_m3, rel=1e-9)


def two_fills(tmp_path, **more):
    """Two pads of fill, each beside a cut of its own material: the haul plan never mixes them."""
    given = site(tmp_path, {
        "stratum": [{"material": "silt", "bottom": "bottom.tif"}, {"material": "shale"}],
        "material.shale": {"use": "rock", "bank": {"dry_density": 2200, "water_content": 3},
                           "loose": {"swell_percent": 40}, "fill": {"dry_density": 2000}},
        "haul": {"block": 20, "truck": {"heaped_volume": 12, "payload": 15}}, **more})  # fmt: skip
    x = np.arange(200)[None, :] + 0.5
    y = np.arange(80)[:, None] + 0.5
    level = np.full((80, 200), 50.0)
    inside = (y > 10) & (y < 70)
    finished = level + 1.0 * (inside & (((x > 10) & (x < 50)) | ((x > 150) & (x < 190))))
    finished -= 2.0 * (inside & (((x > 60) & (x < 85)) | ((x > 115) & (x < 140))))
    bottom = np.where(x < 100, 40.0, 50.0) + 0 * y  # silt in the west, shale at the surface in the east
    with rasterio.open(tmp_path / "existing.tif") as file:
        profile = file.profile
    for name, array in (("finished", finished), ("bottom", bottom)):
        with rasterio.open(tmp_path / f"{name}.tif", "w", **profile) as file:
            file.write(array, 1)
    return given


def test_materials_follow_the_haul_plan(tmp_path):
    result = lifts(two_fills(tmp_path))
    assert result.material_rule == "haul plan"
    mixes = [{part.material: round(part.share, 9) for part in result.mixes[area.name]} for area in result.areas]
    assert sorted(list(mix) for mix in mixes) == [["shale"], ["silt"]]
    lifted = {part["material"]: part["dry_mass_t"] for part in result.total["materials"]}
    assert lifted["silt"] == pytest.approx(2400 * 1.71)
    assert lifted["shale"] == pytest.approx(2400 * 2.0)
    for name, mass in result.ledger_t.items():
        assert lifted[name] == pytest.approx(mass, rel=1e-9)


def test_without_a_haul_plan_every_lift_takes_both(tmp_path):
    given = two_fills(tmp_path)
    even = lifts(Site(given.model.model_copy(update={"haul": None}), given.units, given.directory))
    assert even.material_rule == "pro rata"
    shares = {tuple((p.material, round(p.share, 9)) for p in mix) for mix in even.mixes.values()}
    assert len(shares) == 1
    # cut of 3000 m³ each: 3000 × 1500 / 1710 of silt, 3000 × 2200 / 2000 of shale
    silt, shale = 3000 * 1500 / 1710, 3000 * 1.1
    assert {p.material: p.share for p in even.mix}["silt"] == pytest.approx(silt / (silt + shale))


def test_a_plan_that_cannot_be_made_leaves_the_even_mix(tmp_path):
    given = two_fills(tmp_path, **{"disposal": [{"name": "tip", "at": [0.0, 0.0], "accepts": ["silt"], "capacity": 1}]})
    result = lifts(given)
    if result.material_rule == "pro rata":
        assert "no-haul-plan" in {w.code for w in result.warnings}
    assert result.total["compacted_m3"] == pytest.approx(4800)


@given(
    st.lists(st.tuples(st.floats(1, 100), st.floats(1, 100), st.floats(1, 100)), min_size=1, max_size=8),
    st.lists(st.floats(1, 200), min_size=8, max_size=8),
)
def test_fitted_shares_fill_every_area_and_place_every_material(rows, volumes):
    brought = np.array(rows)
    volumes = np.array(volumes[: len(rows)])
    shares = fitted_shares(brought, volumes)
    assert shares.sum(axis=1) == pytest.approx(1.0)
    assert (shares >= 0).all()
    wanted = brought.sum(axis=0) / brought.sum()
    assert (shares * volumes[:, None]).sum(axis=0) / volumes.sum() == pytest.approx(wanted, rel=1e-9)


def test_what_only_one_block_gets_stays_with_its_fill():
    shares = fitted_shares(np.array([[10.0, 0.0], [0.0, 5.0], [3.0, 2.0]]), np.array([10.5, 4.8, 4.7]))
    assert shares[0].tolist() == pytest.approx([1.0, 0.0], abs=1e-6)
    assert shares[1].tolist() == pytest.approx([0.0, 1.0], abs=1e-6)


def test_scarifying_is_the_rest_of_the_ledger(tmp_path):
    result = lifts(site(tmp_path, {"scarify": [{"depth": 0.2}]}))
    assert result.scarify_m3 > 0
    lifted = result.total["materials"][0]["dry_mass_t"]
    assert lifted + result.scarify_t["silt"] == pytest.approx(result.ledger_t["silt"], rel=1e-9)


def test_days_at_the_placing_rate(tmp_path):
    result = lifts(site(tmp_path, {"calendar.idle": [2]}))
    days = result.to_dict()["days"]
    assert [day["compacted_m3"] for day in days] == pytest.approx([1000, 0, 1000, 1000, 1000, 1000, 1000])
    assert days[0]["lifts"] == [{"fill": "fill 1", "lift": 1, "compacted_m3": pytest.approx(1000)}]
    assert [(x["lift"], round(x["compacted_m3"])) for x in days[2]["lifts"]] == [(1, 200), (2, 800)]
    assert [(lift.first_day, lift.last_day) for lift in result.lifts] == [(1, 3), (3, 4), (4, 5), (5, 6), (6, 7)]


def test_without_water_there_are_lifts_and_no_days(tmp_path):
    result = lifts(site(tmp_path, without=("water",)))
    assert len(result.lifts) == 5
    assert result.days == ()
    assert result.lifts[0].first_day is None


def test_rollers_give_passes_and_hours(tmp_path):
    roller = {"width": 2.0, "speed": 5.0, "passes": 5, "efficiency": 0.8, "count": 2}
    result = lifts(site(tmp_path, {"roller": [roller]}))
    assert result.rolled_m3_h == pytest.approx(2 * 2.0 * 5000 * 0.2 * 0.8 / 5)  # 640 m³/h
    assert result.lifts[0].roller_hours == pytest.approx(1200 / 640)
    assert result.lifts[0].passes == 5


def test_small_and_narrow_lifts_are_named(tmp_path):
    result = lifts(site(tmp_path, {"plant": {"least_area": 7000, "least_width": 70}}))
    assert {w.code for w in result.warnings} >= {"small-lifts", "narrow-lifts"}
    assert result.lifts[0].flags == ("too small for the plant", "too narrow for the plant")
    assert result.lifts[0].width_m == pytest.approx(60, abs=1.5)
    fine = lifts(site(tmp_path, {"plant": {"least_area": 5000, "least_width": 50}}))
    assert fine.lifts[0].flags == ()


def test_lifts_thicker_than_the_plant_are_refused(tmp_path):
    roller = {"width": 2.0, "speed": 5.0, "passes": 5, "efficiency": 0.8, "lift_limit": 0.15}
    with pytest.raises(SiteFileError, match=r"fill.lift_thickness = 0.2 m: the roller works lifts of at most 0.15 m"):
        site(tmp_path, {"roller": [roller]})
    loose = site(tmp_path, {"roller": [roller], "fill.loose_lift_thickness": 0.3}, without=("fill.lift_thickness",))
    with pytest.raises(PlanError, match=r"a lift is 0.211 m compacted; the roller works at most 0.15 m.*fill.loose_lift"):
        lifts(loose)  # 0.3 × 1200 / 1710


def test_the_usual_lift_is_assumed_with_a_warning(tmp_path):
    result = lifts(site(tmp_path, without=("fill.lift_thickness",)))
    assert result.lift_m == 0.2
    assert "lift-thickness-assumed" in {w.code for w in result.warnings}


def test_wet_soil_is_to_dry_and_never_offsets_what_is_to_wet(tmp_path):
    result = lifts(site(tmp_path, {"material.silt.bank.water_content": 20.0}))
    assert result.total["water_to_add_l"] == 0
    assert result.total["water_to_dry_l"] == pytest.approx(6000 * 1710 * 0.05)


def test_drying_on_the_way(tmp_path):
    given = lifts(site(tmp_path, {"moisture.drying_on_the_way": 1.0}))
    assert given.total["water_to_add_l"] == pytest.approx(6000 * 1710 * 0.08)
    # 5 mm in 10 hours, half an hour: 0.25 mm of 0.285 m × 1200 kg/m³ = 342 kg/m²
    guessed = lifts(site(tmp_path, {"moisture.exposed_time": 30}))
    assert guessed.total["water_to_add_l"] == pytest.approx(6000 * 17.10 * (7.0 + 100 * 0.25 / 342), rel=1e-9)


def test_a_site_without_soil_layers_is_refused(tmp_path):
    with pytest.raises(SiteFileError, match=r"lifts needs at least one \[\[stratum\]\]"):
        lifts(site(tmp_path, without=("stratum",)))


@given(st.lists(st.lists(st.floats(0.1, 50), min_size=1, max_size=5), min_size=1, max_size=4), st.integers(1, 3))
def test_every_fill_is_placed_whole_and_bottom_up(fills, at_once):
    order = placing_order(fills, at_once)
    for k, volumes in enumerate(fills):
        pieces = [(lift, volume) for fill, lift, volume in order if fill == k]
        assert [lift for lift, _ in pieces] == sorted(lift for lift, _ in pieces)
        for lift, volume in enumerate(volumes):
            assert math.fsum(v for i, v in pieces if i == lift) == pytest.approx(volume)


@given(st.lists(st.floats(0.1, 500), min_size=1, max_size=20), st.floats(20, 400))
def test_days_hold_the_placing_rate_and_add_up(volumes, rate):
    days = schedule(list(enumerate(volumes)), rate, WorkCalendar())
    assert math.fsum(day.compacted_m3 for day in days) == pytest.approx(math.fsum(volumes))
    assert all(day.compacted_m3 == pytest.approx(rate) for day in days[:-1])
    assert days[-1].compacted_m3 <= rate * (1 + 1e-8)


def test_a_calendar_that_never_works_and_a_rate_that_never_ends_are_refused():
    calendar = WorkCalendar(start=datetime.date(2027, 5, 3), working_days=())
    with pytest.raises(PlanError, match=r"no day is worked within 400 days"):
        schedule([(0, 10.0)], 5.0, calendar)
    with pytest.raises(PlanError, match=r"the fill is 1,000,000 times what it places in a day; .* within 5,000 days"):
        schedule([(0, 1e6)], 1.0, WorkCalendar())


def test_bank_tests_without_a_material_are_taken_by_their_place(tmp_path):
    # one stratum of silt below level 50; its mean of 1480 and 1520 is the bank density of the hand site
    (tmp_path / "bank.csv").write_text(
        "test,easting,northing,elevation,water_content_percent,dry_density_kg_m3\n"
        "a,500040,4399960,49.0,8,1480\nb,500060,4399950,48.5,8,1520\n"
    )
    changes = {"material.silt.bank": {"tests": "bank.csv"}}
    assert lifts(site(tmp_path, changes)).to_dict()["total"]["bank_m3"] == pytest.approx(6840.0)


@pytest.mark.parametrize("rows", [1, 2, 3, 8])
def test_a_strip_is_as_wide_as_its_cells(rows):
    strip = np.zeros((12, 30), bool)
    strip[2 : 2 + rows, 4:28] = True
    assert widest_cells(strip) == rows
    assert widest_cells(strip.T) == rows
    assert widest_cells(np.zeros((4, 4), bool)) == 0.0


def test_a_disc_is_as_wide_as_it_is_drawn():
    y, x = np.mgrid[0:81, 0:81]
    assert widest_cells(np.hypot(x - 40, y - 40) < 20.5) == pytest.approx(41, abs=1.0)
    assert widest_cells(np.hypot(x - 40.5, y - 40.5) < 20) == pytest.approx(40, abs=1.5)  # its ragged edge lies inside
