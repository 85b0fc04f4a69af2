"""The vertical shift of the grade that gives a wanted surplus, by a bracketed root on exact volumes.

The main pass over the ground tallies evenly spread trial shifts; at most three further passes refine around the root.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from itertools import pairwise

import numpy as np

from earthwork.ground.stack import Arrays
from earthwork.quantities.fields import Sums
from earthwork.quantities.tile import Tile

#: Trial shifts of the main pass, ends of the range included; zero is tallied besides.
TRIALS = 13
#: Further passes at most.
REFINEMENTS = 3

Evaluate = Callable[[Sequence[float]], dict[float, float]]


class ShiftTally:
    """Sums over the site for a list of trial shifts of the grade [m]; their greatest depths are not kept."""

    def __init__(self, stack, shifts: Sequence[float]) -> None:
        self.stack = stack
        self.shifts = tuple(shifts)
        self.sums = {shift: Sums.none(stack) for shift in self.shifts}

    def empty(self) -> ShiftTally:
        return ShiftTally(self.stack, self.shifts)

    def add(self, tile: Tile) -> None:
        weight = tile.weight
        if weight is not None and not weight.any():
            return
        moving = tile.arrays["move"] > 0
        if not moving.any():
            for sums in self.sums.values():
                sums.add(tile, weight)
            return
        # Only cells that move, and their neighbours, change with the shift.
        part, share = _part(tile, moving)
        still = Sums.none(self.stack)
        still.add(tile, weight)
        before = Sums.none(self.stack)
        before.add(part, share)
        rest = still.values - before.values
        room: Arrays = {}
        for shift, sums in self.sums.items():
            moved = part.shifted(shift, room)
            sums.values += rest
            sums.add(moved, share, fixed=before)

    def merge(self, other: ShiftTally) -> None:
        for shift, sums in other.sums.items():
            self.sums[shift].merge(sums)


def _part(tile: Tile, moving: np.ndarray) -> tuple[Tile, np.ndarray | None]:
    """The part of a tile that holds its moving cells and their neighbours, and its weight."""
    rows, columns = np.flatnonzero(moving.any(axis=1)), np.flatnonzero(moving.any(axis=0))
    top, bottom = max(rows[0] - 1, 1), min(rows[-1] + 2, moving.shape[0] - 1)
    left, right = max(columns[0] - 1, 1), min(columns[-1] + 2, moving.shape[1] - 1)
    weight = tile.weight
    if (bottom - top, right - left) == (tile.window.height, tile.window.width):
        return tile, weight
    part = tile.part(top - 1, left - 1, bottom - top, right - left)
    return part, None if weight is None else np.ascontiguousarray(weight[top - 1 : bottom - 1, left - 1 : right - 1])


@dataclass(frozen=True)
class Root:
    """Where the surplus meets the target, exactly and at a step that can be staked; None where no shift in range does."""

    exact_m: float | None
    rounded_m: float | None
    nearest_m: float  #: the shift that comes nearest


def trial_shifts(low_m: float, high_m: float) -> list[float]:
    """Shifts of the main pass: even over the range, and zero, which may lie outside of it."""
    return sorted({0.0, *(float(s) for s in np.linspace(low_m, high_m, TRIALS))})


def find_shift(curve: dict[float, float], target: float, step_m: float, evaluate: Evaluate) -> Root:
    """Refine a curve of surplus against shift until the shift of the target surplus is known.

    Args:
        curve: surplus [m³] at the trial shifts [m], the ends of the range among them; what is evaluated is added to it.
        target: surplus wanted [m³].
        step_m: the shift is rounded to this [m].
        evaluate: gives the surplus at further shifts, in one pass over the ground.
    """
    low, high = min(curve), max(curve)
    for pass_number in range(REFINEMENTS):
        bracket = _bracket(curve, target)
        if bracket is None:
            return Root(None, None, min(curve, key=lambda s: (abs(curve[s] - target), abs(s))))
        guess = _guess(curve, bracket, target)
        rounded = _round(guess, step_m, low, high)
        spread = (bracket[1] - bracket[0]) * (0.02, 0.01, 0.0)[pass_number]
        wanted = {s for s in (guess, rounded, guess - spread, guess + spread) if low <= s <= high} - set(curve)
        if wanted:
            curve.update(evaluate(sorted(wanted)))
        if abs(curve[guess] - target) <= 1e-6 * max(abs(v) for v in curve.values()) and pass_number:
            break
    exact = min(curve, key=lambda s: abs(curve[s] - target))
    rounded = _round(exact, step_m, low, high)
    if rounded not in curve:
        curve.update(evaluate([rounded]))
    return Root(exact, rounded, exact)


def _bracket(curve: dict[float, float], target: float) -> tuple[float, float] | None:
    """The neighbouring shifts between which the surplus crosses the target, nearest to zero shift."""
    shifts = sorted(curve)
    pairs = [(a, b) for a, b in pairwise(shifts) if (curve[a] - target) * (curve[b] - target) <= 0]
    return min(pairs, key=lambda p: min(abs(p[0]), abs(p[1])), default=None)


def _guess(curve: dict[float, float], bracket: tuple[float, float], target: float) -> float:
    """Root of the monotone curve through the known points; the curve is smooth, so cubic beats the chord."""
    from scipy.interpolate import PchipInterpolator
    from scipy.optimize import brentq

    low, high = bracket
    if curve[low] == target:
        return low
    if curve[high] == target:
        return high
    shifts = sorted(curve)
    if len(shifts) < 3:
        return low + (high - low) * (target - curve[low]) / (curve[high] - curve[low])
    through = PchipInterpolator(shifts, [curve[s] - target for s in shifts])
    return float(brentq(through, low, high, xtol=1e-12))


def _round(shift: float, step_m: float, low: float, high: float) -> float:
    """The nearest whole step that lies in the range; the shift itself where none does.

    >>> _round(0.47, 0.2, -1.5, 0.5), _round(0.47, 0.2, -1.5, 0.45), _round(0.47, 3.0, 0.4, 0.5)
    (0.4, 0.4, 0.47)
    """
    slack = 1e-9 * step_m
    steps = min(max(round(shift / step_m), math.ceil((low - slack) / step_m)), math.floor((high + slack) / step_m))
    rounded = steps * step_m
    return rounded if low - slack <= rounded <= high + slack else shift
