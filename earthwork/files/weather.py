"""Reads weather by day or by hour; a gap, a repeat or an impossible figure is named, never bridged."""

from __future__ import annotations

import datetime
import zoneinfo
from collections.abc import Callable
from dataclasses import dataclass
from itertools import pairwise
from pathlib import Path

import numpy as np

from earthwork.errors import FileError
from earthwork.files.table_reader import MOST_FAULTS, Row, SourceTable, read_source_table

_HOUR = datetime.timedelta(hours=1)
_FAR_FROM_SUN = 3 * _HOUR  #: no legal time is further from the sun's


@dataclass(frozen=True)
class WeatherTable:
    """Weather of consecutive days or hours, SI; arrays of shape (n,).

    ``times`` are days (as dates) or the starts of hours (in UTC). Humidity is the mean [%], or the highest and lowest
    of the day. Radiation is that of the day or the hour [MJ/m²], rain likewise [mm]. ``clock`` is the local time of hours.
    """

    path: Path
    hourly: bool
    times: tuple[datetime.date, ...] | tuple[datetime.datetime, ...]
    highest_c: np.ndarray
    lowest_c: np.ndarray
    humidity: np.ndarray | tuple[np.ndarray, np.ndarray]
    wind_m_s: np.ndarray
    solar_mj_m2: np.ndarray
    rain_mm: np.ndarray
    clock: datetime.tzinfo = datetime.UTC


@dataclass(frozen=True)
class _Column:
    """A quantity: its columns with the factor and offset to SI, and what can be believed."""

    names: dict[str, tuple[float, float]]
    low: float
    high: float
    unit: str
    hint: str = ""


def _temperature(name: str) -> dict[str, tuple[float, float]]:
    return {f"{name}_c": (1.0, 0.0), f"{name}_f": (5 / 9, -160 / 9)}


def _columns(hourly: bool) -> dict[str, _Column]:
    seconds = 3600 if hourly else 86400
    sun = _Column(
        {"solar_radiation_mj_m2": (1.0, 0.0), "solar_radiation_w_m2": (seconds / 1e6, 0.0)},
        0.0, 5.0 if hourly else 45.0, "MJ/m²", "; is it W/m²? Then name the column solar_radiation_w_m2",
    )  # fmt: skip
    fraction = "; it must be percent, 0 to 100"
    return {
        "temperature": _Column(_temperature("temperature"), -60.0, 60.0, "°C"),
        "highest": _Column(_temperature("temperature_max"), -60.0, 60.0, "°C"),
        "lowest": _Column(_temperature("temperature_min"), -60.0, 60.0, "°C"),
        "humidity": _Column({"relative_humidity_percent": (1.0, 0.0)}, 0.0, 100.0, "%", fraction),
        "humidity_max": _Column({"relative_humidity_max_percent": (1.0, 0.0)}, 0.0, 100.0, "%", fraction),
        "humidity_min": _Column({"relative_humidity_min_percent": (1.0, 0.0)}, 0.0, 100.0, "%", fraction),
        "wind": _Column(
            {"wind_speed_m_s": (1.0, 0.0), "wind_speed_km_h": (1 / 3.6, 0.0), "wind_speed_mph": (0.44704, 0.0)},
            0.0, 60.0, "m/s",
        ),
        "solar": sun,
        "rain": _Column({"rain_mm": (1.0, 0.0), "rain_in": (25.4, 0.0)}, 0.0, 1000.0, "mm"),
    }  # fmt: skip


def read_weather(path: Path, *, zone: str | None = None, offset_hours: float = 0.0) -> WeatherTable:
    """Weather of a CSV by day (column ``date``) or by hour (column ``time``, the start of the hour).

    Args:
        path: columns as in docs/method-water.md.
        zone: IANA zone of clock times that carry no offset of their own; the clock may change.
        offset_hours: hours from UTC where no zone is given, by the sun: of clock times without an offset, and of the place
            where the file's own offset is no local time there (such as a file in UTC).

    Raises:
        FileError: every fault with row and column; gaps and repeats with their times.
    """
    table = read_source_table(path)
    if ("date" in table.columns) == ("time" in table.columns):
        raise FileError(f"{path}: it must have a column date (weather by day) or time (by hour), one of the two")
    hourly = "time" in table.columns
    reader = _Reader(table, _columns(hourly))
    values = {name: reader.take(name) for name in reader.columns}
    clock: list[datetime.datetime | datetime.date | None]
    clock = [reader.when(row, "time" if hourly else "date", _time if hourly else _date) for row in table.rows]
    reader.needs(values, hourly)
    reader.finish()
    local = _local(clock, zone, offset_hours) if hourly else datetime.UTC
    times = _consecutive_hours(path, clock, local) if hourly else _consecutive_days(path, clock)
    there = {name: value for name, value in values.items() if value is not None}
    mean = there.get("temperature")
    highest, lowest = there.get("highest", mean), there.get("lowest", mean)
    assert highest is not None
    assert lowest is not None
    if (lowest > highest).any():
        row = table.rows[int(np.argmax(lowest > highest))]
        raise FileError(f"{path}: row {row.number}: temperature_min is above temperature_max")
    return WeatherTable(
        path=path,
        hourly=hourly,
        times=times,
        highest_c=highest,
        lowest_c=lowest,
        humidity=there["humidity"] if "humidity" in there else (there["humidity_max"], there["humidity_min"]),
        wind_m_s=there["wind"],
        solar_mj_m2=there["solar"],
        rain_mm=there.get("rain", np.zeros(len(times))),
        clock=local,
    )


class _Reader:
    """Takes columns of a table; faults gather, so that one message names them all."""

    def __init__(self, table: SourceTable, columns: dict[str, _Column]) -> None:
        self.table = table
        self.columns = columns
        self.faults: list[str] = []

    def take(self, quantity: str) -> np.ndarray | None:
        """A quantity in SI, None when the table has no column of it."""
        column = self.columns[quantity]
        there = [name for name in column.names if name in self.table.columns]
        if len(there) > 1:
            raise FileError(f"{self.table.path}: columns {' and '.join(there)} give the same quantity; keep one")
        if not there:
            return None
        factor, offset = column.names[there[0]]
        values = np.array([self._value(row, there[0], column, factor, offset) for row in self.table.rows])
        if column.unit == "%" and len(values) > 3 and np.nanmax(values, initial=0.0) <= 1.0:
            self.faults.append(f"column {there[0]}: all values are 0 to 1; they must be percent, 0 to 100")
        return values

    def _value(self, row: Row, name: str, column: _Column, factor: float, offset: float) -> float:
        try:
            number = self.table.number(row, name)
        except FileError as error:
            self.faults.append(str(error).removeprefix(f"{self.table.path}: "))
            return np.nan
        if number is None:
            self.faults.append(f"row {row.number}, column {name}: missing; give the value, it is not guessed")
            return np.nan
        value = number * factor + offset
        if not column.low <= value <= column.high:
            self.faults.append(
                f"row {row.number}, column {name}: {number:g} is {value:g} {column.unit}; it must be "
                f"{column.low:g} to {column.high:g}{column.hint}"
            )
        return value

    def when(self, row: Row, column: str, parse: Callable[[str], datetime.date]) -> datetime.date | None:
        text = row.text(column)
        try:
            if text is None:
                raise ValueError
            return parse(text)
        except ValueError:
            example = "2027-05-03" if column == "date" else "2027-05-03T14:00"
            self.faults.append(f"row {row.number}, column {column}: {text!r}; it must be written as {example}")
            return None

    def needs(self, values: dict[str, np.ndarray | None], hourly: bool) -> None:
        """Add a fault for each quantity that must be there and is not."""
        have = {name for name, value in values.items() if value is not None}
        wanted = []
        if hourly and "temperature" not in have:
            wanted.append("temperature_c")
        if not hourly and not {"highest", "lowest"} <= have:
            wanted.append("temperature_max_c and temperature_min_c")
        if "humidity" not in have and (hourly or not {"humidity_max", "humidity_min"} <= have):
            wanted.append("relative_humidity_percent")
        wanted += [
            name for key, name in (("wind", "wind_speed_m_s"), ("solar", "solar_radiation_mj_m2")) if key not in have
        ]
        self.faults += [f"column {name}: missing; evaporation needs it" for name in wanted]

    def finish(self) -> None:
        self.table.refuse(self.faults)


def _date(text: str) -> datetime.date:
    return datetime.date.fromisoformat(text)


def _time(text: str) -> datetime.datetime:
    if len(text) <= 10:
        raise ValueError
    return datetime.datetime.fromisoformat(text)


def _consecutive_days(path: Path, clock: list) -> tuple[datetime.date, ...]:
    """The days, checked to follow each other."""
    faults = []
    for before, after in pairwise(clock):
        step = (after - before).days
        if step == 0:
            faults.append(f"{after} comes twice")
        elif step < 0:
            faults.append(f"{after} comes after {before}")
        elif step == 2:
            faults.append(f"{before + datetime.timedelta(days=1)} is missing")
        elif step > 2:
            first, last = before + datetime.timedelta(days=1), after - datetime.timedelta(days=1)
            faults.append(f"{first} to {last} are missing ({step - 1} days)")
    _refuse(path, faults, "day")
    return tuple(clock)


def _local(clock: list, zone: str | None, offset_hours: float) -> datetime.tzinfo:
    """The local time of a file of hours: the zone, else the offset that its times carry, else that by the sun."""
    if zone:
        return zoneinfo.ZoneInfo(zone)
    by_sun = datetime.timedelta(hours=offset_hours)
    own = clock[0].utcoffset() if clock else None
    return datetime.timezone(own if own is not None and abs(own - by_sun) <= _FAR_FROM_SUN else by_sun)


def _consecutive_hours(path: Path, clock: list, local: datetime.tzinfo) -> tuple[datetime.datetime, ...]:
    """Starts of the hours in UTC, checked to follow each other; a clock that is set back may repeat one."""
    times: list[datetime.datetime] = []
    for moment in clock:
        at = _in_utc(moment, local)
        if times and moment.tzinfo is None and at <= times[-1]:
            later = _in_utc(moment.replace(fold=1), local)
            at = later if later == times[-1] + _HOUR else at
        times.append(at)
    faults = []
    for i in range(1, len(times)):
        hours = (times[i] - times[i - 1]) / _HOUR
        if hours == 1:
            continue
        before, after = clock[i - 1], clock[i]
        if hours <= 0:
            faults.append(f"{after:%Y-%m-%d %H:%M} comes {'twice' if hours == 0 else 'out of order'}")
        elif hours < 2 and hours != round(hours):
            faults.append(f"{before:%Y-%m-%d %H:%M} to {after:%H:%M} is not one hour")
        else:
            faults.append(f"{hours - 1:g} h between {before:%Y-%m-%d %H:%M} and {after:%Y-%m-%d %H:%M} are missing")
        if after.tzinfo is None and len({m.replace(tzinfo=local).utcoffset() for m in (before, after)}) == 2:
            standard = max(_offsets(before, local))  # the later instant has the smaller offset
            faults[-1] += (
                " (the clock changes there; where the file keeps standard time all year, write times with their offset, "
                f"such as {standard:%Y-%m-%dT%H:%M}{standard.isoformat()[-6:]})"
            )
    _refuse(path, faults, "hour")
    return tuple(times)


def _offsets(moment: datetime.datetime, local: datetime.tzinfo) -> list[datetime.datetime]:
    """A time of the clock with the offsets that hold a day before and a day after it."""
    days = (datetime.timedelta(days=-1), datetime.timedelta(days=1))
    return [
        moment.replace(tzinfo=datetime.timezone((moment + day).replace(tzinfo=local).utcoffset() or datetime.timedelta()))
        for day in days
    ]


def _in_utc(moment: datetime.datetime, local: datetime.tzinfo) -> datetime.datetime:
    return (moment if moment.tzinfo else moment.replace(tzinfo=local)).astimezone(datetime.UTC)


def _refuse(path: Path, faults: list[str], what: str) -> None:
    if faults:
        more = f"\n  and {len(faults) - MOST_FAULTS} more like these" if len(faults) > MOST_FAULTS else ""
        raise FileError(
            f"{path}: the weather has gaps or repeats; each {what} must be there once. Fill them in from a "
            "neighbouring station, or cut the file short\n  " + "\n  ".join(faults[:MOST_FAULTS]) + more
        )
