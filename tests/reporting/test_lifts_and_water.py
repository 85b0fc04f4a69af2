"""What ``lifts`` and ``water`` show and write."""

import json
import re

import geopandas
import pandas
import pytest

from earthwork.reporting.runner import run_command
from tests.plan.watered import site


@pytest.fixture(scope="module")
def folder(tmp_path_factory):
    return tmp_path_factory.mktemp("watered")


@pytest.fixture(scope="module")
def lifts_run(folder):
    return run_command("lifts", site(folder), out=folder / "lifts")


@pytest.fixture(scope="module")
def water_run(folder):
    given = site(folder, {"water.tank.volume": 4000, "site.name": "Hand <b> & sons", "calendar.start": "2027-05-03"})
    return run_command("water", given, out=folder / "water")


def test_lifts_write_their_files(lifts_run):
    assert {p.name for p in lifts_run.written} == {
        "lifts.csv", "lifts.json", "lifts_days.csv", "lifts_chart.png", "lifts_outlines.gpkg",
    }  # fmt: skip


def test_water_writes_its_files(water_run):
    assert {p.name for p in water_run.written} == {
        "water.json", "water_days.csv", "water_hours.csv", "water_materials.csv", "water_remedies.csv",
        "water_days.png", "water_tank.png", "water_day_sheets.html",
    }  # fmt: skip


def test_outlines_cover_the_lifts(lifts_run):
    (path,) = [p for p in lifts_run.written if p.suffix == ".gpkg"]
    shapes = geopandas.read_file(path, layer="lifts")
    assert shapes.crs.to_epsg() == 32614
    assert shapes["lift"].tolist() == [1, 2, 3, 4, 5]
    assert shapes.geometry.area.tolist() == pytest.approx([6000.0] * 5)
    assert shapes.geometry.area.to_numpy() == pytest.approx(shapes["area_m2"].to_numpy(), rel=1e-6)
    assert shapes.total_bounds.tolist() == [500_020.0, 4_399_930.0, 500_120.0, 4_399_990.0]


def test_tables_hold_what_the_document_says(water_run):
    (path,) = [p for p in water_run.written if p.name == "water_days.csv"]
    table = pandas.read_csv(path)
    days = json.loads(path.with_name("water.json").read_text())["result"]["days"]
    assert table["total_l"].tolist() == pytest.approx([day["total_l"] for day in days])
    assert table["allowed_by_water_m3"].tolist() == pytest.approx([day["limits"]["water"] for day in days])
    hours = pandas.read_csv(path.with_name("water_hours.csv"))
    assert len(hours) == 24 * len(days)
    assert hours["clock"][0] == "2027-05-03 07:00"


def test_tables_are_in_the_units_of_the_site(folder, tmp_path):
    given = site(
        tmp_path,
        {"site.units": "us", "material.silt.bank.dry_density": 94, "material.silt.loose.dry_density": 75,
         "material.silt.proctor.max_dry_density": 112, "water.evaporation": 0.2, "fill.lift_thickness": 0.66,
         "ground.existing": {"file": "existing.tif", "vertical_unit": "m"},
         "ground.finished": {"file": "finished.tif", "vertical_unit": "m"}},
    )  # fmt: skip
    run = run_command("water", given, out=tmp_path / "out")
    columns = pandas.read_csv(tmp_path / "out" / "water_days.csv").columns
    assert {"compacted_yd3", "compaction_gal", "evaporation_in_day", "open_area_ft2"} <= set(columns)
    materials = pandas.read_csv(tmp_path / "out" / "water_materials.csv")
    # 106.4 lb/ft³ × 27 × 7 points / 8.3454 lb/gal
    assert materials["water_to_add_gal_per_yd3"][0] == pytest.approx(106.4 * 27 * 0.07 / 8.34540, rel=1e-4)
    page = run.page()
    text = " ".join(str(block) for block in page.blocks)
    assert "gal" in text
    assert " L" not in text
    assert "size: letter" in (tmp_path / "out" / "water_day_sheets.html").read_text(encoding="utf-8")


def test_day_sheets_have_one_section_a_day_and_no_markup_of_names(water_run):
    (path,) = [p for p in water_run.written if p.suffix == ".html"]
    text = path.read_text(encoding="utf-8")
    assert text.count("<section>") == 6
    assert "Hand &lt;b&gt; &amp; sons" in text
    assert "<b> &" not in text
    assert "Day 1, Monday 03 May 2027" in text
    assert "Water runs short" in text
    assert "size: A4" in text


def test_day_sheets_tell_the_compaction_that_each_lift_has_to_reach(tmp_path):
    # five lifts of 0.2 m under 1 m of fill: the lower two lie more than 0.6 m deep and want 98 %
    deep = [{"below": 0.6, "measured_from": "finished", "relative_compaction": 98, "expected_compaction": 98}]
    run_command("water", site(tmp_path, {"fill.by_depth": deep}), out=tmp_path / "out")
    text = (tmp_path / "out" / "water_day_sheets.html").read_text(encoding="utf-8")
    required = {
        name: cells[-1]
        for row in re.findall(r"<tr>(.*?)</tr>", text)
        for name, *cells in [re.findall(r"<td>(.*?)</td>", row) or [""]]
        if name.startswith("fill 1, lift")
    }
    assert required == {f"fill 1, lift {n}": "98" if n < 3 else "95" for n in range(1, 6)}


@pytest.mark.parametrize(("lifts", "shown"), [(10, 10), (11, 11), (12, 10)])
def test_day_sheets_sum_up_no_single_lift(tmp_path, lifts, shown):
    # 1 m of fill in a day; a page has room for ten lifts and a row of the others
    changes = {"fill.lift_thickness": 1 / lifts, "water.placing_rate": 6000}
    run_command("water", site(tmp_path, changes), out=tmp_path / "out")
    text = (tmp_path / "out" / "water_day_sheets.html").read_text(encoding="utf-8")
    assert len(re.findall(r"<td>fill 1, lift \d+</td>", text)) == shown
    assert re.findall(r"<td>(\d+) more lifts</td>", text) == ([] if lifts == shown else ["2"])


def test_pages_say_what_matters(lifts_run, water_run):
    lifts = " ".join(str(block) for block in lifts_run.page().blocks)
    assert "5" in lifts
    assert "pro rata" in lifts
    water = " ".join(str(block) for block in water_run.page().blocks)
    assert "day 1, 11:00" in water
    assert "a larger tank" in water


def test_a_site_without_fill_writes_tables_only(tmp_path):
    given = site(tmp_path)
    (tmp_path / "finished.tif").write_bytes((tmp_path / "existing.tif").read_bytes())
    for command in ("lifts", "water"):
        run = run_command(command, given, out=tmp_path / "out")
        assert run.page().title
        assert not [p for p in run.written if p.suffix in (".png", ".gpkg", ".html")]


def test_a_long_word_breaks_on_a_day_sheet(water_run):
    # A word wider than the sheet makes a browser print everything smaller.
    (path,) = [p for p in water_run.written if p.name == "water_day_sheets.html"]
    assert re.search(r"p, [^{}]*td:first-child[^{}]*\{ overflow-wrap: anywhere; \}", path.read_text("utf-8"))
