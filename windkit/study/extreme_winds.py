"""Extreme winds at the hub from the long-term series: years or storms, several fits side by side.

The highest winds of the long-term hours are picked, brought from hourly to ten-minute means,
and fitted by four methods. What a fit is lies in `kernels.extreme_fits`; what the figures are held
against is in `verdict`. A series that was predicted for the site has smoothed storms in it.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from windkit.kernels.design_classes import GUST_RATIO
from windkit.kernels.extreme_fits import (
    gumbel_best_linear,
    gumbel_l_moments,
    gumbel_maximum_likelihood,
    gumbel_moments,
)
from windkit.kernels.extreme_samples import block_maxima, storm_maxima
from windkit.kernels.extremes import (
    ExtremeFit,
    extreme_over_mean_from_weibull,
    gumbel_variate,
    return_level,
    return_level_standard_error,
)
from windkit.kernels.gumbel_order import MOST_ORDERED_VALUES
from windkit.kernels.gusts import averaging_time_factor, gust_speed
from windkit.study.hub_settings import ConditionsSettings

__all__ = ["ONE_YEAR", "RETURN_PERIODS", "ExtremeWinds", "extreme_winds", "no_extremes"]

Array = NDArray[np.float64]

#: Return periods shown [years].
RETURN_PERIODS = (2.0, 5.0, 10.0, 20.0, 50.0, 100.0)
#: Return period of the "one-year" extreme [years]: the level passed once a year on average, whose
#: chance in one year is 1 - exp(-1). A period of exactly one year has no level.
ONE_YEAR = 1.0 / (1.0 - np.exp(-1.0))
#: Fewest whole years for yearly maxima, our choice; fewer take storms.
_LEAST_YEARS = 10
#: Fewest maxima of any fit that is shown, our choice.
_LEAST_MAXIMA = 5
#: Record length under which a 50-year wind is an extrapolation too far [years]; common practice.
_SHORT_RECORD = 10.0
#: Share of a year's hours that must be known for its maximum to count [1].
_LEAST_KNOWN = 0.9
_HOURS_PER_YEAR = 8766.0
_HOUR, _TEN_MINUTES, _GUST = 3600.0, 600.0, 3.0
_FITS: dict[str, Callable[[Array], ExtremeFit]] = {
    "moments": gumbel_moments,
    "l_moments": gumbel_l_moments,
    "maximum_likelihood": gumbel_maximum_likelihood,
    "best_linear": gumbel_best_linear,
}


@dataclass(frozen=True)
class ExtremeWinds:
    """Extreme winds at the hub, ten-minute means.

    Attributes
    ----------
    maxima : DataFrame
        Columns when, wind_speed_m_s (ten-minute), return_period_years of its rank.
    fits : DataFrame
        One row a method: location, scale [m/s], one- and fifty-year wind and its standard error.
    levels : DataFrame
        The chosen fit: return_period [years], level, low, high (80 %) [m/s].
    v50, v50_standard_error, v1 : float
        Ten-minute means [m/s].
    gust_50, gust_1 : float
        3 s gusts by the site's turbulence, or by the standard's ratio without it [m/s].
    gust_basis : str
    from_weibull : float
        Fifty-year wind from the tail of the Weibull distribution, as a check [m/s].
    averaging_factor : float
        Hourly to ten-minute maxima [1].
    events_per_year : float
        One for yearly maxima.
    basis : str
    chosen : str
        Name of the fit in use.
    warnings : list of str
    """

    maxima: pd.DataFrame
    fits: pd.DataFrame
    levels: pd.DataFrame
    v50: float
    v50_standard_error: float
    v1: float
    gust_50: float
    gust_1: float
    gust_basis: str
    from_weibull: float
    averaging_factor: float
    events_per_year: float
    basis: str
    chosen: str
    warnings: list[str]


def extreme_winds(
    wind_speed: pd.Series,
    choice: ConditionsSettings,
    *,
    weibull_shape: float,
    turbulence: float | None,
) -> ExtremeWinds | str:
    """One- and fifty-year winds from a long hourly series.

    Parameters
    ----------
    wind_speed : Series
        Hourly means at the hub [m/s], by the start of the hour.
    choice : ConditionsSettings
        Exposure, kind of maxima, fit.
    weibull_shape : float
        Of the series, for the check [1].
    turbulence : float or None
        Intensity in strong wind, for the gust [1].

    Returns
    -------
    ExtremeWinds, or a sentence saying why there is none.
    """
    index = wind_speed.index
    assert isinstance(index, pd.DatetimeIndex)
    v = wind_speed.to_numpy(dtype=np.float64)
    years = float(np.isfinite(v).sum()) / _HOURS_PER_YEAR
    factor = float(averaging_time_factor(_HOUR, _TEN_MINUTES, exposure=choice.exposure))
    labels, highest, _ = block_maxima(v, index.year.to_numpy(), least_known=_LEAST_KNOWN)
    # A year cut off at an end of the series looks whole to the kernel; its hours tell.
    hours = np.bincount(index.year.to_numpy() - labels[0])
    highest = np.where(hours >= _LEAST_KNOWN * _HOURS_PER_YEAR, highest, np.nan)
    whole = np.isfinite(highest)
    by_year = choice.maxima == "years" or (
        choice.maxima == "auto" and int(whole.sum()) >= _LEAST_YEARS
    )
    if by_year:
        times, maxima, events = labels[whole].astype(str), highest[whole] * factor, 1.0
        kind = f"{whole.sum()} yearly maxima"
    else:
        at = _storms(v, years, choice)
        times = index[at].strftime("%Y-%m-%d %H:%M").to_numpy()
        maxima, events = v[at] * factor, len(at) / years if years else 0.0
        kind = f"{len(at)} storms, {events:.1f} a year"
    if len(maxima) < _LEAST_MAXIMA or np.ptp(maxima) == 0.0:
        return (
            f"Extreme winds are not assessed: the long-term series of {years:.1f} years gives "
            f"{len(maxima)} independent maxima, and at least {_LEAST_MAXIMA} are needed."
        )
    found = {
        name: fit(maxima)
        for name, fit in _FITS.items()
        if name not in ("l_moments", "best_linear") or len(maxima) <= MOST_ORDERED_VALUES
    }
    name = choice.fit if choice.fit in found else "maximum_likelihood"
    chosen = found[name]
    v50, v1 = (
        float(return_level(chosen, period, events_per_year=events)) for period in (50.0, ONE_YEAR)
    )
    error = float(return_level_standard_error(chosen, 50.0, events_per_year=events))
    mean = float(np.nanmean(v))
    check = mean * float(extreme_over_mean_from_weibull(weibull_shape))
    gust_50, gust_1, gust_basis = _gusts(v50, v1, turbulence)
    order = np.argsort(maxima)
    rank = (np.arange(len(maxima)) + 1) / (len(maxima) + 1.0)
    return ExtremeWinds(
        maxima=pd.DataFrame(
            {
                "when": times[order],
                "wind_speed_m_s": maxima[order],
                "return_period_years": 1.0 / (1.0 - rank**events),
            }
        ),
        fits=_fit_table(found, name, events),
        levels=_levels(chosen, events),
        v50=v50,
        v50_standard_error=error,
        v1=v1,
        gust_50=gust_50,
        gust_1=gust_1,
        gust_basis=gust_basis,
        from_weibull=check,
        averaging_factor=factor,
        events_per_year=events,
        basis=f"{chosen.method} through {kind} of {years:.1f} years of hourly means at the hub, "
        f"times {factor:.2f} from hourly to ten-minute maxima ({choice.exposure}, "
        "WMO/TD-No. 1555)",
        chosen=chosen.method,
        warnings=_warnings(years, v50, check, error),
    )


def no_extremes() -> ExtremeWinds:
    """What stands in a workbook where extreme winds are not assessed: empty tables."""
    nan = float("nan")
    return ExtremeWinds(
        maxima=pd.DataFrame(columns=["when", "wind_speed_m_s", "return_period_years"]),
        fits=pd.DataFrame(columns=["fit", "fifty_year_m_s", "standard_error_m_s"]),
        levels=pd.DataFrame(columns=["return_period_years", "level_m_s", "low_m_s", "high_m_s"]),
        v50=nan,
        v50_standard_error=nan,
        v1=nan,
        gust_50=nan,
        gust_1=nan,
        gust_basis="",
        from_weibull=nan,
        averaging_factor=nan,
        events_per_year=nan,
        basis="",
        chosen="not assessed",
        warnings=[],
    )


def _storms(v: Array, years: float, choice: ConditionsSettings) -> NDArray[np.intp]:
    """Storm maxima above the threshold that gives the number of storms wanted, nearly."""
    wanted = max(choice.storms_per_year * years, 1.0)
    separation = round(choice.storm_separation_h)
    known = v[np.isfinite(v)]
    at = np.zeros(0, dtype=np.intp)
    if known.size == 0:
        return at
    for quantile in np.linspace(0.995, 0.80, 40):
        at = storm_maxima(v, threshold=float(np.quantile(known, quantile)), separation=separation)
        if at.size >= wanted:
            break
    return at


def _gusts(v50: float, v1: float, turbulence: float | None) -> tuple[float, float, str]:
    if turbulence is None:
        return (
            GUST_RATIO * v50,
            GUST_RATIO * v1,
            (f"{GUST_RATIO:g} times the ten-minute wind (IEC 61400-1); turbulence is not measured"),
        )
    gust_50, gust_1 = (
        float(gust_speed(v, turbulence, gust_duration=_GUST, averaging_time=_TEN_MINUTES))
        for v in (v50, v1)
    )
    return (
        gust_50,
        gust_1,
        (
            f"gust factor of Wieringa 1973 at the measured turbulence of {turbulence:.1%} in "
            f"strong wind, {gust_50 / v50:.2f}; the standard's own ratio is {GUST_RATIO:g}"
        ),
    )


def _fit_table(found: dict[str, ExtremeFit], chosen: str, events: float) -> pd.DataFrame:
    rows = [
        (
            fit.method,
            name == chosen,
            fit.location,
            fit.scale,
            float(return_level(fit, ONE_YEAR, events_per_year=events)),
            float(return_level(fit, 50.0, events_per_year=events)),
            float(return_level_standard_error(fit, 50.0, events_per_year=events)),
        )
        for name, fit in found.items()
    ]
    return pd.DataFrame(
        rows,
        columns=[
            "fit", "chosen", "location_m_s", "scale_m_s", "one_year_m_s", "fifty_year_m_s",
            "standard_error_m_s",
        ],
    )  # fmt: skip


def _levels(fit: ExtremeFit, events: float) -> pd.DataFrame:
    periods = np.unique(np.concatenate([[1.1, 1.3, 1.6], RETURN_PERIODS]))
    level = return_level(fit, periods, events_per_year=events)
    error = return_level_standard_error(fit, periods, events_per_year=events)
    reach = 1.2815515655446004  # normal quantile of 90 %, so that 80 % lie inside
    return pd.DataFrame(
        {
            "return_period_years": periods,
            "level_m_s": level,
            "low_m_s": level - reach * error,
            "high_m_s": level + reach * error,
            "reduced_variate": gumbel_variate(periods),
        }
    )


def _warnings(years: float, v50: float, check: float, error: float) -> list[str]:
    told = []
    if years < _SHORT_RECORD:
        told.append(
            f"The fifty-year wind rests on {years:.1f} years; its standard error of {error:.1f} "
            "m/s knows the scatter of these storms only, not how ordinary those years were."
        )
    if abs(check / v50 - 1) > 0.2:
        told.append(
            f"The Weibull tail puts the fifty-year wind at {check:.1f} m/s against {v50:.1f} from "
            "the maxima: the two do not support each other, and the higher one deserves a reason "
            "before it is set aside."
        )
    return told
