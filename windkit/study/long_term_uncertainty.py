"""Uncertainty of a long-term correction: draws from the stand-ins' errors, and its parts.

Here the errors that references made when they stood in for the site become draws, are widened where
the study's own data do not support them, and are laid out in parts. The blend itself is made in
`kernels.blend` and put together with all else in `long_term_blend`.
"""

from __future__ import annotations

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
from windkit.kernels.blend import Blend
from windkit.kernels.bootstrap import block_counts, block_length
from windkit.kernels.breaks import lag_one_autocorrelation
from windkit.study.long_term_inputs import Inputs

__all__ = [
    "DAYS_PER_YEAR",
    "DRAWS",
    "back_test_table",
    "draw_long_term",
    "parts_of_uncertainty",
    "representativeness",
    "sampling_part",
]

Array = NDArray[np.float64]

#: Days in a year [day].
DAYS_PER_YEAR = 365.25
#: Standard uncertainty with one reference, whose faults nothing shows [1]. On a real record of a
#: dozen stations over two decades, one year corrected with its best-correlated neighbour missed
#: the mean of the whole record by 9.1 % rms.
SINGLE_REFERENCE_UNCERTAINTY = 0.09
#: Number of equally likely long-term means handed on [1].
DRAWS = 4000
#: Resamples for the sampling part [1].
RESAMPLES = 400
#: Time constant by which windows near the campaign count more [years]. Half of all weight is
#: given so: a break or drift weighs differently at the ends of a record than in its middle.
NEARNESS_YEARS = 2.0
#: Yearly variability where the references are too short to show their own [1]: Raftery et al.
#: 1999; EWEA, Wind Energy - The Facts (id MCP-3).
FALLBACK_YEARLY_VARIABILITY = 0.06
#: Factor from which the draws are widened [1]: below it, chance alone asks for it. Our choice.
LEAST_WIDENING = 1.05
#: How many times farther than its references a site's held-out months must be missed for it to be
#: called unlike them [1]: with twelve months, chance alone reaches 1.3 to 1.4. Our choice.
ODD_SITE = 1.4
#: Levels the back-test prints [1].
LEVELS = (0.5, 0.8, 0.95)


def sampling_part(inputs: Inputs, blend: Blend, seed: int) -> float:
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


def draw_long_term(
    inputs: Inputs, blend: Blend, sampling: float, notes: list[str], seed: int
) -> tuple[Array, float]:
    """Log errors of the long-term mean, and the factor they were widened by."""
    if blend.errors.shape[0] < 2 or not np.isfinite(blend.errors).any():
        rng = np.random.default_rng(seed)
        spread = np.hypot(SINGLE_REFERENCE_UNCERTAINTY, sampling)
        return spread * rng.standard_t(4, DRAWS) / np.sqrt(2), 1.0
    widening = widening_factor(blend.errors)
    if widening < LEAST_WIDENING:
        widening = 1.0
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


def representativeness(
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


def parts_of_uncertainty(
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


def back_test_table(blend: Blend, widening: float) -> pd.DataFrame:
    counted = int(np.isfinite(blend.errors).sum())
    held = [
        stand_in_coverage(blend.errors, level) if counted and blend.errors.shape[0] > 1 else np.nan
        for level in LEVELS
    ]
    return pd.DataFrame(
        {"claimed": LEVELS, "held": held, "stand_in_campaigns": counted, "widening": widening}
    )
