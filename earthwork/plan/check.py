"""Everything that can be known to be wrong with a site before any work is planned: ``earthwork.check(site)``."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

from earthwork.quantities.engine import Progress
from earthwork.quantities.placed_tests import doubtful_places, site_cards, site_tests
from earthwork.quantities.site_ground import open_site
from earthwork.quantities.volumes import VolumesResult, count_volumes
from earthwork.results import Result
from earthwork.site import Site, load_site
from earthwork.site.model import SiteModel
from earthwork.soils.card import SoilCard, soil_warnings

if TYPE_CHECKING:
    import pandas


@dataclass(frozen=True, kw_only=True)
class CheckResult(Result):
    """A site that can be worked with: its grid, its soils, and what each command still needs."""

    volumes: VolumesResult
    cards: dict[str, SoilCard]
    needs: dict[str, tuple[str, ...]]  #: by command, the sections of the site file that it misses

    def to_dict(self) -> dict[str, Any]:
        counted = self.volumes.to_dict()
        ground = self.volumes.ground
        return {
            "grid": counted["grid"],
            "area_m2": self.volumes.total.area_m2,
            "missing_area_m2": self.volumes.total.missing_area_m2,
            "disturbed_area_m2": self.volumes.total.disturbed_area_m2,
            "zones": list(ground.zone_names),
            "materials": list(self.cards),
            "commands": [
                {"command": name, "ready": not missing, "missing": list(missing)}
                for name, missing in self.needs.items()
            ],
        }

    def tables(self) -> dict[str, pandas.DataFrame]:
        import pandas as pd

        rows = [
            {"command": name, "ready": not missing, "missing": ", ".join(missing)}
            for name, missing in self.needs.items()
        ]
        return {"commands": pd.DataFrame(rows)}


def check(site: Site | str | Path, *, threads: int | None = None, progress: Progress | None = None) -> CheckResult:
    """Check a site: its file, all files that it names, surfaces against each other, areas, soils.

    Args:
        site: a checked site, or the path of its file.
        threads, progress: as for :func:`earthwork.volumes`; the ground is read once, so that every block is tried.

    Raises:
        EarthworkError: the first thing that is wrong; all faults of the site file, or of the soils, in one message.
    """
    site = site if isinstance(site, Site) else load_site(site)
    cards = site_cards(site) if site.model.material and site.model.fill else {}
    ground = open_site(site)
    volumes = count_volumes(site, ground, threads=threads, progress=progress)
    doubts = doubtful_places(site, ground, site_tests(site)) if cards else ()
    return CheckResult(
        units=site.units,
        warnings=tuple(dict.fromkeys([*volumes.warnings, *soil_warnings(cards), *doubts])),
        volumes=volumes,
        cards=cards,
        needs=needs(site.model),
    )


def needs(model: SiteModel) -> dict[str, tuple[str, ...]]:
    """Sections of the site file that each command misses; none for those that can run."""
    soil = [] if model.material else ["[material.*]"]
    soil += [] if model.fill else ["[fill]"]
    balance = [*soil] if model.stratum or model.borrow else ["[[stratum]] or [[borrow]]", *soil]
    return {
        "volumes": (),
        "soil": tuple(soil),
        "balance": tuple(balance),
        "lifts": tuple(balance),
        "water": (*balance, *(() if model.water else ("[water]",))),
        "haul": (*balance, *(() if model.haul else ("[haul]",))),
        "pads": (*balance, *(() if model.pads else ("[pads]",))),
    }
