"""Fill areas: which coarse cells of fill hang together, and the benches that each area is built up in."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from earthwork.quantities.lift_kernel import FOOTPRINT, GROUND, HIGHEST, LOWEST, VOLUME
from earthwork.quantities.lift_tally import LiftTally

#: Mean fill over a coarse cell that makes it part of a fill area: a quarter of a lift, at most this [m]. Survey noise
#: of 5 cm makes 2 cm of false fill.
_CORE_M = 0.05
#: A coarse cell covered with fill from edge to edge belongs to the area beside it when it holds at least this [m].
_THIN_M = 0.002
_COVERED = 0.9
#: Areas of less volume than this, and than this share of all fill, are summed as small fills [m³].
_SMALL_M3 = 50.0
_SMALL_SHARE = 0.005


@dataclass(frozen=True)
class Bench:
    """A lift of one fill area, as geometry."""

    bottom_m: float
    top_m: float
    area_m2: float  #: ground on which the lift has any thickness
    compacted_m3: float
    bands_m3: tuple[float, ...]  #: of it, in each ``by_depth`` row


@dataclass(frozen=True)
class FillArea:
    """A fill that touches no other, with its benches from the bottom up."""

    name: str
    benches: tuple[Bench, ...]
    cells: np.ndarray  #: (coarse rows, coarse columns) of bool: where it lies
    is_small: bool = False

    @property
    def compacted_m3(self) -> float:
        return math.fsum(b.compacted_m3 for b in self.benches)

    @property
    def bottom_m(self) -> float:
        return self.benches[0].bottom_m


def fill_areas(tally: LiftTally) -> tuple[FillArea, ...]:
    """The fill areas of a tally, the largest first; "small fills" last, as one bench."""
    cells = tally.cells
    labels = label_fills(cells, tally.lift_m)
    cell_m2 = tally.stack.grid.cell_area_m2
    volumes = np.bincount(labels.ravel(), weights=cells[..., VOLUME].ravel()) * cell_m2
    total = float(volumes.sum())
    small = [i for i in range(1, len(volumes)) if volumes[i] < _SMALL_M3 and volumes[i] < _SMALL_SHARE * total]
    labels = np.where(np.isin(labels, small), 0, labels)
    order = sorted(set(np.unique(labels)) - {0}, key=lambda i: (-volumes[i], i))
    rank = np.full(len(volumes), -1)
    for k, i in enumerate(order):
        rank[i] = k
    curves = _Curves(tally, rank[labels])
    areas = [
        FillArea(f"fill {k + 1}", curves.benches(k, float(cells[labels == i][:, LOWEST].min())), labels == i)
        for k, i in enumerate(order)
    ]
    loose = (labels == 0) & (cells[..., VOLUME] > 0)
    if loose.any():
        lowest, highest = float(cells[loose][:, LOWEST].min()), float(cells[loose][:, HIGHEST].max())
        areas.append(FillArea("small fills", (curves.whole(-1, lowest, highest),), loose, is_small=True))
    return tuple(areas)


def label_fills(cells: np.ndarray, lift_m: float) -> np.ndarray:
    """Number of the fill area that each coarse cell belongs to, 0 for none or for none of size.

    Cells with a mean thickness over a quarter of a lift (at most 5 cm) are cores; cells covered with thinner fill
    join the cores that they touch, directly or through each other; and every other cell with fill joins an area at
    its side. Touching means sides and corners.

    Args:
        cells: (rows, columns, 5) of :attr:`LiftTally.cells`.
    """
    from scipy import ndimage

    ground = np.where(cells[..., GROUND] > 0, cells[..., GROUND], 1.0)
    thickness = cells[..., VOLUME] / ground
    core = thickness >= min(0.25 * lift_m, _CORE_M)
    covered = (cells[..., FOOTPRINT] >= _COVERED * ground) & (thickness >= _THIN_M)
    around = np.ones((3, 3))
    labels, count = ndimage.label(core | covered, around)
    with_core = np.zeros(count + 1, bool)
    with_core[np.unique(labels[core])] = True
    labels = np.where(with_core[labels], labels, 0)
    beside = ndimage.maximum_filter(labels, footprint=around, mode="constant")
    return np.where((labels == 0) & (cells[..., VOLUME] > 0), beside, labels)


class _Curves:
    """Column ends of every fill area by bin of elevation."""

    def __init__(self, tally: LiftTally, area_of_cell: np.ndarray) -> None:
        coarse, self.kind, self.end, self.bin, self.moments = tally.unpacked()
        self.area = area_of_cell.ravel()[coarse]
        self.lift_m = tally.lift_m
        self.kinds = 1 + len(tally.below)
        self.cell_m2 = tally.stack.grid.cell_area_m2

    def benches(self, area: int, base_m: float) -> tuple[Bench, ...]:
        """Benches of one lift each from the lowest removal bottom to the last that has any fill."""
        t = self.lift_m
        origin = math.floor(base_m / t)
        offset = min(base_m / t - origin, 1.0 - 1e-15)
        rows = np.flatnonzero(self.area == area)
        lift = self.bin[rows] - origin
        below = _below(self.moments[rows], offset)
        count = int(lift.max()) + 1
        volumes = np.zeros((self.kinds, count))
        standing = np.zeros((self.kinds, count + 1))
        ends = np.zeros((2, count))
        for kind in range(self.kinds):
            for end, sign in ((0, 1.0), (1, -1.0)):
                of = (self.kind[rows] == kind) & (self.end[rows] == end)
                moments = self.moments[rows][of, :2]
                # ends under the edge in their bin belong to the lift that ends there, those over it to the next
                for lower, (a, first) in ((1, below[of].T), (0, (moments - below[of]).T)):
                    at = np.maximum(lift[of] - lower, 0)
                    volumes[kind] += sign * np.bincount(at, a * (offset + at + 1 - lift[of]) - first, count)
                    standing[kind] += sign * np.bincount(at + 1, a, count + 1)
                    if kind == 0:
                        ends[end] += np.bincount(at, a, count)
            # a column that started lower fills every lift above it, until its top
            volumes[kind] += np.cumsum(standing[kind])[:count]
        footprint = np.cumsum(ends[0]) - np.concatenate([[0.0], np.cumsum(ends[1])[:-1]])
        volumes *= t * self.cell_m2
        return tuple(
            Bench(
                bottom_m=float(base_m + t * j),
                top_m=float(base_m + t * (j + 1)),
                area_m2=float(footprint[j] * self.cell_m2),
                compacted_m3=float(volumes[0, j]),
                bands_m3=tuple(float(v) for v in volumes[1:, j]),
            )
            for j in np.flatnonzero(footprint > 1e-9 * footprint.max())
        )

    def whole(self, area: int, lowest_m: float, highest_m: float) -> Bench:
        """All fill of an area as one bench."""
        rows = self.area == area
        sums = np.zeros(self.kinds)
        place = (self.bin * self.moments[:, 0] + self.moments[:, 1]) * self.lift_m * self.cell_m2
        for kind in range(self.kinds):
            of = rows & (self.kind == kind)
            sums[kind] = place[of & (self.end == 1)].sum() - place[of & (self.end == 0)].sum()
        tops = rows & (self.kind == 0) & (self.end == 1)
        area_m2 = float(self.moments[tops, 0].sum() * self.cell_m2)
        return Bench(lowest_m, highest_m, area_m2, float(sums[0]), tuple(float(s) for s in sums[1:]))


def _below(moments: np.ndarray, offset: float) -> np.ndarray:
    """Area and first moment of the column ends that lie under ``offset`` in their bin, shape (n, 2).

    The ends of a bin are taken as spread evenly about their mean with the variance that they have, which is exact for
    level and for evenly sloping ground; ends at one height stay together. The rest keeps what is left, so that no
    volume is lost whatever the ends are.
    """
    area = moments[:, 0]
    safe = np.where(area > 0, area, 1.0)
    mean = moments[:, 1] / safe
    variance = np.maximum(moments[:, 2] / safe - mean**2, 0.0)
    half = np.sqrt(3.0 * variance)
    half = np.minimum(half, np.maximum(np.minimum(mean, 1.0 - mean), 0.0))
    spread = half > 1e-7
    width = np.where(spread, 2.0 * half, 1.0)
    share = np.where(spread, np.clip((offset - (mean - half)) / width, 0.0, 1.0), (mean < offset).astype(float))
    centre = np.where(spread, mean - half + 0.5 * share * width, mean)
    return np.column_stack([area * share, area * share * centre])
