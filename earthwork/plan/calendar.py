"""The calendar of the work: which days are worked, how long they are, and what the clock says.

A day runs from the start of one shift to the start of the next, so that a shift across midnight is one day,
and a change of clocks makes a day of 23 or 25 hours. Hours are elapsed hours from the start of the shift.
"""

from __future__ import annotations

import datetime
import zoneinfo
from collections.abc import Iterator
from dataclasses import dataclass
from functools import cached_property
from typing import Literal

Kind = Literal["work", "idle", "rain"]
_WEEKDAYS = ("mon", "tue", "wed", "thu", "fri", "sat", "sun")


@dataclass(frozen=True)
class CalendarDay:
    """A day of the job: its number from 1, its date where known, and how many hours until the next shift."""

    day: int
    date: datetime.date | None
    kind: Kind
    hours: float = 24.0


@dataclass(frozen=True, kw_only=True)
class WorkCalendar:
    """Days from a start date on (or without dates), less those that are idle or lost to rain."""

    start: datetime.date | None = None
    working_days: tuple[str, ...] = _WEEKDAYS
    idle: frozenset[datetime.date | int] = frozenset()
    rain: frozenset[datetime.date | int] = frozenset()
    shift_start: datetime.time = datetime.time(7)
    time_zone: str | None = None
    local_time: datetime.tzinfo = datetime.UTC  #: of the clock without a time zone, where hours of weather have one

    @cached_property
    def _zone(self) -> datetime.tzinfo:
        return zoneinfo.ZoneInfo(self.time_zone) if self.time_zone else self.local_time

    def day(self, number: int) -> CalendarDay:
        """The day of a number, from 1.

        >>> WorkCalendar(start=datetime.date(2027, 3, 13), time_zone="America/Denver").day(1).hours
        23.0
        """
        date = None if self.start is None else self.start + datetime.timedelta(days=number - 1)
        hours = 24.0
        if date is not None:
            following = date + datetime.timedelta(days=1)
            hours = (self.shift_begins(following) - self.shift_begins(date)).total_seconds() / 3600.0
        return CalendarDay(number, date, self._kind(number, date), hours)

    def _kind(self, number: int, date: datetime.date | None) -> Kind:
        if number in self.rain or date in self.rain:
            return "rain"
        if number in self.idle or date in self.idle:
            return "idle"
        if date is not None and _WEEKDAYS[date.weekday()] not in self.working_days:
            return "idle"
        return "work"

    def days(self) -> Iterator[CalendarDay]:
        """All days from the first, without end."""
        number = 1
        while True:
            yield self.day(number)
            number += 1

    def shift_begins(self, date: datetime.date) -> datetime.datetime:
        """Start of the shift of a date, in UTC."""
        local = datetime.datetime.combine(date, self.shift_start, self._zone)
        return local.astimezone(datetime.UTC)

    def clock(self, day: CalendarDay, elapsed_h: float) -> datetime.datetime | datetime.time:
        """What the clock says ``elapsed_h`` hours after a shift began; no date where none is known.

        >>> night = WorkCalendar(start=datetime.date(2027, 6, 1), shift_start=datetime.time(20))
        >>> str(night.clock(night.day(1), 5.5))
        '2027-06-02 01:30:00+00:00'
        """
        step = datetime.timedelta(hours=elapsed_h)
        if day.date is None:
            any_day = datetime.datetime.combine(datetime.date(2001, 1, 1), self.shift_start)
            return (any_day + step).time()
        return (self.shift_begins(day.date) + step).astimezone(self._zone)

    def open_share(self, day: CalendarDay, *, start: datetime.time | None, hours: float) -> list[float]:
        """Hours that a supply is open in each elapsed hour of a day.

        Args:
            start: clock time at which it opens each day; None opens it with the shift.
            hours: open hours a day, more than 0 and at most 24; 24 is always open.

        >>> sum(WorkCalendar().open_share(CalendarDay(1, None, "work"), start=datetime.time(4), hours=6))
        6.0
        """
        slots = slot_hours(day.hours)
        if hours >= 24:
            return slots
        windows = [(0.0, hours)]
        if start is not None:
            windows = [(opens, opens + hours) for opens in self._openings(day, start)]
        return [
            # windows overlap on a day of 23 hours that opens for longer: a supply is never open twice
            min(length, sum(max(0.0, min(end, i + length) - max(first, i)) for first, end in windows))
            for i, length in enumerate(slots)
        ]

    def _openings(self, day: CalendarDay, clock: datetime.time) -> list[float]:
        """Elapsed hours from the start of a shift to each time around it that the clock says ``clock``."""
        date = day.date or datetime.date(2001, 1, 1)
        begins = self.shift_begins(date)
        openings = []
        for shift in (-1, 0, 1):
            at = datetime.datetime.combine(date + datetime.timedelta(days=shift), clock, self._zone)
            openings.append((at.astimezone(datetime.UTC) - begins).total_seconds() / 3600.0)
        return openings


def slot_hours(hours: float) -> list[float]:
    """Lengths of the elapsed hours of a day: ones, and what is left over.

    >>> slot_hours(2.5)
    [1.0, 1.0, 0.5]
    """
    whole = int(hours)
    return [1.0] * whole + ([hours - whole] if hours > whole else [])


def work_share(hours: float, work_hours: float) -> list[float]:
    """Hours worked in each elapsed hour of a day, from the start of the shift.

    >>> work_share(4, 2.5)
    [1.0, 1.0, 0.5, 0.0]
    """
    return [
        max(0.0, min(work_hours, i + length) - i) if i < work_hours else 0.0
        for i, length in enumerate(slot_hours(hours))
    ]
