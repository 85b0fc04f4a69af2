"""`volumes` as a whole process against merely decoding both rasters on two threads, both measured in this run.

    python tests/benchmarks/volumes_against_decode.py FOLDER [N ...]

FOLDER takes the rasters (N × N cells, default 10000; 20000 wants some 2 GB). Goals: wall time at most 1.8 times the
decode at 10,000 and 1.4 times at 20,000; peak memory at most 300 MB.
"""

from __future__ import annotations

import sys
from pathlib import Path

from ground import decode, raster_pair, report, timed


def main() -> None:
    folder, sizes = Path(sys.argv[1]), [int(n) for n in sys.argv[2:]] or [10_000]
    for n in sizes:
        existing, finished = raster_pair(folder, n)
        command = [sys.executable, "-m", "earthwork_cli", "volumes", "--existing", str(existing)]
        command += ["--finished", str(finished), "--json", "--quiet"]
        limit, ours = timed(decode(existing, finished)), timed(command)
        report(f"decode {n}", limit)
        report(f"volumes {n}", {**ours, "ratio": ours["wall_s"] / limit["wall_s"]})


if __name__ == "__main__":
    main()
