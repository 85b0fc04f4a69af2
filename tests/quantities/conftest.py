"""Grids of numbers as ground: a surface that is an array."""

from __future__ import annotations

from dataclasses import dataclass
from types import SimpleNamespace

import numpy as np
import pytest

from earthwork.ground.grid import Grid
from earthwork.ground.stack import Stack
from earthwork.quantities.area_volumes import area_volumes
from earthwork.quantities.coverage import area_share
from earthwork.quantities.engine import walk
from earthwork.quantities.volumes import VolumesTally


@dataclass(frozen=True, eq=False)
class ArraySurface:
    """A surface from an array, shape (rows, columns) [m]; NaN = no data."""

    values: np.ndarray
    block: tuple[int, int] | None = None
    block_start: tuple[int, int] = (0, 0)
    resampling: str = "none"

    @property
    def dtype(self):
        return self.values.dtype

    def reader(self):
        return self

    def read(self, window):
        rows = slice(window.row, window.row + window.height)
        return self.values[rows, window.column : window.column + window.width].copy()

    def close(self):
        pass


def stack_of(existing, finished, *, cell=1.0, **layers) -> Stack:
    existing, finished = np.asarray(existing), np.asarray(finished)
    grid = Grid(*existing.shape, west=0.0, north=existing.shape[0] * cell, cell_east=cell, cell_north=cell)
    return Stack(
        grid=grid, existing=ArraySurface(existing), finished=ArraySurface(finished), coverage=area_share, **layers
    )


def count_arrays(existing, finished, *, cell=1.0, threads=1, client=None, tile_cells=None, band_rows=None, **layers):
    """Quantities between two arrays, counted as the program counts a site."""
    stack = stack_of(existing, finished, cell=cell, **layers)
    ground = SimpleNamespace(stack=stack, zone_names=(), zones=None)
    tally = VolumesTally(ground)
    walk(stack, [tally], threads=threads, client=client, tile_cells=tile_cells, band_rows=band_rows)
    return area_volumes(ground, tally.total, None, tally.missing * stack.grid.cell_area_m2)


@pytest.fixture
def count():
    return count_arrays
