"""The balance on sites whose figures can be worked on paper.

The step: level ground at 10 m, 100 m × 100 m; the west half is cut by 1 m, the east half filled by 1 m. Loess of
1600 kg/m³ becomes fill of 1800 kg/m³: SF = 8/9.
"""

import numpy as np
import pytest

import earthwork
from earthwork.errors import PlanError, SiteFileError
from earthwork.plan.movements import whole_loads
from earthwork.site.model import HaulTruck
from tests.plan.conftest import FILL, LOESS

SF = 8 / 9
STRATA = [{"material": "loess"}]


def step(height=1.0):
    existing = np.full((100, 100), 10.0)
    finished = existing.copy()
    finished[:, :50] -= height
    finished[:, 50:] += height
    return existing, finished


def balanced(make_site, **tables):
    tables = {"stratum": STRATA, "material": {"loess": LOESS}, "fill": FILL, **tables}
    return earthwork.balance(make_site(*step(), **tables))


def test_available_against_required(make_site):
    b = balanced(make_site)
    assert b.available_compacted_m3 == pytest.approx(5000 * SF, rel=1e-12)
    assert b.required_compacted_m3 == pytest.approx(5000)
    assert b.surplus_compacted_m3 == pytest.approx(5000 * (SF - 1), rel=1e-9)


def test_shortage_is_imported_in_every_state(make_site):
    # Short of 555.56 m³ compacted = 1000 t dry = 625 m³ bank = 781.25 m³ loose; 1100 t moist.
    b = balanced(make_site, haul={"truck": {"heaped_volume": 10, "payload": 20}})
    (move,) = b.imports
    assert (move.material, move.reason) == ("loess", "shortage")
    assert move.compacted_m3 == pytest.approx(5000 / 9)
    assert move.dry_mass_kg == pytest.approx(1e6)
    assert move.bank_m3 == pytest.approx(625)
    assert move.loose_m3 == pytest.approx(781.25)
    assert move.loads == 79  # 78.1 by volume, 55 by weight
    assert b.exports == ()


def test_loss_takes_from_what_is_available_and_adds_to_what_is_dug(make_site):
    b = balanced(make_site, material={"loess": {**LOESS, "loss_percent": 4}})
    assert b.available_compacted_m3 == pytest.approx(5000 * SF * 0.96)
    (move,) = b.imports
    assert move.bank_m3 == pytest.approx((5000 - 5000 * SF * 0.96) / SF / 0.96)


def test_one_point_of_shrinkage(make_site):
    # SF 0.8889 → 0.8789 on 5000 m³ of bank.
    assert balanced(make_site).account.per_shrink_point_m3 == pytest.approx(50)


def test_shift_balances_in_closed_form(make_site):
    # (1 − s) · 5000 · 8/9 = (1 + s) · 5000, s = −1/17 raised; everything is disturbed and moves.
    b = balanced(make_site, balance={"step": 0.001})
    shift = b.grade_shift
    assert shift.shift_exact_m == pytest.approx(-1 / 17, abs=1e-9)
    assert shift.shift_m == pytest.approx(-0.059)
    assert shift.surplus_at_exact_m3 == pytest.approx(0, abs=1e-6)
    assert shift.surplus_compacted_m3 == pytest.approx(5000 * (1.059 * SF - 0.941), rel=1e-9)
    assert shift.cut_m3 == pytest.approx(5295)
    assert shift.surplus_change_per_cm_m3 == pytest.approx(-50 * (SF + 1), rel=1e-6)
    assert shift.area_m2 == pytest.approx(10_000)
    assert shift.edge_step_m == pytest.approx(0.059)


def test_shift_aims_at_the_wanted_surplus(make_site):
    b = balanced(make_site, balance={"target_surplus": 300, "step": 0.001})
    # 5000 ((1 − s) 8/9 − (1 + s)) = 300
    assert b.grade_shift.shift_exact_m == pytest.approx((SF - 1 - 0.06) / (SF + 1), abs=1e-9)
    assert b.imports[0].compacted_m3 == pytest.approx(5000 * (1 - SF) + 300)


def test_no_shift_in_range_says_so_and_gives_the_nearest(make_site):
    b = balanced(make_site, balance={"shift_range": [-0.02, 0.05]})
    assert b.grade_shift is None
    assert b.grade_shift_nearest.shift_m == pytest.approx(-0.02)
    # 5000 ((1 − s) 8/9 − (1 + s)) at s = 0.05 and −0.02
    assert b.grade_shift_note == (
        "no shift between −0.02 and 0.05 m gives a surplus of 0 m³: it runs from −1,028 m³ at +0.05 m to −367 m³ at −0.02 m"
    )


@pytest.mark.parametrize(("shift_range", "nearest"), [([-0.5, -0.1], -0.1), ([0.1, 0.5], 0.1)])
def test_no_shift_is_found_outside_of_the_range(make_site, shift_range, nearest):
    # It balances at −1/17 = −0.0588, which lies between the range and zero, or beyond zero.
    b = balanced(make_site, balance={"shift_range": shift_range})
    assert b.grade_shift is None
    assert b.grade_shift_nearest.shift_m == pytest.approx(nearest)


def test_a_range_without_room_for_a_shift(make_site):
    b = balanced(make_site, balance={"shift_range": [0, 0]})
    assert (b.grade_shift, b.grade_shift_note) == (None, "balance.shift_range leaves no room for a shift")


def test_a_coarse_step_stays_in_the_range(make_site):
    # −0.0588 rounds to −0.1, below the range: −0 is the only step in it.
    b = balanced(make_site, balance={"shift_range": [-0.07, 0.05], "step": 0.1})
    assert b.grade_shift.shift_m == 0
    assert b.grade_shift.shift_exact_m == pytest.approx(-1 / 17, abs=1e-9)


def test_the_note_is_in_the_units_of_the_site(make_site):
    loess = {**LOESS, "bank": {"dry_density": 100, "water_content": 10},
             "proctor": {**LOESS["proctor"], "max_dry_density": 110}}  # fmt: skip
    b = balanced(make_site, units="us", material={"loess": loess}, balance={"shift_range": [0.5, 1.5]})
    assert "no shift between 0.50 and 1.50 ft gives a surplus of 0 yd³" in b.grade_shift_note


def test_surplus_leaves(make_site):
    rock = {"use": "rock", "bank": {"dry_density": 2250, "water_content": 2}, "loose": {"swell_percent": 45},
            "fill": {"dry_density": 2000}}  # fmt: skip
    b = balanced(make_site, stratum=[{"material": "rock"}], material={"rock": rock})
    # Bulks: 5000 · 1.125 − 5000 = 625 m³ too much, of 2000 kg/m³.
    (move,) = b.exports
    assert (move.material, move.reason) == ("rock", "surplus")
    assert move.dry_mass_kg == pytest.approx(625 * 2000)
    assert move.bank_m3 == pytest.approx(625 / 1.125)
    assert b.imports == ()


def test_waste_leaves_while_fill_comes(make_site):
    clay = {"use": "waste", "bank": {"dry_density": 1500, "water_content": 30}, "loose": {"swell_percent": 30}}
    b = balanced(make_site, stratum=[{"material": "clay"}], material={"loess": LOESS, "clay": clay})
    assert [m.reason for m in b.exports] == ["waste"]
    assert b.exports[0].bank_m3 == pytest.approx(5000)
    assert b.imports[0].compacted_m3 == pytest.approx(5000)
    assert b.imports[0].material == "loess"


def test_import_is_of_the_first_borrow(make_site):
    sand = {**LOESS, "bank": {"dry_density": 1700, "water_content": 5}}
    pit = {"name": "pit", "at": [500_500.0, 4_000_100.0], "material": "sand"}
    b = balanced(make_site, material={"loess": LOESS, "sand": sand}, borrow=[pit])
    assert b.imports[0].material == "sand"
    assert b.imports[0].bank_m3 == pytest.approx(1e6 / 1700)


def test_topsoil_balance(make_site):
    topsoil = {"use": "topsoil", "bank": {"dry_density": 1250, "water_content": 12}, "loose": {"swell_percent": 30}}
    b = balanced(
        make_site,
        material={"loess": LOESS, "topsoil": topsoil},
        strip=[{"material": "topsoil", "depth": 0.2}],
        section=[{"name": "lawn", "thickness": 0.15, "source": "topsoil"}],
    )
    # All 10,000 m² disturbed: 2000 m³ stripped, 1500 m³ respread.
    assert b.settlement.topsoil.stripped_m3 == pytest.approx(2000)
    assert b.settlement.topsoil.respread_m3 == pytest.approx(1500)
    assert b.settlement.topsoil.surplus_m3 == pytest.approx(500)
    assert [(m.material, m.reason) for m in b.exports] == [("topsoil", "topsoil")]
    # Cut 1 m less the strip plus the section: 0.95 m; fill 1 − 0.15 + 0.2 = 1.05 m. Topsoil is never fill.
    assert b.available_compacted_m3 == pytest.approx(5000 * 0.95 * SF)
    assert b.required_compacted_m3 == pytest.approx(5000 * 1.05)


def test_over_excavation_costs_even_on_a_level_site(make_site):
    level = np.full((40, 40), 10.0)
    tables = {"stratum": STRATA, "material": {"loess": {**LOESS, "loss_percent": 5}}, "fill": FILL}
    finished = level.copy()
    finished[0, 0] = 10.5  # something to be disturbed
    site = make_site(
        level, finished, over_excavation=[{"name": "all", "depth": 1.0}],
        ground={"disturbed": "all.geojson"}, **tables,
    )  # fmt: skip
    (site.directory / "all.geojson").write_text(
        '{"type": "FeatureCollection", "features": [{"type": "Feature", "properties": {}, "geometry": {"type": "Polygon", '
        '"coordinates": [[[499000,3999000],[501000,3999000],[501000,4001000],[499000,4001000],[499000,3999000]]]}}]}'
    )
    b = earthwork.balance(site)
    # V (1 − SF (1 − loss)) of 1600 m³, and 0.5 m³ of fill.
    assert -b.surplus_compacted_m3 == pytest.approx(1600 * (1 - SF * 0.95) + 0.5, rel=1e-6)


def test_allowances_in_each_state(make_site):
    b = balanced(
        make_site,
        allowance=[
            {"name": "trench spoil", "material": "loess", "volume": 100, "state": "bank"},
            {"name": "neighbour", "material": "loess", "volume": 125, "state": "loose"},
            {"name": "berm", "material": "loess", "volume": -50, "state": "compacted"},
        ],
    )
    # 125 m³ loose at 1280 kg/m³ are 100 m³ of bank.
    assert b.available_compacted_m3 == pytest.approx(5200 * SF)
    assert b.required_compacted_m3 == pytest.approx(5050)


def test_scarifying_costs_depth_times_one_less_sf(make_site):
    b = balanced(make_site, scarify=[{"depth": 0.3}])
    assert b.required_compacted_m3 == pytest.approx(5000 + 5000 * 0.3 * (1 - SF))


def test_deeper_bands_need_more_soil(make_site):
    band = {"below": 0.4, "relative_compaction": 98, "expected_compaction": 105}
    b = balanced(make_site, fill={**FILL, "by_depth": [band]})
    # 60 % of the fill lies below 0.4 m, at 1890 kg/m³; the mean placed density is 0.4 · 1800 + 0.6 · 1890.
    assert b.available_compacted_m3 == pytest.approx(5000 * 1600 / (0.4 * 1800 + 0.6 * 1890))


def test_ledger_closes_and_names_every_tonne(make_site):
    topsoil = {"use": "topsoil", "bank": {"dry_density": 1250}, "loose": {"swell_percent": 30}}
    b = balanced(
        make_site,
        material={"loess": {**LOESS, "loss_percent": 3}, "topsoil": topsoil},
        strip=[{"material": "topsoil", "depth": 0.2}],
        balance={"target_surplus": 40},
    )
    assert abs(b.settlement.open_kg) <= 1e-9 * sum(r.dry_mass_kg for r in b.ledger)
    dug = {}
    for row in b.ledger:
        if row.source != "import":
            dug[row.material] = dug.get(row.material, 0.0) + row.dry_mass_kg
    # Cut 0.8 m of 5000 m² loess, 2000 m³ topsoil.
    assert dug == {"loess": pytest.approx(4000 * 1600), "topsoil": pytest.approx(2000 * 1250)}
    placed = sum(r.dry_mass_kg for r in b.ledger if r.sink == "fill")
    assert placed == pytest.approx(b.required_compacted_m3 * 1800, rel=1e-12)
    assert sum(r.dry_mass_kg for r in b.ledger if r.sink == "in hand") == pytest.approx(40 * 1800)


def test_us_site_mirrors_a_metric_one(make_site):
    existing, finished = step()
    us = {
        "use": "fill", "specific_gravity": 2.7,
        "bank": {"dry_density": "1600 kg/m3", "water_content": 10}, "loose": {"swell_percent": 25},
        "proctor": {"method": "ASTM D698", "max_dry_density": "1800 kg/m3", "optimum_water_content": 14},
    }  # fmt: skip
    site = make_site(
        existing, finished, units="us", stratum=STRATA, material={"loess": us}, fill=FILL,
        ground={"existing": {"file": "existing.tif", "vertical_unit": "m"},
                "finished": {"file": "finished.tif", "vertical_unit": "m"}},
        balance={"step": "1 mm"},
    )  # fmt: skip
    metric = balanced(make_site, balance={"step": 0.001})
    b = earthwork.balance(site)
    # A grid without CRS lies in the site's unit: cells of one foot, elevations in metres as stated.
    assert b.surplus_compacted_m3 == pytest.approx(metric.surplus_compacted_m3 * 0.3048**2, rel=1e-9)
    assert b.grade_shift.shift_exact_m == pytest.approx(metric.grade_shift.shift_exact_m, abs=1e-9)


def test_needs_a_material_for_the_cut(make_site):
    with pytest.raises(SiteFileError, match=r"at least one \[\[stratum\]\]"):
        balanced(make_site, stratum=[])


def test_short_without_any_fill_material_is_refused(make_site):
    clay = {"use": "waste", "bank": {"dry_density": 1500}, "loose": {"swell_percent": 30}}
    with pytest.raises(PlanError, match=r"no material has use = \"fill\""):
        balanced(make_site, stratum=[{"material": "clay"}], material={"clay": clay})


def test_loads_go_by_the_limit_that_governs():
    # Published count for 500 compacted yd³, 0.95 compacted per bank, 15 % swell, 7 yd³ trucks: 87 loads of 605.26 yd³.
    assert whole_loads(HaulTruck(heaped_volume=7, payload="1e9 kg"), 605.26, 0.0) == 87
    # 1000 bank yd³ with 30 % swell: 1300 loose yd³ in 7 yd³ trucks, 186 loads.
    assert whole_loads(HaulTruck(heaped_volume=7, payload="1e9 kg"), 1300.0, 0.0) == 186
    # By weight: 100 m³ loose fill 10 trucks of 10 m³, but 250 t need 13 of 20 t.
    assert whole_loads(HaulTruck(heaped_volume=10, payload=20.0), 100.0, 250_000.0) == 13
    assert whole_loads(None, 1.0, 1.0) is None


@pytest.mark.parametrize(("survey", "known"), [({"noise": 0.05}, False), ({"noise": 0.05, "bias": 0.01}, True)])
def test_error_of_the_survey_is_never_that_of_noise_alone(make_site, survey, known):
    ground = {"survey_error": survey}
    error = earthwork.volumes(make_site(*step(), ground=ground)).survey_error()
    # Half the site is cut: 5000 m². Noise 0.05 · √5000 = 3.54 m³, bias 0.01 · 5000 = 50 m³.
    assert error["cut_sd_m3"] == (pytest.approx((12.5 + 2500) ** 0.5) if known else None)
    assert error["false_cut_m3"] == 0  # all is disturbed


def test_two_surfaces_that_are_the_same_are_told(make_site):
    level = np.full((5, 5), 10.0)
    assert "nothing-to-move" in [w.code for w in earthwork.volumes(make_site(level, level)).warnings]
    assert "nothing-to-move" not in [w.code for w in earthwork.volumes(make_site(level, level + 1)).warnings]
