"""From the mast to the hub: which sensors, which law, and a factor for each kind of weather.

A factor on speed is found for every sector, hour of the day and month from the mast's own
heights, and is then applied to the long-term series hour by hour. What the laws are is in
`kernels.profile`, `kernels.shear_classes` and `kernels.stability`; how far the profile can be
trusted, and how it is told, is in `hub`.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from windkit.kernels.frequency import sector_index
from windkit.kernels.profile import fit_roughness, fit_shear, log_law, power_law
from windkit.kernels.shear_classes import FALL_BACK_LEVELS, shear_by_class
from windkit.kernels.stability import (
    diabatic_log_law,
    gradient_richardson_number,
    stability_from_gradient_richardson,
)
from windkit.study.errors import StudyError
from windkit.study.hub_settings import ProfileSettings
from windkit.study.stations import ChannelSettings, StationSettings

__all__ = [
    "METHOD_NAMES",
    "Factors",
    "Kinds",
    "ProfileData",
    "factors",
    "kinds_of",
    "level_names",
    "profile_data",
]

Array = NDArray[np.float64]

#: What a person reads for each method of `[profile]`.
METHOD_NAMES = {
    "by_class": "power law by sector, hour and month",
    "single": "power law, one exponent",
    "log_law": "log law of neutral air by sector",
    "diabatic": "log law corrected for stability",
}
#: Sensors nearer in height than this are one height [m]; common practice.
_SAME_HEIGHT = 2.0
#: Least share of the main channel's values a height must have [1], our choice: a dead sensor
#: would otherwise leave too few intervals that all heights share.
_LEAST_SHARE = 0.5
#: Speed above which the order of two heights is judged [m/s]; common practice for ratios of cups.
_MOVING_SPEED = 4.0
#: Share of the time a profile is upside down above which two sensors look swapped [1], our choice.
_SWAPPED_SHARE = 0.6
#: z/L within which air counts as neutral for the roughness [1]; common practice.
_NEUTRAL = 0.05
#: Largest z/L the stable profile was measured at [1]: Dyer 1974.
_MOST_STABLE = 1.0
_HOURS, _MONTHS = 24, 12


@dataclass(frozen=True)
class Kinds:
    """Sector (-1 without a direction), hour 0 to 23 and month 1 to 12 of each record, sun time."""

    sector: NDArray[np.intp]
    hour: NDArray[np.intp]
    month: NDArray[np.intp]
    sector_count: int

    def only(self, chosen: NDArray[np.bool_]) -> Kinds:
        """Those of the records chosen."""
        return Kinds(self.sector[chosen], self.hour[chosen], self.month[chosen], self.sector_count)


@dataclass(frozen=True)
class ProfileData:
    """Speeds of the heights that speak for the profile, lowest first.

    Attributes
    ----------
    wind_speed : ndarray, shape (records, heights)
        Records in which every height has a believed speed [m/s].
    height : ndarray
        [m].
    channels : list of str
    kinds : Kinds
        Of the same records.
    inverse_obukhov_length : ndarray or None
        1/L [1/m] of the same records, where two thermometers hang at different heights.
    notes : list of str
        What was left out, and why.
    """

    wind_speed: Array
    height: Array
    channels: list[str]
    kinds: Kinds
    inverse_obukhov_length: Array | None
    notes: list[str]


@dataclass(frozen=True)
class Factors:
    """Speed at the target over speed at the height it is carried from, by class.

    Attributes
    ----------
    factor : ndarray, shape (sectors + 1, 24, 12)
        [1]; the last row is for records without a direction.
    level : ndarray of int, same shape
        Number in `FALL_BACK_LEVELS` the value comes from; -1 where the method has no classes.
    """

    factor: Array
    level: NDArray[np.intp]

    def of(self, kinds: Kinds) -> Array:
        """Factor of each record [1]."""
        return self.factor[kinds.sector, kinds.hour, kinds.month - 1]


def kinds_of(
    index: pd.DatetimeIndex,
    wind_direction: Array,
    *,
    longitude: float,
    interval: pd.Timedelta,
    sector_count: int,
) -> Kinds:
    """The class of each record, by the middle of its interval in local sun time.

    Sun time and not the clock: stability follows the sun.
    """
    start = index.as_unit("ns").asi8
    shift = interval / 2 + pd.Timedelta(hours=longitude / 15.0)
    local = (start + int(shift.value)).astype("datetime64[ns]")
    hours = (local.astype("datetime64[h]").astype(np.int64) % _HOURS).astype(np.intp)
    months = (local.astype("datetime64[M]").astype(np.int64) % _MONTHS + 1).astype(np.intp)
    return Kinds(sector_index(wind_direction, sector_count), hours, months, sector_count)


def profile_data(
    record: pd.DataFrame,
    mast: StationSettings,
    *,
    main: str,
    longitude: float,
    sector_count: int,
    accept_falling: bool = False,
) -> ProfileData:
    """Choose one speed a height, and the records in which all of them are believed.

    Raises
    ------
    StudyError
        If a profile is upside down most of the time.
    """
    chosen, notes = _channels(record, mast, main)
    speeds = record[[channel.name for channel in chosen]].to_numpy(dtype=np.float64)
    whole = ~np.isnan(speeds).any(axis=1)
    index = record.index
    assert isinstance(index, pd.DatetimeIndex)
    direction = (
        record[mast.main_wind_direction].to_numpy(dtype=np.float64)
        if mast.main_wind_direction in record
        else np.full(len(record), np.nan)
    )
    kinds = kinds_of(
        index,
        direction,
        longitude=longitude,
        interval=pd.Timedelta(minutes=mast.interval_min),
        sector_count=sector_count,
    )
    heights = np.array([channel.height_m for channel in chosen])
    data = ProfileData(
        wind_speed=speeds[whole],
        height=heights,
        channels=[channel.name for channel in chosen],
        kinds=kinds.only(whole),
        inverse_obukhov_length=_inverse_length(record, mast, speeds, heights, whole),
        notes=notes,
    )
    if not accept_falling:
        _refuse_upside_down(data)
    return data


def factors(
    data: ProfileData,
    choice: ProfileSettings,
    *,
    method: str,
    height: float,
    target_height: float,
) -> Factors:
    """Speed at one height over that at another, by the method, from the mast's own heights.

    Parameters
    ----------
    data : ProfileData
        At least two heights.
    choice : ProfileSettings
        Displacement height and fewest records of a class.
    method : str
        One of `METHOD_NAMES`.
    height, target_height : float
        From where to where [m].

    Raises
    ------
    StudyError
        If the log law has no roughness because wind does not rise with height, or there are no
        two thermometers.
    """
    d, v, z = choice.displacement_height_m, data.wind_speed, data.height
    shape = (data.kinds.sector_count + 1, _HOURS, _MONTHS)
    no_level = np.full(shape, -1, dtype=np.intp)
    if method == "single":
        exponent = float(fit_shear(v.mean(axis=0), z, displacement_height=d))
        one = float(power_law(1.0, height, target_height, exponent, displacement_height=d))
        return Factors(np.full(shape, one), no_level)
    if method == "log_law":
        roughness = _roughness_by_sector(data, choice)
        factor_by_sector = log_law(1.0, height, target_height, roughness, displacement_height=d)
        return Factors(
            np.broadcast_to(np.asarray(factor_by_sector)[:, None, None], shape).copy(), no_level
        )
    if method == "diabatic":
        at_both = _diabatic(data, choice, height, target_height)
        v, z = at_both, np.array([height, target_height])
    classes = shear_by_class(
        v,
        z,
        data.kinds.sector,
        data.kinds.hour,
        data.kinds.month,
        sector_count=data.kinds.sector_count,
        min_count=min(choice.min_count, len(v)),
        displacement_height=d,
    )
    factor = power_law(1.0, height, target_height, classes.shear_exponent, displacement_height=d)
    return Factors(np.asarray(factor), classes.level)


def level_names() -> list[str]:
    """What classes are told apart by, finest first, as a person reads it."""
    return [", ".join(names) if names else "all records" for names in FALL_BACK_LEVELS]


def _channels(
    record: pd.DataFrame, mast: StationSettings, main: str
) -> tuple[list[ChannelSettings], list[str]]:
    """One mean speed a height, lowest first: the main one at its own, else the first declared."""
    there = [c for c in mast.mean_speeds if c.name in record and record[c.name].notna().any()]
    order = sorted(there, key=lambda c: (c.name != main, -c.height_m))
    taken: list[ChannelSettings] = []
    notes: list[str] = []
    known = int(record[main].notna().sum())
    for channel in order:
        beside = next((t for t in taken if abs(t.height_m - channel.height_m) < _SAME_HEIGHT), None)
        share = int(record[channel.name].notna().sum()) / known
        if beside is not None:
            notes.append(
                f"{channel.name} hangs at the height of {beside.name}; one of two sensors at a "
                f"height speaks for the profile, and that is {beside.name}."
            )
        elif share < _LEAST_SHARE:
            notes.append(
                f"{channel.name} has {share:.0%} of the values of {main} and is left out of the "
                "profile, since all heights must describe the same hours."
            )
        else:
            taken.append(channel)
    return sorted(taken, key=lambda c: c.height_m), notes


def _refuse_upside_down(data: ProfileData) -> None:
    for lower in range(data.height.size - 1):
        below, above = data.wind_speed[:, lower], data.wind_speed[:, lower + 1]
        moving = np.maximum(below, above) >= _MOVING_SPEED
        if not moving.any():
            continue
        share = float(np.mean(above[moving] < below[moving]))
        if share > _SWAPPED_SHARE:
            names = data.channels[lower : lower + 2]
            raise StudyError.of(
                key=f"mast.channels ({names[1]} and {names[0]})",
                met=f"{names[1]} at {data.height[lower + 1]:g} m is below {names[0]} at "
                f"{data.height[lower]:g} m in {share:.0%} of the intervals above "
                f"{_MOVING_SPEED:g} m/s",
                rule="wind rises with height most of the time; two swapped sensors or heights "
                "look like this",
                remedy="compare both with the mast's drawing and change column or height_m; if "
                "the site is a steep crest and the record is right, write "
                "accept_falling_profile = true in [profile]",
            )


def _roughness_by_sector(data: ProfileData, choice: ProfileSettings) -> Array:
    """Roughness length by sector, the last for no direction; thin or falling ones as all [m]."""
    d, sectors = choice.displacement_height_m, data.kinds.sector_count
    everywhere = float(
        fit_roughness(data.wind_speed.mean(axis=0), data.height, displacement_height=d)
    )
    if not _usable(everywhere, data.height, d):
        raise StudyError.of(
            key="profile.method",
            met='it is "log_law", but the mean wind does not rise with height as that law does',
            rule="the log law has a roughness length only where wind rises with height",
            remedy='write method = "by_class"',
        )
    found = np.full(sectors + 1, everywhere)
    for sector in range(sectors):
        inside = data.kinds.sector == sector
        if np.count_nonzero(inside) >= choice.min_count:
            mean = data.wind_speed[inside].mean(axis=0)
            own = float(fit_roughness(mean, data.height, displacement_height=d))
            if _usable(own, data.height, d):
                found[sector] = own
    return found


def _usable(roughness: float, height: Array, displacement: float) -> bool:
    return bool(0.0 < roughness < 0.5 * (float(height.min()) - displacement))


def _inverse_length(
    record: pd.DataFrame,
    mast: StationSettings,
    speeds: Array,
    heights: Array,
    whole: NDArray[np.bool_],
) -> Array | None:
    """1/L [1/m] from the lowest and the highest thermometer, NaN where it has no answer."""
    thermometers = sorted(
        (
            channel
            for channel in mast.channels
            if channel.quantity == "air_temperature"
            and channel.statistic == "mean"
            and channel.name in record
        ),
        key=lambda channel: channel.height_m,
    )
    if heights.size < 2 or len(thermometers) < 2:
        return None
    low, high = thermometers[0], thermometers[-1]
    if high.height_m - low.height_m < _SAME_HEIGHT or low.height_m <= 0:
        return None
    v = speeds[whole]
    exponent = fit_shear(v, heights)
    # Speeds where the thermometers hang, by the record's own profile.
    v_low, v_high = (
        power_law(v[:, -1], heights[-1], channel.height_m, np.nan_to_num(exponent))
        for channel in (low, high)
    )
    richardson = gradient_richardson_number(
        record[low.name].to_numpy(dtype=np.float64)[whole],
        record[high.name].to_numpy(dtype=np.float64)[whole],
        v_low,
        v_high,
        low.height_m,
        high.height_m,
    )
    middle = np.sqrt(low.height_m * high.height_m)
    return np.asarray(stability_from_gradient_richardson(richardson)) / middle


def _diabatic(
    data: ProfileData, choice: ProfileSettings, height: float, target_height: float
) -> Array:
    """Speeds at both heights, record by record; where stability is unknown, by the power law."""
    inverse = data.inverse_obukhov_length
    if inverse is None:
        raise StudyError.of(
            key="profile.method",
            met='it is "diabatic", but the mast has no two thermometers at different heights',
            rule="stability comes from a temperature difference",
            remedy='write method = "by_class", which learns the nights from the speeds',
        )
    d = choice.displacement_height_m
    column = int(np.argmin(np.abs(data.height - height)))
    v = data.wind_speed[:, column]
    neutral = np.abs(inverse) * data.height[-1] < _NEUTRAL
    calm_free = ProfileData(
        data.wind_speed[neutral], data.height, data.channels, data.kinds.only(neutral), None, []
    )
    if np.count_nonzero(neutral) < choice.min_count:
        calm_free = data
    roughness = _roughness_by_sector(calm_free, choice)[data.kinds.sector]
    capped = np.minimum(inverse, _MOST_STABLE / target_height)
    carried = diabatic_log_law(v, height, target_height, roughness, capped, displacement_height=d)
    exponent = fit_shear(data.wind_speed, data.height, displacement_height=d)
    plain = power_law(v, height, target_height, np.nan_to_num(exponent), displacement_height=d)
    return np.stack([v, np.where(np.isnan(carried), plain, carried)], axis=1)
