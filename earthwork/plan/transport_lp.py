"""Transportation that is no pure network, by linear programming (HiGHS), with the same proof.

It is needed where a tonne of two soils stands in one ratio in one sink and in another in a second: a disposal
site with a limit in loose volume that takes both, or a zone with a density of its own. Large problems start
from the candidate moves of the nearest pure network; all moves are priced, cheaper ones join until none is.
"""

from __future__ import annotations

import math
from typing import NamedTuple

import numpy as np

from earthwork.errors import PlanError
from earthwork.plan.transport import GAP_ALLOWED, Certificate, TransportPlan, solve_network
from earthwork.plan.transport_costs import Array, Costs
from earthwork.plan.transport_cut import CLOSING_ERROR, TransportInfeasible

#: Moves up to which the first program holds all of them.
_ALL_MOVES = 200_000
_CANDIDATES = 8
_ROUNDS = 60
_TOLERANCE = 1e-10


class _Problem(NamedTuple):
    """Amounts as shares of their total and costs as shares of the highest, so that tolerances mean the
    same."""

    supply: Array
    need: Array
    costs: Costs
    weight: Array
    spare_rows: Array
    spare_columns: Array
    highest: float


class _Solution(NamedTuple):
    amount: Array
    row_price: Array
    column_price: Array
    unmet_rows: Array
    unmet_columns: Array


def solve_linear_program(
    supply: Array, need: Array, costs: Costs, weight: Array, spare_rows: Array, spare_columns: Array
) -> TransportPlan:
    """The cheapest plan; arguments and result as in :func:`earthwork.plan.transport.solve_transport`.

    Marginal costs are the prices of the program, which on a degenerate plan hold for one direction only; ties
    are the unused moves that cost no more than the plan's.
    """
    supply, need = _with_limits(supply, need, weight)
    problem = _Problem(supply, need, costs, weight, spare_rows, spare_columns, _highest(costs))
    key = _first_candidates(problem)
    for turn in range(1, _ROUNDS + 1):
        solution = _solve(problem, key)
        new, worst, tight = _price(problem, solution)
        new = np.setdiff1d(new, key)
        if not new.size:
            _refuse_unmet(problem, key, solution)
            return _plan(problem, key, solution, worst, tight, turn)
        key = np.union1d(key, new)
    raise PlanError(f"haul: no proof after {_ROUNDS} rounds of candidates. Please report it with the site file")


def _with_limits(supply: Array, need: Array, weight: Array) -> tuple[Array, Array]:
    """Replace amounts without limit by ones that can never be reached."""
    real = weight[np.isfinite(weight) & (weight > 0)]
    finite = np.isfinite(supply)
    supply = np.where(finite, supply, 1.25 * need[np.isfinite(need)].sum() / real.min())
    return supply, np.where(np.isfinite(need), need, 1.25 * supply.sum() * real.max())


def _highest(costs: Costs) -> float:
    return max(float(np.abs(block[np.isfinite(block)]).max(initial=0.0)) for _, block in _blocks(costs)) or 1.0


def _blocks(costs: Costs):
    """Row slices and their costs, a million at a time."""
    step = max(1, 1_000_000 // costs.shape[1])
    for start in range(0, costs.shape[0], step):
        rows = slice(start, min(start + step, costs.shape[0]))
        yield rows, costs.block(rows)


def _first_candidates(problem: _Problem) -> Array:
    """All allowed moves of a small problem; of a large one those that a pure network close to it would take."""
    n, m = problem.costs.shape
    if n * m <= _ALL_MOVES:
        found = []
        for rows, block in _blocks(problem.costs):
            i, j = np.nonzero(np.isfinite(block))
            found.append((i + rows.start) * m + j)
        return np.concatenate(found)
    solution, used = _like_network(problem)
    new, _, _ = _price(problem, solution, below=np.inf)
    return np.union1d(new, used)


def _like_network(problem: _Problem) -> tuple[_Solution, Array]:
    """Prices and moves of the network whose weights are the products of factors that come closest."""
    costs, (n, m) = problem.costs, problem.costs.shape
    linked = np.isfinite(costs.table)
    log = np.where(linked, np.log(np.where(problem.weight > 0, problem.weight, 1.0)), 0.0)
    by_row, by_column = np.zeros(len(log)), np.zeros(log.shape[1])
    for _ in range(50):
        by_row = np.where(linked, log - by_column[None, :], 0.0).sum(axis=1) / np.maximum(linked.sum(axis=1), 1)
        by_column = np.where(linked, log - by_row[:, None], 0.0).sum(axis=0) / np.maximum(linked.sum(axis=0), 1)
    rows, columns = np.exp(by_row), np.exp(by_column)
    of_row, of_column = rows[costs.row_class], columns[costs.column_class]
    none = np.zeros(0, np.int64)
    try:
        network = solve_network(
            problem.supply * of_row, problem.need / of_column, costs.scaled(rows), problem.spare_rows,
            problem.spare_columns,
        )  # fmt: skip
    except TransportInfeasible:
        return _Solution(np.zeros(0), np.zeros(n), np.zeros(m), np.zeros(n), np.zeros(m)), none
    real = (network.rows < n) & (network.columns < m)
    key = network.rows[real] * m + network.columns[real]
    prices = network.row_price[:n] * of_row, network.column_price[:m] / of_column
    return _Solution(np.zeros(0), *prices, np.zeros(n), np.zeros(m)), key


def _solve(problem: _Problem, key: Array) -> _Solution:
    """Solve over some moves; what cannot be placed by them is left unmet at a price over that of any
    detour."""
    from scipy.optimize import linprog
    from scipy.sparse import coo_array, hstack

    n, m = problem.costs.shape
    i, j = key // m, key % m
    total, k = problem.supply.sum() or 1.0, len(key)
    weight = problem.weight[problem.costs.row_class[i], problem.costs.column_class[j]]
    # Each column's line is divided by its mean weight, so that all lines count in one unit.
    unit = np.divide(
        np.bincount(j, weight, m), np.bincount(j, minlength=m), out=np.ones(m), where=np.isin(np.arange(m), j)
    )
    moves = coo_array(
        (np.r_[np.ones(k), weight / unit[j]], (np.r_[i, n + j], np.r_[np.arange(k), np.arange(k)])),
        shape=(n + m, k),
    )
    spare = np.r_[problem.spare_rows, problem.spare_columns]
    slack = coo_array((np.ones(n + m), (np.arange(n + m), np.arange(n + m))), shape=(n + m, n + m))
    # The slack of a spare line is free; that of a fixed one is what cannot be placed.
    price = np.where(spare, 0.0, 4.0 * (n + m))
    cost = np.r_[problem.costs.pairs(i, j) / problem.highest, price]
    result = linprog(
        cost,
        A_eq=hstack([moves, slack]).tocsc(),
        b_eq=np.r_[problem.supply, problem.need / unit] / total,
        method="highs",
        options={"primal_feasibility_tolerance": _TOLERANCE, "dual_feasibility_tolerance": _TOLERANCE},
    )
    if result.status != 0:
        raise PlanError(f"haul: the linear program stopped: {result.message}. Please report it with the site file")
    prices = result.eqlin.marginals * problem.highest
    left = np.where(spare, 0.0, result.x[k:]) * total
    return _Solution(result.x[:k] * total, prices[:n], prices[n:] / unit, left[:n], left[n:] * unit)


def _reduced(problem: _Problem, solution: _Solution, rows: slice, block: Array) -> Array:
    weight = problem.weight[problem.costs.row_class[rows]][:, problem.costs.column_class]
    return block - solution.row_price[rows, None] - weight * solution.column_price[None, :]


def _price(problem: _Problem, solution: _Solution, *, below: float | None = None) -> tuple[Array, float, Array]:
    """Keys of the cheaper moves, the worst reduced cost, and the keys of moves that cost just the same.

    Cheaper moves are the worst few of each row and column whose reduced cost lies below a bound, by default zero.
    """
    m = problem.costs.shape[1]
    limit = 1e-9 * problem.highest
    bound = -limit if below is None else below
    new, tight, worst = [], [], 0.0
    best = np.full((_CANDIDATES, m), np.inf)
    at = np.full((_CANDIDATES, m), -1)
    for rows, block in _blocks(problem.costs):
        reduced = _reduced(problem, solution, rows, block)
        worst = min(worst, float(reduced.min(initial=0.0)))
        i, j = np.nonzero(np.abs(reduced) <= limit)
        tight.append((i + rows.start) * m + j)
        new.append(_fewest(reduced, rows.start, m, bound))
        best, at = _fewest_by_column(best, at, reduced, rows.start)
    q, j = np.nonzero((best < bound) & (at >= 0))
    new.append(at[q, j] * m + j)
    return np.unique(np.concatenate(new)), worst, np.concatenate(tight)


def _fewest(reduced: Array, start: int, columns: int, bound: float) -> Array:
    """Keys of the least few of each row that lie below a bound."""
    few = min(_CANDIDATES, columns)
    order = np.argpartition(reduced, few - 1, axis=1)[:, :few]
    i = np.repeat(np.arange(len(reduced)), few)
    j = order.ravel()
    keep = reduced[i, j] < bound
    return (i[keep] + start) * columns + j[keep]


def _fewest_by_column(best: Array, at: Array, reduced: Array, start: int) -> tuple[Array, Array]:
    """The least few of each column, of those so far and those of a block of rows."""
    few = min(_CANDIDATES, len(reduced))
    order = np.argpartition(reduced, few - 1, axis=0)[:few]
    values = np.vstack([best, np.take_along_axis(reduced, order, axis=0)])
    places = np.vstack([at, order + start])
    kept = np.argpartition(values, len(best) - 1, axis=0)[: len(best)]
    return np.take_along_axis(values, kept, axis=0), np.take_along_axis(places, kept, axis=0)


def _refuse_unmet(problem: _Problem, key: Array, solution: _Solution) -> None:
    """Raise when something cannot be placed, naming the sinks (or sources) and what could have helped."""
    total = problem.supply.sum()
    unmet = solution.unmet_columns > CLOSING_ERROR * problem.need.max(initial=0.0)
    stuck = solution.unmet_rows > CLOSING_ERROR * total
    if not unmet.any() and not stuck.any():
        return
    rows = np.arange(len(problem.supply))
    columns = np.arange(len(problem.need))
    if unmet.any():
        helps = np.isfinite(problem.costs.block(rows, columns[unmet])).any(axis=1)
        amount = float(solution.unmet_columns[unmet].sum())
        raise TransportInfeasible(rows=rows[helps], columns=columns[unmet], amount=amount, shortage=True)
    helps = np.isfinite(problem.costs.block(rows[stuck], columns)).any(axis=0)
    amount = float(solution.unmet_rows[stuck].sum())
    raise TransportInfeasible(rows=rows[stuck], columns=columns[helps], amount=amount, shortage=False)


def _plan(problem: _Problem, key: Array, solution: _Solution, worst: float, tight: Array, turns: int) -> TransportPlan:
    n, m = problem.costs.shape
    used = solution.amount > 1e-12 * problem.supply.sum()
    i, j, amount = key[used] // m, key[used] % m, solution.amount[used]
    amount = _closed(i, amount, problem)
    weight = problem.weight[problem.costs.row_class[i], problem.costs.column_class[j]]
    unused = np.where(problem.spare_rows, np.maximum(0.0, problem.supply - np.bincount(i, amount, n)), 0.0)
    filled = np.bincount(j, amount * weight, m)
    return TransportPlan(
        rows=i,
        columns=j,
        amounts=amount,
        unused=unused,
        unfilled=np.where(problem.spare_columns, np.maximum(0.0, problem.need - filled), 0.0),
        cost=math.fsum(amount * problem.costs.pairs(i, j)),
        row_marginal=solution.row_price,
        column_marginal=solution.column_price,
        ties=_ties(tight, key[used], m),
        certificate=_certificate(problem, solution, i, j, amount, worst, turns),
    )


def _ties(tight: Array, used: Array, columns: int) -> Array:
    rest = np.setdiff1d(tight, used)
    return np.column_stack([rest // columns, rest % columns])


def _closed(i: Array, amount: Array, problem: _Problem) -> Array:
    """Scale the moves of each fixed row so that they add up to its supply to rounding."""
    n = len(problem.supply)
    sums = np.bincount(i, amount, n)
    fixed = ~problem.spare_rows & (sums > 0)
    return amount * np.divide(problem.supply, sums, out=np.ones(n), where=fixed)[i]


def _certificate(
    problem: _Problem, solution: _Solution, i: Array, j: Array, amount: Array, worst: float, turns: int
) -> Certificate:
    u, v = solution.row_price, solution.column_price
    each = problem.costs.pairs(i, j)
    cost = math.fsum(amount * each)
    # Prices of spare lines must not be positive; what they exceed is taken off the bound with the rest.
    u, v = (
        np.where(problem.spare_rows, np.minimum(u, 0), u),
        np.where(problem.spare_columns, np.minimum(v, 0), v),
    )
    bound = math.fsum(problem.supply * u) + math.fsum(problem.need * v) + worst * problem.supply.sum()
    gap = (cost - bound) / max(math.fsum(amount * np.abs(each)), np.finfo(float).tiny)
    if gap > GAP_ALLOWED and cost - bound > 1e-9 * problem.highest * problem.supply.sum():
        raise PlanError(
            f"haul: the plan of cost {cost:.12g} is proven to within {gap:.1e} only; it must be "
            f"{GAP_ALLOWED:g}. This is an error of the program: please report it with the site file"
        )
    checked = sum(int(np.count_nonzero(np.isfinite(block))) for _, block in _blocks(problem.costs))
    return Certificate(
        cost=cost,
        lower_bound=float(bound),
        relative_gap=max(0.0, float(gap)),
        worst_reduced_cost=worst / problem.highest,
        moves_checked=checked,
        highest_cost=problem.highest,
        method=f"linear program, {turns} round{'' if turns == 1 else 's'}, priced over all moves",
    )
