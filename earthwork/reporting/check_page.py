"""What ``check`` shows: the ground that counts, the files, and the commands that can run."""

from __future__ import annotations

from typing import Any

from earthwork.reporting.basis import missing_line, scale_line
from earthwork.reporting.display import show
from earthwork.reporting.page import Block, Facts, Notes, Page, Table
from earthwork.site import Site
from earthwork.site.inputs import named_files


def page(site: Site, result: Any) -> Page:
    """The page of a **check** result."""
    checked = result.to_dict()
    volumes = result.volumes.to_dict()
    ground = Notes(heading="Ground", lines=(scale_line(site, volumes), missing_line(site, volumes)))
    blocks: list[Block] = [_facts(site, checked), ground, _files(site), _commands(checked)]
    return Page(title=f"{site.name}: the site file and its files are in order", blocks=tuple(blocks))


def _facts(site: Site, checked: dict[str, Any]) -> Facts:
    grid = checked["grid"]
    sides = grid["cell_m"] if isinstance(grid["cell_m"], list) else [grid["cell_m"]]
    cell = " × ".join(show(side, "length", site.units) for side in sides)
    rows = [
        ("coordinates", grid["crs"] or "local grid", ""),
        ("analysis grid", f"{grid['rows']:,} × {grid['columns']:,}", f"rows × columns of {cell}"),
        ("ground that counts", show(checked["area_m2"], "area", site.units), ""),
        ("disturbed", show(checked["disturbed_area_m2"], "area", site.units), ""),
        ("zones", str(len(checked["zones"])), _listed(checked["zones"])),
        ("materials", str(len(checked["materials"])), _listed(checked["materials"])),
    ]
    return Facts(rows=tuple(rows))


def _listed(names: list[str]) -> str:
    return ", ".join(names[:6]) + (f" and {len(names) - 6} more" if len(names) > 6 else "")


def _files(site: Site) -> Table:
    uses: dict[str, list[str]] = {}
    for key, name in named_files(site.model):
        uses.setdefault(name, []).append(key.removesuffix(".file"))
    rows = tuple((name, _listed(keys)) for name, keys in uses.items())
    return Table(columns=("file", "named by"), rows=rows, heading="Files", text_columns=2)


def _commands(checked: dict[str, Any]) -> Table:
    rows = tuple(
        (c["command"], "ready" if c["ready"] else "needs " + " and ".join(c["missing"])) for c in checked["commands"]
    )
    return Table(columns=("command", "state"), rows=rows, heading="Commands", text_columns=2)
