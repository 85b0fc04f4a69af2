"""The order of the work: what may serve what when ground is opened phase by phase.

A phase is dug and filled before the next. So a cut serves the fill of its own phase at once, that of a later phase by
way of a stockpile, and that of an earlier phase never: it is not open yet.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

Array = np.ndarray

#: Phase of what is there at any time: pits, tips and stockpiles.
ALWAYS = -1


def phase_numbers(phases: list[int | None]) -> Array:
    """Phases as numbers, :data:`ALWAYS` for None."""
    return np.array([ALWAYS if p is None else p for p in phases], np.int64)


def waits(dug: Array, filled: Array) -> Array:
    """Where earth waits on a stockpile, because its fill is built in a later phase; arrays that broadcast.

    >>> waits(np.array([0, 1])[:, None], np.array([0, 1])).tolist()
    [[False, True], [False, False]]
    """
    return (dug != ALWAYS) & (filled != ALWAYS) & (dug < filled)


def hauled_in(dug: Array, filled: Array) -> Array:
    """Phase in which earth is hauled at last: that of the fill, of the cut where it leaves, else the first.

    >>> hauled_in(np.array([1, 1, ALWAYS]), np.array([2, ALWAYS, ALWAYS])).tolist()
    [2, 1, 0]
    """
    return np.maximum(np.where(filled != ALWAYS, filled, dug), 0)


@dataclass(frozen=True)
class Rounds:
    """Ways over a stockpile: the cheapest one of each pair (n, m), and its cost for a unit, haul and rehandling."""

    pile: Array
    cost: Array


def over_stockpiles(
    to_pile: Array, from_pile: Array, rehandling: Array, *, price: Array | None = None, fixed: Array | None = None
) -> Rounds:
    """The cheapest stockpile of each pair.

    Args:
        to_pile: (n, k) cost from each source to each pile.
        from_pile: (k, m) units of haul from each pile to each sink.
        rehandling: (n, k) cost of loading a unit of the source's material again.
        price, fixed: (n,) cost of a unit of haul, default 1, and units that each haul takes besides, default 0.

    >>> rounds = over_stockpiles(np.array([[1.0, 5.0]]), np.array([[7.0], [2.0]]), np.array([[0.5, 0.5]]))
    >>> int(rounds.pile[0, 0]), float(rounds.cost[0, 0])
    (1, 7.5)
    """
    n, m = len(to_pile), from_pile.shape[1]
    price = np.ones(n) if price is None else price
    fixed = np.zeros(n) if fixed is None else fixed
    best, pile = np.full((n, m), np.inf), np.zeros((n, m), np.int64)
    for k in range(to_pile.shape[1]):
        second = (from_pile[k][None, :] + fixed[:, None]) * price[:, None]
        cost = (to_pile[:, k] + rehandling[:, k])[:, None] + second
        better = cost < best
        best[better], pile[better] = cost[better], k
    return Rounds(pile, best)


def stored(pile: Array, dug: Array, filled: Array, loose_m3: Array, piles: int, phases: int) -> Array:
    """Loose volume on each stockpile at the end of each phase, (piles, phases).

    Args:
        pile, dug, filled, loose_m3: of each move over a stockpile.

    >>> stored(np.array([0, 0]), np.array([0, 1]), np.array([2, 2]), np.array([5.0, 3.0]), 1, 3).tolist()
    [[5.0, 8.0, 0.0]]
    """
    held = np.zeros((piles, phases))
    for k, start, stop, volume in zip(pile, dug, filled, loose_m3, strict=True):
        held[k, start:stop] += volume
    return held
