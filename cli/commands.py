"""The commands. Each parses, calls one library function of the same name, and prints."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

import typer

import earthwork

from .options import Shared, SiteFile, with_shared

app = typer.Typer(
    name="earthwork",
    help="Cut and fill, soil and balance of a site, from two surfaces and a site file. "
    "Exit codes: 0 done, 2 bad input or usage, 3 a warning with --strict, 130 interrupted.",
    no_args_is_help=True,
    add_completion=False,
    rich_markup_mode=None,
    pretty_exceptions_enable=False,
    context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 100},
)


def _version(asked: bool) -> None:
    if asked:
        print(f"earthwork {earthwork.__version__}")
        raise typer.Exit


@app.callback()
def root(
    version: Annotated[
        bool, typer.Option("--version", callback=_version, is_eager=True, help="Print the version and end.")
    ] = False,
) -> None:
    """Options before the command."""


@app.command()
def new(
    directory: Annotated[Path, typer.Argument(metavar="DIR", help="A folder that is new or empty.")],
    units: Annotated[str, typer.Option("--units", metavar="metric|us", help="Units of its numbers.")] = "metric",
) -> None:
    """Write a commented starter site that runs at once.

    It has small surfaces and a plan of an invented place; change it into yours, a line at a time.
    """
    from earthwork.files.starter import new

    site = new(directory, units=units)
    print(f"{site}\nTry:  earthwork volumes {site}")


@app.command()
@with_shared
def check(site: SiteFile, how: Shared) -> None:
    """Check a site file and every file it names.

    Says which commands the site has everything for. The surfaces are read once, so that every block is tried.
    """
    from .flow import perform

    perform("check", site, how)


@app.command()
@with_shared
def volumes(
    site: Annotated[Path | None, typer.Argument(metavar="SITE", help="The site file.")] = None,
    existing: Annotated[Path | None, typer.Option(metavar="FILE", help="Existing ground, a raster.")] = None,
    finished: Annotated[Path | None, typer.Option(metavar="FILE", help="Finished ground, a raster.")] = None,
    limits: Annotated[Path | None, typer.Option(metavar="FILE", help="Polygons; only ground inside counts.")] = None,
    zones: Annotated[Path | None, typer.Option(metavar="FILE", help="Polygons to report by.")] = None,
    zone_name: Annotated[str | None, typer.Option(metavar="FIELD", help="Attribute with a zone's name.")] = None,
    nodata: Annotated[float | None, typer.Option(metavar="X", help="Value for no data in both rasters.")] = None,
    units: Annotated[str | None, typer.Option(metavar="metric|us", help="Units; default metric.")] = None,
    *,
    how: Shared,
) -> None:
    """Cut and fill, by zone and by material.

    Volumes run from stripped ground to subgrade. Give a site file, or two rasters with --existing and --finished.
    """
    from .flow import perform, site_of_files

    files = {
        "existing": existing, "finished": finished, "limits": limits, "zones": zones, "zone_name": zone_name,
        "nodata": nodata, "units": units,
    }  # fmt: skip
    perform("volumes", site_of_files(site, files), how)


@app.command()
@with_shared
def soil(
    site: Annotated[Path | None, typer.Argument(metavar="SITE", help="The site file.")] = None,
    points: Annotated[Path | None, typer.Option(metavar="FILE", help="CSV of compaction points; no site file.")] = None,
    specific_gravity: Annotated[float | None, typer.Option(metavar="G", help="Of the grains, for --points.")] = None,
    method: Annotated[str | None, typer.Option(metavar="NAME", help='Such as "ASTM D698", for --points.')] = None,
    material: Annotated[str | None, typer.Option(metavar="NAME", help="Which rows to take of --points.")] = None,
    units: Annotated[str | None, typer.Option(metavar="metric|us", help="Units for --points.")] = None,
    *,
    how: Shared,
) -> None:
    """The soil card of each material.

    Densities in the bank, loose and compacted, shrink and swell, water contents, the target to place at. With --points it
    fits the compaction curve of a file, without a site file.
    """
    from .flow import perform, site_of_bench

    bench = {"specific_gravity": specific_gravity, "method": method, "material": material, "units": units}
    made = site_of_bench(site, points, bench)
    perform("soil" if points is None else "proctor", made, how)


@app.command()
@with_shared
def balance(site: SiteFile, how: Shared) -> None:
    """Surplus or shortage, imports and exports, grade shift.

    Soil is followed as dry mass, from cut to fill. Says what a point of shrinkage and a step of grade are worth, and
    which shift of the grade that may move would balance the site.
    """
    from .flow import perform

    perform("balance", site, how)


@app.command()
@with_shared
def haul(site: SiteFile, how: Shared) -> None:
    """Plan the haul: which earth goes where, how far, in how many loads, at what cost; with proof and mass curve."""
    from .flow import perform

    perform("haul", site, how)


@app.command()
@with_shared
def lifts(site: SiteFile, how: Shared) -> None:
    """The lifts of each fill, bottom up in placing order: area, volume, mass, loads, rolling, water."""
    from .flow import perform

    perform("lifts", site, how)


@app.command()
@with_shared
def water(site: SiteFile, how: Shared) -> None:
    """Compaction water by day and hour: supply, tank, trucks, the first short hour and what mends it."""
    from .flow import perform

    perform("water", site, how)


@app.command()
@with_shared
def pads(site: SiteFile, how: Shared) -> None:
    """What each building pad stands on.

    Fill thickness, class and flags, a settlement screen, undercuts that would mend a transition, setbacks.
    """
    from .flow import perform

    perform("pads", site, how)


@app.command()
@with_shared
def report(
    site: SiteFile,
    only: Annotated[
        list[str] | None,
        typer.Option(
            "--only", metavar="GROUPS", help="Of page,tables,maps,workbook,gis,model,json; default all of them."
        ),
    ] = None,
    *,
    how: Shared,
) -> None:
    """The whole job in one pass, as a folder of files.

    A page with an interactive map, tables, maps, a workbook, GIS files and a 3D model. Goes into the folder "report" beside
    the site file, or into --out.
    """
    from .flow import perform_report

    perform_report(site, how, only or ())
