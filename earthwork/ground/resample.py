"""Brings raster values onto the cells of another north-up grid by weights, one axis at a time.

Every rule used here is separable: the value of a cell is ``Σ_i Σ_j u_i v_j z_ij`` with weights u along north and v
along east. :class:`Taps` holds the weights of one axis. A cell is valid only where every sample that it takes is:
nothing is filled in, and no weight is spread over the rest.
"""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np

#: Two places closer than this part of a source cell are one [cells].
SNAP = 1e-6

#: A source counts as finer than the cell, and is averaged, from this ratio on. Below it the weights of
#: averaging and of bilinear interpolation agree (both are (1 − f, f) for equal cells), and interpolation
#: keeps the file's detail.
AVERAGE_FROM = 1.05

#: Grids of more cells than this are worth loading compiled kernels for [cells]; the digits are the same.
_COMPILED_FROM = 4_000_000


@dataclass(frozen=True)
class Taps:
    """Samples and weights along one axis, for the run of target cells that have all their samples.

    Attributes:
        first: the first target cell that has all its samples.
        index: source samples of each cell, shape (k, n), unsigned; unused places repeat a used one.
        weight: their weights, shape (k, n), columns sum to 1; 0 in unused places.
        averaged: the samples are averaged over the cell, not interpolated at its centre.
    """

    first: int
    index: np.ndarray = field(repr=False)
    weight: np.ndarray = field(repr=False)
    averaged: bool

    def __len__(self) -> int:
        return self.index.shape[1]

    @property
    def stop(self) -> int:
        """One past the last target cell that has all its samples."""
        return self.first + len(self)

    def part(self, start: int, stop: int) -> Taps:
        """The taps of target cells [start, stop), cut to what is valid, counted from ``start``."""
        low, high = max(start, self.first), max(start, self.first, min(stop, self.stop))
        cut = np.s_[:, low - self.first : high - self.first]
        return Taps(low - start, self.index[cut], self.weight[cut], self.averaged)

    def less(self, samples: int) -> Taps:
        """The same taps for source values that begin ``samples`` later."""
        return Taps(self.first, self.index - np.uint32(samples), self.weight, self.averaged)

    @property
    def reach(self) -> tuple[int, int]:
        """The half-open range of source samples that are taken."""
        return int(self.index.min()), int(self.index.max()) + 1


def axis_taps(
    source_start: float,
    source_cell: float,
    samples: int,
    start: float,
    cell: float,
    cells: int,
    *,
    nodes: bool = False,
) -> Taps:
    """Taps of one axis; places are measured along it, from west to east or from north to south.

    Args:
        source_start: outer edge of the first source cell.
        source_cell: side of a source cell, > 0.
        samples: source cells along the axis; each has its sample at its centre.
        start, cell, cells: outer edge of the first target cell, side, count.
        nodes: the samples are points of a surface that runs straight between them (else each stands for its cell); it
            matters only where the source is finer and is averaged.

    >>> taps = axis_taps(0.0, 1.0, 4, 0.5, 1.0, 3)     # half a cell further: the mean of two neighbours
    >>> taps.first, taps.index.tolist(), taps.weight.tolist()
    (0, [[0, 1, 2], [1, 2, 3]], [[0.5, 0.5, 0.5], [0.5, 0.5, 0.5]])
    >>> taps = axis_taps(0.0, 1.0, 4, 0.0, 2.0, 2)     # cells of two: their mean
    >>> taps.index.tolist(), taps.weight.tolist()
    ([[0, 2], [1, 3]], [[0.5, 0.5], [0.5, 0.5]])
    """
    edges = (start - source_start + np.arange(cells + 1) * cell) / source_cell
    if cell / source_cell < AVERAGE_FROM:
        return _linear(edges, samples)
    return _hats(edges, samples) if nodes else _boxes(edges, samples)


def _linear(edges: np.ndarray, samples: int) -> Taps:
    """Interpolation at the centres, between the two samples around each."""
    place = snapped(0.5 * (edges[:-1] + edges[1:]) - 0.5)
    low = np.floor(place)
    part = place - low
    left = low.astype(np.int64)
    index = np.stack([left, left + (part > 0)])
    return _valid(index, np.stack([1.0 - part, part]), samples, averaged=False)


def snapped(place: np.ndarray) -> np.ndarray:
    """Places in samples; one that lies on a sample to rounding lies on it, and needs no neighbour."""
    near = np.rint(place)
    return np.where(np.abs(place - near) < SNAP, near, place)


def _boxes(edges: np.ndarray, samples: int) -> Taps:
    """Mean over the cell of samples that stand for their cells: weights are the shares of length."""
    low, high = edges[:-1], edges[1:]
    first = np.floor(low + SNAP).astype(np.int64)
    last = np.maximum(np.ceil(high - SNAP).astype(np.int64) - 1, first)
    index = first + np.arange(int((last - first).max()) + 1)[:, None]
    weight = np.minimum(index + 1.0, high) - np.maximum(index, low)
    return _mean(index, last, weight, samples)


def _hats(edges: np.ndarray, samples: int) -> Taps:
    """Mean over the cell of the broken line through the samples: weights are integrals of hat functions."""
    low, high = edges[:-1] - 0.5, edges[1:] - 0.5
    first = np.floor(low + SNAP).astype(np.int64)
    last = np.maximum(np.ceil(high - SNAP).astype(np.int64), first + 1)
    index = first + np.arange(int((last - first).max()) + 1)[:, None]
    weight = _hat_integral(high - index) - _hat_integral(low - index)
    return _mean(index, last, weight, samples)


def _hat_integral(x: np.ndarray) -> np.ndarray:
    """Integral from −∞ to x of the hat ``max(0, 1 − |t|)``."""
    x = np.clip(x, -1.0, 1.0)
    return np.where(x < 0, 0.5 * (1.0 + x) ** 2, 1.0 - 0.5 * (1.0 - x) ** 2)


def _mean(index: np.ndarray, last: np.ndarray, weight: np.ndarray, samples: int) -> Taps:
    """Weights of a mean that sum to 1; places past the last sample of a cell repeat it with weight 0."""
    weight = np.where(index <= last, np.maximum(weight, 0.0), 0.0)
    return _valid(np.minimum(index, last), weight / weight.sum(axis=0), samples, averaged=True)


def _valid(index: np.ndarray, weight: np.ndarray, samples: int, *, averaged: bool) -> Taps:
    """Keep the cells whose samples all exist; they are one run, since samples lie in order."""
    good = np.flatnonzero((index.min(axis=0) >= 0) & (index.max(axis=0) < samples))
    run = np.s_[:, good[0] : good[-1] + 1] if good.size else np.s_[:, :0]
    # unsigned, so that compiled loops need not ask whether an index counts from the end
    kept = np.ascontiguousarray(index[run], dtype=np.uint32)
    return Taps(int(good[0]) if good.size else 0, kept, np.ascontiguousarray(weight[run]), averaged)


def apply_taps(values: np.ndarray, north: Taps, east: Taps, *, compiled: bool = False) -> np.ndarray:
    """Values on the target cells, float64: rows first, then columns; NaN where any sample taken is NaN.

    Args:
        values: source samples, shape (rows, columns), from the first row and column that the taps reach.
        north, east: taps whose indices count from the first row and column of ``values``.
        compiled: use the compiled kernel: the same operations in the same order, so the same digits.
    """
    if compiled:
        from earthwork.ground.kernels import weigh

        out = np.empty((len(north), len(east)))
        weigh(values, north.index, north.weight, east.index, east.weight, out)
        return out
    rows = np.take(values, north.index[0], axis=0) * north.weight[0][:, None]
    for index, weight in zip(north.index[1:], north.weight[1:], strict=True):
        rows += np.take(values, index, axis=0) * weight[:, None]
    out = np.take(rows, east.index[0], axis=1) * east.weight[0]
    for index, weight in zip(east.index[1:], east.weight[1:], strict=True):
        out += np.take(rows, index, axis=1) * weight
    return out


def worth_compiling(cells: int) -> bool:
    """True for grids so large that loading compiled kernels costs less than it saves."""
    return cells > _COMPILED_FROM
