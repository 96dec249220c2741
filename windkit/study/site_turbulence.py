"""Turbulence of the site by speed and sector, with wakes, beside the lines of the classes.

Ten-minute means and standard deviations of the main cup go in. What is judged from it stands in
`verdict`; the formulas are in `kernels.turbulence` and `kernels.design_classes`. Intensity is taken
at the mast and not carried to the hub, where it is lower over most ground.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from windkit.kernels.design_classes import REFERENCE_TURBULENCE, mildest_class, normal_turbulence
from windkit.kernels.turbulence import (
    TurbulenceTable,
    effective_turbulence,
    turbulence_in_sectors,
    turbulence_in_speed_bins,
    wake_standard_deviation_frandsen_2005,
)
from windkit.study.settings import Settings

__all__ = ["LEAST_IN_BIN", "NO_TURBULENCE", "STRONG_WIND", "SiteTurbulence", "site_turbulence"]

Array = NDArray[np.float64]

#: Fewest ten-minute intervals for a speed bin to be judged, our choice: some hours of weather.
LEAST_IN_BIN = 20
#: Interval the standards' turbulence is stated for [min].
_TEN_MINUTES = 10.0
#: Share of rated speed from which turbulence is held against the classes [1]: IEC 61400-1 (from
#: memory); up to cut-out.
_FROM_RATED_SHARE = 0.6
#: Speed from which the turbulence in strong wind is taken, for gusts [m/s], our choice.
STRONG_WIND = 15.0
#: Neighbours further than this many rotor diameters away disturb no turbine: IEC 61400-1.
_FURTHEST_NEIGHBOUR = 10.0
#: Neighbours the standard's sum allows for.
_MOST_NEIGHBOURS = 8
#: Fatigue exponent the effective turbulence is shown for [1]: composites, the harder on blades.
_WOEHLER_EXPONENT = 10.0


@dataclass(frozen=True)
class SiteTurbulence:
    """Turbulence of the main cup.

    Attributes
    ----------
    by_speed : DataFrame
        Columns wind_speed_m_s, mean, spread, representative, effective [1], count; thin bins are
        left out.
    by_sector : DataFrame
        Mean of all speeds from 5 m/s on, at 15 m/s, and counts, by sector.
    classes : DataFrame
        The normal turbulence line of each class at the same speeds [1], columns by class name.
    mildest : str or None
        Mildest class the ambient 90 % values stay below over the range that is judged.
    judged : tuple of float
        Speeds it is judged between [m/s].
    strong : float or None
        Mean intensity in strong wind [1].
    nearest_neighbour : tuple
        Name of the most disturbed turbine and its nearest neighbour's distance [diameters].
    """

    by_speed: pd.DataFrame
    by_sector: pd.DataFrame
    classes: pd.DataFrame
    mildest: str | None
    judged: tuple[float, float]
    strong: float | None
    nearest_neighbour: tuple[str, float]

    @property
    def bins_judged(self) -> tuple[float, float]:
        """First and last bin that has enough intervals in that range [m/s], NaN without one."""
        V = self.by_speed["wind_speed_m_s"]
        inside = V[V.between(*self.judged)]
        return (float(inside.min()), float(inside.max())) if len(inside) else (np.nan, np.nan)


NO_TURBULENCE = SiteTurbulence(
    by_speed=pd.DataFrame(
        columns=["wind_speed_m_s", "mean", "spread", "representative", "count", "effective"],
        dtype=float,
    ),
    by_sector=pd.DataFrame(
        columns=["sector_deg", "mean", "representative", "count", "mean_15", "count_15"],
        dtype=float,
    ),
    classes=pd.DataFrame(),
    mildest=None,
    judged=(np.nan, np.nan),
    strong=None,
    nearest_neighbour=("", np.inf),
)


def site_turbulence(
    settings: Settings, record: pd.DataFrame, main: str, *, rated_speed: float
) -> SiteTurbulence | str:
    """Turbulence by speed and sector, with wakes, against the classes; or why there is none."""
    mast = settings.mast
    if mast.interval_min != _TEN_MINUTES:
        return (
            f"turbulence is not assessed: the classes are stated for ten-minute intervals, and "
            f"these last {mast.interval_min:g}"
        )
    channel = mast.channel(main)
    spread = next(
        (
            other.name
            for other in mast.channels
            if other.quantity == "wind_speed"
            and other.statistic == "sd"
            and other.height_m == channel.height_m
            and other.boom_bearing_deg == channel.boom_bearing_deg
        ),
        None,
    )
    if spread is None or spread not in record:
        return "turbulence is not assessed: no standard deviation is recorded beside the main cup"
    v, sigma = (record[name].to_numpy(dtype=np.float64) for name in (main, spread))
    moving = v >= 1.0  # a cup's starting speed; slower intervals have no intensity to speak of
    v, sigma = np.where(moving, v, np.nan), np.where(moving, sigma, np.nan)
    if not np.isfinite(v + sigma).any():
        return "turbulence is not assessed: no interval has a mean and a standard deviation"
    whole = turbulence_in_speed_bins(v, sigma)
    by_speed = _by_speed(whole)
    name, distances = _most_disturbed(settings)
    by_speed["effective"] = _with_wakes(by_speed, distances) if distances.size else np.nan
    V = by_speed["wind_speed_m_s"].to_numpy()
    lines = {
        f"class {name}": normal_turbulence(V, value) / V
        for name, value in REFERENCE_TURBULENCE.items()
    }
    low, high = _FROM_RATED_SHARE * rated_speed, settings.turbine.cut_out_m_s
    judged = by_speed[by_speed["wind_speed_m_s"].between(low, high)]
    strong = v >= STRONG_WIND
    ratio = sigma[strong] / v[strong]
    return SiteTurbulence(
        by_speed=by_speed,
        by_sector=_by_sector(record, settings, v, sigma),
        classes=pd.DataFrame(lines, index=pd.Index(V, name="wind_speed_m_s")),
        mildest=mildest_class(judged["wind_speed_m_s"], judged["representative"])
        if len(judged)
        else None,
        judged=(low, high),
        strong=float(np.nanmean(ratio)) if np.isfinite(ratio).sum() >= LEAST_IN_BIN else None,
        nearest_neighbour=(name, float(distances.min()) if distances.size else np.inf),
    )


def _by_speed(table: TurbulenceTable) -> pd.DataFrame:
    # Bins are centred on whole metres a second; the first holds what is below half of one.
    centre = np.arange(table.count.size, dtype=float)
    frame = pd.DataFrame(
        {
            "wind_speed_m_s": centre,
            "mean": table.mean,
            "spread": table.spread,
            "representative": table.representative,
            "count": table.count,
        }
    )
    return frame[(frame["count"] >= LEAST_IN_BIN) & (centre >= 1.0)].reset_index(drop=True)


def _by_sector(record: pd.DataFrame, settings: Settings, v: Array, sigma: Array) -> pd.DataFrame:
    """Mean and 90 % value by sector: of all speeds from 5 m/s on, and about 15 m/s."""
    vane, sectors = settings.mast.main_wind_direction, settings.long_term.sector_count
    if vane not in record:
        return NO_TURBULENCE.by_sector
    direction = record[vane].to_numpy(dtype=np.float64)
    windy = np.where(v >= 5.0, v, np.nan)
    if not np.isfinite(windy + sigma + direction).any():
        return NO_TURBULENCE.by_sector
    # One bin of all speeds, then bins of one metre a second for the one about 15.
    wide = turbulence_in_sectors(
        windy, sigma, direction, sector_count=sectors, bin_width=4.0 * float(np.nanmax(windy))
    )
    fine = turbulence_in_sectors(windy, sigma, direction, sector_count=sectors)
    at = 15 if fine.count.shape[1] > 15 else None
    enough = wide.count[:, 0] >= LEAST_IN_BIN
    counts_15 = fine.count[:, at] if at is not None else np.zeros(sectors, dtype=int)
    mean_15 = fine.mean[:, at] if at is not None else np.full(sectors, np.nan)
    return pd.DataFrame(
        {
            "sector_deg": np.arange(sectors) * 360.0 / sectors,
            "mean": np.where(enough, wide.mean[:, 0], np.nan),
            "representative": np.where(enough, wide.representative[:, 0], np.nan),
            "count": wide.count[:, 0],
            "mean_15": np.where(counts_15 >= LEAST_IN_BIN, mean_15, np.nan),
            "count_15": counts_15,
        }
    )


def _most_disturbed(settings: Settings) -> tuple[str, Array]:
    """The turbine with the nearest neighbours, and their distances in rotor diameters."""
    places = settings.layout
    at = np.array([[place.easting_m, place.northing_m] for place in places])
    apart = np.linalg.norm(at[:, None] - at[None, :], axis=-1) / settings.turbine.rotor_diameter_m
    worst: tuple[str, Array] = (places[0].name, np.zeros(0))
    highest = 0.0
    for row, place in enumerate(places):
        others = np.sort(np.delete(apart[row], row))
        near = others[(others > 0) & (others <= _FURTHEST_NEIGHBOUR)][:_MOST_NEIGHBOURS]
        added = float(np.sum(near**-2.0)) if near.size else 0.0
        if added > highest:
            worst, highest = (place.name, near), added
    return worst


def _with_wakes(by_speed: pd.DataFrame, distances: Array) -> Array:
    """Effective turbulence [1] at the turbine with those neighbours, all directions alike."""
    V = by_speed["wind_speed_m_s"].to_numpy()[:, None]
    ambient = by_speed["representative"].to_numpy()
    wake = wake_standard_deviation_frandsen_2005(V, ambient[:, None] * V, distances[None, :]) / V
    known = np.isfinite(ambient)
    effective = np.full(ambient.shape, np.nan)
    effective[known] = effective_turbulence(ambient[known], wake[known], _WOEHLER_EXPONENT)
    return effective
