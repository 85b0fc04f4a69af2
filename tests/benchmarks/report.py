"""How long ``earthwork report`` takes on the sample as a process: with kernels loaded, and from nothing compiled.

Run ``python tests/benchmarks/report.py``; the goal is 20 s on two cores. The share of the stages is printed.
"""

from __future__ import annotations

import os
import subprocess
import sys
import tempfile
import time
from pathlib import Path

SITE = Path(__file__).parents[2] / "samples" / "larkspur-campus" / "site.toml"
RUN = """
import sys, time
start = time.perf_counter()
import earthwork
def stage(name): print(f"  {time.perf_counter() - start:6.2f} s  {name}")
earthwork.report(sys.argv[1], out=sys.argv[2], stage=stage)
"""


def once(cache: str | None) -> float:
    """Seconds of one run; ``cache``: an empty folder for compiled kernels."""
    with tempfile.TemporaryDirectory() as out:
        environment = dict(os.environ) if cache is None else {**os.environ, "NUMBA_CACHE_DIR": cache}
        start = time.perf_counter()
        subprocess.run([sys.executable, "-c", RUN, str(SITE), str(Path(out) / "report")], check=True, env=environment)
        return time.perf_counter() - start


def main() -> None:
    """Print both times."""
    once(None)
    print(f"kernels loaded: {once(None):.1f} s")
    with tempfile.TemporaryDirectory() as cache:
        print(f"nothing compiled: {once(cache):.1f} s")


if __name__ == "__main__":
    main()
