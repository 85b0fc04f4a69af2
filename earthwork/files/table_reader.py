"""Reads the tables that laboratories and field crews send: CSV as spreadsheets really write it.

What is plain is read: a byte order mark, comma, semicolon or tab between cells, decimal commas where the
comma does not separate cells, a row of units under the header, ``-`` and ``n/a`` for what is missing,
comment lines, ``12.5 %`` with its unit in the cell. What could mean two things is refused with row and
column.
"""

from __future__ import annotations

import csv
import re
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

from earthwork.errors import FileError
from earthwork.units import UNITS

#: Cells that stand for a missing value, lower-case.
MISSING = frozenset({"", "-", "--", "–", "—", "n/a", "na", "n.a.", "#n/a", "nan", "null", "none", "nil", "?", "."})
_PLAIN = re.compile(r"[+-]?(\d+\.?\d*|\.\d+)([eE][+-]?\d+)?")
_COMMA = re.compile(r"[+-]?(\d+,\d*|,\d+)([eE][+-]?\d+)?")
_WITH_UNIT = re.compile(r"([+-]?[\d.,]+(?:[eE][+-]?\d+)?)\s*([^\d\s.,].*)")
#: How a unit is written in a header or a unit row → its suffix in a column name.
_UNIT_SUFFIX = {
    "kg/m3": "kg_m3", "kg m-3": "kg_m3", "t/m3": "t_m3", "mg/m3": "t_m3", "g/cm3": "g_cm3", "g/cc": "g_cm3",
    "lb/ft3": "lb_ft3", "lbs/ft3": "lb_ft3", "lbf/ft3": "lb_ft3", "pcf": "lb_ft3", "kn/m3": "kn_m3",
    "%": "percent", "percent": "percent", "pct": "percent", "fraction": "fraction", "decimal": "fraction",
    "m": "m", "cm": "cm", "mm": "mm", "in": "in", "in.": "in", "ft": "ft", "g": "g", "kg": "kg", "lb": "lb",
    "lbs": "lb", "cm3": "cm3", "cc": "cm3", "ml": "cm3", "l": "l", "m3": "m3", "ft3": "ft3", "in3": "in3",
}  # fmt: skip
_UNITLESS = frozenset({"", "-", "–", "—", "1", "text", "name", "no", "no.", "#", "[-]"})


#: Faults of a file that one message lists.
MOST_FAULTS = 12


@dataclass(frozen=True)
class Row:
    """A row of a table: its number in the file (the header is usually row 1) and its cells by column name."""

    number: int
    cells: dict[str, str]

    def text(self, column: str) -> str | None:
        """The cell as text, None when it is missing."""
        cell = self.cells.get(column, "").strip()
        return None if cell.lower() in MISSING else cell


@dataclass(frozen=True)
class SourceTable:
    """A table as text: column names in a plain spelling (``dry_density_kg_m3``), rows with their numbers."""

    path: Path
    columns: tuple[str, ...]
    rows: tuple[Row, ...]
    decimal_comma: bool

    def number(self, row: Row, column: str) -> float | None:
        """The number in a cell, None when it is missing.

        Raises:
            FileError: not a number, or one that can be read in two ways.
        """
        cell = row.text(column)
        if cell is None:
            return None
        value = _number(cell, decimal_comma=self.decimal_comma)
        if isinstance(value, float):
            return value
        raise FileError(f"{self.path}: row {row.number}, column {column}: {cell!r} {value}")


    def refuse(self, faults: Sequence[str]) -> None:
        """Raise a FileError that lists the faults of the file, where there are any."""
        if not faults:
            return
        count = "1 fault" if len(faults) == 1 else f"{len(faults)} faults"
        lines = [f"  {fault}" for fault in faults[:MOST_FAULTS]]
        if len(faults) > MOST_FAULTS:
            lines.append(f"  and {len(faults) - MOST_FAULTS} more like these")
        raise FileError(f"{self.path}: {count}\n" + "\n".join(lines))


def read_source_table(path: Path) -> SourceTable:
    """Read a table of a laboratory or a field crew.

    Raises:
        FileError: missing, not text, no header, no rows, or rows that do not fit the header.
    """
    rows, separator = _rows(path, _decode(path))
    names = _column_names(path, rows[0][1])
    body = rows[1:]
    if body and (units := _unit_row(body[0][1])) is not None:
        names = _with_units(path, body[0][0], names, units)
        body = body[1:]
    _check_names(path, names)
    checked = [Row(number, _cells(path, number, names, cells, separator)) for number, cells in body]
    if not checked:
        raise FileError(f"{path}: a header and no rows; give a row per test")
    decimal_comma = (separator != "," or _surely_decimal(checked)) and _uses_decimal_comma(path, checked)
    return SourceTable(path, tuple(n for n in names if n), tuple(checked), decimal_comma)


def _decode(path: Path) -> str:
    try:
        data = path.read_bytes()
    except FileNotFoundError:
        raise FileError(f"{path}: no such file") from None
    except IsADirectoryError:
        raise FileError(f"{path}: is a folder; give a CSV file") from None
    except OSError as error:
        raise FileError(f"{path}: cannot be read ({(error.strerror or str(error)).lower()})") from None
    if data[:4] == b"PK\x03\x04" or data[:4] == b"\xd0\xcf\x11\xe0":
        raise FileError(f"{path}: a workbook, not CSV; save the sheet as CSV (UTF-8)")
    if data[:2] in (b"\xff\xfe", b"\xfe\xff"):
        return data.decode("utf-16", errors="replace")
    if b"\x00" in data:
        raise FileError(f"{path}: not text; save the table as CSV (UTF-8)")
    try:
        return data.decode("utf-8-sig")
    except UnicodeDecodeError:
        # What old spreadsheets write; a wrong guess could only spoil names, never digits.
        return data.decode("cp1252", errors="replace")


def _rows(path: Path, text: str) -> tuple[list[tuple[int, list[str]]], str]:
    """The rows with their line numbers, without blank ones and comments, and the separator."""
    lines = text.splitlines(keepends=True)
    start = next((i for i, line in enumerate(lines) if line.strip(" \t,;\r\n") and not line.startswith("#")), None)
    if start is None:
        raise FileError(f"{path}: empty; it must have a header row with column names, and a row per test")
    declared = re.fullmatch(r"sep=(.)", lines[start].strip(), re.IGNORECASE)
    if declared:
        start += 1
    separator = declared.group(1) if declared else _separator(lines[start])
    reader = csv.reader(lines[start:], delimiter=separator)
    rows = []
    number = start + 1
    try:
        for cells in reader:
            if any(cell.strip() for cell in cells) and not cells[0].startswith("#"):
                rows.append((number, cells))
            number = start + reader.line_num + 1
    except csv.Error as error:
        raise FileError(f"{path}: row {number}: not a row of cells ({error})") from None
    return rows, separator


def _separator(header: str) -> str:
    """The separator that the header has most of; a header of one column has a comma by default."""
    counts = {s: header.count(s) for s in (";", "\t", ",")}
    best = max(counts, key=lambda s: counts[s])
    return best if counts[best] else ","


def _unit_suffix(text: str) -> str | None:
    """The suffix of a unit as people write it, None when it is no unit."""
    spelled = text.strip().strip("[]()").strip().lower().replace("³", "3").replace("²", "2").replace("^", "")
    return _UNIT_SUFFIX.get(spelled)


def column_name(text: str) -> str:
    """A header cell in plain spelling, a unit in brackets as its suffix.

    >>> column_name("Dry density (kg/m³)"), column_name("Water content [%]"), column_name("Test")
    ('dry_density_kg_m3', 'water_content_percent', 'test')
    """
    name = text.strip()
    suffix = None
    if ((match := re.search(r"[\[(]([^\])]*)[\])]\s*$", name)) and (suffix := _unit_suffix(match.group(1)))) or (
        (match := re.search(r"[,_\s]\s*(%|\S*/\S+)\s*$", name)) and (suffix := _unit_suffix(match.group(1)))
    ):
        name = name[: match.start()]
    name = name.lower().replace("³", "3").replace("%", " percent ")
    name = re.sub(r"[^a-z0-9]+", "_", name).strip("_")
    return f"{name}_{suffix}" if suffix else name


def _column_names(path: Path, header: Sequence[str]) -> list[str]:
    if all(_is_number(cell) for cell in header if cell.strip()):
        raise FileError(f"{path}: the first row has numbers only; it must name the columns")
    return [column_name(cell) for cell in header]


def _unit_row(cells: Sequence[str]) -> list[str | None] | None:
    """The units of a unit row; None when the row is none: it needs one unit at least, and nothing else."""
    suffixes = [_unit_suffix(cell) for cell in cells]
    if not any(suffixes):
        return None
    plain = all(s or c.strip().lower() in _UNITLESS for s, c in zip(suffixes, cells, strict=True))
    return suffixes if plain else None


def _with_units(path: Path, number: int, names: list[str], units: list[str | None]) -> list[str]:
    united = []
    for name, unit in zip(names, units + [None] * (len(names) - len(units)), strict=False):
        carried = next((s for s in sorted(set(_UNIT_SUFFIX.values()), key=len, reverse=True)
                        if name.endswith(f"_{s}")), None)  # fmt: skip
        if unit and carried and unit != carried:
            raise FileError(
                f"{path}: row {number}, column {name}: the unit row says {unit.replace('_', '/')}, which "
                "is not "
                "the unit in the name; keep the right one"
            )
        united.append(f"{name}_{unit}" if unit and not carried else name)
    return united


def _check_names(path: Path, names: Sequence[str]) -> None:
    twice = sorted({name for name in names if name and names.count(name) > 1})
    if twice:
        raise FileError(f"{path}: the column {', '.join(twice)} comes twice; each name must be there once")


def _cells(path: Path, number: int, names: list[str], cells: list[str], separator: str) -> dict[str, str]:
    extra = [cell for cell in cells[len(names) :] if cell.strip()]
    if extra:
        hint = (
            ". Decimal commas in a file with commas between cells cannot be told apart: use semicolons "
            "between "
            "cells, or decimal points"
            if separator == ","
            else ""
        )
        raise FileError(
            f"{path}: row {number}, column {len(names) + 1}: {len(cells)} cells, but the header names "
            f"{len(names)} columns{hint}"
        )
    return {name: cell for name, cell in zip(names, cells, strict=False) if name}


def _is_number(cell: str) -> bool:
    return bool(_PLAIN.fullmatch(cell.strip()) or _COMMA.fullmatch(cell.strip()))


def _uses_decimal_comma(path: Path, rows: Sequence[Row]) -> bool:
    """Whether numbers have a decimal comma; a file with both kinds is refused, since 1,760 may be either."""
    first: dict[str, tuple[int, str, str]] = {}
    for row in rows:
        for column, cell in row.cells.items():
            bare = cell.strip().removesuffix("%").strip()
            kind = "," if _COMMA.fullmatch(bare) else "." if _PLAIN.fullmatch(bare) and "." in bare else None
            if kind:
                first.setdefault(kind, (row.number, column, cell.strip()))
    if len(first) == 2:
        (a, col_a, text_a), (b, col_b, text_b) = first[","], first["."]
        raise FileError(
            f"{path}: row {a}, column {col_a} has {text_a!r} and row {b}, column {col_b} has {text_b!r}: "
            "decimal "
            "commas and decimal points in one file; write all numbers in one way"
        )
    return "," in first


def _surely_decimal(rows: Sequence[Row]) -> bool:
    """Whether quoted cells between commas have commas that cannot be for thousands: ``"10,5"``."""
    bare = [cell.strip().removesuffix("%").strip() for row in rows for cell in row.cells.values()]
    commas = [cell for cell in bare if _COMMA.fullmatch(cell)]
    return any(len(re.split("[,eE]", cell)[1]) != 3 for cell in commas)


def _number(cell: str, *, decimal_comma: bool) -> float | str:
    """The number in a cell, or why there is none.

    A percent sign may follow; other units belong in the name.
    """
    bare = cell.removesuffix("%").strip()
    if decimal_comma and _COMMA.fullmatch(bare):
        return float(bare.replace(",", "."))
    if _PLAIN.fullmatch(bare):
        return float(bare)
    if "," in bare and re.fullmatch(r"[+-]?[\d.,]+", bare):
        return "may have a decimal comma or a comma for thousands; write it with a decimal point and no other comma"
    if (match := _WITH_UNIT.fullmatch(cell)) and any(match.group(2).strip() in units for units in UNITS.values()):
        return f"has a unit; put {match.group(2).strip()} into the name of the column"
    if cell[0] in "<>~≈":
        return "is a bound, not a value; give the value, or leave the cell empty"
    return "is not a number"
