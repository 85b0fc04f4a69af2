"""What ``soil --points`` shows: the fitted compaction curve, its points, and what its maximum means."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

from earthwork.reporting.page import Block, Column, Facts, Notes, Page, table_of
from earthwork.reporting.soil_blocks import CAUTIONS, curve_rows, draw_curves
from earthwork.results import Result
from earthwork.site import Site

if TYPE_CHECKING:
    from earthwork.files.output import OutputFolder

_POINTS = (
    Column("place", "point"),
    Column("water_content_percent", "water"),
    Column("dry_density_kg_m3", "dry density"),
    Column("fitted_dry_density_kg_m3", "on the curve"),
    Column("saturation_percent", "saturation"),
    Column("void_ratio", "void ratio"),
)
_COMPACTIONS = (
    Column("relative_compaction_percent", "compaction"),
    Column("dry_density_kg_m3", "dry density"),
    Column("zero_air_voids_water_content_percent", "most water possible"),
)


def page(site: Site, result: Result) -> Page:
    """The page of a **proctor** result."""
    blocks: list[Block] = []
    for curve in result.to_dict()["curves"]:
        facts = [
            ("method", curve["method"], f"specific gravity {curve['specific_gravity']:g}"),
            ("curve", f"{curve['count']} points, {curve['form']}", ""),
            *curve_rows(curve, site.units),
        ]
        blocks.append(Facts(heading=curve["material"], rows=tuple(facts)))
        blocks.append(table_of(curve["points"], _POINTS, site.units, heading="Points"))
        blocks.append(table_of(curve["compactions"], _COMPACTIONS, site.units, heading="Compactions", text_columns=0))
    blocks.append(Notes(heading="Care", lines=CAUTIONS))
    return Page(title=f"{site.name}: compaction curve", blocks=tuple(blocks))


def draw(site: Site, result: Any, folder: OutputFolder, tallies: Sequence[Any]) -> None:
    """Write the charts."""
    draw_curves(site, result, folder)
