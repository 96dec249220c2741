"""Long-term correction with the classical lines on one reference, and its closed-form parts.

Ratio of means, linear regression with its scatter restored and variance ratio, each for all
directions and by sector, fitted to the same concurrent hours. The blend of all references is in
`long_term_blend`; the step that chooses between them is `long_term`.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from windkit.kernels.circular import direction_difference, mean_direction
from windkit.kernels.correction import (
    BySector,
    LinearRegression,
    RatioOfMeans,
    VarianceRatio,
    long_term_standard_uncertainty,
)
from windkit.kernels.energy import HOURS_PER_MEAN_YEAR
from windkit.kernels.estimator import SiteEstimator, sector_of
from windkit.study.errors import StudyError
from windkit.study.settings import LongTermSettings

__all__ = [
    "LEAST_YEARS_FOR_VARIABILITY",
    "LINES",
    "OneReference",
    "closed_form_parts",
    "correlations",
    "fit_lines",
    "refuse_thin_overlap",
    "year_table",
    "yearly_variability_of",
]

#: The lines by the name `study.toml` gives them.
LINES = ("ratio", "linear_regression", "variance_ratio")

#: Fewest concurrent hours a fit is attempted on: 30 days. Common practice asks for a year.
LEAST_CONCURRENT_HOURS = 720
#: Yearly variability of mean wind speed where the reference is too short to show its own [1]:
#: Raftery et al. 1999; EWEA, Wind Energy - The Facts (id MCP-3).
FALLBACK_YEARLY_VARIABILITY = 0.06
#: Fewest whole years from which a yearly variability is taken, our choice.
LEAST_YEARS_FOR_VARIABILITY = 5
#: Scatter of the monthly ratio taken where only one month was measured [1], our choice.
SINGLE_MONTH_SCATTER = 0.1
#: Least share of a day, week or month that must be paired for its mean to count, our choice.
LEAST_SHARE_OF_BLOCK = 0.5

#: What may be missing at the start of a record of whole years, our choice.
_MISSING_FROM_WHOLE_YEARS = pd.Timedelta(days=1)
#: Share of a year's hours that must be there for its mean to count as that year's.
_LEAST_SHARE_OF_YEAR = 0.9


@dataclass(frozen=True)
class OneReference:
    """What the lines make of one reference.

    Attributes
    ----------
    pairs : DataFrame
        Hours with both speeds: columns site, reference [m/s], direction of the reference [deg].
    methods : DataFrame
        One row a line: long-term mean and how it does on the concurrent hours.
    series : DataFrame
        Long-term hourly speed [m/s] and direction [deg] by the chosen line.
    chosen : str
        Label of that line.
    lines : dict of str to tuple
        Points (reference, site) of the straight fits for all directions [m/s].
    """

    pairs: pd.DataFrame
    methods: pd.DataFrame
    series: pd.DataFrame
    chosen: str
    lines: dict[str, tuple[NDArray[np.float64], NDArray[np.float64]]]


def fit_lines(
    site: pd.DataFrame,
    reference: pd.DataFrame,
    choice: LongTermSettings,
    *,
    line: str,
    name: str,
) -> OneReference:
    """Fit every line on the concurrent hours and predict with the chosen one.

    Parameters
    ----------
    site, reference : DataFrame
        Hourly, columns wind_speed [m/s] and wind_direction [deg], UTC.
    choice : LongTermSettings
        Sectors, least counts, seed.
    line : str
        One of `LINES`.
    name : str
        Of the reference, for the message.

    Raises
    ------
    StudyError
        If the two share too few hours.
    """
    speed, direction = reference["wind_speed"], reference["wind_direction"]
    refuse_thin_overlap(site["wind_speed"], speed, name)
    pairs = pd.DataFrame(
        {"site": site["wind_speed"], "reference": speed, "direction": direction}
    ).dropna(subset=["site", "reference"])
    has_direction = bool(direction.notna().any())
    period = _whole_years(speed)
    X_fit = pairs[["reference", "direction"]].to_numpy()
    X_all = np.column_stack([speed[period], direction[period]])
    fitted = {
        label: estimator.fit(X_fit if by_sector else X_fit[:, 0], pairs["site"].to_numpy())
        for label, (estimator, by_sector) in _candidates(choice, has_direction).items()
    }
    predicted = {
        label: np.maximum(_predict(estimator, X_all), 0.0) for label, estimator in fitted.items()
    }
    chosen = _label(line, choice.by_sector and has_direction)
    turned = _veered(direction[period], site["wind_direction"], choice)
    series = pd.DataFrame(
        {"wind_speed": predicted[chosen], "wind_direction": turned}, index=speed.index[period]
    )
    return OneReference(
        pairs=pairs,
        methods=_method_table(fitted, predicted, X_fit, pairs["site"].to_numpy(), chosen),
        series=series,
        chosen=chosen,
        lines=_lines(fitted, speed[period].to_numpy()),
    )


def _candidates(
    choice: LongTermSettings, has_direction: bool
) -> dict[str, tuple[SiteEstimator, bool]]:
    """Every method, for all directions and by sector, with whether it needs the direction."""
    plain: dict[str, SiteEstimator] = {
        "ratio": RatioOfMeans(),
        # Without its scatter a regression loses variance, and with it energy.
        "linear_regression": LinearRegression(restore_scatter=True, seed=choice.seed),
        "variance_ratio": VarianceRatio(),
    }
    found: dict[str, tuple[SiteEstimator, bool]] = {}
    for method in LINES:
        found[_label(method, False)] = (plain[method], False)
        if has_direction:
            by_sector = BySector(
                plain[method],
                sector_count=choice.sector_count,
                min_count=choice.min_hours_per_sector,
            )
            found[_label(method, True)] = (by_sector, True)
    return found


def _label(method: str, by_sector: bool) -> str:
    return method.replace("_", " ") + (", by sector" if by_sector else ", all directions")


def _predict(estimator: SiteEstimator, X: NDArray[np.float64]) -> NDArray[np.float64]:
    return estimator.predict(X if isinstance(estimator, BySector) else X[:, 0])


def _lines(
    fitted: dict[str, SiteEstimator], speed: NDArray[np.float64]
) -> dict[str, tuple[NDArray[np.float64], NDArray[np.float64]]]:
    """The straight fits for all directions as two points each, without added scatter."""
    ends = np.array([0.0, float(np.nanmax(speed))])
    found = {}
    for label, estimator in fitted.items():
        if isinstance(estimator, BySector):
            continue
        if isinstance(estimator, LinearRegression):
            found[label] = (ends, estimator.slope_ * ends + estimator.intercept_)
        else:
            found[label] = (ends, estimator.predict(ends))
    return found


def refuse_thin_overlap(site: pd.Series, reference: pd.Series, name: str) -> None:
    """Refuse a mast and a reference that share too few hours for a fit.

    Parameters
    ----------
    site, reference : Series
        Main wind speeds on UTC stamps, at intervals of an hour or less [m/s].
    name : str
        Of the reference, for the message.

    Raises
    ------
    StudyError
        If they share fewer than `LEAST_CONCURRENT_HOURS`; both spans are told.
    """
    shared = len(_hours_known(site).intersection(_hours_known(reference)))
    if shared >= LEAST_CONCURRENT_HOURS:
        return

    def span(series: pd.Series) -> str:
        valid = series.dropna().index
        return f"{valid[0]:%Y-%m-%d} to {valid[-1]:%Y-%m-%d}" if len(valid) else "no time at all"

    raise StudyError.of(
        met=f"reference '{name}' and the mast share {shared} hours; the mast covers "
        f"{span(site)}, the reference {span(reference)}",
        rule=f"a fit needs at least {LEAST_CONCURRENT_HOURS} concurrent hours",
        remedy="check utc_offset_h and the years of both files, or choose another reference",
    )


def _hours_known(series: pd.Series) -> pd.DatetimeIndex:
    stamps = series.dropna().index
    assert isinstance(stamps, pd.DatetimeIndex)
    return stamps.floor("h").unique()


def _whole_years(speed: pd.Series) -> NDArray[np.bool_]:
    """The hours of the last whole number of years; all of them if there is less than one."""
    valid = speed.dropna().index
    end = valid[-1] + pd.Timedelta(hours=1)
    # By the calendar: three years without a leap day are three years too.
    years = end.year - valid[0].year
    if years and end - pd.DateOffset(years=years) < valid[0] - _MISSING_FROM_WHOLE_YEARS:
        years -= 1
    start = end - pd.DateOffset(years=years) if years else valid[0]
    index = speed.index
    return np.asarray((index >= start) & (index < end) & speed.notna().to_numpy())


def _method_table(
    fitted: dict[str, SiteEstimator],
    predicted: dict[str, NDArray[np.float64]],
    X: NDArray[np.float64],
    site: NDArray[np.float64],
    chosen: str,
) -> pd.DataFrame:
    """How each method does on the hours it was fitted to, and what it says of the long term."""
    rows = []
    for label, estimator in fitted.items():
        back = np.maximum(_predict(estimator, X), 0.0)
        rows.append(
            (
                label,
                label == chosen,
                float(np.mean(predicted[label])),
                float(np.mean(back) / np.mean(site) - 1),
                float(np.mean(back**3) / np.mean(site**3) - 1),
            )
        )
    return pd.DataFrame(
        rows,
        columns=[
            "method", "chosen", "long_term_mean_speed_m_s", "concurrent_mean_error",
            "concurrent_cube_error",
        ],
    )  # fmt: skip


def _veered(reference: pd.Series, site: pd.Series, choice: LongTermSettings) -> NDArray[np.float64]:
    """Reference direction turned by the mean veer of its sector [deg]."""
    both = pd.DataFrame({"reference": reference, "site": site}).dropna()
    bearing = reference.to_numpy(dtype=float)
    if both.empty:
        return bearing
    turn = np.asarray(direction_difference(both["site"], both["reference"]))
    sector = sector_of(both["reference"], choice.sector_count)
    everywhere = float(mean_direction(turn))
    veer = np.array(
        [
            float(mean_direction(turn[sector == index]))
            if np.count_nonzero(sector == index) >= choice.min_hours_per_sector
            else everywhere
            for index in range(choice.sector_count)
        ]
    )
    veer = np.where(np.isfinite(veer), veer, 0.0)
    return np.where(
        np.isfinite(bearing),
        (bearing + veer[sector_of(bearing, choice.sector_count)]) % 360,
        np.nan,
    )


def year_table(reference: pd.Series, predicted: pd.Series) -> pd.DataFrame:
    """Means by calendar year, for years with nearly all their hours."""
    both = pd.DataFrame({"reference_mean_speed_m_s": reference, "site_mean_speed_m_s": predicted})
    by_year = both.groupby(_stamps(both).year)
    years = by_year.mean()
    years["hours"] = by_year.size()
    years.index.name = "year"
    whole = years["hours"] >= _LEAST_SHARE_OF_YEAR * HOURS_PER_MEAN_YEAR
    return years[whole].reset_index()


def _stamps(frame: pd.DataFrame) -> pd.DatetimeIndex:
    assert isinstance(frame.index, pd.DatetimeIndex)
    return frame.index


def _hours_of(step: str) -> float:
    """Hours of a block; a month counts as the mean one."""
    return {"1h": 1.0, "1D": 24.0, "7D": 168.0}.get(step, HOURS_PER_MEAN_YEAR / 12)


def correlations(pairs: pd.DataFrame) -> pd.DataFrame:
    """Correlation at growing averaging times; never to be compared across them."""
    rows = []
    for label, step in (("hour", "1h"), ("day", "1D"), ("week", "7D"), ("month", "MS")):
        blocks = pairs[["site", "reference"]].resample(step)
        # Half a block at least: an hour at the seam of two months is no month.
        whole = blocks.count()["site"] >= LEAST_SHARE_OF_BLOCK * _hours_of(step)
        means = blocks.mean()[whole].dropna()
        if len(means) >= 3:
            rows.append((label, len(means), float(means["site"].corr(means["reference"]))))
    return pd.DataFrame(rows, columns=["averaging_time", "count", "correlation"])


def yearly_variability_of(choice: LongTermSettings, years: pd.DataFrame) -> tuple[float, str]:
    if not isinstance(choice.yearly_variability, str):
        return choice.yearly_variability, "stated in study.toml"
    if len(years) < LEAST_YEARS_FOR_VARIABILITY:
        return FALLBACK_YEARLY_VARIABILITY, (
            f"fallback (Raftery et al. 1999): the reference has {len(years)} whole calendar years, "
            f"{LEAST_YEARS_FOR_VARIABILITY} are needed to show its own"
        )
    means = years["site_mean_speed_m_s"]
    return float(means.std(ddof=1) / means.mean()), (
        f"standard deviation of {len(years)} annual means of the long-term series"
    )


def closed_form_parts(
    pairs: pd.DataFrame,
    site: pd.Series,
    series: pd.DataFrame,
    methods: pd.DataFrame,
    variability: float,
    variability_basis: str,
) -> tuple[pd.DataFrame, list[str]]:
    """Parts of the standard uncertainty of the long-term mean, and warnings."""
    correlation = float(pairs["site"].corr(pairs["reference"]))
    site_years = site.notna().sum() / HOURS_PER_MEAN_YEAR
    reference_years = len(series) / HOURS_PER_MEAN_YEAR
    sampling = float(
        long_term_standard_uncertainty(correlation, variability, reference_years, site_years)
    )
    means = methods["long_term_mean_speed_m_s"]
    spread = float(means.std(ddof=1) / means.mean())
    by_month = pairs[["site", "reference"]].groupby(_stamps(pairs).month)
    enough = by_month.size() >= LEAST_SHARE_OF_BLOCK * _hours_of("MS")
    monthly = by_month.mean()[enough]
    missing = 1 - len(monthly) / 12
    ratios = monthly["site"] / monthly["reference"]
    scatter = float(ratios.std(ddof=1) / ratios.mean()) if len(ratios) > 1 else SINGLE_MONTH_SCATTER
    season = missing * scatter
    warnings = []
    if missing > 0:
        warnings.append(
            f"The campaign covers {len(monthly)} of 12 calendar months; the relation to the "
            "reference in the others is not measured, and the season part below is a mark, not "
            "a measurement."
        )
    if reference_years < LEAST_YEARS_FOR_VARIABILITY:
        warnings.append(
            f"The reference covers {reference_years:.1f} years; ten or more are usual, and what "
            "is called long-term here is no longer than that."
        )
    parts = pd.DataFrame(
        [
            (
                "sampling and reference period", sampling,
                f"closed form of Taylor et al. 2004: r = {correlation:.3f}, {site_years:.2f} years "
                f"of campaign, {reference_years:.1f} of reference, yearly variability "
                f"{variability:.1%} ({variability_basis})",
            ),
            (
                "choice of method", spread,
                f"standard deviation of the {len(means)} methods' long-term means",
            ),
            (
                "season", season,
                f"scatter of the monthly ratio site to reference times the {missing:.0%} of "
                "calendar months not measured",
            ),
        ],
        columns=["part", "standard_uncertainty", "basis"],
    )  # fmt: skip
    return parts, warnings
