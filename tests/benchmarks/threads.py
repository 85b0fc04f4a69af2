"""The same digits for 1, 2 and 4 threads, and what the threads gain, on N × N cells.

    python tests/benchmarks/threads.py FOLDER [N]
"""

from __future__ import annotations

import json
import subprocess
import sys
from pathlib import Path

from ground import raster_pair, report, timed


def main() -> None:
    n = int(sys.argv[2]) if len(sys.argv) > 2 else 10_000
    existing, finished = raster_pair(Path(sys.argv[1]), n)
    command = [sys.executable, "-m", "earthwork_cli", "volumes", "--existing", str(existing)]
    command += ["--finished", str(finished), "--json", "--quiet", "--threads"]
    answers = set()
    for threads in (1, 2, 4):
        done = subprocess.run([*command, str(threads)], capture_output=True, check=True, text=True)
        answers.add(json.dumps(json.loads(done.stdout)["result"]))
        report(f"{threads} threads, {n}", timed([*command, str(threads)], runs=1))
    if len(answers) != 1:
        raise SystemExit("the answers differ between threads")
    print("the answers are the same to the last digit")


if __name__ == "__main__":
    main()
