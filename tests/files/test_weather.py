"""Weather files: what is read, and what is refused by name."""

import datetime

import numpy as np
import pytest

from earthwork.errors import FileError
from earthwork.files.weather import read_weather

DAY_HEAD = "date,temperature_max_c,temperature_min_c,relative_humidity_percent,wind_speed_m_s,solar_radiation_mj_m2"
DAYS = [f"2027-06-0{i},28,12,45,3.1,24" for i in range(1, 7)]
HOUR_HEAD = "time,temperature_c,relative_humidity_percent,wind_speed_m_s,solar_radiation_mj_m2,rain_mm"


def write(tmp_path, head, rows):
    path = tmp_path / "weather.csv"
    path.write_text("\n".join([head, *rows]) + "\n")
    return path


def test_days(tmp_path):
    table = read_weather(write(tmp_path, DAY_HEAD, DAYS))
    assert not table.hourly
    assert table.times[0] == datetime.date(2027, 6, 1)
    assert table.highest_c.tolist() == [28.0] * 6
    assert table.rain_mm.tolist() == [0.0] * 6


def test_other_units_and_extremes_of_humidity(tmp_path):
    head = (
        "date,temperature_max_f,temperature_min_f,relative_humidity_max_percent,relative_humidity_min_percent,"
        "wind_speed_mph,solar_radiation_w_m2,rain_in"
    )
    table = read_weather(write(tmp_path, head, ["2027-06-01,86,50,90,40,10,250,0.5"]))
    assert table.highest_c[0] == pytest.approx(30.0)
    assert table.lowest_c[0] == pytest.approx(10.0)
    assert table.wind_m_s[0] == pytest.approx(4.4704)
    assert table.solar_mj_m2[0] == pytest.approx(21.6)
    assert table.rain_mm[0] == pytest.approx(12.7)
    assert [float(h[0]) for h in table.humidity] == [90.0, 40.0]


def hour_rows(start, count, step=1.0):
    first = datetime.datetime.fromisoformat(start)
    return [f"{(first + datetime.timedelta(hours=i * step)).isoformat()},20,50,2,1.5,0" for i in range(count)]


def test_hours_with_their_own_offset(tmp_path):
    table = read_weather(write(tmp_path, HOUR_HEAD, hour_rows("2027-06-01T00:00-06:00", 30)))
    assert table.hourly
    assert table.times[0] == datetime.datetime(2027, 6, 1, 6, tzinfo=datetime.UTC)


def test_clocks_that_change_leave_no_gap_and_no_repeat(tmp_path):
    # forward on 14 March 2027: no 02:00; back on 7 November: two of 01:00
    spring = [r for r in hour_rows("2027-03-14T00:00", 6) if "T02" not in r]
    table = read_weather(write(tmp_path, HOUR_HEAD, spring), zone="America/Denver")
    assert np.diff([t.timestamp() for t in table.times]).tolist() == [3600.0] * 4
    autumn = hour_rows("2027-11-07T00:00", 2) + hour_rows("2027-11-07T01:00", 4)
    table = read_weather(write(tmp_path, HOUR_HEAD, autumn), zone="America/Denver")
    assert np.diff([t.timestamp() for t in table.times]).tolist() == [3600.0] * 5
    with pytest.raises(FileError, match=r"2027-11-07 01:00 comes twice"):
        read_weather(write(tmp_path, HOUR_HEAD, autumn))


@pytest.mark.parametrize(
    ("zone", "start", "message"),
    [
        ("America/Denver", "2027-11-07T00:00", r"2027-11-07 02:00 are missing \(the clock changes.*T01:00-07:00"),
        ("America/Denver", "2027-03-14T00:00", r"2027-03-14 03:00 comes twice \(the clock changes.*T02:00-07:00"),
        ("Australia/Sydney", "2027-04-04T00:00", r"are missing \(the clock changes.*T02:00\+10:00"),
    ],
)
def test_standard_time_all_year_is_recognised(tmp_path, zone, start, message):
    with pytest.raises(FileError, match=message):
        read_weather(write(tmp_path, HOUR_HEAD, hour_rows(start, 8)), zone=zone)


def test_a_gap_elsewhere_says_nothing_of_clocks(tmp_path):
    rows = [r for r in hour_rows("2027-06-01T00:00", 8) if "T03" not in r]
    with pytest.raises(FileError, match=r"2027-06-01 04:00 are missing$"):
        read_weather(write(tmp_path, HOUR_HEAD, rows), zone="America/Denver")


@pytest.mark.parametrize(
    ("head", "rows", "message"),
    [
        (DAY_HEAD, DAYS[:2] + DAYS[3:], r"2027-06-03 is missing"),
        (DAY_HEAD, DAYS[:1] + DAYS[4:], r"2027-06-02 to 2027-06-04 are missing \(3 days\)"),
        (DAY_HEAD, DAYS[:2] + DAYS[1:3], r"2027-06-02 comes twice"),
        (DAY_HEAD, [DAYS[1], DAYS[0]], r"2027-06-01 comes after 2027-06-02"),
        (HOUR_HEAD, hour_rows("2027-06-01T00:00", 3) + hour_rows("2027-06-01T05:00", 2),
         r"2 h between 2027-06-01 02:00 and 2027-06-01 05:00 are missing"),
        (HOUR_HEAD, hour_rows("2027-06-01T00:00", 3, 0.5), r"is not one hour|out of order|comes"),
        (DAY_HEAD, ["2027-06-01,28,12,45,,24"], r"row 2, column wind_speed_m_s: missing; give the value"),
        (DAY_HEAD, ["2027-06-01,28,12,45,3,280"], r"280 is 280 MJ/m²; it must be 0 to 45; is it W/m²\?"),
        (DAY_HEAD, ["2027-06-01,88,52,45,3,24"], r"row 2, column temperature_max_c: 88 is 88 °C; it must be -60 to 60"),
        (DAY_HEAD, [d.replace(",45,", ",0.45,") for d in DAYS], r"all values are 0 to 1; they must be percent"),
        (DAY_HEAD, ["2027-06-01,10,12,45,3,24"], r"row 2: temperature_min is above temperature_max"),
        (DAY_HEAD, ["1 June,28,12,45,3,24"], r"column date: '1 June'; it must be written as 2027-05-03"),
        (DAY_HEAD.replace("date", "when"), DAYS, r"must have a column date .* or time"),
        ("date,temperature_max_c,temperature_min_c", ["2027-06-01,28,12"], r"column relative_humidity_percent: missing"),
    ],
)  # fmt: skip
def test_faults_are_named(tmp_path, head, rows, message):
    with pytest.raises(FileError, match=message):
        read_weather(write(tmp_path, head, rows))
