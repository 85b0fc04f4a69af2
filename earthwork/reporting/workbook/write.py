"""workbook.xlsx of a site, from the results of a report."""

from __future__ import annotations

from pathlib import Path

from earthwork.reporting.report.answers import answers, verdict
from earthwork.reporting.report.parts import Parts
from earthwork.reporting.workbook.balance import BalanceSheet
from earthwork.reporting.workbook.book import Book
from earthwork.reporting.workbook.materials import by_material_sheet, materials_sheet, quantities_sheet
from earthwork.reporting.workbook.plans import HaulSheet, lifts_sheet, pads_sheet, water_sheet


def write_workbook(parts: Parts, path: Path) -> None:
    """Write the workbook.

    Args:
        parts: the results; a part that is not there has no sheet.
        path: the file.

    Raises:
        OutputError: the file cannot be written.
    """
    with Book(path, parts.site.units) as book:
        _start_sheet(book, parts)
        quantities_sheet(book, parts)
        if "balance" in parts.results:
            materials = materials_sheet(book, parts)
            by_material_sheet(book, parts, materials)
            BalanceSheet(book, parts, materials).write()
            if "haul" in parts.results:
                HaulSheet(book, parts, materials).write()
        for name, write in (("lifts", lifts_sheet), ("water", water_sheet), ("pads", pads_sheet)):
            if name in parts.results:
                write(book, parts)


def _start_sheet(book: Book, parts: Parts) -> None:
    sheet = book.sheet("Start", f"{parts.site.name}: earthwork", verdict(parts))
    sheet.widths(40, 30, 90)
    for answer in answers(parts):
        for column, text in enumerate((answer.question, answer.value, answer.note)):
            sheet.text(sheet.row, column, text, "key" if column == 1 else "text")
        sheet.row += 1
    sheet.row += 1
    lines = [
        "The figures above are the program's and do not change here; the sheets do.",
        "Yellow cells are yours: densities, your own compacted per bank volume, loss, water, truck, prices, rates.",
        "Cut is bank volume, fill is compacted volume. A volume by zone is a result of the ground and stays as it is.",
        *(f"Not in this workbook: {name}, {why}." for name, why in parts.left_out.items()),
    ]
    for line in lines:
        sheet.text(sheet.row, 0, line)
        sheet.row += 1
