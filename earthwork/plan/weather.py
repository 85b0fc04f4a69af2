"""From weather to what a planner asks of a day: how much open ground loses, hour by hour, and whether it rains."""

from __future__ import annotations

import datetime
from dataclasses import dataclass
from functools import cached_property

import numpy as np

from earthwork.errors import PlanError
from earthwork.files.weather import WeatherTable
from earthwork.plan import evaporation as ev
from earthwork.plan.bare_soil import BARE_SOIL_MAXIMUM, SurfaceSoil, evaporation_series, lost_from_wet
from earthwork.plan.calendar import CalendarDay, WorkCalendar, slot_hours

_WEEK = 7


@dataclass(frozen=True)
class Place:
    """Where the weather is: degrees, + north and + east; elevation [m]; height of the wind gauge [m]."""

    latitude: float
    longitude: float
    elevation_m: float
    wind_height_m: float = 2.0


@dataclass(frozen=True)
class OpenGround:
    """Evaporation from ground that is wet when the shift begins [mm in each elapsed hour of a day]."""

    hours_mm: tuple[float, ...]

    @property
    def day_mm(self) -> float:
        return sum(self.hours_mm)


@dataclass(frozen=True)
class DailyWeather:
    """Evaporation of each day of the weather, and its rain.

    Open ground starts each shift wet, since the lift is placed at its target and the haul road sprayed; it loses at
    the full rate of bare soil until its surface is dry, if ``surface`` says when that is.
    """

    table: WeatherTable
    place: Place
    surface: SurfaceSoil | None = None

    @cached_property
    def reference_mm(self) -> np.ndarray:
        """Reference evaporation of each row of the weather [mm]."""
        table, place = self.table, self.place
        wind = ev.wind_at_2m(table.wind_m_s, place.wind_height_m)
        if table.hourly:
            return self._hours(wind)
        if isinstance(table.humidity, tuple):
            vapour = ev.vapour_from_extremes(table.highest_c, table.lowest_c, *table.humidity)
        else:
            vapour = ev.vapour_from_humidity(table.highest_c, table.lowest_c, table.humidity)
        depth = ev.reference_evaporation_day(
            maximum_c=table.highest_c,
            minimum_c=table.lowest_c,
            vapour_kpa=vapour,
            wind_2m=wind,
            solar_mj_m2=table.solar_mj_m2,
            latitude_deg=place.latitude,
            elevation_m=place.elevation_m,
            day_of_year=np.array([t.timetuple().tm_yday for t in table.times]),
        )
        return np.maximum(depth, 0.0)

    def _hours(self, wind: np.ndarray) -> np.ndarray:
        table, place = self.table, self.place
        temperature = 0.5 * (table.highest_c + table.lowest_c)
        middles = [t + datetime.timedelta(minutes=30) for t in table.times]
        assert isinstance(table.humidity, np.ndarray)
        return ev.reference_evaporation_hours(
            temperature_c=temperature,
            vapour_kpa=ev.saturation_kpa(temperature) * table.humidity / 100.0,
            wind_2m=wind,
            solar_mj_m2=table.solar_mj_m2,
            day_of_year=np.array([m.timetuple().tm_yday for m in middles]),
            utc_middle_hour=np.array([m.timetuple().tm_hour + m.timetuple().tm_min / 60.0 for m in middles]),
            latitude_deg=place.latitude,
            longitude_deg=place.longitude,
            elevation_m=place.elevation_m,
        )

    @property
    def first_day(self) -> datetime.date:
        return self._date(self.table.times[0])

    @property
    def last_day(self) -> datetime.date:
        return self._date(self.table.times[-1])

    def _date(self, time: datetime.date) -> datetime.date:
        return time.astimezone(self.table.clock).date() if isinstance(time, datetime.datetime) else time

    def first_shift(self, calendar: WorkCalendar) -> datetime.date:
        """The first date whose shift begins with weather."""
        first, date = self.table.times[0], self.first_day
        late = isinstance(first, datetime.datetime) and calendar.shift_begins(date) < first
        return date + datetime.timedelta(days=1) if late else date

    def open_ground(self, calendar: WorkCalendar, day: CalendarDay) -> OpenGround | None:
        """Evaporation of a day of the calendar; None after the end of the weather.

        Raises:
            PlanError: a day without a date, or before the weather begins.
        """
        if day.date is None:
            raise PlanError("weather: the days of the work have no dates; give calendar.start")
        slots = slot_hours(day.hours)
        if not self.table.hourly:
            i = (day.date - self.first_day).days
            self._not_before(day, i < 0)
            if i >= len(self.table.times):
                return None
            rate = BARE_SOIL_MAXIMUM * float(self.reference_mm[i])
            lost = rate if self.surface is None else lost_from_wet(self.surface, rate, 1.0)
            return OpenGround(tuple(lost * length / day.hours for length in slots))
        begins = calendar.shift_begins(day.date)
        first = self.table.times[0]
        assert isinstance(first, datetime.datetime)
        start = (begins - first).total_seconds() / 3600.0
        self._not_before(day, start < 0)
        if start + day.hours > len(self.table.times):
            return None
        edges = start + np.concatenate([[0.0], np.cumsum(slots)])
        whole = np.concatenate([[0.0], np.cumsum(self.reference_mm)])
        reference = np.diff(np.interp(edges, np.arange(len(whole)), whole)).tolist()
        if self.surface is None:
            return OpenGround(tuple(BARE_SOIL_MAXIMUM * r for r in reference))
        return OpenGround(tuple(evaporation_series(reference, [0.0] * len(reference), self.surface)))

    def _not_before(self, day: CalendarDay, before: bool) -> None:
        if before:
            first = self.table.times[0]
            at = f" at {first.astimezone(self.table.clock):%H:%M}" if isinstance(first, datetime.datetime) else ""
            raise PlanError(
                f"{self.table.path}: the weather starts on {self.first_day}{at}, the work on {day.date}; "
                "give weather from the first day on, or a later calendar.start"
            )

    def driest_week_mm_day(self) -> float:
        """Greatest mean evaporation of open ground over a week, or over all of a shorter record [mm/day]."""
        days = self.daily_reference_mm()
        window = min(_WEEK, len(days))
        means = np.convolve(days, np.full(window, 1.0 / window), "valid")
        return BARE_SOIL_MAXIMUM * float(means.max())

    def daily_reference_mm(self) -> np.ndarray:
        """Reference evaporation by day; of hours, in runs of 24 from the first."""
        values = self.reference_mm
        if not self.table.hourly:
            return values
        whole = len(values) // 24 * 24
        return values[:whole].reshape(-1, 24).sum(axis=1) if whole else np.array([values.sum()])

    def rain_days(self, least_mm: float, days_after: int) -> frozenset[datetime.date]:
        """Dates with at least so much rain, and so many days after each."""
        rain: dict[datetime.date, float] = {}
        for time, depth in zip(self.table.times, self.table.rain_mm, strict=True):
            date = self._date(time)
            rain[date] = rain.get(date, 0.0) + float(depth)
        wet = [date for date, depth in rain.items() if depth >= least_mm]
        return frozenset(date + datetime.timedelta(days=k) for date in wet for k in range(days_after + 1))
