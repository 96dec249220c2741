"""Step 3, measure-correlate-predict: from the campaign to the long term.

Every reference goes on trial, all of them are blended, and the blend is tried on references that
stand in for the site; the errors seen there are the interval. A study may stand on one line to
one reference instead; the blend is then shown beside it, and where the stand-ins show more
uncertainty than the closed form claims, the larger counts.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from windkit.kernels.curve import power_at
from windkit.kernels.energy import HOURS_PER_MEAN_YEAR
from windkit.kernels.exceedance import combine_in_quadrature, exceedance_level
from windkit.kernels.frequency import frequency_table
from windkit.study.artifacts import Artifact, Outcome, Row, load_artifact
from windkit.study.folder import Study
from windkit.study.long_term_blend import correct_long_term
from windkit.study.long_term_lines import (
    LEAST_YEARS_FOR_VARIABILITY,
    OneReference,
    closed_form_parts,
    correlations,
    fit_lines,
    refuse_thin_overlap,
    year_table,
    yearly_variability_of,
)
from windkit.study.long_term_result import LongTermCorrection
from windkit.study.long_term_words import found_in_words
from windkit.study.reading import read_station
from windkit.study.record import Record, build_record, hourly_means
from windkit.study.turbine import read_curve

__all__ = ["BLEND", "LongTerm", "correct_to_long_term", "reference_record"]

#: The method that uses every reference.
BLEND = "blend"
#: Months of data below which a correction is no basis for a loan: Basse et al. 2021, Wind Energ.
#: Sci. 6:1473, abstract (id G4).
LEAST_MONTHS_FOR_FINANCE = 6.0
#: The line shown where the study stands on the blend.
_SHOWN_LINE = "variance_ratio"


@dataclass(frozen=True)
class LongTerm:
    """What the long-term step found.

    Attributes
    ----------
    correction : LongTermCorrection
        The blend of all references with its trial, back-test and parts.
    concurrent : DataFrame
        Hours of the site and the reference shown: site, reference [m/s], direction [deg].
    shown : str
        Name of that reference.
    methods : DataFrame
        One row a line to that reference: long-term mean and how it does on the concurrent hours.
    scores : DataFrame
        Every method by blocked hold-out on that reference, best first, against doing nothing.
    correlation : DataFrame
        Correlation of site and that reference by averaging time.
    series : DataFrame
        Long-term hourly speed [m/s] and direction [deg] at the mast's main height.
    years : DataFrame
        Means of that reference and of the long-term series by calendar year [m/s].
    parts : DataFrame
        Parts of the standard uncertainty of the long-term mean.
    chosen : str
        What the study stands on.
    lines : dict of str to tuple
        Points (reference, site) of the straight fits [m/s].
    campaign_years : tuple of float
        Begin and end of the campaign in years, such as 2022.83.
    outcome : Outcome
        Figures of merit, tables, what was found and warnings.
    """

    correction: LongTermCorrection
    concurrent: pd.DataFrame
    shown: str
    methods: pd.DataFrame
    scores: pd.DataFrame
    correlation: pd.DataFrame
    series: pd.DataFrame
    years: pd.DataFrame
    parts: pd.DataFrame
    chosen: str
    lines: dict[str, tuple[NDArray[np.float64], NDArray[np.float64]]]
    campaign_years: tuple[float, float]
    outcome: Outcome

    @property
    def method_intervals(self) -> pd.DataFrame:
        """Columns method, mean, low, high [m/s]: the blend and each line with its 80 % interval.

        The blend's interval is that of its draws; a line's is the closed form's sampling part.
        """
        sampling = float(self.outcome.tables["closed_form"]["standard_uncertainty"].iloc[0])
        means = self.methods["long_term_mean_speed_m_s"]
        lines = pd.DataFrame(
            {
                "method": self.methods["method"],
                "mean": means,
                "low": exceedance_level(means, sampling, 0.9),
                "high": exceedance_level(means, sampling, 0.1),
            }
        )
        low, high = self.correction.interval(0.8)
        blend = {"method": _BLEND_LABEL, "mean": self.correction.mean_speed}
        blend |= {"low": low, "high": high}
        return pd.concat([pd.DataFrame([blend]), lines], ignore_index=True)


_BLEND_LABEL = "blend of all references"


def reference_record(study: Study, name: str) -> Record:
    """Read and check one reference, with the same checks as the mast."""
    settings = study.settings.reference(name)
    return build_record(read_station(settings, study.folder), study.settings.checks, None)


def correct_to_long_term(study: Study) -> LongTerm:
    """Carry the campaign to the long term, by the blend or by the line the study chose.

    Returns
    -------
    LongTerm

    Raises
    ------
    StudyError
        If the campaign and the references share too little, or cannot carry an answer.
    """
    choice = study.settings.long_term
    measured = load_artifact(study, "measure")
    site = _site_hours(study, measured)
    references = {
        each.name: _reference_hours(study, each.name) for each in study.settings.references
    }
    if choice.reference is not None:
        speed = references[choice.reference]["wind_speed"]
        refuse_thin_overlap(site["wind_speed"], speed, choice.reference)
    curve = read_curve(study)
    correction = correct_long_term(
        site["wind_speed"],
        pd.DataFrame({name: hours["wind_speed"] for name, hours in references.items()}),
        site_direction=site["wind_direction"],
        reference_directions=pd.DataFrame(
            {name: hours["wind_direction"] for name, hours in references.items()}
        ),
        seed=choice.seed,
        power=lambda speed: power_at(curve, speed),
    )
    shown = choice.reference or str(correction.references.index[0])
    blended = choice.method == BLEND
    one = fit_lines(
        site,
        references[shown],
        choice,
        line=_SHOWN_LINE if blended else choice.method,
        name=shown,
    )
    series = _blend_series(correction, one) if blended else one.series
    years = year_table(references[shown]["wind_speed"].reindex(series.index), series["wind_speed"])
    variability, variability_basis = yearly_variability_of(choice, years)
    closed_form, warnings = closed_form_parts(
        one.pairs, site["wind_speed"], one.series, one.methods, variability, variability_basis
    )
    parts = (
        _blend_parts(correction, closed_form) if blended else _line_parts(closed_form, correction)
    )
    mean_speed = correction.mean_speed if blended else float(series["wind_speed"].mean())
    interval, total = _interval(correction, parts, mean_speed, blended)
    chosen = _BLEND_LABEL if blended else one.chosen
    correlation = correlations(one.pairs)
    rows = _rows(
        study, measured, correction, one, series, site, mean_speed, interval, total,
        (variability, variability_basis), chosen, shown, float(correlation["correlation"].iloc[0]),
    )  # fmt: skip
    scores = correction.methods.reset_index()
    found = found_in_words(
        correction, one, site["wind_speed"], series, correlation, scores, mean_speed, interval[0.8],
        total, chosen, shown,
    )  # fmt: skip
    trial = correction.references.reset_index().rename(columns={"index": "reference"})
    tables = {
        "series": series,
        "frequency": _frequency(series, choice.sector_count),
        "methods": one.methods,
        "scores": scores,
        "years": years,
        "correlation": correlation,
        "parts": parts,
        "closed_form": closed_form,
        "references": trial,
        "breaks": correction.breaks,
        "back_test": correction.back_test,
        "windows": correction.windows,
        "longer_campaign": correction.longer_campaign,
    }
    # The blend's season is tried on stand-ins, so the closed form's mark is no warning for it.
    warnings = [
        *(warnings if not blended else _short_of_years(one)),
        *_short_campaign(site["wind_speed"]),
        *correction.notes,
    ]
    return LongTerm(
        correction=correction,
        concurrent=one.pairs,
        shown=shown,
        methods=one.methods,
        scores=scores,
        correlation=correlation,
        series=series,
        years=years,
        parts=parts,
        chosen=chosen,
        lines=one.lines,
        campaign_years=(_in_years(one.pairs.index[0]), _in_years(one.pairs.index[-1])),
        outcome=Outcome("long_term", rows, tables, found, warnings),
    )


def _in_years(stamp: pd.Timestamp) -> float:
    return float(stamp.year + (stamp.day_of_year - 1) / 365.25)


def _site_hours(study: Study, measured: Artifact) -> pd.DataFrame:
    """Hourly main speed [m/s] and direction [deg] of the campaign."""
    mast, least = study.settings.mast, study.settings.long_term.samples_per_hour_share
    channel = str(measured.value("measured.channel"))
    main = measured.tables["main"]
    # The main channel's place is taken by the speed the study stands on: averaged, filled.
    frame = measured.tables["record"].reindex(main.index)
    frame[channel] = main["wind_speed"]
    hours = hourly_means(frame, mast, min_share=least)
    return _two_columns(hours, channel, mast.main_wind_direction)


def _reference_hours(study: Study, name: str) -> pd.DataFrame:
    settings = study.settings.reference(name)
    hours = reference_record(study, name).hourly(study.settings.long_term.samples_per_hour_share)
    return _two_columns(hours, settings.main_wind_speed, settings.main_wind_direction)


def _two_columns(hours: pd.DataFrame, speed: str, direction: str | None) -> pd.DataFrame:
    turned = hours[direction] if direction else pd.Series(np.nan, index=hours.index)
    return pd.DataFrame({"wind_speed": hours[speed], "wind_direction": turned})


def _blend_series(correction: LongTermCorrection, one: OneReference) -> pd.DataFrame:
    """The blend's hourly series; its direction is the shown reference's, veered, if it has none."""
    series = correction.series.dropna(subset="wind_speed")
    if "wind_direction" not in series:
        series = series.assign(wind_direction=one.series["wind_direction"].reindex(series.index))
    return series


def _blend_parts(correction: LongTermCorrection, closed_form: pd.DataFrame) -> pd.DataFrame:
    """Columns part, standard_uncertainty, share, basis; never less than the closed form asks.

    A short campaign with few references leaves the stand-ins little to show; the published form
    and the months not measured are then the floor.
    """
    parts = correction.parts.drop("representativeness").reset_index()
    parts = parts.rename(columns={"how": "basis"})
    asked = float(combine_in_quadrature(closed_form["standard_uncertainty"].to_numpy(dtype=float)))
    beyond = max(asked**2 - correction.standard_uncertainty**2, 0.0) ** 0.5
    if beyond > 0:
        told = f"the closed form and the months not measured ask for {asked:.1%} together"
        parts.loc[len(parts), ["part", "standard_uncertainty", "basis"]] = [
            "short campaign", beyond, told,
        ]  # fmt: skip
    variance = parts["standard_uncertainty"].astype(float) ** 2
    parts["standard_uncertainty"] = parts["standard_uncertainty"].astype(float)
    parts["share"] = variance / variance.sum()
    return parts[["part", "standard_uncertainty", "share", "basis"]]


def _line_parts(closed_form: pd.DataFrame, correction: LongTermCorrection) -> pd.DataFrame:
    """The closed form's parts, and what the stand-ins show beyond them."""
    parts = closed_form.copy()
    claimed = float(combine_in_quadrature(parts["standard_uncertainty"].to_numpy(dtype=float)))
    beyond = max(correction.standard_uncertainty**2 - claimed**2, 0.0) ** 0.5
    if beyond > 0:
        parts.loc[len(parts)] = [
            "what stand-ins show beyond",
            beyond,
            f"references corrected like the site were off by {correction.standard_uncertainty:.1%} "
            f"where the closed form claims {claimed:.1%}",
        ]
    variance = parts["standard_uncertainty"].astype(float) ** 2
    parts.insert(2, "share", variance / variance.sum())
    return parts


def _interval(
    correction: LongTermCorrection, parts: pd.DataFrame, mean_speed: float, blended: bool
) -> tuple[dict[float, tuple[float, float]], float]:
    """Intervals by level [m/s] and the standard uncertainty [1]."""
    total = float(combine_in_quadrature(parts["standard_uncertainty"].to_numpy(dtype=float)))
    if blended:
        # What was added to the parts widens the draws' intervals about the mean alike.
        widened = total / correction.standard_uncertainty
        levels = {}
        for level in (0.8, 0.95):
            low, high = correction.interval(level)
            levels[level] = (
                mean_speed - widened * (mean_speed - low),
                mean_speed + widened * (high - mean_speed),
            )
        return levels, total
    normal = {
        level: (
            float(exceedance_level(mean_speed, total, (1 + level) / 2)),
            float(exceedance_level(mean_speed, total, (1 - level) / 2)),
        )
        for level in (0.8, 0.95)
    }
    return normal, total


def _frequency(series: pd.DataFrame, sector_count: int) -> pd.DataFrame:
    """Shares of the long-term series by sector (rows) and speed bin (columns)."""
    table = frequency_table(
        series["wind_speed"].to_numpy(),
        series["wind_direction"].to_numpy(),
        sector_count=sector_count,
    )
    return pd.DataFrame(
        np.vstack([table.share, table.undirected]),
        index=[f"{centre:g}" for centre in table.sector_centres] + ["no direction"],
        columns=[f"{edge:g}" for edge in table.speed_edges[:-1]],
    )


def _short_of_years(one: OneReference) -> list[str]:
    years = len(one.series) / HOURS_PER_MEAN_YEAR
    if years >= LEAST_YEARS_FOR_VARIABILITY:
        return []
    return [
        f"The reference covers {years:.1f} years; ten or more are usual, and what is called "
        "long-term here is no longer than that."
    ]


def _short_campaign(site: pd.Series) -> list[str]:
    """A warning for a campaign too short to lend upon."""
    months = float(site.notna().sum()) / HOURS_PER_MEAN_YEAR * 12
    if months >= LEAST_MONTHS_FOR_FINANCE:
        return []
    return [
        f"The campaign holds {months:.1f} months of data. Below six a correction can be worse than "
        "none; these figures are no basis for financing, and P95 and P99 least of all."
    ]


def _rows(
    study: Study,
    measured: Artifact,
    correction: LongTermCorrection,
    one: OneReference,
    series: pd.DataFrame,
    site: pd.DataFrame,
    mean_speed: float,
    interval: dict[float, tuple[float, float]],
    total: float,
    variability: tuple[float, str],
    chosen: str,
    shown: str,
    correlation: float,
) -> list[Row]:
    """Figures of merit of the step."""
    blended = study.settings.long_term.method == BLEND
    span = f"{series.index[0]:%Y-%m-%d} to {series.index[-1]:%Y-%m-%d}"
    one_only = len(correction.references) == 1
    told = "normal, from the parts of step 3"
    if blended:
        told = "from an assumed error, one reference" if one_only else "stand-ins' errors"
    source = f"from {shown}"
    if blended:
        source = f"({shown} alone)" if one_only else f"({len(correction.references)})"
    held = correction.back_test.set_index("claimed")["held"]
    rows = [
        Row("long_term.mean_speed_m_s", "Long-term mean wind speed at the mast", mean_speed, "m/s",
            f"{chosen} {source}, {span}, {measured.number('measured.height_m'):g} m"),
        Row("long_term.interval_80_m_s", "its 80 % interval", list(interval[0.8]), "m/s", told),
        Row("long_term.interval_95_m_s", "its 95 % interval", list(interval[0.95]), "m/s", told),
        Row("long_term.standard_uncertainty", "Standard uncertainty of the correction", total, "1",
            "for the mean of the references' own period", as_percent=True),
        Row("long_term.representativeness", "Standard uncertainty of the period for the climate",
            float(correction.parts["standard_uncertainty"]["representativeness"]), "1",
            "yearly variability over the references' years, persistence included",
            as_percent=True),
        Row("long_term.back_test_80", "Share of stand-ins that an 80 % interval held",
            float(held.loc[0.8]), "1",
            f"{int(correction.back_test['stand_in_campaigns'].max())} campaigns of references "
            "taken as the site", as_percent=True),
        Row("long_term.yearly_variability", "Year-to-year standard deviation of mean speed",
            variability[0], "1", variability[1], as_percent=True),
        Row("long_term.correlation", "Correlation of hourly means", correlation, "1",
            f"{len(one.pairs)} hours concurrent with {shown}"),
        Row("long_term.correction", "Long-term mean over the campaign's mean",
            mean_speed / float(site["wind_speed"].mean()), "1",
            "above 1 the campaign was calmer than the long term"),
        Row("long_term.years", "Length of the reference period",
            len(series) / HOURS_PER_MEAN_YEAR, "years", "hours of the long-term series"),
    ]  # fmt: skip
    # One reference alone cannot stand in for the site: what it cannot show has no row.
    return [row for row in rows if not (isinstance(row.value, float) and np.isnan(row.value))]
