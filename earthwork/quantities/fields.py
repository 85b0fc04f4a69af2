"""Fields of a tile that are summed over areas: depths [m] and shares, one value a cell, 0 where no data.

Their sums are in cells or cell·m; times the ground area of a cell they are m² or m³.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numba import njit

from earthwork.ground.stack import Stack
from earthwork.quantities.tile import Tile

_FAST = {"reassoc", "nsz", "contract", "arcp"}
_BASE = ("area", "cut", "fill", "cut_area", "fill_area", "plain_cut", "plain_fill", "disturbed")


def field_names(stack: Stack) -> list[str]:
    """Names of the summed fields of a stack, in their order."""
    names = list(_BASE)
    names += [f"strip{i}" for i in range(len(stack.strips))]
    names += [f"section{i}" for i in range(len(stack.sections))]
    if stack.excavations:
        names.append("over_excavation")
    strata = range(len(stack.strata))
    if stack.scarifies:
        names += ["scarify", *(f"scarify:{k}" for k in strata)]
    names += [f"cut:{k}" for k in strata]
    if stack.excavations:
        names += [f"over_excavation:{k}" for k in strata]
    names += [f"band{i}" for i in range(len(stack.bands_below_m))]
    return names + ["move"] if stack.moving else names


def fields_of(tile: Tile) -> np.ndarray:
    """The fields of a tile, worked out once however many tallies ask; see :func:`field_values`."""
    if tile.fields is None:
        tile.fields = field_values(tile)
    return tile.fields


def field_values(tile: Tile) -> np.ndarray:
    """The fields of a tile, shape (fields, height, width), in the order of :func:`field_names`."""
    stack = tile.stack
    names = field_names(stack)
    values = np.empty((len(names), tile.window.height, tile.window.width))
    at = {name: values[i] for i, name in enumerate(names)}
    depth = tile.depth[1:-1, 1:-1]
    valid = np.isfinite(depth)
    at["area"][...] = valid
    at["cut"][...], at["fill"][...], at["cut_area"][...], at["fill_area"][...] = tile.cells
    np.maximum(0.0, np.where(valid, -depth, 0.0), out=at["plain_cut"])
    np.maximum(0.0, np.where(valid, depth, 0.0), out=at["plain_fill"])
    np.multiply(valid, tile.disturbed, out=at["disturbed"])
    for kind, layers in (("strip", stack.strips), ("section", stack.sections)):
        for i in range(len(layers)):
            np.multiply(valid, tile.core(f"{kind}{i}"), out=at[f"{kind}{i}"])
    if stack.excavations:
        at["over_excavation"][...] = np.where(valid, tile.refill, 0.0)
        for k, part in enumerate(tile.excavated_by_stratum):
            if stack.strata:
                at[f"over_excavation:{k}"][...] = part
    if stack.scarifies:
        at["scarify"][...] = np.where(valid, _scarified(tile), 0.0)
        for k in range(len(stack.strata)):
            np.multiply(at["scarify"], tile.stratum_at_bottom == k, out=at[f"scarify:{k}"])
    if stack.strata:
        for k, part in enumerate(tile.cut_by_stratum):
            at[f"cut:{k}"][...] = part
    _bands(tile, at, valid)
    if stack.moving:
        np.multiply(valid, tile.core("move"), out=at["move"])
    return values


def _scarified(tile: Tile) -> np.ndarray:
    """Depth loosened and recompacted in place, mean over each cell [m]; default: under fill."""
    total = np.zeros((tile.window.height, tile.window.width))
    for i, layer in enumerate(tile.stack.scarifies):
        total += layer.depth_m * tile.cells[3] if layer.area is None else tile.core(f"scarify{i}")
    return total


def _bands(tile: Tile, at: dict[str, np.ndarray], valid: np.ndarray) -> None:
    """Compacted volume (fill and refill) that lies in each by_depth row and in no deeper one [mean m]."""
    bands = tile.stack.bands_below_m
    if not bands:
        return
    amount = at["fill"] + at.get("over_excavation", 0.0)
    bottom, top = tile.removal_bottom, tile.subgrade
    height = np.where(valid & (top > bottom), top - bottom, 1.0)
    deeper = np.zeros_like(amount)
    for i in sorted(range(len(bands)), key=lambda i: -bands[i][0]):
        below, start = bands[i]
        from_m = (tile.finished if start == "finished" else top) - below
        share = np.clip((np.minimum(from_m, top) - bottom) / height, 0.0, 1.0)
        under = np.where(valid, amount * share, 0.0)
        at[f"band{i}"][...] = np.maximum(under - deeper, 0.0)
        deeper = np.maximum(deeper, under)


@njit(cache=True, nogil=True, error_model="numpy", fastmath=_FAST)
def _add_weighted(fields, depth, share, row, column, sums):
    """Add the fields × share of one area to ``sums``; returns the greatest and the least depth inside it."""
    height, width = share.shape
    for f in range(fields.shape[0]):
        total = 0.0
        for i in range(height):
            part = 0.0
            for j in range(width):
                part += fields[f, row + i, column + j] * share[i, j]
            total += part
        sums[f] += total
    high = 0.0
    low = 0.0
    for i in range(height):
        for j in range(width):
            x = np.float64(depth[row + i + 1, column + j + 1])
            if share[i, j] > 0.0 and x == x:
                high = max(high, x)
                low = min(low, x)
    return high, low


@dataclass
class Sums:
    """Sums of all fields over one area, with its greatest fill and (negative) greatest cut [m]."""

    values: np.ndarray
    high_m: float = 0.0
    low_m: float = 0.0

    @classmethod
    def none(cls, stack: Stack) -> Sums:
        """Nothing counted."""
        return cls(np.zeros(len(field_names(stack))))

    def add(self, tile: Tile, fields: np.ndarray, share: np.ndarray | None, row: int = 0, column: int = 0) -> None:
        """Count the part of a tile that lies inside an area.

        Args:
            fields: of :func:`field_values`.
            share: of each cell inside the area, starting at (row, column) of the tile; None: all of the tile.
        """
        if share is None:
            self.values += fields.sum(axis=(1, 2))
            depth = tile.depth[1:-1, 1:-1]
            self._widen(
                float(np.fmax.reduce(depth, axis=None, initial=0.0)),
                float(np.fmin.reduce(depth, axis=None, initial=0.0)),
            )
        else:
            self._widen(*_add_weighted(fields, tile.depth, share, row, column, self.values))

    def add_plain(self, tile: Tile) -> None:
        """Count a whole tile without layers, without holding its fields."""
        sums, high, low = tile.depth_sums
        self._widen(high, low)
        # The kernel's order is that of the base fields.
        self.values += sums

    def merge(self, other: Sums) -> None:
        self.values += other.values
        self._widen(other.high_m, other.low_m)

    def _widen(self, high: float, low: float) -> None:
        self.high_m = max(self.high_m, high)
        self.low_m = min(self.low_m, low)
