"""Tables as CSV files that a spreadsheet reads without harm."""

from __future__ import annotations

import csv
import math
from pathlib import Path
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    import pandas

#: A cell that starts with one of these is run as a formula by spreadsheets.
_FORMULA_STARTS = ("=", "+", "-", "@", "\t", "\r", "\n")


def harmless(text: str) -> str:
    """A text cell that no spreadsheet takes for a formula: an apostrophe goes before one that could be.

    >>> harmless("=HYPERLINK(1)"), harmless("lot 7")
    ("'=HYPERLINK(1)", 'lot 7')
    """
    return "'" + text if text.lstrip(" ").startswith(_FORMULA_STARTS) else text


def write_csv(path: Path, table: pandas.DataFrame) -> None:
    """Write a table: UTF-8, commas, one header line, an empty cell for what is absent.

    Numbers carry 12 significant digits. A file with other than ASCII characters starts with a byte order
    mark, by which spreadsheets know its encoding.
    """
    rows = [[harmless(str(name)) for name in table.columns]]
    rows += [[_cell(value) for value in row] for row in table.itertuples(index=False, name=None)]
    plain = all(cell.isascii() for row in rows for cell in row)
    with open(path, "w", encoding="utf-8" if plain else "utf-8-sig", newline="") as file:
        csv.writer(file, lineterminator="\n").writerows(rows)


def _cell(value: Any) -> str:
    if value is None:
        return ""
    if isinstance(value, str):
        return harmless(value)
    if isinstance(value, list | tuple):
        return harmless("; ".join(str(v) for v in value))
    if hasattr(value, "item"):
        value = value.item()
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, float):
        if not math.isfinite(value):
            return ""
        return f"{value:.12g}" if value else "0"
    return harmless(str(value)) if not isinstance(value, int) else str(value)
