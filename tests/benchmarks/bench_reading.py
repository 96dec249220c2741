"""How long reading and checking take, against plain parsing of the same file in the same run.

Two years of ten-minute data with 24 channels are written to a folder that is thrown away, then
read and checked; twenty years likewise. Marks (issue of measured data): reading within 1.6 times
plain `pandas.read_csv`, all checks within 1.5 s, twenty years within ten times that. Run
`python tests/benchmarks/bench_reading.py [--long]`.
"""

from __future__ import annotations

import argparse
import statistics
import tempfile
import time
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pandas as pd
from scipy import signal

from windkit.study.checks import CHECKS, CheckSettings, Given, mast_shadows, run_checks
from windkit.study.reading import read_station
from windkit.study.record import build_record
from windkit.study.stations import StationSettings

STEPS_PER_YEAR = 52_560
READING_MARK = 1.6
CHECKS_MARK_S = 1.5
LONG_MARK = 10.0

HEIGHTS = (100, 80, 80, 60, 40)
BOOMS = (315, 315, 135, 315, 315)


def station() -> StationSettings:
    """A mast of five cups with spread and gust, three vanes with spread, and the air."""
    channels = []

    def add(name: str, quantity: str, unit: str, height: float, **more: object) -> None:
        channels.append(
            {
                "name": name,
                "column": name.upper(),
                "quantity": quantity,
                "unit": unit,
                "height_m": float(height),
                **more,
            }
        )

    for number, (height, boom) in enumerate(zip(HEIGHTS, BOOMS, strict=True)):
        for statistic in ("mean", "sd", "max"):
            name = f"speed_{height}_{number}_{statistic}"
            bearing = float(boom)
            add(name, "wind_speed", "m/s", height, statistic=statistic, boom_bearing_deg=bearing)
    for height in (98, 58, 38):
        add(f"direction_{height}", "wind_from_direction", "deg", height)
    for height in (98, 58):
        add(f"direction_{height}_sd", "wind_from_direction", "deg", height, statistic="sd")
    add("temperature_95", "air_temperature", "degC", 95)
    add("temperature_5", "air_temperature", "degC", 5)
    add("pressure_5", "air_pressure", "hPa", 5)
    add("humidity_95", "relative_humidity", "%", 95)
    assert len(channels) == 24
    return StationSettings.model_validate(
        {
            "name": "bench",
            "files": ["mast.csv"],
            "time_column": "TIME",
            "utc_offset_h": 1.0,
            "interval_min": 10.0,
            "stamp": "end",
            "calm_below_m_s": 0.5,
            "direction_reference": "true",
            "main_wind_speed": "speed_100_0_mean",
            "main_wind_direction": "direction_98",
            "channels": channels,
        }
    )


def write(path: Path, settings: StationSettings, years: float) -> None:
    """Invented weather as text with ten decimals: 36 MB for two years."""
    count = round(years * STEPS_PER_YEAR)
    rng = np.random.default_rng(1)

    def memory(steps: float) -> np.ndarray:
        keep = np.exp(-1 / steps)
        return signal.lfilter([np.sqrt(1 - keep**2)], [1, -keep], rng.normal(size=count))

    wind = 8.0 * np.exp(0.45 * memory(120) - 0.1)
    turn = (220 + 70 * memory(150)) % 360
    season = np.cos(2 * np.pi * np.arange(count) / STEPS_PER_YEAR)
    columns = {}
    for channel in settings.channels:
        noise = rng.normal(size=count)
        match channel.quantity, channel.statistic:
            case "wind_speed", statistic:
                mean = wind * (channel.height_m / 80) ** 0.16
                value = {
                    "mean": mean * (1 + 0.006 * noise),
                    "sd": mean * 0.12 * np.exp(0.2 * noise),
                    "max": mean * (1.45 + 0.1 * np.abs(noise)),
                }[statistic]
            case "wind_from_direction", "mean":
                value = (turn + 1.5 * noise) % 360
            case "wind_from_direction", _:
                value = 7 * np.exp(0.3 * noise)
            case "air_temperature", _:
                value = 9 - 8 * season + 3 * memory(200)
            case "air_pressure", _:
                value = 960 + 8 * memory(600)
            case _:
                value = np.clip(75 + 15 * memory(200), 20, 96)
        columns[channel.column] = np.round(value, 10)
    table = pd.DataFrame(columns)
    stamps = pd.date_range("2003-01-01 00:10", periods=count, freq="10min")
    table.insert(0, "TIME", stamps.strftime("%Y-%m-%d %H:%M"))
    table.to_csv(path, index=False)


def seconds(work: Callable[[], object], times: int) -> float:
    """Median time of some runs by the clock; a busy machine makes it long."""
    return _median(work, times, time.perf_counter)


def work_seconds(work: Callable[[], object], times: int) -> float:
    """Median time of some runs that processors spent on it, whatever else they do."""
    return _median(work, times, time.process_time)


def _median(work: Callable[[], object], times: int, clock: Callable[[], float]) -> float:
    taken = []
    for _ in range(times):
        start = clock()
        work()
        taken.append(clock() - start)
    return statistics.median(taken)


def bench(years: float, times: int) -> tuple[float, float, float]:
    """Plain parsing, reading and checking of that many years [s]."""
    settings = station()
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        write(folder / "mast.csv", settings, years)
        size = (folder / "mast.csv").stat().st_size / 1e6
        # Alternating, so that what else the machine does falls on both alike.
        plain, own = [], []
        for _ in range(times):
            plain.append(seconds(lambda: pd.read_csv(folder / "mast.csv"), 1))
            own.append(seconds(lambda: read_station(settings, folder), 1))
        reading = read_station(settings, folder)
    checking = seconds(lambda: run_checks(reading), max(1, times // 2))
    working = work_seconds(lambda: run_checks(reading), 1)
    building = seconds(lambda: build_record(reading), 1)
    read, parsed = statistics.median(own), statistics.median(plain)
    print(f"{years:g} years, 24 channels, {size:.0f} MB of text")
    print(f"  pandas.read_csv   {parsed:8.3f} s")
    print(f"  read_station      {read:8.3f} s   {read / parsed:.2f} times (mark {READING_MARK})")
    print(
        f"  run_checks        {checking:8.3f} s   of which {working:.3f} s work "
        f"(mark {CHECKS_MARK_S} s for 2 years)"
    )
    print(f"  build_record      {building:8.3f} s")
    if years <= 2:
        given = Given(shadows=mast_shadows(reading, CheckSettings()))
        for rule, check in CHECKS.items():
            each = seconds(lambda check=check: check(reading, CheckSettings(), given), 1)
            print(f"    {rule:18}{each:8.3f} s")
    return parsed, read, checking


def main() -> None:
    """Two years, and twenty if asked."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--long", action="store_true", help="twenty years too")
    _, read, checked = bench(2, 7)
    if parser.parse_args().long:
        _, long_read, long_checked = bench(20, 1)
        ratio = (long_read + long_checked) / (read + checked)
        print(f"20 years take {ratio:.1f} times 2 years (mark {LONG_MARK:g})")


if __name__ == "__main__":
    main()
