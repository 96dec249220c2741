"""Is a record homogeneous: tests for one break or a trend, each at the series' own memory.

Here are three tests for one shift of the mean, Mann and Kendall's for a trend, their critical
values simulated at the autocorrelation of the series itself, and the search for several breaks in
one series. The tests belong on differences (or logarithms of ratios) between stations, where the
weather cancels; `homogeneity` compares several references. A red series tested at white-noise
critical values shows breaks that are not there.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache
from itertools import pairwise

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy import signal, special

__all__ = [
    "STATISTICS",
    "SingleBreak",
    "Trend",
    "critical_value",
    "cusum",
    "find_breaks",
    "lag_one_autocorrelation",
    "mann_kendall",
    "pettitt",
    "snht",
]

#: Trials behind a simulated critical value [1]: its level is then right to about half a per cent.
TRIALS = 2000
#: Lengths at which critical values are simulated; between them they are interpolated [1].
LENGTHS = (13, 18, 24, 36, 50, 75, 100, 150, 200, 300, 400, 600)
#: Step of the autocorrelations at which they are simulated [1].
LAG_STEP = 0.1
#: Shortest stretch on either side of a break [values]: six months of monthly values. Our choice.
LEAST_SEGMENT = 6
#: Most breaks looked for in one series [1], our choice.
MOST_BREAKS = 12


@dataclass(frozen=True)
class SingleBreak:
    """The most likely break of a series and the strength of its evidence.

    Attributes
    ----------
    statistic : float
        Of the test [1].
    position : int
        Index of the first value after the break.
    size : float
        Mean after less mean before, in the unit of the series.
    """

    statistic: float
    position: int
    size: float


@dataclass(frozen=True)
class Trend:
    """Mann and Kendall's test with Sen's slope.

    Attributes
    ----------
    statistic : float
        Kendall's S [1].
    z : float
        S over its standard deviation, continuity-corrected [1].
    p_value : float
        Two-sided, for independent values [1]; hold `z` against `critical_value` otherwise.
    slope : float
        Median of all pairwise slopes, in the unit of the series per step.
    """

    statistic: float
    z: float
    p_value: float
    slope: float


def snht(values: ArrayLike) -> SingleBreak:
    """Standard normal homogeneity test for one shift of the mean.

    Parameters
    ----------
    values : array_like, shape (n,)
        Differences or log ratios in time order, no NaN.

    Returns
    -------
    SingleBreak

    References
    ----------
    .. [1] Alexandersson 1986, J. Climatol. 6:661.
    """
    values = _checked(values)
    return _located(values, _snht_curve(values[None])[0])


def pettitt(values: ArrayLike) -> SingleBreak:
    """Pettitt's rank test for one shift of the median.

    Parameters
    ----------
    values : array_like, shape (n,)
        In time order, no NaN.

    Returns
    -------
    SingleBreak
        Its statistic is K; for independent values p is about 2 exp(-6 K^2 / (n^3 + n^2)).

    References
    ----------
    .. [1] Pettitt 1979, Appl. Statist. 28:126.
    """
    values = _checked(values)
    return _located(values, _pettitt_curve(values[None])[0])


def cusum(values: ArrayLike) -> SingleBreak:
    """Largest cumulated departure from the mean, over sd times sqrt(n).

    Parameters
    ----------
    values : array_like, shape (n,)
        In time order, no NaN.

    Returns
    -------
    SingleBreak
        For independent values the statistic tends to the supremum of a Brownian bridge
        (1.358 at 5 %).

    References
    ----------
    .. [1] Page 1954, Biometrika 41:100; Ploberger and Kraemer 1992, Econometrica 60:271.
    """
    values = _checked(values)
    return _located(values, _cusum_curve(values[None])[0])


def mann_kendall(values: ArrayLike) -> Trend:
    """Mann and Kendall's test for a trend, with Sen's slope.

    Parameters
    ----------
    values : array_like, shape (n,)
        In time order, no NaN; ties are allowed for.

    Returns
    -------
    Trend

    References
    ----------
    .. [1] Mann 1945, Econometrica 13:245; Kendall 1975, Rank Correlation Methods.
    .. [2] Sen 1968, J. Am. Statist. Assoc. 63:1379.
    """
    values = _checked(values)
    n = values.size
    first, second = np.triu_indices(n, 1)
    rise = values[second] - values[first]
    s = float(np.sum(np.sign(rise)))
    _, ties = np.unique(values, return_counts=True)
    variance = (n * (n - 1) * (2 * n + 5) - np.sum(ties * (ties - 1) * (2 * ties + 5))) / 18
    z = 0.0 if variance == 0 else float((s - np.sign(s)) / np.sqrt(variance))
    return Trend(
        statistic=s,
        z=z,
        p_value=float(2 * special.ndtr(-abs(z))),
        slope=float(np.median(rise / (second - first))),
    )


def critical_value(
    statistic: str, count: int, autocorrelation: float, *, level: float = 0.05, seed: int = 0
) -> float:
    """Value that a homogeneous series of this length and memory exceeds with chance `level`.

    Parameters
    ----------
    statistic : str
        "snht", "pettitt", "cusum", "mann_kendall" (for this |z|), or "snht_inner", which leaves
        out breaks within six values of an end, as `find_breaks` does.
    count : int
        Values in the series [1].
    autocorrelation : float
        Of lag one [1], below 0.95; `lag_one_autocorrelation` estimates it.
    level : float
        Chance of a false alarm [1].
    seed : int
        Of the simulation.

    Returns
    -------
    float
        Interpolated between the lengths and autocorrelations that were simulated.

    Raises
    ------
    ValueError
        If the statistic is not known.

    References
    ----------
    .. [1] Khaliq and Ouarda 2007, Int. J. Climatol. 27:681 (simulated values for the SNHT).
    """
    if statistic not in STATISTICS:
        raise ValueError(f"statistic must be one of {sorted(STATISTICS)}, got {statistic!r}")
    phi = min(max(autocorrelation, 0.0), 0.95) / LAG_STEP
    low = int(phi)
    log_count = float(np.log(np.clip(count, LENGTHS[0], LENGTHS[-1])))
    right = int(np.clip(np.searchsorted(np.log(LENGTHS), log_count), 1, len(LENGTHS) - 1))
    pair = np.array(LENGTHS[right - 1 : right + 1])
    at = []
    for lag in (low, low + 1):
        simulated = [_simulated(statistic, n, lag * LAG_STEP, level, seed) for n in pair.tolist()]
        at.append(float(np.interp(log_count, np.log(pair), _scaled(statistic, pair) * simulated)))
    value = at[0] + (phi - low) * (at[1] - at[0])
    return float(value / _scaled(statistic, np.exp(log_count)) * _beyond(statistic, count))


def lag_one_autocorrelation(values: ArrayLike, breaks: ArrayLike = ()) -> float:
    """Lag-one autocorrelation with the steps at `breaks` taken out, corrected for its bias.

    Parameters
    ----------
    values : array_like, shape (n,)
        In time order, no NaN.
    breaks : array_like of int
        Indices of first values after a break; each stretch is taken about its own mean.

    Returns
    -------
    float
        Between 0 and 0.95 [1]; a negative estimate is returned as 0, which errs to caution.

    References
    ----------
    .. [1] Kendall 1954, Biometrika 41:403, for the bias (1 + 3 phi) / n (per stretch, ours).
    """
    values = _checked(values)
    edges = np.concatenate([[0], np.sort(np.asarray(breaks, dtype=int)), [values.size]])
    residual = values - np.repeat([values[a:b].mean() for a, b in pairwise(edges)], np.diff(edges))
    total = np.sum(residual**2)
    if total == 0:
        return 0.0
    raw = float(np.sum(residual[1:] * residual[:-1]) / total)
    stretches = edges.size - 1
    return float(np.clip(raw + stretches * (1 + 3 * max(raw, 0.0)) / values.size, 0.0, 0.95))


def find_breaks(
    values: ArrayLike, *, level: float = 0.05, autocorrelation: float | None = None, seed: int = 0
) -> list[SingleBreak]:
    """All breaks of one series, by repeated splitting at the largest SNHT.

    Parameters
    ----------
    values : array_like, shape (n,)
        Log ratios between stations in time order, no NaN, season taken out.
    level : float
        Chance of a false alarm in a homogeneous series [1].
    autocorrelation : float, optional
        Of lag one [1]; estimated from the series about its own steps if left out.
    seed : int
        Of the simulated critical values.

    Returns
    -------
    list of SingleBreak
        In time order; sizes are between the means of neighbouring stretches.

    Notes
    -----
    A stretch shorter than six values is not split off. After the splitting, a break that is no
    longer significant between its two stretches is taken back. A drift comes out as steps.
    """
    values = _checked(values)
    if values.size < 2 * LEAST_SEGMENT:
        return []
    phi = _own_memory(values, level, seed) if autocorrelation is None else autocorrelation
    positions = _split(values, phi, level, seed)
    edges = [0, *positions, values.size]
    found = []
    for before, at, after in zip(edges[:-2], edges[1:-1], edges[2:], strict=True):
        step = float(values[at:after].mean() - values[before:at].mean())
        statistic = float(_snht_curve(values[None, before:after])[0, at - before - 1])
        found.append(SingleBreak(statistic=statistic, position=at, size=step))
    return found


def _own_memory(values: NDArray[np.float64], level: float, seed: int) -> float:
    """Memory about the steps: start without, then twice with the steps found at that memory."""
    phi = lag_one_autocorrelation(values, [snht(values).position])
    for _ in range(2):
        phi = lag_one_autocorrelation(values, _split(values, phi, level, seed) or [])
    return phi


def _split(values: NDArray[np.float64], phi: float, level: float, seed: int) -> list[int]:
    positions: list[int] = []
    stretches = [(0, values.size)]
    while stretches and len(positions) < MOST_BREAKS:
        first, last = stretches.pop(0)
        if last - first < 2 * LEAST_SEGMENT:
            continue
        curve = _snht_curve(values[None, first:last])[0]
        inner = curve[LEAST_SEGMENT - 1 : last - first - LEAST_SEGMENT]
        if inner.max() > critical_value("snht_inner", last - first, phi, level=level, seed=seed):
            at = first + LEAST_SEGMENT + int(np.argmax(inner))
            positions.append(at)
            stretches += [(first, at), (at, last)]
    positions.sort()
    while positions:
        edges = [0, *positions, values.size]
        strength = []
        for before, at, after in zip(edges[:-2], edges[1:-1], edges[2:], strict=True):
            curve = _snht_curve(values[None, before:after])[0]
            limit = critical_value("snht_inner", after - before, phi, level=level, seed=seed)
            strength.append(curve[at - before - 1] / limit)
        weakest = int(np.argmin(strength))
        if strength[weakest] >= 1:
            break
        positions.pop(weakest)
    return positions


def _checked(values: ArrayLike) -> NDArray[np.float64]:
    values = np.asarray(values, dtype=float)
    if values.ndim != 1 or values.size < 4:
        raise ValueError(f"a break test needs a series of at least 4 values, got {values.shape}")
    if not np.all(np.isfinite(values)):
        raise ValueError(
            f"the series has {np.count_nonzero(~np.isfinite(values))} values that are not finite; "
            "leave out months without data before testing"
        )
    return values


def _located(values: NDArray[np.float64], curve: NDArray[np.float64]) -> SingleBreak:
    at = int(np.argmax(curve)) + 1
    return SingleBreak(
        statistic=float(curve[at - 1]),
        position=at,
        size=float(values[at:].mean() - values[:at].mean()),
    )


def _snht_curve(values: NDArray[np.float64]) -> NDArray[np.float64]:
    """T(k) for k = 1..n-1 along the last axis of (trials, n)."""
    n = values.shape[-1]
    spread = values.std(axis=-1, ddof=1, keepdims=True)
    z = (values - values.mean(axis=-1, keepdims=True)) / np.where(spread > 0, spread, 1.0)
    sums = np.cumsum(z, axis=-1)[..., :-1]
    k = np.arange(1, n)
    # k z1^2 + (n-k) z2^2, with the two sums opposite and equal because z sums to nought
    return np.asarray(sums**2 / k + sums**2 / (n - k))


def _inner_snht_curve(values: NDArray[np.float64]) -> NDArray[np.float64]:
    """The same without the ends, which the search for several breaks leaves alone."""
    return _snht_curve(values)[..., LEAST_SEGMENT - 1 : values.shape[-1] - LEAST_SEGMENT]


def _pettitt_curve(values: NDArray[np.float64]) -> NDArray[np.float64]:
    n = values.shape[-1]
    order = np.sort(values, axis=-1)
    rank = np.empty_like(values)
    for row in range(values.shape[0]):  # mean ranks, so that ties weigh nothing
        low = np.searchsorted(order[row], values[row], side="left")
        high = np.searchsorted(order[row], values[row], side="right")
        rank[row] = (low + high + 1) / 2
    k = np.arange(1, n)
    return np.abs(2 * np.cumsum(rank, axis=-1)[..., :-1] - k * (n + 1))


def _cusum_curve(values: NDArray[np.float64]) -> NDArray[np.float64]:
    n = values.shape[-1]
    spread = values.std(axis=-1, keepdims=True)
    z = (values - values.mean(axis=-1, keepdims=True)) / np.where(spread > 0, spread, 1.0)
    return np.asarray(np.abs(np.cumsum(z, axis=-1)[..., :-1]) / np.sqrt(n))


def _mann_kendall_curve(values: NDArray[np.float64]) -> NDArray[np.float64]:
    n = values.shape[-1]
    s = np.zeros(values.shape[0])
    for lag in range(1, n):
        s += np.sum(np.sign(values[:, lag:] - values[:, :-lag]), axis=-1)
    z = (s - np.sign(s)) / np.sqrt(n * (n - 1) * (2 * n + 5) / 18)
    return np.abs(z)[:, None]


#: The curves whose maximum is the statistic, by name.
STATISTICS = {
    "snht": _snht_curve,
    "snht_inner": _inner_snht_curve,
    "pettitt": _pettitt_curve,
    "cusum": _cusum_curve,
    "mann_kendall": _mann_kendall_curve,
}


@lru_cache(maxsize=4096)
def _simulated(statistic: str, count: int, phi: float, level: float, seed: int) -> float:
    rng = np.random.default_rng([seed, count, round(100 * phi)])
    trials = TRIALS if statistic in ("snht", "snht_inner", "cusum") else TRIALS // 4
    noise = rng.normal(size=(trials, count))
    noise[:, 1:] *= np.sqrt(1 - phi**2)
    series = signal.lfilter([1.0], [1.0, -phi], noise, axis=1)
    curve = STATISTICS[statistic](series)
    return float(np.quantile(curve.max(axis=1), 1 - level))


def _scaled(statistic: str, count: NDArray[np.float64] | float) -> NDArray[np.float64]:
    """What turns a critical value into one that hardly depends on length."""
    count = np.asarray(count, dtype=float)
    return count**-1.5 if statistic == "pettitt" else np.ones_like(count)


def _beyond(statistic: str, count: int) -> float:
    """Pettitt's statistic grows with length beyond the simulated ones; the others do not."""
    inside = float(np.clip(count, LENGTHS[0], LENGTHS[-1]))
    return (count / inside) ** 1.5 if statistic == "pettitt" else 1.0
