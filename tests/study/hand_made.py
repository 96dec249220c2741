"""Artifacts written by hand, so that a later step is tested on figures of a test's own."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pandas as pd

from windkit.study.artifacts import Outcome, Row, save_artifact
from windkit.study.folder import open_study

__all__ = ["save_long_term", "save_measured", "save_yield"]


def rows(values: dict[str, float | str]) -> list[Row]:
    return [Row(key, key, value, "", "by hand") for key, value in values.items()]


def save_measured(
    folder: Path, *, exponent: float = 0.0, record: pd.DataFrame | None = None
) -> None:
    """A campaign at 60 m with that shear exponent; a record of one day unless one is given."""
    if record is None:
        index = pd.date_range("2022-03-01", periods=24, freq="h", tz="UTC", name="time")
        record = pd.DataFrame({"speed_60": np.full(24, 8.0)}, index=index)
    values = {
        "measured.height_m": 60.0,
        "measured.shear_exponent": exponent,
        "measured.channel": "speed_60",
        "measured.mean_speed_m_s": 8.0,
        "measured.recovery": 1.0,
    }
    main = pd.DataFrame(
        {"wind_speed": record["speed_60"], "wind_direction": 0.0, "basis": "speed_60"}
    )
    tables = {"record": record, "main": main}
    save_artifact(open_study(folder), Outcome("measure", rows(values), tables))


def save_long_term(
    folder: Path,
    speeds: list[float] | np.ndarray = (8.0,),
    *,
    standard_uncertainty: float = 0.0,
    yearly_variability: float = 0.0,
) -> None:
    """A long-term series of those hourly speeds."""
    index = pd.date_range("2021-01-01", periods=len(speeds), freq="h", tz="UTC", name="time")
    series = pd.DataFrame(
        {"wind_speed": np.asarray(speeds, dtype=float), "wind_direction": 0.0}, index=index
    )
    values = {
        "long_term.standard_uncertainty": standard_uncertainty,
        "long_term.yearly_variability": yearly_variability,
    }
    save_artifact(open_study(folder), Outcome("long_term", rows(values), {"series": series}))


def save_yield(folder: Path, *, p50: float, sensitivity: float, way_up: float = 0.0) -> None:
    """A net energy [MWh/year], what one per cent of speed is worth, how sure the way up is."""
    values = {
        "energy.net_p50_mwh_per_year": p50,
        "energy.sensitivity": sensitivity,
        "hub.mean_speed_m_s": 8.0,
        "hub.extrapolation_standard_uncertainty": way_up,
    }
    save_artifact(open_study(folder), Outcome("yield", rows(values)))
