"""What a report is made of: groups of files that ``--only`` chooses from."""

from __future__ import annotations

import fnmatch
from collections.abc import Iterable

from earthwork.errors import OutputError

#: Commands in the order of the page.
COMMANDS = ("volumes", "soil", "balance", "pads", "lifts", "water", "haul")

#: By group, what it is and the shell patterns of its files.
GROUPS: dict[str, tuple[str, tuple[str, ...]]] = {
    "page": ("the page for people, with its interactive map", ("report.html", *(f"{c}_*.html" for c in COMMANDS))),
    "tables": ("all tables as CSV", tuple(p for c in COMMANDS for p in (f"{c}.csv", f"{c}_*.csv"))),
    "maps": ("maps and charts as PNG", tuple(f"{c}_*.png" for c in COMMANDS)),
    "workbook": ("a workbook with live formulas", ("workbook.xlsx",)),
    "gis": (
        "layers and surfaces for GIS, design and stake-out",
        (
            "site.gpkg", "fill_thickness.tif", "surfaces.xml", "surfaces.dxf", "stakeout.txt",
            *(f"{c}_*.{ending}" for c in COMMANDS for ending in ("tif", "gpkg", "geojson", "dxf")),
        ),
    ),
    "model": ("a 3D model", ("site.glb",)),
    "json": ("all results in one document", ("report.json",)),
}  # fmt: skip


def chosen_groups(only: Iterable[str]) -> tuple[str, ...]:
    """The groups that are asked for, in their order; none asked for is all.

    Raises:
        OutputError: a group that there is not.

    >>> chosen_groups(["tables,maps"])
    ('tables', 'maps')
    >>> len(chosen_groups([])) == len(GROUPS)
    True
    """
    asked = [part.strip() for text in only for part in text.split(",") if part.strip()]
    unknown = [name for name in asked if name not in GROUPS]
    if unknown:
        raise OutputError(f"--only is {unknown[0]!r}; it must be one or more of {', '.join(GROUPS)}")
    return tuple(name for name in GROUPS if name in asked or not asked)


def patterns_of(groups: Iterable[str]) -> tuple[str, ...]:
    """Shell patterns of all files of some groups."""
    return tuple(pattern for name in groups for pattern in GROUPS[name][1])


def group_of(file: str) -> str | None:
    """The group that a file belongs to.

    >>> group_of("balance_ledger.csv"), group_of("notes.txt")
    ('tables', None)
    """
    return next((g for g, (_, names) in GROUPS.items() if any(fnmatch.fnmatchcase(file, n) for n in names)), None)
