"""Columns of the workbook hold their numbers: a spreadsheet shows hashes for what is wider than its cell."""

import math

import openpyxl
import pytest

from earthwork.reporting.workbook.book import Book, Head
from earthwork.units import METRIC


@pytest.mark.parametrize(("litres", "letters"), [(41.4, 2), (309_015_532_242.0, 15)])
def test_columns_hold_their_numbers_and_totals(tmp_path, litres, letters):
    path = tmp_path / "book.xlsx"
    with Book(path, METRIC) as book:
        sheet = book.sheet("water", "Water by day")
        first = sheet.head([Head("place"), Head("water", "water_volume"), Head("cost", "money"), Head("x", "factor")], freeze=1)
        sheet.text(first, 0, "a name of forty letters, more or less so")
        sheet.number(first, 1, litres, "water_volume")
        sheet.number(first, 3, math.pi * litres, "factor")
        sheet.sum_of(first + 1, 2, first, first, -litres, "money")
    widths = openpyxl.load_workbook(path)["water"].column_dimensions
    assert widths["A"].width > 40
    assert widths["B"].width >= max(letters + 2, 11.5)
    assert widths["C"].width >= max(letters + 3, 11.5)
    assert widths["D"].width >= letters + 5 + 2
