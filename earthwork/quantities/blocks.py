"""Cut and fill gathered into haul blocks, each with the centre of mass of what is dug and of what is filled.

Whole regions (zones, pads, phases) are cut out exactly by shares of cells; elsewhere, and in regions that are divided
further, blocks are squares of whole cells. Everything that is dug is counted by material, and everything that is filled
by the rule that says what may go into it and by its band of compaction.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np

from earthwork.compiled import kernel
from earthwork.ground.areas import Rings
from earthwork.ground.stack import Stack
from earthwork.quantities.coverage import polygon_share, touching
from earthwork.quantities.fields import named_fields
from earthwork.quantities.tile import Tile

#: (what, index, band): what is "cut", "over_excavation", "scarify" by stratum (−1: all), "strip", "section" by layer,
#: or "fill" by rule (the last index is what no rule holds for) and band (−1: above all bands).
Channel = tuple[str, int, int]


@dataclass(frozen=True)
class PartRule:
    """A part of the fill: down to a depth, inside an area; None: all of it."""

    top_m: float | None = None
    measured_from: str = "finished"
    area: Rings | None = None


@dataclass(frozen=True)
class BlockLayout:
    """How the ground is divided into haul blocks.

    Args:
        rows, columns: cells in a square block.
        regions: polygons that are cut out of the grid of squares; they do not overlap.
        divided: for each region, whether squares divide it further.
        rules: parts of the fill; the first that holds governs.
    """

    rows: int
    columns: int
    regions: Rings | None = None
    divided: tuple[bool, ...] = ()
    rules: tuple[PartRule, ...] = ()


#: Region (−1: none), block row and block column (−1, −1: all of the region).
BlockKey = tuple[int, int, int]


def channels_of(stack: Stack, rules: Sequence[PartRule] = ()) -> tuple[Channel, ...]:
    """What is counted in each block, in its order."""
    strata = range(len(stack.strata)) if stack.strata else [-1]
    found: list[Channel] = [("cut", k, -1) for k in strata]
    if stack.excavations:
        found += [("over_excavation", k, -1) for k in strata]
    if stack.scarifies:
        found += [("scarify", k, -1) for k in strata]
    found += [("strip", i, -1) for i in range(len(stack.strips))]
    found += [("section", i, -1) for i in range(len(stack.sections))]
    bands = range(-1, len(stack.bands_below_m))
    return (*found, *(("fill", part, band) for part in range(len(rules) + 1) for band in bands))


class BlockTally:
    """Amounts of each channel by block, with their first moments.

    ``rows``: (region, block row) → array (block columns, channels, 3) of Σ amount, Σ amount × column and Σ amount × row
    [cell·m and cells]; regions that are not divided have one row and one column.
    """

    def __init__(self, stack: Stack, layout: BlockLayout) -> None:
        self.stack = stack
        self.layout = layout
        self.channels = channels_of(stack, layout.rules)
        self.rows: dict[tuple[int, int], np.ndarray] = {}

    def empty(self) -> BlockTally:
        return BlockTally(self.stack, self.layout)

    def add(self, tile: Tile) -> None:
        if tile.weight is not None and not tile.weight.any():
            return
        values = self._values(tile)
        window = tile.window
        rest = np.ones((window.height, window.width)) if tile.weight is None else tile.weight.copy()
        regions = self.layout.regions
        for region in () if regions is None else touching(regions, window):
            assert regions is not None
            found = polygon_share(regions, region, window)
            if found is None:
                continue
            part, share = found
            row, column = part.row - window.row, part.column - window.column
            here = np.s_[row : row + part.height, column : column + part.width]
            if tile.weight is not None:
                share = share * tile.weight[here]
            rest[here] -= share
            self._count(int(region), self.layout.divided[region], values[:, *here], share, part.row, part.column)
        # What subtraction leaves of a cell that regions cover whole is rounding.
        rest[rest < 1e-9] = 0.0
        self._count(-1, True, values, rest, window.row, window.column)

    def merge(self, other: BlockTally) -> None:
        for key, sums in other.rows.items():
            if key in self.rows:
                self.rows[key] += sums
            else:
                self.rows[key] = sums

    def amounts(self) -> dict[BlockKey, np.ndarray]:
        """Sums of every block that holds anything, (channels, 3); in the order of regions, rows and columns."""
        found: dict[BlockKey, np.ndarray] = {}
        for region, row in sorted(self.rows):
            sums = self.rows[region, row]
            for column in np.flatnonzero(np.any(sums[:, :, 0] != 0.0, axis=1)):
                found[region, row, int(column) if row >= 0 else -1] = sums[column]
        return found

    def _values(self, tile: Tile) -> np.ndarray:
        """Amounts of each channel, mean over each cell [m], (channels, height, width)."""
        fields = named_fields(tile)
        values = np.empty((len(self.channels), tile.window.height, tile.window.width))
        parts = _fill_parts(tile, fields, self.layout.rules) if self._divides_fill else None
        for i, (what, index, band) in enumerate(self.channels):
            if what == "fill":
                values[i] = _filled(fields) if parts is None else parts[index, band + 1]
            elif what in ("strip", "section"):
                values[i] = fields[f"{what}{index}"]
            else:
                values[i] = fields[what if index < 0 else f"{what}:{index}"]
        return values

    @property
    def _divides_fill(self) -> bool:
        return bool(self.layout.rules or self.stack.bands_below_m)

    def _count(self, region: int, divided: bool, values: np.ndarray, share: np.ndarray, row: int, column: int) -> None:
        """Count cells whose first one is (row, column) of the grid."""
        if not divided:
            sums = self.rows.setdefault((region, -1), np.zeros((1, len(self.channels), 3)))
            _gather(values, share, row, column, 2**62, sums)
            return
        height, blocks = self.layout.rows, -(-self.stack.grid.columns // self.layout.columns)
        for block_row in range(row // height, (row + share.shape[0] - 1) // height + 1):
            first, last = max(block_row * height - row, 0), (block_row + 1) * height - row
            some = share[first:last]
            if not some.any():
                continue
            sums = self.rows.setdefault((region, block_row), np.zeros((blocks, len(self.channels), 3)))
            _gather(values[:, first:last], some, row + first, column, self.layout.columns, sums)


def _filled(fields: dict[str, np.ndarray]) -> np.ndarray:
    """Fill with over-excavation refill, mean over each cell [m]."""
    return fields["fill"] + fields.get("over_excavation", 0.0)


def _fill_parts(tile: Tile, fields: dict[str, np.ndarray], rules: Sequence[PartRule]) -> np.ndarray:
    """Fill and refill by rule (the last: none) and band (the first: none), (rules + 1, bands + 1, height, width).

    Heights in the fill run from 0 at its bottom to 1 at its top; a rule takes an interval of them in a share of the
    cell, and what it leaves goes on to the next.
    """
    amount = _filled(fields)
    bottom, top = tile.removal_bottom, tile.subgrade
    valid = np.isfinite(top - bottom)
    thickness = np.where(valid & (top > bottom), top - bottom, 1.0)

    def height_of(below_m: float, start: str) -> np.ndarray:
        level = (tile.finished if start == "finished" else top) - below_m
        return np.where(valid, np.clip((np.minimum(level, top) - bottom) / thickness, 0.0, 1.0), 0.0)

    zero, one = np.zeros_like(amount), np.ones_like(amount)
    parts: list[list[tuple[np.ndarray, np.ndarray, np.ndarray]]] = [[] for _ in range(len(rules) + 1)]
    pieces = [(zero, one, one)]
    for rule, own in zip(rules, parts, strict=False):
        start = zero if rule.top_m is None else height_of(rule.top_m, rule.measured_from)
        share = None if rule.area is None else tile.stack.coverage(rule.area, tile.window)
        left = []
        for low, high, weight in pieces:
            upper = np.maximum(low, np.minimum(start, high))
            own.append((upper, high, weight if share is None else weight * share))
            if share is not None:
                left.append((upper, high, weight * (1.0 - share)))
            if rule.top_m is not None:
                left.append((low, upper, weight))
        pieces = left
    parts[-1] = pieces
    bands = _band_heights(tile, height_of)
    out = np.zeros((len(parts), len(bands), *amount.shape))
    for part, own in enumerate(parts):
        for low, high, weight in own:
            for band, (under, over) in enumerate(bands):
                out[part, band] += weight * amount * np.maximum(np.minimum(high, over) - np.maximum(low, under), 0.0)
    return out


def _band_heights(tile: Tile, height_of) -> list[tuple[np.ndarray, np.ndarray]]:
    """Interval of heights of no band and of each band, the deepest first to take its share."""
    bands = tile.stack.bands_below_m
    found: list = [None] * (len(bands) + 1)
    reached = np.zeros((tile.window.height, tile.window.width))
    for i in sorted(range(len(bands)), key=lambda i: -bands[i][0]):
        high = np.maximum(height_of(*bands[i]), reached)
        found[i + 1] = (reached, high)
        reached = high
    found[0] = (reached, np.ones_like(reached))
    return found


@kernel
def _gather(values, share, row, column, block_columns, sums):
    """Add values × share and their first moments to ``sums`` (blocks, channels, 3), one block for so many columns."""
    channels, height, width = values.shape
    for c in range(channels):
        for i in range(height):
            at_row = row + i + 0.5
            for j in range(width):
                amount = values[c, i, j] * share[i, j]
                if amount != 0.0:
                    block = (column + j) // block_columns
                    sums[block, c, 0] += amount
                    sums[block, c, 1] += amount * (column + j + 0.5)
                    sums[block, c, 2] += amount * at_row


@dataclass
class ReliefTally:
    """Mean existing elevation on a coarse grid, for the rise and fall of hauls: ``step`` × ``step`` cells a value."""

    stack: Stack
    step: int
    rows: dict[int, np.ndarray] = field(default_factory=dict)  #: coarse row → (columns, 2) Σ elevation, count

    def empty(self) -> ReliefTally:
        return ReliefTally(self.stack, self.step)

    def add(self, tile: Tile) -> None:
        window = tile.window
        ground = np.asarray(tile.existing, np.float64)
        columns = -(-self.stack.grid.columns // self.step)
        at = (window.column + np.arange(window.width)) // self.step
        for coarse in range(window.row // self.step, (window.row + window.height - 1) // self.step + 1):
            first = max(coarse * self.step - window.row, 0)
            some = ground[first : (coarse + 1) * self.step - window.row]
            known = np.isfinite(some)
            sums = self.rows.setdefault(coarse, np.zeros((columns, 2)))
            sums[:, 0] += np.bincount(at, np.where(known, some, 0.0).sum(axis=0), columns)
            sums[:, 1] += np.bincount(at, known.sum(axis=0), columns)

    def merge(self, other: ReliefTally) -> None:
        for row, sums in other.rows.items():
            if row in self.rows:
                self.rows[row] += sums
            else:
                self.rows[row] = sums

    def elevations(self) -> np.ndarray:
        """Mean elevations [m], (coarse rows, coarse columns); NaN where nothing is known."""
        rows, columns = -(-self.stack.grid.rows // self.step), -(-self.stack.grid.columns // self.step)
        out = np.full((rows, columns), np.nan)
        for row, sums in self.rows.items():
            known = sums[:, 1] > 0
            out[row, known] = sums[known, 0] / sums[known, 1]
        return out
