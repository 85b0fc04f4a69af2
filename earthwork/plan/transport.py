"""The cheapest way to serve sinks from sources, with the proof that none is cheaper.

``min Σ cost(i, j) x(i, j)`` with ``Σ_j x(i, j) = supply(i)`` (``≤`` for spare rows) and
``Σ_i weight(i, j) x(i, j) = need(j)`` (``≤`` for spare columns). Where the weight is a product of a factor of
the row and one of the column, as it is when soil is counted in compacted-equivalent volume, the problem is a
pure network and the network simplex of POT solves it; otherwise a linear program does
(:mod:`earthwork.plan.transport_lp`). Supplies are whole multiples of 2⁻⁵² of the total, so that flows are
exact in double precision.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from earthwork.errors import PlanError
from earthwork.plan.transport_costs import Array, Costs
from earthwork.plan.transport_cut import CLOSING_ERROR, TransportInfeasible, name_infeasible
from earthwork.plan.transport_trees import along_trees, is_dust

#: Moves (rows × columns) up to which the whole matrix of costs is held in memory; 40 bytes each in the
#: solver.
DENSE_MOVES = 4_000_000
#: A plan may miss the proven lower bound of its cost by this share of the costs in it, and no more.
GAP_ALLOWED = 1e-8
_UNITS = 2.0**52


@dataclass(frozen=True, kw_only=True)
class Certificate:
    """Why no plan is cheaper.

    Prices ``u``, ``v`` with ``u(i) + v(j) ≤ cost(i, j)`` for every allowed move prove that no plan costs less
    than ``Σ u supply + Σ v need`` (linear programming duality). ``worst_reduced_cost`` is the least ``cost −
    u − v`` found, as a share of the range of costs; what it lacks to zero is taken off the bound.
    """

    cost: float
    lower_bound: float
    relative_gap: float  #: (cost − lower bound) / Σ |cost| of the plan
    worst_reduced_cost: float
    moves_checked: int
    highest_cost: float  #: largest |cost| of one unit of an allowed move
    method: str


@dataclass(frozen=True, kw_only=True)
class TransportPlan:
    """An optimal plan.

    ``rows``, ``columns``, ``amounts``: the moves, amounts in the unit of the row. ``unused`` by row in its
    unit, ``unfilled`` by column in its unit. ``row_marginal``: change of cost per further unit of supply,
    ``column_marginal`` per further unit of need, exact for a small further unit, ``inf`` where it cannot be
    placed. ``ties``: pairs (row, column) without a move that could carry one in another plan of the same
    cost.
    """

    rows: Array
    columns: Array
    amounts: Array
    unused: Array
    unfilled: Array
    cost: float
    row_marginal: Array
    column_marginal: Array
    ties: Array
    certificate: Certificate


@dataclass(frozen=True, kw_only=True)
class Network:
    """A solved balanced network: every row is used up and every column filled, the slack ones included."""

    costs: Costs
    supply: Array
    need: Array
    rows: Array
    columns: Array
    flow: Array
    row_price: Array
    column_price: Array
    method: str


def solve_transport(
    supply: Array,
    need: Array,
    costs: Costs,
    *,
    weight: Array | None = None,
    spare_rows: Array | None = None,
    spare_columns: Array | None = None,
) -> TransportPlan:
    """The cheapest plan, with its certificate.

    Args:
        supply: (n,) ≥ 0; ``inf`` for a spare row without limit.
        need: (m,) ≥ 0; ``inf`` for a spare column without limit.
        costs: cost of one unit of each row to each column.
        weight: (R, C) units of the column that one unit of the row makes, by class; default 1.
        spare_rows, spare_columns: bool, which rows may keep a part, which columns may stay unfilled; default
            none.

    Raises:
        TransportInfeasible: no plan exists; it carries the rows, the columns and the amount.
        ValueError: shapes or values that make no problem.

    >>> plan = solve_transport(np.array([5.0, 5.0]), np.array([4.0, 6.0]),
    ...                        Costs.of_matrix(np.array([[1.0, 2.0], [3.0, 1.0]])))
    >>> plan.cost, round(plan.certificate.lower_bound, 9)
    (11.0, 11.0)
    """
    supply, need = np.asarray(supply, float), np.asarray(need, float)
    n, m = costs.shape
    spare_rows = np.zeros(n, bool) if spare_rows is None else np.asarray(spare_rows, bool)
    spare_columns = np.zeros(m, bool) if spare_columns is None else np.asarray(spare_columns, bool)
    _check(supply, need, costs, spare_rows, spare_columns)
    factors = _factors(weight, costs, np.isinf(need))
    if factors is None:
        from earthwork.plan.transport_lp import solve_linear_program

        assert weight is not None
        return solve_linear_program(supply, need, costs, weight, spare_rows, spare_columns)
    by_row, by_column = factors[0][costs.row_class], factors[1][costs.column_class]
    try:
        network = solve_network(supply * by_row, need / by_column, costs.scaled(factors[0]), spare_rows, spare_columns)
    except TransportInfeasible as error:
        unit = by_column[error.columns[0]] if error.shortage else 1 / by_row[error.rows[0]]
        raise TransportInfeasible(
            rows=error.rows, columns=error.columns, amount=error.amount * float(unit), shortage=error.shortage
        ) from None
    certificate = certify(network)
    return _plan(network, certificate, by_row, by_column)


def certify(network: Network) -> Certificate:
    """Check over every allowed move that the prices prove the plan; raises where they do not.

    Raises:
        PlanError: the plan is not proven, which is an error of the program.
    """
    costs, u, v = network.costs, network.row_price, network.column_price
    worst, checked, highest = math.inf, 0, 0.0
    for start in range(0, costs.shape[0], _chunk(costs.shape[1])):
        rows = slice(start, start + _chunk(costs.shape[1]))
        block = costs.block(rows)
        allowed = np.isfinite(block)
        checked += int(np.count_nonzero(allowed))
        highest = max(highest, float(np.abs(block[allowed]).max(initial=0.0)))
        block -= u[rows, None]
        block -= v[None, :]
        worst = min(worst, float(block.min(initial=math.inf)))
    each = costs.pairs(network.rows, network.columns)
    cost = math.fsum(network.flow * each)
    short = min(0.0, worst)
    bound = math.fsum(network.supply * u) + math.fsum(network.need * v) + short * network.supply.sum()
    size = max(math.fsum(network.flow * np.abs(each)), np.finfo(float).tiny)
    gap = (cost - bound) / size
    # Costs that cancel (all moves free) leave rounding of the prices, judged against the highest cost
    # instead.
    if gap > GAP_ALLOWED and cost - bound > 1e-12 * highest * network.supply.sum():
        raise PlanError(
            f"haul: the plan of cost {cost:.12g} is proven to within {gap:.1e} only; it must be "
            f"{GAP_ALLOWED:g}. This is an error of the program: please report it with the site file"
        )
    return Certificate(
        cost=cost,
        lower_bound=float(bound),
        relative_gap=max(0.0, float(gap)),
        worst_reduced_cost=short / highest if highest else 0.0,
        moves_checked=checked,
        highest_cost=highest,
        method=network.method,
    )


def _chunk(columns: int) -> int:
    return max(1, 1_000_000 // max(1, columns))


def _check(supply: Array, need: Array, costs: Costs, spare_rows: Array, spare_columns: Array) -> None:
    n, m = costs.shape
    if (supply.shape, need.shape, spare_rows.shape, spare_columns.shape) != ((n,), (m,), (n,), (m,)):
        raise ValueError(
            f"supply has shape {supply.shape} and need {need.shape}; costs are for {n} rows and {m} columns"
        )
    for name, amounts, spare in (("supply", supply, spare_rows), ("need", need, spare_columns)):
        if np.isnan(amounts).any() or (amounts < 0).any():
            raise ValueError(f"{name} has a negative or missing amount; each must be 0 or more")
        if np.isinf(amounts[~spare]).any():
            raise ValueError(f"{name} is without limit where all of it must move; only spare ones may be")


def _factors(weight: Array | None, costs: Costs, free: Array) -> tuple[Array, Array] | None:
    """Factors of row and column classes whose product is the weight on all allowed moves; None where there
    are none.

    A column without limit counts nothing, so its weight is free.
    """
    rows, columns = costs.table.shape
    if weight is None:
        return np.ones(rows), np.ones(columns)
    counted = np.zeros(columns, bool)
    counted[costs.column_class[~free]] = True
    linked = np.isfinite(costs.table) & counted[None, :]
    by_row, by_column = np.full(rows, np.nan), np.full(columns, np.nan)
    for first in range(columns):
        if not linked[:, first].any() or not np.isnan(by_column[first]):
            continue
        by_column[first] = 1.0
        waiting = [first]
        while waiting:
            column = waiting.pop()
            for row in np.flatnonzero(linked[:, column] & np.isnan(by_row)):
                by_row[row] = weight[row, column] / by_column[column]
                for other in np.flatnonzero(linked[row] & np.isnan(by_column)):
                    by_column[other] = weight[row, other] / by_row[row]
                    waiting.append(int(other))
    by_row[np.isnan(by_row)] = 1.0
    by_column[np.isnan(by_column)] = 1.0
    product = by_row[:, None] * by_column[None, :]
    if np.all(np.abs(product - weight)[linked] <= 1e-12 * weight[linked]):
        return by_row, by_column
    return None


def solve_network(supply: Array, need: Array, costs: Costs, spare_rows: Array, spare_columns: Array) -> Network:
    """Solve a network in one unit, whose spare rows and columns get slack."""
    supply, need = _with_limits(supply, need)
    fixed_supply, fixed_need = math.fsum(supply[~spare_rows]), math.fsum(need[~spare_columns])
    spare_supply, spare_need = math.fsum(supply[spare_rows]), math.fsum(need[spare_columns])
    # The slack row fills what columns leave, the slack column takes what rows leave; the slack of one may
    # meet the other.
    slack_supply = fixed_need + spare_need - fixed_supply
    slack_need = spare_supply + max(0.0, -slack_supply)
    supply, need = np.append(supply, max(0.0, slack_supply)), np.append(need, slack_need)
    return solve_balanced(supply, need, costs.with_slack(spare_rows, spare_columns))


def _with_limits(supply: Array, need: Array) -> tuple[Array, Array]:
    """Replace amounts without limit by ones that can never be reached."""
    all_supply, all_need = math.fsum(supply[np.isfinite(supply)]), math.fsum(need[np.isfinite(need)])
    supply = np.where(np.isinf(supply), 1.25 * all_need, supply)
    return supply, np.where(np.isinf(need), 1.25 * all_supply, need)


def solve_balanced(supply: Array, need: Array, costs: Costs) -> Network:
    """Solve a network whose last row and last column are slack, by size with all moves or with candidates."""
    total = math.fsum(supply)
    if total <= 0.0:
        none = np.zeros(0, np.int64)
        return Network(
            costs=costs,
            supply=supply,
            need=need,
            rows=none,
            columns=none,
            flow=np.zeros(0),
            row_price=np.zeros(len(supply)),
            column_price=_column_prices(costs, np.zeros(len(supply))),
            method="nothing to move",
        )
    units, unit = (to_units(supply, total), to_units(need, total)), total / _UNITS
    if costs.shape[0] * costs.shape[1] <= DENSE_MOVES:
        rows, columns, flow, u, v = solve_dense(*units, costs, unit=unit)
        method, column_prices = "network simplex over all moves", _column_prices
    else:
        from earthwork.plan.transport_sparse import column_prices, solve_with_candidates

        rows, columns, flow, u, v, method = solve_with_candidates(*units, costs, unit=unit)
    keep = ~is_dust(rows, columns, flow, *units)
    rows, columns = rows[keep], columns[keep]
    flow, u, v = along_trees(costs, rows, columns, supply, need, u, v)
    rows, columns, flow = rows[flow > 0], columns[flow > 0], flow[flow > 0]
    # Dual-feasible to rounding: each price becomes the highest that the other side leaves.
    v = column_prices(costs, u, v)
    u = column_prices(costs.transposed, v, u)
    return Network(
        costs=costs,
        supply=supply,
        need=need,
        rows=rows,
        columns=columns,
        flow=flow,
        row_price=u,
        column_price=v,
        method=method,
    )


def to_units(amounts: Array, total: float) -> Array:
    """Amounts as whole numbers of 2⁻⁵² of the total, adding up to 2⁵² exactly: sums of them are exact."""
    units = np.rint(amounts * (_UNITS / total))
    units[np.argmax(units)] += _UNITS - units.sum()
    return units


def solve_dense(supply: Array, need: Array, costs: Costs, *, unit: float) -> tuple[Array, Array, Array, Array, Array]:
    """Solve with the whole matrix of costs: rows, columns and units of the moves, prices of rows and of
    columns.

    Supply and need are in whole units (:func:`to_units`) that stand for the amount ``unit`` each.
    """
    import ot

    i, j = np.flatnonzero(supply), np.flatnonzero(need)
    matrix = costs.block(i, j)
    forbidden = ~np.isfinite(matrix)
    low, span = _shape_costs(matrix, forbidden)
    plan, log = ot.emd(
        supply[i] / _UNITS,
        need[j] / _UNITS,
        matrix,
        numItermax=10**9,
        log=True,
        center_dual=False,
        check_marginals=False,
    )
    if log["result_code"] != 1:
        raise PlanError(f"haul: the network solver stopped: {log['warning']}. Please report it with the site file")
    row, column = np.nonzero(plan)
    flow = plan[row, column] * _UNITS
    wrong = forbidden[row, column]
    if flow[wrong].sum() > CLOSING_ERROR * _UNITS:
        raise name_infeasible(supply * unit, need * unit, costs)
    u, v = np.zeros(len(supply)), np.zeros(len(need))
    u[i], v[j] = log["u"] * span + low, log["v"] * span
    _price_empty(costs, u, v, supply == 0, need == 0)
    keep = ~wrong
    return i[row[keep]], j[column[keep]], flow[keep], u, v


def _shape_costs(matrix: Array, forbidden: Array) -> tuple[float, float]:
    """Bring costs to 0 … 1 in place, forbidden ones so high that no allowed detour costs more."""
    allowed = matrix[~forbidden]
    low = float(allowed.min(initial=0.0)) if allowed.size else 0.0
    span = (float(allowed.max()) - low if allowed.size else 0.0) or 1.0
    matrix -= low
    matrix /= span
    matrix[forbidden] = 2.0 + min(matrix.shape)
    return low, span


def _price_empty(costs: Costs, u: Array, v: Array, no_supply: Array, no_need: Array) -> None:
    """Prices of rows and columns that take no part: the highest that no move contradicts."""
    if no_need.any():
        columns = np.flatnonzero(no_need)
        prices = (costs.block(np.flatnonzero(~no_supply), columns) - u[~no_supply, None]).min(axis=0)
        v[columns] = np.where(np.isfinite(prices), prices, 0.0)
    if no_supply.any():
        rows = np.flatnonzero(no_supply)
        prices = (costs.block(rows) - v[None, :]).min(axis=1)
        u[rows] = np.where(np.isfinite(prices), prices, 0.0)


def _column_prices(costs: Costs, u: Array, otherwise: Array | None = None) -> Array:
    """The highest prices of columns that those of the rows allow, ``min_i cost(i, j) − u(i)``."""
    best = np.full(costs.shape[1], np.inf)
    step = _chunk(costs.shape[1])
    for start in range(0, costs.shape[0], step):
        rows = slice(start, start + step)
        np.minimum(best, (costs.block(rows) - u[rows, None]).min(axis=0), out=best)
    return np.where(np.isfinite(best), best, 0.0 if otherwise is None else otherwise)


def _plan(network: Network, certificate: Certificate, by_row: Array, by_column: Array) -> TransportPlan:
    from earthwork.plan.marginal import marginal_costs, ties

    n, m = len(by_row), len(by_column)
    real = (network.rows < n) & (network.columns < m)
    left = (network.rows < n) & ~real
    empty = (network.columns < m) & ~real
    of_rows, of_columns = marginal_costs(network)
    rows, columns = network.rows[real], network.columns[real]
    return TransportPlan(
        rows=rows,
        columns=columns,
        amounts=network.flow[real] / by_row[rows],
        unused=np.bincount(network.rows[left], network.flow[left], n)[:n] / by_row,
        unfilled=np.bincount(network.columns[empty], network.flow[empty], m)[:m] * by_column,
        cost=certificate.cost,
        row_marginal=of_rows[:n] * by_row,
        column_marginal=of_columns[:m] / by_column,
        ties=ties(network, highest_cost=certificate.highest_cost),
        certificate=certificate,
    )
