"""The cheapest plan when stockpiles are too small for the one that minds no capacity: a linear program over phases.

Earth that waits goes from its cut to a pile and later from the pile to its fill. For each pile, material and phase no
more is taken than lies there from earlier phases, and after each phase no more lies there than the pile holds.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

import numpy as np

from earthwork.errors import PlanError
from earthwork.plan import phases
from earthwork.plan.haul_costs import HaulCosts
from earthwork.plan.transport import GAP_ALLOWED, Certificate, TransportPlan
from earthwork.plan.transport_costs import Array, Costs

_TOLERANCE = 1e-10


@dataclass(frozen=True)
class PileProblem:
    """The problem of a planner: supplies in kg, needs in the volume of each class of sink."""

    costs: HaulCosts
    moves: Costs
    weight: Array
    supply: Array
    need: Array
    spare_rows: Array
    spare_columns: Array


def solve_with_piles(problem: PileProblem) -> tuple[TransportPlan, Array] | None:
    """The cheapest plan that heeds the capacity of the stockpiles, and the pile of each move; None where none does.

    Raises:
        PlanError: the program stopped, or its plan is not proven, which is an error of the program.
    """
    return _Program(problem).solve()


class _Program:
    def __init__(self, problem: PileProblem) -> None:
        self.problem = problem
        self.costs = problem.costs
        self.dug, self.filled = problem.costs.dug, problem.costs.filled
        self.sources, self.sinks = problem.costs.places.sources, problem.costs.places.sinks
        self.piles = problem.costs.piles
        self.phases = len(problem.costs.ways.areas.phases)
        self.materials = list(dict.fromkeys(s.material for s in self.sources))
        self.of = np.array([self.materials.index(s.material) for s in self.sources], np.int64)
        self.loose = np.array([1 / self.costs.cards[m].loose_dry_density_kg_m3 for m in self.materials])
        self._direct()
        self._over_piles()

    # --- moves ---------------------------------------------------------------------------------------------------

    def _direct(self) -> None:
        """Moves that do not wait."""
        cost = self.problem.moves.block()
        cost[phases.waits(self.dug[:, None], self.filled[None, :])] = np.inf
        self.i, self.j = np.nonzero(np.isfinite(cost))
        self.cost = cost[self.i, self.j]

    def _over_piles(self) -> None:
        """Moves onto piles (source, pile) and off them (pile, material, sink)."""
        costs, k = self.costs, len(self.piles)
        n, m = len(self.sources), len(self.sinks)
        out = np.broadcast_to(np.maximum(self.dug, 0)[:, None], (n, k))
        home = np.broadcast_to(np.maximum(self.filled, 0)[None, :], (k, m))
        price = np.array([costs.price(material) for material in self.materials])
        fixed = np.array([costs.fixed_units(material) for material in self.materials])
        onto = (costs.units(costs.from_place, costs.pile_place, out) + fixed[self.of][:, None]) * price[self.of][
            :, None
        ]
        may_wait = (self.dug != phases.ALWAYS) & (self.dug < self.phases - 1)
        self.on_i, self.on_k = np.nonzero(np.isfinite(onto) & may_wait[:, None])
        self.on_cost = onto[self.on_i, self.on_k]
        away = costs.units(costs.pile_place, costs.to_place, home)
        again = costs.rehandling[:, None] * self.loose[None, :]
        takes = np.array([[material in s.m3_per_kg for s in self.sinks] for material in self.materials], bool)
        may = np.isfinite(away)[:, None, :] & takes[None] & (self.filled > 0)[None, None, :]
        self.off_k, self.off_g, self.off_j = np.nonzero(may)
        base = (away[self.off_k, self.off_j] + fixed[self.off_g]) * price[self.off_g]
        self.off_cost = base + again[self.off_k, self.off_g]

    # --- the program ---------------------------------------------------------------------------------------------

    def solve(self) -> tuple[TransportPlan, Array] | None:
        from scipy.optimize import linprog

        problem = self.problem
        equal, right, at_most, most = self._lines()
        total, highest = problem.supply[~problem.spare_rows].sum() or 1.0, float(np.abs(self._all_costs()).max() or 1.0)
        result = linprog(
            self._all_costs() / highest, A_ub=at_most, b_ub=most / total, A_eq=equal, b_eq=right / total, method="highs",
            options={"primal_feasibility_tolerance": _TOLERANCE, "dual_feasibility_tolerance": _TOLERANCE},
        )  # fmt: skip
        if result.status == 2:
            return None
        if result.status != 0:
            raise PlanError(f"haul: the linear program stopped: {result.message}. Please report it with the site file")
        prices = result.eqlin.marginals * highest, result.ineqlin.marginals * highest
        return self._plan(result.x * total, prices, (equal, right, at_most, most))

    def _all_costs(self) -> Array:
        return np.concatenate([self.cost, self.on_cost, self.off_cost])

    def _lines(self):
        """Equations and inequalities: supplies, needs, what lies on the piles, what they hold."""
        from scipy.sparse import coo_array, vstack

        problem, n, m = self.problem, len(self.sources), len(self.sinks)
        x, a, b = len(self.i), len(self.on_i), len(self.off_j)
        moves, classes = problem.moves, problem.moves.row_class
        class_of = {material: int(classes[self.of == g][0]) for g, material in enumerate(self.materials)}
        weight = problem.weight[classes[self.i], moves.column_class[self.j]]
        off_class = np.array([class_of[material] for material in self.materials])[self.off_g] if b else np.zeros(0, int)
        off_weight = problem.weight[off_class, moves.column_class[self.off_j]]
        rows = coo_array(
            (np.ones(x + a), (np.r_[self.i, self.on_i], np.arange(x + a))), shape=(n, x + a + b)
        ).tocsr()  # fmt: skip
        columns = coo_array(
            (np.r_[weight, off_weight], (np.r_[self.j, self.off_j], np.r_[np.arange(x), x + a + np.arange(b)])),
            shape=(m, x + a + b),
        ).tocsr()
        supply, need = _with_limits(problem)
        taken, left, held, room = self._stock(x, a, b)
        fixed_r, fixed_c = ~problem.spare_rows, ~problem.spare_columns
        equal = vstack([rows[fixed_r], columns[fixed_c], left]).tocsr()
        right = np.r_[supply[fixed_r], need[fixed_c], np.zeros(left.shape[0])]
        at_most = vstack([rows[problem.spare_rows], columns[problem.spare_columns], taken, held]).tocsr()
        most = np.r_[supply[problem.spare_rows], need[problem.spare_columns], np.zeros(taken.shape[0]), room]
        return equal, right, at_most, most

    def _stock(self, x: int, a: int, b: int):
        """By pile and material: taken − brought before ≤ 0 for each phase, = 0 at the end; and what the piles hold."""
        from scipy.sparse import csr_array, lil_array

        on, off = x + np.arange(a), x + a + np.arange(b)
        taken: list[Any] = []
        left: list[Any] = []
        held: list[Any] = []
        room: list[float] = []
        for k, pile in enumerate(self.piles):
            for g in range(len(self.materials)):
                brought = (self.on_k == k) & (self.of[self.on_i] == g)
                used = (self.off_k == k) & (self.off_g == g)
                if not brought.any() and not used.any():
                    continue
                for t in range(1, self.phases):
                    line = lil_array((1, x + a + b))
                    line[0, on[brought & (self.dug[self.on_i] < t)]] = -1.0
                    line[0, off[used & (self.filled[self.off_j] <= t)]] = 1.0
                    (left if t == self.phases - 1 else taken).append(line)
            if pile.capacity is not None:
                for t in range(self.phases - 1):
                    held.append(self._held(k, t, x, a, b))
                    room.append(pile.capacity)
        none = csr_array((0, x + a + b))

        def stacked(lines):
            from scipy.sparse import vstack

            return vstack(lines).tocsr() if lines else none

        return stacked(taken), stacked(left), stacked(held), np.array(room, float)

    def _held(self, k: int, t: int, x: int, a: int, b: int):
        """Loose volume on a pile after a phase."""
        from scipy.sparse import lil_array

        line = lil_array((1, x + a + b))
        here = (self.on_k == k) & (self.dug[self.on_i] <= t)
        line[0, x + np.flatnonzero(here)] = self.loose[self.of[self.on_i[here]]]
        gone = (self.off_k == k) & (self.filled[self.off_j] <= t)
        line[0, x + a + np.flatnonzero(gone)] = -self.loose[self.off_g[gone]]
        # What stays on the pile for good lies there as well.
        stays = np.array([s.name == self.piles[k].name for s in self.sinks], bool)[self.j] & (self.dug[self.i] <= t)
        line[0, np.flatnonzero(stays)] = self.loose[self.of[self.i[stays]]]
        return line

    # --- the plan ------------------------------------------------------------------------------------------------

    def _plan(self, amounts: Array, prices, lines) -> tuple[TransportPlan, Array]:
        x, a = len(self.i), len(self.on_i)
        least = 1e-12 * max(float(amounts.sum()), 1e-300)
        direct = np.flatnonzero(amounts[:x] > least)
        rows, columns, mass, pile = self._matched(amounts[x : x + a], amounts[x + a :], least)
        rows, columns = np.r_[self.i[direct], rows], np.r_[self.j[direct], columns]
        mass = np.r_[amounts[:x][direct], mass]
        mass = self._closed(rows, mass)
        certificate = self._certificate(amounts, prices, lines)
        problem, n, m = self.problem, len(self.sources), len(self.sinks)
        u, v = np.zeros(n), np.zeros(m)
        count = int((~problem.spare_rows).sum())
        u[~problem.spare_rows] = prices[0][:count]
        v[~problem.spare_columns] = prices[0][count : count + int((~problem.spare_columns).sum())]
        spare = int(problem.spare_rows.sum())
        u[problem.spare_rows] = prices[1][:spare]
        v[problem.spare_columns] = prices[1][spare : spare + int(problem.spare_columns.sum())]
        weight = problem.weight[problem.moves.row_class[rows], problem.moves.column_class[columns]]
        supply, need = _with_limits(problem)
        plan = TransportPlan(
            rows=rows,
            columns=columns,
            amounts=mass,
            unused=np.where(problem.spare_rows, np.maximum(supply - np.bincount(rows, mass, n), 0.0), 0.0),
            unfilled=np.where(
                problem.spare_columns, np.maximum(need - np.bincount(columns, mass * weight, m), 0.0), 0.0
            ),
            cost=certificate.cost,
            row_marginal=u,
            column_marginal=v,
            ties=np.zeros((0, 2), np.int64),
            certificate=certificate,
        )
        return plan, np.r_[np.zeros(len(direct), np.int64), pile]

    def _matched(self, brought: Array, used: Array, least: float) -> tuple[Array, Array, Array, Array]:
        """Pair what comes onto a pile with what leaves it, first in first out: sources, sinks, masses, piles."""
        found: list[tuple[int, int, float, int]] = []
        for k in range(len(self.piles)):
            for g in range(len(self.materials)):
                ins = np.flatnonzero((self.on_k == k) & (self.of[self.on_i] == g) & (brought > least))
                outs = np.flatnonzero((self.off_k == k) & (self.off_g == g) & (used > least))
                ins = ins[np.argsort(self.dug[self.on_i[ins]], kind="stable")]
                outs = outs[np.argsort(self.filled[self.off_j[outs]], kind="stable")]
                left, s = brought[ins].copy(), 0
                for o in outs:
                    wanted = used[o]
                    while wanted > least and s < len(ins):
                        part = min(wanted, left[s])
                        found.append((int(self.on_i[ins[s]]), int(self.off_j[o]), float(part), k))
                        wanted -= part
                        left[s] -= part
                        s += left[s] <= least
        rows = np.array([f[0] for f in found], np.int64)
        return (
            rows,
            np.array([f[1] for f in found], np.int64),
            np.array([f[2] for f in found], float),
            np.array([f[3] for f in found], np.int64),
        )

    def _closed(self, rows: Array, mass: Array) -> Array:
        """Scale the moves of each cut so that they add up to it to rounding."""
        sums = np.bincount(rows, mass, len(self.sources))
        fixed = ~self.problem.spare_rows & (sums > 0)
        return mass * np.divide(self.problem.supply, sums, out=np.ones(len(sums)), where=fixed)[rows]

    def _certificate(self, amounts: Array, prices, lines) -> Certificate:
        equal, right, at_most, most = lines
        each = self._all_costs()
        y, z = prices[0], np.minimum(prices[1], 0.0)
        worst = float((each - equal.T @ y - at_most.T @ z).min(initial=0.0))
        cost = math.fsum(amounts * each)
        bound = math.fsum(right * y) + math.fsum(most * z) + worst * float(amounts.sum())
        highest = float(np.abs(each).max(initial=0.0)) or 1.0
        gap = (cost - bound) / max(math.fsum(amounts * np.abs(each)), np.finfo(float).tiny)
        if gap > GAP_ALLOWED and cost - bound > 1e-9 * highest * amounts.sum():
            raise PlanError(
                f"haul: the plan of cost {cost:.12g} is proven to within {gap:.1e} only; it must be {GAP_ALLOWED:g}. "
                "This is an error of the program: please report it with the site file"
            )
        return Certificate(
            cost=cost, lower_bound=bound, relative_gap=max(0.0, gap), worst_reduced_cost=worst / highest,
            moves_checked=len(each), highest_cost=highest, method="linear program over phases and stockpiles",
        )  # fmt: skip


def _with_limits(problem: PileProblem) -> tuple[Array, Array]:
    """Replace amounts without limit by ones that can never be reached."""
    real = problem.weight[problem.weight > 0]
    finite = np.isfinite(problem.supply)
    most_need = problem.need[np.isfinite(problem.need)].sum()
    supply = np.where(finite, problem.supply, 1.25 * most_need / real.min())
    return supply, np.where(np.isfinite(problem.need), problem.need, 1.25 * supply.sum() * real.max())
