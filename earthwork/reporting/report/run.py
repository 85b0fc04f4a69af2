"""``earthwork.report(site)``: the whole job in one pass over the ground, written as one folder."""

from __future__ import annotations

import hashlib
import json
from collections.abc import Callable, Iterable
from dataclasses import replace
from pathlib import Path
from typing import Any

import earthwork
from earthwork.errors import Warning
from earthwork.files.report_folder import MANIFEST, Mixed, ReportFolder, find_mixed
from earthwork.quantities.engine import Progress
from earthwork.reporting.report.groups import GROUPS, chosen_groups, group_of, patterns_of
from earthwork.reporting.report.result import ReportResult
from earthwork.site import Site, load_site

#: Folder beside the site file that a report is written into by default.
FOLDER = "report"

Stage = Callable[[str], None]


def report(
    site: Site | str | Path,
    *,
    out: str | Path | None = None,
    only: Iterable[str] = (),
    overwrite: bool = False,
    threads: int | None = None,
    progress: Progress | None = None,
    stage: Stage = lambda name: None,
) -> ReportResult:
    """The report of a site: page, tables, maps, workbook, GIS files, 3D model and one JSON document.

    Args:
        site: a checked site, or the path of its file.
        out: the folder; default: ``report`` beside the site file.
        only: groups of files to write, see :data:`earthwork.reporting.report.groups.GROUPS`; default: all.
        overwrite: replace an earlier report there. A mixed one, of a run that died, is mended in any case.
        threads, progress: of the pass over the ground.
        stage: called with the name of each stage as it begins.

    Raises:
        EarthworkError: bad input, or no room to write; the folder is then as it was.
    """
    from earthwork.reporting.document import inputs as inputs_of

    site = site if isinstance(site, Site) else load_site(site)
    directory = Path(out) if out is not None else site.directory / FOLDER
    groups = chosen_groups(only)
    mixed = find_mixed(directory)
    if mixed is not None:
        groups = _mending(groups, mixed)
    stage("reading the inputs")
    inputs = inputs_of(site, hash_all=True)
    folder = ReportFolder(
        directory,
        patterns=(*patterns_of(GROUPS), MANIFEST),
        chosen=patterns_of(groups),
        inputs=_digest(inputs),
        facts={"command": "report", "version": earthwork.__version__, "site": site.name},
        overwrite=overwrite,
    )
    with folder:
        result = _write(site, folder, groups, inputs, threads=threads, progress=progress, stage=stage)
        stage("putting it in place")
    result = replace(result, written=folder.written)
    if mixed is not None:
        result = replace(result, warnings=(Warning("report-mended", mixed.message), *result.warnings))
    if folder.of_other_inputs:
        result = replace(result, warnings=(_outdated(folder), *result.warnings))
    return result


def _outdated(folder: ReportFolder) -> Warning:
    """What a run of some groups has left beside its files, when the inputs have changed since."""
    names = folder.of_other_inputs
    named = ", ".join(names[:4]) + (f" and {len(names) - 4} more" if len(names) > 4 else "")
    return Warning(
        "report-of-other-inputs",
        f"{folder.directory}: made from other inputs, or by another version, than this run: {named}. "
        "Run report with --overwrite and without --only to renew them all",
    )


def _mending(groups: tuple[str, ...], mixed: Mixed) -> tuple[str, ...]:
    """The groups asked for and those that have files of another run, in their order."""
    wrong = {group_of(name) for name in mixed.files}
    return tuple(name for name in GROUPS if name in groups or name in wrong)


def _digest(inputs: list[dict[str, Any]]) -> str:
    """One digest for all inputs and the version of the program."""
    text = json.dumps([earthwork.__version__, inputs], sort_keys=True)
    return hashlib.sha256(text.encode()).hexdigest()


def _write(
    site: Site,
    folder: ReportFolder,
    groups: tuple[str, ...],
    inputs: list[dict[str, Any]],
    *,
    threads: int | None,
    progress: Progress | None,
    stage: Stage,
) -> ReportResult:
    from earthwork.reporting.report.hand_check import hand_checks
    from earthwork.reporting.report.parts import gather

    wants_pictures = bool({"page", "maps", "gis"} & set(groups))
    rasters = _thickness_raster(site, folder) if "gis" in groups else ()
    stage("reading the ground and planning")
    parts = gather(
        site,
        pictures=folder if wants_pictures else None,
        tallies=lambda ground: rasters,
        threads=threads,
        progress=progress,
    )
    result = ReportResult(
        units=site.units,
        warnings=parts.warnings,
        parts=parts,
        checks=hand_checks(parts),
        directory=folder.directory,
        groups=groups,
    )
    for raster in rasters:
        raster.finish()
    for group, (label, write) in _WRITERS.items():
        if group in groups or (group == "maps" and wants_pictures):
            stage(label)
            write(result, folder, inputs)
    return result


def _thickness_raster(site: Site, folder: ReportFolder) -> tuple[Any, ...]:
    from earthwork.reporting.depth_raster import ThicknessRasterTally

    raster = ThicknessRasterTally(folder.path("fill_thickness.tif"), site.units)
    folder.close_with(raster.abandon)
    return (raster,)


def _write_tables(result: ReportResult, folder: ReportFolder, inputs: list[dict[str, Any]]) -> None:
    from earthwork.files.tables import write_csv
    from earthwork.reporting.display import display_table

    for name, table in result.tables().items():
        write_csv(folder.path(f"{name}.csv"), display_table(table, result.units))


def _write_json(result: ReportResult, folder: ReportFolder, inputs: list[dict[str, Any]]) -> None:
    from earthwork.reporting.document import document, to_json

    text = to_json(document("report", result.parts.site, result))
    folder.path("report.json").write_text(text, encoding="utf-8")


def _write_maps(result: ReportResult, folder: ReportFolder, inputs: list[dict[str, Any]]) -> None:
    from earthwork.reporting.report.parts import draw_pictures

    draw_pictures(result.parts, folder)


def _write_page(result: ReportResult, folder: ReportFolder, inputs: list[dict[str, Any]]) -> None:
    from earthwork.reporting.report.page import page_text

    path = folder.path("report.html")
    text = page_text(result.parts, inputs=inputs, checks=result.checks, pictures=path.parent)
    path.write_text(text, encoding="utf-8")


def _write_workbook(result: ReportResult, folder: ReportFolder, inputs: list[dict[str, Any]]) -> None:
    from earthwork.reporting.workbook.write import write_workbook

    write_workbook(result.parts, folder.path("workbook.xlsx"))


def _write_exchange(result: ReportResult, folder: ReportFolder, inputs: list[dict[str, Any]]) -> None:
    from earthwork.reporting.report.exchange import write_exchange

    write_exchange(result.parts, folder)


def _write_model(result: ReportResult, folder: ReportFolder, inputs: list[dict[str, Any]]) -> None:
    from earthwork.reporting.report.exchange import write_model

    write_model(result.parts, folder)


#: By group, in the order of the work: what the stage is called, and what writes it.
_WRITERS: dict[str, tuple[str, Callable[[ReportResult, ReportFolder, list[dict[str, Any]]], None]]] = {
    "json": ("writing the document", _write_json),
    "tables": ("writing the tables", _write_tables),
    "maps": ("drawing maps and charts", _write_maps),
    "page": ("setting the page", _write_page),
    "workbook": ("writing the workbook", _write_workbook),
    "gis": ("writing layers and surfaces", _write_exchange),
    "model": ("writing the 3D model", _write_model),
}
