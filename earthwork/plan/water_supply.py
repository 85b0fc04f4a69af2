"""Water hour by hour: supply, tank and demand; the tank that bridges the gaps (sequent peak).

Hours run from the start of the first shift without a break. All volumes in litres.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass


@dataclass(frozen=True)
class TankRun:
    """What a tank did in each hour [L]: its end level, what it drew, what it could not give."""

    level: tuple[float, ...]
    drawn: tuple[float, ...]
    shortfall: tuple[float, ...]


def run_tank(supply: Sequence[float], demand: Sequence[float], *, volume: float, at_start: float) -> TankRun:
    """Run a tank through consecutive hours; without storage the supply of an hour serves that hour alone.

    ``level = min(volume, level + supply − demand)``, and what falls under zero is the shortfall. A full tank
    takes no more than it can hold, so that ``level at start + Σ drawn = Σ demand − Σ shortfall + level at
    end`` to the litre.

    Args:
        supply, demand: of each hour, 0 or more, the same length.
        volume: of the tank, 0 for none.
        at_start: 0 to ``volume``.

    >>> run_tank([10, 10], [25, 0], volume=20, at_start=10)
    TankRun(level=(0.0, 10.0), drawn=(10.0, 10.0), shortfall=(5.0, 0.0))
    """
    level = float(at_start)
    levels, drawn, shortfall = [], [], []
    for gives, wants in zip(supply, demand, strict=True):
        takes = min(float(gives), volume - level + wants)
        after = level + takes - wants
        shortfall.append(max(-after, 0.0))
        level = max(after, 0.0)
        levels.append(level)
        drawn.append(takes)
    return TankRun(tuple(levels), tuple(drawn), tuple(shortfall))


def sequent_peak(supply: Sequence[float], demand: Sequence[float]) -> float | None:
    """Smallest tank, full at the start, that never runs dry; None when supply over the job is below demand.

    ``K = max(0, K + demand − supply)``, and the greatest K is the tank ([thomas-fiering], sequent peak), hour
    by hour.

    >>> sequent_peak([10, 10, 10, 10], [0, 25, 5, 10])
    15.0
    >>> sequent_peak([10, 10], [0, 25]) is None
    True
    """
    total_supply, total_demand = sum(supply), sum(demand)
    if total_supply < total_demand * (1.0 - 1e-12):
        return None
    deficit = peak = 0.0
    for gives, wants in zip(supply, demand, strict=True):
        deficit = max(0.0, deficit + wants - gives)
        peak = max(peak, deficit)
    return peak


def most_without_shortfall(
    supply: Sequence[float],
    fixed: Sequence[float],
    per_unit: Sequence[float],
    *,
    volume: float,
    at_start: float,
) -> float | None:
    """Largest amount that a day's water allows: the greatest x without shortfall at ``fixed + x·per_unit``.

    The tank has no shortfall while, from the start of the day or from any hour that filled it, demand since
    then is at most what it held and drew since then; each such stretch bounds x, so the answer is exact.

    Args:
        supply, fixed, per_unit: of each hour of the day [L], [L], [L per unit].

    Returns:
        0 or more; None when no amount of water is needed (``per_unit`` all 0).

    >>> most_without_shortfall([10, 10], [0, 5], [1, 1], volume=0, at_start=0)
    5.0
    >>> most_without_shortfall([10, 10], [0, 5], [1, 1], volume=50, at_start=20)
    17.5
    """
    if not any(per_unit):
        return None
    best = float("inf")
    n = len(supply)
    # a stretch starts with the tank as it is in the morning, or full at the end of hour `first` - 1
    for first, held in [(0, float(at_start)), *((i, float(volume)) for i in range(1, n))]:
        gives, wants, units = held, 0.0, 0.0
        for i in range(first, n):
            gives += supply[i]
            wants += fixed[i]
            units += per_unit[i]
            if units > 0:
                best = min(best, (gives - wants) / units)
            elif gives < wants:
                return 0.0
    return max(best, 0.0)
