"""Data checks: named functions that list suspect spans, each with its threshold and reason.

A check masks nothing. `run_checks` runs them all; the ledger says what is left out of a record.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace

import numpy as np
import pandas as pd

from windkit.study.checks.calibration import calibration_twice_spans, unit_change_spans
from windkit.study.checks.clock import clock_step_spans, lag_windows
from windkit.study.checks.drift import drift_spans, find_wear
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
from windkit.study.checks.shadow import (
    Shadow,
    free_of_shadow,
    mast_shadows,
    pair_ratio,
    shadow_spans,
)
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
    "Given",
    "Shadow",
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


@dataclass(frozen=True)
class Given:
    """What checks share: references, the ground's elevation [m], the mast's shadows."""

    references: Sequence[Reading] = ()
    elevation: float = 0.0
    shadows: list[Shadow] | None = None


Check = Callable[[Reading, CheckSettings, Given], pd.DataFrame]

#: Every check by its rule's name, in the order they run.
CHECKS: dict[str, Check] = {
    "range": lambda reading, settings, given: range_spans(reading, settings),
    "range_mark": lambda reading, settings, given: range_mark_spans(
        reading, settings, elevation=given.elevation
    ),
    "order": lambda reading, settings, given: order_spans(reading, settings),
    "gust": lambda reading, settings, given: gust_spans(reading, settings),
    "pair": lambda reading, settings, given: pair_spans(reading, settings, given.shadows),
    "heights": lambda reading, settings, given: height_spans(reading, settings, given.shadows),
    "vane_pair": lambda reading, settings, given: vane_pair_spans(reading, settings),
    "step": lambda reading, settings, given: step_spans(reading, settings),
    "stuck": lambda reading, settings, given: stuck_spans(reading, settings),
    "repeated_block": lambda reading, settings, given: repeated_block_spans(reading, settings),
    "spike": lambda reading, settings, given: spike_spans(reading, settings),
    "missing_code": lambda reading, settings, given: missing_code_spans(reading, settings),
    "icing": lambda reading, settings, given: icing_spans(reading, settings, given.shadows),
    "shadow": lambda reading, settings, given: shadow_spans(reading, settings, given.shadows),
    "drift": lambda reading, settings, given: drift_spans(reading, settings, given.shadows),
    "north": lambda reading, settings, given: north_spans(reading, settings, given.references),
    "calibration_twice": lambda reading, settings, given: calibration_twice_spans(
        reading, settings, given.shadows
    ),
    "unit_change": lambda reading, settings, given: unit_change_spans(reading, settings),
    "clock_step": lambda reading, settings, given: clock_step_spans(
        reading, settings, given.references
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
    given = Given(tuple(references), elevation, mast_shadows(rest, settings))
    tables = [check(rest, settings, given) for rule, check in CHECKS.items() if rule != "range"]
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
