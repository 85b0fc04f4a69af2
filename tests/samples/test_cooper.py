"""Cooper Ridge: US survey feet, eighteen lots, two clays; the program against plain numpy."""

import csv

import numpy as np
import pytest
import shapely

import earthwork
from tests.samples.ground_by_numpy import SAMPLES, Plan

FOLDER = SAMPLES / "cooper-ridge"
FT = 1200 / 3937
WATER_AND_DRY = ("water_content_percent", "dry_density_lb_ft3")
#: Ground length / map length at 36.02° N, 85.87° W, 195 m: k = 0.9999535 (Tennessee), R = 6,371 km, by hand.
GROUND_SCALE = 1.000077


@pytest.fixture(scope="module")
def site():
    return earthwork.Site.open(FOLDER / "site.toml")


@pytest.fixture(scope="module")
def volumes(site):
    return earthwork.volumes(site).to_dict()


@pytest.fixture(scope="module")
def balance(site):
    return earthwork.balance(site).to_dict()


@pytest.fixture(scope="module")
def by_numpy():
    """Depths [m] of subgrade over stripped ground, area of a cell [m²], and the plan."""
    plan = Plan(FOLDER)
    limits = plan.inside("limits")
    stripped = plan.elevation("existing") * FT - 0.1524 * (plan.inside("grading") & limits)
    subgrade = plan.elevation("finished") * FT - 0.254 * plan.inside("houses")
    subgrade = subgrade - 0.3556 * plan.inside("pavement") - 0.1524 * plan.inside("lawn")
    depth = np.where(limits, subgrade - stripped, 0.0)
    return depth, (3 * FT * GROUND_SCALE) ** 2, plan


def test_foot_is_the_survey_foot(site):
    assert site.units.foot_m == pytest.approx(FT, rel=1e-15)
    assert site.model.over_excavation[0].depth == pytest.approx(3 * FT, rel=1e-15)


def test_cells_are_three_survey_feet_on_the_ground(volumes):
    grid = volumes["grid"]
    assert grid["ground_scale"] == pytest.approx(GROUND_SCALE, abs=2e-6)
    assert grid["cell_m"] == pytest.approx(3 * FT * grid["ground_scale"], rel=1e-12)


def test_volumes_agree_with_numpy(volumes, by_numpy):
    depth, cell, plan = by_numpy
    total = volumes["total"]
    assert total["cut_m3"] == pytest.approx(-depth[depth < 0].sum() * cell, rel=3e-3)
    assert total["fill_m3"] == pytest.approx(depth[depth > 0].sum() * cell, rel=3e-3)
    assert volumes["over_excavation_m3"] == pytest.approx(3 * FT * plan.inside("soft").sum() * cell, rel=2e-2)


def test_lots_agree_with_numpy(volumes, by_numpy):
    depth, cell, plan = by_numpy
    east, north = plan.centres()
    columns, lots = plan.features("lots")
    assert [zone["zone"] for zone in volumes["zones"]] == list(columns["lot"])
    assert len(lots) == 18
    for lot, zone in zip(lots, volumes["zones"], strict=True):
        assert len(zone["zone"]) >= 40
        inside = shapely.contains_xy(lot, east, north)
        # Cells on the lot line are counted whole or not at all here.
        slack = 0.02 * np.abs(depth[inside]).sum() * cell + 1.0
        assert zone["area_m2"] == pytest.approx(lot.area * (FT * GROUND_SCALE) ** 2, rel=1e-5)
        assert zone["cut_minus_fill_m3"] == pytest.approx(-depth[inside].sum() * cell, abs=slack)


def test_lots_and_the_rest_add_up_to_the_site(volumes):
    parts = [*volumes["zones"], volumes["outside_zones"]]
    for key in ("area_m2", "cut_m3", "fill_m3", "strip_m3", "section_m3", "over_excavation_m3", "scarify_m3"):
        assert sum(part[key] for part in parts) == pytest.approx(volumes["total"][key], rel=1e-9), key


def test_clay_by_hand(balance):
    """98.09 lb/ft³ dry in the bank (mean of ten), 97 % of 107.8 in the fill, 3 % lost."""
    clay = next(row for row in balance["materials"] if row["material"] == "lean clay")
    bank = clay["cut_bank_m3"] + clay["over_excavation_bank_m3"] + clay["allowance_bank_m3"]
    assert clay["allowance_bank_m3"] == pytest.approx(420 * 0.764554857984, rel=1e-12)
    assert clay["compacted_m3"] == pytest.approx(bank * 98.09 / (0.97 * 107.8) * 0.97, rel=2e-3)


def test_borrow_comes_in_while_topsoil_leaves(balance):
    assert [row["material"] for row in balance["imports"]] == ["river clay"]
    assert [row["material"] for row in balance["exports"]] == ["topsoil"]
    (borrow,) = balance["imports"]
    assert borrow["compacted_m3"] == pytest.approx(-balance["surplus_compacted_m3"], rel=1e-9)
    # 94 lb/ft³ in the pit, 0.97 × 106 in the fill
    assert borrow["bank_m3"] == pytest.approx(borrow["compacted_m3"] * 0.97 * 106 / 94 / 0.97, rel=1e-9)
    assert abs(balance["ledger_closure_t"]) < 1e-9 * sum(row["dry_mass_t"] for row in balance["ledger"])


def test_soil_card_is_that_of_the_laboratory(site):
    """Means and a parabola by numpy, in lb/ft³."""

    def rows_of(name):
        with (FOLDER / "lab" / name).open(encoding="utf-8", newline="") as source:
            return list(csv.DictReader(source))

    card = {row["material"]: row for row in earthwork.soil(site).to_dict()["materials"]}["lean clay"]
    pound = 0.45359237 / 0.3048**3
    water, dry = (np.array([float(r[k]) for r in rows_of("proctor.csv")]) for k in WATER_AND_DRY)
    a, b, c = np.polyfit(water, dry, 2)
    assert card["max_dry_density_kg_m3"] / pound == pytest.approx(c - b**2 / (4 * a), rel=0.005)
    assert card["optimum_water_content_percent"] == pytest.approx(-b / (2 * a), abs=0.3)
    bank = np.mean([float(r["dry_density_lb_ft3"]) for r in rows_of("bank.csv")])
    assert card["bank_dry_density_kg_m3"] / pound == pytest.approx(bank, rel=1e-9)


def test_the_clay_is_dried_and_the_dust_wetted(site):
    """By hand in pounds: clay to dry from 22.97 to 18.22 % at 0.97 × 107.8 lb/ft³; two passes of 0.2 gal/yd²."""
    result = earthwork.water(site).to_dict()
    clay, river = (next(m for m in result["materials"] if m["material"] == n) for n in ("lean clay", "river clay"))
    pound_per_ft3 = 0.45359237 / 0.3048**3
    assert clay["water_to_dry_l_per_m3"] == pytest.approx(0.97 * 107.8 * pound_per_ft3 * (22.97 - 18.22) / 100, rel=0.01)
    assert river["water_to_dry_l_per_m3"] == pytest.approx(0.97 * 106 * pound_per_ft3 * (27 - 19.5) / 100, rel=1e-9)
    assert clay["water_to_add_l_per_m3"] == river["water_to_add_l_per_m3"] == 0
    placed = [day for day in result["days"] if day["compacted_m3"] > 0]
    for day in placed:
        assert day["compaction_l"] == 0
        assert day["water_to_dry_l"] > 0
        assert day["dust_l"] == pytest.approx(40_000 / 9 * 0.2 * 2 * 3.785411784)
    full = placed[0]
    assert full["limited_by"] == "drying"
    assert full["achievable_m3"] / full["compacted_m3"] == pytest.approx(0.47, abs=0.05)  # "half" in the README
    assert {option["method"] for option in result["drying"]} == {"turned lifts"}
    assert all(2 < option["days"] < 3.2 for option in result["drying"])
