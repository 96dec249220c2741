"""Data checks: named functions that list suspect spans, each with its threshold and reason.

A check masks nothing. `run_checks` runs them all; the ledger says what is left out of a record.
"""

from __future__ import annotations

import pandas as pd

from windkit.study.checks.spans import SPAN_COLUMNS, joined, no_spans
from windkit.study.checks.thresholds import MASKING_RULES, CheckSettings
from windkit.study.checks.values import plausible_limits, range_spans, stuck_spans
from windkit.study.reading import Reading

__all__ = [
    "MASKING_RULES",
    "SPAN_COLUMNS",
    "CheckSettings",
    "no_spans",
    "plausible_limits",
    "range_spans",
    "run_checks",
    "stuck_spans",
]


def run_checks(reading: Reading, settings: CheckSettings | None = None) -> pd.DataFrame:
    """All checks on one reading.

    Parameters
    ----------
    reading : Reading
        The record as read.
    settings : CheckSettings, optional
        Thresholds; the defaults if left out.

    Returns
    -------
    DataFrame
        Spans: channel, from, to, count, measure, threshold, reason, rule.
    """
    settings = settings or CheckSettings()
    return joined([range_spans(reading, settings), stuck_spans(reading, settings)])
