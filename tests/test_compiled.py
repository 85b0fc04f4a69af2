"""Compiled code: made where no folder for it can be written, as in a container that is read-only, and anew when it is old."""

import os
import subprocess
import sys

SCRIPT = """
import numba.core.caching as caching
impl = getattr(caching, "CacheImpl", None) or caching._CacheImpl
impl._locator_classes = []  # as on a machine where none of the places that are tried can be written
import numpy as np
from earthwork.quantities.split import split_cells
cells = split_cells(np.array([[2.0, 0.0, -2.0]] * 3))
print(float(cells.fill[0, 0]), float(cells.cut[0, 0]))
"""


def test_nowhere_to_keep_compiled_code():
    done = subprocess.run([sys.executable, "-c", SCRIPT], capture_output=True, text=True, check=False)
    assert done.stderr == ""
    # the plane from +1 to −1 m across a cell: half of it fill with 0.5 m on the mean, and half cut
    assert done.stdout.split() == ["0.25", "0.25"]


def run_loop(folder, added, factor):
    """What a loop gives that calls one of another file and uses a number of a third, in a process of its own."""
    loop = "from earthwork.compiled import kernel\n\n\n@kernel\ndef plus(x):\n    return x + " + str(added) + "\n"
    for name, text in (("numbers_of_it.py", f"FACTOR = {factor}\n"), ("inner.py", loop)):
        # a file that is written anew counts as another, whatever it says
        if not (folder / name).exists() or (folder / name).read_text() != text:
            (folder / name).write_text(text)
    outer = folder / "outer.py"
    if not outer.exists():
        outer.write_text(
            "from earthwork.compiled import kernel\nfrom inner import plus\nfrom numbers_of_it import FACTOR\n\n\n"
            "@kernel\ndef loop(x):\n    return below(x) * FACTOR\n\n\n@kernel\ndef below(x):\n    return plus(x)\n"
        )
    script = "from outer import loop; print(loop(1.0), sum(loop.stats.cache_hits.values()))"
    done = subprocess.run(
        [sys.executable, "-B", "-c", script], cwd=folder, capture_output=True, text=True, check=True,
        env={**os.environ, "NUMBA_CACHE_DIR": str(folder / "kept")},
    )  # fmt: skip
    value, kept = done.stdout.split()
    return float(value), int(kept)


def test_compiled_code_is_made_anew_when_a_loop_that_it_calls_has_changed(tmp_path):
    assert run_loop(tmp_path, added=1.0, factor=1.0) == (2.0, 0)
    assert run_loop(tmp_path, added=1.0, factor=1.0) == (2.0, 1)
    # (1 + 20) · 1: only the file of the inner loop is another
    assert run_loop(tmp_path, added=20.0, factor=1.0) == (21.0, 0)
    assert run_loop(tmp_path, added=20.0, factor=3.0) == (63.0, 0)
    assert run_loop(tmp_path, added=20.0, factor=3.0) == (63.0, 1)
