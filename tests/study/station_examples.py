"""Small invented stations for the tests of reading, checks and records."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd

from windkit.study.reading import Reading
from windkit.study.stations import StationSettings

HEADER = "time,Spd80,Dir78,T5"
ROWS = (
    "2026-01-01 00:10,5.0,350,1.5",
    "2026-01-01 00:20,6.0,10,1.4",
    "2026-01-01 00:30,0.3,20,",
)


def settings(**changes: Any) -> StationSettings:
    """A mast of three channels, ten-minute stamps at the end, one hour east of Greenwich."""
    values: dict[str, Any] = {
        "name": "Skerra",
        "files": ["mast.csv"],
        "time_column": "time",
        "utc_offset_h": 1.0,
        "interval_min": 10.0,
        "stamp": "end",
        "calm_below_m_s": 0.5,
        "direction_reference": "true",
        "main_wind_speed": "speed_80",
        "main_wind_direction": "direction_78",
        "channels": [
            channel("speed_80", "Spd80", "wind_speed", "m/s", 80.0),
            channel("direction_78", "Dir78", "wind_from_direction", "deg", 78.0),
            channel("temperature_5", "T5", "air_temperature", "degC", 5.0),
        ],
    }
    values.update(changes)
    return StationSettings.model_validate(values)


def channel(
    name: str, column: str, quantity: str, unit: str, height_m: float, **more: Any
) -> dict[str, Any]:
    """One channel as `study.toml` writes it."""
    first = {"name": name, "column": column, "quantity": quantity, "unit": unit}
    return {**first, "height_m": height_m, **more}


def write(folder: Path, *rows: str, header: str = HEADER, name: str = "mast.csv") -> None:
    """Write a text file of that header and those rows."""
    (folder / name).write_text("\n".join([header, *rows]) + "\n", encoding="utf-8")


def reading_of(
    columns: dict[str, np.ndarray],
    station: StationSettings,
    start: str = "2026-01-01",
) -> Reading:
    """A reading made of columns in memory, one row an interval from `start` (UTC)."""
    count = len(next(iter(columns.values())))
    step = pd.Timedelta(minutes=station.interval_min)
    index = pd.date_range(start, periods=count, freq=step, tz="UTC", name="time").as_unit("ns")
    frame = pd.DataFrame(columns, index=index, dtype=float)
    nothing = pd.DataFrame(columns=["file", "line", "stamp", "reason"])
    return Reading(station, frame, count, count, nothing, {}, count)
