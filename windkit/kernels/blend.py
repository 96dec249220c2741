"""Blend of many references' corrections, each way of blending tried on the references themselves.

Here a site's correction is put together from all references. Every reference in turn plays the
site ("stand-in"): cut to a campaign like the real one, at many dates, it is corrected with the
others, and since its own whole record is known, so is the error. Those errors choose among the
ways of blending, shrink the correction where the evidence for it is poor, and are the interval.
Correlation over one year says little about a break in the other nineteen; these errors hold it.

Not here: dates and files, the methods that make a series, the search for breaks.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy import signal

__all__ = [
    "WAYS",
    "Blend",
    "Moments",
    "Way",
    "blend_references",
    "campaign_moments",
    "fill_gaps",
    "window_moments",
]

Array = NDArray[np.float64]

#: Prior standard deviation of the factor a correction is shrunk by, about 1 [1]. Our choice:
#: it takes a clear verdict of the stand-ins to halve a correction.
SHRINKAGE_SPREAD = 0.25
#: Least share of real (not filled) data a stand-in needs in a window to count there [1].
LEAST_MEASURED = 0.7
#: Least correlation that a weight is made from [1], so that a poor reference weighs little, not 0.
LEAST_CORRELATION = 0.05


#: Weight each gain starts with [1]: the ratio has nothing that must be estimated from the
#: campaign, so the others have to earn theirs. Our choice.
GAIN_PRIOR = {"ratio": 0.6, "variance_ratio": 0.2, "regression": 0.2}


class Way(NamedTuple):
    """One way of blending: `gain` of each reference's departure and `centre` over references."""

    gain: str
    centre: str


#: The ways tried. Gains: ratio of means 1; variance ratio, of the coefficients of variation;
#: regression, that times the correlation. Centres: mean and median weighted by correlation, and
#: the mean weighted by agreement with the other references too.
WAYS = tuple(Way(gain, centre) for gain in GAIN_PRIOR for centre in ("mean", "median", "trusted"))


@dataclass(frozen=True)
class Moments:
    """First and second moments of a target and the references in windows.

    Attributes
    ----------
    target_mean, target_sd : ndarray, shape (w,)
        [m/s].
    mean, sd, correlation : ndarray, shape (w, m)
        Of the references [m/s], [m/s] and with the target [1].
    """

    target_mean: Array
    target_sd: Array
    mean: Array
    sd: Array
    correlation: Array


@dataclass(frozen=True)
class Blend:
    """A blended correction and what the stand-ins say of it. All logarithms of factors.

    Attributes
    ----------
    correction : float
        Log of long-term over campaign mean, blended and shrunk.
    shrinkage : float
        Factor the blended correction was multiplied with [1].
    way_weights : ndarray, shape (k,)
        Weight of each way of `ways` [1].
    ways : tuple of Way
    way_corrections : ndarray, shape (k,)
        Of each way for the site.
    way_rms : ndarray, shape (k,)
        Rms error of each way over the stand-ins; NaN without stand-ins.
    uncorrected_rms, blend_rms : float
        Rms error of doing nothing and of the blend over the stand-ins.
    reference_corrections, reference_weights : ndarray, shape (m,)
        Of each reference by itself, averaged over the ways.
    errors : ndarray, shape (m, w)
        Truth less blend for each stand-in and window; NaN where a window was left out.
    window_starts : ndarray of int, shape (w,)
    """

    correction: float
    shrinkage: float
    way_weights: Array
    ways: tuple[Way, ...]
    way_corrections: Array
    way_rms: Array
    uncorrected_rms: float
    blend_rms: float
    reference_corrections: Array
    reference_weights: Array
    errors: Array
    window_starts: NDArray[np.int64]


def fill_gaps(references: ArrayLike, *, rounds: int = 3) -> tuple[Array, NDArray[np.bool_]]:
    """References with their gaps filled from the others, and where they were measured.

    Parameters
    ----------
    references : array_like, shape (n, m)
        Speeds [m/s], NaN where missing.
    rounds : int
        Times that levels and fillings are worked out from each other [1].

    Returns
    -------
    filled : ndarray, shape (n, m)
        A gap holds the reference's level times the mean of the others' speeds over their levels;
        a step at which every reference is missing, the reference's mean.
    measured : ndarray of bool, shape (n, m)

    Notes
    -----
    This serves comparison of means only: a filled value has too little spread for energy.
    """
    values = np.asarray(references, dtype=float)
    measured = np.isfinite(values)
    if measured.all():
        return values.copy(), measured
    level = np.nanmean(values, axis=0)
    filled = np.where(measured, values, level)
    for _ in range(rounds):
        relative = np.where(measured, values / level, 0.0)
        present = measured.sum(axis=1, keepdims=True)
        index = np.where(
            present > 0, relative.sum(axis=1, keepdims=True) / np.maximum(present, 1), 1.0
        )
        # A reference's level is judged where it was measured, against the index there.
        level = np.nansum(np.where(measured, values, 0.0), axis=0) / np.sum(
            np.where(measured, index, 0.0), axis=0
        )
        filled = np.where(measured, values, level * index)
    return filled, measured


def window_moments(
    values: Array, pattern: Array, starts: NDArray[np.int64]
) -> tuple[Array, Array, Array]:
    """Means, standard deviations and correlations of all columns in windows of one pattern.

    Parameters
    ----------
    values : ndarray, shape (n, m)
        No NaN.
    pattern : ndarray, shape (length,)
        Weight of each step of the campaign, not negative: 0 where the site is missing.
    starts : ndarray of int, shape (w,)
        First steps of the windows.

    Returns
    -------
    mean, sd : ndarray, shape (w, m)
    correlation : ndarray, shape (w, m, m)
    """
    centre = values.mean(axis=0)
    about = values - centre
    weight = pattern / pattern.sum()
    columns = values.shape[1]
    first, second = np.triu_indices(columns)

    def windowed(series: Array) -> Array:
        whole = signal.fftconvolve(series, weight[::-1, None], mode="valid", axes=0)
        return np.asarray(whole[starts])

    mean = windowed(about)
    product = windowed(about[:, first] * about[:, second]) - mean[:, first] * mean[:, second]
    covariance = np.empty((starts.size, columns, columns))
    covariance[:, first, second] = product
    covariance[:, second, first] = product
    sd = np.sqrt(np.maximum(np.einsum("wii->wi", covariance), 1e-12))
    return mean + centre, sd, covariance / (sd[:, :, None] * sd[:, None, :])


def campaign_moments(site: Array, references: Array, weight: Array) -> Moments:
    """Moments of the site itself in its campaign, one window.

    `site` and `weight` are (n,), the weight 0 where the site is missing; `references` is (n, m).
    """
    seen = weight > 0
    w = weight[seen] / weight[seen].sum()
    s, r = site[seen], references[seen]
    site_mean, mean = w @ s, w @ r
    site_sd = np.sqrt(max(w @ (s - site_mean) ** 2, 1e-12))
    sd = np.sqrt(np.maximum(w @ (r - mean) ** 2, 1e-12))
    correlation = (w * (s - site_mean)) @ (r - mean) / (site_sd * sd)
    return Moments(
        np.array([site_mean]), np.array([site_sd]), mean[None], sd[None], correlation[None]
    )


def blend_references(
    site_moments: Moments,
    references: Array,
    measured: NDArray[np.bool_],
    pattern: Array,
    starts: NDArray[np.int64],
    *,
    own_records: Array | None = None,
) -> Blend:
    """Blend the references' corrections for a site, tried on every reference in turn.

    Parameters
    ----------
    site_moments : Moments
        Of the site in its campaign, with `references`.
    references : ndarray, shape (n, m)
        Gap-filled records [m/s].
    measured : ndarray of bool, shape (n, m)
        Where a reference was measured.
    pattern : ndarray, shape (length,)
        The campaign: weight of each step from its first to its last.
    starts : ndarray of int, shape (w,)
        Where stand-ins have their campaigns.
    own_records : ndarray, shape (n, m), optional
        What a stand-in's truth and campaign are taken from: `references` if left out, the
        homogenised records if the site is held to have no breaks of its own.

    Returns
    -------
    Blend
    """
    ways = WAYS
    count = references.shape[1]
    long_mean = references.mean(axis=0)
    own = references if own_records is None else own_records
    enough = count >= 2 and starts.size > 0
    if enough:
        stacked = np.concatenate([own, references], axis=1)
        mean, sd, correlation = window_moments(stacked, pattern, starts)
        departures = np.log(long_mean / mean[:, count:])
    else:
        departures = np.empty((0, count))
    trust = _trust(departures)

    alone = [_single(way, long_mean, site_moments, trust) for way in ways]
    site_way = np.array([_centred(way, *pair)[0] for way, pair in zip(ways, alone, strict=True)])
    singles = np.array([single[0] for single, _ in alone])
    weights = np.array([weight[0] / weight[0].sum() for _, weight in alone])

    if not enough:
        prior = _prior()
        return Blend(
            correction=float(prior @ site_way), shrinkage=1.0, way_weights=prior, ways=ways,
            way_corrections=site_way, way_rms=np.full(len(ways), np.nan),
            uncorrected_rms=np.nan, blend_rms=np.nan, reference_corrections=prior @ singles,
            reference_weights=prior @ weights, errors=np.empty((count, 0)),
            window_starts=starts[:0],
        )  # fmt: skip

    truth = np.log(own.mean(axis=0) / mean[:, :count]).T
    tried = np.empty((len(ways), count, starts.size))
    for row in range(count):
        others = np.delete(np.arange(count), row)
        moments = Moments(
            mean[:, row], sd[:, row], mean[:, count + others], sd[:, count + others],
            correlation[:, row][:, count + others],
        )  # fmt: skip
        its_trust = _trust(departures[:, others])
        for index, way in enumerate(ways):
            tried[index, row] = _centred(way, *_single(way, long_mean[others], moments, its_trust))
    share = window_moments(measured.astype(float), pattern, starts)[0].T
    counted = share >= LEAST_MEASURED
    independent = max(references.shape[0] / pattern.size, 1.0)

    def choose(rows: NDArray[np.int64]) -> tuple[Array, float]:
        return _choose(truth[rows], tried[:, rows], counted[rows], independent)

    everyone = np.arange(count)
    way_weights, shrinkage = choose(everyone)
    errors = np.empty_like(truth)
    for row in range(count):  # a stand-in's own truth has no say in how it is corrected
        others = everyone[everyone != row] if count > 2 else everyone
        its_weights, its_shrinkage = choose(others)
        errors[row] = truth[row] - its_shrinkage * (its_weights @ tried[:, row])
    errors[~counted] = np.nan
    square = np.where(counted, (truth - tried) ** 2, np.nan)
    return Blend(
        correction=shrinkage * float(way_weights @ site_way),
        shrinkage=shrinkage,
        way_weights=way_weights,
        ways=ways,
        way_corrections=site_way,
        way_rms=np.sqrt(np.nanmean(square, axis=(1, 2))),
        uncorrected_rms=float(np.sqrt(np.nanmean(np.where(counted, truth, np.nan) ** 2))),
        blend_rms=float(np.sqrt(np.nanmean(errors**2))),
        reference_corrections=way_weights @ singles,
        reference_weights=way_weights @ weights,
        errors=errors,
        window_starts=starts,
    )


def _trust(departures: Array) -> Array:
    """Weight of each reference from how its corrections (w, m) agree with the others'.

    The inverse of the mean square distance from the others' median, with half the average of
    all references mixed in, so that chance agreement of a few windows is not taken for quality.
    """
    count = departures.shape[1]
    if count < 3 or departures.shape[0] == 0:
        return np.ones(count)
    apart = np.empty(count)
    for row in range(count):
        others = np.delete(departures, row, axis=1)
        apart[row] = np.mean((departures[:, row] - np.median(others, axis=1)) ** 2)
    return np.asarray(1 / (0.5 * apart + 0.5 * apart.mean() + 1e-12))


def _single(way: Way, long_mean: Array, moments: Moments, trust: Array) -> tuple[Array, Array]:
    """Log correction (w, m) by each reference alone, and its weight."""
    departure = long_mean / moments.mean - 1
    variation = (moments.target_sd / moments.target_mean)[:, None] / (moments.sd / moments.mean)
    gains: dict[str, Array] = {
        "ratio": np.ones_like(variation),
        "variance_ratio": variation,
        "regression": variation * moments.correlation,
    }
    gain = gains[way.gain]
    weight = np.maximum(moments.correlation, LEAST_CORRELATION)
    if way.centre == "trusted":
        weight = weight * trust
    return np.log1p(np.maximum(gain * departure, -0.9)), weight


def _centred(way: Way, single: Array, weight: Array) -> Array:
    """Weighted mean or weighted median over references, (w,)."""
    weight = weight / weight.sum(axis=1, keepdims=True)
    if way.centre != "median":
        return np.asarray(np.sum(weight * single, axis=1))
    order = np.argsort(single, axis=1)
    value = np.take_along_axis(single, order, axis=1)
    mass = np.take_along_axis(weight, order, axis=1)
    middle = np.cumsum(mass, axis=1) - mass / 2
    at = np.clip(np.sum(middle < 0.5, axis=1), 1, max(single.shape[1] - 1, 1))
    if single.shape[1] == 1:
        return value[:, 0]
    row = np.arange(single.shape[0])
    low, high = middle[row, at - 1], middle[row, at]
    part = np.clip((0.5 - low) / np.maximum(high - low, 1e-12), 0, 1)
    return np.asarray(value[row, at - 1] * (1 - part) + value[row, at] * part)


def _prior() -> Array:
    prior = np.array([GAIN_PRIOR[way.gain] for way in WAYS])
    return prior / prior.sum()


def _choose(
    truth: Array, tried: Array, counted: NDArray[np.bool_], independent: float
) -> tuple[Array, float]:
    """Weights of the ways, the prior's where not told apart, and the shrinkage of their blend."""
    mass = counted / max(counted.sum(), 1)
    mse = np.sum(mass * (truth - tried) ** 2, axis=(1, 2))
    # Stand-ins of one window share its weather: count independent windows, and a few stand-ins.
    evidence = independent * np.sqrt(truth.shape[0])
    with np.errstate(under="ignore"):
        weights = _prior() * np.exp(-0.5 * evidence * (mse / max(mse.min(), 1e-12) - 1))
    weights = weights / weights.sum()
    blended = np.tensordot(weights, tried, axes=1)
    power = float(np.sum(mass * blended**2))
    if power < 1e-12:
        return weights, 1.0
    slope = float(np.sum(mass * truth * blended)) / power
    noise = float(np.sum(mass * (truth - slope * blended) ** 2))
    variance = noise / power / evidence
    shrinkage = (slope * SHRINKAGE_SPREAD**2 + variance) / (SHRINKAGE_SPREAD**2 + variance)
    return weights, float(np.clip(shrinkage, 0.0, 1.2))
