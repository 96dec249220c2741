"""Channels whose declared unit cannot be right: named before anything is built on them.

A pressure in hPa that is declared as Pa, or a temperature in Fahrenheit declared as Celsius, would
be masked value by value and leave the study without air. Here the whole channel is looked at, and
the unit it looks like is said. Single odd values are for the checks.
"""

from __future__ import annotations

import numpy as np

from windkit.kernels.units import from_si, to_si
from windkit.study.errors import StudyError
from windkit.study.reading import Reading
from windkit.study.stations import ChannelSettings

__all__ = ["refuse_unit_slips"]

#: Fewest values a channel is judged on, our choice.
_LEAST_VALUES = 24
#: Medians that air near the ground can have: pressure from about 5500 m up to the sea [Pa], and
#: temperature [K] between the Antarctic plateau and the hottest deserts, a yearly mean of 34 degC
#: (Dallol, from memory). Common practice.
_PRESSURES = (50_000.0, 109_000.0)
_TEMPERATURES = (213.15, 309.15)
#: What the hottest hours stay below [K]: 52 degC at the 99 % value; common practice.
_HOTTEST = 325.15
_TRIED = {
    "air_pressure": ("hPa", "Pa", "kPa", "mmHg", "inHg"),
    "air_temperature": ("degC", "degF", "K"),
}


def refuse_unit_slips(reading: Reading) -> None:
    """Refuse a channel of temperature, pressure or humidity in another unit than declared.

    Raises
    ------
    StudyError
        At the first such channel, with the unit it looks like.
    """
    for channel in reading.settings.channels:
        if channel.statistic != "mean" or channel.quantity not in (*_TRIED, "relative_humidity"):
            continue
        values = reading.frame[channel.name].to_numpy(dtype=np.float64)
        values = values[np.isfinite(values)]
        if values.size >= _LEAST_VALUES:
            _judge(reading.settings.name, channel, values)


def _judge(station: str, channel: ChannelSettings, values: np.ndarray) -> None:
    if channel.quantity == "relative_humidity":
        if float(np.median(values)) > 1.5:
            raise _slip(station, channel, values, "%", "a fraction between 0 and 1")
        return
    rule = (
        "air near the ground presses with 500 to 1090 hPa"
        if channel.quantity == "air_pressure"
        else "half of all hours lie between -60 and 36 degC, and the hottest stay below 52"
    )
    if _plausible(channel.quantity, values):
        return
    written = from_si(values, channel.unit, channel.quantity)
    fits = next(
        (
            unit
            for unit in _TRIED[channel.quantity]
            if _plausible(channel.quantity, to_si(written, unit, channel.quantity))
        ),
        None,
    )
    # What fits no unit is not a slip of the unit; the checks mask it.
    if fits is not None:
        raise _slip(station, channel, values, fits, rule)


def _plausible(quantity: str, values: np.ndarray) -> bool:
    median = float(np.median(values))
    if quantity == "air_pressure":
        return _PRESSURES[0] <= median <= _PRESSURES[1]
    low, high = _TEMPERATURES
    return low <= median <= high and float(np.quantile(values, 0.99)) <= _HOTTEST


def _slip(
    station: str, channel: ChannelSettings, values: np.ndarray, unit: str, rule: str
) -> StudyError:
    median = float(np.median(from_si(values, channel.unit, channel.quantity)))
    return StudyError.of(
        key=f"channels ({channel.name}).unit",
        met=f"{station}: it is '{channel.unit}', and half of the values of column "
        f"'{channel.column}' lie above {median:.4g}",
        rule=rule,
        remedy=f'the values look like {unit}: write unit = "{unit}"',
    )
