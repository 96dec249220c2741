"""Long-term correction from many references, with an uncertainty that was held to account.

Here is the one call that a script and the workbook share. References go on trial first
(`long_term_trial`); their corrections are blended and the blend is tried on the references
themselves (`kernels.blend`); the errors seen there are the interval. Methods for the long-term
series are tried in `long_term_methods`. Reading files and settings is done elsewhere.
"""

from __future__ import annotations

from collections.abc import Callable
from numbers import Integral

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from windkit.kernels.blend import Blend, blend_references, campaign_moments
from windkit.kernels.correction_methods import SectorVeer
from windkit.study.errors import StudyError
from windkit.study.long_term_clock import direction_on_clock
from windkit.study.long_term_inputs import LEAST_LENGTH_RATIO, Inputs, prepare_inputs
from windkit.study.long_term_methods import method_scores, method_series
from windkit.study.long_term_result import LongTermCorrection
from windkit.study.long_term_trial import Trial, try_references
from windkit.study.long_term_uncertainty import (
    DAYS_PER_YEAR,
    DRAWS,
    back_test_table,
    draw_long_term,
    parts_of_uncertainty,
    representativeness,
    sampling_part,
)

__all__ = ["correct_long_term"]

Array = NDArray[np.float64]

#: A campaign within this many days of whole years has no season of its own [day]; our choice.
WHOLE_YEAR_SLACK = 25
#: Years of references from which stand-ins of the same season are enough [1]; our choice.
YEARS_FOR_SEASON = 6
#: Days the season of a stand-in may be off by [day].
SEASON_SLACK = 20
#: Months of further measurement whose worth is worked out [1]; 0 is the present campaign.
MORE_MONTHS = (0, 3, 6, 12)


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
    if not isinstance(seed, Integral) or seed < 0:
        raise StudyError.of(
            key="seed",
            met=f"it is {seed!r}",
            rule="a seed is a whole number from 0 up",
            remedy="leave it out for 0",
        )
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
    sampling = sampling_part(inputs, blend, seed)
    errors, widening = draw_long_term(inputs, blend, sampling, notes, seed)
    draws = mean_speed * np.exp(errors)
    period, windows = representativeness(inputs, blend, mean_speed)
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
        parts=parts_of_uncertainty(blend, homogeneous, errors, sampling, period, site_breaks),
        back_test=back_test_table(blend, widening),
        windows=windows,
        period=(inputs.times[0], inputs.times[-1]),
        widening=widening,
        notes=notes,
        blend=blend,
        _methods=lambda name: _methods(
            inputs, name, site_direction, reference_directions, power, seed
        ),
        _series=lambda method, mean: _series(
            inputs, trial, site_direction, reference_directions, method, mean, seed
        ),
        _longer=lambda: _longer(inputs, adjusted if not site_breaks else None),
    )


def _longer(inputs: Inputs, own: Array | None) -> pd.DataFrame:
    """Rms error of the stand-ins after campaigns of the present and greater lengths."""
    moments = campaign_moments(inputs.site_day, inputs.concurrent_day, inputs.weight_day)
    present = inputs.weight_day[inputs.campaign]
    rows = []
    for months in MORE_MONTHS:
        pattern = np.concatenate([present, np.ones(round(months * DAYS_PER_YEAR / 12))])
        if pattern.size > inputs.days.size / LEAST_LENGTH_RATIO:
            break
        blend = blend_references(
            moments,
            inputs.reference_day,
            inputs.measured_day > 0.5,
            pattern,
            _window_starts(inputs, pattern.size),
            own_records=own,
        )
        rows.append({"months": months, "stand_in_rms": blend.blend_rms})
    return pd.DataFrame(rows, columns=["months", "stand_in_rms"])


def _window_starts(inputs: Inputs, length: int | None = None) -> NDArray[np.int64]:
    """First days of the stand-ins' campaigns: any, or of the same season for part of a year."""
    length = length or inputs.campaign.stop - inputs.campaign.start
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
    reference = None
    if reference_directions is not None and name in reference_directions.columns:
        reference = direction_on_clock(
            reference_directions[name], inputs.times, "reference_directions"
        )
        if not np.isfinite(reference).any():
            reference = None
    own = None
    if site_direction is not None:
        own = direction_on_clock(site_direction, inputs.times, "site_direction")
    return reference, own


def _methods(
    inputs: Inputs,
    name: str,
    site_direction: pd.Series | None,
    reference_directions: pd.DataFrame | None,
    power: Callable[[Array], Array] | None,
    seed: int,
) -> pd.DataFrame:
    best = list(inputs.references.columns).index(name)
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
    months = np.asarray(inputs.times.month)
    table["wind_speed"] = method_series(
        method, inputs.site[both], X[both], X, mean_speed,
        months=months[both], months_long=months, seed=seed,
    )  # fmt: skip
    if direction is not None and own is not None:
        table["wind_direction"] = SectorVeer().fit(direction, own).predict(direction)
    return table
