"""Speed of the long-term step, each ratio measured in one run: python this file.

1. 1000 block-bootstrap resamples of the twelve-sector fit (a year of hours, predicting twenty years
   of hours) with mean, cube and energy, against the same loop over numpy.polyfit.
2. All methods scored on three references, the blend and the series, for twenty years of hours.
"""

from __future__ import annotations

import time

import numpy as np
import pandas as pd

import windkit
from windkit.kernels.bootstrap import block_counts, resample_sector_lines
from windkit.kernels.simulated import simulate_site

RESAMPLES, LOOP_RESAMPLES, SECTORS = 1000, 15, 12


def power(wind_speed: np.ndarray) -> np.ndarray:
    """A plain 3 MW curve [W]."""
    return np.interp(wind_speed, [3, 5, 8, 12, 25, 25.001], [0, 2.5e5, 1.2e6, 3e6, 3e6, 0])


def loop(x, d, y, long_x, long_d, counts) -> np.ndarray:
    """The same numbers, one resample and one sector at a time."""
    sector = (np.floor((d + 15) / 30) % SECTORS).astype(int)
    long_sector = (np.floor((long_d + 15) / 30) % SECTORS).astype(int)
    found = []
    for drawn in counts:
        weight = np.sqrt(np.repeat(drawn, 24))
        predicted = np.empty_like(long_x)
        for s in range(SECTORS):
            inside = sector == s
            line = np.polyfit(x[inside], y[inside], 1, w=weight[inside])
            predicted[long_sector == s] = np.polyval(line, long_x[long_sector == s])
        found.append((predicted.mean(), np.mean(predicted**3), power(predicted).mean()))
    return np.array(found)


def bench_bootstrap() -> float:
    """Seconds of the loop over seconds of the matrix products, per resample."""
    rng = np.random.default_rng(0)
    n, long_n = 8760, 20 * 8760
    x, d = 8 * rng.weibull(2, n), rng.uniform(0, 360, n)
    y = 0.9 * x + 0.6 + rng.normal(size=n)
    long_x, long_d = 8 * rng.weibull(2, long_n), rng.uniform(0, 360, long_n)
    counts = block_counts(365, 5.0, RESAMPLES, seed=1)
    start = time.perf_counter()
    ours = resample_sector_lines(x, d, y, long_x, long_d, counts=counts, power=power)
    fast = time.perf_counter() - start
    start = time.perf_counter()
    slow = loop(x, d, y, long_x, long_d, counts[:LOOP_RESAMPLES])
    each = (time.perf_counter() - start) / LOOP_RESAMPLES
    for name, got, expected in zip(ours._fields, ours, slow.T, strict=True):
        apart = np.max(np.abs(got[:LOOP_RESAMPLES] / expected - 1))
        print(f"  {name}: largest relative difference from the loop {apart:.1e}")
    ratio = each * RESAMPLES / fast
    print(f"bootstrap: {fast:.2f} s for {RESAMPLES}, loop {each * RESAMPLES:.1f} s: x {ratio:.0f}")
    return ratio


def bench_study() -> float:
    """Seconds for three references and twenty years of hours, directions included."""
    simulated = simulate_site(1, years=20, reference_count=3, steps_per_day=24)
    times = pd.date_range("2001-01-01", periods=simulated.site.size, freq="h")
    names = ["a", "b", "c"]
    references = pd.DataFrame(simulated.references, times, columns=names)
    directions = pd.DataFrame(simulated.reference_directions, times, columns=names)
    site = pd.Series(simulated.site, times).dropna()
    own = pd.Series(simulated.site_direction, times).dropna()
    start = time.perf_counter()
    result = windkit.correct_long_term(
        site, references, site_direction=own, reference_directions=directions, power=power
    )
    answered = time.perf_counter() - start
    result.methods_by_reference  # noqa: B018
    scored = time.perf_counter() - start
    result.series  # noqa: B018
    total = time.perf_counter() - start
    print(f"study: answer {answered:.1f} s, scores by {scored:.1f} s, series by {total:.1f} s")
    return total


if __name__ == "__main__":
    bench_bootstrap()
    bench_study()
