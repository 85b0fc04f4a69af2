"""Flows and prices worked out along the trees that the moves of a plan make, free of what a solver rounded."""

from __future__ import annotations

import numpy as np

from earthwork.plan.transport_costs import Array, Costs


def is_dust(rows: Array, columns: Array, flow: Array, supply: Array, need: Array) -> Array:
    """Moves that only carry what rounding to whole units left over: no more than half a unit for each row and
    column."""
    least = np.minimum(supply[rows], need[columns])
    return (flow <= len(supply) + len(need)) & (flow <= 1e-6 * least)


def along_trees(
    costs: Costs, rows: Array, columns: Array, supply: Array, need: Array, u: Array, v: Array
) -> tuple[Array, Array, Array]:
    """Flows and prices worked out anew along the moves of a plan, free of what the solver rounded.

    The moves of a plan make trees: from the leaves inward each amount leaves one flow open, and from one price of
    each tree (its largest amount, where rounding of the sums ends) u(i) + v(j) = cost(i, j) gives the others.
    """
    from scipy.sparse import csr_array
    from scipy.sparse.csgraph import breadth_first_order, connected_components

    n, m = costs.shape
    moves = csr_array((np.ones(len(rows), np.int8), (rows, n + columns)), shape=(n + m + 1, n + m + 1))
    part = connected_components(moves, directed=False)[1][: n + m]
    largest = np.argsort(-np.concatenate([supply, need]), kind="stable")
    anchors = largest[np.unique(part[largest], return_index=True)[1]]
    root = np.full(len(anchors), n + m)
    moves = moves + csr_array((np.ones(len(anchors), np.int8), (root, anchors)), shape=moves.shape)
    order, before = breadth_first_order(moves, n + m, directed=False)
    order = order[before[order] < n + m][1:]
    towards = before[order]
    ends = np.sort(np.column_stack([order, towards]), axis=1)
    price, left, flow = np.concatenate([u, v]).tolist(), np.concatenate([supply, need]).tolist(), {}
    cost = costs.pairs(ends[:, 0], ends[:, 1] - n).tolist()
    for k, (node, other) in enumerate(zip(order.tolist(), towards.tolist(), strict=True)):
        price[node] = cost[k] - price[other]
    for node, other in zip(order[::-1].tolist(), towards[::-1].tolist(), strict=True):
        amount = max(0.0, left[node])
        left[other] -= amount
        flow[min(node, other), max(node, other)] = amount
    flows = np.array([flow[i, n + j] for i, j in zip(rows.tolist(), columns.tolist(), strict=True)])
    return flows, np.array(price[:n]), np.array(price[n:])
