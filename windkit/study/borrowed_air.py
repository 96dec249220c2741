"""Air from the reference: brought to the mast's level, and held against the mast's own.

Here the reference's temperature, pressure and humidity become what the mast's sensors would have
read, learned from the hours both have, and density is computed from sensors at any height. What
is filled with it, and in which order, is in `hub_air`.
"""

from __future__ import annotations

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from windkit.kernels.air import (
    moist_air_density,
    pressure_at_height,
    standard_atmosphere,
    temperature_at_height,
)
from windkit.study.settings import ReferenceSettings, Settings
from windkit.study.stations import ChannelSettings, StationSettings

__all__ = [
    "HUMIDITY_WITHOUT_SENSOR",
    "at_mast_level",
    "cross_check",
    "density_by_step",
    "highest_channel",
    "hourly",
    "reference_air",
    "reference_density",
    "reference_with_air",
]

Array = NDArray[np.float64]

#: Humidity where none is measured [1]; common practice. Wet or dry air instead moves the density
#: by 0.3 % at 10 degC.
HUMIDITY_WITHOUT_SENSOR = 0.5
#: Fewest hours site and reference must share for one to fill the other, our choice: a month.
_LEAST_SHARED_HOURS = 720


def density_by_step(
    temperature: Array,
    pressure: Array,
    relative_humidity: Array,
    *,
    temperature_height: float,
    pressure_height: float,
    hub_height: float,
) -> tuple[Array, Array, Array]:
    """Density, temperature and pressure at the hub from sensors at other heights.

    Parameters
    ----------
    temperature, pressure, relative_humidity : ndarray
        [K], [Pa], [1], NaN where unknown.
    temperature_height, pressure_height, hub_height : float
        [m above ground].

    Returns
    -------
    air_density, temperature, pressure : ndarray
        At hub height [kg/m3], [K], [Pa].
    """
    at_hub = temperature_at_height(temperature, hub_height - temperature_height)
    at_barometer = temperature_at_height(temperature, pressure_height - temperature_height)
    p = pressure_at_height(pressure, at_barometer, hub_height - pressure_height)
    return moist_air_density(at_hub, p, relative_humidity), at_hub, p


def reference_with_air(settings: Settings) -> ReferenceSettings | None:
    """The reference whose air is borrowed: the one the study chose, else that with most sensors."""
    wanted = ("air_temperature", "air_pressure", "relative_humidity")

    def sensors(station: ReferenceSettings) -> int:
        has = {c.quantity for c in station.channels if c.statistic == "mean"}
        return len(has & set(wanted)) if has & set(wanted[:2]) else 0

    chosen = settings.long_term.reference
    if chosen is not None and sensors(settings.reference(chosen)):
        return settings.reference(chosen)
    best = max(settings.references, key=sensors)
    return best if sensors(best) else None


def reference_air(frame: pd.DataFrame, station: ReferenceSettings) -> pd.DataFrame:
    """Hourly temperature, pressure and humidity of a reference [K], [Pa], [1], where it has them.

    Parameters
    ----------
    frame : DataFrame
        Hourly record.
    station : ReferenceSettings
        The channels.
    """
    found = {
        quantity: channel
        for quantity in ("air_temperature", "air_pressure", "relative_humidity")
        if (channel := highest_channel(station, quantity, frame)) is not None
    }
    return pd.DataFrame({name: frame[channel.name] for name, channel in found.items()})


def at_mast_level(
    own: pd.Series,
    known: pd.DataFrame,
    quantity: str,
    place: ReferenceSettings,
    settings: Settings,
    height: float,
) -> pd.Series:
    """The reference's hours brought to the mast's sensor; empty where that cannot be done.

    Learned from the hours both have: temperature and humidity by a difference for each month,
    pressure by a ratio. Without such hours, by the elevations of both, where they are stated.
    """
    empty = pd.Series(dtype=float, index=pd.DatetimeIndex([], tz="UTC"))
    if quantity not in known:
        return empty
    theirs = known[quantity].dropna()
    if theirs.empty:
        return empty
    assert isinstance(own.index, pd.DatetimeIndex)
    mine = hourly(own.index, own.to_numpy())
    both = pd.DataFrame({"mine": mine, "theirs": theirs}).dropna()
    assert isinstance(theirs.index, pd.DatetimeIndex)
    if len(both) >= _LEAST_SHARED_HOURS:
        if quantity == "air_pressure":
            return theirs * float(both["mine"].mean() / both["theirs"].mean())
        assert isinstance(both.index, pd.DatetimeIndex)
        gap = both["mine"] - both["theirs"]
        by_month = gap.groupby(both.index.month).mean()
        offset = by_month.reindex(range(1, 13)).fillna(float(gap.mean())).to_numpy()
        return theirs + offset[theirs.index.month.to_numpy() - 1]
    if place.elevation_m is None or quantity == "relative_humidity":
        return empty
    channel = next(
        each
        for each in sorted(place.channels, key=lambda each: -each.height_m)
        if each.quantity == quantity and each.statistic == "mean"
    )
    climb = settings.site.elevation_m + height - place.elevation_m - channel.height_m
    if quantity == "air_temperature":
        return pd.Series(np.asarray(temperature_at_height(theirs, climb)), index=theirs.index)
    warm = known["air_temperature"].reindex(theirs.index) if "air_temperature" in known else None
    standard = float(standard_atmosphere(place.elevation_m)[0])
    kelvin = warm.fillna(standard) if warm is not None else np.full(len(theirs), standard)
    return pd.Series(np.asarray(pressure_at_height(theirs, kelvin, climb)), index=theirs.index)


def reference_density(
    levels: dict[str, pd.Series], heights: dict[str, float], hub: float
) -> pd.Series:
    """Hourly density at the hub from the reference alone, brought to the mast's level."""
    together = pd.DataFrame(
        {name: levels[name] for name in ("air_temperature", "air_pressure")}
    ).dropna()
    if together.empty:
        return pd.Series(dtype=float, index=pd.DatetimeIndex([], tz="UTC"))
    humid = levels["relative_humidity"].reindex(together.index)
    density, _, _ = density_by_step(
        together["air_temperature"].to_numpy(),
        together["air_pressure"].to_numpy(),
        humid.fillna(HUMIDITY_WITHOUT_SENSOR).clip(0.0, 1.0).to_numpy(),
        temperature_height=heights["air_temperature"],
        pressure_height=heights["air_pressure"],
        hub_height=hub,
    )
    return pd.Series(density, index=together.index)


def cross_check(
    settings: Settings, ours: pd.Series, known: pd.DataFrame, place: ReferenceSettings
) -> pd.DataFrame:
    """The reference's density in the same hours, by month, and the mast's over it.

    With both elevations the reference is carried to the hub and the ratio should be one. Without,
    the mean ratio brings the reference to the hub: what is left should not move over the months.
    """
    columns = ["month", "reference_air_density_kg_m3", "mast_over_reference"]
    if not {"air_temperature", "air_pressure"} <= set(known.columns):
        return pd.DataFrame({name: pd.Series(dtype=float) for name in columns})
    both = known.dropna(subset=["air_temperature", "air_pressure"])
    both = both[both.index.isin(ours.index)]
    if both.empty:
        return pd.DataFrame({name: pd.Series(dtype=float) for name in columns})
    heights = {
        quantity: max(
            each.height_m
            for each in place.channels
            if each.quantity == quantity and each.statistic == "mean"
        )
        for quantity in ("air_temperature", "air_pressure")
    }
    hub = settings.turbine.hub_height_m
    target = (
        settings.site.elevation_m + hub - place.elevation_m
        if place.elevation_m is not None
        else heights["air_pressure"]
    )
    humid = both.reindex(columns=["relative_humidity"])["relative_humidity"]
    wet = humid.fillna(HUMIDITY_WITHOUT_SENSOR).clip(0.0, 1.0).to_numpy(dtype=float)
    density, _, _ = density_by_step(
        both["air_temperature"].to_numpy(),
        both["air_pressure"].to_numpy(),
        wet,
        temperature_height=heights["air_temperature"],
        pressure_height=heights["air_pressure"],
        hub_height=target,
    )
    pairs = pd.DataFrame({"theirs": density, "ours": ours.reindex(both.index)}, index=both.index)
    assert isinstance(pairs.index, pd.DatetimeIndex)
    means = pairs.groupby(pairs.index.month).mean()
    ratio = means["ours"] / means["theirs"]
    at_hub = means["theirs"]
    if place.elevation_m is None:
        # Its level is unknown: the mean ratio brings it up, and months may still part.
        at_hub, ratio = at_hub * ratio.mean(), ratio / ratio.mean()
    return pd.DataFrame(
        {
            "month": means.index,
            "reference_air_density_kg_m3": at_hub.to_numpy(),
            "mast_over_reference": ratio.to_numpy(),
        }
    )


def highest_channel(
    station: StationSettings, quantity: str, frame: pd.DataFrame
) -> ChannelSettings | None:
    """The highest channel of a quantity's means that holds a value."""
    found = [
        channel
        for channel in station.channels
        if channel.quantity == quantity
        and channel.statistic == "mean"
        and channel.name in frame
        and frame[channel.name].notna().any()
    ]
    return max(found, key=lambda channel: channel.height_m, default=None)


def hourly(index: pd.DatetimeIndex, values: Array) -> pd.Series:
    """Hourly means of what is known."""
    series = pd.Series(values, index=index)
    return series.groupby(index.floor("h")).mean().dropna()
