"""The pass over the ground with the tally of 500 lifts against the plain volumes pass, both in this process.

    python tests/benchmarks/lifts_against_volumes.py FOLDER [N ...]

FOLDER takes the rasters (N × N cells, default 10000). Goal: at most 1.3 times. Once on plain ground, where the
volumes take least, and once with a stratum, as sites with lifts have (all but those that fill from borrows alone).
The passes take turns; each figure is the median of five. ``cpu`` figures are of both threads together: look at these
where the machine is not calm.
"""

from __future__ import annotations

import sys
import time
from pathlib import Path

from ground import raster_pair, report

from earthwork.plan.fill_areas import fill_areas
from earthwork.quantities.lift_tally import LiftTally
from earthwork.quantities.site_ground import open_site
from earthwork.quantities.volumes import count_volumes
from earthwork.site import Site, check_site

_LIFTS = 500
_RELIEF_M = 21.0  #: of the thickest fill, from its lowest bottom to its highest top


def main() -> None:
    folder, sizes = Path(sys.argv[1]), [int(n) for n in sys.argv[2:]] or [10_000]
    for n in sizes:
        existing, finished = raster_pair(folder, n)
        document = {
            "site": {"name": "benchmark", "units": "metric"},
            "ground": {"existing": str(existing), "finished": str(finished)},
        }
        _compare(f"lifts {n}, plain ground", check_site(document, folder))
        _compare(f"lifts {n}, one stratum", check_site({**document, "stratum": [{"material": "silt"}]}, folder))


def _compare(name: str, site: Site) -> None:
    ground = open_site(site)
    times: dict[str, list[float]] = {"volumes": [], "lifts": []}
    cpu: dict[str, list[float]] = {"volumes": [], "lifts": []}
    lifts = 0
    for k in range(6):
        for case in times:
            tallies = [LiftTally(ground.stack, _RELIEF_M / _LIFTS)] if case == "lifts" else []
            start, busy = time.perf_counter(), time.process_time()
            count_volumes(site, ground, tallies=tallies)
            if tallies:
                lifts = max(len(area.benches) for area in fill_areas(tallies[0]))
            if k:
                times[case].append(time.perf_counter() - start)
                cpu[case].append(time.process_time() - busy)
    wall = {case: sorted(t)[len(t) // 2] for case, t in times.items()}
    work = {case: sorted(t)[len(t) // 2] for case, t in cpu.items()}
    ratios = {"ratio": wall["lifts"] / wall["volumes"], "cpu ratio": work["lifts"] / work["volumes"]}
    report(name, {**wall, **{f"cpu {c}": t for c, t in work.items()}, **ratios, "lifts of one fill": lifts})


if __name__ == "__main__":
    main()
