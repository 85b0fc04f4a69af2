"""What one more unit costs at each source and sink of an optimal plan, and which plans tie with it.

One more unit is placed along the cheapest path of the residual network: forward along any allowed move,
backward along moves that the plan makes, starting or ending at the slack (a borrow pit's rest, a disposal
site's room). Prices of an optimal plan are unique only where the plan is not degenerate; the path costs are
right in every case.
"""

from __future__ import annotations

import numpy as np

from earthwork.plan.transport import Network
from earthwork.plan.transport_costs import Array, Costs

#: Reduced costs below this share of the largest cost count as zero: rounding of the distances.
_TIE_SHARE = 1e-9


def marginal_costs(network: Network) -> tuple[Array, Array]:
    """Cost of one more unit of each row's supply and of each column's need; ``inf`` where there is no way.

    The last row and the last column of the network are its slack.
    """
    u, v = network.row_price, network.column_price
    to_columns = _paths_from_slack(network.costs, network.rows, network.columns, u, v)
    to_rows = _paths_from_slack(network.costs.transposed, network.columns, network.rows, v, u)
    return to_rows, to_columns


def _paths_from_slack(costs: Costs, rows: Array, columns: Array, u: Array, v: Array) -> Array:
    """Cheapest residual paths from the slack to every column (Dijkstra on reduced costs, none negative).

    With the potential −u of rows and v of columns a path costs its reduced costs + potential of its end − of
    its start. Moves of the plan have no reduced cost and go both ways, so all that they join is reached
    together.
    """
    n, m = costs.shape
    part = _joined(rows, columns, n, m)
    if part.max() == 0:
        return v - v[-1]
    of_rows, of_columns = part[:n], part[n:]
    way = np.full(part.max() + 1, np.inf)
    np.minimum.at(way, [of_rows[-1], of_columns[-1]], [u[-1], -v[-1]])
    settled = np.zeros(len(way), bool)
    while True:
        nearest = int(np.argmin(np.where(settled, np.inf, way)))
        if settled[nearest] or not np.isfinite(way[nearest]):
            return way[of_columns] + v
        settled[nearest] = True
        reached = np.flatnonzero(of_rows == nearest)
        if settled.all():
            return way[of_columns] + v
        step = way[nearest] + _least_reduced(costs, reached, u, v)
        closer = step < way[of_columns]
        np.minimum.at(way, of_columns[closer], step[closer])


def _least_reduced(costs: Costs, rows: Array, u: Array, v: Array) -> Array:
    """Least reduced cost of the moves from some rows to each column, not below zero."""
    least = np.full(costs.shape[1], np.inf)
    size = max(1, 1_000_000 // costs.shape[1])
    for start in range(0, len(rows), size):
        some = rows[start : start + size]
        np.minimum(least, (costs.block(some) - u[some, None]).min(axis=0), out=least)
    return np.maximum(least - v, 0.0)


def _joined(rows: Array, columns: Array, n: int, m: int) -> Array:
    """Label of the part of the plan that each row and then each column belongs to."""
    from scipy.sparse import csr_array
    from scipy.sparse.csgraph import connected_components

    moves = csr_array((np.ones(len(rows), np.int8), (rows, n + columns)), shape=(n + m, n + m))
    return connected_components(moves, directed=False)[1]


def ties(network: Network, *, highest_cost: float) -> Array:
    """Pairs (row, column) that the plan does not use and another plan of the same cost does; slack left out.

    Such a pair lies on a cycle of moves whose reduced costs are all zero, judged against the highest cost of
    a move.
    """
    from scipy.sparse import csr_array
    from scipy.sparse.csgraph import connected_components

    n, m = network.costs.shape
    i, j = _tight_moves(network, _TIE_SHARE * highest_cost)
    tails = np.concatenate([i, n + network.columns])
    heads = np.concatenate([n + j, network.rows])
    graph = csr_array((np.ones(len(tails), np.int8), (tails, heads)), shape=(n + m, n + m))
    _, part = connected_components(graph, directed=True, connection="strong")
    used = np.isin(i * m + j, network.rows * m + network.columns)
    tied = (part[i] == part[n + j]) & ~used & (i < n - 1) & (j < m - 1)
    return np.column_stack([i[tied], j[tied]])


def _tight_moves(network: Network, limit: float) -> tuple[Array, Array]:
    """Allowed moves whose reduced cost is zero within a limit."""
    costs, u, v = network.costs, network.row_price, network.column_price
    found = []
    step = max(1, 1_000_000 // costs.shape[1])
    for start in range(0, costs.shape[0], step):
        rows = slice(start, start + step)
        reduced = costs.block(rows)
        reduced -= u[rows, None]
        reduced -= v[None, :]
        i, j = np.nonzero(reduced <= limit)
        found.append((i + start, j))
    return np.concatenate([i for i, _ in found]), np.concatenate([j for _, j in found])
