"""From SI to display units, against factors worked by hand."""

import pandas as pd
import pytest

from earthwork.reporting.display import decimals, display_key, display_table, plain, show
from earthwork.units import METRIC, US, UnitSystem

# One US unit in SI, from the definitions 1 yd = 0.9144 m, 1 lb = 0.45359237 kg, 1 US gal = 231 in³.
YARD3 = 0.9144**3
GALLON = 231 * 0.0254**3 * 1000


@pytest.mark.parametrize(
    ("key", "name", "one_is"),
    [
        ("cut_m3", "cut_yd3", YARD3),
        ("area_m2", "area_ft2", 0.3048**2),
        ("max_cut_m", "max_cut_ft", 0.3048),
        ("fill_dry_density_kg_m3", "fill_dry_density_lb_ft3", 0.45359237 / 0.3048**3),
        ("dry_mass_t", "dry_mass_ton", 0.90718474),
        ("total_l", "total_gal", GALLON),
        ("water_to_add_l_per_m3", "water_to_add_gal_per_yd3", GALLON / YARD3),
        ("total_t_km", "total_ton_mile", 0.90718474 * 1.609344),
        ("speed_km_h", "speed_mph", 1.609344),
        ("distance_km", "distance_mile", 1.609344),
        ("supply_l_min", "supply_gal_min", GALLON),
        ("surplus_change_per_cm_m3", "surplus_change_per_tenth_ft_yd3", YARD3 * 0.01 / 0.03048),
    ],
)
def test_keys_and_factors(key, name, one_is):
    shown, factor = display_key(key, US)
    assert shown == name
    assert factor == pytest.approx(1 / one_is, rel=1e-12)
    assert display_key(key, METRIC) == (key, pytest.approx(1.0, rel=1e-15))


@pytest.mark.parametrize("key", ["zone", "lift", "shrinkage_factor", "swell_percent", "truck_cycle_min", "loads", "m3"])
def test_what_has_no_unit_stays(key):
    assert display_key(key, US) == (key, 1.0)


def test_us_survey_feet_hold_for_lengths_only():
    survey = UnitSystem("us", 1200 / 3937)
    assert display_key("shift_m", survey)[1] == pytest.approx(3937 / 1200, rel=1e-15)
    assert display_key("area_m2", survey)[1] == pytest.approx(1 / 0.3048**2, rel=1e-12)


def test_tables_keep_names_and_what_is_absent():
    table = pd.DataFrame({"material": ["a", "b"], "cut_m3": [YARD3, None], "loads": [3, 4]})
    shown = display_table(table, US)
    assert list(shown.columns) == ["material", "cut_yd3", "loads"]
    assert shown["cut_yd3"][0] == pytest.approx(1.0)
    assert pd.isna(shown["cut_yd3"][1])


@pytest.mark.parametrize(
    ("values", "dimension", "places"),
    [([12345.6], "soil_volume", 0), ([99.9], "soil_volume", 1), ([0.5], "soil_volume", 2), ([], "area", 0),
     ([1700.0], "density", 0), ([110.0], "density", 1), ([None, float("nan")], "mass", 0), ([7.0], "length", 2)],
)  # fmt: skip
def test_decimals(values, dimension, places):
    assert decimals(values, dimension) == places


def test_numbers_for_people():
    assert plain(1234567.8, 0) == "1,234,568"
    assert plain(float("nan"), 2) == "–"
    assert plain(-0.0, 0) == "0"
    assert show(None, "area", METRIC) == "–"
    assert show(-25.0, "soil_volume", METRIC, sign=True) == "−25.0 m³"
    assert show(1700.0, "density", US) == "106.1 lb/ft³"
