"""The order in which lifts are placed, and which day takes how much of which."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from earthwork.errors import PlanError
from earthwork.plan.calendar import CalendarDay, WorkCalendar

_MOST_DAYS = 5000


@dataclass(frozen=True)
class DayPieces:
    """What is placed on a day: (index of the lift, compacted volume [m³]); nothing on an idle day."""

    day: CalendarDay
    pieces: tuple[tuple[int, float], ...]

    @property
    def compacted_m3(self) -> float:
        return sum(volume for _, volume in self.pieces)


def placing_order(fills: Sequence[Sequence[float]], fills_at_once: int) -> list[tuple[int, int, float]]:
    """Lifts in the order they are placed, as (fill, lift, volume) pieces; work is shared equally by the open fills.

    Args:
        fills: volumes of the lifts of each fill, bottom up, in the order that fills are taken up.
        fills_at_once: how many are worked at one time, 1 or more.

    >>> placing_order([[10.0, 10.0], [5.0]], 2)
    [(0, 0, 5.0), (1, 0, 5.0), (0, 0, 5.0), (0, 1, 10.0)]
    """
    waiting = [k for k, lifts in enumerate(fills) if lifts]
    lift = [0] * len(fills)
    left = [lifts[0] if lifts else 0.0 for lifts in fills]
    order: list[tuple[int, int, float]] = []
    while waiting:
        open_fills = waiting[:fills_at_once]
        step = min(left[k] for k in open_fills)
        for k in open_fills:
            order.append((k, lift[k], step if left[k] > step else left[k]))
            left[k] -= step
        for k in open_fills:
            if left[k] <= 0:
                lift[k] += 1
                if lift[k] < len(fills[k]):
                    left[k] = fills[k][lift[k]]
                else:
                    waiting.remove(k)
    return order


def schedule(
    pieces: Sequence[tuple[int, float]], placing_m3_day: float, calendar: WorkCalendar, lead_days: int = 0
) -> tuple[DayPieces, ...]:
    """Fill the working days of a calendar with pieces of lifts at the placing rate, idle days between them included.

    Args:
        pieces: (index of the lift, compacted volume) in placing order.
        placing_m3_day: compacted volume of a working day, more than 0.
        lead_days: working days before the first that places anything, on which the cut is wetted.

    Raises:
        PlanError: more than 5,000 days, or 400 days in a row without work.
    """
    days: list[DayPieces] = []
    queue = [(index, volume) for index, volume in pieces if volume > 0]
    smallest = 1e-9 * placing_m3_day  # what rounding leaves is no further day
    at, idle = 0, 0
    for day in calendar.days():
        if at >= len(queue):
            break
        if day.kind != "work":
            idle += 1
            if idle > 400:
                raise PlanError("calendar: no day is worked within 400 days; check working_days, idle and rain_days")
            days.append(DayPieces(day, ()))
            continue
        idle = 0
        if lead_days > 0:
            lead_days -= 1
            days.append(DayPieces(day, ()))
            continue
        room = placing_m3_day
        today: dict[int, float] = {}
        while at < len(queue) and room > smallest:
            index, volume = queue[at]
            part = volume if volume <= room + smallest else room
            today[index] = today.get(index, 0.0) + part
            room -= part
            if volume - part <= smallest:
                at += 1
            else:
                queue[at] = (index, volume - part)
        days.append(DayPieces(day, tuple(today.items())))
        if len(days) > _MOST_DAYS:
            need = sum(volume for _, volume in pieces) / placing_m3_day
            raise PlanError(
                f"water.placing_rate: the fill is {need:,.0f} times what it places in a day; it must be placed within "
                f"{_MOST_DAYS:,} days, idle ones included. Check the rate and its unit"
            )
    return tuple(days)
