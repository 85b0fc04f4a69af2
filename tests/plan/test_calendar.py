"""Working days, shifts across midnight, and changes of clocks."""

import datetime

import pytest

from earthwork.plan.calendar import CalendarDay, WorkCalendar, slot_hours, work_share

D = datetime.date


def test_weekends_holidays_and_rain():
    calendar = WorkCalendar(
        start=D(2027, 5, 28), working_days=("mon", "tue", "wed", "thu", "fri"),
        idle=frozenset({D(2027, 5, 31)}), rain=frozenset({D(2027, 6, 2), 6}),
    )  # fmt: skip
    kinds = [calendar.day(n).kind for n in range(1, 9)]
    # Friday; Saturday; Sunday; a holiday Monday; Tuesday; rain on Wednesday; Thursday; Friday
    assert kinds == ["work", "idle", "idle", "idle", "work", "rain", "work", "work"]


def test_without_dates_every_day_is_worked_but_those_numbered():
    calendar = WorkCalendar(idle=frozenset({2}), rain=frozenset({3}))
    assert [calendar.day(n).kind for n in (1, 2, 3, 4)] == ["work", "idle", "rain", "work"]
    assert calendar.day(4).date is None
    assert calendar.clock(calendar.day(1), 2.5) == datetime.time(9, 30)


@pytest.mark.parametrize(
    ("zone", "date", "hours"),
    [
        ("America/Denver", D(2027, 3, 13), 23.0),  # clocks go forward on 14 March 2027 at 02:00
        ("America/Denver", D(2027, 11, 6), 25.0),  # and back on 7 November
        ("Europe/Prague", D(2027, 3, 27), 23.0),
        ("Europe/Prague", D(2027, 6, 1), 24.0),
        ("Australia/Lord_Howe", D(2027, 4, 3), 24.5),  # half an hour
        (None, D(2027, 3, 13), 24.0),
    ],
)
def test_a_day_from_shift_to_shift_is_as_long_as_the_clocks_make_it(zone, date, hours):
    assert WorkCalendar(start=date, time_zone=zone).day(1).hours == hours


def test_a_night_shift_across_a_change_of_clocks_works_its_hours():
    calendar = WorkCalendar(start=D(2027, 3, 13), time_zone="America/Denver", shift_start=datetime.time(20))
    day = calendar.day(1)
    assert day.hours == 23.0
    assert str(calendar.clock(day, 5.0)) == "2027-03-14 01:00:00-07:00"
    assert str(calendar.clock(day, 6.0)) == "2027-03-14 03:00:00-06:00"  # two o'clock does not exist
    assert sum(work_share(day.hours, 10.0)) == 10.0


def test_slots_and_work_hours():
    assert slot_hours(24.5) == [1.0] * 24 + [0.5]
    assert work_share(24.0, 9.25)[8:11] == [1.0, 0.25, 0.0]


def test_supply_hours():
    calendar = WorkCalendar()
    day = CalendarDay(1, None, "work")
    assert calendar.open_share(day, start=None, hours=24) == [1.0] * 24
    assert calendar.open_share(day, start=None, hours=8) == [1.0] * 8 + [0.0] * 16
    early = calendar.open_share(day, start=datetime.time(4, 30), hours=6)  # 04:30 to 10:30, shift at 07:00
    assert early[:4] == [1.0, 1.0, 1.0, 0.5]
    assert early[21:] == [0.5, 1.0, 1.0]
    assert sum(early) == 6.0


def test_supply_hours_follow_the_clock_when_it_changes():
    calendar = WorkCalendar(start=D(2027, 3, 13), time_zone="America/Denver")
    day = calendar.day(1)
    assert day.hours == 23.0
    shares = calendar.open_share(day, start=datetime.time(6), hours=4)
    assert sum(shares) == pytest.approx(4.0)
    assert shares[:3] == [1.0, 1.0, 1.0]  # 07:00 to 10:00 of the window that opened at 06:00
    assert shares[22:] == [1.0]  # 06:00 to 07:00 next morning


def test_a_supply_is_never_open_twice_where_its_hours_are_more_than_the_day_has():
    # 23.5 hours from 04:00 on end at 04:30 where the clock has gone forward, half an hour into the next opening
    calendar = WorkCalendar(start=D(2027, 3, 13), time_zone="America/Denver", shift_start=datetime.time(20))
    shares = calendar.open_share(calendar.day(1), start=datetime.time(4), hours=23.5)
    assert shares == [1.0] * 23
