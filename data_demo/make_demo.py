"""Make the demo study's data: what a mast, a station and a model saw of one invented weather.

Run `python data_demo/make_demo.py` to lay the files anew beside this script. Everything is drawn
from one seed, so the same text comes out each time. The weather itself is in `demo_weather`; the
faults that instruments and people add to it are here, and `truth.json` lists them.
"""

from __future__ import annotations

import argparse
import gzip
import hashlib
import json
from pathlib import Path

import numpy as np
import pandas as pd
from demo_weather import (
    GAS_CONSTANT,
    GRAVITY,
    HUB_HEIGHT,
    SEED,
    STEPS,
    STUDY,
    TURBINE,
    Values,
    Weather,
    hub_air_density,
    make_curve,
    make_weather,
    memory,
    to_speed,
    turbine_mean_power,
)
from numpy.typing import NDArray

HERE = Path(__file__).parent
CAMPAIGN = ("2022-10-31 23:00", "2023-12-31 23:00")  # UTC; the logger's own clock is UTC+1
LOGGER_OFFSET = pd.Timedelta(hours=1)
HOURS_PER_YEAR = 8760.0

# Column stem, height [m], boom bearing [deg].
CUPS = (
    ("Speed80A", 80.0, 315.0),
    ("Speed80B", 80.0, 135.0),
    ("Speed60", 60.0, 315.0),
    ("Speed40", 40.0, 315.0),
)
VANES = (("Direction78", 78.0), ("Direction58", 58.0))

# Channel names of the study by column stem.
CHANNELS = {"all": "*"} | {
    channel["column"].removesuffix("_mean"): channel["name"]
    for channel in STUDY["mast"]["channels"]
    if channel["statistic"] == "mean"
}

# Blemishes laid in: channel stems, from and to (starts in UTC, end excluded), what.
BLEMISHES = (
    ("all", "2023-03-09 13:00", "2023-03-14 08:30", "logger outage: rows are absent"),
    ("Speed80A", "2023-01-16 21:00", "2023-01-19 09:00", "ice: stuck near offset, sd 0"),
    ("Speed80B", "2023-01-17 02:00", "2023-01-19 07:00", "ice: stuck near offset, sd 0"),
    ("Speed60", "2023-01-16 22:10", "2023-01-19 08:20", "ice: stuck near offset, sd 0"),
    ("Speed40", "2023-01-16 23:30", "2023-01-19 06:40", "ice: stuck near offset, sd 0"),
    ("Direction78", "2023-01-16 22:00", "2023-01-19 08:00", "ice: stuck vane, sd 0"),
    ("Direction58", "2023-01-16 22:40", "2023-01-19 07:30", "ice: stuck vane, sd 0"),
    ("Direction58", "2023-05-11 04:00", "2023-05-13 06:00", "stuck vane, sd 0"),
    ("Speed80B", "2023-09-02 15:20", "2023-09-02 15:30", "one absurd spike"),
    ("Speed60", "2023-08-01 00:00", "2023-12-31 23:00", "bearing drift, down to -4 %"),
    ("Direction78", "2023-06-21 08:00", "2023-06-21 11:00", "vane turned by hand on a visit"),
    ("Direction58", "2023-06-21 08:00", "2023-06-21 11:00", "vane turned by hand on a visit"),
    ("Temperature", "2023-10-03 05:00", "2023-10-04 17:00", "loose plug: -999"),
    ("Humidity", "2023-10-03 05:00", "2023-10-04 17:00", "loose plug: -999"),
)
STATION_BREAK = ("2011-06-14 00:00", 0.95)  # undocumented: the station reads 5 % low from here on
STATION_OUTAGE = ("2008-02-03 10:00", "2008-02-24 15:00")
GRID_DRIFT = 0.0003  # [1/year]
VANE_ERRORS = {"Direction78": 1.5, "Direction58": -4.0}  # [deg] of north alignment


# --- the mast ----------------------------------------------------------------------------------


def mast_shadow(direction: Values, boom_bearing: float) -> Values:
    """Share of the speed left behind a lattice mast, with a little speed-up on its flanks."""
    away = (direction - boom_bearing) % 360 - 180  # 0 where the mast stands in front of the cup
    return (
        1
        - 0.11 * np.exp(-0.5 * (away / 11) ** 2)
        + 0.006 * np.exp(-0.5 * ((np.abs(away) - 38) / 12) ** 2)
    )


def calibration_errors() -> dict[str, float]:
    """Constant error of each cup as a fraction, drawn with a standard deviation of 0.8 %."""
    drawn = np.random.default_rng(SEED + 1).normal(0.0, 0.008, len(CUPS))
    return {stem: round(float(error), 5) for (stem, _, _), error in zip(CUPS, drawn, strict=True)}


def make_mast(weather: Weather) -> pd.DataFrame:
    """What the logger wrote: text columns by end of interval on its own clock."""
    rng = np.random.default_rng(SEED + 2)
    campaign = (weather.time >= CAMPAIGN[0]) & (weather.time < CAMPAIGN[1])
    time = weather.time[campaign]
    direction, shear = weather.direction[campaign], weather.shear_exponent[campaign]
    errors, turbulence_noise = calibration_errors(), memory(rng, time.size, 1.0, 1 / STEPS)
    columns: dict[str, Values] = {}
    for stem, height, boom in CUPS:
        true = weather.speed_at(height)[campaign]
        left = mast_shadow(direction, boom)
        speed = true * left * (1 + errors[stem]) * (1 + 0.003 * rng.standard_normal(time.size))
        if stem == "Speed60":
            drift_from = pd.Timestamp("2023-08-01")
            worn = (time - drift_from) / (pd.Timestamp(CAMPAIGN[1]) - drift_from)
            speed *= 1 - 0.04 * np.clip(np.asarray(worn), 0, 1)
        speed = np.maximum(speed, 0.26)  # a cup at rest shows its offset
        intensity = (0.135 - 0.25 * (shear - 0.18)) * (80 / height) ** 0.15
        intensity = np.clip(intensity, 0.04, None) * (1 + 0.6 / np.maximum(true, 0.5))
        spread = (
            speed * intensity * np.exp(0.16 * turbulence_noise + 0.07 * rng.normal(size=time.size))
        )
        columns[f"{stem}_mean"] = speed
        columns[f"{stem}_sd"] = np.minimum(spread * (2 - left), 0.45 * speed)
        if height == 80.0:
            peak = np.clip(rng.normal(2.7, 0.35, time.size), 1.6, 4.0)
            columns[f"{stem}_max"] = speed + peak * columns[f"{stem}_sd"]
    sway = 50 * columns["Speed80A_sd"] / np.maximum(columns["Speed80A_mean"], 1.0)
    for stem, _ in VANES:
        seen = direction + VANE_ERRORS[stem] + rng.normal(0, 1.2, time.size)
        columns[f"{stem}_mean"] = seen % 360
        columns[f"{stem}_sd"] = np.clip(sway * np.exp(0.1 * rng.normal(size=time.size)), 1.5, 75)
    columns["Temperature_mean"] = (
        weather.temperature[campaign] - 273.15 + rng.normal(0, 0.05, time.size)
    )
    columns["Pressure_mean"] = weather.pressure[campaign]
    columns["Humidity_mean"] = weather.relative_humidity[campaign]
    lay_blemishes(columns, time, rng)
    stamps = (time + LOGGER_OFFSET + pd.Timedelta(minutes=10)).strftime("%Y-%m-%d %H:%M")
    return as_rows(stamps, columns, time, rng)


def within(time: pd.DatetimeIndex, start: str, end: str) -> NDArray[np.bool_]:
    return np.asarray((time >= start) & (time < end))


def lay_blemishes(
    columns: dict[str, Values], time: pd.DatetimeIndex, rng: np.random.Generator
) -> None:
    """Put ice, stuck vanes, the visit and the spike into the numbers."""
    for stem, start, end, what in BLEMISHES:
        where = within(time, start, end)
        if not where.any():
            continue
        if "stuck" in what:
            first = columns[f"{stem}_mean"][where][0]
            columns[f"{stem}_mean"][where] = 0.27 if stem.startswith("Speed") else first
            columns[f"{stem}_sd"][where] = 0.0
            if f"{stem}_max" in columns:
                columns[f"{stem}_max"][where] = 0.27
        elif "by hand" in what:
            columns[f"{stem}_mean"][where] = rng.uniform(0, 360, where.sum())
            columns[f"{stem}_sd"][where] = rng.uniform(20, 75, where.sum())
        elif "spike" in what:
            columns[f"{stem}_mean"][where] = 75.3
            columns[f"{stem}_max"][where] = 99.9


def as_rows(
    stamps: pd.Index, columns: dict[str, Values], time: pd.DatetimeIndex, rng: np.random.Generator
) -> pd.DataFrame:
    """Numbers as the logger prints them, with its codes for missing values and its outage."""
    table = pd.DataFrame({"time": stamps})
    for name, values in columns.items():
        bearing = name.startswith("Direction") and name.endswith("_mean")
        whole = bearing or name.startswith("Humidity")
        places = 2 if name.startswith("Speed") else 0 if whole else 1
        text = printed(values, places, wrap=360 if bearing else None)
        text[rng.random(time.size) < 0.0004] = "-999"
        text[rng.random(time.size) < 0.0001] = "--"
        for stem, start, end, what in BLEMISHES:
            if "-999" in what and name.startswith(stem):
                text[within(time, start, end)] = "-999"
        table[name] = text
    outage = next(row for row in BLEMISHES if row[0] == "all")
    return table[~within(time, outage[1], outage[2])]


# --- the references ----------------------------------------------------------------------------


def hourly_mean(fine: Values) -> Values:
    return fine.reshape(-1, STEPS).mean(axis=1)


def make_station(weather: Weather) -> pd.DataFrame:
    """Reference A: a station at a small airport, whole knots, tens of degrees, with calms."""
    rng = np.random.default_rng(SEED + 3)
    hours = weather.time[::STEPS]
    clock, yearday = hours.hour.to_numpy() + 1.5, hours.day_of_year.to_numpy()
    day = np.cos(2 * np.pi * (clock - 14.0) / 24)
    season = np.cos(2 * np.pi * (yearday - 20) / 365.25)
    bearing = (weather.latent_direction + 8 + 12 * memory(rng, hours.size, 6.0)) % 360
    own = 0.34 * memory(rng, hours.size, 9.0) + 0.26 * memory(rng, hours.size, 1.5)
    speed = 5.05 * to_speed(weather.latent + own, 1.85)
    speed *= 1 + 0.07 * season + 0.15 * day * (1 - 0.4 * season)
    speed *= 1 + 0.13 * np.cos(np.deg2rad(bearing - 290))  # open to the sea in the north-west
    speed *= np.where(hours >= STATION_BREAK[0], STATION_BREAK[1], 1.0)
    knots = np.round(speed / 0.514444)
    knots[knots < 2] = 0  # reported as calm
    tens = np.round(bearing / 10) * 10
    tens = np.where(knots == 0, 0, np.where(tens == 0, 360, tens))  # north is 360, calm is 0
    temperature = hourly_mean(weather.temperature) - 273.15 + 2.7 + 1.2 * day
    temperature += 0.6 * memory(rng, hours.size, 6.0)
    pressure = hourly_mean(weather.pressure) * np.exp(GRAVITY * 408 / (GAS_CONSTANT * 283.5))
    stamps = (hours + pd.Timedelta(hours=1)).strftime("%Y-%m-%d %H:%M")
    table = pd.DataFrame(
        {
            "time": stamps,
            "Speed10": printed(knots * 0.514444, 1),
            "Direction10": printed(tens, 0),
            "Temperature2": printed(temperature, 0),
            "PressureStation": printed(pressure, 0),
        }
    )
    lost = rng.random(hours.size) < 0.0035  # single reports that never came
    lost |= within(hours, *STATION_OUTAGE)
    return table[~lost]


def make_grid(weather: Weather) -> pd.DataFrame:
    """Reference B: a node of a gridded model, smooth, complete, its seasons a little too large."""
    rng = np.random.default_rng(SEED + 4)
    hours = weather.time[::STEPS]
    years = (hours.year.to_numpy() - hours.year.min()) + hours.day_of_year.to_numpy() / 365.25
    season = np.cos(2 * np.pi * (hours.day_of_year.to_numpy() - 20) / 365.25)
    state = np.convolve(weather.latent, [0.25, 0.5, 0.25], mode="same")  # a model is smooth
    state += 0.27 * memory(rng, hours.size, 10.0)
    bearing = (weather.latent_direction - 3 + 7 * memory(rng, hours.size, 20.0)) % 360
    speed = 7.55 * to_speed(state, 2.2) * (1 + 0.125 * season) * (1 + GRID_DRIFT * years)
    temperature = (
        hourly_mean(weather.temperature) - 273.15 + 0.9 + 0.5 * memory(rng, hours.size, 24)
    )
    pressure = hourly_mean(weather.pressure) * np.exp(GRAVITY * 140 / (GAS_CONSTANT * 282.0))
    return pd.DataFrame(
        {
            "time": hours.strftime("%Y-%m-%d %H:%M"),
            "speed_100": printed(speed, 2),
            "direction_100": printed(bearing, 0, wrap=360),
            "temperature_2": printed(temperature, 1),
            "pressure_surface": printed(pressure, 1),
        }
    )


# --- writing -----------------------------------------------------------------------------------


def printed(values: Values, places: int, wrap: float | None = None) -> NDArray[np.object_]:
    """Numbers as text with fixed decimals; a direction that rounds to `wrap` becomes 0."""
    rounded = np.round(values, places) + 0.0
    if wrap is not None:
        rounded %= wrap
    return np.array([f"{value:.{places}f}" for value in rounded], dtype=object)


def as_text(table: pd.DataFrame) -> bytes:
    return table.to_csv(index=False, lineterminator="\n").encode()


def make_truth(weather: Weather, texts: dict[str, bytes]) -> dict[str, object]:
    """What a study of this site should find, had it perfect instruments and patience."""
    density = hub_air_density(weather)
    power = turbine_mean_power(weather, density)
    campaign = within(weather.time, *CAMPAIGN)
    hub = weather.speed_at(HUB_HEIGHT)
    gross = {name: round(mean * HOURS_PER_YEAR / 1000, 1) for name, mean in power.items()}
    whole = sum(power.values()) * HOURS_PER_YEAR / 1000
    kept = float(np.prod([1 - entry["loss"] for entry in STUDY["losses"]]))
    yearly = pd.Series(weather.speed).groupby(weather.time.year).mean()
    return {
        "about": "Invented site, invented country. Truth of the hidden weather, not a measurement.",
        "seed": SEED,
        "years": [int(weather.time[0].year), int(weather.time[-1].year)],
        "long_term": {
            "mean_speed_80_m_m_s": round(float(weather.speed.mean()), 4),
            "mean_speed_hub_m_s": round(float(hub.mean()), 4),
            "mean_cube_speed_hub_m_s": round(float((hub**3).mean() ** (1 / 3)), 4),
            "shear_exponent_mean": round(float(weather.shear_exponent.mean()), 4),
            "shear_exponent_of_means": round(
                float(np.log(hub.mean() / weather.speed.mean()) / np.log(HUB_HEIGHT / 80)), 4
            ),
            "hub_air_density_kg_m3": round(float(density.mean()), 4),
            "yearly_mean_speed_80_m_m_s": {int(y): round(float(v), 3) for y, v in yearly.items()},
            "yearly_variability": round(float(yearly.std(ddof=1) / yearly.mean()), 4),
        },
        "campaign": {
            "from_utc": CAMPAIGN[0],
            "to_utc": CAMPAIGN[1],
            "mean_speed_80_m_m_s": round(float(weather.speed[campaign].mean()), 4),
            "mean_speed_hub_m_s": round(float(hub[campaign].mean()), 4),
            "ratio_to_long_term": round(
                float(weather.speed[campaign].mean() / weather.speed.mean()), 4
            ),
            "shear_exponent_mean": round(float(weather.shear_exponent[campaign].mean()), 4),
        },
        "energy": {
            "basis": "every ten minutes of all years through the curve, density-normalised at each "
            "turbine's hub, no wakes; a year of 8760 h",
            "hours_per_year": HOURS_PER_YEAR,
            "gross_mwh_per_year": gross,
            "site_gross_mwh_per_year": round(whole, 1),
            "site_net_mwh_per_year_if_losses_are_as_stated": round(whole * kept, 1),
            "gross_capacity_factor": round(
                sum(power.values()) / len(power) / TURBINE["rated_power_kw"], 4
            ),
        },
        "instruments": {
            "calibration_error": {CHANNELS[s]: error for s, error in calibration_errors().items()},
            "vane_north_error_deg": {CHANNELS[s]: error for s, error in VANE_ERRORS.items()},
            "station_break": {"from_utc": STATION_BREAK[0], "factor": STATION_BREAK[1]},
            "grid_drift_per_year": GRID_DRIFT,
        },
        "blemishes": [
            {"channel": CHANNELS[stem], "from_utc": start, "to_utc": end, "what": what}
            for stem, start, end, what in BLEMISHES
        ],
        "sha256_of_text": {name: hashlib.sha256(text).hexdigest() for name, text in texts.items()},
    }


def make_texts(weather: Weather) -> dict[str, bytes]:
    """The data files by name, unpacked."""
    return {
        "mast.csv.gz": as_text(make_mast(weather)),
        "port_ambrel.csv.gz": as_text(make_station(weather)),
        "grid_node_m12.csv.gz": as_text(make_grid(weather)),
        "curve.csv": as_text(make_curve().astype({"power_kw": int})),
    }


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--into", type=Path, default=HERE, help="folder to write to")
    folder = parser.parse_args().into
    weather = make_weather()
    texts = make_texts(weather)
    (folder / "data").mkdir(parents=True, exist_ok=True)
    for name, text in texts.items():
        packed = gzip.compress(text, 9, mtime=0) if name.endswith(".gz") else text
        (folder / "data" / name).write_bytes(packed)
    truth = json.dumps(make_truth(weather, texts), indent=2, ensure_ascii=False)
    (folder / "truth.json").write_text(truth + "\n", encoding="utf-8")


if __name__ == "__main__":
    main()
