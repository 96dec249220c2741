"""The mast's shadow: where a cup stands behind the mast, found from its pair and by geometry.

A shadow is a sector of the wind, not a fault of the sensor; the exposed cup is chosen by sector
in `averaging`. Here sectors are found, held against the booms and listed as spans.
"""

from __future__ import annotations

import math
from typing import NamedTuple

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from windkit.kernels.circular import direction_difference
from windkit.study.checks.comparing import (
    MOVING_SPEED,
    index_of,
    median_by,
    nearest_vane,
    speed_pairs,
    values_of,
)
from windkit.study.checks.spans import joined, spans_of
from windkit.study.checks.thresholds import CheckSettings
from windkit.study.reading import Reading
from windkit.study.stations import ChannelSettings

__all__ = ["Shadow", "free_of_shadow", "mast_shadows", "pair_ratio", "shadow_spans"]

#: Width of a bin of direction [deg].
_BIN = 5.0
_BINS = round(360 / _BIN)
#: Fewest values in a bin.
_FEWEST = 12
#: A shadow is at least two bins and no more than this wide [deg]; common practice.
_WIDEST = 100.0


class Shadow(NamedTuple):
    """A sector in which a cup stands behind the mast.

    Attributes
    ----------
    channel, partner : str
        The cup, and the one of its pair it was found with (empty without a pair).
    sector_from, sector_to : float
        Clockwise, where the wind comes from [deg].
    deficit : float
        Largest, as a fraction of the speed; NaN without a pair.
    boom_back : float
        Bearing from which the mast stands before the cup [deg]; NaN without a boom bearing.
    agrees : bool
        Whether sector and boom agree.
    basis : str
        ``found`` from the pair, or ``geometry`` from the boom's bearing alone.
    """

    channel: str
    partner: str
    sector_from: float
    sector_to: float
    deficit: float
    boom_back: float
    agrees: bool
    basis: str


def pair_ratio(
    reading: Reading, one: ChannelSettings, other: ChannelSettings, *, bin_width: float = _BIN
) -> pd.DataFrame:
    """Ratio of two cups by direction of the nearest vane.

    Parameters
    ----------
    reading : Reading
        The record.
    one, other : ChannelSettings
        The cups; the ratio is the first over the second, both turning.
    bin_width : float
        Width of a bin [deg]; the first is centred on north.

    Returns
    -------
    DataFrame
        ``direction`` (bin centre), ``ratio`` (median), ``standard_error``, ``count``.
    """
    bins = round(360.0 / bin_width)
    vane = nearest_vane(reading.settings, one.height_m)
    if vane is None:
        return pd.DataFrame(columns=["direction", "ratio", "standard_error", "count"])
    first, second = values_of(reading, one), values_of(reading, other)
    direction = values_of(reading, vane)
    # A wake can take a cup below 4 m/s while the other turns well above it.
    usable = (np.minimum(first, second) >= MOVING_SPEED) | (
        (np.maximum(first, second) >= 1.25 * MOVING_SPEED) & (np.minimum(first, second) > 1.0)
    )
    usable &= (direction >= 0) & (direction < 360)
    ratio = np.where(usable, first / np.where(usable, second, 1.0), np.nan)
    group = np.where(usable, np.floor((direction + bin_width / 2) / bin_width), -1)
    group = group.astype(np.int64) % bins
    group[~usable] = -1
    count = np.bincount(group[usable], minlength=bins)
    middle = median_by(ratio, group, bins, _FEWEST)
    away = median_by(np.abs(ratio - middle[group]), group, bins, _FEWEST)
    with np.errstate(divide="ignore", invalid="ignore"):
        # 1.25 is the standard error of a median over that of a mean, for a normal distribution.
        error = 1.25 * 1.4826 * away / np.sqrt(count)
    return pd.DataFrame(
        {
            "direction": np.arange(bins) * bin_width,
            "ratio": middle,
            "standard_error": error,
            "count": count,
        }
    )


def mast_shadows(reading: Reading, settings: CheckSettings) -> list[Shadow]:
    """Sectors in which each cup stands behind the mast.

    Parameters
    ----------
    reading, settings : Reading, CheckSettings
        The record, and how far a ratio must leave its level.

    Returns
    -------
    list of Shadow
        From pairs where there are any, from boom bearings where a cup has no pair.

    Notes
    -----
    The ratio of a pair has a level where both stand free. Bins where it leaves this level by
    ``shadow_deficit`` and by four standard errors, and their neighbours, are the shadow of the
    cup that reads low there.
    """
    found: list[Shadow] = []
    paired: set[str] = set()
    for one, other in speed_pairs(reading.settings, settings.pair_height_m):
        table = pair_ratio(reading, one, other)
        if table.empty or table["ratio"].notna().sum() < _BINS / 2:
            continue
        paired |= {one.name, other.name}
        ratio = table["ratio"].to_numpy()
        departure = ratio / np.nanmedian(ratio) - 1.0
        error = table["standard_error"].to_numpy()
        noise = np.maximum(settings.shadow_deficit, 4.0 * np.nan_to_num(error))
        for cup, partner, deep in (
            (one, other, -departure),
            (other, one, 1.0 - 1.0 / (1.0 + departure)),
        ):
            for start, count in _sectors(deep > noise):
                if not 2 <= count <= _WIDEST / _BIN:
                    continue
                # One more bin on either side: a wake has flanks.
                low = (start - 1.5) * _BIN % 360
                high = (start + count + 0.5) * _BIN % 360
                bins = (start + np.arange(count)) % _BINS
                middle = (start + (count - 1) / 2) * _BIN % 360
                back = _back(cup)
                away = abs(float(direction_difference(middle, back)))
                found.append(
                    Shadow(
                        cup.name,
                        partner.name,
                        low,
                        high,
                        float(np.nanmax(deep[bins])),
                        back,
                        bool(away <= settings.shadow_boom_tolerance_deg),
                        "found",
                    )
                )
    for cup in reading.settings.mean_speeds:
        if cup.name not in paired and cup.boom_bearing_deg is not None:
            back, half = _back(cup), settings.shadow_half_width_deg
            low, high = (back - half) % 360, (back + half) % 360
            found.append(Shadow(cup.name, "", low, high, math.nan, back, True, "geometry"))
    return found


def _back(cup: ChannelSettings) -> float:
    """Bearing from which the mast stands before the cup."""
    return math.nan if cup.boom_bearing_deg is None else (cup.boom_bearing_deg + 180.0) % 360.0


def _sectors(mask: NDArray[np.bool_]) -> list[tuple[int, int]]:
    """First bin and count of each run around the circle."""
    if mask.all() or not mask.any():
        return []
    start = int(np.flatnonzero(~mask)[0])
    turned = np.roll(mask, -start)
    edges = np.flatnonzero(np.diff(np.concatenate([[False], turned, [False]]).astype(np.int8)))
    return [
        ((int(a) + start) % len(mask), int(b - a))
        for a, b in zip(edges[::2], edges[1::2], strict=True)
    ]


def free_of_shadow(
    reading: Reading, settings: CheckSettings, shadows: list[Shadow] | None = None
) -> dict[str, NDArray[np.bool_]]:
    """Where each mean speed stands free of the mast; an unknown direction counts as free.

    Parameters
    ----------
    reading, settings : Reading, CheckSettings
        As in `mast_shadows`.
    shadows : list of Shadow, optional
        If they are at hand.

    Returns
    -------
    dict of str to ndarray of bool
        By channel.
    """
    shadows = mast_shadows(reading, settings) if shadows is None else shadows
    free = {
        cup.name: np.ones(len(reading.frame), dtype=bool) for cup in reading.settings.mean_speeds
    }
    for shadow in shadows:
        cup = reading.settings.channel(shadow.channel)
        free[cup.name] &= ~_in_sector(reading, cup, shadow.sector_from, shadow.sector_to)
    return free


def _in_sector(
    reading: Reading, cup: ChannelSettings, start: float, stop: float
) -> NDArray[np.bool_]:
    vane = nearest_vane(reading.settings, cup.height_m)
    if vane is None:
        return np.zeros(len(reading.frame), dtype=bool)
    direction = values_of(reading, vane)
    inside: NDArray[np.bool_] = (direction - start) % 360.0 < (stop - start) % 360.0
    return inside


def shadow_spans(
    reading: Reading, settings: CheckSettings, shadows: list[Shadow] | None = None
) -> pd.DataFrame:
    """Times at which a cup stands in the mast's shadow.

    Parameters
    ----------
    reading, settings : Reading, CheckSettings
        As in `mast_shadows`.
    shadows : list of Shadow, optional
        If they are at hand.

    Returns
    -------
    DataFrame
        Spans of rule ``shadow``; the measure is the sector's largest deficit, or its half width
        where only the boom's bearing is known.
    """
    tables = []
    for shadow in mast_shadows(reading, settings) if shadows is None else shadows:
        cup = reading.settings.channel(shadow.channel)
        found = shadow.basis == "found"
        start, stop = shadow.sector_from, shadow.sector_to
        words = f"behind the mast, wind from {start:.0f} to {stop:.0f} deg"
        if not found:
            words += " by the boom's bearing; there is no pair to test it"
        elif not shadow.agrees and math.isfinite(shadow.boom_back):
            words += f", which the boom ({shadow.boom_back:.0f} deg is its back) does not explain"
        measure = shadow.deficit if found else settings.shadow_half_width_deg
        tables.append(
            spans_of(
                _in_sector(reading, cup, start, stop),
                index_of(reading),
                reading.interval,
                channel=cup.name,
                rule="shadow",
                reason=words,
                threshold=settings.shadow_deficit if found else settings.shadow_half_width_deg,
                measure=np.full(len(reading.frame), measure),
            )
        )
    return joined(tables)
