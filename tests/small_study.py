"""A small, fast, seeded study folder for tests, and the few things tests do to it.

120 days of hourly mast data, three years of hourly reference data, three turbines. Site, machine
and numbers are invented. The steps are run here as the workbooks run them, without a kernel.
"""

from __future__ import annotations

import functools
import hashlib
import io
from collections.abc import Mapping
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
from scipy.signal import lfilter

from windkit.study.artifacts import save_artifact
from windkit.study.conditions import assess_conditions
from windkit.study.energy_yield import compute_yield
from windkit.study.folder import open_study
from windkit.study.long_term import correct_to_long_term
from windkit.study.measured import examine_record, load_record
from windkit.study.screening import screen
from windkit.study.steps import STEPS
from windkit.study.uncertainty import assess_uncertainty

__all__ = [
    "REFERENCE_PERIOD",
    "edit",
    "edit_line",
    "make_small_study",
    "run_steps",
    "traces",
]

WORKBOOKS = Path(__file__).parents[1] / "workbooks"
REFERENCE_PERIOD = ("2021-01-01", "2024-01-01")
_MAST_START, _MAST_DAYS = "2022-03-01", 120

SETTINGS = """\
schema_version = 1

[study]
title = "Three turbines on Cairn Hollow"
issue_date = 2026-11-30

[site]
name = "Cairn Hollow"
latitude_deg = 46.0
longitude_deg = -6.5
elevation_m = 300.0

[screening]
mean_wind_speed_m_s = 6.5
height_m = 50.0
weibull_k = 2.0
shear_exponent = 0.15
standard_uncertainty = 0.12
basis = "assumed"

[mast]
name = "Hollow mast"
files = ["data/mast.csv"]
time_column = "time"
utc_offset_h = 0.0
interval_min = 60
stamp = "start"
calm_below_m_s = 0.5
direction_reference = "true"
main_wind_speed = "speed_60"
main_wind_direction = "direction_58"

[[mast.channels]]
name = "speed_60"
column = "Speed60"
quantity = "wind_speed"
height_m = 60.0
unit = "m/s"

[[mast.channels]]
name = "speed_40"
column = "Speed40"
quantity = "wind_speed"
height_m = 40.0
unit = "m/s"

[[mast.channels]]
name = "direction_58"
column = "Direction58"
quantity = "wind_from_direction"
height_m = 58.0
unit = "degree"

[[mast.channels]]
name = "temperature_5"
column = "Temperature5"
quantity = "air_temperature"
height_m = 5.0
unit = "degC"

[[mast.channels]]
name = "pressure_5"
column = "Pressure5"
quantity = "air_pressure"
height_m = 5.0
unit = "hPa"

[[references]]
name = "Far Skerry"
kind = "station"
files = ["data/far_skerry.csv"]
time_column = "time"
utc_offset_h = 0.0
interval_min = 60
stamp = "start"
calm_below_m_s = 0.5
direction_reference = "true"
main_wind_speed = "speed_10"
main_wind_direction = "direction_10"

[[references.channels]]
name = "speed_10"
column = "Speed10"
quantity = "wind_speed"
height_m = 10.0
unit = "m/s"

[[references.channels]]
name = "direction_10"
column = "Direction10"
quantity = "wind_from_direction"
height_m = 10.0
unit = "degree"

[long_term]
reference = "Far Skerry"
method = "variance_ratio"
sector_count = 4
min_hours_per_sector = 100

[turbine]
name = "Invented 2 MW, 90 m rotor"
curve_file = "data/curve.csv"
curve_source = "made up for tests"
hub_height_m = 90.0
rotor_diameter_m = 90.0
rated_power_kw = 2000.0
cut_out_m_s = 25.0

[[layout]]
name = "T1"
easting_m = 0.0
northing_m = 0.0
elevation_m = 300.0

[[layout]]
name = "T2"
easting_m = 400.0
northing_m = 0.0
elevation_m = 300.0
speed_factor = 1.05
basis = "assumed"

[[layout]]
name = "T3"
easting_m = 800.0
northing_m = 0.0
elevation_m = 800.0
basis = "assumed"

[[losses]]
group = "turbine_interaction"
name = "wakes"
loss = 0.08
basis = "assumed"

[[losses]]
group = "availability"
name = "turbines"
loss = 0.03
varies = "yearly"
basis = "assumed"

[[losses]]
group = "electrical"
name = "cables"
loss = 0.02
basis = "assumed"

[[uncertainties]]
group = "measurement"
name = "cup"
of = "wind_speed"
standard_uncertainty = 0.02
basis = "assumed"

[[uncertainties]]
group = "plant_performance"
name = "power curve"
of = "energy"
standard_uncertainty = 0.04
basis = "assumed"
"""

CURVE = """\
# invented for tests
wind_speed_m_s,power_kw
3,40
4,100
5,200
6,350
7,560
8,830
9,1190
10,1630
11,1930
12,2000
25,2000
"""

LEDGER = "channel,from,to,count,rule,reason,threshold,decision,who,when\n"


def make_small_study(folder: Path, *, scatter: float = 0.8) -> Path:
    """Lay out the study.

    Parameters
    ----------
    folder : Path
        Folder to make; it must not exist.
    scatter : float
        Standard deviation of what the site does that the reference does not show [m/s]; with 0
        the mast at 60 m is exactly 1.1 times the reference.

    Returns
    -------
    Path
        The folder.
    """
    (folder / "data").mkdir(parents=True)
    mast, reference = _data(scatter)
    for name, text in {
        "study.toml": SETTINGS,
        "ledger.csv": LEDGER,
        "data/mast.csv": mast,
        "data/far_skerry.csv": reference,
        "data/curve.csv": CURVE,
    }.items():
        (folder / name).write_text(text, encoding="utf-8", newline="\n")
    (folder / "workbooks").mkdir()
    for step in STEPS:
        name = f"{step.workbook}.ipynb"
        text = (WORKBOOKS / name).read_text(encoding="utf-8")
        text = text.replace('\\"../data_demo\\"', '\\"..\\"')
        (folder / "workbooks" / name).write_text(text, encoding="utf-8")
    return folder


@functools.cache
def _data(scatter: float) -> tuple[str, str]:
    """Texts of the mast's and the reference's file."""
    rng = np.random.default_rng(20)
    hours = pd.date_range(*REFERENCE_PERIOD, freq="h", inclusive="left", name="time")
    # Weather that lasts: noise that remembers a day, turned into a Weibull of shape 2.
    slow = lfilter([np.sqrt(1 - 0.95**2)], [1, -0.95], rng.standard_normal(len(hours)))
    share = np.argsort(np.argsort(slow)) + 0.5
    speed = np.round(6.0 * np.sqrt(-np.log1p(-share / len(hours))) + 0.05, 2)
    direction = (
        np.round((240 + 60 * lfilter([0.3], [1, -0.95], rng.standard_normal(len(hours)))) % 360, 1)
        % 360
    )
    reference = pd.DataFrame({"Speed10": speed, "Direction10": direction}, index=hours)

    start = pd.Timestamp(_MAST_START)
    during = reference[start : start + pd.Timedelta(days=_MAST_DAYS) - pd.Timedelta(hours=1)]
    site = 1.1 * during["Speed10"] + scatter * rng.standard_normal(len(during))
    site = site.clip(lower=0.1)
    day = np.arange(len(during)) / 24
    mast = pd.DataFrame(
        {
            "Speed60": site,
            "Speed40": site * (40 / 60) ** 0.2,
            "Direction58": (during["Direction10"] + 12) % 360,
            "Temperature5": np.round(8 + 0.1 * day + 4 * np.sin(2 * np.pi * day), 1),
            "Pressure5": np.round(975 + 8 * np.sin(day / 3), 1),
        }
    )
    return _csv(mast), _csv(reference)


def _csv(frame: pd.DataFrame) -> str:
    out = io.StringIO()
    frame.to_csv(out, date_format="%Y-%m-%d %H:%M", lineterminator="\n")
    return out.getvalue()


def edit(file: Path, old: str, new: str) -> None:
    """Replace `old`, which must stand once in the file, by `new`."""
    text = file.read_text(encoding="utf-8")
    assert text.count(old) == 1, f"'{old}' stands {text.count(old)} times in {file.name}"
    file.write_text(text.replace(old, new), encoding="utf-8", newline="\n")


def edit_line(file: Path, number: int, new: str | None) -> None:
    """Put `new` in the place of a line, the first being 1; None takes the line out."""
    lines = file.read_text(encoding="utf-8").splitlines()
    lines[number - 1 : number] = [] if new is None else [new]
    file.write_text("\n".join(lines) + "\n", encoding="utf-8", newline="\n")


def run_steps(
    folder: Path, *steps: str, overrides: Mapping[str, Mapping[str, Any]] | None = None
) -> None:
    """Run steps and write their artifacts, as their workbooks do; all of them if none is named."""
    for step in steps or tuple(step.name for step in STEPS):
        study = open_study(folder, (overrides or {}).get(step))
        if step == "screen":
            outcome = screen(study).outcome
        elif step == "measure":
            outcome = examine_record(study, load_record(study)).outcome
        elif step == "long_term":
            outcome = correct_to_long_term(study).outcome
        elif step == "yield":
            outcome = compute_yield(study).outcome
        elif step == "uncertainty":
            outcome = assess_uncertainty(study).outcome
        else:
            outcome = assess_conditions(study).outcome
        save_artifact(study, outcome)


def traces(folder: Path) -> dict[str, str]:
    """Every file below a folder with the hash of its bytes, to see that nothing changed."""
    return {
        file.relative_to(folder).as_posix(): hashlib.sha256(file.read_bytes()).hexdigest()
        for file in sorted(folder.rglob("*"))
        if file.is_file()
    }
