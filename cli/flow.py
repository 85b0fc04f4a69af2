"""The one way that every command goes: run the library, write files, print, warn, and end."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any

import typer

from .lean_start import load_numba_without_blas
from .options import Shared
from .progress import ProgressBar
from .terminal import print_json, print_page, say, say_warnings

if TYPE_CHECKING:
    from earthwork.reporting.runner import Outcome
    from earthwork.site import Site


def perform(command: str, site: Path | Site, how: Shared) -> None:
    """Run a command on a site and show its result.

    Raises:
        EarthworkError: bad input.
        typer.Exit: code 3, when ``how.strict`` and there is a warning.
    """
    from earthwork.reporting.runner import run_command
    from earthwork.site import load_site

    if command == "volumes":
        load_numba_without_blas()
    if how.overwrite and how.out is None:
        raise typer.BadParameter("--overwrite replaces files in a folder; give the folder with --out DIR")
    with ProgressBar(command, quiet=how.quiet) as progress:
        outcome = run_command(
            command,
            load_site(site) if isinstance(site, Path) else site,
            out=how.out,
            overwrite=how.overwrite,
            threads=how.threads,
            progress=progress,
        )
    _show(outcome, how)


def perform_report(site: Path, how: Shared, only: Sequence[str]) -> None:
    """Write the report of a site and show its answers; as :func:`perform`."""
    from earthwork.reporting.report.run import report
    from earthwork.reporting.runner import Outcome
    from earthwork.site import load_site

    with ProgressBar("report", quiet=how.quiet) as progress:
        checked = load_site(site)
        result = report(
            checked,
            out=how.out,
            only=only,
            overwrite=how.overwrite,
            threads=how.threads,
            progress=progress,
            stage=progress.begin,
        )
    _show(Outcome("report", checked, result, result.written), how, after=_where(result.written, how))


def _where(written: Sequence[Path], how: Shared) -> str:
    """Where to look; a path stays on one line, however long it is."""
    page = next((str(path) for path in written if path.name == "report.html"), None)
    return f"\nOpen in a browser: {page}" if page and not how.json else ""


def _show(outcome: Outcome, how: Shared, after: str = "") -> None:
    """Warnings and the files written on stderr, the result on stdout."""
    say_warnings(outcome.result.warnings)
    if not how.quiet:
        for file in outcome.written:
            say(f"wrote {file}")
    if how.json:
        print_json(outcome.json())
    else:
        print_page(outcome.page())
    if after:
        print(after)
    if how.strict and outcome.result.warnings:
        raise typer.Exit(3)


def site_of_files(site: Path | None, files: dict[str, Any]) -> Path | Site:
    """The site file, or a site made of two rasters and what was given with them; never both."""
    given = [f"--{name.replace('_', '-')}" for name, value in files.items() if value is not None]
    if site is not None:
        if given:
            raise typer.BadParameter(f"{', '.join(given)} belong to a run without a site file; keep one of the two")
        return site
    for name in ("existing", "finished"):
        if files[name] is None:
            raise typer.BadParameter(f"give a site file, or both --existing and --finished (--{name} is missing)")
    if files["zone_name"] is not None and files["zones"] is None:
        raise typer.BadParameter("--zone-name names an attribute of --zones; give --zones FILE too")
    if files["units"] not in (None, "metric", "us"):
        raise typer.BadParameter(f"--units is {files['units']!r}; it must be metric or us")
    from earthwork.site.load import site_from_files

    return site_from_files(**{name: value for name, value in files.items() if value is not None})


def site_of_bench(site: Path | None, points: Path | None, options: dict[str, Any]) -> Path | Site:
    """The site file, or a site of nothing but a file of compaction points; never both."""
    given = {name: value for name, value in options.items() if value is not None}
    if points is None:
        if site is None:
            raise typer.BadParameter("give a site file, or the points of a compaction curve with --points FILE")
        if given:
            names = ", ".join(f"--{name.replace('_', '-')}" for name in given)
            raise typer.BadParameter(f"{names} belong to a run with --points; a site file says it itself")
        return site
    if site is not None:
        raise typer.BadParameter("--points is for a run without a site file; keep one of the two")
    if given.get("units") not in (None, "metric", "us"):
        raise typer.BadParameter(f"--units is {given['units']!r}; it must be metric or us")
    from earthwork.soils.bench import site_of_points

    return site_of_points(points, **given)
