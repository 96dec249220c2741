"""Speed of the way up to the hub, and that it grows with the number of rows: python this file.

1. Two years of ten-minute data at four heights: time-varying shear, the height left out, and air
   density by step. At most 0.5 s.
2. Twenty years of hours carried to the hub with density, and their frequency table. At most 1 s.
"""

from __future__ import annotations

import time
from collections.abc import Callable

import numpy as np
import pandas as pd

from windkit.kernels.frequency import frequency_table
from windkit.study.borrowed_air import density_by_step
from windkit.study.hub_profile import ProfileData, factors, kinds_of
from windkit.study.hub_settings import ProfileSettings
from windkit.study.left_out_height import leave_top_height_out

HEIGHTS = np.array([30.0, 50.0, 70.0, 90.0])
HUB, LONGITUDE, REPEATS = 120.0, -6.5, 5


def record(years: float) -> tuple[pd.DatetimeIndex, np.ndarray, np.ndarray, dict[str, np.ndarray]]:
    """Ten-minute speeds at four heights, direction and air."""
    rng = np.random.default_rng(0)
    n = int(years * 52_560)
    index = pd.date_range("2020-01-01", periods=n, freq="10min", tz="UTC")
    exponent = 0.2 + 0.08 * np.cos(2 * np.pi * np.arange(n) / 144) + 0.05 * rng.normal(size=n)
    speed = 8 * rng.weibull(2, n)[:, None] * (HEIGHTS / 90) ** exponent[:, None]
    air = {
        "temperature": 282 + 8 * rng.normal(size=n),
        "pressure": 96_000 + 800 * rng.normal(size=n),
        "relative_humidity": rng.uniform(0.4, 1.0, n),
    }
    return index, speed, rng.uniform(0, 360, n), air


def ten_minutes(years: float) -> Callable[[], None]:
    index, speed, direction, air = record(years)
    choice = ProfileSettings()

    def work() -> None:
        kinds = kinds_of(
            index,
            direction,
            longitude=LONGITUDE,
            interval=pd.Timedelta(minutes=10),
            sector_count=12,
        )
        data = ProfileData(speed, HEIGHTS, ["a", "b", "c", "d"], kinds, None, [])
        up = factors(data, choice, method="by_class", height=90.0, target_height=HUB)
        speed[:, -1] * up.of(kinds)
        leave_top_height_out(data, choice, main_height=90.0, hub_height=HUB)
        density_by_step(
            air["temperature"],
            air["pressure"],
            air["relative_humidity"],
            temperature_height=88.0,
            pressure_height=5.0,
            hub_height=HUB,
        )

    return work


def long_term(years: float) -> Callable[[], None]:
    index, speed, direction, _ = record(1.0)
    choice = ProfileSettings()
    kinds = kinds_of(
        index, direction, longitude=LONGITUDE, interval=pd.Timedelta(minutes=10), sector_count=12
    )
    data = ProfileData(speed, HEIGHTS, ["a", "b", "c", "d"], kinds, None, [])
    up = factors(data, choice, method="by_class", height=90.0, target_height=HUB)
    hours = pd.date_range("2004-01-01", periods=int(years * 8766), freq="h", tz="UTC")
    rng = np.random.default_rng(1)
    v, d = 8 * rng.weibull(2, hours.size), rng.uniform(0, 360, hours.size)
    by_month_and_hour = rng.uniform(1.1, 1.3, (12, 24))

    def work() -> None:
        own = kinds_of(
            hours, d, longitude=LONGITUDE, interval=pd.Timedelta(hours=1), sector_count=12
        )
        hub = v * up.of(own)
        by_month_and_hour[hours.month.to_numpy() - 1, hours.hour.to_numpy()]
        frequency_table(hub, d, sector_count=12)

    return work


def seconds(work: Callable[[], None]) -> float:
    """Shortest of some repeats."""
    took = []
    for _ in range(REPEATS):
        start = time.perf_counter()
        work()
        took.append(time.perf_counter() - start)
    return min(took)


def main() -> None:
    for name, make, sizes, allowed in (
        ("ten-minute record, four heights", ten_minutes, (0.5, 1.0, 2.0, 4.0, 8.0), 0.5),
        ("long-term hours", long_term, (5.0, 10.0, 20.0, 40.0, 80.0), 1.0),
    ):
        took = np.array([seconds(make(years)) for years in sizes])
        slope = float(np.polyfit(np.log(sizes), np.log(took), 1)[0])
        told = ", ".join(f"{y:g} y {t:.3f} s" for y, t in zip(sizes, took, strict=True))
        print(f"{name}: {told}; seconds grow with rows to the power {slope:.2f}")
        print(f"  at {sizes[2]:g} years {took[2]:.3f} s of {allowed:g} s allowed")


if __name__ == "__main__":
    main()
