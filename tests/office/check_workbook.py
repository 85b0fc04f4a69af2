"""The workbook in a real spreadsheet engine: recomputed figures against the program's, and what a change does.

Needs LibreOffice, so it runs when it is asked for (``pytest tests/office/check_workbook.py``).
"""

from __future__ import annotations

import shutil
import subprocess
from pathlib import Path

import openpyxl
import pytest

import earthwork
from tests.reporting.report.conftest import SAMPLES, make_site

SITES = ("larkspur-campus", "cooper-ridge", "hostile")


@pytest.fixture(scope="session")
def reports(tmp_path_factory):
    """The workbook of each site, with the results that it was made from."""
    made = {}
    for name in SITES:
        directory = tmp_path_factory.mktemp(name)
        site = make_site(directory) if name == "hostile" else SAMPLES / name / "site.toml"
        made[name] = earthwork.report(site, out=directory / "report", only=["workbook"])
    return made


def recompute(book: openpyxl.Workbook, directory: Path) -> openpyxl.Workbook:
    """What the engine makes of a workbook that carries formulas and no stored values."""
    bare = directory / "bare.xlsx"
    book.save(bare)
    out = directory / "recomputed"
    soffice = shutil.which("soffice") or "soffice"
    command = [soffice, f"-env:UserInstallation={(directory / 'profile').as_uri()}", "--headless", "--convert-to",
               "xlsx:Calc MS Excel 2007 XML", "--outdir", str(out), str(bare)]  # fmt: skip
    subprocess.run(command, check=True, capture_output=True, timeout=180)
    return openpyxl.load_workbook(out / "bare.xlsx", data_only=True)


def formulas(book: openpyxl.Workbook):
    for sheet in book:
        for row in sheet.iter_rows():
            for cell in row:
                if cell.data_type == "f":
                    yield sheet.title, cell.coordinate, cell.value


def row_of(sheet, label: str, column: int = 1) -> int:
    return next(row for row in range(1, sheet.max_row + 1) if sheet.cell(row, column).value == label)


@pytest.mark.parametrize("name", SITES)
def test_every_formula_gives_the_figure_of_the_program(reports, name, tmp_path):
    path = reports[name].directory / "workbook.xlsx"
    book, stored = openpyxl.load_workbook(path), openpyxl.load_workbook(path, data_only=True)
    computed = recompute(openpyxl.load_workbook(path), tmp_path)
    count = 0
    for sheet, place, formula in formulas(book):
        value, figure = computed[sheet][place].value, stored[sheet][place].value
        assert isinstance(value, int | float), (sheet, place, formula, value)
        assert value == pytest.approx(figure, rel=1e-9, abs=1e-6), (sheet, place, formula)
        count += 1
    assert count > (40 if name == "hostile" else 200)


@pytest.mark.parametrize("name", ["larkspur-campus", "cooper-ridge"])
def test_a_shrinkage_factor_of_ones_own_moves_the_balance(reports, name, tmp_path):
    result = reports[name]
    balance = result.parts.documents["balance"]
    usable = [m for m in balance["materials"] if m["use"] == "fill" and m["compacted_m3"]]
    material = max(usable, key=lambda m: m["dry_mass_t"])
    card = result.parts.cards[material["material"]]
    book = openpyxl.load_workbook(result.directory / "workbook.xlsx")
    sheet = book["Materials"]
    own = 0.80
    sheet.cell(row_of(sheet, card.material), 11).value = own
    computed = recompute(book, tmp_path)["Balance"]
    dug_m3 = sum(material[f"{k}_bank_m3"] for k in ("cut", "strip", "over_excavation", "allowance"))
    before = material["compacted_m3"]
    units = result.units
    available = computed.cell(row_of(computed, "available, compacted"), 3).value
    expected = balance["available_compacted_m3"] - before + own * dug_m3 * (1 - card.loss_fraction)
    assert available == pytest.approx(units.from_si(expected, "soil_volume"), rel=1e-9)
    # a shortage is made up with the material of the first pit, dug with its own shrink
    surplus = computed.cell(row_of(computed, "surplus (negative: shortage)"), 3).value
    assert surplus < units.from_si(balance["surplus_compacted_m3"], "soil_volume")
    change = computed.cell(row_of(computed, "change by what you changed"), 3).value
    assert change == pytest.approx(surplus - units.from_si(balance["surplus_compacted_m3"], "soil_volume"), rel=1e-9)


def test_a_price_and_a_truck_move_the_totals(reports, tmp_path):
    result = reports["larkspur-campus"]
    balance = result.parts.documents["balance"]
    brought = balance["imports"][0]
    book = openpyxl.load_workbook(result.directory / "workbook.xlsx")
    sheet = book["Balance"]
    gate = next(
        row for row in range(1, sheet.max_row + 1)
        if [sheet.cell(row, c).value for c in (1, 2, 3)] == [brought["material"], "in", "shortage"]
    )  # fmt: skip
    sheet.cell(gate, 9).value = 10.0
    sheet.cell(row_of(sheet, "truck: heaped volume, loose"), 3).value = 7.0
    sheet.cell(row_of(sheet, "truck: payload, moist"), 3).value = 1000.0
    computed = recompute(book, tmp_path)["Balance"]
    assert computed.cell(gate, 11).value == pytest.approx(10.0 * brought["bank_m3"], rel=1e-9)
    # by volume alone: whole loads of 7 m³
    assert computed.cell(gate, 8).value == -(-brought["loose_m3"] // 7.0)


def test_the_haul_follows_its_rate(reports, tmp_path):
    result = reports["larkspur-campus"]
    haul = result.parts.documents["haul"]
    assert result.parts.site.model.haul.cost_by == "distance"
    book = openpyxl.load_workbook(result.directory / "workbook.xlsx")
    sheet = book["Haul"]
    rate = sheet.cell(3, 3).value
    sheet.cell(3, 3).value = 2 * rate
    computed = recompute(book, tmp_path)["Haul"]
    last = row_of(computed, "all")
    work = sum(m["dry_mass_t"] * m["distance_m"] / 1000 for m in haul["moves"])
    assert computed.cell(last, 11).value == pytest.approx(2 * rate * work, rel=1e-9)
    total = sum(m["cost"] for m in haul["moves"]) + rate * work
    assert computed.cell(last, 13).value == pytest.approx(total, rel=1e-9)


@pytest.mark.parametrize("name", SITES)
def test_sheets_are_set_up_for_reading_and_printing(reports, name):
    book = openpyxl.load_workbook(reports[name].directory / "workbook.xlsx")
    assert book.sheetnames[:2] == ["Start", "Quantities"]
    for sheet in book:
        assert sheet.page_setup.orientation == "landscape"
        assert int(sheet.page_setup.paperSize) == (1 if name == "cooper-ridge" else 9)
        assert sheet.sheet_properties.pageSetUpPr.fitToPage
        if sheet.title != "Start":
            assert sheet.freeze_panes
            assert sheet.print_title_rows


def test_it_opens_and_prints(reports, tmp_path):
    soffice = shutil.which("soffice") or "soffice"
    source = reports["cooper-ridge"].directory / "workbook.xlsx"
    command = [soffice, f"-env:UserInstallation={(tmp_path / 'profile').as_uri()}", "--headless", "--convert-to", "pdf",
               "--outdir", str(tmp_path), str(source)]  # fmt: skip
    subprocess.run(command, check=True, capture_output=True, timeout=180)
    text = subprocess.run(
        ["pdftotext", "-layout", tmp_path / "workbook.pdf", "-"], check=True, capture_output=True, text=True
    ).stdout
    assert "required, compacted" in text
    assert "###" not in text
    assert "#REF!" not in text
    assert "#NAME?" not in text
