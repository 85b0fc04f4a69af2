"""Transportation beyond what a whole matrix of costs allows: candidate moves, and a proof over all moves.

Neighbouring rows and columns of one class are gathered into a few hundred clusters whose small problem is
solved first. Its prices, spread over the members, point to the moves that an optimal plan is likely to use;
its plan, dealt out within the clusters, makes the candidates feasible. The network simplex then solves the
candidates, all moves are priced against its prices, those that would be cheaper join the candidates, and so
on until none is.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from earthwork.compiled import kernel
from earthwork.errors import PlanError
from earthwork.plan.transport import solve_dense
from earthwork.plan.transport_costs import Array, Costs

_CLUSTERS = 1000
_CANDIDATES = 12
_ROUNDS = 60
_UNITS = 2.0**52
#: Reduced costs over this share of the highest cost, below zero, count as zero.
_TOLERANCE = 1e-12


def solve_with_candidates(
    supply: Array, need: Array, costs: Costs, *, unit: float
) -> tuple[Array, Array, Array, Array, Array, str]:
    """Rows, columns and units of the moves, prices of rows and columns, and how they were found.

    Arguments as in :func:`earthwork.plan.transport.solve_dense`, the result too; prices contradict no move.
    """
    pricing = _Pricing(costs)
    key, u, v = _start(supply, need, costs, pricing, unit)
    columns = costs.shape[1]
    for turn in range(1, _ROUNDS + 1):
        flow, u, v, highest = _solve_candidates(supply, need, costs, key)
        new = pricing.moves(u, v, _CANDIDATES, below=-_TOLERANCE * highest)
        new = np.setdiff1d(new, key, assume_unique=True)
        if not new.size:
            used = flow > 0
            rounds = f"{turn} round{'' if turn == 1 else 's'}"
            method = f"network simplex over {len(key)} candidate moves, {rounds}, priced over all moves"
            return key[used] // columns, key[used] % columns, flow[used], u, v, method
        key = np.union1d(_thinned(key, flow, u, v, costs), new)
    raise PlanError(f"haul: no proof after {_ROUNDS} rounds of candidates. Please report it with the site file")


def _solve_candidates(supply: Array, need: Array, costs: Costs, key: Array) -> tuple[Array, Array, Array, float]:
    """Units on each candidate move, prices of rows and columns, and the highest cost of a candidate."""
    import ot
    from scipy.sparse import coo_array

    i, j = key // costs.shape[1], key % costs.shape[1]
    cost = costs.pairs(i, j)
    scale = float(np.abs(cost).max(initial=0.0)) or 1.0
    plan, log = ot.emd(
        supply / _UNITS,
        need / _UNITS,
        coo_array((cost / scale, (i, j)), shape=costs.shape),
        numItermax=10**9,
        log=True,
        center_dual=False,
        check_marginals=False,
    )
    if log["result_code"] != 1:
        raise PlanError(f"haul: the network solver stopped: {log['warning']}. Please report it with the site file")
    plan = plan.tocoo()
    flow = np.zeros(len(key))
    flow[np.searchsorted(key, plan.row.astype(np.int64) * costs.shape[1] + plan.col)] = plan.data * _UNITS
    return flow, np.asarray(log["u"]) * scale, np.asarray(log["v"]) * scale, scale


def _thinned(key: Array, flow: Array, u: Array, v: Array, costs: Costs) -> Array:
    """Drop the candidates that are far from being used, when there are many."""
    if len(key) < 60 * sum(costs.shape):
        return key
    i, j = key // costs.shape[1], key % costs.shape[1]
    reduced = costs.pairs(i, j) - u[i] - v[j]
    limit = np.partition(reduced, len(key) // 2)[len(key) // 2]
    return key[(flow > 0) | (reduced <= limit)]


def _start(supply: Array, need: Array, costs: Costs, pricing: _Pricing, unit: float) -> tuple[Array, Array, Array]:
    """First candidates and prices, from the clusters."""
    rows, columns = _clusters(costs, supply), _clusters(costs.transposed, need)
    coarse = _coarse_costs(costs, rows, columns, supply, need)
    a, b = np.bincount(rows, supply), np.bincount(columns, need)
    i, j, flow, u_coarse, _ = solve_dense(a, b, coarse, unit=unit)
    v = pricing.column_prices(u_coarse[rows])
    u = pricing.row_prices(v)
    v = pricing.column_prices(u)
    dealt = _dealt(i, j, flow, rows, columns, supply, need)
    return np.union1d(pricing.moves(u, v, _CANDIDATES, below=np.inf), dealt), u, v


def _clusters(costs: Costs, amount: Array) -> Array:
    """Cluster of each row: by class and by a square of the ground; rows without places by their order."""
    place = costs.row_place
    side = max(1, int(np.sqrt(_CLUSTERS)))
    if place is None:
        square = np.arange(len(amount)) * _CLUSTERS // len(amount)
    else:
        low, extent = place[:-1].min(axis=0), np.ptp(place[:-1], axis=0)
        step = np.where(extent > 0, extent, 1.0) / side
        cell = np.clip((place - low) // step, 0, side - 1).astype(np.int64)
        square = cell[:, 1] * side + cell[:, 0]
    return np.unique(costs.row_class * (square.max() + 1) + square, return_inverse=True)[1]


def _coarse_costs(costs: Costs, rows: Array, columns: Array, supply: Array, need: Array) -> Costs:
    """Costs between clusters: from centre to centre of mass, or between members that stand for them."""
    first_row, first_column = _heaviest(rows, supply), _heaviest(columns, need)
    coarse = costs.subset(first_row, first_column)
    if costs.row_place is None or costs.column_place is None:
        return coarse
    return replace(
        coarse,
        row_place=_centres(costs.row_place, rows, supply),
        column_place=_centres(costs.column_place, columns, need),
    )


def _heaviest(cluster: Array, amount: Array) -> Array:
    """Index of the member with the largest amount, by cluster."""
    order = np.lexsort((amount, cluster))
    last = np.append(np.flatnonzero(np.diff(cluster[order])), len(order) - 1)
    return order[last]


def _centres(place: Array, cluster: Array, amount: Array) -> Array:
    weight = amount + amount.sum() * 1e-12 + 1e-300
    mass = np.bincount(cluster, weight)
    return np.column_stack([np.bincount(cluster, place[:, k] * weight) / mass for k in (0, 1)])


def _dealt(i: Array, j: Array, flow: Array, rows: Array, columns: Array, supply: Array, need: Array) -> Array:
    """Moves between members that carry a plan between clusters: each cluster pair is dealt out in order."""
    order_r, order_c = np.argsort(rows, kind="stable"), np.argsort(columns, kind="stable")
    start_r = np.concatenate([[0], np.cumsum(np.bincount(rows))])
    start_c = np.concatenate([[0], np.cumsum(np.bincount(columns))])
    by_row = np.lexsort((j, i))
    return np.unique(
        _deal(
            i[by_row],
            j[by_row],
            flow[by_row],
            order_r,
            start_r,
            order_c,
            start_c,
            supply.copy(),
            need.copy(),
            len(need),
        )
    )


@kernel(error_model="python")
def _deal(pair_i, pair_j, flow, order_r, start_r, order_c, start_c, supply, need, columns):
    size = len(supply) + len(need) + 2 * len(flow)
    out = np.empty(size, np.int64)
    count = 0
    at_r, at_c = start_r[:-1].copy(), start_c[:-1].copy()
    for k in range(len(flow)):
        a, b, left = pair_i[k], pair_j[k], flow[k]
        while left > 0 and at_r[a] < start_r[a + 1] and at_c[b] < start_c[b + 1]:
            i, j = order_r[at_r[a]], order_c[at_c[b]]
            amount = min(left, supply[i], need[j])
            if amount > 0:
                out[count] = i * columns + j
                count += 1
            supply[i] -= amount
            need[j] -= amount
            left -= amount
            if supply[i] <= 0:
                at_r[a] += 1
            if need[j] <= 0:
                at_c[b] += 1
    return out[:count]


def column_prices(costs: Costs, u: Array, otherwise: Array | None = None) -> Array:
    """The highest prices of columns that those of the rows allow."""
    return _Pricing(costs).column_prices(u)


class _Pricing:
    """Passes over all moves, with costs worked out on the way."""

    def __init__(self, costs: Costs) -> None:
        self._forward, self._backward = _kernel_arguments(costs), _kernel_arguments(costs.transposed)
        self._shape = costs.shape

    def column_prices(self, u: Array) -> Array:
        """The highest prices of columns that those of the rows allow."""
        return _lowest(*self._backward, u)  # type: ignore[call-arg]

    def row_prices(self, v: Array) -> Array:
        """The highest prices of rows that those of the columns allow."""
        return _lowest(*self._forward, v)  # type: ignore[call-arg]

    def moves(self, u: Array, v: Array, count: int, *, below: float) -> Array:
        """Keys of the moves of least reduced cost under a bound, so many for each row and each column."""
        columns = self._shape[1]
        by_row = _least(*self._forward, u, v, count, below)  # type: ignore[call-arg]
        by_column = _least(*self._backward, v, u, count, below)  # type: ignore[call-arg]
        i, k = np.nonzero(by_row >= 0)
        j, q = np.nonzero(by_column >= 0)
        return np.unique(np.concatenate([i * columns + by_row[i, k], by_column[j, q] * columns + j]))


def _kernel_arguments(costs: Costs) -> tuple:
    places = costs.row_place is not None and costs.column_place is not None
    none = np.zeros((0, 2))
    return (
        np.ascontiguousarray(costs.row_place, float) if places else none,
        np.ascontiguousarray(costs.column_place, float) if places else none,
        np.zeros((0, 0)) if costs.distance is None else costs.distance,
        costs.rate,
        costs.way,
        np.ascontiguousarray(costs.table),
        costs.row_class,
        costs.column_class,
    )


@kernel(error_model="python", inline="always")
def _cost(a, b, distance, rate, way, table, row_class, column_class, i, j):
    fixed = table[row_class[i], column_class[j]]
    if len(a):
        east, north = a[i, 0] - b[j, 0], a[i, 1] - b[j, 1]
        return rate[i] * way[j] * np.sqrt(east * east + north * north) + fixed
    if i >= distance.shape[0] or j >= distance.shape[1]:
        return fixed
    if distance[i, j] == np.inf:
        return np.inf
    return rate[i] * way[j] * distance[i, j] + fixed


@kernel(error_model="python")
def _lowest(a, b, distance, rate, way, table, row_class, column_class, v):
    """min_j cost(i, j) − v(j) for each row; 0 where nothing is allowed."""
    out = np.empty(len(rate))
    for i in range(len(rate)):
        best = np.inf
        for j in range(len(way)):
            best = min(best, _cost(a, b, distance, rate, way, table, row_class, column_class, i, j) - v[j])
        out[i] = best if best < np.inf else 0.0
    return out


@kernel(error_model="python")
def _least(a, b, distance, rate, way, table, row_class, column_class, u, v, count, below):
    """The columns of least reduced cost of each row, those under a bound only; −1 where there are fewer."""
    out = np.full((len(rate), count), -1, np.int64)
    for i in range(len(rate)):
        value = np.full(count, below)
        worst = 0
        for j in range(len(way)):
            reduced = _cost(a, b, distance, rate, way, table, row_class, column_class, i, j) - u[i] - v[j]
            if reduced < value[worst]:
                value[worst] = reduced
                out[i, worst] = j
                worst = int(np.argmax(value))
    return out
