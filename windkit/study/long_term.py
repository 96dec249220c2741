"""Step 3, measure-correlate-predict: from the campaign to the long term.

The campaign's hourly means are paired with the reference on their time index, every method is
fitted to the same pairs, the chosen one predicts the whole years of the reference, and the
uncertainty is put together from its parts.
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
from windkit.kernels.estimator import SiteEstimator, sector_of
from windkit.kernels.exceedance import combine_in_quadrature, exceedance_level
from windkit.kernels.frequency import frequency_table
from windkit.study.artifacts import Outcome, Row, load_artifact
from windkit.study.errors import StudyError
from windkit.study.folder import Study
from windkit.study.reading import read_station
from windkit.study.record import Record, build_record, hourly_means
from windkit.study.settings import LongTermSettings

__all__ = ["METHODS", "LongTerm", "correct_to_long_term", "reference_record"]

#: Methods of long-term correction by the name `study.toml` gives them.
METHODS = ("ratio", "linear_regression", "variance_ratio")

#: Fewest concurrent hours a fit is attempted on: 30 days. Common practice asks for a year.
LEAST_CONCURRENT_HOURS = 720
#: Yearly variability of mean wind speed where the reference is too short to show its own [1]:
#: Raftery et al. 1999; EWEA, Wind Energy - The Facts (id MCP-3).
FALLBACK_YEARLY_VARIABILITY = 0.06
#: Fewest whole years from which a yearly variability is taken, our choice.
LEAST_YEARS_FOR_VARIABILITY = 5
#: Scatter of the monthly ratio taken where only one month was measured [1], our choice.
SINGLE_MONTH_SCATTER = 0.1

_HOURS_PER_YEAR_WITH_LEAP_DAYS = 8766.0
#: What may be missing at the start of a record of whole years, our choice.
_MISSING_FROM_WHOLE_YEARS = pd.Timedelta(days=1)
#: Share of a year's hours that must be there for its mean to count as that year's.
_LEAST_SHARE_OF_YEAR = 0.9


@dataclass(frozen=True)
class LongTerm:
    """What the long-term step found.

    Attributes
    ----------
    concurrent : DataFrame
        Hours with both speeds: columns site, reference [m/s], direction of the reference [deg].
    methods : DataFrame
        One row a method: long-term mean and how it does on the concurrent hours.
    series : DataFrame
        Long-term hourly speed [m/s] and direction [deg] at the mast's main height.
    years : DataFrame
        Means of the reference and of the long-term series by calendar year [m/s].
    correlation : DataFrame
        Correlation of site and reference by averaging time.
    parts : DataFrame
        Parts of the standard uncertainty of the long-term mean.
    chosen : str
        Label of the method the study stands on.
    lines : dict of str to tuple
        Points (reference, site) of the straight fits for all directions [m/s].
    campaign_years : tuple of float
        First and last calendar year of the campaign.
    outcome : Outcome
        Figures of merit, tables, what was found and warnings.
    """

    concurrent: pd.DataFrame
    methods: pd.DataFrame
    series: pd.DataFrame
    years: pd.DataFrame
    correlation: pd.DataFrame
    parts: pd.DataFrame
    chosen: str
    lines: dict[str, tuple[NDArray[np.float64], NDArray[np.float64]]]
    campaign_years: tuple[float, float]
    outcome: Outcome

    @property
    def method_intervals(self) -> pd.DataFrame:
        """Columns method, mean, low, high [m/s]: each method with its sampling interval of 80 %."""
        sampling = float(self.parts["standard_uncertainty"].iloc[0])
        means = self.methods["long_term_mean_speed_m_s"]
        return pd.DataFrame(
            {
                "method": self.methods["method"],
                "mean": means,
                "low": exceedance_level(means, sampling, 0.9),
                "high": exceedance_level(means, sampling, 0.1),
            }
        )


def reference_record(study: Study, name: str) -> Record:
    """Read and check one reference, with the same checks as the mast."""
    settings = study.settings.reference(name)
    return build_record(read_station(settings, study.folder), study.settings.checks, None)


def correct_to_long_term(study: Study) -> LongTerm:
    """Fit all methods on the concurrent hours and predict with the chosen one.

    Returns
    -------
    LongTerm

    Raises
    ------
    StudyError
        If the campaign and the reference share too few hours.
    """
    choice, mast = study.settings.long_term, study.settings.mast
    measured = load_artifact(study, "measure")
    channel = str(measured.value("measured.channel"))
    least = choice.samples_per_hour_share
    site = hourly_means(measured.tables["record"], mast, min_share=least)
    record = reference_record(study, choice.reference)
    settings = study.settings.reference(choice.reference)
    reference = record.hourly(least)
    speed = reference[settings.main_wind_speed]
    direction = (
        reference[settings.main_wind_direction]
        if settings.main_wind_direction
        else pd.Series(np.nan, index=reference.index)
    )
    pairs = pd.DataFrame(
        {"site": site[channel], "reference": speed, "direction": direction}
    ).dropna(subset=["site", "reference"])
    _refuse_thin(pairs, site[channel], speed, choice.reference)

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
    chosen = _label(choice.method, choice.by_sector and has_direction)
    methods = _method_table(fitted, predicted, X_fit, pairs["site"].to_numpy(), chosen)
    series = pd.DataFrame(
        {
            "wind_speed": predicted[chosen],
            "wind_direction": _veered(
                direction[period], _site_direction(site, mast.main_wind_direction), choice
            ),
        },
        index=speed.index[period],
    )
    years = _year_table(speed[period], series["wind_speed"])
    correlation = _correlations(pairs)
    variability, variability_basis = _yearly_variability(choice, years)
    mean_speed = float(series["wind_speed"].mean())
    parts, warnings = _uncertainty(
        pairs, site[channel], series, methods, variability, variability_basis
    )
    total = float(combine_in_quadrature(parts["standard_uncertainty"].to_numpy(dtype=float)))
    low, high = (float(exceedance_level(mean_speed, total, p)) for p in (0.9, 0.1))
    low95, high95 = (float(exceedance_level(mean_speed, total, p)) for p in (0.975, 0.025))
    span = f"{series.index[0]:%Y-%m-%d} to {series.index[-1]:%Y-%m-%d}"
    rows = [
        Row(
            "long_term.mean_speed_m_s", "Long-term mean wind speed at the mast", mean_speed, "m/s",
            f"{chosen} from {choice.reference}, {span}, "
            f"{measured.number('measured.height_m'):g} m",
        ),
        Row(
            "long_term.interval_80_m_s", "its 80 % interval", [low, high], "m/s",
            "normal, from the parts below",
        ),
        Row(
            "long_term.interval_95_m_s", "its 95 % interval", [low95, high95], "m/s",
            "normal, from the parts below",
        ),
        Row(
            "long_term.standard_uncertainty", "Standard uncertainty of the correction", total, "1",
            "quadrature of sampling, methods and season", as_percent=True,
        ),
        Row(
            "long_term.yearly_variability", "Year-to-year standard deviation of mean speed",
            variability, "1", variability_basis, as_percent=True,
        ),
        Row(
            "long_term.correlation", "Correlation of hourly means",
            float(correlation["correlation"].iloc[0]), "1", f"{len(pairs)} concurrent hours",
        ),
        Row(
            "long_term.correction", "Long-term mean over the campaign's mean",
            mean_speed / float(site[channel].mean()), "1",
            "above 1 the campaign was calmer than the long term",
        ),
        Row(
            "long_term.years", "Length of the reference period",
            len(series) / _HOURS_PER_YEAR_WITH_LEAP_DAYS, "years",
            "whole years counted back from the reference's end; all of it if shorter",
        ),
    ]  # fmt: skip
    table = frequency_table(
        series["wind_speed"].to_numpy(),
        series["wind_direction"].to_numpy(),
        sector_count=choice.sector_count,
    )
    frequency = pd.DataFrame(
        np.vstack([table.share, table.undirected]),
        index=[f"{centre:g}" for centre in table.sector_centres] + ["no direction"],
        columns=[f"{edge:g}" for edge in table.speed_edges[:-1]],
    )
    campaign = float(site[channel].mean())
    means = methods["long_term_mean_speed_m_s"]
    said = {
        "reference": f"Campaign and reference share {len(pairs):,} hours. Their correlation is "
        + ", ".join(
            f"{row.correlation:.2f} by the {row.averaging_time}" for row in correlation.itertuples()
        )
        + "; figures of different averaging times are not to be compared with each other.",
        "methods": f"The methods' long-term means lie between {means.min():.2f} and "
        f"{means.max():.2f} m/s; the one chosen beforehand, {chosen}, gives {mean_speed:.2f} m/s.",
        "correction": f"The campaign's mean was {campaign:.2f} m/s, so it was "
        f"{abs(campaign / mean_speed - 1):.1%} {'windier' if campaign > mean_speed else 'calmer'} "
        f"than the {len(series) / _HOURS_PER_YEAR_WITH_LEAP_DAYS:.0f} years of the reference.",
        "uncertainty": f"The correction has a standard uncertainty of {total:.1%}: the long-term "
        f"mean lies between {low:.2f} and {high:.2f} m/s with a probability of 80 %.",
    }
    return LongTerm(
        concurrent=pairs,
        methods=methods,
        series=series,
        years=years,
        correlation=correlation,
        parts=parts,
        chosen=chosen,
        lines=_lines(fitted, speed[period].to_numpy()),
        campaign_years=(float(pairs.index[0].year), float(pairs.index[-1].year)),
        outcome=Outcome(
            "long_term",
            rows,
            {
                "series": series,
                "frequency": frequency,
                "methods": methods,
                "years": years,
                "correlation": correlation,
                "parts": parts,
            },
            said,
            warnings,
        ),
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
    for method in METHODS:
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


def _refuse_thin(pairs: pd.DataFrame, site: pd.Series, speed: pd.Series, name: str) -> None:
    if len(pairs) >= LEAST_CONCURRENT_HOURS:
        return

    def span(series: pd.Series) -> str:
        valid = series.dropna().index
        return f"{valid[0]:%Y-%m-%d} to {valid[-1]:%Y-%m-%d}" if len(valid) else "no time at all"

    raise StudyError.of(
        met=f"reference '{name}' and the mast share {len(pairs)} hours; the mast covers "
        f"{span(site)}, the reference {span(speed)}",
        rule=f"a fit needs at least {LEAST_CONCURRENT_HOURS} concurrent hours",
        remedy="check utc_offset_h and the years of both files, or choose another reference",
    )


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


def _site_direction(site: pd.DataFrame, channel: str | None) -> pd.Series:
    return site[channel] if channel else pd.Series(np.nan, index=site.index)


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


def _year_table(reference: pd.Series, predicted: pd.Series) -> pd.DataFrame:
    """Means by calendar year, for years with nearly all their hours."""
    both = pd.DataFrame({"reference_mean_speed_m_s": reference, "site_mean_speed_m_s": predicted})
    by_year = both.groupby(_stamps(both).year)
    years = by_year.mean()
    years["hours"] = by_year.size()
    years.index.name = "year"
    whole = years["hours"] >= _LEAST_SHARE_OF_YEAR * _HOURS_PER_YEAR_WITH_LEAP_DAYS
    return years[whole].reset_index()


def _stamps(frame: pd.DataFrame) -> pd.DatetimeIndex:
    assert isinstance(frame.index, pd.DatetimeIndex)
    return frame.index


def _correlations(pairs: pd.DataFrame) -> pd.DataFrame:
    """Correlation at growing averaging times; never to be compared across them."""
    rows = []
    for label, step in (("hour", "1h"), ("day", "1D"), ("week", "7D"), ("month", "MS")):
        means = pairs[["site", "reference"]].resample(step).mean().dropna()
        if len(means) >= 3:
            rows.append((label, len(means), float(means["site"].corr(means["reference"]))))
    return pd.DataFrame(rows, columns=["averaging_time", "count", "correlation"])


def _yearly_variability(choice: LongTermSettings, years: pd.DataFrame) -> tuple[float, str]:
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


def _uncertainty(
    pairs: pd.DataFrame,
    site: pd.Series,
    series: pd.DataFrame,
    methods: pd.DataFrame,
    variability: float,
    variability_basis: str,
) -> tuple[pd.DataFrame, list[str]]:
    """Parts of the standard uncertainty of the long-term mean, and warnings."""
    correlation = float(pairs["site"].corr(pairs["reference"]))
    site_years = site.notna().sum() / _HOURS_PER_YEAR_WITH_LEAP_DAYS
    reference_years = len(series) / _HOURS_PER_YEAR_WITH_LEAP_DAYS
    sampling = float(
        long_term_standard_uncertainty(correlation, variability, reference_years, site_years)
    )
    means = methods["long_term_mean_speed_m_s"]
    spread = float(means.std(ddof=1) / means.mean())
    monthly = pairs[["site", "reference"]].groupby(_stamps(pairs).month).mean()
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
