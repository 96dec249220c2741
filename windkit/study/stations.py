"""What a study says about a station: its files, its clock and what each column is.

Here are the shapes of `[mast]` and `[[references]]` in `study.toml`. What cannot be known from a
file alone (offset from UTC, interval, side of the stamp, north, calm rule) is required, never
guessed. The reading itself is in `reading`; the rest of `study.toml` in `settings`.
"""

from __future__ import annotations

import datetime as dt
import itertools
from typing import Literal

from pydantic import BaseModel, ConfigDict, Field, field_validator, model_validator

from windkit.kernels.units import to_si

__all__ = [
    "DIRECTION",
    "SPEEDS",
    "ChannelSettings",
    "Quantity",
    "SensorPeriod",
    "StationSettings",
    "Statistic",
]

#: Quantities by their CF standard names.
Quantity = Literal[
    "wind_speed",
    "wind_speed_of_gust",
    "wind_from_direction",
    "air_temperature",
    "air_pressure",
    "relative_humidity",
    "dew_point_temperature",
    "air_density",
]
#: What a column holds of the samples of one interval.
Statistic = Literal["mean", "sd", "min", "max"]
DIRECTION = "wind_from_direction"
SPEEDS = ("wind_speed", "wind_speed_of_gust")


class _Section(BaseModel):
    """A table of the file: unknown keys and texts in place of numbers are refused."""

    model_config = ConfigDict(extra="forbid", frozen=True, strict=True, allow_inf_nan=False)


class _Calibration(_Section):
    """Slope and offset typed into the logger, and those of the certificate.

    Both turn the sensor's output into the channel's unit. When both are given the speed is
    recomputed as (recorded - applied_offset) / applied_slope * certificate_slope +
    certificate_offset; a standard deviation takes the ratio of the slopes only.
    """

    applied_slope: float | None = None
    applied_offset: float | None = None
    certificate_slope: float | None = None
    certificate_offset: float | None = None

    @model_validator(mode="after")
    def _complete(self) -> _Calibration:
        for kind in ("applied", "certificate"):
            slope = getattr(self, f"{kind}_slope")
            offset = getattr(self, f"{kind}_offset")
            if (slope is None) != (offset is None):
                raise ValueError(
                    f"{kind}_slope and {kind}_offset belong together; a missing one is not 1 or 0"
                )
            if slope is not None and slope <= 0:
                raise ValueError(f"{kind}_slope is {slope:g}; a slope is above zero")
        if self.certificate_slope is not None and self.applied_slope is None:
            raise ValueError(
                "a certificate is given without what the logger applied; write applied_slope and "
                "applied_offset (1 and 0 if the column holds the sensor's raw output)"
            )
        return self

    @property
    def is_recomputed(self) -> bool:
        """Whether both calibrations are given, so that the values are recomputed."""
        return self.certificate_slope is not None


class SensorPeriod(_Calibration):
    """One sensor at a channel, from a date until the next period begins."""

    date_from: dt.datetime | dt.date
    serial: str = ""

    @field_validator("date_from")
    @classmethod
    def _without_zone(cls, value: dt.datetime | dt.date) -> dt.datetime | dt.date:
        if isinstance(value, dt.datetime) and value.tzinfo is not None:
            raise ValueError("date_from is on the file's own clock; leave the zone out")
        return value


class ChannelSettings(_Calibration):
    """One column of a station's files."""

    name: str = Field(pattern=r"^[A-Za-z][A-Za-z0-9_]*$", max_length=60)
    column: str = Field(default="", description="header of the column")
    eastward_column: str = Field(default="", description="instead: both components of the wind")
    northward_column: str = ""
    quantity: Quantity
    statistic: Statistic = "mean"
    height_m: float = Field(ge=0, le=400)
    unit: str
    boom_bearing_deg: float | None = Field(default=None, ge=0, lt=360)
    lowest: float | None = None
    highest: float | None = None
    sensors: list[SensorPeriod] = Field(default_factory=list)

    @field_validator("name")
    @classmethod
    def _not_taken(cls, value: str) -> str:
        if value in {"time", "all"}:
            raise ValueError(f"'{value}' is taken; choose another name")
        return value

    @model_validator(mode="after")
    def _hangs_together(self) -> ChannelSettings:
        self._check_columns()
        # Its message lists the accepted units; components of a direction are speeds.
        to_si([0.0], self.unit, "eastward_wind" if self.has_components else self.quantity)
        if self.lowest is not None and self.highest is not None and self.lowest >= self.highest:
            raise ValueError(f"lowest {self.lowest:g} is not below highest {self.highest:g}")
        if self.sensors and self.applied_slope is not None:
            raise ValueError("slopes stand either on the channel or on its sensors, not on both")
        dates = [_as_datetime(period.date_from) for period in self.sensors]
        if any(later <= earlier for earlier, later in itertools.pairwise(dates)):
            raise ValueError("sensors stand in the order of their date_from, each once")
        if self.is_direction and self.certificate_slope is not None:
            raise ValueError("a direction has no certificate slope; correct north by its offset")
        return self

    def _check_columns(self) -> None:
        if bool(self.eastward_column) != bool(self.northward_column):
            raise ValueError("eastward_column and northward_column belong together")
        if bool(self.column) == self.has_components:
            raise ValueError(
                "write either column, or eastward_column and northward_column for a wind that "
                "comes in components"
            )
        if self.has_components:
            if self.quantity not in {"wind_speed", DIRECTION} or self.statistic != "mean":
                raise ValueError("components give a mean wind_speed or a mean wind_from_direction")
            if self.applied_slope is not None or self.sensors:
                raise ValueError("components have no cup calibration")

    @property
    def has_components(self) -> bool:
        """Whether the channel comes from an eastward and a northward column."""
        return bool(self.eastward_column)

    @property
    def columns(self) -> tuple[str, ...]:
        """Headers the channel is read from."""
        if self.has_components:
            return (self.eastward_column, self.northward_column)
        return (self.column,)

    @property
    def is_direction(self) -> bool:
        """Whether values are bearings (a mean, smallest or largest direction, not a spread)."""
        return self.quantity == DIRECTION and self.statistic != "sd"

    @property
    def is_mean_speed(self) -> bool:
        """Whether the channel is a mean wind speed."""
        return self.quantity == "wind_speed" and self.statistic == "mean"


class StationSettings(_Section):
    """A mast, another station or a grid point: files, clock, columns."""

    name: str = Field(min_length=1)
    files: list[str] = Field(min_length=1)
    sheet: str | None = Field(default=None, description="of a workbook; the first if left out")
    encoding: str = "utf-8"
    delimiter: str = Field(default=",", min_length=1, max_length=10)
    decimal: Literal[".", ","] = "."
    skip_rows: int = Field(default=0, ge=0)
    skip_rows_after_header: int = Field(default=0, ge=0)
    time_column: str = Field(min_length=1)
    time_format: str | None = None
    utc_offset_h: float = Field(ge=-14, le=14)
    interval_min: float = Field(gt=0, le=1440)
    stamp: Literal["start", "end"]
    calm_below_m_s: float = Field(ge=0, le=3)
    direction_reference: Literal["true", "magnetic"] | None = None
    declination_deg: float | None = Field(default=None, ge=-180, le=180)
    missing: list[str] = Field(default_factory=list)
    repeated_stamps: Literal["refuse", "keep_first"] = "refuse"
    unsorted_stamps: Literal["refuse", "sort"] = "refuse"
    broken_rows: Literal["refuse", "set_aside"] = "refuse"
    daylight_saving_seams: Literal["refuse", "accept"] = "refuse"
    use_from: dt.datetime | dt.date | None = None
    use_until: dt.datetime | dt.date | None = None
    main_wind_speed: str
    main_wind_direction: str | None = None
    channels: list[ChannelSettings] = Field(min_length=1)

    @field_validator("delimiter")
    @classmethod
    def _one_character(cls, value: str) -> str:
        if value != "whitespace" and len(value) != 1:
            raise ValueError(
                f'delimiter is "{value}"; write one character, such as "," or "\\t", or '
                '"whitespace" for columns set apart by spaces'
            )
        return value

    @model_validator(mode="after")
    def _hangs_together(self) -> StationSettings:
        _refuse_repeats([channel.name for channel in self.channels], "name")
        _refuse_repeats([channel.column for channel in self.channels if channel.column], "column")
        if self.time_column in self.columns:
            raise ValueError(f"column '{self.time_column}' is both the time and a channel")
        if self.decimal == self.delimiter:
            raise ValueError("decimal and delimiter are both ','; they must differ")
        self._check_main("main_wind_speed", self.main_wind_speed, "wind_speed")
        if self.main_wind_direction is not None:
            self._check_main("main_wind_direction", self.main_wind_direction, DIRECTION)
        if any(channel.is_direction for channel in self.channels):
            if self.direction_reference is None:
                raise ValueError(
                    'direction_reference is missing; write "true" or "magnetic" for the north '
                    "the vane was set to"
                )
            if self.direction_reference == "magnetic" and self.declination_deg is None:
                raise ValueError(
                    "declination_deg is missing; directions from magnetic north need the "
                    "declination of the place and date, east positive"
                )
        if self.direction_reference == "true" and self.declination_deg is not None:
            raise ValueError('declination_deg is only for direction_reference = "magnetic"')
        return self

    def _check_main(self, key: str, name: str, quantity: str) -> None:
        names = [c.name for c in self.channels if c.quantity == quantity and c.statistic == "mean"]
        if name not in names:
            raise ValueError(
                f"{key} is '{name}', but the channels with a mean {quantity} are "
                f"{', '.join(names) or 'none'}"
            )

    @property
    def columns(self) -> list[str]:
        """Headers of all channels, each once, in their order."""
        return list(dict.fromkeys(name for each in self.channels for name in each.columns))

    def channel(self, name: str) -> ChannelSettings:
        """The channel of that name."""
        for channel in self.channels:
            if channel.name == name:
                return channel
        raise KeyError(name)

    @property
    def mean_speeds(self) -> list[ChannelSettings]:
        """Channels with a mean wind speed, highest first."""
        found = [channel for channel in self.channels if channel.is_mean_speed]
        return sorted(found, key=lambda channel: -channel.height_m)

    @property
    def directions(self) -> list[ChannelSettings]:
        """Channels with a mean wind direction, highest first."""
        found = [c for c in self.channels if c.is_direction and c.statistic == "mean"]
        return sorted(found, key=lambda channel: -channel.height_m)


def _as_datetime(value: dt.datetime | dt.date) -> dt.datetime:
    if isinstance(value, dt.datetime):
        return value
    return dt.datetime(value.year, value.month, value.day)


def _refuse_repeats(names: list[str], key: str) -> None:
    for name in names:
        if names.count(name) > 1:
            raise ValueError(f"channels: {key} '{name}' stands more than once; each is read once")
