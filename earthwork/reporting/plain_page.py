"""A page for a result of any command: its single figures, then its tables."""

from __future__ import annotations

from typing import Any

from earthwork.reporting.page import Block, Column, Facts, Page, column_texts, table_of, unit_label
from earthwork.results import Result
from earthwork.site import Site


def page(command: str, site: Site, result: Result) -> Page:
    """The page of a result that has none of its own."""
    content = result.to_dict()
    facts = tuple(_fact(key, value, site) for key, value in content.items() if _single(value))
    blocks: list[Block] = [Facts(rows=facts)] if facts else []
    for key, value in content.items():
        if isinstance(value, list) and value and all(isinstance(row, dict) for row in value):
            names = list(dict.fromkeys(name for row in value for name in row if _single(row[name])))
            columns = [Column(name, _label(name)) for name in names]
            blocks.append(table_of(value, columns, site.units, heading=key.replace("_", " ")))
    return Page(title=f"{site.name}: {command}", blocks=tuple(blocks))


def _single(value: Any) -> bool:
    return value is None or isinstance(value, bool | int | float | str)


def _fact(key: str, value: Any, site: Site) -> tuple[str, str, str]:
    unit = unit_label(key, site.units) if value is not None else ""
    return _label(key), f"{column_texts(key, [value], site.units)[0]} {unit}".rstrip(), ""


def _label(key: str) -> str:
    """A key without its unit, in words.

    >>> _label("tank_needed_l"), _label("water_to_add_l_per_m3"), _label("limited_by")
    ('tank needed', 'water to add', 'limited by')
    """
    from earthwork.reporting.display import suffix_of

    suffix = suffix_of(key)
    return (key.removesuffix(suffix.text) if suffix else key).replace("_", " ")
