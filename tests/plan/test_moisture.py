"""Moisture arithmetic, drying options and roller output."""

import pytest
from hypothesis import example, given
from hypothesis import strategies as st

from earthwork.plan import bare_soil, drying, moisture, placing
from tests.published import evaporation as weather
from tests.published import water as published

LB_GAL = 8.345


def test_water_rate_of_a_working_hour():
    case = published.WATER_RATE
    need = moisture.water_need(case["dry_lb_yd3"] / 27 * published.LB_FT3, case["from"], case["to"])
    litres_h = need.to_add_l_per_m3 * case["rate_yd3_h"] * published.YD3_M3
    assert litres_h / 0.45359237 == pytest.approx(case["lb_h"], rel=1e-6)
    assert litres_h / published.GAL_L == pytest.approx(case["gal_h"], rel=1e-4)


def test_water_on_a_lift():
    case = published.WATER_ON_LIFT
    need = moisture.water_need(case["dry_lb_ft3"] * published.LB_FT3, 0.0, case["points"])
    depth = moisture.depth_on_lift_mm(need.to_add_l_per_m3, case["lift_ft"] * 0.3048)
    gallons = depth * 0.83612736 / published.GAL_L * LB_GAL / case["lb_gal"]
    assert gallons == pytest.approx(case["gal_yd2"], rel=2e-4)


@pytest.mark.parametrize(("density", "gallons"), published.GALLONS_PER_POINT.items())
def test_gallons_per_yard_and_point(density, gallons):
    need = moisture.water_need(density * published.LB_FT3, 10.0, 11.0)
    assert need.to_add_l_per_m3 / published.GAL_L * published.YD3_M3 == pytest.approx(gallons, rel=3e-4)


@pytest.mark.parametrize(("density", "litres"), published.LITRES_PER_POINT.items())
def test_litres_per_cubic_metre_and_point(density, litres):
    assert moisture.water_need(density, 11.0, 10.0).to_dry_l_per_m3 == pytest.approx(litres)
    assert moisture.water_need(density, 10.0, 11.0).to_add_l_per_m3 == pytest.approx(litres)


def test_water_follows_dry_mass_in_every_state():
    case = published.WATER_OF_STATES
    bank = case["bank_lb_ft3"] * published.LB_FT3
    loose = bank / (1 + case["swell"])
    bank_volume = case["volume_yd3"] * published.YD3_M3
    in_bank = moisture.water_need(bank, 0.0, case["points"]).to_add_l_per_m3 * bank_volume
    in_truck = (
        moisture.water_need(loose, 0.0, case["points"]).to_add_l_per_m3 * bank_volume * (1 + case["swell"])
    )
    assert in_bank == pytest.approx(in_truck, rel=1e-12)
    assert in_bank / 0.45359237 == pytest.approx(case["lb"], rel=1e-6)


def test_points_are_of_dry_mass():
    case = published.WATER_ON_DRY_MASS
    dry = case["moist_kg"] / (1 + case["from"] / 100)
    assert moisture.water_need(dry, case["from"], case["to"]).to_add_l_per_m3 == pytest.approx(
        case["kg"], rel=1e-5
    )


def test_unknown_or_unasked_water_needs_none():
    assert moisture.water_need(2000.0, None, 10.0) == moisture.WaterNeed(0.0, 0.0)
    assert moisture.water_need(2000.0, 10.0, None) == moisture.WaterNeed(0.0, 0.0)
    with pytest.raises(ValueError, match=r"fill dry density is 0 kg/m³; it must be more than 0"):
        moisture.water_need(0.0, 1.0, 2.0)


@given(st.floats(1000, 2400), st.floats(0, 60), st.floats(0, 60))
def test_wetting_and_drying_never_occur_together(density, arriving, target):
    need = moisture.water_need(density, arriving, target)
    assert min(need.to_add_l_per_m3, need.to_dry_l_per_m3) == 0
    assert need.to_add_l_per_m3 - need.to_dry_l_per_m3 == pytest.approx(density * (target - arriving) / 100)


@pytest.mark.parametrize("wet_in", ["lift", "cut"])
def test_lift_and_cut_share_the_whole_need(wet_in):
    split = moisture.wetting(
        153.0,
        fill_dry_density_kg_m3=1700,
        lift_thickness_m=0.2,
        limit_points=3,
        limit_depth_mm=10,
        wet_in=wet_in,
    )
    assert split.in_lift_l_per_m3 + split.in_cut_l_per_m3 == pytest.approx(153.0)
    assert split.lift_takes_l_per_m3 == 50.0  # 10 mm on 0.2 m, under 3 points of 1700 kg/m³ (51 L)
    assert split.passes_in_lift == 4  # 153 / 50 = 3.06


def test_a_need_at_the_limit_takes_one_pass_and_just_over_it_two():
    given = {"fill_dry_density_kg_m3": 2000, "lift_thickness_m": 0.1, "limit_points": 3, "limit_depth_mm": 10}
    assert moisture.wetting(60.0, **given).passes_in_lift == 1  # 3 points of 2000 kg/m³ = 60 L = 6 mm
    assert moisture.wetting(60.001, **given).passes_in_lift == 2
    assert moisture.wetting(0.0, **given).passes_in_lift == 0


@given(st.floats(12, 40), st.floats(0, 11), st.floats(0.5, 0.99))
def test_a_mix_has_the_target_water_content(wet, dry, share):
    target = dry + share * (wet - dry)
    part = moisture.dry_share_of_mix(wet, dry, target)
    assert part is not None
    assert moisture.water_content_of_mix([1 - part, part], [wet, dry]) == pytest.approx(target)


def test_a_material_no_drier_than_the_target_does_not_mend_a_mix():
    option = drying.mixing(material="clay", arriving=26.0, target=20.0, other="silt", other_arriving=20.0)
    assert not option.possible
    assert "no drier than the target" in option.note
    unknown = drying.mixing(material="clay", arriving=26.0, target=20.0, other="silt", other_arriving=None)
    assert "material.silt.bank.water_content" in unknown.note


def _spread(**changed):
    given = {
        "material": "clay", "to_dry_l_per_m3": 85.0, "fill_dry_density_kg_m3": 1700.0,
        "loose_dry_density_kg_m3": 1275.0, "spread_m": 0.2, "reference_mm_day": 5.0, "turns_per_day": 2.0,
        "surface": None, "placing_m3_day": 900.0, "area_m2": None,
    }  # fmt: skip
    return drying.spreading(**{**given, **changed})


def test_spreading_by_hand():
    # 0.2 m × 1275 = 255 kg/m² of dry soil = 0.15 m compacted; 85 L/m³ × 0.15 = 12.75 mm; 5 × 1.2 = 6 mm/day
    option = _spread()
    assert option.water_l_m2 == pytest.approx(12.75)
    assert option.days == pytest.approx(2.125)
    assert option.area_m2 == pytest.approx(900 * 2.125 / 0.15)
    short = _spread(area_m2=6000.0)
    assert short.possible
    assert "too small for the placing rate" in short.note
    assert short.volume_per_day_m3 == pytest.approx(6000 * 0.15 / 2.125)


def test_an_unturned_layer_seals():
    loam = bare_soil.SurfaceSoil(9.0, 12.0)
    assert not _spread(turns_per_day=0, surface=loam).possible  # 12.75 mm of 12
    assert _spread(turns_per_day=0, surface=loam, spread_m=0.15).possible  # 9.6 mm
    assert _spread(turns_per_day=1, surface=loam).days < _spread(turns_per_day=0.25, surface=loam).days


def test_drying_of_loam_by_hand():
    case = weather.DRYING_LOAM
    soil = bare_soil.SurfaceSoil(case["readily"], case["total"])
    lost = bare_soil.evaporation_series([case["reference"]] * 4, [0] * 4, soil)
    assert lost == pytest.approx(case["by_hand"])


@given(st.lists(st.floats(0, 12), min_size=1, max_size=30), st.floats(1, 12), st.floats(0, 20))
@example([0.75, 4.0, 0.0], 2.103398918200582, 3.103398918200582)
def test_bare_soil_never_loses_more_than_it_can(reference, readily, more):
    soil = bare_soil.SurfaceSoil(readily, readily + more)
    lost = bare_soil.evaporation_series(reference, [0] * len(reference), soil)
    assert sum(lost) <= soil.total_mm + 1e-9
    assert all(0 <= e <= 1.2 * r + 1e-12 for e, r in zip(lost, reference, strict=True))


@pytest.mark.parametrize("texture", bare_soil.TEXTURES)
def test_total_evaporable_water_lies_in_the_range_of_table_19(texture):
    low, high = weather.FAO56_TOTAL_EVAPORABLE[texture]
    assert low <= bare_soil.surface_of_texture(texture).total_mm <= high


def test_impossible_surfaces_are_refused():
    with pytest.raises(
        ValueError, match=r"readily evaporable water is 20 mm and total evaporable water 9 mm"
    ):
        bare_soil.SurfaceSoil(20.0, 9.0)
    with pytest.raises(ValueError, match=r"texture is 'peat'; it must be one of sand, loamy sand"):
        bare_soil.surface_of_texture("peat")


@pytest.mark.parametrize("case", published.ROLLERS, ids=lambda case: case["source"])
def test_roller_output(case):
    output = placing.roller_output_m3_h(
        case["width_m"], case["speed_m_s"], case["lift_m"], case["efficiency"], case["passes"]
    )
    assert output == pytest.approx(case["m3_h"], rel=case["rel"])


def test_roller_output_refuses_zero_efficiency():
    with pytest.raises(ValueError, match=r"roller: efficiency is 0; it must be more than 0"):
        placing.roller_output_m3_h(2.0, 1.0, 0.2, 0.0, 4)
    with pytest.raises(ValueError, match=r"roller: efficiency is 1.2; it must be at most 1"):
        placing.roller_output_m3_h(2.0, 1.0, 0.2, 1.2, 4)


def test_first_limit_is_the_smallest_and_digging_comes_before_water():
    assert placing.first_limit({"water": 10.0, "digging": 10.0}) == ("digging", 10.0)
    assert placing.first_limit({"water": None}) == (None, None)
