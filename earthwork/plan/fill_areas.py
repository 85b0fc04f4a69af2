"""Fill areas: which coarse cells of fill hang together, and the benches that each area is built up in."""

from __future__ import annotations

import math
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass
from itertools import pairwise

import numpy as np

from earthwork.quantities.engine import thread_count
from earthwork.quantities.lift_kernel import CODE, FOOTPRINT, GROUND, HIGHEST, LOWEST, VOLUME
from earthwork.quantities.lift_sums import bench_sums
from earthwork.quantities.lift_tally import LiftTally, SortedRecords

#: Mean fill over a coarse cell that makes it part of a fill area: a quarter of a lift, at most this [m]. Survey noise
#: of 5 cm makes 2 cm of false fill.
_CORE_M = 0.05
#: A coarse cell covered with fill from edge to edge belongs to the area beside it when it holds at least this [m].
_THIN_M = 0.002
_COVERED = 0.9
#: Areas of less volume than this, and than this share of all fill, are summed as small fills [m³].
_SMALL_M3 = 50.0
_SMALL_SHARE = 0.005
#: Fewer runs of records than this are added up by one processor; more in so many parts.
_WORTH_SHARING = 5_000
_PARTS = 8


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
    bases = [float(cells[labels == i][:, LOWEST].min()) for i in order]
    highest = [float(cells[labels == i][:, HIGHEST].max()) for i in order]
    records = tally.sorted_records()
    benches = _benches(tally, records, rank[labels], bases, highest)
    areas = [FillArea(f"fill {k + 1}", benches[k], labels == i) for k, i in enumerate(order)]
    loose = (labels == 0) & (cells[..., VOLUME] > 0)
    if loose.any():
        span = float(cells[loose][:, LOWEST].min()), float(cells[loose][:, HIGHEST].max())
        areas.append(FillArea("small fills", (_whole(tally, records, loose, span),), loose, is_small=True))
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


def _benches(
    tally: LiftTally, records: SortedRecords, area_of_cell: np.ndarray, bases: list[float], highest: list[float]
) -> list[tuple[Bench, ...]]:
    """Benches of each area, of one lift each, from its lowest removal bottom to its last fill."""
    if not bases:
        return []
    t = tally.lift_m
    origins = [math.floor(base / t) for base in bases]
    offsets = [min(base / t - origin, 1.0 - 1e-15) for base, origin in zip(bases, origins, strict=True)]
    counts = [math.floor(top / t) - origin + 2 for top, origin in zip(highest, origins, strict=True)]
    starts = np.concatenate([[0], np.cumsum([count + 1 for count in counts])])
    volumes, standing, ends = _lift_sums(
        tally, records, area_of_cell.ravel().astype(np.int64),
        np.array(origins, np.int64), np.array(offsets), starts, int(starts[-1]) + 1,
    )  # fmt: skip
    cell_m2 = tally.stack.grid.cell_area_m2
    areas = []
    for base, start, count in zip(bases, starts, counts, strict=False):
        own = slice(start, start + count)
        cubic = none_negative((volumes[:, own] + np.cumsum(standing[:, own], axis=1)) * t * cell_m2)
        # columns that have started less those that have ended below, each once though a depth row may part it
        footprint = np.cumsum(ends[0, own]) - np.concatenate([[0.0], np.cumsum(ends[1, own])[:-1]]) - ends[2, own]
        areas.append(
            tuple(
                Bench(
                    bottom_m=base + t * j,
                    top_m=base + t * (j + 1),
                    # ends that share a bin are parted by what they are like on the mean: a lift needs room all the same
                    area_m2=float(max(footprint[j] * cell_m2, cubic[:, j].sum() / t)),
                    compacted_m3=float(cubic[:, j].sum()),
                    bands_m3=tuple(cubic[1:, j].tolist()),
                )
                for j in np.flatnonzero((footprint > 1e-9 * footprint.max()) & cubic.any(axis=0)).tolist()
            )
        )
    return areas


def none_negative(cubic: np.ndarray) -> np.ndarray:
    """Volumes by kind and lift where no lift is under 0: what one owes is taken from the one below, or from above.

    Bottoms and tops in one bin are parted by what each are like on the mean, so that the edge of a fill can end in a
    lift with a little less than nothing.

    >>> none_negative(np.array([[4.0, 3.0, -0.5]])).tolist()
    [[4.0, 2.5, 0.0]]
    >>> none_negative(np.array([[-1.0, 3.0, 2.0]])).tolist()
    [[0.0, 2.0, 2.0]]
    """
    made = cubic.copy()
    last = made.shape[1] - 1
    for lifts, step in ((range(last, 0, -1), -1), (range(last), 1)):
        for j in lifts:
            if made[:, j].sum() < 0.0:
                made[:, j + step] += made[:, j]
                made[:, j] = 0.0
    return made


def _lift_sums(
    tally: LiftTally, records: SortedRecords, area_of_cell: np.ndarray, origins: np.ndarray, offsets: np.ndarray,
    first_lift: np.ndarray, lifts: int,
) -> tuple[np.ndarray, np.ndarray, np.ndarray]:  # fmt: skip
    """Volumes, standing areas and ends by lift, see :func:`bench_sums`; the processors share the coarse cells.

    They are shared out in as many parts on any machine, and added up in their order, so that the digits are the same.
    """
    runs, moments, order, starts = records
    codes = runs[order, CODE]
    cuts = [0, *(int(np.searchsorted(codes, codes[len(codes) * k // _PARTS])) for k in range(1, _PARTS)), len(codes)]
    bands = len(tally.below)

    def count(part: tuple[int, int]) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        sums = np.zeros((1 + bands, lifts)), np.zeros((1 + bands, lifts + 1)), np.zeros((3, lifts))
        bench_sums(
            runs, moments, order[slice(*part)], starts, bands, area_of_cell, origins, offsets, first_lift, *sums
        )  # fmt: skip
        return sums

    if len(runs) < _WORTH_SHARING:
        return count((0, len(codes)))
    with ThreadPoolExecutor(thread_count(None)) as pool:
        parts = list(pool.map(count, pairwise(cuts)))
    return tuple(sum(which[1:], which[0]) for which in zip(*parts, strict=True))  # type: ignore[return-value]


def _whole(tally: LiftTally, records: SortedRecords, cells: np.ndarray, span: tuple[float, float]) -> Bench:
    """All fill of some coarse cells as one bench."""
    inside = np.where(cells.ravel(), 0, -1).astype(np.int64)
    origin = math.floor(span[1] / tally.lift_m) + 2  # above everything, so that all of it falls into one lift
    volumes, _, ends = _lift_sums(tally, records, inside, np.array([origin]), np.array([0.0]), np.array([0]), 1)
    cubic = volumes[:, 0] * tally.lift_m * tally.stack.grid.cell_area_m2
    area = float((ends[0, 0] - ends[2, 0]) * tally.stack.grid.cell_area_m2)
    return Bench(*span, area, float(cubic.sum()), tuple(cubic[1:].tolist()))
