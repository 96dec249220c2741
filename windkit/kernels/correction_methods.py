"""Further methods of long-term correction: errors in both records, and whole distributions.

Here are total least squares, quantile mapping, the matrix of conditional distributions, the
scaling of Weibull parameters, and the turning of directions by sector. All keep the fit/predict
convention of `estimator`. The basic lines and the wrapper by sector stand in `correction`; which
method serves a study is decided by hold-out, not here.
"""

from __future__ import annotations

from typing import Self

import numpy as np
from numpy.typing import ArrayLike, NDArray

from windkit.kernels.circular import direction_difference, mean_direction
from windkit.kernels.estimator import (
    SiteEstimator,
    concurrent_pairs,
    merged_neighbours,
    refuse_constant,
    speed_and_direction,
)
from windkit.kernels.frequency import sector_index
from windkit.kernels.weibull import fit_weibull

__all__ = [
    "ConditionalDistributions",
    "QuantileMapping",
    "SectorVeer",
    "TotalLeastSquares",
    "WeibullParameterScaling",
]

#: Fewest pairs a bin of the matrix is drawn from [1], our choice.
LEAST_IN_BIN = 8


class TotalLeastSquares(SiteEstimator):
    """Line that allows for errors in both records.

    Parameters
    ----------
    error_ratio : float
        Variance of the site's error over that of the reference's [1]; 1 makes the line that is
        nearest to the points at right angles.

    Attributes
    ----------
    slope_, intercept_ : float
        Of the line [1], [m/s].

    References
    ----------
    .. [1] Deming 1943, Statistical Adjustment of Data, Wiley.
    """

    def __init__(self, *, error_ratio: float = 1.0) -> None:
        self.error_ratio = error_ratio

    def fit(self, X: ArrayLike, y: ArrayLike) -> Self:
        x, site = concurrent_pairs(X, y)
        refuse_constant(x, "reference")
        self.pair_count_ = x.size
        sxx, syy = np.var(x), np.var(site)
        sxy = np.mean((x - x.mean()) * (site - site.mean()))
        if sxy <= 0:
            raise ValueError(
                "site and reference do not rise together (their covariance is not positive), so "
                "a line through both errors is undefined; choose another reference"
            )
        ratio, tilt = self.error_ratio, syy - self.error_ratio * sxx
        self.slope_ = float((tilt + np.sqrt(tilt**2 + 4 * ratio * sxy**2)) / (2 * sxy))
        self.intercept_ = float(site.mean() - self.slope_ * x.mean())
        return self

    def predict(self, X: ArrayLike) -> NDArray[np.float64]:
        return self.slope_ * speed_and_direction(X)[0] + self.intercept_


class QuantileMapping(SiteEstimator):
    """Site speed of the same non-exceedance as the reference speed.

    Parameters
    ----------
    quantile_count : int
        Quantiles of both records that the map joins by straight lines [1].

    Notes
    -----
    Above the highest reference speed of the fit the map goes on with the ratio reached there.
    Below the lowest it goes to the origin.

    References
    ----------
    .. [1] Panofsky and Brier 1968, Some Applications of Statistics to Meteorology (matching of
       cumulative distributions).
    """

    def __init__(self, *, quantile_count: int = 200) -> None:
        self.quantile_count = quantile_count

    def fit(self, X: ArrayLike, y: ArrayLike) -> Self:
        x, site = concurrent_pairs(X, y)
        refuse_constant(x, "reference")
        self.pair_count_ = x.size
        share = np.linspace(0, 1, min(self.quantile_count, x.size))
        self.reference_quantiles_ = np.maximum.accumulate(np.quantile(x, share))
        self.site_quantiles_ = np.quantile(site, share)
        return self

    def predict(self, X: ArrayLike) -> NDArray[np.float64]:
        speed = speed_and_direction(X)[0]
        known, mapped = self.reference_quantiles_, self.site_quantiles_
        inside = np.interp(speed, known, mapped)
        with np.errstate(invalid="ignore"):
            above = speed * (mapped[-1] / known[-1])
            below = speed * (mapped[0] / known[0]) if known[0] > 0 else inside
            return np.where(speed > known[-1], above, np.where(speed < known[0], below, inside))


class ConditionalDistributions(SiteEstimator):
    """Site speed drawn from what the site showed at the same reference speed.

    Parameters
    ----------
    bin_width : float
        Of the reference's speed bins [m/s].
    seed : int
        Of the draws.

    Notes
    -----
    The matrix method: one row of site speeds for each bin of reference speed. A bin with too few
    pairs takes the nearest filled bin's row, scaled by the ratio of the two speeds. Sectors come
    from `BySector`. Draws of one hour are independent of the next, so the series keeps the
    distribution and loses its memory.

    References
    ----------
    .. [1] Woods and Watson 1997, J. Wind Eng. Ind. Aerodyn. 66:85.
    """

    def __init__(self, *, bin_width: float = 1.0, seed: int = 0) -> None:
        self.bin_width = bin_width
        self.seed = seed

    def fit(self, X: ArrayLike, y: ArrayLike) -> Self:
        x, site = concurrent_pairs(X, y)
        self.pair_count_ = x.size
        index = np.floor(x / self.bin_width).astype(np.int64)
        order = np.lexsort((x, index))
        bins, start, count = np.unique(index[order], return_index=True, return_counts=True)
        filled = count >= LEAST_IN_BIN
        if not filled.any():  # too few pairs for a matrix: one row holds them all
            bins, start, count, filled = bins[:1], start[:1], np.array([x.size]), np.array([True])
        self._bins, self._start, self._count = bins[filled], start[filled], count[filled]
        self._reference, self._site = x[order], site[order]
        return self

    def predict(self, X: ArrayLike) -> NDArray[np.float64]:
        speed = speed_and_direction(X)[0]
        known = np.isfinite(speed)
        at = np.floor(np.where(known, speed, 0.0) / self.bin_width)
        row = np.clip(np.searchsorted(self._bins, at), 0, self._bins.size - 1)
        left = np.maximum(row - 1, 0)
        row = np.where(np.abs(self._bins[left] - at) < np.abs(self._bins[row] - at), left, row)
        share = np.random.default_rng(self.seed).random(speed.shape)
        pick = self._start[row] + (share * self._count[row]).astype(np.int64)
        drawn = self._site[pick]
        outside = known & (self._bins[row] != at) & (self._reference[pick] > 0)
        scaled = drawn * speed / np.where(outside, self._reference[pick], 1.0)
        return np.where(known, np.where(outside, scaled, drawn), np.nan)


class WeibullParameterScaling(SiteEstimator):
    """Map that carries the reference's Weibull distribution into the site's.

    Attributes
    ----------
    reference_scale_, site_scale_ : float
        Weibull scales [m/s].
    reference_shape_, site_shape_ : float
        Weibull shapes [1].

    Notes
    -----
    v = A_site (u / A_reference)^(k_reference / k_site), which is exact quantile mapping if both
    are Weibull.

    References
    ----------
    .. [1] Clive 2004, Wind Eng. 28:213, for correcting Weibull parameters between sites (from
       memory).
    """

    def fit(self, X: ArrayLike, y: ArrayLike) -> Self:
        x, site = concurrent_pairs(X, y, least=10)
        refuse_constant(x, "reference")
        refuse_constant(site, "site")
        self.pair_count_ = x.size
        reference, target = fit_weibull(x), fit_weibull(site)
        self.reference_scale_ = float(reference.weibull_scale)
        self.reference_shape_ = float(reference.weibull_shape)
        self.site_scale_ = float(target.weibull_scale)
        self.site_shape_ = float(target.weibull_shape)
        return self

    def predict(self, X: ArrayLike) -> NDArray[np.float64]:
        speed = np.maximum(speed_and_direction(X)[0], 0.0)
        power = self.reference_shape_ / self.site_shape_
        return np.asarray(self.site_scale_ * (speed / self.reference_scale_) ** power)


class SectorVeer:
    """Turning from the reference's direction to the site's, by sector.

    Parameters
    ----------
    sector_count, min_count : int
        As for `BySector`.

    Attributes
    ----------
    veer_ : ndarray, shape (sector_count,)
        Mean turning [deg], clockwise positive; 0 where the circle holds no pair.
    """

    def __init__(self, *, sector_count: int = 12, min_count: int = 30) -> None:
        self.sector_count = sector_count
        self.min_count = min_count

    def fit(self, reference_direction: ArrayLike, site_direction: ArrayLike) -> Self:
        """Fit on concurrent directions [deg], (n,) each; pairs with a NaN are left out."""
        reference = np.asarray(reference_direction, dtype=float)
        site = np.asarray(site_direction, dtype=float)
        kept = np.isfinite(reference) & np.isfinite(site)
        sector = sector_index(reference[kept], self.sector_count)
        turning = np.asarray(direction_difference(site[kept], reference[kept]))
        reach = merged_neighbours(np.bincount(sector, minlength=self.sector_count), self.min_count)
        self.veer_ = np.zeros(self.sector_count)
        half = self.sector_count // 2
        for centre in range(self.sector_count):
            near = np.abs((sector - centre + half) % self.sector_count - half) <= reach[centre]
            if near.any():
                mean = float(mean_direction(turning[near] % 360.0))
                self.veer_[centre] = 0.0 if np.isnan(mean) else (mean + 180.0) % 360.0 - 180.0
        return self

    def predict(self, reference_direction: ArrayLike) -> NDArray[np.float64]:
        """Site direction [deg] for reference directions (n,); NaN where that is NaN."""
        reference = np.asarray(reference_direction, dtype=float)
        sector = sector_index(reference, self.sector_count)
        return np.where(sector >= 0, (reference + self.veer_[sector]) % 360.0, np.nan)
