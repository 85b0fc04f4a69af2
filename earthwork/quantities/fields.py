"""Fields of a tile that are summed over areas: depths [m] and shares, one value a cell, 0 where no data.

Their sums are in cells or cell·m; times the ground area of a cell they are m² or m³.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from earthwork.compiled import FAST, kernel
from earthwork.ground.stack import Stack
from earthwork.quantities.by_stratum import split_by_stratum
from earthwork.quantities.split import CUT, DISTURBED, split_part
from earthwork.quantities.tile import Tile

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


def extra_fields(tile: Tile) -> dict[str, np.ndarray]:
    """Fields beside those of cut and fill by name, each (height, width); worked out once however many tallies ask.

    All of :func:`field_names` but the first eight and the cut by stratum.
    """
    if tile.extras is None:
        tile.extras = _extra_fields(tile)
    return tile.extras


def _extra_fields(tile: Tile) -> dict[str, np.ndarray]:
    stack = tile.stack
    at: dict[str, np.ndarray] = {}
    valid = np.isfinite(tile.depth[1:-1, 1:-1])
    for kind, layers in (("strip", stack.strips), ("section", stack.sections)):
        for i in range(len(layers)):
            at[f"{kind}{i}"] = valid * tile.core(f"{kind}{i}")
    if stack.excavations:
        at["over_excavation"] = np.where(valid, tile.refill, 0.0)
        if stack.strata:
            at.update({f"over_excavation:{k}": part for k, part in enumerate(tile.excavated_by_stratum)})
    if stack.scarifies:
        at["scarify"] = np.where(valid, _scarified(tile), 0.0)
        for k in range(len(stack.strata)):
            at[f"scarify:{k}"] = at["scarify"] * (tile.stratum_at_bottom == k)
    _bands(tile, at, valid)
    if stack.moving:
        at["move"] = valid * tile.core("move")
    return at


def named_fields(tile: Tile) -> dict[str, np.ndarray]:
    """The fields that are placed, by name, each (height, width): cut, fill, and those of the layers."""
    fields = {"cut": tile.cut, "fill": tile.fill, **extra_fields(tile)}
    strata = len(tile.stack.strata)
    cut = [tile.cut] if strata == 1 else tile.cut_by_stratum if strata else []
    fields.update({f"cut:{k}": part for k, part in enumerate(cut)})
    return fields


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
    amount = tile.fill + at.get("over_excavation", 0.0)
    bottom, top = tile.removal_bottom, tile.subgrade
    height = np.where(valid & (top > bottom), top - bottom, 1.0)
    deeper = np.zeros_like(amount)
    for i in sorted(range(len(bands)), key=lambda i: -bands[i][0]):
        below, start = bands[i]
        from_m = (tile.finished if start == "finished" else top) - below
        share = np.clip((np.minimum(from_m, top) - bottom) / height, 0.0, 1.0)
        under = np.where(valid, amount * share, 0.0)
        at[f"band{i}"] = np.maximum(under - deeper, 0.0)
        deeper = np.maximum(deeper, under)


@kernel(fastmath=FAST)
def _add_weighted(field, share, row, column):
    """Sum of a field × share of one area, (height, width), which starts at (row, column) of the field."""
    height, width = share.shape
    total = 0.0
    for i in range(height):
        part = 0.0
        for j in range(width):
            part += field[row + i, column + j] * share[i, j]
        total += part
    return total


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

    def add(
        self, tile: Tile, share: np.ndarray | None = None, row: int = 0, column: int = 0, *, fixed: Sums | None = None
    ) -> None:
        """Count the part of a tile that lies inside an area.

        Args:
            share: of each cell inside the area, starting at (row, column) of the tile; None: all of the tile.
            fixed: sums of the same part before its grade was shifted: those of layers that lie as they did.
        """
        cut = self._cut_by_stratum(tile, share, row, column) if len(tile.stack.strata) > 1 else None
        base = self._base(tile, share, row, column, fixed)
        self.values[: len(_BASE)] += base
        for i, name in enumerate(field_names(tile.stack)[len(_BASE) :], len(_BASE)):
            kind, _, stratum = name.partition(":")
            if kind == "cut":
                self.values[i] += base[CUT] if cut is None else cut[int(stratum)]
            elif fixed is not None and name.startswith(("strip", "section", "move")):
                self.values[i] += fixed.values[i]
            elif share is None:
                self.values[i] += extra_fields(tile)[name].sum()
            else:
                self.values[i] += _add_weighted(extra_fields(tile)[name], share, row, column)

    def _cut_by_stratum(self, tile: Tile, share: np.ndarray | None, row: int, column: int) -> np.ndarray:
        """Cut of each stratum (strata,) [cell·m]; the tile keeps what the split of all of it gives beside."""
        stripped, subgrade = tile.stack.stripped(tile.arrays), tile.stack.subgrade(tile.arrays)
        layers = (tile.depth, tile.stratum_bottoms, stripped, subgrade)
        cut, sums, high, low = split_by_stratum(*layers, share, row, column)
        if share is None:
            tile.depth_sums = (sums, high, low)
        return cut

    def _base(
        self, tile: Tile, share: np.ndarray | None, row: int, column: int, fixed: Sums | None
    ) -> np.ndarray:
        """Sums of the base fields, which are those of the split in its order; widens the greatest depths."""
        base = np.zeros(len(_BASE))
        if share is not None:
            disturbed = None if tile.plainly_disturbed else tile.disturbed
            self._widen(*split_part(tile.depth, share, row, column, disturbed, base))
            return base
        sums, high, low = tile.depth_sums
        self._widen(high, low)
        base += sums
        if fixed is not None:
            base[DISTURBED] = fixed.values[DISTURBED]
        elif not tile.plainly_disturbed:
            base[DISTURBED] = float(np.where(np.isnan(tile.depth[1:-1, 1:-1]), 0.0, tile.disturbed).sum())
        return base

    def merge(self, other: Sums) -> None:
        self.values += other.values
        self._widen(other.high_m, other.low_m)

    def _widen(self, high: float, low: float) -> None:
        self.high_m = max(self.high_m, high)
        self.low_m = min(self.low_m, low)
