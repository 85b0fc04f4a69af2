"""Larkspur Campus: the program against plain numpy, and its story against its numbers."""

import csv

import numpy as np
import pytest
import rasterio

import earthwork
from tests.samples.ground_by_numpy import SAMPLES, Plan, bilinear

FOLDER = SAMPLES / "larkspur-campus"
#: Ground length / map length at 40.30° N, 98.86° W, 618 m: k = 0.9996019 (UTM 14N), R = 6,371 km, by hand.
GROUND_SCALE = 1.000495


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
    """Cut, fill and the lines beside them [m³], cell by cell."""
    plan = Plan(FOLDER)
    cell = (plan.transform.a * GROUND_SCALE) ** 2
    existing, finished = plan.elevation("existing"), plan.elevation("finished")
    limits = plan.inside("limits")
    grading = plan.inside("grading") & limits
    stripped = existing - 0.15 * grading
    houses, pavement, green = (plan.inside(layer) for layer in ("buildings", "pavement", "green"))
    subgrade = finished - 0.40 * houses - 0.45 * pavement - 0.15 * green
    with rasterio.open(FOLDER / "shale_top.tif") as source:
        shale = bilinear(source.read(1).astype(float), source.transform, *plan.centres())
    depth = np.where(limits, subgrade - stripped, 0.0)
    shale_cut = np.clip(np.minimum(shale, stripped) - subgrade, 0, None)[limits]
    return {
        "area_m2": limits.sum() * cell,
        "disturbed_area_m2": grading.sum() * cell,
        "cut_m3": -depth[depth < 0].sum() * cell,
        "fill_m3": depth[depth > 0].sum() * cell,
        "strip_m3": 0.15 * grading.sum() * cell,
        "section_m3": (0.40 * houses + 0.45 * pavement + 0.15 * green)[limits].sum() * cell,
        "over_excavation_m3": 1.0 * (plan.inside("pads", 1.5 / GROUND_SCALE) & limits).sum() * cell,
        "shale_cut_m3": shale_cut.sum() * cell,
        "max_cut_m": -depth.min(),
        "max_fill_m": depth.max(),
    }


@pytest.mark.parametrize(
    ("key", "tolerance"),
    [
        ("area_m2", 5e-4), ("disturbed_area_m2", 2e-3), ("cut_m3", 2e-3), ("fill_m3", 2e-3), ("strip_m3", 2e-3),
        ("section_m3", 3e-3), ("over_excavation_m3", 3e-3), ("max_cut_m", 0.03), ("max_fill_m", 0.03),
    ],
)  # fmt: skip
def test_volumes_agree_with_numpy(volumes, by_numpy, key, tolerance):
    found = volumes["total"].get(key, volumes.get(key))
    assert found == pytest.approx(by_numpy[key], rel=tolerance)


def test_shale_is_told_from_loess(volumes, by_numpy):
    cut = {row["material"]: row["cut_m3"] for row in volumes["materials"]}
    assert cut["shale"] == pytest.approx(by_numpy["shale_cut_m3"], rel=5e-3)
    assert cut["loess"] + cut["shale"] == pytest.approx(volumes["total"]["cut_m3"], rel=1e-9)


def test_phases_and_the_rest_add_up_to_the_site(volumes):
    parts = [*volumes["zones"], volumes["outside_zones"]]
    for key in ("area_m2", "cut_m3", "fill_m3", "strip_m3", "section_m3", "over_excavation_m3", "scarify_m3"):
        assert sum(part[key] for part in parts) == pytest.approx(volumes["total"][key], rel=1e-9), key


def test_ground_scale(volumes):
    assert volumes["grid"]["ground_scale"] == pytest.approx(GROUND_SCALE, abs=2e-6)


def test_ground_that_is_not_graded_stays_as_it_is():
    plan = Plan(FOLDER)
    outside = ~plan.inside("grading") & plan.inside("limits")
    assert (plan.elevation("existing") == plan.elevation("finished"))[outside].all()


def test_loess_and_shale_by_hand(balance):
    """1430 / (0.965 × 1761) = 0.8415, less 2 % lost; shale 2250 / 2000 = 1.125, less 1 % lost.

    The loess below 6 m in the deep fill is rolled to 99 %: 1430 / (0.99 × 1761) = 0.8202.
    """
    of = {row["material"]: row for row in balance["materials"]}
    loess = of["loess"]
    bank = loess["cut_bank_m3"] + loess["over_excavation_bank_m3"] + loess["allowance_bank_m3"]
    assert loess["allowance_bank_m3"] == 650
    assert loess["dry_mass_t"] == pytest.approx(bank * 1.430, rel=1e-9)
    assert 0.8202 * 0.98 * bank < loess["compacted_m3"] < 0.8415 * 0.98 * bank
    assert loess["loose_m3"] == pytest.approx(bank * 1430 / 1150, rel=0.021)
    shale = of["shale"]
    assert shale["compacted_m3"] == pytest.approx(shale["cut_bank_m3"] * 1.125 * 0.99, rel=1e-9)


def test_site_is_short_and_some_decimetres_mend_it(balance):
    assert -5000 < balance["surplus_compacted_m3"] < -3000
    shift = balance["grade_shift"]
    assert -0.40 < shift["shift_m"] < -0.10
    assert abs(shift["surplus_compacted_m3"]) < abs(shift["surplus_change_per_cm_m3"])
    # The pads cover 18,032 m² on the map; each centimetre moves about that much earth, less the shrinkage of its cut.
    assert shift["area_m2"] == pytest.approx(18032 * GROUND_SCALE**2, rel=1e-3)
    assert -180.5 < shift["surplus_change_per_cm_m3"] < -148


def test_topsoil_leaves_while_loess_comes(balance):
    assert [row["material"] for row in balance["imports"]] == ["loess"]
    assert [row["material"] for row in balance["exports"]] == ["topsoil"]
    topsoil = balance["topsoil"]
    assert topsoil["stripped_m3"] - topsoil["respread_m3"] == pytest.approx(topsoil["surplus_m3"], rel=1e-9)


def test_ledger_closes_in_dry_mass(balance):
    sent = sum(row["dry_mass_t"] for row in balance["ledger"])
    known = sum(row["dry_mass_t"] for row in balance["materials"])
    known += sum(row["dry_mass_t"] for row in balance["imports"])
    assert abs(balance["ledger_closure_t"]) < 1e-9 * sent
    assert sent == pytest.approx(known, rel=1e-9)


def test_soil_card_is_that_of_the_laboratory(site):
    """Means by numpy; the maximum within 1 % of a parabola's, and the optimum within half a point."""
    card = {row["material"]: row for row in earthwork.soil(site).to_dict()["materials"]}
    loess = card["loess"]
    points = np.array([[float(v) for v in row[1:]] for row in rows_of("proctor.csv")])
    a, b, c = np.polyfit(points[:, 0], points[:, 1], 2)
    assert loess["max_dry_density_kg_m3"] == pytest.approx(c - b**2 / (4 * a), rel=0.01)
    assert loess["optimum_water_content_percent"] == pytest.approx(-b / (2 * a), abs=0.5)
    for material, count in (("loess", 15), ("shale", 3)):
        tests = [row for row in rows_of("bank.csv") if row[1] == material]
        assert len(tests) == card[material]["tests"]["bank"]["count"] == count
        assert card[material]["bank_dry_density_kg_m3"] == pytest.approx(np.mean([float(row[7]) for row in tests]))
        assert card[material]["bank_water_content_percent"] == pytest.approx(np.mean([float(row[6]) for row in tests]))
    log = [float(row[7]) for row in rows_of("field_log.csv")]
    reached = np.mean(log) / loess["max_dry_density_kg_m3"] * 100
    assert reached == pytest.approx(site.model.fill.expected_compaction, abs=0.4)


def test_water_runs_short_in_the_driest_week_and_what_mends_it(site):
    """One well gives 280 × 1440 L a day; what the soil wants by its laboratory figures, July by the weather file."""
    result = earthwork.water(site).to_dict()
    soil = next(row for row in result["materials"] if row["material"] == "loess")
    assert soil["arriving_water_content_percent"] == pytest.approx(7.43 - 0.3, abs=0.01)  # mean of 15, less on the way
    assert soil["target_water_content_percent"] == pytest.approx(16.7, abs=0.05)  # as the README tells
    days = result["days"]
    short = [day["date"] for day in days if day["shortfall_l"] > 0]
    temperature = {row[0]: float(row[1]) for row in rows_of("weather.csv")}
    weeks = {first: np.mean(list(temperature.values())[i : i + 7]) for i, first in enumerate(temperature)}
    hottest = max(list(weeks)[:-6], key=weeks.get)
    assert short
    assert all(hottest <= date <= "2026-07-19" for date in short)
    assert all(day["supply_l"] == pytest.approx(280 * 1440) for day in days)
    ways = {row["remedy"]: row for row in result["remedies"]}
    assert ways["more standpipes"]["standpipes"] == 2
    missing = sum(day["shortfall_l"] for day in days)
    assert ways["a larger tank"]["tank_l"] == pytest.approx(300_000 + missing)  # it never fills in between
    assert 1600 < ways["a slower placing rate"]["placing_rate_per_day_m3"] < 1800


def rows_of(name):
    with (FOLDER / "lab" / name).open(encoding="utf-8", newline="") as source:
        return list(csv.reader(source))[1:]
