"""The demo's hidden truth: one invented weather over twenty years, and the energy in it.

Here: the wind at the site every ten minutes with its shear and its air, the state of the region
that the references share, and the demo turbine. What instruments make of it is in `make_demo`.
It is no weather model: spells of weather from one quarter, noise with several memories, seasons,
hours of the day and a ridge, put together so that the numbers are plausible.
"""

from __future__ import annotations

import tomllib
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray
from scipy.signal import lfilter
from scipy.special import log_ndtr

Values = NDArray[np.float64]

#: The study beside this file: turbine, layout and losses stand there and nowhere else.
STUDY: dict[str, Any] = tomllib.loads(
    (Path(__file__).parent / "study.toml").read_text(encoding="utf-8")
)
TURBINE = STUDY["turbine"]
HUB_HEIGHT = TURBINE["hub_height_m"]

SEED = 20_040_101
FIRST_YEAR, LAST_YEAR = 2004, 2023
STEPS = 6  # ten-minute intervals an hour
SITE_MEAN_SPEED = 7.6  # [m/s] at 80 m over all years: the scale of the whole scenario
MEAN_SHEAR_EXPONENT = 0.18
ICE = ("2023-01-16 12:00", "2023-01-19 12:00")  # cold and wet enough for cups to freeze, UTC
GRAVITY, GAS_CONSTANT = 9.80665, 287.05  # [m/s2], [J/(kg K)]
LAPSE_RATE = 0.0065  # [K/m]


@dataclass(frozen=True)
class Weather:
    """The hidden truth, one value each ten minutes, by start of interval in UTC."""

    time: pd.DatetimeIndex
    speed: Values  # [m/s] at 80 m
    direction: Values  # [deg]
    shear_exponent: Values
    temperature: Values  # [K] at 76 m
    pressure: Values  # [hPa] at 8 m
    relative_humidity: Values  # [%]
    latent: Values  # hourly state of the region's wind
    latent_direction: Values  # [deg] hourly

    def speed_at(self, height: float) -> Values:
        return self.speed * (height / 80.0) ** self.shear_exponent


def memory(rng: np.random.Generator, count: int, hours: float, step: float = 1.0) -> Values:
    """Unit-variance red noise with a decay time of `hours`, sampled every `step` hours."""
    keep = np.exp(-step / hours)
    noise = rng.standard_normal(count) * np.sqrt(1 - keep**2)
    noise[0] /= np.sqrt(1 - keep**2)
    return lfilter([1.0], [1.0, -keep], noise)


def yearly_moods(rng: np.random.Generator, hours: pd.DatetimeIndex) -> Values:
    """Windy and calm years that come in runs; the campaign falls into a windy spell."""
    years = np.arange(hours.year.min() - 1, hours.year.max() + 2)
    mood = 0.055 * memory(rng, years.size, 2.0)
    mood[years == 2021] -= 0.05
    middle = [pd.Timestamp(int(year), 7, 1).value for year in years]
    mood = np.interp(hours.as_unit("ns").asi8, middle, mood)
    into_campaign = (hours - pd.Timestamp("2022-09-15")) / pd.Timedelta(days=60)
    return mood + 0.06 * np.clip(np.asarray(into_campaign), 0.0, 1.0)


def regimes(rng: np.random.Generator, hours: pd.DatetimeIndex) -> tuple[Values, Values]:
    """Spells of weather from one quarter: bearing [deg] and push on the wind, hourly."""
    bearings = np.array([228.0, 285.0, 130.0, 45.0])
    pushes = np.array([0.38, 0.12, -0.30, -0.48])
    winter, summer = np.array([0.50, 0.24, 0.14, 0.12]), np.array([0.36, 0.26, 0.16, 0.22])
    weight = (1 + np.cos(2 * np.pi * (hours.day_of_year.to_numpy() - 15) / 365.25)) / 2
    kind = np.empty(hours.size, dtype=int)
    at = 0
    while at < hours.size:
        length = int(np.ceil(rng.gamma(2.0, 22.0)))
        chances = weight[at] * winter + (1 - weight[at]) * summer
        kind[at : at + length] = rng.choice(4, p=chances)
        at += length
    wander = bearings[kind] + 24 * memory(rng, hours.size, 14.0)
    smooth = lfilter([0.3], [1, -0.7], np.exp(1j * np.deg2rad(wander)))  # fronts take hours
    push = lfilter([0.15], [1, -0.85], pushes[kind])
    return np.rad2deg(np.angle(smooth)) % 360, push


def to_speed(latent: Values, shape: float) -> Values:
    """Weibull speed with scale 1 from a normal state."""
    return (-log_ndtr(-latent)) ** (1 / shape)


def to_ten_minutes(hourly: Values) -> Values:
    """Straight lines between the middles of the hours."""
    fine = (np.arange(hourly.size * STEPS) + 0.5) / STEPS
    return np.interp(fine, np.arange(hourly.size) + 0.5, hourly)


def make_weather(first_year: int = FIRST_YEAR, last_year: int = LAST_YEAR) -> Weather:
    """Draw the region's wind, the site's own part in it, and the air."""
    rng = np.random.default_rng(SEED)
    hours = pd.date_range(f"{first_year}-01-01", f"{last_year + 1}-01-01", freq="h")[:-1]
    time = pd.date_range(hours[0], periods=hours.size * STEPS, freq="10min")
    bearing, push = regimes(rng, hours)
    parts = ((480.0, 0.23), (60.0, 0.58), (14.0, 0.50))
    latent = push + yearly_moods(rng, hours)
    latent = latent + sum(size * memory(rng, hours.size, decay) for decay, size in parts)

    clock = time.hour.to_numpy() + time.minute.to_numpy() / 60 + 1.0
    day = np.cos(2 * np.pi * (clock - 14.5) / 24)  # +1 in the early afternoon
    season = np.cos(2 * np.pi * (time.day_of_year.to_numpy() - 20) / 365.25)  # +1 in January

    own = 0.31 * memory(rng, hours.size, 5.0) + 0.20 * memory(rng, hours.size, 40.0)
    state = to_ten_minutes(latent + own) + 0.13 * memory(rng, time.size, 0.5, 1 / STEPS)
    unit = to_ten_minutes(np.cos(np.deg2rad(bearing))) + 1j * to_ten_minutes(
        np.sin(np.deg2rad(bearing))
    )
    direction = np.rad2deg(np.angle(unit)) + 5 * memory(rng, time.size, 0.8, 1 / STEPS)
    direction = (direction + 6 * np.sin(np.deg2rad(2 * (direction - 40)))) % 360
    speed = to_speed(state, 2.0)
    speed *= 1 + 0.09 * season - 0.035 * day * (1 - 0.6 * season)
    speed *= 1 + 0.06 * np.cos(np.deg2rad(2 * (direction - 225)))  # the ridge lies across 225
    speed *= SITE_MEAN_SPEED / speed.mean()

    shear = -0.085 * day * (1 - 0.35 * season) + 0.07 * to_ten_minutes(
        memory(rng, hours.size, 16.0)
    )
    shear = shear / (1 + (speed / 11.0) ** 2) + 0.018 * np.sin(np.deg2rad(direction - 60))
    shear += 0.012 * memory(rng, time.size, 0.5, 1 / STEPS)
    shear = np.clip(shear - shear.mean() + MEAN_SHEAR_EXPONENT, -0.1, 0.6)

    temperature = 8.2 - 7.2 * np.cos(2 * np.pi * (time.day_of_year.to_numpy() - 27) / 365.25)
    temperature += 2.6 * day * (0.65 - 0.35 * season) + to_ten_minutes(
        3.0 * memory(rng, hours.size, 90.0) + 0.7 * memory(rng, hours.size, 8.0)
    )
    pressure = 966.5 + to_ten_minutes(
        8.5 * memory(rng, hours.size, 70.0) - 3.5 * lfilter([0.05], [1, -0.95], latent)
    )
    humidity = 79 + 5 * season - 9 * day * (0.65 - 0.35 * season)
    humidity += to_ten_minutes(9 * memory(rng, hours.size, 30.0))
    cold = (time >= ICE[0]) & (time < ICE[1])
    if cold.any():
        temperature[cold] = -3.2 + 0.12 * (temperature[cold] - temperature[cold].mean())
        humidity[cold] = 98.0
    return Weather(
        time, speed, direction, shear, temperature + 273.15, pressure,
        np.clip(humidity, 22, 100), latent, bearing,
    )  # fmt: skip


def hub_air_density(weather: Weather) -> Values:
    """Moist air at hub height above the mast [kg/m3]; vapour pressure by Magnus' formula."""
    temperature = weather.temperature - LAPSE_RATE * (HUB_HEIGHT - 76.0)
    below = weather.temperature + LAPSE_RATE * 22.0  # middle of the layer from 8 m to the hub
    pressure = 100 * weather.pressure * np.exp(-GRAVITY * 92.0 / (GAS_CONSTANT * below))
    celsius = temperature - 273.15
    vapour = weather.relative_humidity / 100 * 611.2 * np.exp(17.62 * celsius / (243.12 + celsius))
    return (pressure - 0.378 * vapour) / (GAS_CONSTANT * temperature)


# --- turbine -----------------------------------------------------------------------------------


def make_curve() -> pd.DataFrame:
    """A generic pitch-regulated machine of our own: power and thrust in steps of 0.5 m/s."""
    speed = np.arange(3.0, 25.01, 0.5)
    coefficient = 0.455 * (1 - (2.55 / speed) ** 4)
    stream = (
        0.5
        * TURBINE["curve_air_density_kg_m3"]
        * np.pi
        / 4
        * TURBINE["rotor_diameter_m"] ** 2
        * speed**3
        / 1000
    )  # [kW]
    power = np.round(
        (TURBINE["rated_power_kw"] ** -9.0 + (coefficient * stream) ** -9.0) ** (-1 / 9)
    )
    # Thrust by momentum theory at a rotor that turns 80 % of what it takes into electric power.
    induction = np.linspace(0, 1 / 3, 20_001)
    taken = np.interp(power / stream / 0.80, 4 * induction * (1 - induction) ** 2, induction)
    thrust = 4 * taken * (1 - taken)
    thrust[: int(np.argmax(thrust))] = thrust.max()
    return pd.DataFrame(
        {"wind_speed_m_s": speed, "power_kw": power, "thrust_coefficient": thrust.round(3)}
    )


def turbine_mean_power(weather: Weather, density: Values) -> dict[str, float]:
    """True mean power of each turbine without wakes [kW], from every ten minutes of all years."""
    curve = make_curve()
    means = {}
    for place in STUDY["layout"]:
        speed = weather.speed_at(HUB_HEIGHT) * place["speed_factor"]
        higher = place["elevation_m"] - STUDY["site"]["elevation_m"]
        air = density * np.exp(-GRAVITY * higher / (GAS_CONSTANT * 281.0))
        normalised = speed * (air / TURBINE["curve_air_density_kg_m3"]) ** (1 / 3)
        power = np.interp(normalised, curve["wind_speed_m_s"], curve["power_kw"], left=0.0)
        means[place["name"]] = float(np.where(speed > TURBINE["cut_out_m_s"], 0.0, power).mean())
    return means
