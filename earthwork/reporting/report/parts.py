"""The results that a report tells of: every command that the site has everything for, from one pass over its ground."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field
from functools import cached_property
from typing import Any

import earthwork
from earthwork.errors import PlanError, SoilError, Warning
from earthwork.files.output import OutputFolder
from earthwork.plan.check import needs
from earthwork.quantities.cell_probe import CellProbe
from earthwork.quantities.engine import Progress, Tally
from earthwork.quantities.one_pass import OnePass
from earthwork.quantities.placed_tests import site_cards
from earthwork.quantities.site_ground import SiteGround, open_site
from earthwork.quantities.surface_map import SurfaceMap, SurfaceMapTally
from earthwork.reporting.report.groups import COMMANDS
from earthwork.reporting.runner import call, module_of
from earthwork.results import Result
from earthwork.site import Site
from earthwork.soils.card import SoilCard


@dataclass(frozen=True)
class Parts:
    """Everything that was worked out for a report."""

    site: Site
    ground: SiteGround
    results: Mapping[str, Any]  #: by command
    left_out: Mapping[str, str]  #: by command, why
    surfaces: SurfaceMap
    probe: CellProbe
    passes: int
    gathered: Mapping[str, Sequence[Tally]] = field(default_factory=dict)  #: what each command's pictures are made of
    failed: tuple[Warning, ...] = ()

    @property
    def volumes(self) -> Any:
        """The result of **volumes**, which every site has."""
        return self.results["volumes"]

    @cached_property
    def documents(self) -> dict[str, dict[str, Any]]:
        """By command, the ``result`` of its JSON document."""
        from earthwork.reporting.document import clean

        return {name: clean(result.to_dict()) for name, result in self.results.items()}

    @cached_property
    def cards(self) -> dict[str, SoilCard]:
        """Soil cards by material; none where the site has no soils."""
        return site_cards(self.site) if "soil" in self.results else {}

    @property
    def warnings(self) -> tuple[Warning, ...]:
        """The warnings of all parts, each once."""
        every = [w for result in self.results.values() for w in result.warnings]
        return tuple(dict.fromkeys([*self.failed, *every]))


def gather(
    site: Site,
    *,
    pictures: OutputFolder | None = None,
    tallies: Callable[[SiteGround], Sequence[Tally]] = lambda ground: (),
    threads: int | None = None,
    progress: Progress | None = None,
) -> Parts:
    """Run every command that the site has everything for, in one pass over its ground.

    Args:
        site: a checked site.
        pictures: where the commands' maps are written to; None: no pictures are wanted.
        tallies: further questions of the report, counted in the same pass.
        threads, progress: of the pass.

    Raises:
        EarthworkError: bad input. A plan that cannot be made is no error here: it is left out with the reason.
    """
    missing = needs(site.model)
    names = [name for name in COMMANDS if not missing.get(name) and hasattr(earthwork, name)]
    left_out = {name: f"the site file lacks {', '.join(missing[name])}" for name in COMMANDS if missing.get(name)}
    ground = open_site(site, moving="balance" in names)
    surfaces, probe = SurfaceMapTally(ground.stack), CellProbe(ground.stack)
    gathered = {name: _picture_tallies(name, site, pictures) for name in names}
    shared = OnePass(site, ground, tallies=[surfaces, probe, *tallies(ground)], threads=threads, progress=progress)
    answers = shared.run({name: _caller(name, site, gathered[name], threads) for name in names})
    results: dict[str, Result] = {}
    failed = []
    for name, answer in answers.items():
        if answer.error is None:
            results[name] = answer.result
            continue
        if name == "volumes" or not isinstance(answer.error, PlanError | SoilError):
            raise answer.error
        left_out[name] = str(answer.error)
        failed.append(Warning("part-failed", f"{name} is left out of the report: {answer.error}"))
    return Parts(
        site=site,
        ground=ground,
        results=results,
        left_out={name: left_out[name] for name in COMMANDS if name in left_out},
        surfaces=surfaces.map,
        probe=probe,
        passes=shared.passes,
        gathered=gathered,
        failed=tuple(failed),
    )


def _picture_tallies(name: str, site: Site, pictures: OutputFolder | None) -> tuple[Tally, ...]:
    """What gathers a command's pictures; the balance shows the maps of the volumes."""
    module = module_of(name)
    if pictures is None or name == "balance" or not hasattr(module, "tallies"):
        return ()
    return tuple(module.tallies(site, pictures))


def _caller(name: str, site: Site, tallies: Sequence[Tally], threads: int | None) -> Callable[[], Result]:
    return lambda: call(name, site, {"threads": threads, "tallies": tallies})


def draw_pictures(parts: Parts, folder: OutputFolder) -> None:
    """Write the maps and charts of every part."""
    from earthwork.reporting.balance_page import draw_curve

    for name, result in parts.results.items():
        module = module_of(name)
        if name == "balance":
            draw_curve(parts.site, result, folder)
        elif hasattr(module, "draw"):
            module.draw(parts.site, result, folder, parts.gathered[name])
