"""The calendar of a site's work and the weather over it, from the site file."""

from __future__ import annotations

import datetime
from dataclasses import dataclass

from earthwork.errors import PlanError, Warning
from earthwork.files.weather import read_weather
from earthwork.ground.grid import Grid
from earthwork.plan.bare_soil import BARE_SOIL_MAXIMUM, SurfaceSoil, surface_of_texture
from earthwork.plan.calendar import CalendarDay, WorkCalendar, slot_hours
from earthwork.plan.weather import DailyWeather, OpenGround, Place
from earthwork.site import Site

#: Evaporation below this is taken for a figure in another unit [mm/day].
_LEAST_MM_DAY = 0.5


@dataclass(frozen=True)
class WorkDays:
    """Which days are worked, and what open ground loses on each."""

    calendar: WorkCalendar
    weather: DailyWeather | None
    given_mm_day: float
    warnings: tuple[Warning, ...] = ()

    def open_ground(self, day: CalendarDay) -> OpenGround:
        """Evaporation of a day; after the end of the weather that of its driest week, and without weather as given."""
        if self.weather is not None:
            known = self.weather.open_ground(self.calendar, day)
            if known is not None:
                return known
        return OpenGround(tuple(self.mean_mm_day * length / day.hours for length in slot_hours(day.hours)))

    @property
    def mean_mm_day(self) -> float:
        """Evaporation of open ground on a day of which nothing is known [mm/day]."""
        return self.given_mm_day if self.weather is None else self.weather.driest_week_mm_day()

    @property
    def reference_mm_day(self) -> float:
        """Evaporation that dries spread soil [mm/day], as a reference evaporation: the mean of the weather, or as given."""
        if self.weather is None:
            return self.given_mm_day / BARE_SOIL_MAXIMUM
        return float(self.weather.daily_reference_mm().mean())

    def ends_before(self, days: int) -> Warning | None:
        """A warning when the weather does not last to the end of the work."""
        if self.weather is None or days == 0:
            return None
        last = self.calendar.day(days)
        if self.weather.open_ground(self.calendar, last) is not None:
            return None
        return Warning(
            "weather-ends",
            f"{self.weather.table.path.name} ends on {self.weather.last_day} and the work on {last.date}: days after it "
            f"take the driest week of the file, {self.mean_mm_day:.1f} mm a day from open ground",
        )


def work_days(site: Site, grid: Grid, elevation_m: float) -> WorkDays:
    """Calendar and weather of a site.

    Args:
        grid: of the site; its middle is where the weather is taken to be, unless the site file says.
        elevation_m: mean elevation of the fill, used likewise.

    Raises:
        FileError: the weather file; PlanError: no place for it.
    """
    model = site.model
    given = model.water.evaporation if model.water else None
    warnings: list[Warning] = []
    weather = _weather(site, grid, elevation_m) if model.weather else None
    start = model.calendar.start
    if start is None and weather is not None:
        start = weather.first_shift(_calendar(site, None, weather))
        warnings.append(
            Warning(
                "start-assumed", f"calendar.start is not given: work starts on {start}, the first day of the weather"
            )
        )
    if weather is not None and weather.table.hourly and model.calendar.time_zone is None:
        warnings.append(
            Warning(
                "time-zone-assumed",
                f"calendar.time_zone is not given: the clock of the work, and of hours of {weather.table.path.name} that "
                f"carry no offset, is {weather.table.clock} all year",
            )
        )
    if weather is None and given is None and model.water is not None:
        warnings.append(
            Warning("no-evaporation", "neither water.evaporation nor [weather] is given: no water is made up for it")
        )
    if given is not None and 0 < given < _LEAST_MM_DAY:
        show = site.units.from_si(given, "evaporation")
        warnings.append(
            Warning(
                "evaporation-low",
                f"water.evaporation is {show:g} {site.units.label('evaporation')}; wet open ground loses 1 to 12 mm "
                "(0.04 to 0.5 in) on a day of work. Check its unit",
            )
        )
    calendar = _calendar(site, start, weather)
    return WorkDays(calendar, weather, given or 0.0, tuple(warnings))


def _calendar(site: Site, start: datetime.date | None, weather: DailyWeather | None) -> WorkCalendar:
    given, rules = site.model.calendar, site.model.weather
    rain = frozenset(given.rain_days)
    if weather is not None and rules is not None and rules.rain_day is not None:
        rain |= weather.rain_days(rules.rain_day, rules.days_after_rain)
    return WorkCalendar(
        start=start,
        working_days=given.working_days,
        idle=frozenset(given.idle),
        rain=rain,
        shift_start=given.shift_start,
        time_zone=given.time_zone,
        local_time=weather.table.clock if weather is not None else datetime.UTC,
    )


def _weather(site: Site, grid: Grid, elevation_m: float) -> DailyWeather:
    given = site.model.weather
    assert given is not None
    latitude, longitude = given.latitude, given.longitude
    if latitude is None or longitude is None:
        here = _middle(grid)
        if here is None:
            raise PlanError(
                "weather: the surfaces have no CRS, so the place is not known; give weather.latitude and "
                "weather.longitude"
            )
        latitude = here[0] if latitude is None else latitude
        longitude = here[1] if longitude is None else longitude
    zone = site.model.calendar.time_zone
    table = read_weather(site.resolve(given.file), zone=zone, offset_hours=round(longitude / 15.0))
    elevation = elevation_m if given.elevation is None else given.elevation
    return DailyWeather(table, Place(latitude, longitude, elevation, given.wind_height), _surface(site))


def _middle(grid: Grid) -> tuple[float, float] | None:
    """Latitude and longitude of the middle of a grid [°]; None without a CRS."""
    if grid.crs is None:
        return None
    from pyproj import Transformer

    to_degrees = Transformer.from_crs(grid.crs, "EPSG:4326", always_xy=True)
    longitude, latitude = to_degrees.transform(*grid.point(grid.rows / 2, grid.columns / 2))
    return float(latitude), float(longitude)


def _surface(site: Site) -> SurfaceSoil | None:
    given = site.model.weather.surface if site.model.weather else None
    if given is None:
        return None
    if given.texture is not None:
        return surface_of_texture(given.texture)
    assert given.readily_evaporable is not None
    assert given.total_evaporable is not None
    return SurfaceSoil(given.readily_evaporable, given.total_evaporable)
