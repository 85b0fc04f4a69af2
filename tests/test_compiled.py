"""Loops compile where no folder for compiled code can be written, as in a container that is read-only."""

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
