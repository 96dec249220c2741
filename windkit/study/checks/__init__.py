"""Data checks: named functions that list suspect spans, each with its threshold and reason.

A check masks nothing. `run_checks` runs them all; the ledger says what is left out of a record.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import replace

import numpy as np
import pandas as pd

from windkit.study.checks.clock import clock_step_spans, lag_windows
from windkit.study.checks.drift import (
    calibration_twice_spans,
    drift_spans,
    find_wear,
    unit_change_spans,
)
from windkit.study.checks.icing import icing_spans
from windkit.study.checks.jumps import spike_spans, step_spans
from windkit.study.checks.north import monthly_north, north_spans
from windkit.study.checks.relations import (
    gust_spans,
    height_spans,
    order_spans,
    pair_spans,
    vane_pair_spans,
)
from windkit.study.checks.repeats import missing_code_spans, repeated_block_spans
from windkit.study.checks.shadow import free_of_shadow, mast_shadows, pair_ratio, shadow_spans
from windkit.study.checks.spans import SPAN_COLUMNS, joined, no_spans
from windkit.study.checks.thresholds import MASKING_RULES, RULES, CheckSettings
from windkit.study.checks.values import (
    plausible_limits,
    range_mark_spans,
    range_spans,
    stuck_spans,
)
from windkit.study.reading import Reading

__all__ = [
    "CHECKS",
    "MASKING_RULES",
    "RULES",
    "SPAN_COLUMNS",
    "CheckSettings",
    "calibration_twice_spans",
    "clock_step_spans",
    "drift_spans",
    "find_wear",
    "free_of_shadow",
    "gust_spans",
    "height_spans",
    "icing_spans",
    "lag_windows",
    "mast_shadows",
    "missing_code_spans",
    "monthly_north",
    "no_spans",
    "north_spans",
    "order_spans",
    "pair_ratio",
    "pair_spans",
    "plausible_limits",
    "range_mark_spans",
    "range_spans",
    "repeated_block_spans",
    "run_checks",
    "shadow_spans",
    "spike_spans",
    "step_spans",
    "stuck_spans",
    "unit_change_spans",
    "vane_pair_spans",
    "without",
]

Check = Callable[[Reading, CheckSettings, Sequence[Reading], float], pd.DataFrame]


def _alone(check: Callable[[Reading, CheckSettings], pd.DataFrame]) -> Check:
    """A check that needs neither references nor the elevation."""
    return lambda reading, settings, references, elevation: check(reading, settings)


#: Every check by its rule's name, in the order they run.
CHECKS: dict[str, Check] = {
    "range": _alone(range_spans),
    "range_mark": lambda reading, settings, references, elevation: range_mark_spans(
        reading, settings, elevation=elevation
    ),
    "order": _alone(order_spans),
    "gust": _alone(gust_spans),
    "pair": _alone(pair_spans),
    "heights": _alone(height_spans),
    "vane_pair": _alone(vane_pair_spans),
    "step": _alone(step_spans),
    "stuck": _alone(stuck_spans),
    "repeated_block": _alone(repeated_block_spans),
    "spike": _alone(spike_spans),
    "missing_code": _alone(missing_code_spans),
    "icing": _alone(icing_spans),
    "shadow": _alone(shadow_spans),
    "drift": _alone(drift_spans),
    "north": lambda reading, settings, references, elevation: north_spans(
        reading, settings, references
    ),
    "calibration_twice": _alone(calibration_twice_spans),
    "unit_change": _alone(unit_change_spans),
    "clock_step": lambda reading, settings, references, elevation: clock_step_spans(
        reading, settings, references
    ),
}


def run_checks(
    reading: Reading,
    settings: CheckSettings | None = None,
    *,
    references: Sequence[Reading] = (),
    elevation: float = 0.0,
) -> pd.DataFrame:
    """All checks on one reading.

    What cannot be (range) is looked for first and taken out before the others look: an absurd
    value would hide what they are after.

    Parameters
    ----------
    reading : Reading
        The record as read.
    settings : CheckSettings, optional
        Thresholds; the defaults if left out.
    references : sequence of Reading
        Long records from near the site, for north and clock.
    elevation : float
        Of the ground above the sea [m], for pressure marks.

    Returns
    -------
    DataFrame
        Spans: channel, from, to, count, measure, threshold, reason, rule.
    """
    settings = settings or CheckSettings()
    impossible = range_spans(reading, settings)
    rest = without(reading, impossible)
    tables = [
        check(rest, settings, references, elevation)
        for rule, check in CHECKS.items()
        if rule != "range"
    ]
    return joined([impossible, *tables])


def without(reading: Reading, spans: pd.DataFrame) -> Reading:
    """The reading with the values of some spans set to NaN, for a check that follows.

    Parameters
    ----------
    reading : Reading
        The record as read; it is not changed.
    spans : DataFrame
        What to leave out.
    """
    if spans.empty:
        return reading
    frame = reading.frame.copy()
    for channel, start, stop in zip(spans["channel"], spans["from"], spans["to"], strict=True):
        rows = frame.index[frame.index.searchsorted(start) : frame.index.searchsorted(stop)]
        frame.loc[rows, frame.columns if channel == "*" else [channel]] = np.nan
    return replace(reading, frame=frame)
