"""Runs a command as a whole: the library call, its files, its JSON document and its page."""

from __future__ import annotations

import inspect
import json
from collections.abc import Callable, Sequence
from contextlib import ExitStack
from dataclasses import dataclass
from functools import cached_property
from importlib import import_module
from pathlib import Path
from typing import TYPE_CHECKING, Any

import earthwork
from earthwork.files.output import OutputFolder
from earthwork.reporting.document import document, to_json
from earthwork.results import Result
from earthwork.site import Site

if TYPE_CHECKING:
    from earthwork.reporting.page import Page

#: By command, the module that knows what it shows (``page``) and draws (``tallies``, ``draw``).
_MODULES = {
    "check": "earthwork.reporting.check_page",
    "volumes": "earthwork.reporting.volumes_page",
    "soil": "earthwork.reporting.soil_page",
    "proctor": "earthwork.reporting.proctor_page",
    "balance": "earthwork.reporting.balance_page",
    "lifts": "earthwork.reporting.lifts_page",
    "water": "earthwork.reporting.water_page",
    "pads": "earthwork.reporting.pads_page",
    "haul": "earthwork.reporting.haul_page",
    "report": "earthwork.reporting.report.answers_page",
}


@dataclass(frozen=True)
class Outcome:
    """What a command gave, and the files that it wrote."""

    command: str
    site: Site
    result: Result
    written: tuple[Path, ...] = ()

    @cached_property
    def document(self) -> dict[str, Any]:
        """The JSON document."""
        return document(self.command, self.site, self.result)

    def json(self) -> str:
        """The JSON document as text."""
        return to_json(self.document)

    def page(self) -> Page:
        """The page for people."""
        module = module_of(self.command)
        if module is not None and hasattr(module, "page"):
            return module.page(self.site, self.result)
        from earthwork.reporting.plain_page import page

        return page(self.command, self.site, self.result)


def run_command(
    command: str,
    site: Site,
    *,
    out: str | Path | None = None,
    overwrite: bool = False,
    threads: int | None = None,
    progress: Callable[[int, int], None] | None = None,
) -> Outcome:
    """Run a command on a site, and write its files when a folder is given.

    Args:
        command: name of the command, which is the name of its function in :mod:`earthwork`.
        site: a checked site.
        out: folder for tables, maps and the JSON document; all appear whole or not at all.
        overwrite: replace the files of an earlier run of this command there.
        threads, progress: handed on to commands that read the ground.

    Raises:
        EarthworkError: bad input, or no room to write.
    """
    with ExitStack() as stack:
        folder = None
        if out is not None:
            earlier = outputs_of(out, command)
            output = OutputFolder(out, patterns=patterns(command), earlier=earlier, overwrite=overwrite)
            folder = stack.enter_context(output)
        module = module_of(command)
        tallies = module.tallies(site, folder) if folder and hasattr(module, "tallies") else ()
        result = call(command, site, {"threads": threads, "progress": progress, "tallies": tallies})
        outcome = Outcome(command, site, result)
        if folder is not None:
            _write(outcome, folder, module, tallies)
    return Outcome(command, site, result, folder.written) if folder else outcome


def patterns(command: str) -> tuple[str, ...]:
    """Shell patterns of the names of the files that a command may write."""
    endings = ("csv", "tif", "gpkg", "png", "dxf", "html")
    return (f"{command}.json", f"{command}.csv", *(f"{command}_*.{ending}" for ending in endings))


def outputs_of(directory: str | Path, command: str) -> list[str]:
    """Names of the files that an earlier run of a command wrote into a folder, by its JSON document there."""
    try:
        document = json.loads((Path(directory) / f"{command}.json").read_bytes())
        return [str(name) for name in document["outputs"]]
    except (OSError, ValueError, KeyError, TypeError):
        return []


def call(command: str, site: Site, options: dict[str, Any]) -> Result:
    """Call the function of a command with those of the options that it knows and that are given."""
    function = getattr(earthwork, command)
    known = inspect.signature(function).parameters
    return function(site, **{name: value for name, value in options.items() if name in known and value})


def module_of(command: str) -> Any:
    """The module that knows what a command shows and draws; None where it has none."""
    return import_module(_MODULES[command]) if command in _MODULES else None


def _write(outcome: Outcome, folder: OutputFolder, module: Any, tallies: Sequence[Any]) -> None:
    from earthwork.files.tables import write_csv
    from earthwork.reporting.display import display_table

    for name, table in outcome.result.tables().items():
        file = f"{outcome.command}.csv" if name == outcome.command else f"{outcome.command}_{name}.csv"
        write_csv(folder.path(file), display_table(table, outcome.site.units))
    if hasattr(module, "draw"):
        module.draw(outcome.site, outcome.result, folder, tallies)
    last = folder.path(f"{outcome.command}.json")
    outputs = sorted(file.name for file in last.parent.iterdir())
    last.write_text(to_json({**outcome.document, "outputs": outputs}), encoding="utf-8")
