"""Sheets that people can work in: headers with units, frozen panes, number formats, print set-up, live formulas.

Every text goes in as a text and every formula is written here, so no name from a file is ever run as a formula. A
formula carries the program's figure as its stored value: a viewer that does not calculate shows the same numbers.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from datetime import datetime
from pathlib import Path
from types import TracebackType
from typing import Any

from earthwork.errors import OutputError
from earthwork.units import UnitSystem

#: Number formats by kind; kinds that are dimensions of :mod:`earthwork.units` are converted on their way in.
_NUMBERS = {
    "soil_volume": "#,##0", "area": "#,##0", "mass": "#,##0", "density": "#,##0.0", "length": "#,##0.00",
    "water_volume": "#,##0", "road": "#,##0.000", "percent": "0.0", "factor": "0.0000", "count": "#,##0",
    "decimal": "#,##0.0", "money": "#,##0", "price": "#,##0.00",
}  # fmt: skip
_PLAIN_KINDS = ("percent", "factor", "count", "decimal", "money", "price")
#: The program's tonnes are thousands of its kilograms.
TONNE = 1000.0
#: Width of a column that was given none [characters].
_WIDTH = 8.43
#: Names wider than this are cut at their neighbour [characters].
_WIDEST_TEXT = 44.0


@dataclass(frozen=True)
class Head:
    """A column: its title, what kind of number it holds (None: text), and its width in characters."""

    title: str
    kind: str | None = None
    width: float = 11.5
    unit: str | None = None  #: instead of the unit of the kind


def at(row: int, column: int, *, fixed: bool = False) -> str:
    """The address of a cell, counted from 0.

    >>> at(4, 27), at(4, 2, fixed=True)
    ('AB5', '$C$5')
    """
    letters, rest = "", column + 1
    while rest:
        rest, digit = divmod(rest - 1, 26)
        letters = chr(65 + digit) + letters
    return f"${letters}${row + 1}" if fixed else f"{letters}{row + 1}"


class Book:
    """A workbook that is written to a file when its block ends.

    Args:
        path: the file.
        units: what lengths, volumes and masses are shown in.
    """

    def __init__(self, path: Path, units: UnitSystem) -> None:
        import xlsxwriter

        self.units = units
        self._file = xlsxwriter.Workbook(
            str(path), {"strings_to_formulas": False, "strings_to_urls": False, "strings_to_numbers": False}
        )
        # a fixed date: the same site gives the same bytes
        self._file.set_properties({"title": "Earthwork", "created": datetime(2000, 1, 1)})
        self._formats: dict[tuple[str, str], Any] = {}

    def __enter__(self) -> Book:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        import xlsxwriter.exceptions as faults

        if kind is not None:
            return
        try:
            self._file.close()
        except faults.FileCreateError as fault:
            raise OutputError(f"workbook.xlsx: cannot be written: {fault}") from fault

    def sheet(self, name: str, title: str, note: str = "") -> Sheet:
        """A new sheet with a title and a line under it."""
        return Sheet(self, self._file.add_worksheet(name), name, title, note)

    def shown(self, value: float, kind: str, si: float = 1.0) -> float:
        """An SI number in the units of the book."""
        return value if kind in _PLAIN_KINDS else self.units.from_si(value * si, kind)

    def unit(self, kind: str | None) -> str:
        """The unit of a kind of number, as printed."""
        if kind is None or kind in ("factor", "count", "decimal", "money", "price"):
            return ""
        return "%" if kind == "percent" else self.units.label(kind)

    def format(self, kind: str, style: str) -> Any:
        """A cell format: ``style`` is plain, input, formula, total, head, unit, title, note or text."""
        key = (kind, style)
        if key not in self._formats:
            self._formats[key] = self._file.add_format(_format(kind, style))
        return self._formats[key]


def _format(kind: str, style: str) -> dict[str, Any]:
    base: dict[str, Any] = {"font_name": "Calibri", "font_size": 10, "valign": "vcenter"}
    if kind in _NUMBERS:
        base["num_format"] = _NUMBERS[kind]
    extra: dict[str, dict[str, Any]] = {
        "input": {"bg_color": "#FFF4C2", "font_color": "#1F3A93", "border": 1, "border_color": "#C9B458"},
        "total": {"bold": True, "top": 1},
        "head": {"bold": True, "text_wrap": True, "valign": "bottom", "bg_color": "#E8EFEC"},
        "unit": {"font_color": "#565652", "bottom": 1, "bg_color": "#E8EFEC"},
        "title": {"bold": True, "font_size": 14},
        "note": {"font_color": "#565652", "italic": True},
        "text": {"num_format": "@"},
        "key": {"bold": True},
    }
    style, _, side = style.partition(" ")
    return {**base, **extra.get(style, {}), **({"align": side} if side else {})}


class Sheet:
    """One sheet; rows and columns are counted from 0."""

    def __init__(self, book: Book, sheet: Any, name: str, title: str, note: str) -> None:
        self.book = book
        self.name = name
        self._sheet = sheet
        self.row = 0  #: the next free row
        self._widths: dict[int, float] = {}
        self.text(0, 0, title, "title")
        if note:
            self.text(1, 0, note, "note")
        self.row = 3
        sheet.set_landscape()
        sheet.set_paper(1 if book.units.name == "us" else 9)
        sheet.fit_to_pages(1, 0)
        sheet.set_margins(left=0.5, right=0.5, top=0.6, bottom=0.6)
        sheet.set_footer("&L&A&RPage &P of &N")
        sheet.hide_gridlines(2)

    def head(self, columns: Sequence[Head], *, freeze: int | None = None) -> int:
        """Write column heads with their units and return the first row under them.

        Args:
            columns: from the left.
            freeze: columns that stay in view; None: nothing is frozen.
        """
        for i, column in enumerate(columns):
            unit = self.book.unit(column.kind) if column.unit is None else column.unit
            side = "" if column.kind is None else " right"
            self.text(self.row, i, column.title, "head" + side)
            self.text(self.row + 1, i, unit, "unit" + side)
        # long titles take two lines
        self._sheet.set_row(self.row, 30)
        self.row += 2
        if freeze is not None:
            for i, column in enumerate(columns):
                self._widen(i, column.width)
            self._sheet.freeze_panes(self.row, freeze)
            self._sheet.repeat_rows(self.row - 2, self.row - 1)
        return self.row

    def widths(self, *widths: float) -> None:
        """Widths of the columns from the left, in characters."""
        for i, width in enumerate(widths):
            self._widen(i, width)

    def _widen(self, column: int, width: float) -> None:
        """Give a column at least a width, in characters."""
        self._widths[column] = max(width, self._widths.get(column, 0.0))
        self._sheet.set_column(column, column, self._widths[column])

    def _hold(self, column: int, shown: float, kind: str) -> None:
        """Widen a column for a number: spreadsheets show no number that is wider than its cell."""
        _, _, decimals = _NUMBERS[kind].partition(".")
        # Totals are bold, and what is changed by hand may grow by a digit.
        need = len(f"{shown:,.{len(decimals)}f}") * 1.1 + 2.5
        if need > self._widths.get(column, _WIDTH):
            self._widen(column, math.ceil(need))

    def text(self, row: int, column: int, text: str, style: str = "text") -> None:
        """A text, whatever it begins with."""
        if style == "text" and column in self._widths:
            need = min(1.1 * len(text) + 1, _WIDEST_TEXT)
            if need > self._widths[column]:
                self._widen(column, math.ceil(need))
        self._sheet.write_string(row, column, text, self.book.format("", style))

    def number(
        self, row: int, column: int, value: float | None, kind: str, *, si: float = 1.0, style: str = "plain"
    ) -> str:
        """An SI number in the units of the book, or an empty cell; the address of the cell."""
        form = self.book.format(kind, style)
        if value is None:
            self._sheet.write_blank(row, column, None, form)
        else:
            shown = self.book.shown(value, kind, si)
            self._hold(column, shown, kind)
            self._sheet.write_number(row, column, shown, form)
        return at(row, column)

    def formula(
        self,
        row: int,
        column: int,
        formula: str,
        value: float | None,
        kind: str,
        *,
        si: float = 1.0,
        style: str = "plain",
    ) -> str:
        """A formula with the program's figure (SI) as its stored value; the address of the cell."""
        stored = "" if value is None else self.book.shown(value, kind, si)
        if value is not None and math.isfinite(value):
            self._hold(column, float(stored), kind)
        self._sheet.write_formula(row, column, "=" + formula, self.book.format(kind, style), stored)
        return at(row, column)

    def place(self, row: int, column: int) -> str:
        """The address of a cell for formulas of other sheets."""
        return f"'{self.name}'!{at(row, column, fixed=True)}"

    def sum_of(
        self, row: int, column: int, first: int, last: int, value: float | None, kind: str, *, si: float = 1.0
    ) -> str:
        """The sum of a run of cells over this one, as a total."""
        formula = f"SUM({at(first, column)}:{at(last, column)})" if last >= first else "0"
        return self.formula(row, column, formula, value, kind, si=si, style="total")
