"""Hold the long-term correction against simulated sites whose truth is known.

`make calibrate` runs this: 300 sites of each kind, with bias, rms error, coverage of the 50, 80 and
95 % intervals and a test that the truth falls evenly over the claimed distribution. The simulator
shares no assumption with the correction (see `windkit.kernels.simulated`).
"""

from __future__ import annotations

import argparse
import sys
import time

import numpy as np
import pandas as pd
from scipy import stats

import windkit
from windkit.kernels.simulated import SimulatedSite, simulate_site

#: Kinds of study: how the simulator is set, and how the correction is called.
KINDS: dict[str, tuple[dict, dict]] = {
    "breaks everywhere": ({}, {}),
    "breaks everywhere, 3 references": ({"reference_count": 3}, {}),
    "breaks in references only": ({"site_breaks": False}, {"site_breaks": False}),
    "clean": ({"breaks_per_decade": 0.0, "drift_per_decade": 0.0}, {}),
    "clean, 3 references, 10 years": (
        {"breaks_per_decade": 0.0, "drift_per_decade": 0.0, "reference_count": 3, "years": 10},
        {},
    ),
    "half a year": ({"campaign_days": 183}, {}),
    "hours with energy": ({"steps_per_day": 24, "years": 10, "reference_count": 3}, {}),
}
#: Kinds whose series are worked out too, for the energy; that takes seconds a site.
WITH_ENERGY = ("hours with energy",)


def power(wind_speed: np.ndarray) -> np.ndarray:
    """A plain pitch-regulated curve, as a share of rated power [1]."""
    curve = [0, 0.02, 0.07, 0.16, 0.29, 0.47, 0.68, 0.86, 0.97, 1, 1, 0]
    return np.interp(wind_speed, [2.5, 3, 4, 5, 6, 7, 8, 9, 10, 11, 25, 25.01], curve)


def as_frames(simulated: SimulatedSite) -> tuple[pd.Series, pd.DataFrame]:
    """A simulated study as an analyst would hand it over."""
    step = pd.Timedelta(days=1) / simulated.steps_per_day
    times = pd.date_range("2001-01-01", periods=simulated.site.size, freq=step)
    names = [f"station_{k + 1}" for k in range(simulated.references.shape[1])]
    return (
        pd.Series(simulated.site, times).dropna(),
        pd.DataFrame(simulated.references, times, columns=names),
    )


def best_single(simulated: SimulatedSite) -> float:
    """Long-term mean by the variance ratio from the best-correlated reference [m/s]."""
    seen = simulated.campaign
    y, R = simulated.site[seen], simulated.references
    r = [np.corrcoef(y, column)[0, 1] for column in R[seen].T]
    x = R[:, int(np.argmax(r))]
    return float(y.mean() + y.std() / x[seen].std() * (x.mean() - x[seen].mean()))


def run(kind: str, sites: int, *, first_seed: int = 0, progress: bool = False) -> pd.DataFrame:
    """One row a site: errors in logarithm, place of the truth among the draws, half-widths."""
    simulator, call = KINDS[kind]
    rows = []
    for number in range(sites):
        simulated = simulate_site(first_seed + number, **simulator)
        site, references = as_frames(simulated)
        result = windkit.correct_long_term(site, references, seed=number, **call)
        truth = simulated.mean_speed
        row = {
            "error": np.log(result.mean_speed / truth),
            "single": np.log(best_single(simulated) / truth),
            "uncorrected": np.log(result.campaign_mean_speed / truth),
            "place": float(np.mean(result.draws < truth)),
        }
        for level in (0.5, 0.8, 0.95):
            low, high = result.interval(level)
            row[f"held_{level:g}"] = float(low <= truth <= high)
            row[f"half_{level:g}"] = (high - low) / 2 / result.mean_speed
        if kind in WITH_ENERGY:
            known = power(simulated.whole_site).mean()
            row["energy"] = (
                power(result.series["wind_speed"].dropna().to_numpy()).mean() / known - 1
            )
            # The same, had the mean been right: what the method makes of the distribution
            right = result.series["wind_speed"].dropna().to_numpy() * truth / result.mean_speed
            row["energy_at_true_mean"] = power(right).mean() / known - 1
        rows.append(row)
        if progress and number % 10 == 9:
            print(f"\r{kind}: {number + 1} of {sites}", end="", file=sys.stderr, flush=True)
    return pd.DataFrame(rows)


def summary(found: pd.DataFrame) -> dict[str, float]:
    """Figures of one kind; errors and widths in per cent."""

    def rms(name: str) -> float:
        return 100 * float(np.sqrt(np.mean(found[name] ** 2)))

    energy = {
        f"{name}_bias_%": 100 * found[name].mean()
        for name in ("energy", "energy_at_true_mean")
        if name in found
    }
    return {
        "bias_%": 100 * np.expm1(found["error"]).mean(),
        "bias_se_%": 100 * found["error"].std() / np.sqrt(len(found)),
        "rms_%": rms("error"),
        "single_%": rms("single"),
        "raw_%": rms("uncorrected"),
        "held_50": found["held_0.5"].mean(),
        "held_80": found["held_0.8"].mean(),
        "held_95": found["held_0.95"].mean(),
        "half_80_%": 100 * found["half_0.8"].mean(),
        # 1 where the 80 % half-width is what errors of this rms would need if normal
        "width_ratio": 100 * found["half_0.8"].mean() / (1.28155 * rms("error")),
        "uniform_p": float(stats.kstest(found["place"], "uniform").pvalue),
        **energy,
    }


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--sites", type=int, default=300)
    parser.add_argument("--kind", choices=sorted(KINDS), action="append")
    parser.add_argument("--seed", type=int, default=0)
    options = parser.parse_args()
    table = {}
    for kind in options.kind or KINDS:
        start = time.perf_counter()
        found = run(kind, options.sites, first_seed=options.seed, progress=True)
        table[kind] = summary(found) | {"seconds": time.perf_counter() - start}
    print(file=sys.stderr)
    print(pd.DataFrame(table).T.round(3).to_string())


if __name__ == "__main__":
    main()
