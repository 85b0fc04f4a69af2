"""The pad grades of least cost, on curves of cut and fill against shift, straight between trial shifts.

Digging and filling at a cost are convex in the shift of a pad, but what must be brought or taken away is a difference of
two convex functions: a descent can end in a plan that is best only nearby. So each curve is a choice of one of its
straight pieces, and the whole a mixed-integer linear program, solved to a proven gap (HiGHS, by scipy).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from earthwork.errors import PlanError

#: The solver stops at this gap between the plan and the best there could be, or after so many seconds.
_GAP = 1e-6
_SECONDS = 30.0

#: Among plans of equal cost, the one that moves pads least: a metre costs this part of the whole cost.
_TIE = 1e-5


@dataclass(frozen=True)
class PadCurve:
    """Cut and fill of one group of pads with their slopes at shifts of their grade; arrays rise with the shift.

    ``names`` are the pads of the group, which move together.
    """

    names: tuple[str, ...]
    shifts_m: np.ndarray
    cut_m3: np.ndarray
    fill_m3: np.ndarray

    def at(self, shift_m: float) -> tuple[float, float]:
        """Cut and fill [m³] at a shift, straight between the known ones."""
        return (
            float(np.interp(shift_m, self.shifts_m, self.cut_m3)),
            float(np.interp(shift_m, self.shifts_m, self.fill_m3)),
        )


@dataclass(frozen=True)
class StepLimit:
    """Two pads whose grades may differ by so much at most [m]; the elevations are those before any shift."""

    one: str
    other: str
    greatest_m: float
    elevation_one_m: float
    elevation_other_m: float

    def kept(self, shift_one_m: float, shift_other_m: float) -> bool:
        """Whether two shifts keep it."""
        apart = self.elevation_one_m + shift_one_m - self.elevation_other_m - shift_other_m
        return abs(apart) <= self.greatest_m + 1e-9


@dataclass(frozen=True)
class Costs:
    """Money per m³: of bank volume dug, and of compacted volume filled, moved on the site, brought, or taken away."""

    dig: float
    fill: float
    on_site: float
    bring: float
    take_away: float


@dataclass(frozen=True)
class Balancing:
    """How the pads' cut and fill enter the balance of the site, in compacted m³.

    surplus = ``surplus_m3`` + ``factor`` × (cut − ``cut_m3``) − (fill − ``fill_m3``); it should be ``target_m3``.
    ``required_m3`` is the fill of the whole site at the given cut and fill.
    """

    surplus_m3: float
    required_m3: float
    cut_m3: float
    fill_m3: float
    factor: float
    target_m3: float


@dataclass(frozen=True)
class Grades:
    """A solution: the shift of each group [m], and what it costs and balances by the curves.

    ``gap`` is by how much of the cost the best plan there could be may be cheaper; 0 when this is the best.
    """

    shifts_m: np.ndarray
    cost: float
    surplus_m3: float
    gap: float = 0.0


def cost_of(
    shifts_m: Sequence[float] | np.ndarray, curves: Sequence[PadCurve], costs: Costs, balancing: Balancing
) -> tuple[float, float]:
    """Cost [money] and surplus [m³ compacted] of shifts, by the curves.

    What is not brought in of the required volume is moved on the site.
    """
    volumes = np.array([curve.at(shift) for curve, shift in zip(curves, shifts_m, strict=True)]).reshape(-1, 2)
    cut, fill = volumes.sum(axis=0)
    surplus = balancing.surplus_m3 + balancing.factor * (cut - balancing.cut_m3) - (fill - balancing.fill_m3)
    bring = max(balancing.target_m3 - surplus, 0.0)
    away = max(surplus - balancing.target_m3, 0.0)
    required = balancing.required_m3 + fill - balancing.fill_m3
    cost = costs.dig * cut + costs.fill * fill + costs.on_site * max(required - bring, 0.0)
    return float(cost + costs.bring * bring + costs.take_away * away), float(surplus)


def solve_grades(
    curves: Sequence[PadCurve],
    ranges_m: Sequence[tuple[float, float]],
    steps: Sequence[StepLimit],
    costs: Costs,
    balancing: Balancing,
) -> Grades:
    """Shifts of least cost.

    Args:
        curves: one for each group of pads.
        ranges_m: lowest and highest shift of each group, within its curve.
        steps: limits between pads.
        costs, balancing: of the site.

    Raises:
        PlanError: the limits cannot all be kept; the message names the pair of pads.
    """
    from scipy.optimize import LinearConstraint, milp

    check_steps(curves, ranges_m, steps)
    curves = [_within(curve, *limits) for curve, limits in zip(curves, ranges_m, strict=True)]
    program = _Program(curves, costs, balancing)
    program.pieces()
    program.balance()
    program.steps(steps)
    found = milp(
        program.objective, integrality=program.integer, bounds=program.bounds(),
        constraints=LinearConstraint(program.matrix(), program.low, program.high),
        options={"mip_rel_gap": _GAP, "time_limit": _SECONDS},
    )  # fmt: skip
    if found.x is None:
        raise PlanError(f"balance.pad_moves: no plan keeps all limits ({found.message.strip()}); widen them")
    shifts = np.array([program.shift(g, found.x) for g in range(len(curves))])
    gap = float(found.mip_gap) if found.mip_gap is not None and np.isfinite(found.mip_gap) else 0.0
    return Grades(shifts, *cost_of(shifts, curves, costs, balancing), gap if gap > _GAP else 0.0)


def _within(curve: PadCurve, low_m: float, high_m: float) -> PadCurve:
    """A curve on a range, with its ends, and no shift, among the known shifts."""
    ends = [low_m, high_m, *([0.0] if low_m < 0 < high_m else [])]
    inner = curve.shifts_m[(curve.shifts_m > low_m) & (curve.shifts_m < high_m)]
    shifts = np.unique(np.r_[ends, inner])
    volumes = np.array([curve.at(shift) for shift in shifts])
    return PadCurve(curve.names, shifts, volumes[:, 0], volumes[:, 1])


class _Program:
    """The mixed-integer program: a weight for each known shift of each group, a yes or no for each piece of a curve.

    At most the two shifts at the ends of the chosen piece have weight, so that cut and fill are those of the curve.
    """

    def __init__(self, curves: Sequence[PadCurve], costs: Costs, balancing: Balancing) -> None:
        self.curves = curves
        self.balancing = balancing
        knots = [len(curve.shifts_m) for curve in curves]
        self.weight = np.cumsum([0, *knots])
        pieces = [max(count - 1, 1) for count in knots]
        self.piece = self.weight[-1] + np.cumsum([0, *pieces])
        self.bring, self.away = int(self.piece[-1]), int(self.piece[-1]) + 1
        self.size = self.away + 1
        self.integer = np.zeros(self.size)
        self.integer[self.weight[-1] : self.piece[-1]] = 1
        self.rows: list[np.ndarray] = []
        self.low: list[float] = []
        self.high: list[float] = []
        self.objective = self._objective(costs)

    def _objective(self, costs: Costs) -> np.ndarray:
        objective = np.zeros(self.size)
        scale = max(costs.on_site, costs.bring, costs.take_away, costs.dig, costs.fill, 1e-3)
        scale *= max(self.balancing.required_m3, 1.0)
        for g, curve in enumerate(self.curves):
            at = slice(self.weight[g], self.weight[g + 1])
            objective[at] = costs.dig * curve.cut_m3 + (costs.fill + costs.on_site) * curve.fill_m3
            objective[at] += _TIE * scale * np.abs(curve.shifts_m)
        # Where bringing is cheaper than hauling on the site, still no more is brought than is short.
        objective[self.bring] = max(costs.bring - costs.on_site, 1e-9 * scale / max(self.balancing.required_m3, 1.0))
        objective[self.away] = costs.take_away
        return objective

    def _add(self, row: np.ndarray, low: float, high: float) -> None:
        self.rows.append(row)
        self.low.append(low)
        self.high.append(high)

    def pieces(self) -> None:
        """Each group lies on one piece of its curve."""
        for g in range(len(self.curves)):
            first, last = int(self.weight[g]), int(self.weight[g + 1])
            start, stop = int(self.piece[g]), int(self.piece[g + 1])
            for at in (slice(first, last), slice(start, stop)):
                row = np.zeros(self.size)
                row[at] = 1.0
                self._add(row, 1.0, 1.0)
            for k in range(last - first):
                row = np.zeros(self.size)
                row[first + k] = 1.0
                row[start + max(k - 1, 0) : min(start + k + 1, stop)] = -1.0
                self._add(row, -np.inf, 0.0)

    def balance(self) -> None:
        """What is short of the target is brought, what is over it is taken away."""
        b = self.balancing
        row = np.zeros(self.size)
        for g, curve in enumerate(self.curves):
            row[self.weight[g] : self.weight[g + 1]] = b.factor * curve.cut_m3 - curve.fill_m3
        row[self.bring], row[self.away] = 1.0, -1.0
        level = b.target_m3 - b.surplus_m3 + b.factor * b.cut_m3 - b.fill_m3
        self._add(row, level, level)

    def steps(self, steps: Sequence[StepLimit]) -> None:
        """Limits between pads of different groups."""
        group = {name: g for g, curve in enumerate(self.curves) for name in curve.names}
        for step in steps:
            a, b = group[step.one], group[step.other]
            if a == b:
                continue
            row = np.zeros(self.size)
            row[self.weight[a] : self.weight[a + 1]] = self.curves[a].shifts_m
            row[self.weight[b] : self.weight[b + 1]] = -self.curves[b].shifts_m
            apart = step.elevation_one_m - step.elevation_other_m
            self._add(row, -step.greatest_m - apart, step.greatest_m - apart)

    def matrix(self) -> np.ndarray:
        return np.array(self.rows)

    def bounds(self) -> Any:
        from scipy.optimize import Bounds

        high = np.ones(self.size)
        high[self.bring :] = np.inf
        return Bounds(np.zeros(self.size), high)

    def shift(self, g: int, solution: np.ndarray) -> float:
        """Shift of a group in a solution [m]."""
        at = slice(self.weight[g], self.weight[g + 1])
        return float(solution[at] @ self.curves[g].shifts_m / solution[at].sum())


def check_steps(
    curves: Sequence[PadCurve], ranges_m: Sequence[tuple[float, float]], steps: Sequence[StepLimit]
) -> None:
    """Refuse limits that cannot be kept, naming the pairs of pads.

    A pair by itself is checked against the ranges of both; what only a chain of pairs forbids is found as shortest paths
    among differences (a negative cycle), and the pairs of the cycle are named.

    Raises:
        PlanError: as said.
    """
    range_of = {name: limits for curve, limits in zip(curves, ranges_m, strict=True) for name in curve.names}
    group = {name: g for g, curve in enumerate(curves) for name in curve.names}
    faults = []
    for step in steps:
        (low_a, high_a), (low_b, high_b) = range_of[step.one], range_of[step.other]
        apart = step.elevation_one_m - step.elevation_other_m
        if group[step.one] == group[step.other]:
            least = abs(apart)
        else:
            least = max(apart + low_a - high_b, -(apart + high_a - low_b), 0.0)
        if least > step.greatest_m + 1e-9:
            faults.append(
                f'"{step.one}" and "{step.other}" differ by at least {least:.3f} m whatever moves within its limits; '
                f"{step.greatest_m:g} m is allowed"
            )
    if not faults:
        cycle = _impossible_chain(len(curves), ranges_m, steps, group)
        if cycle:
            names = ", ".join(f'"{s.one}" to "{s.other}"' for s in cycle)
            faults.append(f"the steps {names} cannot all be kept within the limits of their pads")
    if faults:
        raise PlanError("balance.pad_moves: " + "\n  ".join(faults) + ". Widen a step or a range")


def _impossible_chain(
    count: int, ranges_m: Sequence[tuple[float, float]], steps: Sequence[StepLimit], group: dict[str, int]
) -> list[StepLimit]:
    """Steps of a negative cycle of difference constraints; node ``count`` stands for no shift (Bellman and Ford)."""
    arcs: list[tuple[int, int, float, StepLimit | None]] = []  # shift[to] − shift[from] ≤ weight
    for g, (low, high) in enumerate(ranges_m):
        arcs += [(count, g, high, None), (g, count, -low, None)]
    for step in steps:
        a, b = group[step.one], group[step.other]
        apart = step.elevation_one_m - step.elevation_other_m
        arcs += [(b, a, step.greatest_m - apart, step), (a, b, step.greatest_m + apart, step)]
    distance, through = np.zeros(count + 1), [-1] * (count + 1)
    last = -1
    for _ in range(count + 2):
        last = -1
        for k, (start, end, weight, _step) in enumerate(arcs):
            if distance[start] + weight < distance[end] - 1e-9:
                distance[end], through[end], last = distance[start] + weight, k, end
        if last < 0:
            return []
    for _ in range(count + 1):
        last = arcs[through[last]][0]
    cycle, node = [], last
    while True:
        arc = arcs[through[node]]
        if arc[3] is not None:
            cycle.append(arc[3])
        node = arc[0]
        if node == last:
            return list(dict.fromkeys(cycle))
