"""``lifts`` and ``water`` through the command line."""

import re

import pytest


@pytest.mark.parametrize("units", ["metric", "us"])
@pytest.mark.parametrize("command", ["lifts", "water"])
def test_they_print_in_the_units_of_the_site(run, starters, command, units):
    code, out, _ = run(command, starters[units], "--quiet")
    assert code == 0
    assert "Juniper Bench" in out
    unit = {"metric": "m³", "us": "yd³"}
    assert unit[units] in out
    assert unit["us" if units == "metric" else "metric"] not in out


def test_lifts_document(run_json, starters):
    result = run_json("lifts", starters["metric"])["result"]
    assert {"lifts", "total", "material_rule"} <= set(result)
    assert result["material_rule"] == "haul plan"  # the starter plans its haul, and has silt and claystone
    keys = {"fill", "lift", "bottom_m", "top_m", "area_m2", "compacted_m3", "dry_mass_t", "bank_m3", "loose_m3",
            "loads", "water_to_add_l", "water_to_dry_l"}  # fmt: skip
    assert keys <= set(result["lifts"][0])
    assert sum(row["compacted_m3"] for row in result["lifts"]) == pytest.approx(result["total"]["compacted_m3"])
    volumes = run_json("volumes", starters["metric"])["result"]
    placed = volumes["total"]["fill_m3"] + volumes["over_excavation_m3"]
    assert result["total"]["compacted_m3"] == pytest.approx(placed, rel=1e-9)


def test_water_document(run_json, starters):
    result = run_json("water", starters["metric"])["result"]
    keys = {"materials", "days", "total_l", "peak_day_l", "trucks", "truck_cycle_min", "standpipe_use_percent",
            "tank_needed_l", "tank_note", "first_short_day", "first_short_hour"}  # fmt: skip
    assert keys <= set(result)
    day = {"day", "compacted_m3", "compaction_l", "evaporation_l", "dust_l", "waste_l", "total_l", "supply_l",
           "tank_end_l", "shortfall_l", "achievable_m3", "limited_by", "truck_loads"}  # fmt: skip
    assert day <= set(result["days"][0])
    assert sum(d["total_l"] for d in result["days"]) == pytest.approx(result["total_l"])


def test_the_same_input_gives_the_same_bytes(run, starters):
    first = run("water", starters["us"], "--json", "--quiet", "--threads", "1")
    assert run("water", starters["us"], "--json", "--quiet", "--threads", "3") == first


def test_missing_sections_are_named(run, starters, tmp_path):
    text = starters["metric"].read_text()
    for name in ("existing.tif", "finished.tif", "plan.gpkg"):
        (tmp_path / name).write_bytes((starters["metric"].parent / name).read_bytes())
    (tmp_path / "site.toml").write_text(re.sub(r"(?s)\[water\].*?(?=\n\[)", "", text))
    code, out, err = run("water", tmp_path / "site.toml")
    assert (code, out) == (2, "")
    assert "water needs [water]" in err
