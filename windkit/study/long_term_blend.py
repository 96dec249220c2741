"""Long-term correction from many references, with an uncertainty that was held to account.

Here is the one call that a script and the workbook share. References go on trial first
(`long_term_trial`); their corrections are blended and the blend is tried on the references
themselves (`kernels.blend`); the errors seen there are the interval. Methods for the long-term
series are tried in `long_term_methods`. Reading files and settings is done elsewhere.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from windkit.kernels.back_test import (
    draw_errors,
    held_out_rms,
    persistent_mean_variance,
    stand_in_coverage,
    widening_factor,
)
from windkit.kernels.blend import Blend, blend_references, campaign_moments
from windkit.kernels.bootstrap import block_counts, block_length
from windkit.kernels.breaks import lag_one_autocorrelation
from windkit.kernels.correction_methods import SectorVeer
from windkit.study.long_term_inputs import Inputs, prepare_inputs
from windkit.study.long_term_methods import method_scores, method_series
from windkit.study.long_term_result import LongTermCorrection
from windkit.study.long_term_trial import Trial, try_references

__all__ = ["correct_long_term"]

Array = NDArray[np.float64]

#: Standard uncertainty with one reference, whose faults nothing shows [1]. On a real record of a
#: dozen stations over two decades, one year corrected with its best-correlated neighbour missed
#: the mean of the whole record by 9.1 % rms.
SINGLE_REFERENCE_UNCERTAINTY = 0.09
#: Number of equally likely long-term means handed on [1].
DRAWS = 4000
#: Resamples for the sampling part [1].
RESAMPLES = 400
#: Days in a year [day].
DAYS_PER_YEAR = 365.25
#: A campaign within this many days of whole years has no season of its own [day]; our choice.
WHOLE_YEAR_SLACK = 25
#: Years of references from which stand-ins of the same season are enough [1]; our choice.
YEARS_FOR_SEASON = 6
#: Days the season of a stand-in may be off by [day].
SEASON_SLACK = 20
#: Time constant by which windows near the campaign count more [years]. Half of all weight is
#: given so: a break or drift weighs differently at the ends of a record than in its middle.
NEARNESS_YEARS = 2.0
#: Yearly variability where the references are too short to show their own [1]: Raftery et al.
#: 1999; EWEA, Wind Energy - The Facts (id MCP-3).
FALLBACK_YEARLY_VARIABILITY = 0.06
#: How many times farther than its references a site's held-out months must be missed for it to be
#: called unlike them [1]: with twelve months, chance alone reaches 1.3 to 1.4. Our choice.
ODD_SITE = 1.4
#: Levels the back-test prints [1].
LEVELS = (0.5, 0.8, 0.95)


def correct_long_term(
    site: pd.Series,
    references: pd.DataFrame,
    *,
    site_direction: pd.Series | None = None,
    reference_directions: pd.DataFrame | None = None,
    seed: int = 0,
    power: Callable[[Array], Array] | None = None,
    site_breaks: bool = True,
    progress: Callable[[str], None] | None = None,
) -> LongTermCorrection:
    """Long-term mean speed of a site over the references' whole period, and how sure it is.

    Parameters
    ----------
    site : Series
        Wind speed of the campaign [m/s] on a DatetimeIndex, NaN allowed.
    references : DataFrame
        One column a reference: wind speed [m/s], hourly or daily, longer than the site, NaN
        allowed.
    site_direction : Series, optional
        [deg]; with `reference_directions` it gives the series a direction.
    reference_directions : DataFrame, optional
        [deg], columns as `references`; methods are then fitted by sector too.
    seed : int
        The same seed gives the same answer.
    power : callable, optional
        Power [W] of an array of speeds [m/s], to score the methods on energy.
    site_breaks : bool
        Whether the site's own level may have changed within the period as the references' did
        (trees, buildings, instruments). A campaign cannot show it. True widens the interval by
        what the references did; False is for a site known not to have changed.
    progress : callable, optional
        Called with a sentence before each stage.

    Returns
    -------
    LongTermCorrection

    Raises
    ------
    StudyError
        If the data cannot answer: see `prepare_inputs`.

    Notes
    -----
    The correction is the weighted middle of the references' ratios, long term over campaign, in
    logarithms. Ways of blending are weighted by their errors on stand-ins and shrunk to equal
    where those do not tell them apart; the blend is shrunk to no correction as far as the
    stand-ins ask for it. The draws are the stand-ins' errors: each reference was corrected with
    the others from campaigns like the real one, and its own whole record is the truth.

    Examples
    --------
    >>> result = correct_long_term(site, references)  # doctest: +SKIP
    >>> result.mean_speed, result.interval(0.8)  # doctest: +SKIP
    """
    tell = progress or (lambda sentence: None)
    tell("joining the records")
    inputs = prepare_inputs(site, references)
    tell("putting the references on trial")
    trial = try_references(inputs)

    tell("blending the references and trying the blend on them")
    pattern = inputs.weight_day[inputs.campaign]
    moments = campaign_moments(inputs.site_day, inputs.concurrent_day, inputs.weight_day)
    starts = _window_starts(inputs)
    adjusted = inputs.reference_day * trial.homogeneity.factors[trial.month_of_day]
    measured = inputs.measured_day > 0.5

    def blended(own: Array | None, at: NDArray[np.int64]) -> Blend:
        return blend_references(
            moments, inputs.reference_day, measured, pattern, at, own_records=own
        )

    homogeneous = blended(adjusted, starts)
    blend = blended(None, starts) if site_breaks else homogeneous
    campaign_mean = float(moments.target_mean[0])
    mean_speed = campaign_mean * float(np.exp(blend.correction))

    tell("drawing the uncertainty and its parts")
    notes = [*inputs.notes, *trial.notes]
    sampling = _sampling(inputs, blend, seed)
    errors, widening = _draws(inputs, blend, sampling, notes, seed)
    draws = mean_speed * np.exp(errors)
    period, windows = _representativeness(inputs, blend, mean_speed)
    future = draws * np.exp(period * np.random.default_rng([seed, 1]).normal(size=DRAWS))

    table = trial.table.copy()
    used = list(inputs.references.columns)
    table.loc[used, "long_term_over_campaign"] = np.exp(blend.reference_corrections)
    table.loc[used, "weight"] = blend.reference_weights
    return LongTermCorrection(
        mean_speed=mean_speed,
        campaign_mean_speed=campaign_mean,
        draws=draws,
        future_draws=future,
        references=table,
        breaks=trial.breaks,
        parts=_parts(blend, homogeneous, errors, sampling, period, site_breaks),
        back_test=_back_test(blend, widening),
        windows=windows,
        period=(inputs.times[0], inputs.times[-1]),
        widening=widening,
        notes=notes,
        blend=blend,
        _methods=lambda: _methods(inputs, trial, site_direction, reference_directions, power, seed),
        _series=lambda method, mean: _series(
            inputs, trial, site_direction, reference_directions, method, mean, seed
        ),
    )


def _window_starts(inputs: Inputs) -> NDArray[np.int64]:
    """First days of the stand-ins' campaigns: any, or of the same season for part of a year."""
    length = inputs.campaign.stop - inputs.campaign.start
    last = inputs.days.size - length
    over = length % DAYS_PER_YEAR
    whole = length > 300 and min(over, DAYS_PER_YEAR - over) <= WHOLE_YEAR_SLACK
    years = inputs.days.size / DAYS_PER_YEAR
    if not whole and years >= YEARS_FOR_SEASON and length < 3 * DAYS_PER_YEAR:
        off = (np.arange(0, last + 1, 4) - inputs.campaign.start) % DAYS_PER_YEAR
        near = np.minimum(off, DAYS_PER_YEAR - off) <= SEASON_SLACK
        return np.arange(0, last + 1, 4)[near]
    stride = max(1, min(length // 12, last // 40), last // 400)
    return np.arange(0, last + 1, stride)


def _sampling(inputs: Inputs, blend: Blend, seed: int) -> float:
    """Block bootstrap of the campaign's days: sd of the log of the blended long-term mean."""
    seen = inputs.weight_day > 0
    weight = inputs.weight_day[seen]
    site, concurrent = inputs.site_day[seen], inputs.concurrent_day[seen]
    share = blend.reference_weights * blend.shrinkage
    apart = site / site.mean() - (concurrent / concurrent.mean(axis=0)) @ share
    length = block_length(apart)[0]
    count = block_counts(site.size, length, RESAMPLES, seed=seed) * weight
    means = np.log(np.maximum(count @ site, 1e-9)) - np.log(count @ concurrent) @ share
    means -= np.log(count.sum(axis=1)) * (1 - share.sum())
    return float(np.std(means))


def _draws(
    inputs: Inputs, blend: Blend, sampling: float, notes: list[str], seed: int
) -> tuple[Array, float]:
    """Log errors of the long-term mean, and the factor they were widened by."""
    if blend.errors.shape[0] < 2 or not np.isfinite(blend.errors).any():
        rng = np.random.default_rng(seed)
        spread = np.hypot(SINGLE_REFERENCE_UNCERTAINTY, sampling)
        return spread * rng.standard_t(4, DRAWS) / np.sqrt(2), 1.0
    widening = widening_factor(blend.errors)
    if widening > 1.15:
        notes.append(
            f"The references' own back-test did not support the interval as it was; it was "
            f"widened by a factor of {widening:.2f}."
        )
    years = (blend.window_starts - inputs.campaign.start) / DAYS_PER_YEAR
    near = np.exp(-0.5 * (years / NEARNESS_YEARS) ** 2)
    weight = near / near.sum() + 1 / years.size if near.sum() > 0 else None
    errors = widening * draw_errors(blend.errors, DRAWS, weight=weight, seed=seed)
    odd = _site_oddness(inputs)
    if odd > ODD_SITE:
        # Only the sampling of weather grows with a site unlike its references, not their breaks.
        rng = np.random.default_rng([seed, 2])
        extra = sampling * np.sqrt(odd**2 - 1)
        errors = errors + extra * rng.normal(size=errors.size)
        notes.append(
            f"Held-out months of the site were missed {odd:.1f} times as far as those of the "
            "references: the site is unlike them, and the interval was widened for it."
        )
    return errors, widening


def _site_oddness(inputs: Inputs) -> float:
    """Rms error of the site's held-out blocks over that of the middle reference's."""
    seen = inputs.campaign
    days = inputs.days[seen]
    width = 30 if days.size >= 150 else 7
    blocks = np.arange(days.size) // width
    weight, references = inputs.weight_day[seen], inputs.concurrent_day[seen]
    own = held_out_rms(inputs.site_day[seen], references, weight, blocks)
    theirs = [
        held_out_rms(references[:, k], np.delete(references, k, axis=1), weight, blocks)
        for k in range(references.shape[1])
    ]
    return own / max(float(np.median(theirs)), 1e-9)


def _representativeness(
    inputs: Inputs, blend: Blend, mean_speed: float
) -> tuple[float, pd.DataFrame]:
    """Spread of a mean over the references' years, and the result for shorter periods."""
    index = inputs.reference_day / inputs.reference_day.mean(axis=0) @ blend.reference_weights
    back = np.arange(inputs.days.size)[::-1] // DAYS_PER_YEAR
    size = np.bincount(back.astype(int))
    yearly = np.bincount(back.astype(int), index)[size >= 360] / size[size >= 360]
    count = yearly.size
    if count >= 5:
        spread = float(np.std(yearly, ddof=1) / yearly.mean())
        memory = min(lag_one_autocorrelation(yearly), 0.7)
    else:
        spread, memory = FALLBACK_YEARLY_VARIABILITY, 0.0
    period = spread * np.sqrt(persistent_mean_variance(max(count, 1), memory))
    ends = range(5, count + 1)
    table = pd.DataFrame(
        {
            "years": list(ends),
            "mean_speed": [mean_speed * yearly[:n].mean() / yearly.mean() for n in ends],
            "standard_uncertainty": [
                spread * np.sqrt(persistent_mean_variance(n, memory)) for n in ends
            ],
        }
    )
    return float(period), table


def _parts(
    blend: Blend,
    homogeneous: Blend,
    errors: Array,
    sampling: float,
    period: float,
    site_breaks: bool,
) -> pd.DataFrame:
    """Each part's standard uncertainty and share of the variance of the draws."""
    share = blend.reference_weights
    apart = blend.reference_corrections - share @ blend.reference_corrections
    count = share.size
    between_references = np.sqrt(np.sum(share**2 * apart**2) * count / max(count - 1, 1))
    middle = blend.way_weights @ blend.way_corrections
    between_methods = np.sqrt(blend.way_weights @ (blend.way_corrections - middle) ** 2)
    if count > 1:
        inhomogeneous = np.sqrt(max(blend.blend_rms**2 - homogeneous.blend_rms**2, 0.0))
        season = float(np.sqrt(np.mean(np.nanmean(homogeneous.errors, axis=1) ** 2)))
        how = "stand-ins' mean square error less the same with their breaks taken out"
        if not site_breaks:
            inhomogeneous, how = 0.0, "left out: the site is said not to have changed"
    else:
        inhomogeneous, season = SINGLE_REFERENCE_UNCERTAINTY, 0.0
        how = "assumed: one reference shows no faults of its own (see the notes)"
    rows = {
        "sampling": (sampling, "block bootstrap of the campaign's days"),
        "references disagree": (between_references, "spread of their corrections, weighted"),
        "methods disagree": (between_methods, "spread of the ways of blending, weighted"),
        "homogeneity": (inhomogeneous, how),
        "season": (season, "stand-ins' mean error for campaigns at this time of year"),
    }
    # The middle 95 % stands for the spread: a t tail would make the shares a matter of chance.
    total = float(np.diff(np.quantile(errors, [0.025, 0.975]))[0] / 2 / 1.95996) ** 2
    known = sum(value**2 for value, _ in rows.values())
    rest = max(total - known, 0.0)
    rows["site's own weather"] = (np.sqrt(rest), "what the stand-ins' errors hold beyond the above")
    table = pd.DataFrame(
        [(value, value**2 / (known + rest), text) for value, text in rows.values()],
        index=pd.Index(rows, name="part"),
        columns=["standard_uncertainty", "share", "how"],
    )
    table.loc["representativeness"] = (
        period, np.nan, "yearly variability over the references' years; in `future_draws` only"
    )  # fmt: skip
    return table


def _back_test(blend: Blend, widening: float) -> pd.DataFrame:
    counted = int(np.isfinite(blend.errors).sum())
    held = [
        stand_in_coverage(blend.errors, level) if counted and blend.errors.shape[0] > 1 else np.nan
        for level in LEVELS
    ]
    return pd.DataFrame(
        {"claimed": LEVELS, "held": held, "stand_in_campaigns": counted, "widening": widening}
    )


def _best_reference(inputs: Inputs, trial: Trial) -> int:
    return list(inputs.references.columns).index(trial.table.index[0])


def _directions(
    inputs: Inputs,
    best: int,
    site_direction: pd.Series | None,
    reference_directions: pd.DataFrame | None,
) -> tuple[Array | None, Array | None]:
    """Directions of the best reference and the site on the joined clock."""
    name = inputs.references.columns[best]
    zone = inputs.times.tz

    def on_clock(series: pd.Series) -> Array:
        if zone is not None:
            series = series.tz_convert("UTC")
        return np.asarray(series.reindex(inputs.times), dtype=float)

    reference = None
    if reference_directions is not None and name in reference_directions.columns:
        reference = on_clock(reference_directions[name])
        if not np.isfinite(reference).any():
            reference = None
    own = None if site_direction is None else on_clock(site_direction)
    return reference, own


def _methods(
    inputs: Inputs,
    trial: Trial,
    site_direction: pd.Series | None,
    reference_directions: pd.DataFrame | None,
    power: Callable[[Array], Array] | None,
    seed: int,
) -> pd.DataFrame:
    best = _best_reference(inputs, trial)
    direction, own = _directions(inputs, best, site_direction, reference_directions)
    speed = inputs.references.iloc[:, best].to_numpy()
    both = np.isfinite(inputs.site) & np.isfinite(speed)
    return method_scores(
        inputs.site[both],
        speed[both],
        None if direction is None else direction[both],
        inputs.times[both],
        site_direction=None if own is None else own[both],
        power=power,
        seed=seed,
    )


def _series(
    inputs: Inputs,
    trial: Trial,
    site_direction: pd.Series | None,
    reference_directions: pd.DataFrame | None,
    method: str,
    mean_speed: float,
    seed: int,
) -> pd.DataFrame:
    best = _best_reference(inputs, trial)
    direction, own = _directions(inputs, best, site_direction, reference_directions)
    speed = inputs.references.iloc[:, best].to_numpy()
    both = np.isfinite(inputs.site) & np.isfinite(speed)
    X = speed if direction is None else np.column_stack([speed, direction])
    table = pd.DataFrame(index=inputs.times)
    table["wind_speed"] = method_series(
        method, inputs.site[both], X[both], X, mean_speed, seed=seed
    )
    if direction is not None and own is not None:
        table["wind_direction"] = SectorVeer().fit(direction, own).predict(direction)
    return table
