"""A designed site: P pads on N × N cells, built, inspected, traced, and read through once.

    python tests/benchmarks/designed_pads.py [N] [P]

The ground, held in memory, is read through in the same run. Goal: building takes about a millisecond a pad, and everything
together grows in proportion to the number of pads, not to the site.
"""

from __future__ import annotations

import sys
import time

import numpy as np
from shapely import affinity
from shapely.geometry import box

from earthwork.ground.design import build_design
from earthwork.ground.design_checks import inspect_design
from earthwork.ground.design_lines import design_area, design_lines
from earthwork.ground.elements import PadShape, SideSlope
from earthwork.ground.grid import Grid, Window


class Hills:
    """Smooth ground held in memory."""

    dtype = np.dtype(np.float64)
    block = None
    block_start = (0, 0)
    resampling = "none"

    def __init__(self, n: int) -> None:
        at = np.arange(n) + 0.5
        self.z = 100 + 3 * np.sin(at / 60) + 0.02 * at + 2 * np.cos(at / 45)[:, None]

    def reader(self) -> Hills:
        return self

    def read(self, window: Window) -> np.ndarray:
        rows = slice(window.row, window.row + window.height)
        return self.z[rows, window.column : window.column + window.width].copy()

    def close(self) -> None:
        pass


def pads_on(ground: Hills, n: int, count: int) -> list[PadShape]:
    """Pads of 50 × 35 m in rows, turned at random, up to 3 m over or under the ground."""
    random = np.random.default_rng(0)
    side = int(np.ceil(np.sqrt(count)))
    pitch = n / side
    pads = []
    for k in range(count):
        x, y = (k % side + 0.3) * pitch, (k // side + 0.3) * pitch
        polygon = affinity.rotate(box(x, y, x + 50, y + 35), random.uniform(0, 40))
        middle = polygon.centroid
        grade = ground.z[n - 1 - int(middle.y), int(middle.x)] + random.uniform(-3, 3)
        pads.append(PadShape(f"pad {k + 1}", polygon, float(grade), SideSlope(2.0, 2.0)))
    return pads


def main() -> None:
    n = int(sys.argv[1]) if len(sys.argv) > 1 else 3000
    count = int(sys.argv[2]) if len(sys.argv) > 2 else 600
    grid, ground = Grid(n, n, 0.0, float(n), 1.0, 1.0), Hills(n)
    build_design(grid, ground, pads_on(ground, n, 1))  # kernels loaded

    def timed(what: str, call):
        start = time.perf_counter()
        found = call()
        print(f"{what:<34} {time.perf_counter() - start:8.2f} s")
        return found

    def through(reader) -> float:
        windows = [Window(row, 0, min(256, n - row), n) for row in range(0, n, 256)]
        return sum(float(reader.read(window).sum()) for window in windows)

    print(f"{count} pads on {n} × {n} cells")
    design = timed("build", lambda: build_design(grid, ground, pads_on(ground, n, count)))
    timed("read the ground", lambda: through(ground))
    timed("read the design", lambda: through(design.reader()))
    timed("inspect", lambda: inspect_design(design))
    area = timed("disturbed area", lambda: design_area(design))
    timed("lines", lambda: design_lines(design, area))


if __name__ == "__main__":
    main()
