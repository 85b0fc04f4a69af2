"""Cards from files of tests: what they say, how sure they are, and what they refuse."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import pytest

import earthwork
from earthwork.errors import FileError, SiteFileError, SoilError
from earthwork.site import Site, check_site
from earthwork.soils.bench import fit_proctor_file
from earthwork.soils.card import SoilCard, soil_cards
from earthwork.soils.records import CurvePoint, DensityTest, MaterialTests
from tests.soils.test_card import FILL, LOESS, changed, flat, site

#: A parabola with its top of 1,760 at 16 %: 1760 − 6 (w − 16)².
CURVE = "water_content_percent,dry_density_kg_m3\n11,1610\n13,1706\n15,1754\n17,1754\n19,1706\n21,1610\n"
#: Mean 1,430, scatter 20.
BANK = "test,stratum,water_content_percent,dry_density_kg_m3\n" + "".join(
    f"B{i},{s},{w},{d}\n"
    for i, (s, w, d) in enumerate(
        (("upper", 7, 1410), ("upper", 8, 1450), ("lower", 7.5, 1410), ("lower", 7.5, 1450), ("lower", 7.5, 1430))
    )
)
#: Reach 96.5 % of 1,760 in the mean: 1,698.4.
LOG = "test,water_content_percent,dry_density_kg_m3\n" + "".join(
    f"F{i},16,{1698.4 + d}\n" for i, d in enumerate((-20, -10, 0, 10, 20))
)


def site_with(folder: Path, material: dict[str, Any], *, fill: dict[str, Any] | None = None) -> Site:
    document = {
        "site": {"name": "Plover Ridge", "units": "metric"},
        "ground": {"existing": {"level": 1.0}, "finished": {"level": 2.0}},
        "material": {"loess": material},
        "fill": fill or FILL,
    }
    for name, text in (("curve.csv", CURVE), ("bank.csv", BANK), ("log.csv", LOG)):
        (folder / name).write_text(text, encoding="utf-8")
    return check_site(document, folder)


TESTED = changed(bank={"tests": "bank.csv"}, proctor={"method": "ASTM D698", "tests": "curve.csv"})
UNSAID = {"relative_compaction": 95, "water_content_offset": 0.5}


def card_of(folder: Path, material: dict[str, Any], **options: Any) -> SoilCard:
    return soil_cards(site_with(folder, material, **options))["loess"]


def test_tests_give_what_the_figures_gave(tmp_path: Path) -> None:
    card, plain = card_of(tmp_path, TESTED), soil_cards(site(LOESS))["loess"]
    assert card.max_dry_density_kg_m3 == pytest.approx(1760, rel=1e-9)
    assert card.optimum_water_content_percent == pytest.approx(16, rel=1e-9)
    assert card.bank_dry_density_kg_m3 == pytest.approx(1430)
    assert card.bank_water_content_percent == pytest.approx(7.5)
    assert card.shrinkage_factor == pytest.approx(plain.shrinkage_factor)
    assert card.assumed == ()
    assert card.warnings == ()


def test_uncertainty_by_hand(tmp_path: Path) -> None:
    # Bank: scatter 20, five tests: 20/√5 = 8.944; / 1430 = 0.6255 %. The curve is exact. Log: scatter 15.81
    # / √5 / 1698.4.
    card = card_of(tmp_path, {**TESTED, "field": {"tests": "log.csv"}})
    assert card.uncertainty is not None
    parts = {part.name: part.relative_sd for part in card.uncertainty.parts}
    assert parts["bank"] == pytest.approx(20 / 5**0.5 / 1430, rel=1e-9)
    assert parts["compaction"] == pytest.approx(250**0.5 / 5**0.5 / 1698.4, rel=1e-6)
    assert parts["maximum"] < 0.002
    whole = sum(v * v for v in parts.values()) ** 0.5
    assert card.shrinkage_factor_sd == pytest.approx(card.shrinkage_factor * whole, rel=1e-12)


def test_without_a_log_the_reached_compaction_is_not_known(tmp_path: Path) -> None:
    card = card_of(tmp_path, TESTED)
    assert card.uncertainty is not None
    assert card.uncertainty.unknown == ("compaction",)
    assumed = card_of(tmp_path, TESTED, fill=UNSAID)
    # An assumed overshoot of 2 points may be 0 to 4: 4/√12 = 1.155 points of 97.
    part = next(p for p in assumed.uncertainty.parts if p.name == "compaction")
    assert part.relative_sd == pytest.approx(4 / 12**0.5 / 97)


def test_figures_alone_have_no_uncertainty() -> None:
    assert soil_cards(site(LOESS))["loess"].shrinkage_factor_sd is None
    assert soil_cards(site(LOESS, fill=UNSAID))["loess"].shrinkage_factor_sd is None


def test_the_log_tells_what_crews_reach(tmp_path: Path) -> None:
    card = card_of(tmp_path, {**TESTED, "field": {"tests": "log.csv"}}, fill=UNSAID)
    assert card.expected_compaction_percent == pytest.approx(96.5, rel=1e-9)
    assert card.expected_compaction_from == "5 field tests"
    assert card.fill_dry_density_kg_m3 == pytest.approx(1698.4)
    assert "expected_compaction_percent" not in card.assumed


def test_tests_outside_the_placing_window_are_named(tmp_path: Path) -> None:
    # Window 15 to 18 %, at least 95 % of 1,760 = 1,672; Gs 2.68: 1,750 at 17.9 % is saturated to 90.2 %.
    made = site({**TESTED, "bank": {"tests": "b"}, "field": {"tests": "f"}},
                fill={**FILL, "water_content_window": [-1.0, 2.0], "saturation_window": [60, 90]})  # fmt: skip
    states = {"in": (1700, 16.0), "dry": (1700, 14.9), "wet": (1700, 18.1), "loose": (1670, 16.0), "full": (1750, 17.9),
              "bare": (1660, None)}  # fmt: skip
    log = tuple(DensityTest(float(d), w, name=name) for name, (d, w) in states.items())
    points = tuple(CurvePoint(w, 1760 - 6 * (w - 16) ** 2) for w in (11, 13, 15, 17, 19, 21))
    card = soil_cards(made, {"loess": MaterialTests(points, (DensityTest(1430.0, 7.5),), log)})["loess"]
    assert {test.name: broken for test, broken in card.window_faults()} == {
        "dry": "too dry", "wet": "too wet", "loose": "too loose", "full": "saturation too high", "bare": "too loose",
    }  # fmt: skip
    assert card.to_dict()["tests"]["field"]["outside_window"][0] == "dry: too dry"


def test_a_stated_mean_that_the_log_contradicts(tmp_path: Path) -> None:
    card = card_of(tmp_path, {**TESTED, "field": {"tests": "log.csv"}}, fill={**FILL, "expected_compaction": 99})
    assert card.expected_compaction_percent == 99
    assert "compaction-differs" in [w.code for w in card.warnings]


def test_tests_that_fall_short_are_named(tmp_path: Path) -> None:
    card = card_of(tmp_path, {**TESTED, "field": {"tests": "log.csv"}}, fill={**UNSAID, "relative_compaction": 97})
    messages = {w.code: w.message for w in card.warnings}
    assert "3 of 5 tests are under the required 97 %: F0, F1, F2" in messages["tests-short"]
    assert "96.5 %, is under the required 97 %" in messages["compaction-short"]


def test_by_stratum_and_outliers(tmp_path: Path) -> None:
    (tmp_path / "wild.csv").write_text(BANK + "B9,lower,7,1890\n", encoding="utf-8")
    card = card_of(tmp_path, {**TESTED, "bank": {"tests": "wild.csv"}})
    tests = card.to_dict()["tests"]["bank"]
    assert [(g["group"], g["count"]) for g in tests["groups"]] == [("upper", 2), ("lower", 4)]
    assert tests["outliers"] == ["B9"]
    assert tests["count"] == 6
    assert "outliers" in [w.code for w in card.warnings]


def test_impossible_tests(tmp_path: Path) -> None:
    (tmp_path / "wet.csv").write_text(BANK + "B9,lower,45,1430\nB10,lower,33,1430\n", encoding="utf-8")
    card = card_of(tmp_path, {**TESTED, "bank": {"tests": "wet.csv"}})
    messages = {w.code: w.message for w in card.warnings}
    assert "B9 (saturation 138.0 %" in messages["tests-left-out"]
    assert "B10 (101.2 %)" in messages["tests-oversaturated"]
    assert card.bank_tests is not None
    assert card.bank_tests.dry_density.count == 6
    (tmp_path / "typo.csv").write_text(BANK + "B9,lower,7,2690\n", encoding="utf-8")
    with pytest.raises(SoilError, match=r"bank\.tests: typo\.csv row 7: dry density is 2690 kg/m³; it must be below"):
        card_of(tmp_path, {**TESTED, "bank": {"tests": "typo.csv"}})


def test_a_curve_without_a_peak_is_refused_with_the_reason(tmp_path: Path) -> None:
    (tmp_path / "flat.csv").write_text(CURVE.split("17,")[0] + "16,1757\n16.5,1790\n", encoding="utf-8")
    with pytest.raises(SoilError, match=r"material\.loess\.proctor\.tests: no peak inside .* relative_density"):
        card_of(tmp_path, {**TESTED, "proctor": {"method": "ASTM D698", "tests": "flat.csv"}})


def test_faults_of_all_files_come_together(tmp_path: Path) -> None:
    (tmp_path / "a.csv").write_text("water_content_percent,dry_density_kg_m3\n0.1,1700\n", encoding="utf-8")
    bad = {**TESTED, "proctor": {"method": "ASTM D698", "tests": "a.csv"}, "bank": {"tests": "none.csv"}}
    with pytest.raises(FileError, match=r"a\.csv: 1 fault(.|\n)*none\.csv: no such file"):
        card_of(tmp_path, bad)


def test_the_method_of_the_specification(tmp_path: Path) -> None:
    card_of(tmp_path, TESTED, fill={**FILL, "method": "AASHTO T 99"})
    with pytest.raises(
        SoilError, match=r'proctor\.method: "ASTM D698" is not the method that \[fill\] asks for, "ASTM D1557"'
    ):
        card_of(tmp_path, TESTED, fill={**FILL, "method": "ASTM D1557"})


def test_energy_of_the_rammer(tmp_path: Path) -> None:
    rammer = {"mass": "2.495 kg", "drop": "305 mm", "blows": 25, "layers": 3, "mould_volume": "944 cm3"}
    tested = {**TESTED, "proctor": {**TESTED["proctor"], "rammer": rammer}}
    assert card_of(tmp_path, tested).warnings == ()
    light = {**TESTED, "proctor": {**TESTED["proctor"], "rammer": {**rammer, "blows": 15}}}
    assert "compaction-energy" in [w.code for w in card_of(tmp_path, light).warnings]
    tonnes = {**TESTED, "proctor": {**TESTED["proctor"], "rammer": {**rammer, "mass": 2.5}}}
    with pytest.raises(SoilError, match=r"rammer\.mass: 2500 kg; it must be 0\.5 to 20 kg"):
        card_of(tmp_path, tonnes)


def test_oversize_with_tests_scales_the_error(tmp_path: Path) -> None:
    coarse = {"percent": 20, "specific_gravity": 2.65, "water_content": 1.0, "sieve": "19 mm"}
    (tmp_path / "noisy.csv").write_text(CURVE.replace("1754", "1750", 1).replace("1706", "1712", 1), encoding="utf-8")
    noisy = {**TESTED, "proctor": {"method": "ASTM D698", "tests": "noisy.csv"}}
    fine, whole = card_of(tmp_path, noisy), card_of(tmp_path, {**noisy, "oversize": coarse})
    assert whole.laboratory_max_dry_density_kg_m3 == pytest.approx(fine.max_dry_density_kg_m3)
    top = 1 / (0.8 / fine.max_dry_density_kg_m3 + 0.2 / 2650)
    assert whole.max_dry_density_kg_m3 == pytest.approx(top)
    # By differences: the whole density moves less than the fine one does.
    moved = 1 / (0.8 / (fine.max_dry_density_kg_m3 + 1) + 0.2 / 2650) - top
    parts = [next(p for p in c.uncertainty.parts if p.name == "maximum").relative_sd for c in (fine, whole)]
    assert parts[1] * top == pytest.approx(parts[0] * fine.max_dry_density_kg_m3 * moved, rel=1e-3)
    with pytest.raises(SoilError, match="it must be 0 to 30 %"):
        card_of(tmp_path, {**noisy, "oversize": {**coarse, "percent": 35}})


def test_field_tests_with_their_own_oversize(tmp_path: Path) -> None:
    # Laboratory 1,760 on the finer fraction; with 20 % of 2.65: 1 / (0.8/1760 + 0.2/2650) = 1886.8.
    (tmp_path / "own.csv").write_text(
        "test,dry_density_kg_m3,oversize_percent\nA,1698.4,0\nB,1800,20\nC,1700,\n", encoding="utf-8"
    )
    card = card_of(tmp_path, {**TESTED, "field": {"tests": "own.csv"}})
    assert card.field_log is not None
    whole = 1 / (0.8 / 1760 + 0.2 / 2650)
    assert card.field_log.percents == pytest.approx((96.5, 100 * 1800 / whole, 100 * 1700 / 1760), rel=1e-6)
    rows = earthwork.soil(site_with(tmp_path, {**TESTED, "field": {"tests": "own.csv"}})).tables()["tests"]
    assert list(rows[rows["state"] == "fill"]["relative_compaction_percent"]) == pytest.approx(card.field_log.percents)
    (tmp_path / "own.csv").write_text("test,dry_density_kg_m3,oversize_percent\nA,1698.4,55\n", encoding="utf-8")
    with pytest.raises(SoilError, match=r"field\.tests: A: oversize: percent is 55 %; it must be 0 to 40 %"):
        card_of(tmp_path, {**TESTED, "field": {"tests": "own.csv"}})


def test_lee_and_singh_is_named_and_only_where_it_belongs() -> None:
    sand = {"No. 4": 100, "2 mm": 95, "0.4 mm": 60, "0.3 mm": 30, "0.2 mm": 8, "No. 200": 2}
    clean = soil_cards(site(changed(gradation=sand), fill={**FILL, "expected_compaction": 95.0}))["loess"]
    assert clean.lee_singh_relative_density_percent == pytest.approx(75)
    assert clean.to_dict()["lee_singh_relative_density_percent"] == pytest.approx(75)
    assert soil_cards(site(GRADED))["loess"].lee_singh_relative_density_percent is None
    tested = {**SAND, "gradation": sand}
    fill = {"relative_compaction": 95, "relative_density": 70, "expected_relative_density": 75}
    assert soil_cards(site(tested, fill=fill))["loess"].lee_singh_relative_density_percent is None


def test_points_at_hand_need_no_file() -> None:
    points = tuple(CurvePoint(w, 1760 - 6 * (w - 16) ** 2) for w in (11, 13, 15, 17, 19))
    bank = tuple(DensityTest(d, 7.5, name=str(d)) for d in (1420, 1440))
    made = site({**LOESS, "bank": {"tests": "a.csv"}, "proctor": {"method": "ASTM D698", "tests": "b.csv"}})
    card = soil_cards(made, {"loess": MaterialTests(points, bank)})["loess"]
    assert card.shrinkage_factor == pytest.approx(1430 / 1698.4)


# --- soils judged in other ways --------------------------------------------------------------------------

SAND = {
    "use": "fill",
    "specific_gravity": 2.65,
    "bank": {"dry_density": 1600, "water_content": 5},
    "loose": {"swell_percent": 12},
    "relative_density": {"min_dry_density": 1500, "max_dry_density": 1800},
}


def test_a_free_draining_soil_by_relative_density() -> None:
    # Dr 75 %: 1800 · 1500 / (1800 − 0.75 · 300) = 1714.3; bank 37.5 %.
    fill = {"relative_compaction": 95, "relative_density": 70, "expected_relative_density": 75}
    card = soil_cards(site(SAND, fill=fill))["loess"]
    assert card.fill_dry_density_kg_m3 == pytest.approx(1800 * 1500 / 1575)
    assert card.fill_relative_density_percent == pytest.approx(75)
    assert card.bank_relative_density_percent == pytest.approx(37.5)
    assert card.relative_compaction_percent == pytest.approx(100 * 1500 / (1800 - 210))
    assert card.expected_compaction_percent == pytest.approx(100 * 1500 / 1575)
    assert card.target_water_content_percent is None
    assert card.fill_dry_density_from == "relative density"


def test_relative_density_expectation_is_assumed() -> None:
    card = soil_cards(site(SAND, fill={"relative_compaction": 95, "relative_density": 70}))["loess"]
    assert card.fill_relative_density_percent == pytest.approx(75)
    assert [w.code for w in card.warnings] == ["compaction-assumed"]


def test_relative_density_from_a_test_log() -> None:
    # Mean 1,710 of 1,800 is 95 %; 70 % relative density is 1500 / 15.9 = 94.34 %, 1,698.1 kg/m³: one test is short.
    fill = {"relative_compaction": 95, "relative_density": 70}
    log = tuple(DensityTest(d, 6.0, name=str(d)) for d in (1690.0, 1710.0, 1730.0))
    made = site({**SAND, "field": {"tests": "log.csv"}}, fill=fill)
    card = soil_cards(made, {"loess": MaterialTests(field=log)})["loess"]
    assert card.fill_dry_density_kg_m3 == pytest.approx(1710.0)
    assert card.expected_compaction_percent == pytest.approx(95.0)
    assert card.expected_compaction_from == "3 field tests"
    assert card.field_log is not None
    assert card.field_log.short == ("1690.0",)
    # Scatter 20 of 1,710, three tests.
    assert card.uncertainty.relative_sd == pytest.approx(20 / 1710 / 3**0.5)
    stated = site({**SAND, "field": {"tests": "log.csv"}}, fill={**fill, "expected_relative_density": 90})
    doubted = soil_cards(stated, {"loess": MaterialTests(field=log)})["loess"]
    assert doubted.fill_relative_density_percent == pytest.approx(90)
    assert any("not the 98.04 % of fill.expected_relative_density" in w.message for w in doubted.warnings)


def test_two_efforts_under_one_percentage_are_doubted() -> None:
    def warned(**fill: Any) -> list[str]:
        proctor = {"method": "ASTM D1557", "max_dry_density": 1900, "optimum_water_content": 13}
        soils = {"loess": LOESS, "twin": changed(proctor={**LOESS["proctor"], "method": "AASHTO T 99"}),
                 "gravel": changed(proctor=proctor)}  # fmt: skip
        document = {
            "site": {"name": "Plover Ridge", "units": "metric"},
            "ground": {"existing": {"level": 1.0}, "finished": {"level": 2.0}},
            "material": soils, "fill": {**FILL, **fill},
        }  # fmt: skip
        cards = soil_cards(check_site(document, Path()))
        return [w.message for card in cards.values() for w in card.warnings if w.code == "methods-mixed"]

    (message,) = warned()
    assert message.startswith('material.gravel.proctor.method: "ASTM D1557", but that of loess is "ASTM D698"')
    with pytest.raises(SoilError, match=r"material\.gravel\.proctor\.method"):
        warned(method="ASTM D698")


def test_typical_maximum_is_of_standard_effort() -> None:
    made = site(changed(typical="loess", proctor=None), fill={**FILL, "method": "ASTM D1557"})
    with pytest.raises(SoilError, match=r"typical maximum is for standard effort, and \[fill\] asks for .ASTM D1557."):
        soil_cards(made)
    assert soil_cards(site(changed(typical="loess", proctor=None), fill={**FILL, "method": "ASTM D698"}))


def test_percent_of_the_vibrated_maximum() -> None:
    card = soil_cards(site(SAND, fill={"relative_compaction": 95, "expected_compaction": 96}))["loess"]
    assert card.fill_dry_density_kg_m3 == pytest.approx(0.96 * 1800)


def test_fines_over_the_limit_of_the_vibrated_tests() -> None:
    fine = {**SAND, "gradation": {"No. 4": 100, "No. 200": 25}}
    card = soil_cards(site(fine, fill={"relative_compaction": 95, "expected_compaction": 96}))["loess"]
    assert "fines-over-limit" in [w.code for w in card.warnings]


GRADED = changed(gradation={"No. 4": 100, "No. 40": 98, "No. 200": 92}, liquid_limit=30.0, plastic_limit=20.0)


def test_group_consequences_and_suction() -> None:
    result = earthwork.soil(site(GRADED, fill={**FILL, "water_content_window": [-1.0, 3.0]}))
    card = result["loess"]
    assert card.classification is not None
    assert card.classification.symbol == "CL"
    assert any("collapsible" in text for text in card.consequences.cautions)
    # wPI = 0.92 · 10 = 9.2.
    assert "= 9.2" in card.suction.relation
    assert card.suction.dry_end_kpa > card.suction.target_kpa > card.suction.wet_end_kpa
    json.dumps(result.to_dict(), allow_nan=False)


@pytest.mark.parametrize(
    ("material", "message"),
    [
        ({"gradation": {"No. 4": 60, "No. 200": 92}}, "percent passing, which is 100 less"),
        ({"gradation": {"No. 4": 160}}, "percent passing must be a number from 0 to 100"),
        ({"gradation": {"sieve 4": 60}}, "'sieve 4' is not a sieve"),
        ({"gradation": 12}, "it must be a table of sieve = percent passing"),
        ({"loss_percent": 100}, "it must be below 100; nothing would be left"),
        ({"liquid_limit": 30.0}, "give both liquid_limit and plastic_limit"),
        ({"liquid_limit": 30.0, "plastic_limit": 31.0}, "it must be at most liquid_limit"),
        ({"relative_density": {"min_dry_density": 1800, "max_dry_density": 1700}}, "give min_dry_density below"),
        (
            {"relative_density": {"min_dry_density": 1500, "max_dry_density": 1700}},
            "proctor and relative_density are given",
        ),
    ],
)
def test_contradictions_in_the_new_keys(material: dict[str, Any], message: str) -> None:
    with pytest.raises(SiteFileError, match=message):
        site(changed(**material))


@pytest.mark.parametrize(
    ("fill", "message"),
    [
        ({"saturation_window": [90, 80]}, "the first must be the lower one"),
        ({"relative_density": 70, "expected_relative_density": 60}, "it must be at least the required 70 %"),
    ],
)
def test_contradictions_in_fill(fill: dict[str, Any], message: str) -> None:
    with pytest.raises(SiteFileError, match=message):
        site(LOESS, fill={**FILL, **fill})


def test_saturation_and_air_voids_limits_bound_the_window() -> None:
    card = soil_cards(site(LOESS, fill={**FILL, "saturation_window": [70, 95], "air_voids_max": 10}))["loess"]
    window = card.placing_window()
    assert window is not None
    assert window.contains(16.5, 1698.4)
    # The target is 76.5 % saturated: a window from 80 % leaves it out, and 5 % of air too (it has 8.6 %).
    with pytest.raises(SoilError, match=r"the target lies outside the placing window: saturation 76.5 % is under 80 %"):
        soil_cards(site(LOESS, fill={**FILL, "saturation_window": [80, 95]}))
    with pytest.raises(SoilError, match=r"air voids 8\.6 % are over 5 %"):
        soil_cards(site(LOESS, fill={**FILL, "air_voids_max": 5}))


# --- typical values --------------------------------------------------------------------------------------


def test_typical_values_are_labelled_and_carry_their_range() -> None:
    result = earthwork.soil(site({"use": "fill", "typical": "lean clay"}, fill=FILL))
    card = result["loess"]
    for name in ("bank_dry_density_kg_m3", "max_dry_density_kg_m3", "optimum_water_content_percent", "swell_percent"):
        assert name in card.assumed
    assert [w.code for w in result.warnings].count("typical-value") == 4
    # 1,430 to 1,780: even over the range, 350/√12 = 101 of 1,605.
    bank = next(p for p in card.uncertainty.parts if p.name == "bank")
    assert bank.relative_sd == pytest.approx(350 / 12**0.5 / 1605, rel=1e-9)
    assert card.shrinkage_factor_sd > 0.05


def test_typical_values_fill_gaps_only() -> None:
    card = soil_cards(site(changed(typical="loess", loose={}), fill=FILL))["loess"]
    assert card.bank_dry_density_kg_m3 == 1430
    assert card.max_dry_density_kg_m3 == 1760
    assert set(card.assumed) == {"swell_percent", "loose_dry_density_kg_m3"}


def test_topsoil_of_unknown_density_is_typical() -> None:
    card = soil_cards(site({"use": "topsoil"}, fill=FILL))["loess"]
    assert "bank_dry_density_kg_m3" in card.assumed
    assert "typical-value" in [w.code for w in card.warnings]


def test_an_unknown_type_is_refused() -> None:
    with pytest.raises(SoilError, match=r"typical = 'lean clya': not a type .* must be one of gravel"):
        soil_cards(site({"use": "fill", "typical": "lean clya"}, fill=FILL))


def test_typical_rock_bulks() -> None:
    card = soil_cards(site({"use": "rock", "typical": "blasted rock"}, fill=FILL))["loess"]
    assert card.shrinkage_factor == pytest.approx(1.3)
    assert "shrinkage_factor" in card.assumed


# --- the lab bench ---------------------------------------------------------------------------------------


def test_bench_curve_without_a_site(tmp_path: Path) -> None:
    (tmp_path / "hill.csv").write_text(CURVE, encoding="utf-8")
    result = fit_proctor_file(tmp_path / "hill.csv", specific_gravity=2.68, method="ASTM D698")
    assert result["hill"].max_dry_density_kg_m3 == pytest.approx(1760)
    [curve] = result.to_dict()["curves"]
    assert curve["method"] == "ASTM D698"
    assert [row["relative_compaction_percent"] for row in curve["compactions"]] == [90, 92, 95, 98, 100]
    assert result.warnings == ()
    assert set(result.tables()) == {"proctor", "points", "fits", "compactions"}


def test_bench_says_what_it_assumes_and_takes(tmp_path: Path) -> None:
    rows = CURVE.split("\n")
    text = "material,method," + rows[0] + "\n" + "\n".join(f"till,D1557,{r}" for r in rows[1:-1]) + "\n"
    (tmp_path / "t.csv").write_text(text, encoding="utf-8")
    result = fit_proctor_file(tmp_path / "t.csv")
    assert [w.code for w in result.warnings] == ["specific-gravity-assumed"]
    assert result["till"].method == "D1557"
    (tmp_path / "two.csv").write_text(text + text.split("\n", 1)[1].replace("till", "clay"), encoding="utf-8")
    with pytest.raises(FileError, match="points of till, clay; say which material"):
        fit_proctor_file(tmp_path / "two.csv")
    assert fit_proctor_file(tmp_path / "two.csv", material="clay")["clay"].method == "D1557"


def test_bench_needs_points() -> None:
    with pytest.raises(SiteFileError, match=r"no material has proctor\.tests"):
        earthwork.proctor(site(LOESS))


def test_us_and_metric_benches_agree(tmp_path: Path) -> None:
    pcf = 16.01846337396014
    rows = [row.split(",") for row in CURVE.split("\n")[1:-1]]
    us = "water_content_percent,dry_density_lb_ft3\n" + "".join(f"{w},{float(d) / pcf!r}\n" for w, d in rows)
    (tmp_path / "a.csv").write_text(CURVE, encoding="utf-8")
    (tmp_path / "b.csv").write_text(us, encoding="utf-8")
    metric = fit_proctor_file(tmp_path / "a.csv", specific_gravity=2.68)["a"]
    imperial = fit_proctor_file(tmp_path / "b.csv", specific_gravity=2.68, units="us")["b"]
    one, other = dict(flat(metric.to_dict())), dict(flat(imperial.to_dict()))
    for key, value in one.items():
        assert other[key] == (pytest.approx(value, rel=1e-6, abs=1e-5) if isinstance(value, float) else value)
