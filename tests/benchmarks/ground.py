"""Pairs of large rasters for the benchmarks, and how a whole process is timed.

Rasters are tiled 512 × 512, DEFLATE with the floating-point predictor, float32, rolling ground with 1 cm of survey noise
in the existing one; they are made once in the folder that is given.
"""

from __future__ import annotations

import json
import os
import resource
import subprocess
import sys
import time
from pathlib import Path

import numpy as np

_TILE = 512


def raster_pair(folder: Path, n: int) -> tuple[Path, Path]:
    """(existing, finished) of n × n cells of 1 m; made when they are not there yet."""
    folder.mkdir(parents=True, exist_ok=True)
    paths = (folder / f"existing_{n}.tif", folder / f"finished_{n}.tif")
    if not all(p.exists() for p in paths):
        _make(paths, n)
    return paths


def _make(paths: tuple[Path, Path], n: int) -> None:
    import rasterio
    from rasterio.transform import from_origin
    from rasterio.windows import Window

    profile = {
        "driver": "GTiff", "width": n, "height": n, "count": 1, "dtype": "float32", "nodata": -9999.0,
        "tiled": True, "blockxsize": _TILE, "blockysize": _TILE, "compress": "deflate", "predictor": 3,
        "crs": "EPSG:32614", "transform": from_origin(500_000, 4_400_000, 1, 1), "BIGTIFF": "IF_SAFER",
        "num_threads": 2,
    }  # fmt: skip
    random = np.random.default_rng(1)
    x = np.arange(n, dtype=np.float32)
    with rasterio.open(paths[0], "w", **profile) as old, rasterio.open(paths[1], "w", **profile) as new:
        for row in range(0, n, _TILE):
            y = np.arange(row, min(row + _TILE, n), dtype=np.float32)[:, None]
            ground = 300 + 12 * np.sin(x / 310) * np.cos(y / 270) + 3 * np.sin((x + y) / 71)
            noise = random.normal(0, 0.01, ground.shape).astype(np.float32)
            graded = 300 + 6 * np.sin(x / 900) * np.cos(y / 700)
            window = Window(0, row, n, len(y))
            old.write((ground + noise).astype(np.float32), 1, window=window)
            new.write(graded.astype(np.float32), 1, window=window)


def timed(arguments: list[str], runs: int = 3) -> dict[str, float]:
    """Median wall time [s] and greatest peak memory [MB] of a process over some runs, after one that is not counted."""
    walls, peaks = [], []
    for k in range(runs + 1):
        start = time.perf_counter()
        child = subprocess.Popen(arguments, stdout=subprocess.DEVNULL, stderr=subprocess.PIPE)
        _, status, usage = os.wait4(child.pid, 0)
        wall = time.perf_counter() - start
        if status:
            raise SystemExit(f"{' '.join(arguments)} failed: {child.stderr.read().decode() if child.stderr else ''}")
        if k:
            walls.append(wall)
            peaks.append(usage.ru_maxrss / 1024)
    return {"wall_s": sorted(walls)[len(walls) // 2], "peak_mb": max(peaks)}


def decode(existing: Path, finished: Path) -> list[str]:
    """The limit: a process that merely decodes both rasters on two threads."""
    return [sys.executable, __file__, str(existing), str(finished)]


def _decode(paths: list[str]) -> None:
    import threading
    from concurrent.futures import ThreadPoolExecutor

    import rasterio
    from rasterio.windows import Window

    with rasterio.open(paths[0]) as file:
        rows, columns = file.shape
    windows = iter([Window(0, r, columns, min(_TILE, rows - r)) for r in range(0, rows, _TILE)])
    lock = threading.Lock()

    def work() -> None:
        with rasterio.Env(GDAL_CACHEMAX=64 * 2**20):
            files = [rasterio.open(p, sharing=False) for p in paths]
            buffer = np.empty((_TILE, _TILE), np.float32)
            while True:
                with lock:
                    window = next(windows, None)
                if window is None:
                    return
                for column in range(0, columns, _TILE):
                    part = Window(column, window.row_off, min(_TILE, columns - column), window.height)
                    out = buffer[: part.height, : part.width]
                    for file in files:
                        file.read(1, window=part, out=out)

    with ThreadPoolExecutor(2) as pool:
        for future in [pool.submit(work) for _ in range(2)]:
            future.result()


def report(name: str, figures: dict[str, float]) -> None:
    """One line of JSON for a case."""
    print(json.dumps({"case": name, **{k: round(v, 3) for k, v in figures.items()}}), flush=True)


if __name__ == "__main__":
    _decode(sys.argv[1:3])
    print(resource.getrusage(resource.RUSAGE_SELF).ru_maxrss)
