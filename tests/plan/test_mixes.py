"""Whether there is enough dry material to mix wet soil with, on a site worked by hand."""

import pytest

from earthwork import water
from earthwork.plan.mix_supply import WetSoil, mix_supply
from earthwork.reporting.water_page import page
from tests.plan.watered import site

#: Silt at 20 % for 15 %; sand at 4 %: 5 parts of sand to 11 of silt by dry mass. In the fill 1710 and 0.95 × 1900 = 1805
#: kg/m³: a fill of 6000 m³ of the mix holds y of sand and 2.2 y of silt, y / 1805 + 2.2 y / 1710 = 6000.
WET = {
    "material.silt.bank.water_content": 20.0,
    "material.sand": {
        "use": "fill", "specific_gravity": 2.65, "bank": {"dry_density": 1600, "water_content": 4.0},
        "loose": {"swell_percent": 12}, "loss_percent": 2,
        "proctor": {"method": "ASTM D698", "max_dry_density": 1900, "optimum_water_content": 11},
    },
}  # fmt: skip
SAND_T = 6000 / (1 / 1805 + 2.2 / 1710) / 1000  # 3259.9 t
PIT = {"name": "sand pit", "at": [500300.0, 4399900.0], "material": "sand"}
HILL = {"name": "silt hill", "at": [500300.0, 4399900.0], "material": "silt"}


def mixed(folder, changes):
    result = water(site(folder, {**WET, **changes}))
    (option,) = [o for o in result.drying if o.method == "mixing" and o.material == "silt"]
    (said,) = [w.message for w in result.warnings if w.code == "mix-material-short"] or [None]
    return option, said, result


def test_no_sand_at_all(tmp_path):
    option, said, result = mixed(tmp_path, {})
    assert option.mix_needed_t == pytest.approx(SAND_T, rel=1e-9)
    assert option.mix_available_t == 0.0
    assert option.mix_missing_t == pytest.approx(SAND_T, rel=1e-9)
    # 10,260 t of silt fill the place alone, 2.2 × 3259.9 in the mix
    assert option.mix_displaced_t == pytest.approx(10_260 - 2.2 * SAND_T, rel=1e-9)
    assert said.startswith("drying silt by mixing takes 3,260 t of sand by dry mass, and 0 t are there")
    assert "3,260 t are missing. Give a [[borrow]] of sand" in said
    assert result.to_dict()["drying"][-1]["mix_missing_t"] == option.mix_missing_t


def test_a_pit_with_a_limit(tmp_path):
    option, said, result = mixed(tmp_path, {"borrow": [HILL, {**PIT, "capacity": 1000}]})
    assert option.mix_available_t == pytest.approx(1000 * 1.6 * 0.98)
    assert option.mix_missing_t == pytest.approx(SAND_T - 1568, rel=1e-9)
    assert "0 t of the site's own ground, 1,568 t of sand pit): 1,692 t are missing" in said
    (row,) = [row for block in page(site(tmp_path), result).blocks if hasattr(block, "rows")
              for row in block.rows if row[0] == "silt: mixing with sand"]  # fmt: skip
    assert "3,260 t of sand, 1,568 t are there: 1,692 t are missing" in row[2]
    assert "of sand there is enough for 48 %" in row[2]


@pytest.mark.parametrize("pits", [[{**PIT, "capacity": 2080}], [{**PIT, "capacity": 40}, {**PIT, "name": "other pit"}]])
def test_enough_sand(tmp_path, pits):
    # 2080 bank m³ × 1.6 × 0.98 = 3261 t; a pit without a limit is enough by itself
    option, said, _ = mixed(tmp_path, {"borrow": [HILL, *pits]})
    assert said is None
    assert option.mix_missing_t == 0.0
    assert option.mix_needed_t == pytest.approx(SAND_T, rel=1e-9)
    assert option.mix_available_t == (None if len(pits) > 1 else pytest.approx(2080 * 1.6 * 0.98))


def test_sand_of_the_cut_counts_whether_the_ledger_places_it_or_sends_it_away(tmp_path):
    # 0.5 m of the cut is sand: 3600 × 0.5 × 1.6 × 0.98 = 2822.4 t after loss. The fill is as large as ever, so that
    # the mix that fills it takes as much
    option, said, _ = mixed(tmp_path, {"stratum": [{"material": "sand", "thickness": 0.5}, {"material": "silt"}]})
    assert option.mix_available_t == pytest.approx(2822.4)
    assert option.mix_needed_t == pytest.approx(SAND_T, rel=1e-9)
    assert option.mix_missing_t == pytest.approx(SAND_T - 2822.4, rel=1e-9)
    assert "2,822 t are there (of the site's own ground; no borrow site gives it): 437 t are missing" in said


def test_more_sand_in_the_fill_than_the_mix_takes(tmp_path):
    # half of the cut is sand: a fill with more of it than 5 to 11 dries all of its silt, and displaces none
    option, said, result = mixed(tmp_path, {"stratum": [{"material": "sand", "thickness": 1.0}, {"material": "silt"}]})
    masses = {row["material"]: row["dry_mass_t"] for row in result.lifts.total["materials"]}
    assert masses["sand"] > 5 / 11 * masses["silt"]
    assert option.mix_needed_t == pytest.approx(5 / 11 * masses["silt"])
    assert (option.mix_displaced_t, option.mix_missing_t, said) == (0.0, 0.0, None)


def test_topsoil_dries_nothing(tmp_path):
    sod = {"use": "topsoil", "bank": {"dry_density": 1200, "water_content": 4.0}, "loose": {"swell_percent": 20}}
    changes = {**WET, "material.sod": sod, "moisture.drying": {"mix_with": "sod"}}
    option = water(site(tmp_path, changes)).drying[-1]
    assert not option.possible
    assert option.note == "sod is topsoil, which is never fill"
    assert option.mix_needed_t is None


def test_two_wet_soils_share_the_dry_one():
    # 2 m³ of each at 1500 kg/m³, ratios 1 and 0.5: a half of the one and two thirds of the other stay
    wet = [WetSoil(3000.0, 1500.0, 1.0), WetSoil(3000.0, 1500.0, 0.5)]
    supply = mix_supply(wet, placed_kg=0.0, density_kg_m3=1500.0, available_kg=2000.0)
    assert supply.needed_kg == pytest.approx(1500 + 1000)
    assert supply.displaced_kg == pytest.approx(1500 + 1000)
    assert supply.missing_kg == pytest.approx(500)
    # 2250 kg of it in the fill already, 1500 and 750 of the 3000 and 1500 asked for: 3 m³ of 4, and 2.5 of 3 stay
    more = mix_supply(wet, placed_kg=2250.0, density_kg_m3=1500.0, available_kg=None)
    assert more.needed_kg == pytest.approx(3 / 4 * 3000 + 5 / 6 * 1500)
    assert more.displaced_kg == pytest.approx(more.needed_kg - 2250)
    with pytest.raises(ValueError, match="fill dry density is 0 kg/m³; it must be more than 0"):
        mix_supply(wet, placed_kg=0.0, density_kg_m3=0.0, available_kg=None)


@pytest.mark.parametrize(("capacity", "held"), [(2080, "placing rate"), (1000, "drying")])
def test_what_never_dries_is_placed_where_there_is_enough_to_mix_it_with(tmp_path, capacity, held):
    changes = {"water.evaporation": 0.0, "moisture.drying": {"area": 4000}, "borrow": [HILL, {**PIT, "capacity": capacity}]}
    _, _, result = mixed(tmp_path, changes)
    assert result.days[0].limited_by == held
