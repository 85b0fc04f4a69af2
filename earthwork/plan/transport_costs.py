"""Cost of one unit from each source to each sink, without a matrix where none is needed.

``cost(i, j) = rate[i] × way[j] × distance(i, j) + table[row_class[i], column_class[j]]``

Places give straight distances on the fly, so that 10,000 × 10,000 costs take no memory; driven distances come
as a matrix. An infinite entry of ``table`` or of ``distance`` forbids the move.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

Array = np.ndarray


@dataclass(frozen=True, kw_only=True)
class Costs:
    """Costs of ``n`` rows (sources) and ``m`` columns (sinks).

    Args:
        rate: (n,) cost of one unit over one metre, finite and ≥ 0.
        way: (m,) multiplier of the rate, 1 for all but slack columns.
        table: (R, C) cost of one unit by class of row and of column, ``inf`` = not allowed.
        row_class, column_class: (n,) and (m,) classes, indices into ``table``.
        row_place, column_place: (n, 2) and (m, 2) places [m]; straight distances are taken between them.
        distance: (n, m) distances [m] instead of places; ``inf`` = no way.
    """

    rate: Array
    way: Array
    table: Array
    row_class: Array
    column_class: Array
    row_place: Array | None = None
    column_place: Array | None = None
    distance: Array | None = None

    @classmethod
    def of_matrix(cls, cost: Array) -> Costs:
        """Costs that are given as a matrix; ``inf`` forbids.

        >>> Costs.of_matrix(np.array([[1.0, np.inf]])).block()
        array([[ 1., inf]])
        """
        n, m = cost.shape
        return cls(
            rate=np.ones(n),
            way=np.ones(m),
            table=np.zeros((1, 1)),
            row_class=np.zeros(n, np.int64),
            column_class=np.zeros(m, np.int64),
            distance=np.asarray(cost, float),
        )

    @classmethod
    def straight(cls, row_place: Array, column_place: Array) -> Costs:
        """Costs that are the straight distances between places.

        >>> Costs.straight(np.array([[0.0, 0.0]]), np.array([[3.0, 4.0]])).block()
        array([[5.]])
        """
        n, m = len(row_place), len(column_place)
        return cls(
            rate=np.ones(n),
            way=np.ones(m),
            table=np.zeros((1, 1)),
            row_class=np.zeros(n, np.int64),
            column_class=np.zeros(m, np.int64),
            row_place=np.asarray(row_place, float),
            column_place=np.asarray(column_place, float),
        )

    @property
    def shape(self) -> tuple[int, int]:
        return len(self.rate), len(self.way)

    @property
    def transposed(self) -> Costs:
        """The same costs with rows and columns swapped."""
        return Costs(
            rate=self.way,
            way=self.rate,
            table=self.table.T,
            row_class=self.column_class,
            column_class=self.row_class,
            row_place=self.column_place,
            column_place=self.row_place,
            distance=None if self.distance is None else self.distance.T,
        )

    def block(self, rows: Array | slice = slice(None), columns: Array | slice = slice(None)) -> Array:
        """Costs of some rows and columns, shape (rows, columns)."""
        rate = self.rate[rows][:, None] * self.way[columns][None, :]
        fixed = self.table[self.row_class[rows]][:, self.column_class[columns]]
        return _sum(rate, self._distances(rows, columns), fixed)

    def pairs(self, i: Array, j: Array) -> Array:
        """Costs of single moves from rows ``i`` to columns ``j``, all of one length."""
        return _sum(
            self.rate[i] * self.way[j],
            self.lengths(i, j),
            self.table[self.row_class[i], self.column_class[j]],
        )

    def lengths(self, i: Array, j: Array) -> Array:
        """Distances [m] of single moves; a slack row or column behind a matrix of distances has none."""
        if self.distance is None:
            a, b = self._places()
            return np.hypot(*(a[i] - b[j]).T)
        n, m = self.distance.shape
        real = (i < n) & (j < m)
        length = np.zeros(len(i))
        length[real] = self.distance[i[real], j[real]]
        return length

    def subset(self, rows: Array, columns: Array) -> Costs:
        """Costs of some rows and some columns only; slack ones keep no distance."""
        distance = None
        if self.distance is not None:
            distance = self._distances(rows, columns)
        return replace(
            self,
            rate=self.rate[rows],
            way=self.way[columns],
            row_class=self.row_class[rows],
            column_class=self.column_class[columns],
            distance=distance,
            row_place=None if self.row_place is None else self.row_place[rows],
            column_place=None if self.column_place is None else self.column_place[columns],
        )

    def scaled(self, row_factor: Array) -> Costs:
        """Costs of another unit per class of row: each cost is divided by ``row_factor[row class]``."""
        return replace(self, rate=self.rate / row_factor[self.row_class], table=self.table / row_factor[:, None])

    def with_slack(self, spare_rows: Array, spare_columns: Array) -> Costs:
        """Append a row that may serve the spare columns at no cost, and a column that the spare rows may
        serve."""
        size_r, size_c = self.table.shape
        table = np.full((2 * size_r + 1, 2 * size_c + 1), np.inf)
        table[: 2 * size_r, : 2 * size_c] = np.tile(self.table, (2, 2))
        table[size_r : 2 * size_r, -1] = 0.0
        table[-1, size_c : 2 * size_c] = 0.0
        table[-1, -1] = 0.0
        row_class = self.row_class + np.where(spare_rows, size_r, 0)
        column_class = self.column_class + np.where(spare_columns, size_c, 0)
        nowhere = np.zeros((1, 2))
        return replace(
            self,
            rate=np.append(self.rate, 0.0),
            way=np.append(self.way, 0.0),
            table=table,
            row_class=np.append(row_class, 2 * size_r),
            column_class=np.append(column_class, 2 * size_c),
            row_place=None if self.row_place is None else np.vstack([self.row_place, nowhere]),
            column_place=None if self.column_place is None else np.vstack([self.column_place, nowhere]),
            distance=self.distance,
        )

    def _places(self) -> tuple[Array, Array]:
        if self.row_place is None or self.column_place is None:
            raise ValueError("costs need places or a matrix of distances")
        return self.row_place, self.column_place

    def _distances(self, rows: Array | slice, columns: Array | slice) -> Array:
        if self.distance is None:
            from_place, to_place = self._places()
            east = from_place[rows, 0][:, None] - to_place[columns, 0][None, :]
            north = from_place[rows, 1][:, None] - to_place[columns, 1][None, :]
            return np.sqrt(east * east + north * north)
        n, m = self.distance.shape
        i, j = np.arange(len(self.rate))[rows], np.arange(len(self.way))[columns]
        if n == 0 or m == 0:
            return np.zeros((len(i), len(j)))
        block = self.distance[np.ix_(np.minimum(i, n - 1), np.minimum(j, m - 1))]
        block[i >= n] = 0.0
        block[:, j >= m] = 0.0
        return block


def _sum(rate: Array, distance: Array, fixed: Array) -> Array:
    """rate × distance + fixed; a move without a way is forbidden at a rate of zero too."""
    with np.errstate(invalid="ignore"):
        cost = rate * distance
    cost[np.isnan(cost)] = np.inf
    cost += fixed
    return cost
