"""Long-term correction: the three basic lines from a reference to a site, and two closed forms.

Here are `RatioOfMeans`, `LinearRegression` and `VarianceRatio`, the wrapper `BySector` that fits
one of them for each direction sector, and the published variances of a corrected mean. The
estimators follow the fit/predict convention of scikit-learn without importing it, so that its
`clone`, splitters and scorers work on them. Further methods stand in `correction_methods`,
resampling in `bootstrap`; nothing here knows dates, files or frames.
"""

from __future__ import annotations

from typing import Self

import numpy as np
from numpy.typing import ArrayLike, NDArray

from windkit.kernels.estimator import (
    SiteEstimator,
    concurrent_pairs,
    copy_of,
    merged_neighbours,
    refuse_constant,
    speed_and_direction,
)
from windkit.kernels.frequency import sector_index

__all__ = [
    "BySector",
    "LinearRegression",
    "RatioOfMeans",
    "VarianceRatio",
    "long_term_standard_uncertainty",
    "record_extension_variance",
]

#: Groups of equal count, along the fitted value, that residuals are drawn within [1]. Our choice:
#: fine enough that the scatter may grow with speed, coarse enough for a month of hours.
SCATTER_GROUPS = 20
#: Fewest residuals in one such group [1], our choice.
LEAST_IN_SCATTER_GROUP = 10


class RatioOfMeans(SiteEstimator):
    """Site speed as reference speed times the ratio of their concurrent means.

    Attributes
    ----------
    ratio_ : float
        Mean of the site over mean of the reference in the concurrent pairs [1].

    Notes
    -----
    Keeps the reference's own relative spread, so it is right for energy only where site and
    reference share a Weibull shape. Common practice; no single source.
    """

    def fit(self, X: ArrayLike, y: ArrayLike) -> Self:
        x, y_kept = concurrent_pairs(X, y)
        if not np.mean(x) > 0:
            raise ValueError(
                "the reference's mean over the concurrent pairs is not positive, so a ratio of "
                "means is undefined; check its unit and its missing-value code"
            )
        self.pair_count_ = x.size
        self.ratio_ = float(np.mean(y_kept) / np.mean(x))
        return self

    def predict(self, X: ArrayLike) -> NDArray[np.float64]:
        return self.ratio_ * speed_and_direction(X)[0]


class LinearRegression(SiteEstimator):
    """Least-squares line of site speed on reference speed.

    Parameters
    ----------
    restore_scatter : bool
        Add to each predicted value a residual drawn from those of the fit at a like speed.
        Without it the line returns a conditional mean, which loses the share 1 - r2 of the
        variance: never feed that to an energy calculation.
    seed : int
        Seed of those draws.

    Attributes
    ----------
    slope_, intercept_ : float
        Of the line [1], [m/s].
    residual_standard_deviation_ : float
        With n - 2 in the denominator [m/s].

    Notes
    -----
    The plain line may fall below zero at very low reference speeds and is returned as it is.
    With the scatter restored, a speed below zero is set to zero, as a cup anemometer shows it.

    References
    ----------
    .. [1] Rogers, Rogers and Manwell 2005, J. Wind Eng. Ind. Aerodyn. 93:243.
    .. [2] Matalas and Jacobs 1964, USGS Professional Paper 434-E, for the added noise.
    """

    def __init__(self, *, restore_scatter: bool = False, seed: int = 0) -> None:
        self.restore_scatter = restore_scatter
        self.seed = seed

    def fit(self, X: ArrayLike, y: ArrayLike) -> Self:
        x, y_kept = concurrent_pairs(X, y)
        refuse_constant(x, "reference")
        x_mean, y_mean = float(np.mean(x)), float(np.mean(y_kept))
        self.pair_count_ = x.size
        self.slope_ = float(np.sum((x - x_mean) * (y_kept - y_mean)) / np.sum((x - x_mean) ** 2))
        self.intercept_ = y_mean - self.slope_ * x_mean
        fitted = self.slope_ * x + self.intercept_
        residual = y_kept - fitted
        self.residual_standard_deviation_ = float(np.sqrt(np.sum(residual**2) / (x.size - 2)))
        order = np.argsort(fitted, kind="stable")
        self._fitted, self._residual = fitted[order], residual[order]
        return self

    def predict(self, X: ArrayLike) -> NDArray[np.float64]:
        line = self.slope_ * speed_and_direction(X)[0] + self.intercept_
        if not self.restore_scatter:
            return line
        with np.errstate(invalid="ignore"):
            return np.maximum(line + self._drawn_residuals(line), 0.0)

    def _drawn_residuals(self, line: NDArray[np.float64]) -> NDArray[np.float64]:
        count = self._residual.size
        groups = int(np.clip(count // LEAST_IN_SCATTER_GROUP, 1, SCATTER_GROUPS))
        starts = np.linspace(0, count, groups + 1).astype(int)
        group = np.clip(np.searchsorted(self._fitted[starts[1:-1]], line), 0, groups - 1)
        low, high = starts[group], starts[group + 1]
        share = np.random.default_rng(self.seed).random(line.shape)
        return self._residual[low + (share * (high - low)).astype(int)]


class VarianceRatio(SiteEstimator):
    """Line through both means whose slope is the ratio of the standard deviations.

    Attributes
    ----------
    slope_, intercept_ : float
        Of the line [1], [m/s].

    Notes
    -----
    The predicted series has the site's variance whatever the correlation is, so that mean and
    mean cube survive; but with poor correlation the mean itself is poorer than the site's own
    (`record_extension_variance` tells when a line pays). May fall below zero at low speeds.

    References
    ----------
    .. [1] Rogers, Rogers and Manwell 2005, J. Wind Eng. Ind. Aerodyn. 93:243.
    .. [2] Hirsch 1982, Water Resour. Res. 18:1081 (MOVE.1, the same line).
    """

    def fit(self, X: ArrayLike, y: ArrayLike) -> Self:
        x, y_kept = concurrent_pairs(X, y)
        refuse_constant(x, "reference")
        self.pair_count_ = x.size
        self.slope_ = float(np.std(y_kept) / np.std(x))
        self.intercept_ = float(np.mean(y_kept) - self.slope_ * np.mean(x))
        return self

    def predict(self, X: ArrayLike) -> NDArray[np.float64]:
        return self.slope_ * speed_and_direction(X)[0] + self.intercept_


class BySector(SiteEstimator):
    """One copy of an estimator for each sector of the reference's direction.

    Parameters
    ----------
    estimator : SiteEstimator, optional
        What is fitted in each sector; left as it is, copies are fitted. A `VarianceRatio` if
        left out.
    sector_count : int
        Sectors of equal width, the first centred on north [1].
    min_count : int
        Fewest pairs a sector is fitted on [1]. A thin sector takes in its neighbours on both
        sides, one pair of sectors more at a time, until it has enough; if the whole circle has
        too few, it is fitted on all pairs.

    Attributes
    ----------
    sector_pair_count_ : ndarray of int, shape (sector_count,)
        Pairs within each sector before neighbours are taken in.
    merged_neighbours_ : ndarray of int, shape (sector_count,)
        Neighbours taken in on each side; 0 where the sector stands alone.
    estimators_ : list
        The fitted copies, north first.
    all_directions_ : SiteEstimator
        Fitted on all pairs; it serves records whose direction is NaN (a calm has none).

    Raises
    ------
    ValueError
        If `X` has no direction column.
    """

    def __init__(
        self,
        estimator: SiteEstimator | None = None,
        *,
        sector_count: int = 12,
        min_count: int = 200,
    ) -> None:
        self.estimator = estimator
        self.sector_count = sector_count
        self.min_count = min_count

    def fit(self, X: ArrayLike, y: ArrayLike) -> Self:
        base = VarianceRatio() if self.estimator is None else self.estimator
        speed, direction = speed_and_direction(X)
        if direction is None:
            raise ValueError(
                "BySector needs X with two columns, speed and direction; pass the reference's "
                "direction, or fit the inner estimator on the speed alone"
            )
        site = np.asarray(y, dtype=float)
        kept = np.isfinite(speed) & np.isfinite(site)
        speed, direction, site = speed[kept], direction[kept], site[kept]
        self.all_directions_ = copy_of(base).fit(speed, site)
        self.pair_count_ = speed.size
        sector = sector_index(direction, self.sector_count)
        count = np.bincount(sector[sector >= 0], minlength=self.sector_count)
        self.sector_pair_count_ = count
        self.merged_neighbours_ = merged_neighbours(count, self.min_count)
        self.estimators_: list[SiteEstimator] = []
        for centre, reach in enumerate(self.merged_neighbours_):
            if 2 * reach + 1 >= self.sector_count:
                self.estimators_.append(self.all_directions_)
                continue
            distance = np.abs(
                (sector - centre + self.sector_count // 2) % self.sector_count
                - self.sector_count // 2
            )
            inside = (sector >= 0) & (distance <= reach)
            self.estimators_.append(copy_of(base).fit(speed[inside], site[inside]))
        return self

    def predict(self, X: ArrayLike) -> NDArray[np.float64]:
        speed, direction = speed_and_direction(X)
        if direction is None:
            raise ValueError("BySector was fitted with directions, so X needs a direction column")
        predicted = self.all_directions_.predict(speed)
        sector = sector_index(direction, self.sector_count)
        for index, fitted in enumerate(self.estimators_):
            inside = sector == index
            predicted[inside] = fitted.predict(speed[inside])
        return predicted


def long_term_standard_uncertainty(
    correlation: ArrayLike,
    yearly_variability: ArrayLike,
    reference_years: ArrayLike,
    site_years: ArrayLike,
) -> NDArray[np.float64] | float:
    """Relative standard uncertainty of a corrected long-term mean, closed form.

    Parameters
    ----------
    correlation : array_like
        Correlation r of site and reference [1], -1 to 1.
    yearly_variability : array_like
        Standard deviation of annual means as a fraction of the mean [1].
    reference_years, site_years : array_like
        Lengths of the reference record and of the campaign [years], both positive.

    Returns
    -------
    float or ndarray
        Standard uncertainty as a fraction of the mean [1].

    Raises
    ------
    ValueError
        If a correlation is outside -1 to 1 or a length is not positive.

    Notes
    -----
    Assumes independent years, a homogeneous reference and a known r. Every one of these flatters:
    it is a lower bound to hold a measured interval against, not the interval itself.

    References
    ----------
    .. [1] Taylor et al. 2004, European Wind Energy Conference.
    """
    r, s, n_reference, n_site = (
        np.asarray(v, dtype=float)
        for v in (correlation, yearly_variability, reference_years, site_years)
    )
    _refuse_bad_correlation(r)
    for name, value in (("reference_years", n_reference), ("site_years", n_site)):
        if np.any(value <= 0):
            raise ValueError(f"{name} must be positive [years], got {np.nanmin(value):g}")
    return _plain(np.sqrt(r**2 / n_reference + (1 - r**2) / n_site) * s)


def record_extension_variance(
    correlation: ArrayLike, concurrent_count: ArrayLike, extension_count: ArrayLike
) -> NDArray[np.float64] | float:
    """Variance of a site's mean extended by regression, relative to the variance of one value.

    Parameters
    ----------
    correlation : array_like
        Correlation rho of site and reference values [1], -1 to 1.
    concurrent_count : array_like
        Independent concurrent values n1 [1], more than 3.
    extension_count : array_like
        Further values n2 of the reference alone [1], not negative.

    Returns
    -------
    float or ndarray
        var(mean) / sigma2 [1]. Compare with 1/n1, the site's own mean: the extension pays only
        if rho2 > 1/(n1 - 2).

    Raises
    ------
    ValueError
        If a correlation is outside -1 to 1, n1 is 3 or less, or n2 is negative.

    References
    ----------
    .. [1] Matalas and Jacobs 1964, USGS Professional Paper 434-E.
    """
    rho, n1, n2 = (
        np.asarray(v, dtype=float) for v in (correlation, concurrent_count, extension_count)
    )
    _refuse_bad_correlation(rho)
    if np.any(n1 <= 3):
        raise ValueError(f"concurrent_count must be more than 3, got {np.nanmin(n1):g}")
    if np.any(n2 < 0):
        raise ValueError(f"extension_count must not be negative, got {np.nanmin(n2):g}")
    return _plain((1 / n1) * (1 - n2 / (n1 + n2) * (rho**2 - (1 - rho**2) / (n1 - 3))))


def _refuse_bad_correlation(correlation: NDArray[np.float64]) -> None:
    if np.any(np.abs(correlation) > 1):
        raise ValueError(
            f"correlation must lie within -1 to 1, got {np.nanmax(np.abs(correlation)):g} in size"
        )


def _plain(values: NDArray[np.float64]) -> NDArray[np.float64] | float:
    return float(values) if values.ndim == 0 else values
