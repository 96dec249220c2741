"""How a value becomes a cell of a spreadsheet: as a number, a time or a text, and in what format.

Not here: the sheets themselves (`windkit.faces.spreadsheet`).
"""

from __future__ import annotations

import datetime as dt
import math
import re
from collections.abc import Callable, Sequence
from numbers import Integral, Real
from typing import Any

from windkit.faces.wording import DECIMALS_BY_UNIT

__all__ = ["cell_value", "column_format", "number_format", "typed_values"]

_DAY = re.compile(r"\d{4}-\d\d-\d\d")
_TIME = re.compile(r"\d{4}-\d\d-\d\d[ T]\d\d:\d\d(:\d\d)?")
#: A number somebody wrote as text; one with leading zeros is a name.
_NUMBER = re.compile(r"-?(0|[1-9]\d*)(\.\d+)?(e[+-]?\d+)?")


def cell_value(value: Any) -> Any:
    """A value as a cell takes it; None leaves the cell empty."""
    import pandas as pd

    if value is None or value is pd.NaT or value is pd.NA:
        return None
    if isinstance(value, bool) or type(value).__name__ in ("bool_", "bool"):
        return bool(value)
    if isinstance(value, Integral):
        return int(value)
    if isinstance(value, Real):
        number = float(value)
        if math.isnan(number):
            return None
        return number if math.isfinite(number) else ("infinite" if number > 0 else "-infinite")
    if isinstance(value, dt.datetime):
        zoned = value.astimezone(dt.UTC) if value.tzinfo is not None else value
        return pd.Timestamp(zoned).tz_localize(None).to_pydatetime(warn=False)
    if isinstance(value, dt.date | dt.timedelta):
        return value
    if isinstance(value, list | tuple):
        return ", ".join(str(part) for part in value)
    return str(value)


def typed_values(values: list[Any]) -> list[Any]:
    """Texts that are all times, or all numbers, as such; any other column as it is."""
    there = [value for value in values if value not in (None, "")]
    if not there or not all(isinstance(value, str) for value in there):
        return values
    read: Callable[[str], Any]
    if all(_DAY.fullmatch(value) for value in there):
        read = dt.date.fromisoformat
    elif all(_TIME.fullmatch(value) or _DAY.fullmatch(value) for value in there):
        read = dt.datetime.fromisoformat
    elif all(_NUMBER.fullmatch(value) for value in there):
        read = float
    else:
        return values
    try:
        return [None if value in (None, "") else read(value) for value in values]
    except ValueError:  # such as 30 February: a text then
        return values


def number_format(value: Any, unit: str) -> str:
    """How a spreadsheet is told to show a value of that unit."""
    if isinstance(value, str | bool) or value is None:
        return "General"
    if isinstance(value, dt.datetime):
        return "yyyy-mm-dd hh:mm"
    if isinstance(value, dt.date):
        return "yyyy-mm-dd"
    if isinstance(value, dt.timedelta):
        return "[h]:mm"
    if isinstance(value, int) or DECIMALS_BY_UNIT.get(unit) == 0:
        # Years and counts alike: a group separator only where it helps.
        return "#,##0" if abs(value) >= 10_000 else "0"
    decimals = DECIMALS_BY_UNIT.get(unit)
    if decimals is None:
        size = abs(value)
        decimals = 0 if size >= 10_000 else 1 if size >= 1000 else 2 if size >= 10 else 4
    return f"#,##0.{'0' * decimals}" if decimals else "#,##0"


def column_format(values: Sequence[Any], unit: str) -> str:
    """One format for all values of a column, by the largest."""
    there = [value for value in values if value is not None and not isinstance(value, str | bool)]
    if not there:
        return "General"
    if any(isinstance(value, dt.date | dt.timedelta) for value in there):
        return number_format(there[0], unit)
    largest = max(there, key=abs)
    if any(isinstance(value, float) for value in there):
        largest = float(largest)
    return number_format(largest, unit)
