"""Workbook sheets, CF NetCDF and components of the wind."""

from __future__ import annotations

import datetime as dt
import sys
from pathlib import Path

import numpy as np
import openpyxl
import pandas as pd
import pytest
from scipy.io import netcdf_file
from station_examples import HEADER, ROWS, channel, settings, write

from windkit.study.errors import StudyError
from windkit.study.reading import read_station


def workbook(path: Path, rows: list[list[object]], *, title: str = "data") -> None:
    book = openpyxl.Workbook()
    book.active.title = "cover"
    sheet = book.create_sheet(title)
    for row in rows:
        sheet.append(row)
    book.save(path)


def sheet_rows() -> list[list[object]]:
    rows: list[list[object]] = [["Logger 7"], HEADER.split(",")]
    for row in ROWS:
        stamp, *values = row.split(",")
        cells = [float(value) if value else None for value in values]
        rows.append([dt.datetime.fromisoformat(stamp), *cells])
    return rows


def test_a_sheet_holds_the_same_record_as_the_text(tmp_path: Path):
    write(tmp_path, *ROWS)
    workbook(tmp_path / "mast.xlsx", sheet_rows())
    station = settings(files=["mast.xlsx"], sheet="data", skip_rows=1)
    reading = read_station(station, tmp_path)
    pd.testing.assert_frame_equal(reading.frame, read_station(settings(), tmp_path).frame)
    assert reading.rows_read == 3


def test_cells_and_sheets_that_do_not_fit_are_refused(tmp_path: Path):
    rows = sheet_rows()
    rows[3][1] = "broken"
    workbook(tmp_path / "mast.xlsx", rows)
    station = settings(files=["mast.xlsx"], sheet="data", skip_rows=1)
    with pytest.raises(StudyError, match="row 4 has 'broken' in 'Spd80'"):
        read_station(station, tmp_path)
    named = settings(files=["mast.xlsx"], sheet="data", skip_rows=1, missing=["broken"])
    assert np.isnan(read_station(named, tmp_path).frame["speed_80"].iloc[1])
    with pytest.raises(StudyError, match="there is no sheet 'x'; the sheets are 'cover', 'data'"):
        read_station(settings(files=["mast.xlsx"], sheet="x"), tmp_path)
    rows[3][0] = "2026-01-01 00:20"
    workbook(tmp_path / "mast.xlsx", rows)
    with pytest.raises(StudyError, match="1 stamps are texts, the others dates: row 4"):
        read_station(named, tmp_path)
    (tmp_path / "mast.xlsx").write_bytes(b"PK no workbook")
    with pytest.raises(StudyError, match="cannot be read as a workbook"):
        read_station(station, tmp_path)


def reanalysis(path: Path, *, units: str = "m s-1", name: str = "eastward_wind") -> None:
    """Hourly components as CF NetCDF 3, packed as archives pack them."""
    with netcdf_file(path, "w") as file:
        file.createDimension("time", 4)
        file.createDimension("latitude", 1)
        time = file.createVariable("valid_time", "i4", ("time",))
        time.units = "hours since 1900-01-01 00:00:00.0"
        time.calendar = "gregorian"
        # 1 104 528 hours after 1900-01-01 00:00 is 2026-01-02 00:00: 126 years of
        # 365 days, 31 leap days and one.
        time[:] = 1_104_528 + np.arange(4)
        for short, standard, values in (
            ("u100", name, [0.0, -10.0, 3.0, 0.0]),
            ("v100", "northward_wind", [-10.0, 0.0, 4.0, 0.0]),
        ):
            variable = file.createVariable(short, "i2", ("time", "latitude"))
            variable.standard_name = standard
            variable.units = units
            variable.scale_factor = 0.5
            variable.add_offset = 1.0
            variable._FillValue = np.int16(-32767)
            packed = np.round((np.array(values) - 1.0) / 0.5).astype(np.int16)
            if short == "u100":
                packed[3] = -32767
            variable[:] = packed[:, None]


def grid(**changes: object) -> object:
    both = {"eastward_column": "u100", "northward_column": "v100", "column": ""}
    values: dict[str, object] = {
        "files": ["grid.nc"],
        "time_column": "valid_time",
        "utc_offset_h": 0.0,
        "interval_min": 60.0,
        "stamp": "start",
        "channels": [
            channel("speed_100", "", "wind_speed", "m/s", 100.0) | both,
            channel("direction_100", "", "wind_from_direction", "m/s", 100.0) | both,
        ],
        "main_wind_speed": "speed_100",
        "main_wind_direction": "direction_100",
    }
    values.update(changes)
    return settings(**values)


def test_components_in_cf_netcdf_become_speed_and_direction(tmp_path: Path):
    reanalysis(tmp_path / "grid.nc")
    frame = read_station(grid(), tmp_path).frame
    assert frame.index[0] == pd.Timestamp("2026-01-02", tz="UTC")
    # CF: direction is where the wind comes from; southward flow comes from north.
    assert frame["speed_100"].tolist()[:3] == pytest.approx([10.0, 10.0, 5.0])
    from_south_west = 180 + np.degrees(np.arctan2(3, 4))
    assert frame["direction_100"].tolist()[:3] == pytest.approx([0.0, 90.0, from_south_west])
    assert frame.iloc[3].isna().all()


def test_cf_time_must_be_declared_as_utc(tmp_path: Path):
    reanalysis(tmp_path / "grid.nc")
    with pytest.raises(StudyError, match="the time column has the zone UTC, utc_offset_h is 1"):
        read_station(grid(utc_offset_h=1.0), tmp_path)


def test_what_the_file_says_must_be_what_is_declared(tmp_path: Path):
    reanalysis(tmp_path / "grid.nc", units="km h-1")
    with pytest.raises(StudyError, match="has the unit 'km h-1', the channel says 'm/s'"):
        read_station(grid(), tmp_path)
    reanalysis(tmp_path / "grid.nc", name="northward_wind")
    with pytest.raises(StudyError, match="'u100' has the standard name northward_wind"):
        read_station(grid(), tmp_path)
    (tmp_path / "grid.nc").write_bytes(b"nothing at all")
    with pytest.raises(StudyError, match="NetCDF begins with CDF"):
        read_station(grid(), tmp_path)


def test_netcdf_4_names_its_package_where_that_is_not_installed(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
):
    monkeypatch.setitem(sys.modules, "h5netcdf", None)  # an import of it fails
    (tmp_path / "grid.nc").write_bytes(b"\x89HDF\r\n\x1a\n")
    with pytest.raises(StudyError, match="the package h5netcdf is not installed"):
        read_station(grid(), tmp_path)


def test_netcdf_4_is_read_and_a_damaged_one_refused(tmp_path: Path):
    h5netcdf = pytest.importorskip("h5netcdf")
    (tmp_path / "grid.nc").write_bytes(b"\x89HDF\r\n\x1a\n")
    with pytest.raises(StudyError, match="the file cannot be read as NetCDF"):
        read_station(grid(), tmp_path)
    with h5netcdf.File(tmp_path / "grid.nc", "w") as file:
        file.dimensions = {"time": 3}
        time = file.create_variable("valid_time", ("time",), data=np.array([0, 3600, 7200]))
        time.attrs["units"] = "seconds since 2026-01-04"
        for name, standard in (("u100", "eastward_wind"), ("v100", "northward_wind")):
            variable = file.create_variable(name, ("time",), data=np.array([3.0, 4.0, 5.0]))
            variable.attrs["standard_name"] = standard
            variable.attrs["units"] = "m s**-1"
    frame = read_station(grid(), tmp_path).frame
    assert frame["speed_100"].tolist() == pytest.approx([3 * 2**0.5, 4 * 2**0.5, 5 * 2**0.5])
    assert frame["direction_100"].tolist() == pytest.approx([225.0] * 3)


def test_components_belong_together_and_to_the_wind(tmp_path: Path):
    for wrong, words in (
        ({"eastward_column": "u", "column": ""}, "belong together"),
        ({"eastward_column": "u", "northward_column": "v"}, "write either column"),
        ({"column": ""}, "write either column"),
        (
            {"eastward_column": "u", "northward_column": "v", "column": "", "statistic": "max"},
            "components give a mean",
        ),
    ):
        one = channel("speed_100", "S", "wind_speed", "m/s", 100.0) | wrong
        with pytest.raises(ValueError, match=words):
            settings(channels=[one], main_wind_speed="speed_100", main_wind_direction=None)
