"""A page for people: blocks of facts, tables and notes, ready to be set by a terminal or a document."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from earthwork.reporting.display import decimals, display_key, plain, suffix_of
from earthwork.units import UnitSystem

#: Tables longer than this are cut on a page; the whole table is in the CSV and JSON.
LONGEST_TABLE = 24


@dataclass(frozen=True)
class Facts:
    """Labels with their values, each value a text with its unit; ``note`` explains what a label does not."""

    rows: tuple[tuple[str, str, str], ...]  #: (label, value, note)
    heading: str = ""


@dataclass(frozen=True)
class Table:
    """A table of texts; the last ``totals`` rows stand under a rule."""

    columns: tuple[str, ...]
    rows: tuple[tuple[str, ...], ...]
    heading: str = ""
    totals: int = 0
    left_out: int = 0
    text_columns: int = 1  #: the first columns hold names, the others numbers


@dataclass(frozen=True)
class Notes:
    """Sentences, one a line."""

    lines: tuple[str, ...]
    heading: str = ""


Block = Facts | Table | Notes


@dataclass(frozen=True)
class Page:
    """What one command shows."""

    title: str
    blocks: tuple[Block, ...]


@dataclass(frozen=True)
class Column:
    """A column of :func:`table_of`: the key in each row, and the heading without its unit."""

    key: str
    label: str
    sign: bool = False


def dimension_of(key: str) -> str | None:
    """How a number is printed, by its key: the dimension of its unit, ``percent``, or ``factor``."""
    suffix = suffix_of(key)
    if suffix is not None:
        return suffix.dimension if suffix.over is None and suffix.times is None else "water_volume"
    return "percent" if "percent" in key or key.endswith("_per_hour") else "factor"


def unit_label(key: str, units: UnitSystem) -> str:
    """The unit that the numbers of a key are shown in; empty for names, counts and factors.

    >>> from earthwork.units import US
    >>> unit_label("cut_m3", US), unit_label("swell_percent", US), unit_label("shrinkage_factor", US)
    ('yd³', '%', '')
    """
    suffix = suffix_of(key)
    if suffix is None:
        return "%" if "percent" in key else ""
    label = units.label(suffix.dimension)
    if suffix.over:
        label += "/" + units.label(suffix.over)
    if suffix.times:
        label += "·" + units.label(suffix.times)
    return label


def column_texts(key: str, values: Sequence[Any], units: UnitSystem, *, sign: bool = False) -> list[str]:
    """The values of one key as texts in the site's units, with the same decimals throughout."""
    factor = display_key(key, units)[1]
    dimension = dimension_of(key) or "factor"
    numbers = [v * factor if isinstance(v, float) else None for v in values]
    places = decimals(numbers, dimension if dimension in _PRINTED_AS else "factor")
    return [_text(v, factor, places, sign) for v in values]


_PRINTED_AS = {"soil_volume", "area", "mass", "water_volume", "length", "density", "percent", "factor"}


def _text(value: Any, factor: float, places: int, sign: bool) -> str:
    if value is None:
        return "–"
    if isinstance(value, bool):
        return "yes" if value else "no"
    if isinstance(value, int):
        return f"{value:,}" if factor == 1.0 else plain(value * factor, places, sign=sign)
    if isinstance(value, float):
        return plain(value * factor, places, sign=sign)
    if isinstance(value, list | tuple):
        return ", ".join(str(v) for v in value) or "–"
    return str(value)


def table_of(
    rows: Sequence[Mapping[str, Any]],
    columns: Sequence[Column],
    units: UnitSystem,
    *,
    heading: str = "",
    totals: Sequence[Mapping[str, Any]] = (),
    text_columns: int = 1,
    longest: int = LONGEST_TABLE,
) -> Table:
    """A table of rows of a result, in the site's units, with the unit under each heading.

    Args:
        rows: rows with the keys of the columns; a key that a row does not have is shown as absent.
        columns: what to show.
        totals: rows under a rule; they share the decimals of their column.
        text_columns: how many columns hold names.
        longest: rows shown; the number left out is told.
    """
    kept = list(rows)[:longest]
    everything = [*kept, *totals]
    texts = [column_texts(c.key, [r.get(c.key) for r in everything], units, sign=c.sign) for c in columns]
    heads = []
    for c in columns:
        unit = unit_label(c.key, units)
        heads.append(f"{c.label}\n{unit}" if unit else c.label)
    return Table(
        columns=tuple(heads),
        rows=tuple(zip(*texts, strict=True)) if everything else (),
        heading=heading,
        totals=len(totals),
        left_out=len(rows) - len(kept),
        text_columns=text_columns,
    )
